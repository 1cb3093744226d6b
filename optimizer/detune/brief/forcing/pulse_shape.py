"""The shapes of shock pulses a study may name."""

from typing import Literal

from detune.brief.statement import refuse
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


def assumed_sides(name: str, shape: Shape, rise: float | None, fall: float | None) -> tuple[str, ...]:
    """Return the note on a trapezoid whose sides the study does not state."""
    if shape != "trapezoid" or (rise is not None and fall is not None):
        return ()
    return (f"{name}: trapezoid rises and falls in a tenth of its duration (IEC 60068-2-27)",)
