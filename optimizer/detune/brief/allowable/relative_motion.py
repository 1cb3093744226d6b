"""Limit on how far two points move against each other: a pipe flange, a rack beside a wall."""

from typing import ClassVar, Literal

import numpy as np
from pydantic import model_validator

from detune.brief.allowable.base import (
    HarmonicAllowable,
    Statistic,
    above_zero,
    direction_words,
    read_direction,
)
from detune.brief.allowable.views import Floats, Places, Responses, ResponseView, StaticView
from detune.brief.statement import AxisName, Direction, Length, Name, refuse

FLOOR = "floor"


class RelativeMotion(HarmonicAllowable):
    """Dynamic displacement of the point `at` relative to the point `to`, or to the "floor", upper limit."""

    title: ClassVar[str] = "relative motion"
    unit: ClassVar[str] = "length"
    kind: Literal["relative-motion"] = "relative-motion"
    at: Name
    to: Name
    direction: AxisName | Literal["resultant"] | Direction
    measure: Statistic
    limit: Length

    @model_validator(mode="after")
    def _values(self) -> "RelativeMotion":
        above_zero(self.limit, "a limit", at="limit")
        read_direction(self.direction)
        if self.to == self.at:
            raise refuse(self.to, "another point, or the floor", at="to")
        return self

    def places(self, places: Places) -> tuple[str, ...]:
        return (self.at,)

    def points_named(self) -> tuple[str, ...]:
        return (self.at,) if self.to == FLOOR else (self.at, self.to)

    def statistic(self) -> Statistic:
        return self.measure

    def along(self) -> Direction | None:
        return read_direction(self.direction)

    def observed(self, view: ResponseView, place: str) -> Responses:
        other = view.floor_motion() if self.to == FLOOR else view.motion(self.to)
        return view.motion(place) - other

    def bound(self, view: StaticView, place: str) -> Floats:
        return np.full(view.count, self.limit)

    def quantity(self) -> str:
        return f"motion relative to {self.to} {direction_words(self.direction)}, {self.measure}"
