"""Largest response over a continuous range of speed, not over a grid.

Samples are laid at the ends, at every natural frequency and over the gaps between; then every local peak that
could be the largest is refined by the parabola of 1/amplitude^2 until nothing changes. The result is always a
value that was evaluated, so it never exceeds the true supremum; how far it can fall short is estimated, not
proven (the bounds over intervals of the proof floor prove it).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from detune.physics.array_types import ArrayLike, FloatArray, IntArray
from detune.physics.peaks import Peaks, local_peaks

Amplitude = Callable[[FloatArray], FloatArray]
PointAmplitude = Callable[[IntArray, FloatArray], FloatArray]

# Samples are closest in log(omega + high / 20): even at low frequency, geometric at high.
BLEND = 20.0
MOST_ROUNDS = 12


@dataclass(frozen=True)
class Envelope:
    """Supremum of R response rows of D designs over each design's frequency interval.

    value (R, D) is the largest amplitude evaluated, omega (R, D) in rad/s where it occurs, relative_error (R,
    D) an estimate of how far the true supremum may lie above it; evaluated is the number of (design,
    frequency) points.
    """

    value: FloatArray
    omega: FloatArray
    relative_error: FloatArray
    evaluated: int


def supremum(
    amplitude: Amplitude,
    low: ArrayLike,
    high: ArrayLike,
    centres: ArrayLike,
    half_widths: ArrayLike,
    tolerance: float = 1e-4,
    *,
    points: PointAmplitude | None = None,
    background: int | None = None,
) -> Envelope:
    """Largest amplitude of every row of every design over low <= omega <= high (rad/s).

    amplitude: omega (D, F) -> (R, D, F), not negative, each design at its own frequencies. low, high: scalars
    or (D,); equal for a single frequency. centres, half_widths: (D, m), in rad/s, the natural frequencies
    that the rows can show (divided by the order for
        an order of a shaft, see ``centres_of_orders``) and their half-power half widths eta w / 2.
    tolerance: relative change below which a peak is settled. points: the same response for single points,
    (design (N,), omega (N,)) -> (R, N); used after the first pass, so
        that settled designs cost nothing more. Without it every design is evaluated until the last has
        settled.
    background: number of samples beside ends and centres (default 24, or the number of centres if larger).

    FloatingPointError if a response is NaN or infinite; ValueError if the shapes or the interval are wrong.
    """
    centres = np.atleast_2d(np.asarray(centres, dtype=float))
    widths = np.atleast_2d(np.asarray(half_widths, dtype=float))
    low, high = (np.broadcast_to(np.asarray(a, dtype=float), centres.shape[:1]) for a in (low, high))
    _check(low, high, centres, widths, tolerance)
    extra = max(24, centres.shape[1]) if background is None else background
    omega = first_samples(low, high, centres, widths, extra)
    values = _checked(amplitude(omega))
    if values.ndim != 3 or values.shape[1:] != omega.shape:
        raise ValueError(f"the amplitude must have shape (rows, {omega.shape[0]}, {omega.shape[1]})")
    evaluated = omega.size
    value, where, error = (np.zeros(values.shape[:2]) for _ in range(3))
    active = np.arange(omega.shape[0])
    poles = centres + 1j * widths
    omega, values = _unique(omega, values)
    for turn in range(MOST_ROUNDS + 1):
        best = values.max(axis=-1)
        peaks = local_peaks(omega, values, best, poles[active], tolerance)
        value[:, active] = best
        where[:, active] = omega[np.arange(active.size), values.argmax(axis=-1)]
        error[:, active] = _shortfall(peaks, best)
        wanted = _wanted(peaks, best, tolerance)
        if turn == MOST_ROUNDS or not np.any(wanted):
            break
        design, place = _stab(peaks, wanted)
        keep, position = np.unique(design, return_inverse=True)
        active, omega, values = active[keep], omega[keep], values[:, keep]
        fresh = _lay_out(position, place, active.size)
        fresh_values, spent = _evaluate(amplitude, points, active, fresh, low)
        evaluated += spent
        omega, values = _merge(omega, values, fresh, fresh_values)
    return Envelope(value, where, error, evaluated)


def centres_of_orders(
    frequency: ArrayLike, loss_factor: ArrayLike, orders: ArrayLike
) -> tuple[FloatArray, FloatArray]:
    """Centres and half widths for ``supremum`` on the axis of shaft speed, for all orders of the shaft.

    Shapes: frequency (..., n) in Hz, loss_factor (..., n), orders (k) -> two (..., n k) in rad/s: w_n / order
    and eta w_n / (2 order). Modes without oscillation (infinite loss factor) keep a half width of their own
    centre.
    """
    omega = 2.0 * np.pi * np.asarray(frequency, dtype=float)
    half = np.minimum(np.asarray(loss_factor, dtype=float), 2.0) / 2.0
    turns = np.asarray(orders, dtype=float)
    centres = omega[..., :, None] / turns
    shape = (*omega.shape[:-1], omega.shape[-1] * turns.size)
    return centres.reshape(shape), (centres * half[..., :, None]).reshape(shape)


def first_samples(
    low: FloatArray, high: FloatArray, centres: FloatArray, half_widths: FloatArray, extra: int
) -> FloatArray:
    """First samples of every design, ascending: ends, centres inside, and ``extra`` that halve the widest
    gaps.

    Shapes: (D,), (D,), (D, m), (D, m) -> (D, m + 2 + extra).
    """
    ends = np.stack([low, high], axis=1)
    inside = (centres > ends[:, :1]) & (centres < ends[:, 1:])
    base = np.sort(np.concatenate([ends, np.where(inside, centres, ends[:, :1])], axis=1), axis=1)
    shift = np.where(high > 0.0, high, 1.0)[:, None] / BLEND
    scale = np.log(base + shift)
    start = np.concatenate([scale[:, :-1], np.zeros((scale.shape[0], extra))], axis=1)
    length = np.concatenate([np.diff(scale, axis=1), np.zeros((scale.shape[0], extra))], axis=1)
    rows = np.arange(scale.shape[0])
    for new in range(scale.shape[1] - 1, scale.shape[1] - 1 + extra):
        widest = length.argmax(axis=1)
        half = length[rows, widest] / 2.0
        length[rows, widest] = half
        start[:, new] = start[rows, widest] + half
        length[:, new] = half
    added = np.exp(start[:, scale.shape[1] - 1 :]) - shift
    samples = np.sort(np.concatenate([base, np.clip(added, ends[:, :1], ends[:, 1:])], axis=1), axis=1)
    return np.asarray(samples)


def _check(
    low: FloatArray, high: FloatArray, centres: FloatArray, widths: FloatArray, tolerance: float
) -> None:
    if centres.ndim != 2 or centres.shape != widths.shape:
        raise ValueError("centres and half widths must both have shape (designs, modes)")
    if not (
        np.isfinite(low).all() and np.isfinite(high).all() and np.all(low >= 0.0) and np.all(low <= high)
    ):
        raise ValueError("a frequency interval needs finite 0 <= low <= high")
    if np.isnan(centres).any() or np.isnan(widths).any():
        raise ValueError("a natural frequency or half width is not a number")
    if not tolerance > 0.0:
        raise ValueError("the tolerance must be positive")


def _checked(values: FloatArray) -> FloatArray:
    values = np.asarray(values, dtype=float)
    if not np.isfinite(values).all():
        raise FloatingPointError("a response is not a finite number")
    if values.size and values.min() < 0.0:
        raise ValueError("an amplitude must not be negative")
    return values


def _wanted(peaks: Peaks, best: FloatArray, tolerance: float) -> np.ndarray:
    """Peaks that are neither settled nor certain to stay below the best of their row."""
    top = best[peaks.row, peaks.design]
    hopeful = peaks.sample * (1.0 + 2.0 * (peaks.rise - 1.0)) > top * (1.0 + 0.5 * tolerance)
    return np.asarray((peaks.rise > 1.0 + tolerance) & hopeful & np.isfinite(peaks.place))


def _shortfall(peaks: Peaks, best: FloatArray) -> FloatArray:
    """Largest estimated peak over the best sample, less 1."""
    out = np.ones_like(best)
    top = best[peaks.row, peaks.design]
    np.maximum.at(out, (peaks.row, peaks.design), peaks.sample * peaks.rise / top)
    return np.asarray(out - 1.0)


def _stab(peaks: Peaks, wanted: np.ndarray) -> tuple[IntArray, FloatArray]:
    """Fewest samples that serve all wanted peaks: one sample for places whose reaches overlap, design by
    design.
    """
    design, place, reach = peaks.design[wanted], peaks.place[wanted], peaks.reach[wanted]
    order = np.lexsort((place + reach, design))
    design, left, right = design[order], (place - reach)[order], (place + reach)[order]
    chosen_design, chosen_place = [], []
    while design.size:
        first = np.concatenate([[True], design[1:] != design[:-1]])
        group = np.cumsum(first) - 1
        served = left <= right[first][group]
        latest = np.full(int(group[-1]) + 1, -np.inf)
        np.maximum.at(latest, group[served], left[served])
        chosen_design.append(design[first])
        # Every served reach holds the stretch from the latest left end to the earliest right end.
        chosen_place.append(0.5 * (latest + right[first]))
        design, left, right = design[~served], left[~served], right[~served]
    return np.concatenate(chosen_design), np.concatenate(chosen_place)


def _lay_out(position: IntArray, place: FloatArray, designs: int) -> FloatArray:
    """Flat places as (designs, most per design), unused entries infinite."""
    order = np.argsort(position, kind="stable")
    position, place = position[order], place[order]
    count = np.bincount(position, minlength=designs)
    column = np.arange(position.size) - np.repeat(np.cumsum(count) - count, count)
    out = np.full((designs, int(count.max())), np.inf)
    out[position, column] = place
    return out


def _evaluate(
    amplitude: Amplitude, points: PointAmplitude | None, active: IntArray, fresh: FloatArray, low: FloatArray
) -> tuple[FloatArray, int]:
    """Values (R, designs, F) at the new samples, unused entries -inf, and how many points it took."""
    used = np.isfinite(fresh)
    if points is not None:
        flat = _checked(points(np.repeat(active, used.sum(axis=1)), fresh[used]))
        out = np.full((flat.shape[0], *fresh.shape), -np.inf)
        out[:, used] = flat
        return out, int(used.sum())
    asked = np.repeat(low[:, None], fresh.shape[1], axis=1)
    asked[active] = np.where(used, fresh, fresh[:, :1])
    out = _checked(amplitude(asked))[:, active]
    return np.where(used, out, -np.inf), asked.size


def _merge(
    omega: FloatArray, values: FloatArray, fresh: FloatArray, fresh_values: FloatArray
) -> tuple[FloatArray, FloatArray]:
    omega = np.concatenate([omega, fresh], axis=1)
    values = np.concatenate([values, fresh_values], axis=2)
    order = np.argsort(omega, axis=1, kind="stable")
    return _unique(np.take_along_axis(omega, order, axis=1), np.take_along_axis(values, order[None], axis=2))


def _unique(omega: FloatArray, values: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Samples that repeat a neighbour to rounding become unused: infinite, with value -inf, at the end."""
    before = np.where(np.isfinite(omega[:, :-1]), omega[:, :-1], 0.0)
    with np.errstate(invalid="ignore"):
        repeated = np.diff(omega, axis=1) <= 1e-13 * before
    if not np.any(repeated):
        return omega, values
    # Of two equal places the larger value stays; they differ by rounding at most.
    keep = np.concatenate([np.ones((omega.shape[0], 1), dtype=bool), ~repeated], axis=1)
    omega = np.where(keep, omega, np.inf)
    values = np.where(keep, values, -np.inf)
    order = np.argsort(omega, axis=1, kind="stable")
    longest = max(1, int(np.isfinite(omega).sum(axis=1).max(initial=0)))
    order = order[:, :longest]
    return np.take_along_axis(omega, order, axis=1), np.take_along_axis(values, order[None], axis=2)
