"""Amplitudes that reproduce themselves: many small fixed points a = h(a) at once, by damped iteration."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from detune.physics.array_types import BoolArray, FloatArray, IntArray

MOST_ROUNDS = 1200
TOLERANCE = 1e-8
# What a column that ran out of rounds may still lack, in tolerances: near a fold, where two answers meet, it closes
# slowly.
LEFT_OVER = 100.0
# A full first step from far away could leap over the answer that is next.
FIRST_SHARE = 0.5
LEAST_SHARE = 1.0 / 64.0
GROWTH = 1.25


@dataclass(frozen=True, eq=False)
class FixedPoints:
    """Values (S, K), one column each, and which columns (K,) settled."""

    value: FloatArray
    settled: BoolArray


def fixed_points(
    step: Callable[[FloatArray, IntArray], FloatArray],
    start: FloatArray,
    most_rounds: int = MOST_ROUNDS,
    tolerance: float = TOLERANCE,
) -> FixedPoints:
    """Columns a (S, K) with a = step(a), each from its own start (S, K) on; values are not negative.

    step: values (S, A) and the numbers (A,) of their columns -> (S, A). Each column takes a share of the way to
    step(a): half of it at first, half as much whenever the difference has grown or turned its sign, more again while
    it shrinks. So a map that falls with a slope of size L settles with a share of about 1/(1 + L). A column has
    settled when its difference is below `tolerance` of its largest value.
    """
    value = np.array(start, dtype=float)
    count = value.shape[1]
    settled = np.zeros(count, dtype=bool)
    active = np.arange(count)
    share = np.full(count, FIRST_SHARE)
    before = np.full(value.shape, np.nan)
    missing = np.full(count, np.inf)
    for _ in range(most_rounds):
        here = value[:, active]
        difference = step(here, active) - here
        size = np.maximum(np.abs(here).max(axis=0), np.abs(here + difference).max(axis=0))
        missing[active] = np.abs(difference).max(axis=0) / np.where(size > 0.0, size, 1.0)
        done = missing[active] <= tolerance
        settled[active[done]] = True
        if np.all(done):
            break
        active, difference = active[~done], difference[:, ~done]
        turned = np.sum(difference * before[:, active], axis=0) < 0.0
        grown = np.abs(difference).max(axis=0) > np.abs(before[:, active]).max(axis=0)
        share[active] = np.where(
            turned | grown,
            np.maximum(0.5 * share[active], LEAST_SHARE),
            np.minimum(GROWTH * share[active], 1.0),
        )
        before[:, active] = difference
        value[:, active] = np.maximum(value[:, active] + share[active] * difference, 0.0)
    return FixedPoints(value, settled | (missing <= LEFT_OVER * tolerance))
