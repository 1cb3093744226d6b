"""Stability under gravity: how far the machine is from toppling on its mounts."""

from typing import ClassVar, Literal

import numpy as np
from pydantic import field_validator

from detune.brief.allowable.base import StaticAllowable
from detune.brief.allowable.views import Floats, Places, StaticView
from detune.brief.statement import Ratio, refuse


class Stability(StaticAllowable):
    """How many times its static forces could grow before the machine topples, lower limit.

    Always demanded with a limit of 1: a brief that states none gets it, printed as assumed. Below 1 the machine does
    not stand.
    """

    title: ClassVar[str] = "weight that would topple it, over its weight"
    unit: ClassVar[str] = "ratio"
    kind: Literal["stability"] = "stability"
    limit: Ratio = 1.0

    @field_validator("limit")
    @classmethod
    def _at_least_one(cls, value: float) -> float:
        if value < 1.0:
            raise refuse(f"{value:g}", "1 or more: below 1 the machine topples")
        return value

    def places(self, places: Places) -> tuple[str, ...]:
        return ("whole machine",)

    def value(self, view: StaticView, place: str) -> Floats:
        return view.weight_to_topple()

    def bounds(self, view: StaticView, place: str) -> tuple[Floats | None, Floats | None]:
        return np.full(view.count, self.limit), None
