"""An elastic structure under the machine, from matrices or modes of another calculation or a test.

Its modes become freedoms beside those of the bodies; named nodes say which of its freedoms stand
under which station.
"""

from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from pydantic import Field, PrivateAttr, ValidationInfo, model_validator

from detune.brief.statement import Frequency, Name, Ratio, Statement, Text, refuse

Floats = NDArray[np.float64]
# Least squared frequency over the greatest below which the structure floats: a mesh of 200 elements has 1e-10, a free
# motion comes out at rounding size.
NOT_HELD = 1e-12


class Node(Statement):
    """A place on the structure: the numbers (from 0) of its freedoms along x, y and z, or -1 where held."""

    name: Name
    freedoms: tuple[int, int, int]


@dataclass(frozen=True, eq=False)
class StructureModes:
    """Modes of the structure on its own: frequency (m,) Hz, loss as damping ratio (m,), shapes (d, m), mass-normalised.

    `left_out`: how many more there are above the highest one kept. `loss_factor` (m,): a loss that does not grow with
    frequency, beside or instead of the damping ratio.
    """

    frequency: Floats
    damping_ratio: Floats
    shapes: Floats
    left_out: int = 0
    loss_factor: Floats | None = None


class Structure(Statement):
    """Mass and stiffness matrices (Matrix Market `.mtx` or one NPZ with `mass` and `stiffness`), or an NPZ with modes.

    A modal NPZ holds `frequency` (m,) in Hz and mass-normalised `shapes` (d, m), SI. Modes above `up_to` are left
    out; what that leaves out is told as assumed. `damping_ratio` holds for every mode.
    """

    name: Name = "structure"
    mass: Text | None = None
    stiffness: Text | None = None
    file: Text | None = None
    damping_ratio: Ratio
    up_to: Frequency | None = None
    nodes: tuple[Node, ...] = Field(min_length=1)
    _modes: StructureModes | None = PrivateAttr(default=None)

    @model_validator(mode="after")
    def _read(self, info: ValidationInfo) -> "Structure":
        if self._modes is not None:
            # A structure that is put into a brief is checked once more, then without its folder.
            return self
        folder = Path((info.context or {}).get("folder", "."))
        if not 0.0 < self.damping_ratio < 1.0:
            expected = 'a damping ratio above 0 and below 1, such as 0.02 or "2 %"'
            raise refuse(f"{self.damping_ratio:g}", expected)
        self._modes = _read_modes(self, folder)
        size = len(self._modes.shapes)
        for node in self.nodes:
            if max(node.freedoms) >= size or min(node.freedoms) < -1:
                raise refuse(list(node.freedoms), f"freedoms from 0 to {size - 1}, or -1 where held")
        return self

    @property
    def modes(self) -> StructureModes:
        """The modes that were read."""
        assert self._modes is not None  # set by the validator
        return self._modes

    def shape_rows(self, node: str) -> Floats:
        """Rows (3, m): displacement of a node along x, y, z for unit modal coordinates."""
        freedoms = next(n.freedoms for n in self.nodes if n.name == node)
        rows = np.zeros((3, len(self.modes.frequency)))
        for axis, freedom in enumerate(freedoms):
            if freedom >= 0:
                rows[axis] = self.modes.shapes[freedom]
        return rows


def _read_modes(structure: Structure, folder: Path) -> StructureModes:
    stated = [name for name in ("mass", "stiffness", "file") if getattr(structure, name) is not None]
    if stated not in (["mass", "stiffness"], ["file"]):
        raise refuse(
            ", ".join(stated) or "no file", 'either "mass" and "stiffness" (matrix files), or "file" (NPZ)'
        )
    if structure.file is not None:
        arrays = _npz(folder, structure.file)
        if {"frequency", "shapes"} <= set(arrays):
            frequency, shapes = np.asarray(arrays["frequency"], float), np.asarray(arrays["shapes"], float)
            if (
                frequency.ndim != 1
                or frequency.size == 0
                or shapes.ndim != 2
                or shapes.shape[1] != len(frequency)
                or frequency.min() <= 0
            ):
                raise refuse(structure.file, 'positive "frequency" (m,) and "shapes" (d, m)')
            if not np.all(np.isfinite(frequency)) or not np.all(np.isfinite(shapes)):
                raise refuse(structure.file, "finite numbers alone")
            return _kept(structure, frequency, shapes)
        if not {"mass", "stiffness"} <= set(arrays):
            raise refuse(
                ", ".join(arrays) or "no array", '"frequency" and "shapes", or "mass" and "stiffness"'
            )
        mass, stiffness = np.asarray(arrays["mass"], float), np.asarray(arrays["stiffness"], float)
    else:
        assert structure.mass is not None and structure.stiffness is not None
        mass, stiffness = _matrix(folder, structure.mass), _matrix(folder, structure.stiffness)
    return _solved(structure, mass, stiffness)


def _solved(structure: Structure, mass: Floats, stiffness: Floats) -> StructureModes:
    from scipy.linalg import LinAlgError, eigh

    for matrix, what in ((mass, "mass"), (stiffness, "stiffness")):
        if matrix.ndim != 2 or matrix.shape[0] != matrix.shape[1] or matrix.shape != mass.shape:
            raise refuse(str(matrix.shape), "two square matrices of the same size")
        if not np.all(np.isfinite(matrix)):
            raise refuse(f"{what} matrix", "finite numbers alone")
        if not np.allclose(matrix, matrix.T, rtol=1e-6, atol=1e-9 * float(np.abs(matrix).max())):
            raise refuse(f"{what} matrix", "a symmetric matrix")
    try:
        values, shapes = eigh(stiffness, mass)
    except LinAlgError:
        raise refuse("mass matrix", "a positive definite mass matrix") from None
    if values[0] <= NOT_HELD * values[-1]:
        raise refuse("a structure that is not held", "a stiffness matrix that holds the structure")
    return _kept(structure, np.sqrt(values) / (2.0 * np.pi), shapes)


def _kept(structure: Structure, frequency: Floats, shapes: Floats) -> StructureModes:
    keep = frequency <= (structure.up_to or np.inf)
    if not keep.any():
        raise refuse(f"up_to below {frequency.min():.4g} Hz", "at least one mode of the structure below it")
    kept = int(keep.sum())
    ratio = np.full(kept, structure.damping_ratio)
    return StructureModes(frequency[keep], ratio, shapes[:, keep], len(keep) - kept)


def _npz(folder: Path, name: str) -> dict[str, NDArray[np.generic]]:
    from zipfile import BadZipFile

    try:
        with np.load(folder / name, allow_pickle=False) as archive:
            return {key: archive[key] for key in archive.files}
    except (OSError, ValueError, EOFError, TypeError, BadZipFile) as error:
        # numpy raises TypeError for a single array (.npy), which is no archive.
        raise refuse(name, f"an NPZ file that can be read ({error})") from None


def _matrix(folder: Path, name: str) -> Floats:
    from scipy.io import mmread

    try:
        found = mmread(str(folder / name))
    except (OSError, ValueError) as error:
        raise refuse(name, f"a Matrix Market file that can be read ({error})") from None
    return np.asarray(found.toarray() if hasattr(found, "toarray") else found, dtype=float)
