"""Lower limit on the separation of every natural frequency from every excitation interval."""

from typing import ClassVar, Literal

import numpy as np
from pydantic import field_validator, model_validator

from detune.brief.allowable.base import ModeAllowable, above_zero, no_conditions
from detune.brief.allowable.views import Floats, ModeView
from detune.brief.shares import Share
from detune.brief.statement import Ratio
from detune.physics import separation


class Separation(ModeAllowable):
    """Least separation over all undamped modes and all excitation intervals of steady conditions.

    `exempt_amplification`: a mode that amplifies less than this is left out of the limit (its
    response limits still bind). Left out, no mode is exempted.
    """

    title: ClassVar[str] = "separation from resonance"
    unit: ClassVar[str] = "ratio"
    kind: Literal["separation"] = "separation"
    limit: Share
    exempt_amplification: Ratio | None = None

    @field_validator("conditions")
    @classmethod
    def _every_steady_condition(cls, value: tuple[str, ...] | None) -> tuple[str, ...] | None:
        return no_conditions(value, "separation counts every steady condition")

    @model_validator(mode="after")
    def _values(self) -> "Separation":
        above_zero(self.limit, "a limit", at="limit")
        if self.exempt_amplification is not None:
            above_zero(self.exempt_amplification, "an amplification", at="exempt_amplification")
        return self

    def value(self, view: ModeView) -> Floats:
        return least_separation(view, self.exempt_amplification)

    def lower_limit(self) -> float:
        return self.limit


def least_separation(view: ModeView, exempt_amplification: float | None) -> Floats:
    """Return the least separation (D,); infinite where nothing excites or every mode is exempt.

    Source: physics.separation, the wording of the trade by the excitation frequency.
    """
    least = np.full(view.frequency.shape[0], np.inf)
    for low, high in view.intervals:
        each = separation.separation(view.frequency, float(low), float(high))
        if exempt_amplification is not None:
            each = np.where(view.amplification < exempt_amplification, np.inf, each)
        least = np.minimum(least, each.min(axis=-1))
    return least
