"""A free fall on to the floor, the machine on its mounts."""

import math
from typing import ClassVar, Literal

from pydantic import model_validator

from detune.brief.forcing.base import Forcing, Transient
from detune.brief.statement import Direction, Length, positive
from detune.ground.units import STANDARD_GRAVITY


class Drop(Forcing):
    """A fall from `height`: the machine lands with sqrt(2 g height), its mounts unloaded, and its weight acts.

    Motion is counted from the static equilibrium and relative to the floor it lands on, which is at rest.
    Accelerations are kinematic: an accelerometer that reads 1 g at rest shows 1 g more.
    """

    title: ClassVar[str] = "drop"
    kind: Literal["drop"] = "drop"
    height: Length

    @model_validator(mode="after")
    def _values(self) -> "Drop":
        positive(self.height, "a height", at="height")
        return self

    def floor_direction(self) -> Direction | None:
        return (0.0, 0.0, 1.0)

    def ground_moves(self) -> bool:
        return False

    def transients(self) -> tuple[Transient, ...]:
        landing = math.sqrt(2.0 * STANDARD_GRAVITY * self.height)
        return (Transient(self.name, velocity=landing, weight_acts=True, base=(0.0, 0.0, 1.0)),)
