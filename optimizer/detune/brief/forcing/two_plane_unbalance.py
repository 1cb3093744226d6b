"""Unbalance left in two planes of a rotor, the phase between them unknown."""

from collections.abc import Mapping
from typing import ClassVar, Literal

import numpy as np
from pydantic import model_validator

from detune.brief.condition import SpeedRange
from detune.brief.forcing.base import ShaftForcing, Tone
from detune.brief.statement import (
    AxisName,
    BalanceGrade,
    Direction,
    Frequency,
    Mass,
    Name,
    Position,
    Ratio,
    Unbalance,
    positive,
    refuse,
    unit_direction,
)
from detune.physics import balance
from detune.physics.orientation import axes_from_direction


class TwoPlaneUnbalance(ShaftForcing):
    """An unbalance in each of two correction planes, turning about `axis` in the right-handed sense.

    `unbalance` gives one for each of the two `positions`; or `grade`, `rotor_mass` and `grade_speed` give the
    whole of ISO 21940-11, split between the planes as the centre of mass stands between them: `shares`. The phase
    between the planes is unknown: their amplitudes add linearly, which is the worst over every phase, in phase and
    opposed included.
    """

    title: ClassVar[str] = "two-plane unbalance"
    kind: Literal["two-plane-unbalance"] = "two-plane-unbalance"
    on: Name | None = None
    axis: AxisName | Direction
    positions: tuple[Position, Position]
    unbalance: tuple[Unbalance, Unbalance] | None = None
    grade: BalanceGrade | None = None
    rotor_mass: Mass | None = None
    grade_speed: Frequency | None = None
    shares: tuple[Ratio, Ratio] | None = None

    @model_validator(mode="after")
    def _values(self) -> "TwoPlaneUnbalance":
        axis = np.array(unit_direction(self.axis, at="axis"))
        apart = np.array(self.positions[1]) - np.array(self.positions[0])
        if abs(float(axis @ apart)) <= 1e-9 * max(1e-9, float(np.linalg.norm(apart))):
            raise refuse("two planes at one place", "two positions apart along the axis", at="positions")
        by_grade = (self.grade, self.rotor_mass, self.grade_speed, self.shares)
        if self.unbalance is not None:
            if any(value is not None for value in by_grade):
                raise refuse("unbalance and grade", 'either "unbalance", or "grade" with its keys')
            if min(self.unbalance) < 0.0 or max(self.unbalance) <= 0.0:
                raise refuse(
                    list(self.unbalance), "unbalances of zero or more, one above zero", at="unbalance"
                )
            return self
        if any(value is None for value in by_grade[:3]):
            raise refuse(
                "no complete unbalance",
                '"unbalance", or all of "grade", "rotor_mass" and "grade_speed" (the highest service speed)',
            )
        for key, what in (("grade", "a grade"), ("rotor_mass", "a rotor mass"), ("grade_speed", "a speed")):
            positive(getattr(self, key), what, at=key)
        if self.shares is not None and (min(self.shares) < 0.0 or abs(sum(self.shares) - 1.0) > 1e-6):
            raise refuse(list(self.shares), "two shares of zero or more that add to 1", at="shares")
        return self

    def assumed(self) -> tuple[str, ...]:
        if self.unbalance is not None or self.shares is not None:
            return ()
        return (f"{self.name}: the unbalance of the grade is split evenly between the two planes",)

    def unbalances(self) -> tuple[float, float]:
        """Return the unbalance m e of each plane in kg m."""
        if self.unbalance is not None:
            return self.unbalance
        assert self.grade is not None and self.rotor_mass is not None and self.grade_speed is not None
        whole = float(balance.permissible_unbalance(self.grade, self.rotor_mass, self.grade_speed))
        first, second = self.shares or (0.5, 0.5)
        return first * whole, second * whole

    def tones(self, speeds: Mapping[str, SpeedRange]) -> tuple[Tone, ...]:
        low, high = speeds[self.shaft]
        axes = axes_from_direction(np.array(unit_direction(self.axis)), None)
        tones = []
        for plane, (position, amount) in enumerate(zip(self.positions, self.unbalances(), strict=True)):
            # Turning from u towards v with axis = u x v: Re((u - j v) exp(j w t)) = u cos(wt) + v sin(wt).
            x, y, z = ((axes[:, 0] - 1j * axes[:, 1]) * amount).tolist()
            if amount == 0.0:
                continue
            tones.append(
                Tone(
                    source=f"{self.name}, plane {plane + 1}",
                    speed=self.shaft,
                    order=1.0,
                    low=low,
                    high=high,
                    on=self.on,
                    position=position,
                    force=(x, y, z),
                    power=2,
                )
            )
        return tuple(tones)
