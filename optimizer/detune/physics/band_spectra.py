"""One-third-octave spectra and spectral lines, to and from power spectral densities.

Bands are those of IEC 61260-1:2014 (base ten), named by their index as in `octaves`. A band value may be
taken as noise (a flat density over the band) or as a tone (one line somewhere in the band); who does not know
takes the tone.
"""

from __future__ import annotations

import numpy as np

from detune.physics.array_types import ArrayLike, FloatArray, IntArray
from detune.physics.octaves import band_edges, band_index, exact_centre
from detune.physics.spectra import PowerSpectralDensity, mean_square_between, staircase

# The nominal centres of IEC 61260-1 lie within 1 % of the exact ones.
NOMINAL_CENTRE_TOLERANCE = 0.015


def band_index_of_centre(frequency: ArrayLike) -> IntArray:
    """Band index of exact or nominal centre frequencies in Hz. Shapes broadcast.

    Raises ValueError for a frequency more than 1.5 % from every exact centre.
    """
    asked = np.asarray(frequency, dtype=float)
    index = band_index(asked)
    off = np.abs(asked / exact_centre(index) - 1.0)
    if np.any(off > NOMINAL_CENTRE_TOLERANCE):
        wrong = float(np.ravel(asked)[int(np.argmax(np.ravel(off)))])
        raise ValueError(f"{wrong:g} Hz is no one-third-octave centre frequency")
    return index


def third_octave_rms(spectrum: PowerSpectralDensity, index: ArrayLike) -> FloatArray:
    """Band rms values in the spectrum's unit, one for each band index."""
    low, high = band_edges(index)
    return np.sqrt(mean_square_between(spectrum, low, high))


def spectrum_from_third_octaves(centre: ArrayLike, rms: ArrayLike) -> PowerSpectralDensity:
    """Band values taken as noise: centre (B,) in Hz (exact or nominal, rising), rms (B,) -> a flat density
    per band.

    The mean square of each band is kept exactly over its exact width. Raises ValueError for frequencies that
    are no centres, do not rise, or for a negative rms.
    """
    index = band_index_of_centre(centre)
    values = np.asarray(rms, dtype=float)
    if index.ndim != 1 or values.shape != index.shape:
        raise ValueError("a one-third-octave spectrum needs one rms value for each centre frequency")
    if np.any(np.diff(index) <= 0):
        raise ValueError("one-third-octave centre frequencies must rise, each band once")
    wrong = ~(values >= 0.0)
    if np.any(wrong):
        raise ValueError(f"row {int(np.argmax(wrong)) + 1}: a band rms is a number not below zero")
    low, high = band_edges(index)
    return staircase(low, high, values**2 / (high - low))


def tones_from_third_octaves(centre: ArrayLike, rms: ArrayLike) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Band values taken as tones: lowest and highest frequency (B,) in Hz and peak amplitude (B,) = sqrt(2)
    rms.

    The tone may stand anywhere in its band; whoever judges takes the worst frequency of the interval.
    """
    low, high = band_edges(band_index_of_centre(centre))
    return low, high, np.sqrt(2.0) * np.asarray(rms, dtype=float)


def lines_in_third_octaves(frequency: ArrayLike, amplitude: ArrayLike) -> tuple[IntArray, FloatArray]:
    """Band indices (B,) and band rms (B,) of spectral lines with peak amplitudes (complex allowed).

    Lines at one frequency add with phase; lines at different frequencies in a band add as mean squares.
    """
    place, where = np.unique(np.asarray(frequency, dtype=float), return_inverse=True)
    phasor = np.zeros(place.size, dtype=complex)
    np.add.at(phasor, where, np.asarray(amplitude))
    index, band = np.unique(band_index(place), return_inverse=True)
    square = np.zeros(index.size)
    np.add.at(square, band, 0.5 * np.abs(phasor) ** 2)
    return index, np.sqrt(square)
