"""Limit on how far a point comes down under the static loads."""

from typing import ClassVar, Literal

import numpy as np
from pydantic import field_validator

from detune.brief.allowable.base import StaticAllowable, above_zero
from detune.brief.allowable.views import Floats, Places, StaticView
from detune.brief.statement import Length, Name


class Sag(StaticAllowable):
    """Downward static displacement of a point, upper limit."""

    title: ClassVar[str] = "sag"
    unit: ClassVar[str] = "length"
    kind: Literal["sag"] = "sag"
    at: Name
    limit: Length

    @field_validator("limit")
    @classmethod
    def _limit_above_zero(cls, value: float) -> float:
        return above_zero(value, "a limit")

    def places(self, places: Places) -> tuple[str, ...]:
        return (self.at,)

    def points_named(self) -> tuple[str, ...]:
        return (self.at,)

    def value(self, view: StaticView, place: str) -> Floats:
        return -view.motion(place)[:, 2]

    def bounds(self, view: StaticView, place: str) -> tuple[Floats | None, Floats | None]:
        return None, np.full(view.count, self.limit)
