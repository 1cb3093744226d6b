"""Limit on a machine's own vibration by the zone boundaries of the machine standards."""

from typing import ClassVar, Literal

import numpy as np

from detune.brief.allowable.at_point import RmsAtPoint
from detune.brief.allowable.base import direction_words
from detune.brief.allowable.views import Floats, Responses, ResponseView, StaticView
from detune.physics.criteria import MACHINE_ZONES

MachineClass = Literal[
    "group 1, rigid",
    "group 1, flexible",
    "group 2, rigid",
    "group 2, flexible",
    "class I",
    "class II",
    "class III",
    "class IV",
]
Boundary = Literal["A/B", "B/C", "C/D"]


class MachineVelocity(RmsAtPoint):
    """Rms velocity at a point of the machine along `direction`, at most a zone boundary.

    `machine`: group 1 (above 300 kW) or 2 (15 to 300 kW) with its support, as in ISO 20816-3, or the classes
    I to IV of ISO 10816-1. All frequencies count, also those below the standards' 10 Hz (2 Hz for slow machines),
    which is on the safe side.
    """

    title: ClassVar[str] = "machine velocity"
    unit: ClassVar[str] = "velocity"
    kind: Literal["machine-velocity"] = "machine-velocity"
    machine: MachineClass
    boundary: Boundary

    def zone_limit(self) -> float:
        """Return the boundary in m/s rms."""
        zones = MACHINE_ZONES[self.machine]
        return {"A/B": zones.a_to_b, "B/C": zones.b_to_c, "C/D": zones.c_to_d}[self.boundary]

    def assumed(self) -> tuple[str, ...]:
        return (
            f"machine velocity: boundary {self.boundary} of {self.machine} is "
            f"{1e3 * self.zone_limit():g} mm/s rms ({MACHINE_ZONES[self.machine].source})",
        )

    def observed(self, view: ResponseView, place: str) -> Responses:
        return view.motion(place, rate=1)

    def bound(self, view: StaticView, place: str) -> Floats:
        return np.full(view.count, self.zone_limit())

    def quantity(self) -> str:
        return f"machine velocity {direction_words(self.direction)}, zone {self.boundary}, rms"
