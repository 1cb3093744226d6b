"""The shapes of shock pulses a study may name, and what every forcing that is one such pulse states."""

from typing import Literal

from pydantic import PrivateAttr

from detune.brief.forcing.base import Forcing
from detune.brief.statement import Ratio, Time, positive, refuse
from detune.physics import pulses
from detune.physics.pulses import Pulse

Shape = Literal["half-sine", "versed-sine", "rectangle", "trapezoid", "terminal-peak-sawtooth", "triangle"]
SHAPES = {
    "half-sine": pulses.half_sine,
    "versed-sine": pulses.versed_sine,
    "rectangle": pulses.rectangle,
    "terminal-peak-sawtooth": pulses.terminal_peak_sawtooth,
    "triangle": pulses.symmetric_triangle,
}
COMMON_SIDE = 0.1


class PulseForcing(Forcing):
    """A forcing that is one pulse of one `shape` and whole `duration`, as in IEC 60068-2-27.

    `rise` and `fall` are shares of the duration, for a trapezoid alone.
    """

    shape: Shape
    duration: Time
    rise: Ratio | None = None
    fall: Ratio | None = None

    _pulse: Pulse = PrivateAttr()

    def _draw(self, amplitude: float) -> None:
        positive(self.duration, "a duration", at="duration")
        self._pulse = make_pulse(self.shape, amplitude, self.duration, self.rise, self.fall)

    def assumed(self) -> tuple[str, ...]:
        if self.shape != "trapezoid" or (self.rise is not None and self.fall is not None):
            return ()
        return (f"{self.name}: trapezoid rises and falls in a tenth of its duration (IEC 60068-2-27)",)


def make_pulse(
    shape: Shape, amplitude: float, duration: float, rise: float | None, fall: float | None
) -> Pulse:
    """Return the pulse; `rise` and `fall` are shares of the duration, of a trapezoid alone.

    Left out they are 0.1 each, as IEC 60068-2-27 has them.
    """
    if shape != "trapezoid":
        for key, value in (("rise", rise), ("fall", fall)):
            if value is not None:
                raise refuse(key, f'no "{key}": only a trapezoid has sides to choose', at=key)
        return SHAPES[shape](amplitude, duration)
    try:
        return pulses.trapezoid(
            amplitude,
            duration,
            COMMON_SIDE if rise is None else rise,
            COMMON_SIDE if fall is None else fall,
        )
    except ValueError:
        expected = '"rise" and "fall" as shares of the duration above zero, together at most 1'
        raise refuse(f"rise {rise}, fall {fall}", expected, at="rise") from None
