"""The clearance between a point of the machine and a stop or a neighbour."""

from typing import ClassVar, Literal

import numpy as np
from pydantic import model_validator

from detune.brief.allowable.base import HarmonicAllowable, Side, Statistic, above_zero, direction_words
from detune.brief.allowable.views import Floats, Places, Responses, ResponseView, StaticView
from detune.brief.statement import AxisName, Direction, Length, Name, unit_direction

FLOOR = "floor"


class Gap(HarmonicAllowable):
    """Travel of the point `at` towards `direction` stays below `clearance`.

    Travel is the signed sum of the static displacement towards the stop (creep of the state included), the peaks
    of tones and the expected extreme of noise, which reach as far one way as the other, and of each shock and
    record the farthest it comes towards the stop; what moves away from the stop counts in no shock. `stands_on`:
    the stop moves with the "floor", or is another point. `clearance_of`:
    "free", measured before the machine settles on its mounts, so that sag uses it up; "installed", measured with
    the machine at rest on them.
    """

    title: ClassVar[str] = "travel to a stop"
    unit: ClassVar[str] = "length"
    kind: Literal["gap"] = "gap"
    at: Name
    direction: AxisName | Direction
    stands_on: Name = FLOOR
    clearance_of: Literal["free", "installed"]
    clearance: Length

    @model_validator(mode="after")
    def _values(self) -> "Gap":
        above_zero(self.clearance, "a clearance", at="clearance")
        unit_direction(self.direction, at="direction")
        return self

    def places(self, places: Places) -> tuple[str, ...]:
        return (self.at,)

    def points_named(self) -> tuple[str, ...]:
        return (self.at,) if self.stands_on == FLOOR else (self.at, self.stands_on)

    def statistic(self) -> Statistic:
        return "peak"

    def along(self) -> Direction | None:
        return unit_direction(self.direction)

    def observed(self, view: ResponseView, place: str) -> Responses:
        other = view.floor_motion() if self.stands_on == FLOOR else view.motion(self.stands_on)
        return view.motion(place) - other

    def offset(self, view: StaticView, place: str) -> Floats:
        if self.clearance_of == "installed":
            return np.zeros(view.count)
        moved = view.motion(place)
        # A floor's own sag takes the stop along with it.
        other = view.floor_motion() if self.stands_on == FLOOR else view.motion(self.stands_on)
        return np.asarray((moved - other) @ np.asarray(unit_direction(self.direction)))

    def sides(self, view: StaticView, place: str) -> tuple[Side, ...]:
        return ((self.offset(view, place), unit_direction(self.direction)),)

    def bound(self, view: StaticView, place: str) -> Floats:
        return np.full(view.count, self.clearance)

    def quantity(self) -> str:
        return (
            f"travel towards {direction_words(self.direction)} to a stop on {self.stands_on}, from "
            f"{self.clearance_of}"
        )
