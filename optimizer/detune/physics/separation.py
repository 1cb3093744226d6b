"""Separation of natural frequencies from excitation intervals, by the excitation frequency."""

from __future__ import annotations

import numpy as np

from detune.physics.array_types import ArrayLike, FloatArray


def separation(frequency: ArrayLike, low: ArrayLike, high: ArrayLike) -> FloatArray:
    """Separation of a natural frequency f from an excitation interval: max(1 - f/low, f/high - 1).

    Above the interval that is f/high - 1, below it 1 - f/low. Inside, both straight lines simply go on: 0 at
    the two edges, negative between, least at 2 low high / (low + high). For a single excitation frequency it
    is |f/f_e - 1|. An interval that starts at 0 has no side below.

    Shapes broadcast, Hz (or any one unit) -> dimensionless. ValueError unless 0 <= low <= high and high > 0.
    """
    f, a, b = (np.asarray(x, dtype=float) for x in (frequency, low, high))
    if not (np.all(a >= 0.0) and np.all(a <= b) and np.all(b > 0.0)):
        raise ValueError("an excitation interval needs 0 <= low <= high and high > 0")
    from_zero = a == 0.0
    below = np.where(from_zero, -np.inf, 1.0 - f / np.where(from_zero, 1.0, a))
    return np.asarray(np.maximum(below, f / b - 1.0))


def least_separation(frequencies: ArrayLike, intervals: ArrayLike) -> FloatArray:
    """Least separation over all modes and all intervals.

    Shapes: frequencies (..., n) in Hz, intervals (k, 2) in Hz -> (...). Infinite if there is no interval or
    no mode.
    """
    f = np.asarray(frequencies, dtype=float)
    bands = np.asarray(intervals, dtype=float).reshape(-1, 2)
    least = np.full(f.shape[:-1], np.inf)
    for low, high in bands:
        least = np.minimum(least, np.min(separation(f, low, high), axis=-1, initial=np.inf))
    return least
