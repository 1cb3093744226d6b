"""Measured time histories: checked, detrended, resampled, and turned into a density (Welch) or into lines."""

from __future__ import annotations

from fractions import Fraction

import numpy as np

from detune.physics.array_types import ArrayLike, ComplexArray, FloatArray
from detune.physics.spectra import PowerSpectralDensity

CLOCK_TOLERANCE = 0.01


class RecordFault(ValueError):
    """A record has a gap, a value that is no number, or is too short for what is asked of it.

    row: of the fault, counted from 1, where one row is at fault.
    """

    def __init__(self, told: str, row: int | None = None) -> None:
        super().__init__(told)
        self.row = row


def sample_rate(time: ArrayLike) -> float:
    """Sample rate in Hz of evenly spaced time stamps (T,) in s.

    Raises RecordFault at the first step that differs from the median step by more than 1 % of it (a gap, a
    repeated or a reversed stamp), naming the row counted from 1.
    """
    stamp = checked(time)
    step = np.diff(stamp)
    usual = float(np.median(step))
    # Printed stamps are rounded to their last decimal, and each step by up to one unit of it. A unit as large as
    # the step says nothing of rounding.
    unit = _printed_unit(stamp)
    allowed = CLOCK_TOLERANCE * usual + (unit if unit < 0.5 * usual else 0.0)
    off = np.abs(step - usual) > allowed
    if usual <= 0.0 or np.any(off):
        row = int(np.argmax(off)) + 2
        raise RecordFault(f"time stamps are not evenly spaced: row {row} at {stamp[row - 1]:g} s", row)
    return float((stamp.size - 1) / (stamp[-1] - stamp[0]))


def _printed_unit(stamp: FloatArray) -> float:
    """The decimal unit to which time stamps were printed; rounding of the floats themselves beyond 1e-9."""
    for decimals in range(10):
        scaled = stamp * 10.0**decimals
        if np.all(np.abs(scaled - np.rint(scaled)) < 1e-6):
            return float(10.0**-decimals)
    return 4.0 * float(np.spacing(np.max(np.abs(stamp))))


def checked(values: ArrayLike) -> FloatArray:
    """The record (T, ...) as floats; raises RecordFault for fewer than two rows, or NaN or infinity by
    row.
    """
    record = np.asarray(values, dtype=float)
    if record.ndim < 1 or record.shape[0] < 2:
        raise RecordFault("a record needs two or more samples")
    bad = ~np.isfinite(record).reshape(record.shape[0], -1).all(axis=1)
    if np.any(bad):
        raise RecordFault(f"row {int(np.argmax(bad)) + 1} of the record is not a number")
    return record


def detrended(values: ArrayLike, degree: int = 0) -> FloatArray:
    """The record (T, ...) less its least-squares polynomial over time: degree 0 the mean, 1 the straight
    line.
    """
    record = checked(values)
    if degree < 0:
        raise ValueError("the degree of a trend is zero or more")
    place = np.linspace(-1.0, 1.0, record.shape[0])
    basis, _ = np.linalg.qr(np.polynomial.legendre.legvander(place, degree))
    flat = record.reshape(record.shape[0], -1)
    return (flat - basis @ (basis.T @ flat)).reshape(record.shape)


def resampled_record(values: ArrayLike, rate: float, new_rate: float) -> FloatArray:
    """The record (T, ...) at new_rate in Hz, by a polyphase filter that removes what would fold back.

    Going down loses everything above half the new rate; the caller states it. Raises RecordFault for bad
    values.
    """
    from scipy.signal import resample_poly

    record = checked(values)
    ratio = Fraction(new_rate / rate).limit_denominator(2000)
    if abs(float(ratio) * rate / new_rate - 1.0) > 1e-9:
        raise ValueError(f"{rate:g} Hz to {new_rate:g} Hz is no ratio of whole numbers up to 2000")
    if ratio == 1:
        return record.copy()
    return np.asarray(resample_poly(record, ratio.numerator, ratio.denominator, axis=0, padtype="line"))


def density_of_record(
    values: ArrayLike, rate: float, segment_duration: float, degree: int = 0
) -> tuple[PowerSpectralDensity, int]:
    """One-sided power spectral density of a record (T,) by Welch's method, and the number of segments
    averaged.

    Hann window, half overlap, segments of segment_duration in s (resolution 1/segment_duration Hz). The break
    points are the frequency bins above zero; bins of density zero refuse. The normalised random error of each
    bin is about 1/sqrt(segments). P. D. Welch, IEEE Trans. Audio Electroacoust. 15 (1967) 70. Raises
    RecordFault for a record shorter than one segment, or without motion.
    """
    from scipy.signal import welch

    record = detrended(values, degree)
    if record.ndim != 1:
        raise ValueError("one channel at a time")
    length = round(segment_duration * rate)
    if length < 8 or length > record.size:
        raise RecordFault(
            f"segments of {segment_duration:g} s do not fit a record of {record.size / rate:g} s"
        )
    step = length - length // 2
    count = 1 + (record.size - length) // step
    frequency, density = welch(record, fs=rate, window="hann", nperseg=length, noverlap=length // 2)
    if not np.all(density[1:] > 0.0):
        raise RecordFault(
            "the record holds no motion at some frequency bins; it cannot be drawn on log-log axes"
        )
    return PowerSpectralDensity(frequency[1:], density[1:]), count


def lines_of_record(
    values: ArrayLike, rate: float, share: float = 0.9999
) -> tuple[FloatArray, ComplexArray, float]:
    """Spectral lines of a record (T,) taken as one period of a motion that repeats for ever.

    Returns frequency (L,) in Hz rising, peak phasors (L,) for exp(+j w t) with time from the first sample,
    and the share of the mean square (mean removed) that the lines hold: the strongest lines are taken until
    `share`. A motion whose period does not fit the record leaks into neighbouring lines.
    """
    record = detrended(values, 0)
    if record.ndim != 1:
        raise ValueError("one channel at a time")
    if not 0.0 < share <= 1.0:
        raise ValueError("the share of the mean square lies above 0 and at most at 1")
    phasor = np.fft.rfft(record) * (2.0 / record.size)
    phasor[0] = 0.0
    if record.size % 2 == 0:
        # The bin at half the sample rate has no mirror image, so its amplitude is counted once only.
        phasor[-1] *= 0.5
    square = 0.5 * np.abs(phasor) ** 2
    if record.size % 2 == 0:
        square[-1] *= 2.0
    total = float(square.sum())
    if total == 0.0:
        raise RecordFault("the record holds no motion")
    order = np.argsort(square)[::-1]
    held = np.cumsum(square[order]) / total
    count = min(int(np.searchsorted(held, share * (1.0 - 1e-12))) + 1, order.size)
    kept = np.sort(order[:count])
    frequency = np.asarray(kept * (rate / record.size), dtype=float)
    return frequency, phasor[kept], float(held[count - 1])
