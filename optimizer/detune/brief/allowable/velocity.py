"""Limit on the velocity of a point."""

from typing import ClassVar, Literal

from detune.brief.allowable.at_point import PointAllowable
from detune.brief.allowable.views import Responses, ResponseView
from detune.brief.statement import Velocity as VelocityQuantity


class Velocity(PointAllowable):
    """Amplitude of the velocity of a point, upper limit."""

    title: ClassVar[str] = "velocity"
    unit: ClassVar[str] = "velocity"
    kind: Literal["velocity"] = "velocity"
    limit: VelocityQuantity

    def observed(self, view: ResponseView, place: str) -> Responses:
        return view.motion(place, rate=1)
