"""Lines, each at its own fixed frequency and all at once: as floor motion, or as a force on a body."""

import math
from collections.abc import Mapping
from typing import ClassVar, Literal

from pydantic import PrivateAttr, ValidationInfo, model_validator

from detune.brief.condition import SpeedRange
from detune.brief.data_file import read_named
from detune.brief.forcing.base import Forcing, Tone
from detune.brief.forcing.density import one_way
from detune.brief.forcing.fixed_lines import MOST_LINES, MOTION, FixedLine, line_tones
from detune.brief.statement import (
    Acceleration,
    Angle,
    AxisName,
    Direction,
    Force,
    Frequency,
    Length,
    Name,
    Position,
    Statement,
    Text,
    Velocity,
    refuse,
    unit_direction,
)

AMPLITUDES = (*MOTION, "force")


class Line(Statement):
    """One line: its frequency, one amplitude, and its phase where known."""

    frequency: Frequency
    displacement: Length | None = None
    velocity: Velocity | None = None
    acceleration: Acceleration | None = None
    force: Force | None = None
    phase: Angle | None = None

    @model_validator(mode="after")
    def _one_amplitude(self) -> "Line":
        if self.frequency <= 0.0:
            raise refuse(f"{self.frequency:g} Hz", "a frequency above zero", at="frequency")
        one_way({name: getattr(self, name) is not None for name in AMPLITUDES})
        return self


class LineSpectrum(Forcing):
    """Lines along `direction`, of the floor's motion or of a force at `position` on a body.

    `lines`, or a CSV `file` with the columns `frequency [Hz]`, one of `displacement`, `velocity`,
    `acceleration` and `force`, and where known `phase [deg]`. `measure` says whether amplitudes are peak or rms.
    Lines of one frequency and stated phase add as phasors; all others add linearly in peak values and as squares
    in rms values.
    """

    title: ClassVar[str] = "line spectrum"
    kind: Literal["line-spectrum"] = "line-spectrum"
    direction: AxisName | Direction
    measure: Literal["peak", "rms"]
    lines: tuple[Line, ...] | None = None
    file: Text | None = None
    on: Name | None = None
    position: Position | None = None

    _lines: tuple[FixedLine, ...] = PrivateAttr()

    @model_validator(mode="after")
    def _values(self, info: ValidationInfo) -> "LineSpectrum":
        unit_direction(self.direction, at="direction")
        way = one_way({"lines": self.lines is not None, "file": self.file is not None})
        found = self._from_file(info) if way == "file" else self._listed()
        if not found:
            raise refuse("[]", "at least one line with an amplitude that is not zero", at=way)
        if len(found) > MOST_LINES:
            raise refuse(f"{len(found)} lines", f"at most {MOST_LINES} lines", at=way)
        quantities = {line.quantity for line in found}
        if "force" in quantities and len(quantities) > 1:
            raise refuse(
                ", ".join(sorted(quantities)), "lines of floor motion alone, or of force alone", at=way
            )
        if "force" in quantities and self.position is None:
            raise refuse("no position", 'the "position" where the force acts')
        if "force" not in quantities and (self.position is not None or self.on is not None):
            raise refuse(
                "position", 'no "position" and no "on": the floor moves under every station', at="position"
            )
        self._lines = found
        return self

    def _listed(self) -> tuple[FixedLine, ...]:
        found = []
        for line in self.lines or ():
            name = next(name for name in AMPLITUDES if getattr(line, name) is not None)
            found.append(FixedLine(line.frequency, name, self._peak(getattr(line, name)), line.phase))
        return tuple(line for line in found if line.peak != 0.0)

    def _from_file(self, info: ValidationInfo) -> tuple[FixedLine, ...]:
        assert self.file is not None
        amplitudes = {"displacement": "length", "velocity": "velocity", "acceleration": "acceleration"}
        table = read_named(
            info,
            self.file,
            {"frequency": "frequency"},
            {**amplitudes, "force": "force"},
            {"phase": "angle"},
        )
        try:
            table.refuse_rows(table.columns["frequency"] <= 0.0, "frequency", "a frequency above zero")
        except ValueError as error:
            raise refuse(self.file, str(error), at="file") from None
        name = next(name for name in AMPLITUDES if name in table.columns)
        phases = table.columns.get("phase")
        return tuple(
            FixedLine(
                float(frequency),
                name,
                self._peak(float(table.columns[name][row])),
                None if phases is None else float(phases[row]),
            )
            for row, frequency in enumerate(table.columns["frequency"])
            if table.columns[name][row] != 0.0
        )

    def _peak(self, amplitude: float) -> float:
        return amplitude * math.sqrt(2.0) if self.measure == "rms" else amplitude

    def floor_direction(self) -> Direction | None:
        return None if self._lines[0].quantity == "force" else unit_direction(self.direction)

    def data_files(self) -> tuple[str, ...]:
        return (self.file,) if self.file is not None else ()

    def tones(self, speeds: Mapping[str, SpeedRange]) -> tuple[Tone, ...]:
        position = self.position or (0.0, 0.0, 0.0)
        return line_tones(self.name, self._lines, unit_direction(self.direction), self.on, position)
