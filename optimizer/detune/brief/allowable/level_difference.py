"""Limit on how far out of level points stand after the machine has settled."""

from typing import ClassVar, Literal

import numpy as np
from pydantic import field_validator

from detune.brief.allowable.base import StaticAllowable, above_zero
from detune.brief.allowable.views import Floats, Places, StaticView
from detune.brief.statement import Length, Name, refuse


class LevelDifference(StaticAllowable):
    """Largest difference between the static vertical displacements of two or more `points`, upper limit."""

    title: ClassVar[str] = "level difference"
    unit: ClassVar[str] = "length"
    kind: Literal["level-difference"] = "level-difference"
    points: tuple[Name, ...]
    limit: Length

    @field_validator("points")
    @classmethod
    def _two_or_more(cls, value: tuple[str, ...]) -> tuple[str, ...]:
        if len(set(value)) < 2 or len(set(value)) != len(value):
            raise refuse(list(value), "two or more points, each once")
        return value

    @field_validator("limit")
    @classmethod
    def _limit_above_zero(cls, value: float) -> float:
        return above_zero(value, "a limit")

    def places(self, places: Places) -> tuple[str, ...]:
        return (", ".join(self.points),)

    def points_named(self) -> tuple[str, ...]:
        return self.points

    def value(self, view: StaticView, place: str) -> Floats:
        heights = np.stack([view.motion(point)[:, 2] for point in self.points])
        return np.asarray(heights.max(axis=0) - heights.min(axis=0))

    def bounds(self, view: StaticView, place: str) -> tuple[Floats | None, Floats | None]:
        return None, np.full(view.count, self.limit)
