"""Limit curves of rms velocity in one-third-octave bands: vibration criteria, base curves, a mask of one's own."""

from typing import ClassVar, Literal, get_args

import numpy as np
from numpy.typing import NDArray
from pydantic import PrivateAttr, ValidationInfo, model_validator

from detune.brief.allowable.base import BandAllowable, above_zero, direction_words
from detune.brief.allowable.views import Floats, Places, Responses, ResponseView
from detune.brief.data_file import read_named
from detune.brief.statement import (
    AxisName,
    Direction,
    Frequency,
    Name,
    Ratio,
    Text,
    Velocity,
    refuse,
    unit_direction,
)
from detune.physics.band_spectra import band_index_of_centre
from detune.physics.criteria import (
    HIGHEST_LINE_FREQUENCY,
    VELOCITY_LINES,
    iso_2631_base_curve,
    velocity_line,
)
from detune.physics.octaves import band_indices, nominal_centre

FLOOR = "floor"
BASE_CURVE = "ISO 2631-2 base curve"
Criterion = Literal[
    "workshop",
    "office",
    "residential",
    "operating theatre",
    "VC-A",
    "VC-B",
    "VC-C",
    "VC-D",
    "VC-E",
    "VC-F",
    "VC-G",
    "ISO 2631-2 base curve",
]
LOWEST_OF_BASE_CURVE = 4.0


class BandLimit(BandAllowable):
    """Rms velocity along `direction` at the point `at`, or of the "floor", below a curve in every band it covers.

    `criterion`: a named velocity line (from 4 or 1 Hz up to 80 Hz) in its `edition`, "inch" (VC-A 50.8 um/s) or the
    rounded "metric" one (50 um/s); or the base curve of ISO 2631-2:1989, times `multiplier`. Or a mask of one's
    own, `centres` with `velocity_rms`, or a CSV `file` with the columns `frequency [Hz]` and `velocity_rms`.
    Bands outside the curve are not limited.
    """

    title: ClassVar[str] = "one-third-octave velocity"
    unit: ClassVar[str] = "ratio"
    kind: Literal["band-limit"] = "band-limit"
    at: Name
    direction: AxisName | Direction
    criterion: Criterion | None = None
    edition: Literal["inch", "metric"] | None = None
    multiplier: Ratio | None = None
    centres: tuple[Frequency, ...] | None = None
    velocity_rms: tuple[Velocity, ...] | None = None
    file: Text | None = None

    _index: NDArray[np.int64] = PrivateAttr()
    _limit: Floats = PrivateAttr()

    @model_validator(mode="after")
    def _values(self, info: ValidationInfo) -> "BandLimit":
        unit_direction(self.direction, at="direction")
        stated = [key for key in ("criterion", "velocity_rms", "file") if getattr(self, key) is not None]
        if len(stated) != 1:
            expected = 'exactly one of "criterion", "velocity_rms" (with "centres") and "file"'
            raise refuse(" and ".join(stated) or "no curve", expected)
        if self.criterion is not None:
            self._named(self.criterion)
            return self
        for key in ("edition", "multiplier"):
            if getattr(self, key) is not None:
                raise refuse(key, f'no "{key}" beside a mask of your own', at=key)
        self._own(info)
        return self

    def _named(self, criterion: str) -> None:
        if self.centres is not None:
            raise refuse("centres", 'no "centres" beside a named criterion', at="centres")
        if criterion == BASE_CURVE:
            if self.edition is not None:
                raise refuse("edition", 'no "edition" of the base curve', at="edition")
            if self.multiplier is None:
                raise refuse("no multiplier", '"multiplier" of the base curve, 1 for the curve itself')
            above_zero(self.multiplier, "a multiplier", at="multiplier")
            self._index = band_indices(LOWEST_OF_BASE_CURVE, HIGHEST_LINE_FREQUENCY)
            self._limit = iso_2631_base_curve(nominal_centre(self._index), self.multiplier)
            return
        if self.multiplier is not None:
            raise refuse("multiplier", f'no "multiplier": only {BASE_CURVE} has one', at="multiplier")
        self._index = band_indices(VELOCITY_LINES[criterion].lowest, HIGHEST_LINE_FREQUENCY)
        self._limit = velocity_line(criterion, nominal_centre(self._index), self.edition or "inch")

    def _own(self, info: ValidationInfo) -> None:
        at = "file" if self.file is not None else "centres"
        if self.file is not None:
            table = read_named(info, self.file, {"frequency": "frequency", "velocity_rms": "velocity"})
            centre, limit = table.columns["frequency"], table.columns["velocity_rms"]
        elif self.centres is None or self.velocity_rms is None:
            raise refuse("velocity_rms", '"centres" and "velocity_rms" together')
        elif len(self.centres) != len(self.velocity_rms) or not self.centres:
            counted = f"{len(self.centres)} centres and {len(self.velocity_rms)} limits"
            raise refuse(counted, "one limit for each centre", at="velocity_rms")
        else:
            centre, limit = np.array(self.centres), np.array(self.velocity_rms)
        found: object = self.file if self.file is not None else [float(value) for value in centre]
        try:
            index = band_index_of_centre(centre)
        except ValueError as error:
            raise refuse(found, f"one-third-octave bands: {error}", at=at) from None
        if np.any(np.diff(index) <= 0):
            raise refuse(found, "centre frequencies that rise, each band once", at=at)
        if np.any(limit <= 0.0):
            raise refuse(found, "limits above zero in every band", at="file" if self.file else "velocity_rms")
        self._index, self._limit = index, limit

    def data_files(self) -> tuple[str, ...]:
        return (self.file,) if self.file is not None else ()

    def assumed(self) -> tuple[str, ...]:
        if self.criterion is None:
            return ()
        low, high = (float(nominal_centre(index)) for index in (self._index[0], self._index[-1]))
        if self.criterion == BASE_CURVE:
            source = "ISO 2631-2:1989, vertical axis, from memory"
        else:
            left = "" if self.edition else "; the edition in inches is taken"
            source = VELOCITY_LINES[self.criterion].source + left
        return (f"{self.criterion}: one-third-octave bands from {low:g} to {high:g} Hz ({source})",)

    def places(self, places: Places) -> tuple[str, ...]:
        return (self.at,)

    def points_named(self) -> tuple[str, ...]:
        return () if self.at == FLOOR else (self.at,)

    def along(self) -> Direction:
        return unit_direction(self.direction)

    def bands(self) -> tuple[NDArray[np.int64], Floats]:
        return self._index, self._limit

    def observed(self, view: ResponseView, place: str) -> Responses:
        return view.floor_motion(rate=1) if place == FLOOR else view.motion(place, rate=1)

    def quantity(self) -> str:
        curve: str = self.criterion or "the stated mask"
        if self.multiplier is not None and self.multiplier != 1.0:
            curve = f"{self.multiplier:g} times the {curve}"
        return f"{self.title} {direction_words(self.direction)}, rms over {curve}"


assert set(get_args(Criterion)) == {*VELOCITY_LINES, BASE_CURVE}
