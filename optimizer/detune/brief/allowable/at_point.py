"""The forms shared by limits on the motion of a named point."""

from typing import Literal

import numpy as np
from pydantic import field_validator, model_validator

from detune.brief.allowable.base import (
    HarmonicAllowable,
    Statistic,
    above_zero,
    direction_words,
    read_direction,
)
from detune.brief.allowable.views import Floats, Places, StaticView
from detune.brief.levels import Level, level_note, refuse_unless_rms
from detune.brief.statement import AxisName, Direction, Name, unit_direction


class RmsAtPoint(HarmonicAllowable):
    """A limit on an rms value at a named point `at` along a `direction`, by a scale that a standard lays down."""

    at: Name
    direction: AxisName | Direction

    @model_validator(mode="after")
    def _readable(self) -> "RmsAtPoint":
        unit_direction(self.direction, at="direction")
        return self

    def places(self, places: Places) -> tuple[str, ...]:
        return (self.at,)

    def points_named(self) -> tuple[str, ...]:
        return (self.at,)

    def statistic(self) -> Statistic:
        return "rms"

    def along(self) -> Direction | None:
        return unit_direction(self.direction)


class PointAllowable(HarmonicAllowable):
    """A limit at a named point `at`, along a `direction` or on the resultant, as a stated `measure`.

    Of displacement, velocity and acceleration the `limit` may be a level in decibels, "105 dB", re 1 pm, 1 nm/s and
    1 µm/s² (ISO 1683) or another reference that is stated with it; a level is of the rms value.
    """

    at: Name
    direction: AxisName | Literal["resultant"] | Direction
    measure: Statistic
    limit: float

    @field_validator("limit")
    @classmethod
    def _limit_above_zero(cls, value: float) -> float:
        return above_zero(value, "a limit")

    @model_validator(mode="after")
    def _level_of_rms(self) -> "PointAllowable":
        refuse_unless_rms(self.limit, self.measure)
        return self

    def level_reference(self) -> float | None:
        return self.limit.reference if isinstance(self.limit, Level) else None

    def assumed(self) -> tuple[str, ...]:
        return level_note(f"limit on {self.title} at {self.at}", self.limit, self.unit)

    @field_validator("direction")
    @classmethod
    def _direction_readable(
        cls, value: AxisName | Literal["resultant"] | Direction
    ) -> AxisName | Literal["resultant"] | Direction:
        read_direction(value)
        return value

    def places(self, places: Places) -> tuple[str, ...]:
        return (self.at,)

    def points_named(self) -> tuple[str, ...]:
        return (self.at,)

    def statistic(self) -> Statistic:
        return self.measure

    def along(self) -> Direction | None:
        return read_direction(self.direction)

    def bound(self, view: StaticView, place: str) -> Floats:
        return np.full(view.count, self.limit)

    def quantity(self) -> str:
        return f"{self.title} {direction_words(self.direction)}, {self.measure}"
