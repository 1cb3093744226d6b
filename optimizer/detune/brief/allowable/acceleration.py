"""Limit on the acceleration of a point."""

from typing import ClassVar, Literal

from detune.brief.allowable.at_point import PointAllowable
from detune.brief.allowable.views import Responses, ResponseView
from detune.brief.levels import AccelerationOrLevel


class Acceleration(PointAllowable):
    """Amplitude of the acceleration of a point, upper limit."""

    title: ClassVar[str] = "acceleration"
    unit: ClassVar[str] = "acceleration"
    kind: Literal["acceleration"] = "acceleration"
    limit: AccelerationOrLevel

    def observed(self, view: ResponseView, place: str) -> Responses:
        return view.motion(place, rate=2)
