"""Limit on the added mass of a design."""

from typing import ClassVar, Literal

from pydantic import field_validator

from detune.brief.allowable.base import DesignAllowable, above_zero
from detune.brief.allowable.views import DesignView, Floats
from detune.brief.statement import Mass


class AddedMass(DesignAllowable):
    """Total added mass, upper limit."""

    title: ClassVar[str] = "added mass"
    unit: ClassVar[str] = "mass"
    kind: Literal["added-mass"] = "added-mass"
    limit: Mass

    @field_validator("limit")
    @classmethod
    def _limit_above_zero(cls, value: float) -> float:
        return above_zero(value, "a limit")

    def value(self, view: DesignView) -> Floats:
        return view.added_mass

    def upper_limit(self) -> float:
        return self.limit
