"""Limit on how many different part numbers a design uses."""

from typing import ClassVar, Literal

from pydantic import field_validator

from detune.brief.allowable.base import DesignAllowable
from detune.brief.allowable.views import DesignView, Floats
from detune.brief.statement import refuse


class PartNumbers(DesignAllowable):
    """Number of different part numbers, upper limit."""

    title: ClassVar[str] = "number of part numbers"
    unit: ClassVar[str] = "ratio"
    kind: Literal["part-numbers"] = "part-numbers"
    limit: int

    @field_validator("limit", mode="before")
    @classmethod
    def _whole(cls, value: object) -> object:
        if isinstance(value, bool) or not isinstance(value, int) or value < 1:
            raise refuse(value, "a whole number, 1 or more")
        return value

    def value(self, view: DesignView) -> Floats:
        return view.part_numbers

    def upper_limit(self) -> float:
        return float(self.limit)
