"""A torque that acts for a while: a motor's start, a brake, a coasting rotor that is caught."""

from typing import ClassVar, Literal

from pydantic import model_validator

from detune.brief.forcing.base import Transient
from detune.brief.forcing.pulse_shape import PulseForcing
from detune.brief.statement import (
    AxisName,
    Direction,
    Moment,
    Name,
    refuse,
    unit_direction,
)


class TorquePulse(PulseForcing):
    """One pulse of torque on the frame about `axis`, peak `torque` with its sign, of one `shape` and whole `duration`.

    For starting, braking and coasting: a rotor that gains speed turns its frame the other way. The torque on the
    frame is the motor's air-gap torque for a motor mounted with what it drives elsewhere, and the difference of both
    couplings for a machine between two shafts; it is none for a set whose whole shaft line stands on one frame and
    whose speed does not change. Shapes as in IEC 60068-2-27; a trapezoid with its `rise` and `fall`, shares of the
    duration, is a run-up at steady torque. Torque is free: where on the body it acts does not matter.
    """

    title: ClassVar[str] = "torque pulse"
    kind: Literal["torque-pulse"] = "torque-pulse"
    on: Name | None = None
    axis: AxisName | Direction
    torque: Moment

    @model_validator(mode="after")
    def _values(self) -> "TorquePulse":
        unit_direction(self.axis, at="axis")
        if self.torque == 0.0:
            raise refuse("no torque", "a torque that is not zero", at="torque")
        self._draw(1.0)
        return self

    def transients(self) -> tuple[Transient, ...]:
        x, y, z = (self.torque * part for part in unit_direction(self.axis))
        return (Transient(self.name, pulse=self._pulse, on=self.on, moment=(x, y, z)),)
