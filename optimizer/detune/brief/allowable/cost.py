"""Limit on the cost of a design."""

from typing import ClassVar, Literal

from pydantic import field_validator

from detune.brief.allowable.base import DesignAllowable, above_zero
from detune.brief.allowable.views import DesignView, Floats
from detune.brief.statement import Cost


class CostLimit(DesignAllowable):
    """Total cost, upper limit."""

    title: ClassVar[str] = "cost"
    unit: ClassVar[str] = "cost"
    kind: Literal["cost"] = "cost"
    limit: Cost

    @field_validator("limit")
    @classmethod
    def _limit_above_zero(cls, value: float) -> float:
        return above_zero(value, "a limit")

    def value(self, view: DesignView) -> Floats:
        return view.cost

    def upper_limit(self) -> float:
        return self.limit
