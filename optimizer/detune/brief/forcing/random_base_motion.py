"""Random motion of the floor, given as a power spectral density."""

from typing import ClassVar, Literal

from pydantic import PrivateAttr, ValidationInfo, model_validator

from detune.brief.forcing.base import Forcing, Noise
from detune.brief.forcing.density import drawn_density, one_way, sloped_density, tabulated_density
from detune.brief.statement import (
    AccelerationDensity,
    AxisName,
    Direction,
    DisplacementDensity,
    Frequency,
    Slope,
    Text,
    Time,
    VelocityDensity,
    positive,
    unit_direction,
)
from detune.physics.spectra import PowerSpectralDensity, differentiated


class RandomBaseMotion(Forcing):
    """Gaussian translation of the floor along `direction`, one-sided density, lasting `duration`.

    In one of five ways: `break_points` of the acceleration density ([frequency, density], straight on log-log
    axes; the same frequency twice makes a step), `velocity_break_points` or `displacement_break_points`, which
    are converted exactly; `corners` with `slopes` between them and the `level` at one corner; or a CSV `file`
    with the columns `frequency [Hz]` and one of `acceleration_psd`, `velocity_psd`, `displacement_psd`.
    A slope of 3 dB/octave is the exponent 0.99658 exactly. On a flexible floor this is the free motion, the one
    measured before the machine stands there.
    """

    title: ClassVar[str] = "random base motion"
    kind: Literal["random-base-motion"] = "random-base-motion"
    direction: AxisName | Direction
    duration: Time
    break_points: tuple[tuple[Frequency, AccelerationDensity], ...] | None = None
    velocity_break_points: tuple[tuple[Frequency, VelocityDensity], ...] | None = None
    displacement_break_points: tuple[tuple[Frequency, DisplacementDensity], ...] | None = None
    corners: tuple[Frequency, ...] | None = None
    slopes: tuple[Slope, ...] | None = None
    level: tuple[Frequency, AccelerationDensity] | None = None
    file: Text | None = None

    _spectrum: PowerSpectralDensity = PrivateAttr()

    @model_validator(mode="after")
    def _values(self, info: ValidationInfo) -> "RandomBaseMotion":
        unit_direction(self.direction, at="direction")
        positive(self.duration, "a duration", at="duration")
        self._spectrum = self._drawn(info)
        return self

    def _drawn(self, info: ValidationInfo) -> PowerSpectralDensity:
        by_slopes = [self.corners, self.slopes, self.level]
        way = one_way(
            {
                "break_points": self.break_points is not None,
                "velocity_break_points": self.velocity_break_points is not None,
                "displacement_break_points": self.displacement_break_points is not None,
                "slopes": any(value is not None for value in by_slopes),
                "file": self.file is not None,
            }
        )
        if way == "file":
            assert self.file is not None
            kinds = {"acceleration_psd": 0, "velocity_psd": 1, "displacement_psd": 2}
            return tabulated_density(info, self.file, kinds)
        if way == "slopes":
            return sloped_density(self.corners, self.slopes, self.level)
        points, times = {
            "break_points": (self.break_points, 0),
            "velocity_break_points": (self.velocity_break_points, 1),
            "displacement_break_points": (self.displacement_break_points, 2),
        }[way]
        assert points is not None
        return differentiated(drawn_density(points, way), times)

    def floor_direction(self) -> Direction | None:
        return unit_direction(self.direction)

    def data_files(self) -> tuple[str, ...]:
        return (self.file,) if self.file is not None else ()

    def noises(self) -> tuple[Noise, ...]:
        return (Noise(self.name, self._spectrum, self.duration, base=unit_direction(self.direction)),)
