"""Limit on the displacement of a point."""

from typing import ClassVar, Literal

from detune.brief.allowable.at_point import PointAllowable
from detune.brief.allowable.views import Responses, ResponseView
from detune.brief.levels import LengthOrLevel


class Displacement(PointAllowable):
    """Amplitude of the displacement of a point, upper limit."""

    title: ClassVar[str] = "displacement"
    unit: ClassVar[str] = "length"
    kind: Literal["displacement"] = "displacement"
    limit: LengthOrLevel

    def observed(self, view: ResponseView, place: str) -> Responses:
        return view.motion(place)
