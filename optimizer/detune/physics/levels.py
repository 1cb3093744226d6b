"""Levels in decibels by ISO 1683:2015, both ways. All levels are of rms values, 20 log10(rms / reference)."""

from __future__ import annotations

import numpy as np

from detune.physics.array_types import ArrayLike, FloatArray

DISPLACEMENT_REFERENCE = 1e-12  # m
VELOCITY_REFERENCE = 1e-9  # m/s
ACCELERATION_REFERENCE = 1e-6  # m/s2
FORCE_REFERENCE = 1e-6  # N
# Older American levels of velocity; 20 dB lower than those of ISO 1683. Never assumed, only read when stated.
OLD_VELOCITY_REFERENCE = 1e-8  # m/s


def level(rms: ArrayLike, reference: float) -> FloatArray:
    """Level in dB of an rms value in the unit of ``reference``. ValueError unless every value is positive."""
    value = np.asarray(rms, dtype=float)
    if np.any(~(value > 0.0)) or not reference > 0.0:
        raise ValueError("a level in decibels needs a positive rms value and a positive reference")
    return np.asarray(20.0 * np.log10(value / reference))


def rms_from_level(decibels: ArrayLike, reference: float) -> FloatArray:
    """Rms value, in the unit of ``reference``, of a level in dB."""
    if not reference > 0.0:
        raise ValueError("a level in decibels needs a positive reference")
    return np.asarray(reference * 10.0 ** (np.asarray(decibels, dtype=float) / 20.0))


def peak_from_rms(rms: ArrayLike) -> FloatArray:
    """Peak amplitude of a sine from its rms value."""
    return np.asarray(np.asarray(rms, dtype=float) * np.sqrt(2.0))


def rms_from_peak(peak: ArrayLike) -> FloatArray:
    """Rms value of a sine from its peak amplitude."""
    return np.asarray(np.asarray(peak, dtype=float) / np.sqrt(2.0))
