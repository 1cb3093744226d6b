"""Limit on how much of a shaft's range has to be barred so that every other limit holds on the rest."""

from typing import Annotated, ClassVar, Literal

from pydantic import Field, model_validator

from detune.brief.allowable.base import Allowable, above_zero
from detune.brief.statement import Frequency, Name, Ratio, refuse


class DwellBands(Allowable):
    """Upper limit on the total width of the bands of speed in which the machine may not dwell.

    For each design the program finds the smallest union of bands of `shaft` outside which all limits on the
    response in the condition hold, and the limit on separation with them; its total width is limited by
    `width` (in speed), or by `share` of the shaft's range. `bands`: how many there may be at most; closer
    ones are then joined across the narrowest gaps. The other limits of such a condition are judged over the
    speeds that are left.
    """

    title: ClassVar[str] = "speeds not to dwell at"
    unit: ClassVar[str] = "frequency"
    kind: Literal["dwell-bands"] = "dwell-bands"
    shaft: Name
    width: Frequency | None = None
    share: Ratio | None = None
    bands: Annotated[int, Field(strict=True)] | None = None

    @model_validator(mode="after")
    def _values(self) -> "DwellBands":
        stated = [name for name in ("width", "share") if getattr(self, name) is not None]
        if len(stated) != 1:
            found = " and ".join(stated) or "no allowance"
            raise refuse(found, 'either "width", the total width of all bands, or "share" of the range')
        if self.width is not None:
            above_zero(self.width, "a width", at="width")
        if self.share is not None and not 0.0 < self.share < 1.0:
            expected = 'a share above 0 and below 100 %, such as 0.05 or "5 %"'
            raise refuse(f"{self.share:g}", expected, at="share")
        if self.bands is not None and self.bands < 1:
            raise refuse(self.bands, "a whole number of bands, 1 or more", at="bands")
        return self

    def allowance(self, low: float, high: float) -> float:
        """Return the greatest total width (Hz) within the range [low, high] Hz of the shaft."""
        return self.width if self.width is not None else float(self.share or 0.0) * (high - low)

    def quantity(self) -> str:
        return "total width of the barred bands"
