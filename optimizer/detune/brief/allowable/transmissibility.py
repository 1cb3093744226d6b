"""Limit on transmissibility at the excitation frequencies of a condition."""

from typing import ClassVar, Literal

import numpy as np
from pydantic import model_validator

from detune.brief.allowable.base import HarmonicAllowable, UnitLoad, above_zero
from detune.brief.allowable.views import Floats, Places, Responses, ResponseView, StaticView
from detune.brief.statement import AxisName, Direction, Frequency, Name, Ratio, refuse, unit_direction


class Transmissibility(HarmonicAllowable):
    """Upper limit on a ratio, judged over every excitation interval of the condition.

    `of = "force"`: the total force into the floor along `direction` for a unit harmonic force along
    `direction` at the first body's mass centre. `of = "motion"`: the motion of the point `at` along
    `direction` for a unit motion of the floor. `from_frequency` leaves out what lies below it.
    """

    title: ClassVar[str] = "transmissibility"
    unit: ClassVar[str] = "ratio"
    kind: Literal["transmissibility"] = "transmissibility"
    of: Literal["force", "motion"]
    direction: AxisName | Direction
    at: Name | None = None
    from_frequency: Frequency | None = None
    limit: Ratio

    @model_validator(mode="after")
    def _values(self) -> "Transmissibility":
        above_zero(self.limit, "a limit", at="limit")
        unit_direction(self.direction, at="direction")
        if self.of == "motion" and self.at is None:
            raise refuse("no point", 'the point whose motion is compared, as "at"')
        if self.of == "force" and self.at is not None:
            raise refuse("at", 'no "at": a force ratio is of the total force into the floor', at="at")
        return self

    def places(self, places: Places) -> tuple[str, ...]:
        return (self.at,) if self.at is not None else ("floor",)

    def points_named(self) -> tuple[str, ...]:
        return (self.at,) if self.at is not None else ()

    def along(self) -> Direction | None:
        return unit_direction(self.direction)

    def unit_load(self) -> UnitLoad | None:
        return ("force" if self.of == "force" else "base", unit_direction(self.direction))

    def lowest_frequency(self) -> float:
        return self.from_frequency or 0.0

    def observed(self, view: ResponseView, place: str) -> Responses:
        return view.total_force("floor") if self.of == "force" else view.motion(place)

    def bound(self, view: StaticView, place: str) -> Floats:
        return np.full(view.count, self.limit)

    def quantity(self) -> str:
        return f"transmissibility, {self.of} ratio, {self.direction}"
