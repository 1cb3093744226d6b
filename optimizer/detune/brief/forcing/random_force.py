"""A random force or couple on a body, given as a power spectral density."""

from typing import ClassVar, Literal

from pydantic import PrivateAttr, ValidationInfo, model_validator

from detune.brief.forcing.base import Forcing, Noise
from detune.brief.forcing.density import drawn_density, one_way, sloped_density, tabulated_density
from detune.brief.statement import (
    AxisName,
    Direction,
    ForceDensity,
    Frequency,
    Name,
    Position,
    Slope,
    Text,
    Time,
    positive,
    refuse,
    unit_direction,
)
from detune.physics.spectra import PowerSpectralDensity


class RandomForce(Forcing):
    """A Gaussian force along `direction` at `position`, one-sided density in N^2/Hz, lasting `duration`.

    `couple_arm` gives the couple (about x, y and z) that goes with each newton of it, as lengths; without a
    `direction` only the couple acts. The density is stated as `break_points`, as `corners` with `slopes`
    between them and the `level` at one corner, or as a CSV `file` with the columns `frequency [Hz]` and
    `force_psd [N^2/Hz]`.
    """

    title: ClassVar[str] = "random force"
    kind: Literal["random-force"] = "random-force"
    on: Name | None = None
    position: Position
    direction: AxisName | Direction | None = None
    couple_arm: Position | None = None
    duration: Time
    break_points: tuple[tuple[Frequency, ForceDensity], ...] | None = None
    corners: tuple[Frequency, ...] | None = None
    slopes: tuple[Slope, ...] | None = None
    level: tuple[Frequency, ForceDensity] | None = None
    file: Text | None = None

    _spectrum: PowerSpectralDensity = PrivateAttr()

    @model_validator(mode="after")
    def _values(self, info: ValidationInfo) -> "RandomForce":
        if self.direction is not None:
            unit_direction(self.direction, at="direction")
        elif self.couple_arm is None or not any(self.couple_arm):
            raise refuse(
                "no force and no couple", 'a "direction" of the force, or a "couple_arm" that is not zero'
            )
        positive(self.duration, "a duration", at="duration")
        self._spectrum = self._drawn(info)
        return self

    def _drawn(self, info: ValidationInfo) -> PowerSpectralDensity:
        by_slopes = [self.corners, self.slopes, self.level]
        way = one_way(
            {
                "break_points": self.break_points is not None,
                "slopes": any(value is not None for value in by_slopes),
                "file": self.file is not None,
            }
        )
        if way == "file":
            assert self.file is not None
            return tabulated_density(info, self.file, {"force_psd": 0})
        if way == "slopes":
            return sloped_density(self.corners, self.slopes, self.level)
        assert self.break_points is not None
        return drawn_density(self.break_points, "break_points")

    def data_files(self) -> tuple[str, ...]:
        return (self.file,) if self.file is not None else ()

    def noises(self) -> tuple[Noise, ...]:
        force = (0.0, 0.0, 0.0) if self.direction is None else unit_direction(self.direction)
        arm = self.couple_arm or (0.0, 0.0, 0.0)
        return (
            Noise(
                self.name,
                self._spectrum,
                self.duration,
                on=self.on,
                position=self.position,
                force=force,
                moment=arm,
            ),
        )
