"""Limit on the time a disturbance takes to die away."""

import math
from typing import ClassVar, Literal

import numpy as np
from pydantic import field_validator, model_validator

from detune.brief.allowable.base import ModeAllowable, above_zero, no_conditions
from detune.brief.allowable.views import Floats, ModeView
from detune.brief.statement import Ratio, Time, refuse


class SettlingTime(ModeAllowable):
    """Time in which the slowest mode decays to `to` of its amplitude (0.02 for two per cent), upper limit.

    ln(1/to) over the least rate of decay of the damped poles. A loss factor decays at half of it times the angular
    frequency of the mode.
    """

    title: ClassVar[str] = "settling time"
    unit: ClassVar[str] = "time"
    kind: Literal["settling-time"] = "settling-time"
    to: Ratio
    limit: Time

    @field_validator("conditions")
    @classmethod
    def _every_condition(cls, value: tuple[str, ...] | None) -> tuple[str, ...] | None:
        return no_conditions(value, "how fast motion dies away does not depend on what runs")

    @model_validator(mode="after")
    def _values(self) -> "SettlingTime":
        above_zero(self.limit, "a limit", at="limit")
        if not 0.0 < self.to < 1.0:
            expected = 'a share of the amplitude above 0 and below 1, such as 0.02 or "2 %"'
            raise refuse(f"{self.to:g}", expected, at="to")
        return self

    def value(self, view: ModeView) -> Floats:
        slowest = view.decay.min(axis=-1)
        with np.errstate(divide="ignore"):
            return np.asarray(math.log(1.0 / self.to) / np.maximum(slowest, 0.0))

    def upper_limit(self) -> float | None:
        return self.limit

    def quantity(self) -> str:
        return f"{self.title} to {100.0 * self.to:g} %"
