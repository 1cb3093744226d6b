"""One-third-octave bands by IEC 61260-1:2014, base ten: G = 10^(3/10), reference frequency 1000 Hz.

A band is named by its index x: exact centre 1000 G^(x/3) = 1000 * 10^(x/10) Hz, edges G^(-1/6) and G^(1/6)
times the centre. Index 0 is 1000 Hz, -20 is 10 Hz, -30 is 1 Hz.
"""

from __future__ import annotations

import numpy as np

from detune.physics.array_types import ArrayLike, FloatArray, IntArray

REFERENCE_FREQUENCY = 1000.0
NOMINAL_DECADE = (1.0, 1.25, 1.6, 2.0, 2.5, 3.15, 4.0, 5.0, 6.3, 8.0)


def exact_centre(index: ArrayLike) -> FloatArray:
    """Exact centre frequency in Hz of the band of this index. Shapes broadcast."""
    return np.asarray(REFERENCE_FREQUENCY * 10.0 ** (np.asarray(index, dtype=float) / 10.0))


def band_edges(index: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Lower and upper edge in Hz of the band of this index. Shapes broadcast."""
    x = np.asarray(index, dtype=float)
    return exact_centre(x - 0.5), exact_centre(x + 0.5)


def nominal_centre(index: ArrayLike) -> FloatArray:
    """Nominal centre in Hz by which the band is called (8 for 7.943 Hz). Shapes broadcast; index integer."""
    x = np.asarray(index, dtype=np.int64)
    decade, place = np.divmod(x, 10)
    # Division keeps 31.5 and 0.8 exact where a multiplication by a power of ten would not.
    power = 10.0 ** np.abs(decade + 3)
    nominal = np.asarray(NOMINAL_DECADE)[place]
    return np.asarray(np.where(decade >= -3, nominal * power, nominal / power))


def band_index(frequency: ArrayLike) -> IntArray:
    """Index of the band that holds a frequency in Hz, lower edge included. ValueError unless positive."""
    f = np.asarray(frequency, dtype=float)
    if np.any(~(f > 0.0)):
        raise ValueError("a one-third-octave band holds positive frequencies only")
    return np.asarray(np.floor(10.0 * np.log10(f / REFERENCE_FREQUENCY) + 0.5), dtype=np.int64)


def band_indices(lowest: float, highest: float) -> IntArray:
    """Indices of all bands from the one that holds ``lowest`` to the one that holds ``highest``, both in Hz."""
    first, last = int(band_index(lowest)), int(band_index(highest))
    if last < first:
        raise ValueError("the highest frequency of a band range must not be below the lowest")
    return np.arange(first, last + 1, dtype=np.int64)
