"""Fields for shares that people state in per cent: a large number without a unit is refused, not read as 2000 %.

A separation of "20" means 20 % to whoever wrote it, and as a ratio it is 2000 %. Without a per cent sign a share has
to be below 1 and a loss factor below 2 (a figure that parts lists print as a number; rubber reaches 1.5). With
the sign any value is read: to ask for a separation of "150 %" is to ask that every mode lies at 2.5 times the
highest excitation or above, since below an excitation a separation never reaches 100 %.

Figures that are plain numbers to the trade (transmissibility, order of a shaft, amplification, stability, a factor on
stiffness, dynamic over static stiffness) are no shares and stay as they are.
"""

from dataclasses import dataclass
from typing import Annotated, Any

from pydantic_core import core_schema

from detune.brief.statement import Quantity, describe, refuse
from detune.ground import units

SHARES_BELOW = 1.0
LOSS_FACTORS_BELOW = 2.0


def refuse_if_per_cent_is_missing(
    found: object, value: float, what: str, below: float, at: str | None = None
) -> None:
    """Refuse a number without a unit, `found` as written and `value` as a ratio, that is not below `below`."""
    bare = not isinstance(found, str) or units.is_bare_number(found)
    if bare and abs(value) >= below:
        number = describe(found).strip()
        raise refuse(number, per_cent_wanted(what, number, value), at=at, nearest=f"{number} %")


def per_cent_wanted(what: str, number: str, value: float) -> str:
    """Say what to write in place of a number without a per cent sign."""
    return f'{what} such as "20 %" or 0.2; {number} without a per cent sign is {100.0 * value:.12g} %'


@dataclass(frozen=True)
class ShareQuantity(Quantity):
    """Field marker: a ratio that people state in per cent; `what` names it with its article."""

    what: str = "a share"
    below: float = SHARES_BELOW

    def _validate(self, value: Any, info: core_schema.ValidationInfo) -> float:
        ratio = super()._validate(value, info)
        # From Python a float is a ratio already, as every float there is in SI.
        if isinstance(value, str) or (info.context or {}).get("from_file"):
            refuse_if_per_cent_is_missing(value, ratio, self.what, self.below)
        return ratio


Share = Annotated[float, ShareQuantity("ratio")]
LossFactor = Annotated[float, ShareQuantity("ratio", "a loss factor", LOSS_FACTORS_BELOW)]
