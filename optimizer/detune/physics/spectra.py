"""Power spectral densities drawn as straight lines on log-log paper.

A density is one-sided, in (unit)^2/Hz over frequency in Hz, straight between its break points on log-log axes
and zero outside them: S(f) = S1 (f/f1)^n, with n = (slope in dB per octave)/(10 log10 2) exactly. A slope of
"3 dB per octave" is therefore the exponent 0.99658 and not 1; who means 1 writes 3.0103.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from detune.physics.array_types import ArrayLike, BoolArray, FloatArray

DECIBELS_PER_OCTAVE_AT_EXPONENT_ONE = 10.0 * np.log10(2.0)


@dataclass(frozen=True, eq=False)
class PowerSpectralDensity:
    """One-sided density (P,) in (unit)^2/Hz at break points frequency (P,) in Hz.

    Two equal frequencies in a row make a vertical step. A segment has two positive ends, or is zero at both
    (a gap). Raises ValueError, naming the row counted from 1, for anything else.
    """

    frequency: FloatArray
    density: FloatArray

    def __post_init__(self) -> None:
        frequency = np.array(self.frequency, dtype=float)
        density = np.array(self.density, dtype=float)
        if frequency.ndim != 1 or frequency.shape != density.shape or frequency.size < 2:
            raise ValueError("a power spectral density needs two or more break points, one density for each")
        _refuse_rows("is not a finite number", ~np.isfinite(frequency) | ~np.isfinite(density))
        _refuse_rows("has a frequency that is not above zero", frequency <= 0.0)
        _refuse_rows("has a negative density", density < 0.0)
        falls = np.diff(frequency) < 0.0
        _refuse_rows("has a lower frequency than the row before it", np.r_[False, falls])
        thrice = (frequency[2:] == frequency[:-2]) if frequency.size > 2 else np.zeros(0, dtype=bool)
        _refuse_rows("is the third row at one frequency", np.r_[False, False, thrice])
        wide = np.diff(frequency) > 0.0
        half_zero = wide & ((density[1:] == 0.0) != (density[:-1] == 0.0))
        _refuse_rows(
            "joins a zero and a positive density, which no straight line on log-log paper does; "
            "write a step (the same frequency twice)",
            np.r_[False, half_zero],
        )
        frequency.flags.writeable = False
        density.flags.writeable = False
        object.__setattr__(self, "frequency", frequency)
        object.__setattr__(self, "density", density)


def _refuse_rows(why: str, wrong: BoolArray) -> None:
    if np.any(wrong):
        raise ValueError(f"power spectral density: row {int(np.argmax(wrong)) + 1} {why}")


def exponent_from_slope(decibels_per_octave: ArrayLike) -> FloatArray:
    """Exponent n of S ~ f^n for a slope in dB per octave: n = slope/(10 log10 2), exactly."""
    return np.asarray(np.asarray(decibels_per_octave, dtype=float) / DECIBELS_PER_OCTAVE_AT_EXPONENT_ONE)


def slope_from_exponent(exponent: ArrayLike) -> FloatArray:
    """Slope in dB per octave of S ~ f^n."""
    return np.asarray(np.asarray(exponent, dtype=float) * DECIBELS_PER_OCTAVE_AT_EXPONENT_ONE)


def spectrum_from_slopes(
    frequency: ArrayLike, slopes: ArrayLike, known_density: float, known_frequency: float
) -> PowerSpectralDensity:
    """Density from break points (P,) in Hz, slopes (P-1,) in dB per octave, and one known level.

    known_frequency must be one of the break points. Raises ValueError otherwise.
    """
    points = np.asarray(frequency, dtype=float)
    steep = exponent_from_slope(slopes)
    if steep.shape != (points.size - 1,):
        raise ValueError("a spectrum given by slopes needs one slope between each two break points")
    hit = np.flatnonzero(np.isclose(points, known_frequency, rtol=1e-12, atol=0.0))
    if hit.size != 1:
        raise ValueError(f"the known level at {known_frequency:g} Hz is not at one of the break points")
    log_density = np.r_[0.0, np.cumsum(steep * np.diff(np.log(points)))]
    log_density += np.log(known_density) - log_density[hit[0]]
    return PowerSpectralDensity(points, np.exp(log_density))


def segment_exponents(spectrum: PowerSpectralDensity) -> FloatArray:
    """Exponent n (P-1,) of each segment; 0 for a gap and for a vertical step."""
    frequency, density = spectrum.frequency, spectrum.density
    drawn = (frequency[1:] > frequency[:-1]) & (density[1:] > 0.0) & (density[:-1] > 0.0)
    exponent = np.zeros(frequency.size - 1)
    rise = np.log(density[1:][drawn] / density[:-1][drawn])
    exponent[drawn] = rise / np.log(frequency[1:][drawn] / frequency[:-1][drawn])
    return exponent


def density_at(spectrum: PowerSpectralDensity, frequency: ArrayLike) -> FloatArray:
    """Density in (unit)^2/Hz at frequency in Hz (any shape); zero outside the break points.

    At a vertical step the value is that of the upper side; at the last break point its own.
    """
    points, density = spectrum.frequency, spectrum.density
    asked = np.asarray(frequency, dtype=float)
    inside = (asked >= points[0]) & (asked <= points[-1])
    piece = np.clip(np.searchsorted(points, asked, side="right") - 1, 0, points.size - 2)
    while np.any(stuck := points[piece] == points[piece + 1]):
        piece = piece - stuck
    ratio = np.where(inside, asked, points[0]) / points[piece]
    value = density[piece] * np.exp(segment_exponents(spectrum)[piece] * np.log(ratio))
    return np.where(inside, value, 0.0)


def _power_law_area(
    start: FloatArray, end: FloatArray, density: FloatArray, exponent: FloatArray
) -> FloatArray:
    """Integral of density (f/start)^exponent from start to end; one formula through exponent -1."""
    octave = np.log(end / start)
    growth = (exponent + 1.0) * octave
    small = np.abs(growth) < 1e-8
    mean = np.where(small, 1.0 + 0.5 * growth, np.expm1(growth) / np.where(small, 1.0, growth))
    return np.asarray(density * start * octave * mean, dtype=float)


def mean_square_between(spectrum: PowerSpectralDensity, low: ArrayLike, high: ArrayLike) -> FloatArray:
    """Mean square in (unit)^2 between low and high in Hz (broadcast together): exact, segment by segment.

    p1 f1/(n+1) [(f2/f1)^(n+1) - 1] per segment, p1 f1 ln(f2/f1) where n = -1.
    """
    points = spectrum.frequency
    low_edge, high_edge = np.broadcast_arrays(np.asarray(low, dtype=float), np.asarray(high, dtype=float))
    start = np.clip(low_edge[..., None], points[:-1], points[1:])
    end = np.clip(high_edge[..., None], points[:-1], points[1:])
    end = np.maximum(start, end)
    exponent = segment_exponents(spectrum)
    density = spectrum.density[:-1] * np.exp(exponent * np.log(start / points[:-1]))
    return np.asarray(_power_law_area(start, end, density, exponent).sum(axis=-1), dtype=float)


def mean_square(spectrum: PowerSpectralDensity) -> float:
    """Mean square over the whole spectrum in (unit)^2, exact."""
    return float(mean_square_between(spectrum, spectrum.frequency[0], spectrum.frequency[-1]))


def root_mean_square(spectrum: PowerSpectralDensity) -> float:
    """Overall rms level in the spectrum's unit, exact."""
    return float(np.sqrt(mean_square(spectrum)))


def differentiated(spectrum: PowerSpectralDensity, times: int) -> PowerSpectralDensity:
    """Density of the quantity differentiated `times` times over time (negative: integrated): S (2 pi f)^(2
    times).

    Exact: a power of the frequency keeps every segment straight on log-log axes.
    """
    return PowerSpectralDensity(
        spectrum.frequency, spectrum.density * (2.0 * np.pi * spectrum.frequency) ** (2 * times)
    )


def scaled(spectrum: PowerSpectralDensity, amplitude_factor: float) -> PowerSpectralDensity:
    """Density of the quantity times amplitude_factor: S times its square."""
    return PowerSpectralDensity(spectrum.frequency, spectrum.density * amplitude_factor**2)


def resampled(spectrum: PowerSpectralDensity, frequency: ArrayLike) -> PowerSpectralDensity:
    """The spectrum redrawn through its own values at frequency (N,) in Hz; exact where these include its
    corners.
    """
    points = np.asarray(frequency, dtype=float)
    return PowerSpectralDensity(points, density_at(spectrum, points))


def between(spectrum: PowerSpectralDensity, low: float, high: float) -> PowerSpectralDensity | None:
    """The part of the spectrum from low to high in Hz, exact; None where it has none."""
    points, density = spectrum.frequency, spectrum.density
    low, high = max(low, float(points[0])), min(high, float(points[-1]))
    if high <= low:
        return None
    inside = (points > low) & (points < high)
    # At a step the first end belongs to what follows it, the last to what comes before.
    ends = density_at(spectrum, low), density_at(spectrum, low + (high - low) * (1.0 - 1e-12))
    return PowerSpectralDensity(np.r_[low, points[inside], high], np.r_[ends[0], density[inside], ends[1]])


def band_averaged(spectrum: PowerSpectralDensity, edges: ArrayLike) -> PowerSpectralDensity:
    """The spectrum as a staircase over edges (N,) in Hz that keeps the mean square of every step exactly."""
    edge = np.asarray(edges, dtype=float)
    level = mean_square_between(spectrum, edge[:-1], edge[1:]) / np.diff(edge)
    return staircase(edge[:-1], edge[1:], level)


def staircase(low: FloatArray, high: FloatArray, level: FloatArray) -> PowerSpectralDensity:
    """Steps of constant level between low and high; a hole between two steps becomes a gap of density
    zero.
    """
    frequency: list[float] = []
    density: list[float] = []
    for start, end, value in zip(low, high, level, strict=True):
        if frequency and start > frequency[-1]:
            frequency += [frequency[-1], start]
            density += [0.0, 0.0]
        frequency += [start, end]
        density += [value, value]
    return PowerSpectralDensity(np.array(frequency), np.array(density))
