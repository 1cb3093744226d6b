"""A harmonic force or moment of constant amplitude at a stated place."""

from collections.abc import Mapping
from typing import ClassVar, Literal

from pydantic import model_validator

from detune.brief.condition import SpeedRange
from detune.brief.forcing.base import SteadyToneForcing, Tone, phasor
from detune.brief.statement import Angle, ForceVector, MomentVector, Name, Position, refuse


class HarmonicForce(SteadyToneForcing):
    """Force (N) and moment (N m) amplitudes, peak, in phase with each other."""

    title: ClassVar[str] = "harmonic force or moment"
    kind: Literal["harmonic-force"] = "harmonic-force"
    on: Name | None = None
    position: Position
    force: ForceVector = (0.0, 0.0, 0.0)
    moment: MomentVector = (0.0, 0.0, 0.0)
    phase: Angle | None = None

    @model_validator(mode="after")
    def _something_acts(self) -> "HarmonicForce":
        if not any(self.force) and not any(self.moment):
            raise refuse("no force and no moment", 'a "force" or a "moment" that is not zero')
        return self

    def tones(self, speeds: Mapping[str, SpeedRange]) -> tuple[Tone, ...]:
        low, high = self.band()
        return (
            Tone(
                source=self.name,
                speed=self.speed_name(),
                order=1.0,
                low=low,
                high=high,
                on=self.on,
                position=self.position,
                force=phasor(self.force, self.phase),
                moment=phasor(self.moment, self.phase),
                phase_known=self.phase is not None,
            ),
        )
