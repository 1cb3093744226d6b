"""Where a curve over a range lies above zero: every such stretch, with edges closed in on from the outside."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from detune.physics.array_types import ArrayLike, FloatArray

# Samples round a centre, in half widths.
AROUND = np.concatenate([-np.geomspace(40.0, 0.05, 16), [0.0], np.geomspace(0.05, 40.0, 16)])
BACKGROUND = 241
ROUNDS = 6
FINER = 9
# An edge is closed in on by so many parts at a time, to this share of it.
PARTS, DIVISIONS, CLOSE = 16, 12, 1e-10
# A sampled peak this far below zero, or a dip this far above it, is looked at more closely.
NEAR_BELOW, NEAR_ABOVE = -0.6, 1.0


def stretches_above(
    excess: Callable[[FloatArray], FloatArray],
    low: float,
    high: float,
    centres: ArrayLike,
    half_widths: ArrayLike,
) -> list[tuple[float, float]]:
    """Stretches of [low, high] on which excess(x) > 0, in order.

    excess: (F,) -> (F,), relative to the limit (0 at the limit, -1 at nothing). centres, half_widths (m,):
    where it may have sharp peaks. Samples lie on a background and round every centre; local peaks just below
    zero and dips just above it are closed in on. The edge that is returned is a sample that is not above
    zero, within 1e-10 of one that is, so that a stretch contains all of what is above. ValueError unless low
    < high.
    """
    if not low < high:
        raise ValueError("a range needs low < high")
    centre, width = (np.asarray(a, dtype=float).ravel() for a in (centres, half_widths))
    around = (centre[:, None] + width[:, None] * AROUND).ravel()
    around = around[(around > low) & (around < high)]
    x = np.unique(np.concatenate([np.linspace(low, high, BACKGROUND), around]))
    y = excess(x)
    for _ in range(ROUNDS):
        more = _closer(x, y)
        if not more.size:
            break
        x, y = _merged(x, y, more, excess(more))
    above = y > 0.0
    first = np.flatnonzero(above & ~np.concatenate([[False], above[:-1]]))
    last = np.flatnonzero(above & ~np.concatenate([above[1:], [False]]))
    starts = _edges(excess, x[np.maximum(first - 1, 0)], x[first])
    ends = _edges(excess, x[np.minimum(last + 1, len(x) - 1)], x[last])
    return [(float(a), float(b)) for a, b in zip(starts, ends, strict=True)]


def _closer(x: FloatArray, y: FloatArray) -> FloatArray:
    """New samples beside peaks that may rise above zero and dips that may fall below it."""
    inner = y[1:-1]
    peak = (inner >= y[:-2]) & (inner >= y[2:]) & (inner <= 0.0) & (inner > NEAR_BELOW)
    dip = (inner <= y[:-2]) & (inner <= y[2:]) & (inner > 0.0) & (inner < NEAR_ABOVE)
    at = np.flatnonzero(peak | dip) + 1
    at = at[(x[at + 1] - x[at - 1]) > 1e-9 * x[at + 1]]
    grid = np.linspace(0.0, 1.0, FINER)[1:-1]
    pieces = [x[a][:, None] + (x[b] - x[a])[:, None] * grid for a, b in ((at - 1, at), (at, at + 1))]
    return np.unique(np.concatenate([piece.ravel() for piece in pieces]))


def _merged(
    x: FloatArray, y: FloatArray, more: FloatArray, values: FloatArray
) -> tuple[FloatArray, FloatArray]:
    joined = np.concatenate([x, more])
    kept, index = np.unique(joined, return_index=True)
    return kept, np.concatenate([y, values])[index]


def _edges(excess: Callable[[FloatArray], FloatArray], outside: FloatArray, inside: FloatArray) -> FloatArray:
    """The last samples that are not above zero, towards samples that are; an end that is above zero stays."""
    outside, inside = outside.copy(), inside.copy()
    grid = np.linspace(0.0, 1.0, PARTS + 1)[1:-1]
    for _ in range(DIVISIONS):
        moving = np.abs(inside - outside) > CLOSE * np.abs(inside)
        if not moving.any():
            break
        a, b = outside[moving], inside[moving]
        x = a[:, None] + (b - a)[:, None] * grid
        above = excess(x.ravel()).reshape(x.shape) > 0.0
        # Up to the first place that is above zero the limit holds.
        first = np.where(above.any(axis=1), above.argmax(axis=1), PARTS - 1)
        ladder = np.concatenate([a[:, None], x, b[:, None]], axis=1)
        row = np.arange(len(first))
        outside[moving], inside[moving] = ladder[row, first], ladder[row, first + 1]
    return outside
