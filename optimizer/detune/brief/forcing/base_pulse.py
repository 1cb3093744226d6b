"""A shock pulse of the floor's acceleration."""

from typing import ClassVar, Literal

from pydantic import model_validator

from detune.brief.forcing.base import Transient
from detune.brief.forcing.pulse_shape import PulseForcing
from detune.brief.statement import (
    Acceleration,
    AxisName,
    Direction,
    positive,
    unit_direction,
)


class BasePulse(PulseForcing):
    """One pulse of floor acceleration along `direction`: peak `amplitude`, whole `duration`.

    Shapes as in IEC 60068-2-27. The floor is at rest before the pulse and keeps the velocity the pulse gives it, the
    area under the pulse, so that absolute velocities are those of a floor that goes on moving, and absolute
    displacements have no largest value: motion relative to the floor is what a limit on travel is put on. On a
    flexible floor this is the free motion. `rise` and `fall` are shares of the duration, for a trapezoid alone.
    """

    title: ClassVar[str] = "base pulse"
    kind: Literal["base-pulse"] = "base-pulse"
    direction: AxisName | Direction
    amplitude: Acceleration

    @model_validator(mode="after")
    def _values(self) -> "BasePulse":
        unit_direction(self.direction, at="direction")
        positive(self.amplitude, "an amplitude", at="amplitude")
        self._draw(self.amplitude)
        return self

    def floor_direction(self) -> Direction | None:
        return unit_direction(self.direction)

    def transients(self) -> tuple[Transient, ...]:
        return (Transient(self.name, pulse=self._pulse, base=unit_direction(self.direction)),)
