"""Exact solution of one slice of one-axis sizing: every disjoint interval of stiffness and its best point.

At fixed mass each limit at one u = w^2 reads  alpha(k) + beta gamma >= 0  with alpha a quadratic in k, so it
is gamma >= -alpha/beta (beta > 0), gamma <= alpha/|beta| (beta < 0) or a condition on k alone (beta = 0). For
one k the feasible gamma are the interval [L(k), U(k)], L the upper envelope of the first kind, U the lower
envelope of the second. Hence

* the components of the feasible set are the components in k of {L <= U};
* between two neighbours of the sorted list of all pairwise crossings alpha_i beta_j = alpha_j beta_i (and of
  the roots of every alpha_i and of the bounds) neither the active pieces nor the sign of U - L change, so one
  midpoint decides the whole cell. No grid is involved: an island of any width shows itself by its own ends.
* an objective that is monotone in gamma has its optimum in a cell at an end or at a stationary point along a
  single parabola, and these are all in the list.

For an interval of masses (`alpha` given for both ends) a row holds when either end holds; every limit is then
relaxed, because for fixed k and gamma each limit's left side, as a function of m > 0, is largest at an end
(it is convex in m, or it is monotone, see `rows`). The slice is then a superset: a lower bound.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.sizing.slice_objective import SliceObjective
from detune.sizing.statement import DampingKind, PowerForm
from detune.sizing.worst_frequency import quadratic_roots

Floats = NDArray[np.float64]

# Roots closer than this (relative) are one root; a gap or an island narrower than it is not told apart.
SAME_ROOT = 1e-13


@dataclass(frozen=True)
class Rows:
    """Limits as alpha(k) + beta gamma >= 0; alpha has shape (ends, n, 3), lowest power first, beta (n,).

    The last `window.shape[0]` rows hold only for k within their window (w, 2); the others for every k.
    """

    alpha: Floats
    beta: Floats
    window: Floats


@dataclass(frozen=True)
class Segment:
    """One disjoint interval of scaled stiffness with its best point and the inner points of its cells."""

    left: float
    right: float
    stiffness: float
    gamma: float
    value: float
    inner: Floats
    left_gamma: float
    right_gamma: float


def rows(
    forms: list[PowerForm],
    at_u: Floats,
    kind: DampingKind,
    masses: tuple[float, ...],
    damping_bounds: tuple[float, float],
    envelopes: list[tuple[tuple[float, float, float], float, float]],
) -> Rows:
    """Rows of all limits `forms[i]` at `at_u[i]`, and of the damping bounds (scaled gamma or loss factor).

    `envelopes` are those of `worst_frequency.closed_envelope` at the one mass of the slice (none for two masses).

    Receptance: alpha = (k - m u)^2 - A^2 u^q, beta = s. It is convex in m when A does not carry m; when it
    does, the coefficient of m^2 may be negative but then dalpha/dm < 0 for all m > 0: in both cases the
    largest value over an interval of m stands at an end. Transmission: with t = scale u^r,
    alpha = (1 - t) k^2 - 2 m u k + m^2 u^2, beta = s (1 - t): convex in m. s is u (viscous) or 1.
    """
    scale = np.array([f.scale for f in forms], dtype=float)
    power = np.array([f.power for f in forms], dtype=float)
    transmission = np.array([f.transmission for f in forms], dtype=bool)
    carries = np.array([f.mass_proportional for f in forms], dtype=bool)
    level = scale * at_u**power
    s = at_u if kind == "viscous" else np.ones_like(at_u)
    free = np.where(transmission, 1.0 - level, 1.0)
    blocks = []
    low, high = damping_bounds
    if kind == "viscous":
        bounds = np.array([[-(low**2), 0.0, 0.0], [high**2, 0.0, 0.0]])
    else:
        bounds = np.array([[0.0, 0.0, -(low**2)], [0.0, 0.0, high**2]])
    for mass in masses:
        constant = (mass * at_u) ** 2 - np.where(transmission, 0.0, level * np.where(carries, mass**2, 1.0))
        block = np.stack([constant, -2.0 * mass * at_u, free], axis=1) if forms else np.zeros((0, 3))
        blocks.append(np.concatenate([block, bounds]))
    count = len(envelopes)
    closed = -np.array([e for e, _, _ in envelopes], dtype=float).reshape(count, 3)
    window = np.array([(a, b) for _, a, b in envelopes], dtype=float).reshape(count, 2)
    beta = np.concatenate([s * free, [1.0, -1.0], np.ones(count)])
    return Rows(np.stack([np.concatenate([b, closed]) for b in blocks]), beta, window)


def gamma_interval(table: Rows, k: Floats) -> tuple[Floats, Floats]:
    """[L, U] of gamma at each stiffness, shapes (n,); L > U where no damping serves."""
    powers = np.stack([np.ones_like(k), k, k * k])
    alpha = (table.alpha @ powers).max(axis=0)
    lower, upper, pure = table.beta > 0, table.beta < 0, table.beta == 0
    if table.window.size:
        first = alpha.shape[0] - table.window.shape[0]
        outside = (k < table.window[:, :1]) | (k > table.window[:, 1:])
        alpha[first:] = np.where(outside, np.inf, alpha[first:])
    low = (-alpha[lower] / table.beta[lower, None]).max(axis=0)
    high = (alpha[upper] / -table.beta[upper, None]).min(axis=0)
    if pure.any():
        high = np.where((alpha[pure] >= 0).all(axis=0), high, -np.inf)
    return np.maximum(low, 0.0), high


def _crossings(table: Rows, window: tuple[float, float]) -> Floats:
    ends, count, _ = table.alpha.shape
    alpha = table.alpha.reshape(ends * count, 3)
    beta = np.tile(table.beta, ends)
    if ends == 2:
        both = np.unique(np.column_stack([alpha, beta]), axis=0)
        alpha, beta = both[:, :3], both[:, 3]
    i, j = np.triu_indices(beta.size, 1)
    pairs = beta[j, None] * alpha[i] - beta[i, None] * alpha[j]
    if ends == 2:
        pairs = np.concatenate([pairs, table.alpha[0] - table.alpha[1]])
    pairs = np.concatenate([pairs, alpha])
    roots = quadratic_roots(pairs[:, 2], pairs[:, 1], pairs[:, 0]).ravel()
    return roots[(roots > window[0]) & (roots < window[1])]


def _distinct(values: Floats) -> Floats:
    values = np.sort(values)
    keep = np.ones(values.size, dtype=bool)
    keep[1:] = np.diff(values) > SAME_ROOT * values[1:]
    keep[-1] = True
    if values.size > 1 and values[-1] - values[-2] <= SAME_ROOT * values[-1] and values.size > 2:
        keep[-2] = False
    return values[keep]


def segments(
    table: Rows,
    window: tuple[float, float],
    forbidden: tuple[tuple[float, float], ...],
    objective: SliceObjective,
) -> list[Segment]:
    """All disjoint feasible intervals of scaled stiffness within `window`, rising, each with its best point.

    `forbidden` are open intervals of stiffness (separation). An empty list means the slice is empty.
    """
    left, right = window
    if left > right:
        return []
    with np.errstate(divide="ignore", invalid="ignore"):
        parabolas = -table.alpha.reshape(-1, 3) / np.tile(table.beta, table.alpha.shape[0])[:, None]
    parabolas = parabolas[np.isfinite(parabolas).all(axis=1)]
    extra = objective.breakpoints(parabolas)
    edges = np.array([edge for pair in forbidden for edge in pair], dtype=float)
    inner = np.concatenate([extra[np.isfinite(extra)], edges, table.window.ravel()])
    inner = inner[(inner > left) & (inner < right)]
    points = _distinct(np.concatenate([[left, right], _crossings(table, window), inner]))
    if points.size == 1:
        return _single(table, float(points[0]), forbidden, objective)
    middles = 0.5 * (points[1:] + points[:-1])
    low, high = gamma_interval(table, middles)
    good = low <= high
    for a, b in forbidden:
        good &= ~((middles > a) & (middles < b))
    result: list[Segment] = []
    if not good.any():
        return result
    change = np.flatnonzero(np.diff(np.concatenate([[False], good, [False]]).astype(int)))
    for start, stop in zip(change[::2], change[1::2], strict=True):
        result.append(_segment(table, points[start : stop + 1], middles[start:stop], objective))
    return result


def _segment(table: Rows, points: Floats, middles: Floats, objective: SliceObjective) -> Segment:
    k = np.concatenate([points, middles])
    low, high = gamma_interval(table, k)
    # At a crossing low and high are equal but for rounding; the limit from below is the one to keep.
    value, gamma = objective.value(k, low, np.maximum(low, high))
    best = int(np.argmin(value))
    last = points.size - 1
    return Segment(
        float(points[0]),
        float(points[-1]),
        float(k[best]),
        float(gamma[best]),
        float(value[best]),
        np.sort(k),
        float(low[0]),
        float(low[last]),
    )


def _single(
    table: Rows, k: float, forbidden: tuple[tuple[float, float], ...], objective: SliceObjective
) -> list[Segment]:
    at = np.array([k])
    low, high = gamma_interval(table, at)
    if low[0] > high[0] or any(a < k < b for a, b in forbidden):
        return []
    value, gamma = objective.value(at, low, high)
    g = float(gamma[0])
    return [Segment(k, k, k, g, float(value[0]), at, g, g)]
