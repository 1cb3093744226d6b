"""Where a batch of designs resonates on a floor of tabulated dynamic stiffness."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from detune.brief.floor_files import FloorTable

if TYPE_CHECKING:
    from detune.response.assemble import Dynamic

Floats = NDArray[np.float64]
Integers = NDArray[np.intp]
Complexes = NDArray[np.complex128]
TWO_PI = 2.0 * np.pi
MOST_ROWS = 200
# The grid on which changes of sign are looked for: parts of a row of the table, and points at most.
FINER, MOST = 4, 1200
TOGETHER = 64
HALVINGS = 28
NARROWEST, NONE = 1e-7, -1.0 + 1e-3j


def table_places(table: FloorTable) -> Complexes:
    """Return the rows of a table (m,) as poles in rad/s whose half width is their distance, thinned to `MOST_ROWS`."""
    omega = TWO_PI * table.frequency
    thinned = omega[:: max(1, len(omega) // MOST_ROWS)]
    return np.asarray(1j * thinned - np.gradient(thinned))


def table_resonances(dynamic: Dynamic, table: FloorTable) -> Complexes:
    """Return the resonances (D, m) of designs as poles in rad/s; unused ones lie far off.

    A resonance is where an eigenvalue of Re D(w) changes its sign. Its half width is v^T Im D v over the
    slope of that eigenvalue.
    """
    rows = table.frequency
    count = min(MOST, FINER * (len(rows) - 1) + 1)
    grid = TWO_PI * np.interp(np.linspace(0, len(rows) - 1, count), np.arange(len(rows)), rows)
    designs, places = [], []
    total = len(dynamic.mass)
    for first in range(0, total, TOGETHER):
        index = np.arange(first, min(first + TOGETHER, total))
        omega = np.repeat(grid[None], len(index), axis=0)
        below = np.sum(np.linalg.eigvalsh(dynamic.take(index).at(omega).real) < 0.0, axis=-1)
        design, place = np.nonzero(below[:, 1:] != below[:, :-1])
        designs.append(index[design])
        places.append(_closed_in(dynamic, index[design], grid[place], grid[place + 1], below[design, place]))
    owner, pole = np.concatenate(designs), np.concatenate(places)
    number = np.bincount(owner, minlength=total)
    found = np.full((total, int(number.max(initial=0))), NONE, dtype=complex)
    if len(owner):
        found[owner, np.arange(len(owner)) - np.concatenate([[0], np.cumsum(number)[:-1]])[owner]] = pole
    return found


def _closed_in(dynamic: Dynamic, design: Integers, left: Floats, right: Floats, start: Integers) -> Complexes:
    if not len(design):
        return np.zeros(0, dtype=complex)
    chosen = dynamic.take(design)

    def at(omega: Floats) -> Complexes:
        return np.asarray(chosen.at(omega[:, None])[:, 0])

    for _ in range(HALVINGS):
        middle = 0.5 * (left + right)
        same = np.sum(np.linalg.eigvalsh(at(middle).real) < 0.0, axis=-1) == start
        left, right = np.where(same, middle, left), np.where(same, right, middle)
    place = 0.5 * (left + right)
    values, vectors = np.linalg.eigh(at(place).real)
    row, near = np.arange(len(place)), np.abs(values).argmin(axis=1)
    shape = vectors[row, :, near]
    step = 1e-5 * place
    slope = np.einsum("di,dij,dj->d", shape, (at(place + step) - at(place - step)).real, shape) / (2.0 * step)
    lost = np.einsum("di,dij,dj->d", shape, at(place).imag, shape)
    width = np.abs(lost) / np.maximum(np.abs(slope), np.finfo(float).tiny)
    return np.asarray(1j * place - np.clip(width, NARROWEST * place, place))
