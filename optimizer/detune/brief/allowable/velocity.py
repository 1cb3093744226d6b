"""Limit on the velocity of a point."""

from typing import ClassVar, Literal

from detune.brief.allowable.at_point import PointAllowable
from detune.brief.allowable.views import Responses, ResponseView
from detune.brief.levels import VelocityOrLevel


class Velocity(PointAllowable):
    """Amplitude of the velocity of a point, upper limit."""

    title: ClassVar[str] = "velocity"
    unit: ClassVar[str] = "velocity"
    kind: Literal["velocity"] = "velocity"
    limit: VelocityOrLevel

    def observed(self, view: ResponseView, place: str) -> Responses:
        return view.motion(place, rate=1)
