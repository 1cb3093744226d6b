"""Floor motion given as one-third-octave velocity values, as site surveys and criteria print them."""

from collections.abc import Mapping
from typing import ClassVar, Literal

import numpy as np
from pydantic import PrivateAttr, ValidationInfo, model_validator

from detune.brief.condition import SpeedRange
from detune.brief.data_file import read_named
from detune.brief.forcing.base import Forcing, Noise, Tone
from detune.brief.forcing.density import one_way
from detune.brief.statement import (
    AxisName,
    Direction,
    Frequency,
    Text,
    Time,
    Velocity,
    positive,
    refuse,
    unit_direction,
)
from detune.physics.array_types import FloatArray
from detune.physics.band_spectra import spectrum_from_third_octaves, tones_from_third_octaves
from detune.physics.spectra import differentiated

ReadAs = Literal["tones", "noise"]


class BandBaseMotion(Forcing):
    """Translation of the floor along `direction`, rms velocity in each one-third-octave band.

    `centres` (nominal or exact, rising) with `velocity_rms`, or a CSV `file` with the columns
    `frequency [Hz]` and `velocity_rms [um/s]`. `read_as = "tones"`: each band's value is one tone that may
    stand anywhere in its band, all of them at once; `"noise"`: a flat density over the band, lasting
    `duration`. Left out, a band is read as a tone, the worse of the two for a light mount, and that is printed
    as assumed. Bands that are not stated hold no motion.
    """

    title: ClassVar[str] = "one-third-octave base motion"
    kind: Literal["band-base-motion"] = "band-base-motion"
    direction: AxisName | Direction
    centres: tuple[Frequency, ...] | None = None
    velocity_rms: tuple[Velocity, ...] | None = None
    file: Text | None = None
    read_as: ReadAs | None = None
    duration: Time | None = None

    _centre: FloatArray = PrivateAttr()
    _rms: FloatArray = PrivateAttr()

    @model_validator(mode="after")
    def _values(self, info: ValidationInfo) -> "BandBaseMotion":
        unit_direction(self.direction, at="direction")
        listed = self.centres is not None or self.velocity_rms is not None
        way = one_way({"velocity_rms": listed, "file": self.file is not None})
        if way == "file":
            assert self.file is not None
            table = read_named(info, self.file, {"frequency": "frequency", "velocity_rms": "velocity"})
            centre, rms = table.columns["frequency"], table.columns["velocity_rms"]
        elif self.centres is None or self.velocity_rms is None:
            raise refuse("an incomplete spectrum", '"centres" and "velocity_rms" together')
        elif len(self.centres) != len(self.velocity_rms):
            found = f"{len(self.centres)} centres and {len(self.velocity_rms)} values"
            raise refuse(found, "one velocity for each centre", at="velocity_rms")
        else:
            centre, rms = np.array(self.centres), np.array(self.velocity_rms)
        self._check_bands(centre, rms, "file" if way == "file" else "centres")
        if self.read_as == "noise" and self.duration is None:
            raise refuse("noise without a duration", 'a "duration", for the expected extreme')
        if self.read_as != "noise" and self.duration is not None:
            raise refuse("duration", 'no "duration" where bands are read as tones', at="duration")
        if self.duration is not None:
            positive(self.duration, "a duration", at="duration")
        self._centre, self._rms = centre, rms
        return self

    def _check_bands(self, centre: FloatArray, rms: FloatArray, at: str) -> None:
        found = self.file if at == "file" and self.file is not None else list(centre)
        if np.any(rms < 0.0):
            where = "file" if at == "file" else "velocity_rms"
            raise refuse(found, "rms velocities of zero or more", at=where)
        try:
            spectrum_from_third_octaves(centre, rms)
        except ValueError as error:
            raise refuse(found, f"one-third-octave bands: {error}", at=at) from None
        if not np.any(rms > 0.0):
            raise refuse(found, "at least one band with a velocity above zero", at=at)

    def floor_direction(self) -> Direction | None:
        return unit_direction(self.direction)

    def data_files(self) -> tuple[str, ...]:
        return (self.file,) if self.file is not None else ()

    def assumed(self) -> tuple[str, ...]:
        if self.read_as is not None:
            return ()
        return (f"{self.name}: each one-third-octave value is read as a tone anywhere in its band",)

    def tones(self, speeds: Mapping[str, SpeedRange]) -> tuple[Tone, ...]:
        if self.read_as == "noise":
            return ()
        x, y, z = unit_direction(self.direction)
        low, high, peak = tones_from_third_octaves(self._centre, self._rms)
        return tuple(
            Tone(
                broadband=True,
                source=f"{self.name}, {centre:g} Hz band",
                speed=f"{self.name}, {centre:g} Hz band",
                order=1.0,
                low=float(low[band]),
                high=float(high[band]),
                on=None,
                position=(0.0, 0.0, 0.0),
                # Displacement is v / (j w).
                base=(-1j * x * peak[band], -1j * y * peak[band], -1j * z * peak[band]),
                power=-1,
            )
            for band, centre in enumerate(self._centre)
            if peak[band] > 0.0
        )

    def noises(self) -> tuple[Noise, ...]:
        if self.read_as != "noise":
            return ()
        assert self.duration is not None
        spectrum = differentiated(spectrum_from_third_octaves(self._centre, self._rms), 1)
        return (Noise(self.name, spectrum, self.duration, base=unit_direction(self.direction)),)
