"""Harmonic motion of the floor under every station, given as displacement, velocity or acceleration."""

from collections.abc import Mapping
from typing import ClassVar, Literal

from pydantic import model_validator

from detune.brief.condition import SpeedRange
from detune.brief.forcing.base import SteadyToneForcing, Tone, phasor
from detune.brief.statement import (
    Acceleration,
    Angle,
    AxisName,
    Direction,
    Length,
    Velocity,
    positive,
    refuse,
    unit_direction,
)


class BaseMotion(SteadyToneForcing):
    """Translation of the floor along `direction`, peak amplitude, constant over the frequency range.

    On a flexible floor this is the free motion, the one measured before the machine stands there.
    """

    title: ClassVar[str] = "harmonic base motion"
    kind: Literal["base-motion"] = "base-motion"
    direction: AxisName | Direction
    displacement: Length | None = None
    velocity: Velocity | None = None
    acceleration: Acceleration | None = None
    phase: Angle | None = None

    @model_validator(mode="after")
    def _one_of_three(self) -> "BaseMotion":
        unit_direction(self.direction, at="direction")
        stated = [
            key for key in ("displacement", "velocity", "acceleration") if getattr(self, key) is not None
        ]
        if len(stated) != 1:
            raise refuse(
                " and ".join(stated) or "no amplitude",
                'exactly one of "displacement", "velocity" and "acceleration"',
            )
        positive(getattr(self, stated[0]), "an amplitude", at=stated[0])
        return self

    def floor_direction(self) -> Direction | None:
        return unit_direction(self.direction)

    def tones(self, speeds: Mapping[str, SpeedRange]) -> tuple[Tone, ...]:
        low, high = self.band()
        # Displacement is v / (j w) or a / (j w)^2; a common phase of a single source has no effect.
        if self.displacement is not None:
            amplitude, power = self.displacement, 0
        elif self.velocity is not None:
            amplitude, power = self.velocity, -1
        else:
            assert self.acceleration is not None
            amplitude, power = self.acceleration, -2
        turn = {0: 1.0, -1: -1j, -2: -1.0}[power]
        x, y, z = phasor(unit_direction(self.direction), self.phase)
        return (
            Tone(
                source=self.name,
                speed=self.speed_name(),
                order=1.0,
                low=low,
                high=high,
                on=None,
                position=(0.0, 0.0, 0.0),
                base=(x * amplitude * turn, y * amplitude * turn, z * amplitude * turn),
                power=power,
                phase_known=self.phase is not None,
            ),
        )
