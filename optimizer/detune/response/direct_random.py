"""The assessor's random responses: a dense quadrature of its own over the direct matrices."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import HarmonicAllowable, noise_amplitude
from detune.brief.forcing.base import Noise, Tone
from detune.response.direct import DirectMachine
from detune.response.direct_modes import DirectModes
from detune.response.direct_views import DirectTone

Floats = NDArray[np.float64]
Pairs = tuple[tuple[HarmonicAllowable, str], ...]
TWO_PI = 2.0 * np.pi
# Steps of 0.02 in asinh((w - centre)/half width): the trapezoidal rule then errs by about 3e-5.
ROUND_POLE = np.sinh(np.linspace(-9.0, 9.0, 901))
EVENLY = 400


@dataclass(frozen=True, eq=False)
class Variances:
    """Variance of each row and of its rate, both (R,); of a resultant, the sum over its axes."""

    moved: Floats
    rates: Floats


@dataclass(frozen=True, eq=False)
class RandomPart:
    """What noise counts as in each row (R,), and its mean largest magnitude (R,) in the `duration` (s) it lasts."""

    value: Floats
    extreme: Floats
    duration: float


def direct_noise_values(
    machine: DirectMachine, found: DirectModes, noises: tuple[Noise, ...], pairs: Pairs
) -> Floats:
    """Return what independent noises together count as in each row (R,), all lasting as long as the longest."""
    return direct_noise(machine, found, noises, pairs).value


def direct_noise(
    machine: DirectMachine, found: DirectModes, noises: tuple[Noise, ...], pairs: Pairs
) -> RandomPart:
    """Return what independent noises together count as in each row, and their expected extremes beside it."""
    parts = [direct_variances(machine, found, noise, pairs) for noise in noises]
    moved = sum((part.moved for part in parts), np.zeros(len(pairs)))
    rates = sum((part.rates for part in parts), np.zeros(len(pairs)))
    duration = max(noise.duration for noise in noises)
    value = [
        noise_amplitude(moved[[index]], rates[[index]], duration, allowable.statistic())[0]
        for index, (allowable, _) in enumerate(pairs)
    ]
    return RandomPart(np.array(value), noise_amplitude(moved, rates, duration, "peak"), duration)


def direct_variances(machine: DirectMachine, found: DirectModes, noise: Noise, pairs: Pairs) -> Variances:
    """Return the variances of each row under one noise, by the trapezoidal rule on each segment of its density."""
    moved, rates = np.zeros(len(pairs)), np.zeros(len(pairs))
    points, density = noise.spectrum.frequency, noise.spectrum.density
    tone = unit_tone(noise)
    for low, high, first, last in zip(points[:-1], points[1:], density[:-1], density[1:], strict=True):
        if high <= low or first == 0.0:
            continue
        frequency = mesh(found, float(low), float(high))
        slope = np.log(last / first) / np.log(high / low)
        weight = first * (frequency / low) ** slope
        view = DirectTone(machine, (tone,), TWO_PI * frequency[None])
        for index, (allowable, place) in enumerate(pairs):
            observed = allowable.weighted(allowable.observed(view, place), frequency[None])[0]
            along = allowable.along()
            axes = (observed @ np.asarray(along))[:, None] if along is not None else observed
            power = np.sum(np.abs(axes) ** 2, axis=-1) * weight
            moved[index] += np.trapezoid(power, frequency)
            rates[index] += np.trapezoid(power * (TWO_PI * frequency) ** 2, frequency)
    return Variances(moved, rates)


def unit_tone(noise: Noise) -> Tone:
    """Return the tone of unit acceleration or unit force that carries a noise's pattern."""
    plain = {"source": noise.source, "speed": noise.source, "order": 1.0, "low": 0.0, "high": 0.0}
    if noise.base is not None:
        x, y, z = noise.base
        return Tone(**plain, on=None, position=noise.position, base=(-x + 0j, -y + 0j, -z + 0j), power=-2)  # type: ignore[arg-type]
    return Tone(**plain, on=noise.on, position=noise.position, force=noise.force, moment=noise.moment)  # type: ignore[arg-type]


def mesh(found: DirectModes, low: float, high: float) -> Floats:
    """Frequencies (F,) in Hz from low to high, even on a log axis and close round every pole."""
    looks = [np.geomspace(low, high, EVENLY)]
    for pole in found.poles:
        looks.append((pole.imag + max(-pole.real, 1e-9 * abs(pole)) * ROUND_POLE) / TWO_PI)
    frequency = np.unique(np.concatenate(looks))
    return frequency[(frequency >= low) & (frequency <= high)]
