"""Shock on one mass and its mount: response spectra of pulses and records, velocity step, drop.

z is the deflection of the mount (mass against base), positive when the mass lags a base accelerated in the
negative sense: z'' + 2 ratio omega z' + omega^2 z = -a(t). The absolute acceleration of the mass is -(omega^2
z + 2 ratio omega z'), also when the damper force is large.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from detune.physics.array_types import ArrayLike, ComplexArray, FloatArray
from detune.physics.pulses import Pulse, pulse_value
from detune.physics.rigid_body import STANDARD_GRAVITY
from detune.physics.simulation import extremes_between_samples, phi1, phi2

Quantity = Literal["absolute acceleration", "deflection", "pseudo-velocity", "pseudo-acceleration"]

ANGLE_PER_SAMPLE = 0.1
FEWEST_SAMPLES = 40


@dataclass(frozen=True, eq=False)
class ShockSpectrum:
    """Largest magnitudes (F,) at frequency (F,) in Hz: during the shock, after it, and over all time."""

    frequency: FloatArray
    during: FloatArray
    after: FloatArray

    @property
    def overall(self) -> FloatArray:
        """Largest magnitude over all time, (F,)."""
        return np.maximum(self.during, self.after)


@dataclass(frozen=True, eq=False)
class Drop:
    """Drop on a mount: peaks in SI; the accelerometer reads the mount's force over the mass.

    The kinematic acceleration is the reading less the weight's 1 g while the mount pushes up.
    """

    velocity_change: FloatArray
    deflection: FloatArray
    accelerometer: FloatArray
    kinematic_acceleration: FloatArray


def pulse_shock_spectrum(
    pulse: Pulse, frequency: ArrayLike, ratio: float, quantity: Quantity = "absolute acceleration"
) -> ShockSpectrum:
    """Shock response spectrum of a base acceleration pulse, from closed forms on each of its pieces.

    frequency (F,) in Hz, ratio = viscous damping ratio, 0 <= ratio < 1. Peaks are found between samples;
    relative accuracy 1e-6. Raises ValueError for other ratios or frequencies.
    """
    asked = _frequencies(frequency, ratio)
    during, after = np.zeros(asked.size), np.zeros(asked.size)
    for i, f in enumerate(asked):
        pole, weight = _oscillator(2.0 * np.pi * f, ratio, quantity)
        state = 0.0 + 0.0j
        for piece in range(pulse.constant.size):
            length = float(pulse.edge[piece + 1] - pulse.edge[piece])
            count = max(FEWEST_SAMPLES, int(np.ceil(abs(pole) * length / ANGLE_PER_SAMPLE)))
            count = max(count, int(np.ceil(pulse.omega[piece] * length / ANGLE_PER_SAMPLE)))
            time = np.linspace(0.0, length, count + 1)
            y = _piece_response(pulse, piece, pole, state, time)
            load = pulse_value(pulse, pulse.edge[piece] + time)
            load[-1] = _end_value(pulse, piece)
            value, rate = (weight * y).imag, (weight * (pole * y + load)).imag
            largest = extremes_between_samples(value, rate, rate, length / count).largest
            during[i] = max(during[i], float(largest[0]))
            state = complex(y[-1])
        after[i] = np.max(np.abs(_decay_extremes(weight * state, pole)))
    return ShockSpectrum(asked, during, after)


def record_shock_spectrum(
    record: ArrayLike,
    step: float,
    frequency: ArrayLike,
    ratio: float,
    quantity: Quantity = "absolute acceleration",
) -> ShockSpectrum:
    """Shock response spectrum of a base acceleration record (T,), straight between samples `step` s apart.

    Exact recursion with the record subdivided where the oscillator is fast, so that peaks between samples are
    found to 1e-4; the free motion after the record counts. Mean and trend are the caller's affair. frequency
    (F,) in Hz; 0 <= ratio < 1. Raises ValueError otherwise.
    """
    from scipy.signal import lfilter

    asked = _frequencies(frequency, ratio)
    samples = np.asarray(record, dtype=float)
    if samples.ndim != 1 or samples.size < 2:
        raise ValueError("a shock record is one channel of two or more samples")
    during, after = np.zeros(asked.size), np.zeros(asked.size)
    for i, f in enumerate(asked):
        pole, weight = _oscillator(2.0 * np.pi * f, ratio, quantity)
        parts = max(1, int(np.ceil(abs(pole) * step / 0.3)))
        place = np.arange((samples.size - 1) * parts + 1) / parts
        load = np.interp(place, np.arange(samples.size), samples)
        short = step / parts
        z = np.asarray(pole * short)
        late = short * complex(phi2(z))
        early = short * complex(phi1(z)) - late
        drive = np.r_[0.0, early * load[:-1] + late * load[1:]]
        y = lfilter([1.0], [1.0, -np.exp(pole * short)], drive)
        value, rate = (weight * y).imag, (weight * (pole * y + load)).imag
        during[i] = extremes_between_samples(value, rate, rate, short).largest[0]
        after[i] = np.max(np.abs(_decay_extremes(weight * complex(y[-1]), pole)))
    return ShockSpectrum(asked, during, after)


def velocity_step(
    omega: ArrayLike, ratio: ArrayLike, velocity_change: ArrayLike
) -> tuple[FloatArray, FloatArray]:
    """Peak deflection and peak absolute acceleration of a mass whose base takes a velocity step.

    omega in rad/s (undamped), ratio >= 0, velocity_change in m/s broadcast -> m, m/s2. Undamped: dv/omega and
    dv omega. From ratio 0.5 on the acceleration is greatest at the start, 2 ratio omega dv. R. D. Mindlin,
    Bell Syst. Tech. J. 24 (1945) 353; J. C. Snowdon, Vibration and Shock in Damped Mechanical Systems (1968).
    """
    w, z, dv = np.broadcast_arrays(*(np.asarray(a, dtype=float) for a in (omega, ratio, velocity_change)))
    if np.any(z < 0.0):
        raise ValueError("a damping ratio is not below zero")
    s = np.sqrt(np.abs(1.0 - z**2))
    # angle/s = acos(z)/sqrt(1-z^2), which is 1 at z = 1 and acosh(z)/sqrt(z^2-1) beyond.
    slow = np.where(z < 1.0, np.arccos(np.minimum(z, 1.0)), np.arccosh(np.maximum(z, 1.0)))
    deflection = np.exp(-z * np.where(s > 1e-6, slow / np.where(s > 1e-6, s, 1.0), 1.0))
    gentle = np.minimum(z, 0.5)
    root = np.sqrt(1.0 - gentle**2)
    when = np.arctan2(root * (1.0 - 4.0 * gentle**2), gentle * (3.0 - 4.0 * gentle**2)) / root
    # At its own peak, where its rate is zero, the absolute acceleration is exactly the decay factor.
    acceleration = np.where(z < 0.5, np.exp(-gentle * when), 2.0 * z)
    return deflection * np.abs(dv) / w, acceleration * np.abs(dv) * w


def drop(height: ArrayLike, omega: ArrayLike, ratio: float, gravity: float = STANDARD_GRAVITY) -> Drop:
    """Peaks of a mass on its mount that falls freely through a height in m and stays on the ground.

    omega in rad/s undamped; 0 <= ratio < 1; height and omega broadcast. The weight acts during the impact:
    undamped, the deflection is d + sqrt(d^2 + (dv/omega)^2) with d = g/omega^2 and dv = sqrt(2 g h). With
    gravity left out during the impact see `velocity_step`. Raises ValueError for other ratios or a negative
    height.
    """
    h, w = np.broadcast_arrays(np.asarray(height, dtype=float), np.asarray(omega, dtype=float))
    if not 0.0 <= ratio < 1.0 or np.any(~(h >= 0.0)) or np.any(~(w > 0.0)):
        raise ValueError("a drop needs a height >= 0, a frequency > 0 and a damping ratio from 0 to below 1")
    speed = np.sqrt(2.0 * gravity * h)
    pole = w * (-ratio + 1j * np.sqrt(1.0 - ratio**2))
    sag = gravity / w**2
    # Motion about the sag: y = Im(phasor exp(pole t)) with y(0) = -sag and y'(0) = speed.
    phasor = (speed + pole.real * sag) / pole.imag - 1j * sag
    force = w**2 + 2.0 * ratio * w * pole
    deflection = sag + np.max(_decay_extremes(phasor, pole), axis=0)
    reading = gravity + np.max(_decay_extremes(force * phasor, pole), axis=0)
    return Drop(speed, deflection, reading, reading - gravity)


def _frequencies(frequency: ArrayLike, ratio: float) -> FloatArray:
    asked = np.atleast_1d(np.asarray(frequency, dtype=float))
    if not 0.0 <= ratio < 1.0:
        raise ValueError("a shock response spectrum needs a damping ratio from 0 to below 1")
    if np.any(~(asked > 0.0)):
        raise ValueError("the frequencies of a shock response spectrum lie above zero")
    return asked


def _oscillator(omega: float, ratio: float, quantity: Quantity) -> tuple[complex, complex]:
    """Pole, and the weight w in response = Im(w y) for y' = pole y + a: z = -Im(y)/damped frequency."""
    damped = omega * float(np.sqrt(1.0 - ratio**2))
    pole = complex(-ratio * omega, damped)
    weight: dict[Quantity, complex] = {
        "deflection": -1.0 + 0.0j,
        "pseudo-velocity": complex(-omega),
        "pseudo-acceleration": complex(-(omega**2)),
        "absolute acceleration": omega**2 + 2.0 * ratio * omega * pole,
    }
    return pole, weight[quantity] / damped


def _piece_response(
    pulse: Pulse, piece: int, pole: complex, start: complex, time: FloatArray
) -> ComplexArray:
    """y (T,) of y' = pole y + pulse on one piece, time (T,) from its start, in closed form."""
    growth = np.exp(pole * time)
    y = start * growth + pulse.constant[piece] * time * phi1(pole * time)
    y = y + pulse.slope[piece] * time**2 * phi2(pole * time)
    if pulse.cosine[piece] != 0.0 or pulse.sine[piece] != 0.0:
        for sign in (1.0, -1.0):
            turn = 1j * sign * pulse.omega[piece]
            amplitude = 0.5 * (pulse.cosine[piece] - 1j * sign * pulse.sine[piece])
            gap = (turn - pole) * time
            near = np.abs(gap) < 1.0
            far = np.where(near, 1.0, turn - pole)
            apart = (np.exp(turn * time) - growth) / far
            y = y + amplitude * np.where(near, growth * time * phi1(np.where(near, gap, 0.0)), apart)
    return np.asarray(y)


def _end_value(pulse: Pulse, piece: int) -> float:
    length = pulse.edge[piece + 1] - pulse.edge[piece]
    angle = pulse.omega[piece] * length
    straight = pulse.constant[piece] + pulse.slope[piece] * length
    return float(straight + pulse.cosine[piece] * np.cos(angle) + pulse.sine[piece] * np.sin(angle))


def _decay_extremes(phasor: ComplexArray | complex, pole: ComplexArray | complex) -> FloatArray:
    """Values (3, ...) of Im(phasor exp(pole t)) at t = 0 and at its first two turning points after it.

    Without damping these hold the highest and the lowest value; with damping as well, since turning points
    shrink.
    """
    p, rate = np.asarray(phasor, dtype=complex), np.asarray(pole, dtype=complex)
    first = np.mod(-np.angle(rate * p), np.pi) / rate.imag
    times = np.stack([np.zeros_like(first), first, first + np.pi / rate.imag])
    return np.asarray((p * np.exp(rate * times)).imag)
