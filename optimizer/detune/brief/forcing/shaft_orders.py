"""Orders of a shaft over its speed range: a table of order, amplitude and phase."""

from collections.abc import Mapping
from typing import ClassVar, Literal

from pydantic import field_validator, model_validator

from detune.brief.condition import SpeedRange
from detune.brief.forcing.base import ShaftForcing, Tone, phasor
from detune.brief.statement import (
    Angle,
    ForceVector,
    MomentVector,
    Name,
    Position,
    Ratio,
    Statement,
    positive,
    refuse,
)


class Order(Statement):
    """One order of the shaft: force and moment amplitudes, peak, constant over the speed range."""

    order: Ratio
    force: ForceVector = (0.0, 0.0, 0.0)
    moment: MomentVector = (0.0, 0.0, 0.0)
    phase: Angle | None = None

    @model_validator(mode="after")
    def _something_acts(self) -> "Order":
        positive(self.order, "an order", at="order")
        if not any(self.force) and not any(self.moment):
            raise refuse("no force and no moment", 'a "force" or a "moment" that is not zero')
        return self


class ShaftOrders(ShaftForcing):
    """Forces and moments at orders of a shaft. All orders share one speed."""

    title: ClassVar[str] = "orders of a shaft"
    kind: Literal["shaft-orders"] = "shaft-orders"
    on: Name | None = None
    position: Position
    orders: tuple[Order, ...]

    @field_validator("orders")
    @classmethod
    def _some(cls, value: tuple[Order, ...]) -> tuple[Order, ...]:
        if not value:
            raise refuse("[]", "at least one order")
        return value

    def tones(self, speeds: Mapping[str, SpeedRange]) -> tuple[Tone, ...]:
        low, high = speeds[self.shaft]
        return tuple(
            Tone(
                source=f"{self.name}, order {order.order:g}",
                speed=self.shaft,
                order=order.order,
                low=low,
                high=high,
                on=self.on,
                position=self.position,
                force=phasor(order.force, order.phase),
                moment=phasor(order.moment, order.phase),
                phase_known=order.phase is not None,
            )
            for order in self.orders
        )
