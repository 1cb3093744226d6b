"""A pulse of force or moment on a body."""

import math
from typing import ClassVar, Literal

from pydantic import model_validator

from detune.brief.forcing.base import Transient
from detune.brief.forcing.pulse_shape import PulseForcing
from detune.brief.statement import ForceVector, MomentVector, Name, Position, refuse


class ForcePulse(PulseForcing):
    """One pulse of a force and a moment together, peak values, of one `shape` and whole `duration`.

    Shapes as in IEC 60068-2-27. `rise` and `fall` are shares of the duration, for a trapezoid alone.
    """

    title: ClassVar[str] = "force pulse"
    kind: Literal["force-pulse"] = "force-pulse"
    on: Name | None = None
    position: Position
    force: ForceVector = (0.0, 0.0, 0.0)
    moment: MomentVector = (0.0, 0.0, 0.0)

    @model_validator(mode="after")
    def _values(self) -> "ForcePulse":
        if math.hypot(*self.force) == 0.0 and math.hypot(*self.moment) == 0.0:
            raise refuse("no force and no moment", 'a "force" or a "moment" that is not zero')
        self._draw(1.0)
        return self

    def transients(self) -> tuple[Transient, ...]:
        return (
            Transient(
                self.name,
                pulse=self._pulse,
                on=self.on,
                position=self.position,
                force=self.force,
                moment=self.moment,
            ),
        )
