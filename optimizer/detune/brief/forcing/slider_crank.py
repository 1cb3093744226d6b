"""Inertia forces and couples of slider-cranks, first and second order of the shaft."""

from collections.abc import Mapping
from typing import ClassVar, Literal

import numpy as np
from pydantic import model_validator

from detune.brief.condition import SpeedRange
from detune.brief.forcing.base import ShaftForcing, Tone
from detune.brief.statement import (
    Angle,
    AxisName,
    Direction,
    Length,
    Mass,
    Name,
    Position,
    Statement,
    positive,
    refuse,
    unit_direction,
)
from detune.physics import slider_crank


class Cylinder(Statement):
    """One cylinder: its place along the shaft, its crank's angle past its own dead centre, its direction."""

    offset: Length
    crank_angle: Angle
    direction: AxisName | Direction = "z"


class SliderCrank(ShaftForcing):
    """Reciprocating inertia of one or more equal cylinders on one crankshaft.

    To second order in crank radius over rod length; the rotating part of the crank is a
    `rotating-unbalance` of its own. `position` is the point of the shaft from which the cylinders'
    offsets are measured along `axis`.
    """

    title: ClassVar[str] = "slider-crank inertia, primary and secondary"
    kind: Literal["slider-crank"] = "slider-crank"
    on: Name | None = None
    position: Position
    axis: AxisName | Direction
    reciprocating_mass: Mass
    crank_radius: Length
    rod_length: Length
    cylinders: tuple[Cylinder, ...]
    phase: Angle | None = None

    @model_validator(mode="after")
    def _values(self) -> "SliderCrank":
        unit_direction(self.axis, at="axis")
        positive(self.reciprocating_mass, "a reciprocating mass", at="reciprocating_mass")
        positive(self.crank_radius, "a crank radius", at="crank_radius")
        if self.rod_length <= self.crank_radius:
            raise refuse(
                f"rod_length {self.rod_length:g} m", "a rod longer than the crank radius", at="rod_length"
            )
        if not self.cylinders:
            raise refuse("[]", "at least one cylinder", at="cylinders")
        for cylinder in self.cylinders:
            unit_direction(cylinder.direction, at="cylinders")
        return self

    def tones(self, speeds: Mapping[str, SpeedRange]) -> tuple[Tone, ...]:
        low, high = speeds[self.shaft]
        axis = np.array(unit_direction(self.axis))
        found = slider_crank.reciprocating_forces(
            reciprocating_mass=self.reciprocating_mass,
            crank_radius=self.crank_radius,
            rod_length=self.rod_length,
            crank_angle=np.array([cylinder.crank_angle for cylinder in self.cylinders]) + (self.phase or 0.0),
            direction=np.array([unit_direction(cylinder.direction) for cylinder in self.cylinders]),
            position=np.array([cylinder.offset * axis for cylinder in self.cylinders]),
        )
        largest = max(float(np.abs(found.force).max()), float(np.abs(found.moment).max()))
        tones = []
        for order in (1, 2):
            # The phasors come per omega_shaft^2; a tone grows with its own omega = order * omega_shaft.
            force = found.force[order - 1] / order**2
            moment = found.moment[order - 1] / order**2
            if max(float(np.abs(force).max()), float(np.abs(moment).max())) <= 1e-12 * largest:
                continue
            tones.append(
                Tone(
                    source=f"{self.name}, order {order}",
                    speed=self.shaft,
                    order=float(order),
                    low=low,
                    high=high,
                    on=self.on,
                    position=self.position,
                    force=(complex(force[0]), complex(force[1]), complex(force[2])),
                    moment=(complex(moment[0]), complex(moment[1]), complex(moment[2])),
                    power=2,
                    phase_known=self.phase is not None,
                )
            )
        return tuple(tones)
