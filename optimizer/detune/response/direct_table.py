"""Resonances of a machine on a floor of tabulated dynamic stiffness, for the assessor's search for peaks."""

import numpy as np
from numpy.typing import NDArray

from detune.response.direct import DirectMachine

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
TWO_PI = 2.0 * np.pi
FINER, MOST = 8, 4000
HALVINGS = 30
# Widths of the samples laid round a resonance, by its frequency: sharp ones and broad ones.
WIDTHS = (1e-5, 1e-3, 2e-2)


def with_resonances(machine: DirectMachine, poles: Complexes) -> Complexes:
    """Return poles (rad/s) with the resonances on a tabulated floor added, of which there may be more than freedoms.

    A resonance is where an eigenvalue of Re D(w) changes its sign; their number below zero is counted on a
    grid finer than the table, and every change is closed in on.
    """
    if machine.floor is None or machine.floor.table is None:
        return poles
    rows = machine.floor.table.frequency
    count = min(MOST, FINER * (len(rows) - 1) + 1)
    grid = TWO_PI * np.interp(np.linspace(0, len(rows) - 1, count), np.arange(len(rows)), rows)
    below = _negative(machine, grid)
    change = np.flatnonzero(below[1:] != below[:-1])
    left, right, start = grid[change], grid[change + 1], below[change]
    for _ in range(HALVINGS):
        if not len(left):
            break
        middle = 0.5 * (left + right)
        same = _negative(machine, middle) == start
        left, right = np.where(same, middle, left), np.where(same, right, middle)
    added = [complex(-width * place, place) for place in 0.5 * (left + right) for width in WIDTHS]
    return np.concatenate([poles, np.array(added, dtype=complex)])


def _negative(machine: DirectMachine, omega: Floats) -> NDArray[np.int64]:
    free = machine.free
    dynamic = machine.stiffness(omega).real - omega[:, None, None] ** 2 * machine.mass
    values = np.linalg.eigvalsh(dynamic[:, free][:, :, free])
    return np.asarray(np.sum(values < 0.0, axis=1))
