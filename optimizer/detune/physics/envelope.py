"""Largest response over a continuous range of speed, not over a grid.

Samples are laid at the ends, at every natural frequency and over the gaps between. Then every local peak that
could be the largest is refined by the parabola of 1/amplitude^2 until nothing changes. The result is always a value
that was evaluated, so it never exceeds the true supremum; how far it can fall short is estimated, not proven (the
bounds over intervals of the proof floor prove it).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from detune.physics.array_types import ArrayLike, BoolArray, FloatArray, IntArray
from detune.physics.peaks import Peaks, Samples, local_peaks

Amplitude = Callable[[FloatArray], FloatArray]
PointAmplitude = Callable[[IntArray, FloatArray], FloatArray]
_Ask = Callable[[IntArray, FloatArray], tuple[FloatArray, int]]

# Samples are closest in log(omega + high / 20): even at low frequency, geometric at high.
BLEND = 20.0
BLOCK = 200_000
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

    - amplitude: omega (D, F) -> (R, D, F), not negative, each design at its own frequencies.
    - low, high: scalars or (D,); equal for a single frequency.
    - centres, half_widths: (D, m) in rad/s, the natural frequencies that the rows can show, divided by the order
      for an order of a shaft (``centres_of_orders``), and their half-power half widths eta w / 2. With strong
      dashpots use the damped poles (``modes.damped_poles``: imaginary part and minus the real part); a damper
      that locks two masses together moves a sharp peak away from every undamped frequency.
    - tolerance: relative change below which a peak is settled.
    - points: the same response at single points, (design (N,), omega (N,)) -> (R, N), used after the first pass so
      that settled designs cost nothing more. Without it every design is evaluated until the last has settled.
    - background: number of samples beside ends and centres (default 24, or the number of centres if larger).

    FloatingPointError if a response is NaN or infinite; ValueError if the shapes or the interval are wrong.
    """
    centres = np.atleast_2d(np.asarray(centres, dtype=float))
    widths = np.atleast_2d(np.asarray(half_widths, dtype=float))
    low, high = (np.broadcast_to(np.asarray(a, dtype=float), centres.shape[:1]) for a in (low, high))
    _check(low, high, centres, widths, tolerance)
    extra = max(24, centres.shape[1]) if background is None else background
    omega = first_samples(low, high, centres, extra)
    values = _checked(amplitude(omega))
    if values.ndim != 3 or values.shape[1:] != omega.shape:
        raise ValueError(f"the amplitude must have shape (rows, {omega.shape[0]}, {omega.shape[1]})")
    designs = omega.shape[0]
    if points is None:
        ask, block = _through_all(amplitude, low), max(1, designs)
    else:
        # Blocks that stay in cache: every pass over the samples is otherwise one over main memory.
        ask, block = _point_by_point(points), max(16, BLOCK // max(1, values.shape[0] * omega.shape[1]))
    parts = []
    for start in range(0, designs, block):
        part = np.arange(start, min(start + block, designs))
        parts.append(_refine(ask, part, omega[part], values[:, part], (centres, widths), tolerance))
    if not parts:
        empty = np.zeros(values.shape[:2])
        return Envelope(empty, empty, empty, 0)
    value, where, error = (np.concatenate(column, axis=1) for column in list(zip(*parts, strict=True))[:3])
    return Envelope(value, where, error, omega.size + sum(part[3] for part in parts))


def centres_of_orders(
    frequency: ArrayLike, loss_factor: ArrayLike, orders: ArrayLike
) -> tuple[FloatArray, FloatArray]:
    """Centres and half widths for ``supremum`` on the axis of shaft speed, for all orders of the shaft.

    Shapes: frequency (..., n) in Hz, loss_factor (..., n), orders (k) -> two (..., n k) in rad/s: w_n / order
    and eta w_n / (2 order). Modes without oscillation (infinite loss factor) keep a half width of their own
    centre.
    """
    omega = 2.0 * np.pi * np.asarray(frequency, dtype=float)
    half_width = omega * np.minimum(np.asarray(loss_factor, dtype=float), 2.0) / 2.0
    return _by_order(omega, orders), _by_order(half_width, orders)


def centres_of_poles(poles: ArrayLike, orders: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """The same from damped poles: Im p / order and -Re p / order.

    Shapes: poles (..., n) complex in rad/s (``modes.damped_poles``), orders (k) -> two (..., n k) in rad/s. Prefer
    it wherever dashpots or loss factors above about 0.2 make modes of different damping overlap; the half widths of
    undamped modes are then no longer those of the peaks.
    """
    p = np.asarray(poles, dtype=complex)
    return _by_order(p.imag, orders), _by_order(-p.real, orders)


def _by_order(omega: FloatArray, orders: ArrayLike) -> FloatArray:
    turned = omega[..., :, None] / np.asarray(orders, dtype=float)
    return np.asarray(turned.reshape((*omega.shape[:-1], -1)))


def first_samples(low: FloatArray, high: FloatArray, centres: FloatArray, extra: int) -> FloatArray:
    """First samples, ascending: ends, centres inside the interval, and ``extra`` that halve the widest gaps.

    Shapes: (D,), (D,), (D, m) in rad/s -> (D, m + 2 + extra). A centre outside repeats the lower end.
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


def _refine(
    ask: _Ask,
    active: IntArray,
    omega: FloatArray,
    values: FloatArray,
    poles: tuple[FloatArray, FloatArray],
    tolerance: float,
) -> tuple[FloatArray, FloatArray, FloatArray, int]:
    """Value, place and estimated error (R, designs) from the first samples on, and the points it took."""
    first, rows, spent = int(active[0]), values.shape[0], 0
    value, where, error = (np.zeros((rows, active.size)) for _ in range(3))
    open_rows = np.ones((rows, active.size), dtype=bool)
    omega, values = _unique(omega, values)
    for turn in range(MOST_ROUNDS + 1):
        best = values.max(axis=-1)
        value[:, active - first] = best
        where[:, active - first] = omega[np.arange(active.size), values.argmax(axis=-1)]
        row, design = np.nonzero(open_rows)
        top = best[open_rows]
        samples = Samples(omega, design, values[open_rows], top, poles[0][active], poles[1][active])
        peaks = local_peaks(samples, tolerance)
        error[row, (active - first)[design]] = _shortfall(peaks, top)
        wanted = _wanted(peaks, top, tolerance)
        if turn == MOST_ROUNDS or not np.any(wanted):
            break
        still = np.zeros(row.size, dtype=bool)
        still[peaks.curve[wanted]] = True
        open_rows = np.zeros_like(open_rows)
        open_rows[row[still], design[still]] = True
        at, place = _stab(design[peaks.curve[wanted]], peaks.place[wanted], peaks.reach[wanted])
        keep, position = np.unique(at, return_inverse=True)
        active, omega, values, best, open_rows = (
            active[keep],
            omega[keep],
            values[:, keep],
            best[:, keep],
            open_rows[:, keep],
        )
        fresh = _lay_out(position, place, active.size)
        fresh_values, points = ask(active, fresh)
        spent += points
        # A settled row opens again when a sample asked for by another one surprises it.
        open_rows |= fresh_values.max(axis=-1) > best * (1.0 + tolerance)
        omega, values = _merge(omega, values, fresh, fresh_values)
    return value, where, error, spent


def _wanted(peaks: Peaks, best: FloatArray, tolerance: float) -> BoolArray:
    """Peaks that are neither settled nor certain to stay below the best of their curve."""
    hopeful = peaks.sample * (2.0 * peaks.rise - 1.0) > best[peaks.curve] * (1.0 + 0.5 * tolerance)
    return np.asarray((peaks.rise > 1.0 + tolerance) & hopeful & np.isfinite(peaks.place))


def _shortfall(peaks: Peaks, best: FloatArray) -> FloatArray:
    """Largest estimated peak over the best sample of each curve, less 1."""
    out = np.ones_like(best)
    np.maximum.at(out, peaks.curve, peaks.sample * peaks.rise / np.where(best > 0.0, best, 1.0)[peaks.curve])
    return np.asarray(out - 1.0)


def _stab(design: IntArray, place: FloatArray, reach: FloatArray) -> tuple[IntArray, FloatArray]:
    """Fewest samples that serve all places: one where their reaches overlap, design by design."""
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


def _point_by_point(points: PointAmplitude) -> _Ask:
    """Values (R, designs, F) at new samples of some designs, unused entries -inf, and how many points it took."""

    def ask(active: IntArray, fresh: FloatArray) -> tuple[FloatArray, int]:
        used = np.isfinite(fresh)
        flat = _checked(points(np.repeat(active, used.sum(axis=1)), fresh[used]))
        out = np.full((flat.shape[0], *fresh.shape), -np.inf)
        out[:, used] = flat
        return out, int(used.sum())

    return ask


def _through_all(amplitude: Amplitude, low: FloatArray) -> _Ask:
    """The same through a function that only knows all designs at once."""

    def ask(active: IntArray, fresh: FloatArray) -> tuple[FloatArray, int]:
        used = np.isfinite(fresh)
        asked = np.repeat(low[:, None], fresh.shape[1], axis=1)
        asked[active] = np.where(used, fresh, fresh[:, :1])
        out = _checked(amplitude(asked))[:, active]
        return np.where(used, out, -np.inf), asked.size

    return ask


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
