"""The alternating torque that a driven or driving machine puts on its frame."""

from collections.abc import Mapping
from typing import Any, ClassVar, Literal

import numpy as np
from pydantic import field_validator, model_validator

from detune.brief.condition import SpeedRange
from detune.brief.forcing.base import ShaftForcing, Tone, phasor
from detune.brief.statement import (
    Angle,
    AxisName,
    Direction,
    Moment,
    Name,
    Ratio,
    Statement,
    positive,
    refuse,
    unit_direction,
)


class TorqueOrder(Statement):
    """One order of the shaft and the amplitude of its torque, peak."""

    order: Ratio
    torque: Moment
    phase: Angle | None = None

    @model_validator(mode="after")
    def _values(self) -> "TorqueOrder":
        positive(self.order, "an order", at="order")
        positive(self.torque, "a torque", at="torque")
        return self


class TorqueReaction(ShaftForcing):
    """Alternating torque about `axis` at orders of a shaft, constant over its speed range.

    The mean torque does not shake: it turns the machine by a steady angle and is stated as the moment of a
    [[steady_load]], where load, sag and clearance see it.
    """

    title: ClassVar[str] = "torque reaction"
    kind: Literal["torque-reaction"] = "torque-reaction"
    on: Name | None = None
    axis: AxisName | Direction
    orders: tuple[TorqueOrder, ...]

    @model_validator(mode="before")
    @classmethod
    def _no_mean(cls, data: Any) -> Any:
        if isinstance(data, dict):
            for key in ("mean_torque", "steady_torque", "torque"):
                if key in data:
                    expected = 'the mean torque as the "moment" of a [[steady_load]], and here its "orders"'
                    raise refuse(key, expected, at=key)
        return data

    @field_validator("axis")
    @classmethod
    def _not_zero(cls, value: AxisName | Direction) -> AxisName | Direction:
        unit_direction(value)
        return value

    @field_validator("orders")
    @classmethod
    def _some(cls, value: tuple[TorqueOrder, ...]) -> tuple[TorqueOrder, ...]:
        if not value:
            raise refuse("[]", "at least one order")
        return value

    def tones(self, speeds: Mapping[str, SpeedRange]) -> tuple[Tone, ...]:
        low, high = speeds[self.shaft]
        axis = np.array(unit_direction(self.axis))
        tones = []
        for each in self.orders:
            x, y, z = (each.torque * axis).tolist()
            tones.append(
                Tone(
                    source=f"{self.name}, order {each.order:g}",
                    speed=self.shaft,
                    order=each.order,
                    low=low,
                    high=high,
                    on=self.on,
                    # A couple has no place; the body's own origin will do.
                    position=(0.0, 0.0, 0.0),
                    moment=phasor((x, y, z), each.phase),
                    phase_known=each.phase is not None,
                )
            )
        return tuple(tones)
