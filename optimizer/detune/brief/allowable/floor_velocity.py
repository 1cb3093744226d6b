"""Limit on the velocity of the floor under the machine."""

from typing import ClassVar, Literal

import numpy as np
from pydantic import field_validator

from detune.brief.allowable.base import HarmonicAllowable, Statistic, above_zero
from detune.brief.allowable.views import Floats, Places, Responses, ResponseView, StaticView
from detune.brief.statement import Direction, Name, Velocity


class FloorVelocity(HarmonicAllowable):
    """Vertical velocity of the floor's own freedom, its free motion included, upper limit. Needs a flexible floor.

    `stations`: of a floor known between the stations (kind stiffness-matrix), the stations under which it is
    judged.
    """

    title: ClassVar[str] = "floor velocity"
    unit: ClassVar[str] = "velocity"
    kind: Literal["floor-velocity"] = "floor-velocity"
    stations: tuple[Name, ...] | None = None
    measure: Statistic
    limit: Velocity

    @field_validator("limit")
    @classmethod
    def _limit_above_zero(cls, value: float) -> float:
        return above_zero(value, "a limit")

    def places(self, places: Places) -> tuple[str, ...]:
        return self.stations or ("floor",)

    def stations_named(self) -> tuple[str, ...]:
        return self.stations or ()

    def statistic(self) -> Statistic:
        return self.measure

    def along(self) -> Direction | None:
        return (0.0, 0.0, 1.0)

    def observed(self, view: ResponseView, place: str) -> Responses:
        return view.floor_motion(rate=1) if self.stations is None else view.foot_motion(place, rate=1)

    def bound(self, view: StaticView, place: str) -> Floats:
        return np.full(view.count, self.limit)

    def quantity(self) -> str:
        return f"{self.title} z, {self.measure}"
