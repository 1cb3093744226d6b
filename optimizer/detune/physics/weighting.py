"""Frequency weightings of ISO 2631-1 for whole-body vibration: Wk (vertical) and Wd (horizontal), on
acceleration.

Each weighting is the product of the standard's transfer functions: second-order high pass and low pass (band
limits), the acceleration-velocity transition and, for Wk, the upward step. Constants of ISO 2631-1:1997,
annex A (the same in ISO 8041-1), from memory; the values they give agree with the standard's table of
factors.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from detune.physics.array_types import ArrayLike, ComplexArray, FloatArray
from detune.physics.spectra import PowerSpectralDensity, mean_square_between

Weighting = Literal["Wk", "Wd"]


@dataclass(frozen=True)
class WeightingConstants:
    """Corner frequencies in Hz and quality factors: f1, f2 band limits; f3, f4, q4 transition; f5, q5, f6,
    q6 step.
    """

    f1: float
    f2: float
    f3: float
    f4: float
    q4: float
    step: tuple[float, float, float, float] | None


WEIGHTINGS: dict[Weighting, WeightingConstants] = {
    "Wk": WeightingConstants(0.4, 100.0, 12.5, 12.5, 0.63, (2.37, 0.91, 3.35, 0.91)),
    "Wd": WeightingConstants(0.4, 100.0, 2.0, 2.0, 0.63, None),
}


def frequency_weighting(frequency: ArrayLike, weighting: Weighting) -> ComplexArray:
    """Complex weighting factor at frequency in Hz (any shape); 0 at frequency 0."""
    constants = WEIGHTINGS[weighting]
    f = np.asarray(frequency, dtype=float)
    s = 1j * f
    # The band limits are Butterworth filters, whose quality factor is 1/sqrt(2).
    high = s**2 / (s**2 + np.sqrt(2.0) * constants.f1 * s + constants.f1**2)
    low = 1.0 / (1.0 + np.sqrt(2.0) * s / constants.f2 + (s / constants.f2) ** 2)
    transition = (1.0 + s / constants.f3) / (
        1.0 + s / (constants.q4 * constants.f4) + (s / constants.f4) ** 2
    )
    factor = high * low * transition
    if constants.step is not None:
        f5, q5, f6, q6 = constants.step
        factor = factor * (s**2 + s * f5 / q5 + f5**2) / (s**2 + s * f6 / q6 + f6**2)
    return np.asarray(factor, dtype=complex)


def weighted_rms_of_lines(frequency: ArrayLike, amplitude: ArrayLike, weighting: Weighting) -> FloatArray:
    """Weighted rms of spectral lines: frequency (L,) in Hz, peak amplitude (..., L) complex or real ->
    (...).
    """
    factor = np.abs(frequency_weighting(frequency, weighting))
    return np.asarray(np.sqrt(0.5 * np.sum((factor * np.abs(np.asarray(amplitude))) ** 2, axis=-1)))


def weighted_rms_of_bands(centre: ArrayLike, rms: ArrayLike, weighting: Weighting) -> FloatArray:
    """Weighted rms of one-third-octave band values: centre (B,) in Hz, rms (..., B) -> (...).

    The factor is taken at the centre, as the standard allows (ISO 2631-1, 6.4.2).
    """
    factor = np.abs(frequency_weighting(centre, weighting))
    return np.asarray(np.sqrt(np.sum((factor * np.asarray(rms, dtype=float)) ** 2, axis=-1)))


def weighted_rms_of_spectrum(spectrum: PowerSpectralDensity, weighting: Weighting) -> float:
    """Weighted rms of an acceleration density; the weighting in slices of a fiftieth of an octave, to
    1e-4.
    """
    low, high = spectrum.frequency[0], spectrum.frequency[-1]
    edge = np.geomspace(low, high, int(np.ceil(50.0 * np.log2(high / low))) + 1)
    square = mean_square_between(spectrum, edge[:-1], edge[1:])
    factor = np.abs(frequency_weighting(np.sqrt(edge[:-1] * edge[1:]), weighting)) ** 2
    return float(np.sqrt(np.sum(square * factor)))
