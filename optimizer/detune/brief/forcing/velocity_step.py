"""A sudden change of the floor's velocity."""

from typing import ClassVar, Literal

from pydantic import model_validator

from detune.brief.forcing.base import Forcing, Transient
from detune.brief.statement import AxisName, Direction, Velocity, positive, unit_direction


class VelocityStep(Forcing):
    """The floor gains `velocity` along `direction` at once and keeps it: a shock far shorter than any mode.

    It is at rest before; as it goes on moving, absolute displacements have no largest value.

    On a flexible floor this is the free motion.
    """

    title: ClassVar[str] = "velocity step of the floor"
    kind: Literal["velocity-step"] = "velocity-step"
    direction: AxisName | Direction
    velocity: Velocity

    @model_validator(mode="after")
    def _values(self) -> "VelocityStep":
        unit_direction(self.direction, at="direction")
        positive(self.velocity, "a velocity", at="velocity")
        return self

    def floor_direction(self) -> Direction | None:
        return unit_direction(self.direction)

    def transients(self) -> tuple[Transient, ...]:
        return (Transient(self.name, velocity=self.velocity, base=unit_direction(self.direction)),)
