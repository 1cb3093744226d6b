"""Limit on the frequency-weighted acceleration at a point, for people."""

from typing import ClassVar, Literal

import numpy as np
from pydantic import model_validator

from detune.brief.allowable.at_point import RmsAtPoint
from detune.brief.allowable.base import above_zero, direction_words
from detune.brief.allowable.views import Complexes, Floats, Responses, ResponseView, StaticView
from detune.brief.statement import Acceleration
from detune.physics.weighting import frequency_weighting


class WeightedAcceleration(RmsAtPoint):
    """Weighted rms acceleration along `direction`, ISO 2631-1: Wk for vertical, Wd for horizontal directions.

    For tones and noise alone: a shock needs a measure of its own.
    """

    title: ClassVar[str] = "weighted acceleration"
    unit: ClassVar[str] = "acceleration"
    kind: Literal["weighted-acceleration"] = "weighted-acceleration"
    weighting: Literal["Wk", "Wd"]
    limit: Acceleration

    @model_validator(mode="after")
    def _values(self) -> "WeightedAcceleration":
        above_zero(self.limit, "a limit", at="limit")
        return self

    def observed(self, view: ResponseView, place: str) -> Responses:
        return view.motion(place, rate=2)

    def weighted(self, observed: Complexes, frequency: Floats) -> Complexes:
        return observed * frequency_weighting(frequency, self.weighting)[..., None]

    def has_weighting(self) -> bool:
        return True

    def bound(self, view: StaticView, place: str) -> Floats:
        return np.full(view.count, self.limit)

    def quantity(self) -> str:
        return f"acceleration {direction_words(self.direction)}, weighted {self.weighting} (ISO 2631-1), rms"
