"""A floor of tabulated dynamic stiffness, as what it has beyond a spring and a mass."""

import numpy as np
from numpy.typing import NDArray

from detune.brief.floor import FloorFreedom
from detune.brief.floor_files import FloorTable

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
TWO_PI = 2.0 * np.pi


def beyond_spring(table: FloorTable, mass: float, stiffness: float, omega: Floats) -> Complexes:
    """Return D(w) - (k - w^2 m) at omega of any shape in rad/s, D being straight between the rows of the table.

    Outside the table, where nothing is judged and only the search for modes looks, it falls to zero towards
    rest and stays as it is above.
    """
    frequency = omega / TWO_PI
    low, high = table.frequency[0], table.frequency[-1]
    held = np.clip(frequency, low, high)
    rest: Complexes = table.at(held) - (stiffness - (TWO_PI * held) ** 2 * mass)
    return np.asarray(rest * np.minimum(frequency / low, 1.0))


def floor_spring(floor: FloorFreedom, omega: Floats) -> Complexes:
    """Return the floor's own stiffness (F,) without the inertia of its mass: k + j w c, or by its table."""
    own = floor.stiffness + 1j * omega * floor.damping
    if floor.table is None:
        return np.asarray(own)
    table = floor.table
    inside = (omega >= TWO_PI * table.frequency[0]) & (omega <= TWO_PI * table.frequency[-1])
    # The table is D; what inertia takes off in the machine's matrices is put back here.
    straight = table.at(omega / TWO_PI) + omega**2 * floor.mass
    return np.where(inside, straight, own + beyond_spring(table, floor.mass, floor.stiffness, omega))
