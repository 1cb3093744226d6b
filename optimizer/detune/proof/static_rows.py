"""Static rows under scatter of stiffness by lot and by part, mass and centre: enclosed over boxes, bisected.

    K = fixed + sum_a s_a k_a b_a^T b_a,   q = K^-1 sum_l p_l load_l,   y = scale s (rows q + shift)
with s_a, s and p_l products of variables. K grows with every factor, so `loewner.static_interval` encloses every row
of K^-1 load_l over a box. A row counts as its first component, or as the root of its summed squares.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from detune.proof.bisect import sample_points
from detune.proof.bisection import DecisionStatus
from detune.proof.expansion import Box, Expansion, upper_length, variable_products
from detune.proof.loewner import Flags
from detune.proof.scatter_data import products
from detune.proof.selection_data import Floats, Integers


@dataclass(frozen=True, eq=False)
class StaticLimits:
    """R static rows with limits over V variables.

    fixed (n, n); axes (A, n), stiffness (A,), factors (A, 2). loads (L, n) with load_factors (L, 3), variables whose
    product multiplies each load. rows (R, 3, n); scale (R,) and row_factors (R, 2); shift (R,), added to the first
    component; length (R,): root of the summed squares instead of the first component. lower, upper (R,).
    low, high (V,).
    """

    fixed: Floats
    axes: Floats
    stiffness: Floats
    factors: Integers
    loads: Floats
    load_factors: Integers
    rows: Floats
    scale: Floats
    row_factors: Integers
    shift: Floats
    length: Flags
    lower: Floats
    upper: Floats
    low: Floats
    high: Floats


@dataclass(frozen=True)
class StaticRowsDecision:
    """What became of the R static rows: attained (least, most) exactly, enclosed (least, most), where, status."""

    status: tuple[DecisionStatus, ...]
    attained_low: tuple[float, ...]
    attained_high: tuple[float, ...]
    bound_low: tuple[float, ...]
    bound_high: tuple[float, ...]
    where_low: tuple[tuple[float, ...], ...]
    where_high: tuple[tuple[float, ...], ...]
    boxes: int


def _padded(points: Floats) -> Floats:
    """Points (N, V) with the place of the speed, which statics do not have."""
    return np.concatenate([points, np.zeros((len(points), 1))], axis=1)


def _stiffness(problem: StaticLimits, weights: Floats) -> Floats:
    outer = np.einsum("ai,aj->aij", problem.axes, problem.axes).reshape(-1, problem.fixed.size)
    total: Floats = problem.fixed + ((weights * problem.stiffness) @ outer).reshape(-1, *problem.fixed.shape)
    return total


def static_values_at(problem: StaticLimits, points: Floats) -> Floats:
    """Exact values (N, R) at points (N, V); raises numpy.linalg.LinAlgError for a singular stiffness."""
    padded = _padded(points)
    load = products(padded, problem.load_factors) @ problem.loads
    q = np.linalg.solve(_stiffness(problem, products(padded, problem.factors)), load[:, :, None])[:, :, 0]
    y = np.einsum("rcn,bn->brc", problem.rows, q)
    y[:, :, 0] += problem.shift
    y *= (problem.scale * products(padded, problem.row_factors))[:, :, None]
    value: Floats = np.where(problem.length, np.sqrt((y**2).sum(axis=2)), y[:, :, 0])
    return value


def static_enclosures(problem: StaticLimits, low: Floats, high: Floats) -> tuple[Floats, Floats]:
    """Enclosures (N, R) of all values over boxes low, high (N, V); infinite where a box is not bounded.

    With K0 q = load0 and K0 p = row: row K^-1 load = p load + row q - p K q + (row - K p) K^-1 (load - K q), the last
    term at most sqrt(sum rho p_a^2) sqrt(sum rho q_a^2 ...) / (lambda_min - 1) (combined_bound.py).
    """
    box = Box(_padded(low), _padded(high))
    count, rows, n = len(low), len(problem.scale), len(problem.fixed)
    s = variable_products(box, problem.factors)
    kappa = Expansion(
        s.centre * problem.stiffness, s.slope * problem.stiffness[:, None], s.remainder * problem.stiffness
    )
    rho = (kappa.reach(box) + kappa.remainder) * (1.0 + 1e-12)
    outer = np.einsum("ai,aj->aij", problem.axes, problem.axes).reshape(-1, n * n)
    k0 = problem.fixed + (kappa.centre @ outer).reshape(count, n, n)
    nu, weight = _inverse_bound(k0, (rho @ outer).reshape(count, n, n))
    share = variable_products(box, problem.load_factors)
    flat = problem.rows.reshape(3 * rows, n)
    q = np.linalg.solve(k0, (share.centre @ problem.loads)[:, :, None])[:, :, 0]
    p = np.swapaxes(np.linalg.solve(k0, np.broadcast_to(flat.T, (count, n, 3 * rows))), 1, 2)
    p_axes, q_axes = p @ problem.axes.T, q @ problem.axes.T
    zero = q @ flat.T
    loads = p @ problem.loads.T
    pairs = p_axes * q_axes[:, None, :]
    slope = loads @ share.slope - pairs @ kappa.slope
    p_size = np.sqrt(np.einsum("ba,bca->bc", rho, p_axes**2))
    q_size = np.sqrt(np.einsum("ba,ba->b", rho, q_axes**2))
    spare = share.reach(box) + share.remainder
    moved = np.sqrt(((weight @ problem.loads.T) ** 2).sum(axis=1))
    second = p_size * (q_size + (spare * moved).sum(axis=1))[:, None] * nu[:, None]
    with np.errstate(invalid="ignore"):
        rest = np.abs(loads) @ share.remainder[:, :, None]
        rest = rest[:, :, 0] + np.einsum("bca,ba->bc", np.abs(pairs), kappa.remainder) + second
    return _rows_enclosed(problem, box, zero.reshape(count, rows, 3), slope.reshape(count, rows, 3, -1),
                          np.where(np.isnan(rest), np.inf, rest).reshape(count, rows, 3))  # fmt: skip


def _inverse_bound(k0: Floats, cover: Floats) -> tuple[Floats, Floats]:
    """1 / (lambda_min - 1) (N,) of W K0 W^T, infinite where K may become singular, and W (N, n, n) of the cover."""
    trace = np.einsum("bii->b", k0)
    scale = np.einsum("bii->bi", k0)
    padded = cover + np.einsum("bi,ij->bij", 1e-9 * scale + 1e-15 * trace[:, None], np.eye(k0.shape[-1]))
    weight = np.linalg.inv(np.linalg.cholesky(padded))
    values = np.linalg.eigvalsh(weight @ k0 @ np.swapaxes(weight, 1, 2))
    gap = values[:, 0] - 1e-13 * values[:, -1] - 1.0
    return np.where(gap > 1e-6, 1.0 / np.maximum(gap, 1e-300), np.inf), weight


def _rows_enclosed(
    problem: StaticLimits, box: Box, zero: Floats, slope: Floats, rest: Floats
) -> tuple[Floats, Floats]:
    """Enclosures (N, R) of rows from the expansions (N, R, 3) of their components."""
    zero = zero.copy()
    zero[:, :, 0] += problem.shift
    factor = variable_products(box, problem.row_factors)
    each = []
    for component in range(3):
        own = Expansion(zero[:, :, component], slope[:, :, component], rest[:, :, component])
        each.append(own.times(factor, box))
    unbounded = ~np.isfinite(rest).all(axis=2)
    centre, slopes = (np.stack([getattr(e, name) for e in each], axis=2) for name in ("centre", "slope"))
    remainder = np.nan_to_num(np.stack([e.remainder for e in each], axis=2), posinf=0.0)
    scale = np.abs(problem.scale)
    length = upper_length(centre, slopes, remainder, box).greatest(box) * scale
    first = each[0]
    around = first.reach(box) + np.nan_to_num(first.remainder, posinf=0.0)
    middle = first.centre * problem.scale
    widen = 1e-9
    lower = np.where(problem.length, 0.0, middle - around * scale)
    upper = np.where(problem.length, length, middle + around * scale)
    lower, upper = lower - widen * np.abs(lower), upper + widen * np.abs(upper)
    return np.where(unbounded, -np.inf, lower), np.where(unbounded, np.inf, upper)


def decide_static_rows(
    problem: StaticLimits, *, max_boxes: int = 4000, gap: float = 0.03
) -> StaticRowsDecision:
    """Bisect until every row is decided and enclosed to a relative gap, or max_boxes; undecided rows say so."""
    low, high = problem.low[None], problem.high[None]
    rows = len(problem.scale)
    reached = _Reached(problem)
    reached.corners()
    influence = _influence(problem)
    closed_low, closed_high = np.full(rows, np.inf), np.full(rows, -np.inf)
    boxes = 0
    while True:
        reached.evaluate(np.concatenate([0.5 * (low + high), low, high]))
        least, most = static_enclosures(problem, low, high)
        boxes += len(low)
        kept = (least >= problem.lower) & (most <= problem.upper)
        size = np.maximum(_size(problem), np.maximum(np.abs(reached.most), np.abs(reached.least)))
        close = (most <= reached.most + gap * size) & (problem.length | (least >= reached.least - gap * size))
        done = (kept & close).all(axis=1)
        closed_low = np.minimum(closed_low, least[done].min(axis=0, initial=np.inf))
        closed_high = np.maximum(closed_high, most[done].max(axis=0, initial=-np.inf))
        left = ~done
        if not left.any() or boxes + 2 * int(left.sum()) > max_boxes or reached.broken:
            break
        if not bool(((high[left] > low[left]) & (influence > 0.0)).any(axis=1).all()):
            break
        low, high = _halve(low[left], high[left], influence)
    bound_low = np.minimum(np.minimum(closed_low, least[left].min(axis=0, initial=np.inf)), reached.least)
    bound_high = np.maximum(np.maximum(closed_high, most[left].max(axis=0, initial=-np.inf)), reached.most)
    return reached.decision(bound_low, bound_high, boxes)


def _size(problem: StaticLimits) -> Floats:
    """Size (R,) of the limits, zero where there is none."""
    edges = np.abs(np.stack([problem.lower, problem.upper]))
    return np.asarray(np.where(np.isfinite(edges), edges, 0.0).max(axis=0))


class _Reached:
    """Extremes evaluated exactly, and where."""

    def __init__(self, problem: StaticLimits) -> None:
        self.problem = problem
        count, start = len(problem.scale), 0.5 * (problem.low + problem.high)
        self.least, self.most = np.full(count, np.inf), np.full(count, -np.inf)
        self.at_least, self.at_most = np.tile(start, (count, 1)), np.tile(start, (count, 1))

    def evaluate(self, points: Floats) -> None:
        values = static_values_at(self.problem, points)
        for pick, extreme, where in (
            (values.argmin(axis=0), self.least, self.at_least),
            (values.argmax(axis=0), self.most, self.at_most),
        ):
            found = values[pick, np.arange(len(pick))]
            better = found < extreme if extreme is self.least else found > extreme
            extreme[better], where[better] = found[better], points[pick[better]]

    def corners(self) -> None:
        """Corners of the whole box, and from the best one of every row those that differ in one variable, twice."""
        low, high = self.problem.low, self.problem.high
        self.evaluate(sample_points(np.append(low, 1.0), np.append(high, 1.0))[:, :-1])
        for _ in range(3):
            starts = np.unique(np.concatenate([self.at_least, self.at_most]), axis=0)
            flipped = np.repeat(starts[:, None], 2 * len(low), axis=1)
            for variable in range(len(low)):
                flipped[:, 2 * variable, variable] = low[variable]
                flipped[:, 2 * variable + 1, variable] = high[variable]
            if flipped.size:
                self.evaluate(flipped.reshape(-1, len(low)))

    @property
    def broken(self) -> bool:
        """Whether some limit is broken at a point evaluated."""
        return bool((self.least < self.problem.lower).any() or (self.most > self.problem.upper).any())

    def decision(self, bound_low: Floats, bound_high: Floats, boxes: int) -> StaticRowsDecision:
        """Put together what is known."""
        status: list[DecisionStatus] = []
        for row in range(len(self.least)):
            lower, upper = self.problem.lower[row], self.problem.upper[row]
            if self.least[row] < lower or self.most[row] > upper:
                status.append("violated")
            else:
                kept = bound_low[row] >= lower and bound_high[row] <= upper
                status.append("proven" if kept else "undecided")
        return StaticRowsDecision(
            status=tuple(status),
            attained_low=tuple(self.least.tolist()),
            attained_high=tuple(self.most.tolist()),
            bound_low=tuple(bound_low.tolist()),
            bound_high=tuple(bound_high.tolist()),
            where_low=tuple(tuple(p.tolist()) for p in self.at_least),
            where_high=tuple(tuple(p.tolist()) for p in self.at_most),
            boxes=boxes,
        )


def _influence(problem: StaticLimits) -> Floats:
    """How much a unit of each variable (V,) moves statics, roughly: factors 1, loads by their size, others nothing."""
    out = np.zeros(len(problem.low))
    for names in (problem.factors, problem.row_factors):
        used = names[names >= 0]
        out[used] = 1.0
    size = max(float(np.linalg.norm(problem.loads[0])), 1e-300)
    for load, names in zip(problem.loads, problem.load_factors, strict=True):
        for name in names[names >= 0]:
            out[name] = max(out[name], float(np.linalg.norm(load)) / size)
    return out


def _halve(low: Floats, high: Floats, influence: Floats) -> tuple[Floats, Floats]:
    """Cut every box along the side of greatest width times influence."""
    side = np.argmax((high - low) * influence, axis=1)
    index = np.arange(len(low))
    cut = 0.5 * (low[index, side] + high[index, side])
    first_high, second_low = high.copy(), low.copy()
    first_high[index, side] = cut
    second_low[index, side] = cut
    return np.concatenate([low, second_low]), np.concatenate([first_high, high])
