"""Matrices and tables of a floor, inline or from CSV files, checked as they are read."""

from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from detune.brief.data_file import DataFileFault, read_table
from detune.brief.statement import refuse
from detune.ground.units import show

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Given = str | tuple[tuple[float, ...], ...]
SYMMETRIC = 1e-6
# Share of the largest eigenvalue below which one counts as none.
NONE = 1e-10


@dataclass(frozen=True, eq=False)
class FloorMatrices:
    """Stiffness (k, k) N/m of the floor's freedoms under the stations, and mass (k, k) kg or None."""

    stiffness: Floats
    mass: Floats | None


@dataclass(frozen=True, eq=False)
class FloorTable:
    """Dynamic stiffness (N,) N/m, complex, of the floor over rising frequency (N,) Hz; straight between rows."""

    frequency: Floats
    stiffness: Complexes

    def at(self, frequency: Floats) -> Complexes:
        """Return the dynamic stiffness at frequencies of any shape; outside the table its ends hold."""
        real, imag = (
            np.interp(frequency, self.frequency, x) for x in (self.stiffness.real, self.stiffness.imag)
        )
        return np.asarray(real + 1j * imag)


def freedom_names(stations: tuple[str, ...], directions: tuple[str, ...]) -> tuple[str, ...]:
    """Return the columns of a matrix file, "station direction", with underscores for spaces."""
    return tuple(f"{station}_{axis}".replace(" ", "_") for station in stations for axis in directions)


def read_matrices(
    folder: Path, names: tuple[str, ...], stiffness: Given, mass: Given | None
) -> FloorMatrices:
    """Return the matrices. What is wrong is refused at its key: size, symmetry, a negative eigenvalue."""
    k = _matrix(folder, names, stiffness, "stiffness")
    m = None if mass is None else _matrix(folder, names, mass, "mass")
    least = _least_share(k)
    if least < -NONE:
        expected = (
            "a positive semidefinite matrix: this one has a motion that the floor would push on "
            f"({show(least * float(np.abs(k).max()), 'stiffness')} along it)"
        )
        raise refuse("stiffness_matrix", expected, at="stiffness_matrix")
    if m is None and least <= NONE:
        expected = (
            '"mass_matrix" beside a stiffness matrix that leaves the floor a motion without stiffness, or a'
            " matrix that "
            "holds every motion"
        )
        raise refuse("stiffness_matrix", expected, at="stiffness_matrix")
    if m is not None and _least_share(m) <= NONE:
        expected = "a positive definite mass matrix, or none at all: every freedom of the floor has some mass"
        raise refuse("mass_matrix", expected, at="mass_matrix")
    return FloorMatrices(k, m)


def _least_share(matrix: Floats) -> float:
    """The least eigenvalue over the largest entry, with freedoms scaled to a diagonal of one where they have any."""
    values = np.linalg.eigvalsh(matrix)
    return float(values[0] / max(float(np.abs(matrix).max()), np.finfo(float).tiny))


def _matrix(folder: Path, names: tuple[str, ...], given: Given, kind: str) -> Floats:
    key = f"{kind}_matrix"
    count = len(names)
    if isinstance(given, str):
        try:
            table = read_table(folder, given, dict.fromkeys(names, kind))
        except DataFileFault as fault:
            raise refuse(given, str(fault), at=key) from None
        matrix = np.column_stack([table.columns[name] for name in names])
    else:
        if any(len(row) != len(given) for row in given):
            raise refuse("rows of different length", f"{count} rows of {count} values", at=key)
        matrix = np.array(given, dtype=float).reshape(len(given), -1)
    if matrix.shape != (count, count):
        expected = f"{count} rows of {count} values, one for each station and direction ({', '.join(names)})"
        raise refuse(f"{matrix.shape[0]} rows of {matrix.shape[1]}", expected, at=key)
    if not np.allclose(matrix, matrix.T, rtol=SYMMETRIC, atol=1e-9 * float(np.abs(matrix).max())):
        row, column = np.unravel_index(int(np.argmax(np.abs(matrix - matrix.T))), matrix.shape)
        one, other = (show(float(v), kind) for v in (matrix[row, column], matrix[column, row]))
        expected = f"a symmetric matrix; between {names[row]} and {names[column]} it has {one} and {other}"
        raise refuse(key, expected, at=key)
    return 0.5 * (matrix + matrix.T)


def read_dynamic_stiffness(folder: Path, file: str) -> FloorTable:
    """Return the table of a CSV file: frequency, stiffness (real part), and imaginary part or loss factor."""
    try:
        table = read_table(
            folder,
            file,
            {"frequency": "frequency", "stiffness": "stiffness"},
            {"imaginary": "stiffness", "loss_factor": "ratio"},
        )
        frequency, real = table.columns["frequency"], table.columns["stiffness"]
        table.refuse_rows(frequency <= 0.0, "frequency", "a frequency above zero")
        table.refuse_falling("frequency")
        if "imaginary" in table.columns:
            column, imaginary = "imaginary", table.columns["imaginary"]
        else:
            column, imaginary = "loss_factor", np.abs(real) * table.columns["loss_factor"]
        table.refuse_rows(
            imaginary < 0.0, column, "an imaginary part or loss factor of zero or more (a floor takes energy)"
        )
        if len(frequency) < 2:
            raise DataFileFault(f"at least two rows, but {file} has one")
        table.refuse_rows(
            (real == 0.0) & (imaginary == 0.0), "stiffness", "a dynamic stiffness that is not zero"
        )
    except DataFileFault as fault:
        raise refuse(file, str(fault), at="file") from None
    return FloorTable(frequency, real + 1j * imaginary)
