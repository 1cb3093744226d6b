"""What an allowable may look at. The response floor supplies objects of these shapes.

D designs are seen at once, F frequencies of each design's own. Local axes of a station: z along its
axis, pointing from the floor to the body; x along its radial direction.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Responses = NDArray[Any]


@dataclass(frozen=True)
class Places:
    """The names an allowable may refer to."""

    points: tuple[str, ...]
    stations: tuple[str, ...]
    bodies: tuple[str, ...]
    absorbers: tuple[str, ...] = ()


class StaticView(Protocol):
    """Static equilibrium under gravity and the steady loads, at the static stiffness."""

    @property
    def count(self) -> int:
        """Number of designs D."""

    def motion(self, point: str) -> Floats:
        """Displacement (D, 3) in m of a point from the unloaded position, global axes."""

    def rotation(self, body: str) -> Floats:
        """Rotation (D, 3) in rad of a body."""

    def floor_motion(self) -> Floats:
        """Displacement (D, 3) in m of the floor under the machine's weight, global axes."""

    def station_deflection(self, station: str) -> Floats:
        """Deflection (D, 3) in m of the part, local axes; compression is negative z."""

    def station_load(self, station: str) -> Floats:
        """Force (D, 3) in N one part exerts on the floor; a compressed part has negative z."""

    def weight_to_topple(self) -> Floats:
        """By how much all static forces could grow (D,) before the machine topples."""

    def part_value(self, station: str, column: str) -> Floats:
        """A number (D,) of the part at the station, for example `load_max`; nan where none is stated."""


class ResponseView(Protocol):
    """The response to a load, linear in it.

    The axis F runs over frequencies (values are then phasors) or over times (values are then real);
    an allowable does not need to know which. `rate` 1 and 2 ask for the first and second derivative in time.
    """

    def motion(self, point: str, rate: int = 0) -> Responses:
        """Displacement (D, F, 3) in m of a point, global axes, or its derivative."""

    def floor_motion(self, rate: int = 0) -> Responses:
        """Displacement (D, F, 3) in m of the floor, its free motion included, or its derivative."""

    def foot_motion(self, station: str, rate: int = 0) -> Responses:
        """Displacement (D, F, 3) in m of a floor known between stations under one of them, or its derivative."""

    def station_deflection(self, station: str, rate: int = 0) -> Responses:
        """Deflection (D, F, 3) in m of the part, local axes, or its derivative."""

    def station_force(self, station: str) -> Responses:
        """Force (D, F, 3) in N through one part, local axes."""

    def total_force(self, surface: str) -> Responses:
        """Force (D, F, 3) in N, global axes, summed with phase: into the "floor" or the "ground"."""


class ToneView(ResponseView, Protocol):
    """The response to tones, of which a reference can be taken at each frequency."""

    def floor_ratio(self) -> Responses:
        """Floor's motion over that with the machine bolted down, along z of (D, F, 3)."""


@dataclass(frozen=True)
class ModeView:
    """Undamped modes at the dynamic stiffness: frequency (D, n) Hz, amplification (D, n) = 1/loss factor.

    `intervals` (k, 2) Hz are the excitation intervals of the steady conditions. `find_decay` returns the rates
    of decay, and is called only where they are asked for.
    """

    frequency: Floats
    amplification: Floats
    intervals: Floats
    find_decay: Callable[[], Floats]

    @property
    def decay(self) -> Floats:
        """Rates of decay (D, n) in 1/s of the damped modes."""
        return self.find_decay()


@dataclass(frozen=True)
class DesignView:
    """Totals of a design: cost, added mass (kg) and number of different part numbers, each (D,)."""

    cost: Floats
    added_mass: Floats
    part_numbers: Floats
