"""Rotating unbalance: two quadrature components that grow with the square of the speed."""

import cmath
from collections.abc import Mapping
from typing import ClassVar, Literal

import numpy as np
from pydantic import model_validator

from detune.brief.condition import SpeedRange
from detune.brief.forcing.base import Complex3, ShaftForcing, Tone
from detune.brief.statement import (
    Angle,
    AxisName,
    BalanceGrade,
    Direction,
    Frequency,
    Mass,
    Name,
    Position,
    Unbalance,
    positive,
    refuse,
    unit_direction,
)
from detune.physics import balance
from detune.physics.orientation import axes_from_direction


class RotatingUnbalance(ShaftForcing):
    """An unbalance U = m e on a shaft, given as such or by balance grade.

    By grade: e_per * Omega = G (ISO 21940-11), so U = rotor_mass * G / Omega at `grade_speed`, the
    highest service speed the rotor was balanced for. The force is U Omega^2, turning about `axis` in the
    right-handed sense.
    """

    title: ClassVar[str] = "rotating unbalance"
    kind: Literal["rotating-unbalance"] = "rotating-unbalance"
    on: Name | None = None
    position: Position
    axis: AxisName | Direction
    unbalance: Unbalance | None = None
    grade: BalanceGrade | None = None
    rotor_mass: Mass | None = None
    grade_speed: Frequency | None = None
    phase: Angle | None = None

    @model_validator(mode="after")
    def _one_way(self) -> "RotatingUnbalance":
        unit_direction(self.axis, at="axis")
        by_grade = [self.grade, self.rotor_mass, self.grade_speed]
        if self.unbalance is not None:
            if any(value is not None for value in by_grade):
                raise refuse(
                    "unbalance and grade",
                    'either "unbalance", or "grade" with "rotor_mass" and "grade_speed"',
                )
            positive(self.unbalance, "an unbalance", at="unbalance")
            return self
        if any(value is None for value in by_grade):
            raise refuse(
                "no complete unbalance",
                '"unbalance", or all of "grade", "rotor_mass" and "grade_speed" (the highest service speed)',
            )
        for key, what in (("grade", "a grade"), ("rotor_mass", "a rotor mass"), ("grade_speed", "a speed")):
            positive(getattr(self, key), what, at=key)
        return self

    def unbalance_kg_m(self) -> float:
        """Return the unbalance m e in kg m."""
        if self.unbalance is not None:
            return self.unbalance
        assert self.grade is not None and self.rotor_mass is not None and self.grade_speed is not None
        return float(balance.permissible_unbalance(self.grade, self.rotor_mass, self.grade_speed))

    def tones(self, speeds: Mapping[str, SpeedRange]) -> tuple[Tone, ...]:
        low, high = speeds[self.shaft]
        # Turning from u towards v with axis = u x v: Re((u - j v) exp(j w t)) = u cos(wt) + v sin(wt).
        axes = axes_from_direction(np.array(unit_direction(self.axis)), None)
        turning = (axes[:, 0] - 1j * axes[:, 1]) * self.unbalance_kg_m() * cmath.exp(1j * (self.phase or 0.0))
        force: Complex3 = (complex(turning[0]), complex(turning[1]), complex(turning[2]))
        return (
            Tone(
                source=self.name,
                speed=self.shaft,
                order=1.0,
                low=low,
                high=high,
                on=self.on,
                position=self.position,
                force=force,
                power=2,
                phase_known=self.phase is not None,
            ),
        )
