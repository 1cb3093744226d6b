"""Standard shock pulses as exact pieces: on each piece a constant, a ramp and one harmonic.

The shapes are those of IEC 60068-2-27 and of Ayre in Harris' Shock and Vibration Handbook. The amplitude
carries the unit (an acceleration for a base pulse, a force for a force pulse); times are in s.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from math import lcm

import numpy as np

from detune.physics.array_types import ArrayLike, FloatArray

LARGEST_DENOMINATOR = 1000


@dataclass(frozen=True, eq=False)
class Pulse:
    """Pieces between edge (S + 1,) in s; on piece i, with t counted from its start,

    constant[i] + slope[i] t + cosine[i] cos(omega[i] t) + sine[i] sin(omega[i] t), arrays (S,), omega in
    rad/s. The pulse is zero before the first edge (0) and after the last.
    """

    edge: FloatArray
    constant: FloatArray
    slope: FloatArray
    cosine: FloatArray
    sine: FloatArray
    omega: FloatArray


def half_sine(amplitude: float, duration: float) -> Pulse:
    """A sin(pi t/T)."""
    return _pulse([0.0, duration], sine=[amplitude], omega=[np.pi / _lasting(duration)])


def versed_sine(amplitude: float, duration: float) -> Pulse:
    """A/2 (1 - cos(2 pi t/T)), also called haversine."""
    return _pulse(
        [0.0, duration],
        constant=[0.5 * amplitude],
        cosine=[-0.5 * amplitude],
        omega=[2.0 * np.pi / _lasting(duration)],
    )


def rectangle(amplitude: float, duration: float) -> Pulse:
    """A for 0 < t < T, with vertical sides."""
    return _pulse([0.0, _lasting(duration)], constant=[amplitude])


def terminal_peak_sawtooth(amplitude: float, duration: float) -> Pulse:
    """A t/T with a vertical fall at T."""
    return _pulse([0.0, duration], slope=[amplitude / _lasting(duration)])


def symmetric_triangle(amplitude: float, duration: float) -> Pulse:
    """Rises straight to A at T/2 and falls straight to zero at T."""
    steep = 2.0 * amplitude / _lasting(duration)
    return _pulse([0.0, 0.5 * duration, duration], constant=[0.0, amplitude], slope=[steep, -steep])


def trapezoid(amplitude: float, duration: float, rise: float = 0.1, fall: float = 0.1) -> Pulse:
    """Rises over `rise` and falls over `fall`, both shares of the duration (0.1 each in IEC 60068-2-27).

    Raises ValueError unless both are above zero and together at most 1.
    """
    if not (rise > 0.0 and fall > 0.0 and rise + fall <= 1.0):
        raise ValueError("rise and fall of a trapezoid are shares above zero, together at most 1")
    up, down = rise * _lasting(duration), fall * duration
    edge = [0.0, up, duration - down, duration]
    return _pulse(edge, constant=[0.0, amplitude, amplitude], slope=[amplitude / up, 0.0, -amplitude / down])


PULSES: dict[str, Callable[[float, float], Pulse]] = {
    "half-sine": half_sine,
    "versed sine": versed_sine,
    "rectangle": rectangle,
    "trapezoid": trapezoid,
    "terminal-peak sawtooth": terminal_peak_sawtooth,
    "symmetric triangle": symmetric_triangle,
}


def _lasting(duration: float) -> float:
    if not duration > 0.0:
        raise ValueError("the duration of a pulse lies above zero")
    return duration


def _pulse(
    edge: list[float],
    constant: list[float] | None = None,
    slope: list[float] | None = None,
    cosine: list[float] | None = None,
    sine: list[float] | None = None,
    omega: list[float] | None = None,
) -> Pulse:
    count = len(edge) - 1
    columns = [
        np.array(column if column else [0.0] * count) for column in (constant, slope, cosine, sine, omega)
    ]
    return Pulse(np.array(edge), *columns)


def _piece_value(pulse: Pulse, piece: ArrayLike, time: FloatArray) -> FloatArray:
    i = np.asarray(piece)
    t = time - pulse.edge[i]
    angle = pulse.omega[i] * t
    straight = pulse.constant[i] + pulse.slope[i] * t
    return np.asarray(straight + pulse.cosine[i] * np.cos(angle) + pulse.sine[i] * np.sin(angle))


def pulse_value(pulse: Pulse, time: ArrayLike) -> FloatArray:
    """Value just after each time in s (any shape)."""
    t = np.asarray(time, dtype=float)
    piece = np.clip(np.searchsorted(pulse.edge, t, side="right") - 1, 0, pulse.constant.size - 1)
    return np.where((t >= pulse.edge[0]) & (t < pulse.edge[-1]), _piece_value(pulse, piece, t), 0.0)


def velocity_change(pulse: Pulse) -> float:
    """Exact integral of the pulse over time: a velocity for an acceleration pulse, an impulse for a force."""
    length = np.diff(pulse.edge)
    straight = pulse.constant * length + 0.5 * pulse.slope * length**2
    omega = np.where(pulse.omega == 0.0, 1.0, pulse.omega)
    angle = omega * length
    turning = (pulse.cosine * np.sin(angle) + pulse.sine * (1.0 - np.cos(angle))) / omega
    return float(np.sum(straight + np.where(pulse.omega == 0.0, pulse.cosine * length, turning)))


def pulse_step(pulse: Pulse, longest: float) -> float:
    """The longest time step in s, not above `longest`, that meets every edge of the pulse.

    Raises ValueError for edges at shares of the duration that are no fractions with denominators up to 1000.
    """
    duration = float(pulse.edge[-1])
    shares = [Fraction(float(edge) / duration).limit_denominator(LARGEST_DENOMINATOR) for edge in pulse.edge]
    if any(
        abs(float(share) * duration - edge) > 1e-9 * duration
        for share, edge in zip(shares, pulse.edge, strict=True)
    ):
        raise ValueError("the edges of the pulse meet no common time step")
    whole = lcm(*(share.denominator for share in shares))
    return duration / (whole * int(np.ceil(duration / (whole * longest) * (1.0 - 1e-12))))


def sampled_pulse(pulse: Pulse, step: float, count: int) -> tuple[FloatArray, FloatArray]:
    """Samples (count,) at 0, step, 2 step, ...: the values just before and just after each.

    Both columns go to `simulate`, which then meets vertical sides exactly; between samples the pulse is
    straight, so a curved pulse of duration T is followed to (pi step/T)^2/12 of its peak. Raises ValueError
    if the step does not meet every edge (`pulse_step` gives one that does).
    """
    place = pulse.edge / step
    if np.any(np.abs(place - np.rint(place)) > 1e-6):
        raise ValueError("the time step does not meet the edges of the pulse")
    start = np.rint(place).astype(np.int64)
    before, after = np.zeros(count), np.zeros(count)
    for piece in range(pulse.constant.size):
        index = np.arange(start[piece], min(start[piece + 1], count - 1) + 1)
        if index.size == 0:
            continue
        time = np.minimum(np.maximum(index * step, pulse.edge[piece]), pulse.edge[piece + 1])
        value = _piece_value(pulse, np.full(index.size, piece), time)
        after[index[index < start[piece + 1]]] = value[index < start[piece + 1]]
        before[index[index > start[piece]]] = value[index > start[piece]]
    return before, after
