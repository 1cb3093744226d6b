"""The stroke of absorbers: how far their mass may move against the machine."""

from typing import ClassVar, Literal

import numpy as np
from pydantic import field_validator

from detune.brief.allowable.base import HarmonicAllowable, above_zero
from detune.brief.allowable.views import Floats, Places, Responses, ResponseView, StaticView
from detune.brief.statement import Direction, Length, Name, listed_once


class Stroke(HarmonicAllowable):
    """Peak motion of an absorber's mass against its frame, from where it rests.

    `limit = "part"` is the stroke its list states; it is always demanded: a brief that leaves it out gets it,
    printed as assumed. `absorbers` names those it holds for; all if left out.
    """

    title: ClassVar[str] = "stroke of the absorber"
    unit: ClassVar[str] = "length"
    kind: Literal["stroke"] = "stroke"
    absorbers: tuple[Name, ...] | None = None
    limit: Literal["part"] | Length = "part"

    @field_validator("absorbers")
    @classmethod
    def _some(cls, value: tuple[str, ...] | None) -> tuple[str, ...] | None:
        return listed_once(value)

    @field_validator("limit")
    @classmethod
    def _positive(cls, value: Literal["part"] | float) -> Literal["part"] | float:
        return value if isinstance(value, str) else above_zero(value, "a limit")

    def places(self, places: Places) -> tuple[str, ...]:
        return tuple(name for name in places.absorbers if self.absorbers is None or name in self.absorbers)

    def along(self) -> Direction | None:
        return (0.0, 0.0, 1.0)

    def observed(self, view: ResponseView, place: str) -> Responses:
        return view.station_deflection(place)

    def bound(self, view: StaticView, place: str) -> Floats:
        own = view.part_value(place, "stroke")
        if self.limit == "part":
            return np.where(np.isnan(own), np.inf, own)
        # An absorber that is left out moves nowhere.
        return np.where(np.isfinite(own), float(self.limit), np.inf)
