"""A measured time history from a CSV file: used directly, as a density, or as lines."""

import cmath
from collections.abc import Mapping
from typing import ClassVar, Literal

import numpy as np
from pydantic import PrivateAttr, ValidationInfo, model_validator

from detune.brief.condition import SpeedRange
from detune.brief.data_file import DataFileFault, DataTable, read_named
from detune.brief.forcing.base import Forcing, Noise, Tone, Transient
from detune.brief.forcing.fixed_lines import MOST_LINES, FixedLine, line_tones
from detune.brief.statement import (
    AxisName,
    Direction,
    Frequency,
    Name,
    Position,
    Ratio,
    Text,
    Time,
    positive,
    refuse,
    unit_direction,
)
from detune.physics import records
from detune.physics.array_types import FloatArray
from detune.physics.spectra import PowerSpectralDensity

FILLED = 8
DEGREE = {"mean": 0, "line": 1}


class MeasuredRecord(Forcing):
    """A record along `direction`: of the floor's acceleration, or of a force at `position` on a body.

    The CSV `file` holds the columns `time [s]` and `acceleration` or `force`, evenly sampled. `detrend` takes
    away the record's mean or straight line, or nothing; `resample` brings it to another sample rate. `use`:
    `"time"` simulates it as it stands, with the motion that follows it; `"spectrum"` takes its density by Welch's
    method (Hann window, half overlap) in segments of `segment` and lets it last `duration`; `"lines"` takes it as
    one period of a motion that repeats for ever, the strongest lines that together hold `share` of its mean square
    (0.9999 where left out). Used in time, a record is filled in between its samples as a band-limited signal
    (eightfold); `between = "straight"` joins them by straight lines, which lowers what has few samples a cycle (by
    3 % at ten).
    """

    title: ClassVar[str] = "measured record"
    kind: Literal["measured-record"] = "measured-record"
    direction: AxisName | Direction
    file: Text
    use: Literal["time", "spectrum", "lines"]
    detrend: Literal["none", "mean", "line"]
    resample: Frequency | None = None
    between: Literal["band-limited", "straight"] | None = None
    segment: Time | None = None
    duration: Time | None = None
    share: Ratio | None = None
    on: Name | None = None
    position: Position | None = None

    _quantity: str = PrivateAttr()
    _record: FloatArray = PrivateAttr()
    _rate: float = PrivateAttr()
    _spectrum: PowerSpectralDensity | None = PrivateAttr(default=None)
    _segments: int = PrivateAttr(default=0)
    _lines: tuple[FixedLine, ...] = PrivateAttr(default=())
    _held: float = PrivateAttr(default=1.0)

    @model_validator(mode="after")
    def _values(self, info: ValidationInfo) -> "MeasuredRecord":
        unit_direction(self.direction, at="direction")
        self._check_keys()
        table = read_named(
            info, self.file, {"time": "time"}, {"acceleration": "acceleration", "force": "force"}
        )
        self._quantity = "force" if "force" in table.columns else "acceleration"
        self._check_place()
        try:
            self._read(table)
        except DataFileFault as fault:
            raise refuse(self.file, str(fault), at="file") from None
        except ValueError as error:
            raise refuse(self.file, f"a record that can be used: {error} ({self.file})", at="file") from None
        return self

    def _check_keys(self) -> None:
        wanted = {"time": (), "spectrum": ("segment", "duration"), "lines": ()}[self.use]
        allowed = {*wanted, *(("share",) if self.use == "lines" else ())}
        for key in ("segment", "duration", "share"):
            value = getattr(self, key)
            if value is None and key in wanted:
                raise refuse(f'use = "{self.use}"', f'also "{key}"')
            if value is not None and key not in allowed:
                raise refuse(key, f'no "{key}" where use = "{self.use}"', at=key)
            if value is not None:
                positive(value, f"a {key}", at=key)
        if self.between is not None and self.use != "time":
            raise refuse("between", f'no "between" where use = "{self.use}"', at="between")
        if self.resample is not None:
            positive(self.resample, "a sample rate", at="resample")

    def _check_place(self) -> None:
        if self._quantity == "force" and self.position is None:
            raise refuse("no position", 'the "position" where the force acts')
        if self._quantity != "force" and (self.position is not None or self.on is not None):
            raise refuse(
                "position", 'no "position" and no "on": the floor moves under every station', at="position"
            )

    def _read(self, table: DataTable) -> None:
        time = table.columns["time"]
        table.refuse_falling("time")
        try:
            rate = records.sample_rate(time)
        except records.RecordFault as fault:
            if fault.row is None:
                raise
            table.refuse_rows(
                np.arange(len(time)) == fault.row - 1, "time", "evenly spaced times, without a gap"
            )
        record = records.checked(table.columns[self._quantity])
        if self.detrend != "none":
            record = records.detrended(record, DEGREE[self.detrend])
        if self.resample is not None:
            record = records.resampled_record(record, rate, self.resample)
            rate = self.resample
        if self.use == "time" and self.between != "straight":
            record, rate = records.resampled_record(record, rate, FILLED * rate), FILLED * rate
        self._record, self._rate = record, rate
        if self.use == "spectrum":
            assert self.segment is not None
            self._spectrum, self._segments = records.density_of_record(record, rate, self.segment)
        if self.use == "lines":
            frequency, phasor, held = records.lines_of_record(record, rate, self.share or 0.9999)
            if len(frequency) > MOST_LINES:
                raise ValueError(
                    f'{len(frequency)} lines, more than {MOST_LINES}; lower "share", or resample'
                )
            self._held = held
            self._lines = tuple(
                FixedLine(float(f), self._quantity, abs(p), cmath.phase(p))
                for f, p in zip(frequency, phasor, strict=True)
            )

    def floor_direction(self) -> Direction | None:
        return None if self._quantity == "force" else unit_direction(self.direction)

    def data_files(self) -> tuple[str, ...]:
        return (self.file,)

    def assumed(self) -> tuple[str, ...]:
        if self.use == "spectrum":
            assert self.segment is not None
            return (
                f"{self.name}: density by Welch's method, {self._segments} segments half overlapped, resolution "
                f"{1.0 / self.segment:.3g} Hz, random error of each bin about "
                f"{100.0 / self._segments**0.5:.0f} %; the response is taken as Gaussian",
            )
        if self.use == "time" and self.between is None:
            return (f"{self.name}: the record is taken as band-limited between its samples",)
        if self.use == "lines":
            return (
                f"{self.name}: {len(self._lines)} lines that hold {100.0 * self._held:.2f} % of the mean square; "
                "the record is taken as one period of a motion that repeats for ever",
            )
        return ()

    def tones(self, speeds: Mapping[str, SpeedRange]) -> tuple[Tone, ...]:
        position = self.position or (0.0, 0.0, 0.0)
        return line_tones(self.name, self._lines, unit_direction(self.direction), self.on, position)

    def noises(self) -> tuple[Noise, ...]:
        if self._spectrum is None:
            return ()
        assert self.duration is not None
        along = unit_direction(self.direction)
        if self._quantity == "force":
            place = self.position or (0.0, 0.0, 0.0)
            return (Noise(self.name, self._spectrum, self.duration, self.on, place, force=along),)
        return (Noise(self.name, self._spectrum, self.duration, base=along),)

    def transients(self) -> tuple[Transient, ...]:
        if self.use != "time":
            return ()
        along = unit_direction(self.direction)
        if self._quantity == "force":
            place = self.position or (0.0, 0.0, 0.0)
            return (
                Transient(
                    self.name,
                    record=self._record,
                    step=1.0 / self._rate,
                    on=self.on,
                    position=place,
                    force=along,
                ),
            )
        return (Transient(self.name, record=self._record, step=1.0 / self._rate, base=along),)
