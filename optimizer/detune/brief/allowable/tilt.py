"""Limit on the static tilt of the bodies out of level."""

from typing import ClassVar, Literal

import numpy as np
from pydantic import field_validator

from detune.brief.allowable.base import StaticAllowable, above_zero
from detune.brief.allowable.views import Floats, Places, StaticView
from detune.brief.statement import Angle


class Tilt(StaticAllowable):
    """Static rotation out of level (about x and y together) of each body, upper limit."""

    title: ClassVar[str] = "tilt"
    unit: ClassVar[str] = "angle"
    kind: Literal["tilt"] = "tilt"
    limit: Angle

    @field_validator("limit")
    @classmethod
    def _limit_above_zero(cls, value: float) -> float:
        return above_zero(value, "a limit")

    def places(self, places: Places) -> tuple[str, ...]:
        return places.bodies

    def value(self, view: StaticView, place: str) -> Floats:
        rotation = view.rotation(place)
        return np.hypot(rotation[:, 0], rotation[:, 1])

    def bounds(self, view: StaticView, place: str) -> tuple[Floats | None, Floats | None]:
        return None, np.full(view.count, self.limit)
