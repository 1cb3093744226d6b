"""Static rows under stiffness scatter: load shares, sag and tilt over all stiffness factors, bisected until decided.

The static stiffness matrix grows with every factor, so over a box of factors it lies between the box's two corners and
`loewner.static_interval` encloses every row of the static displacement. A station's load is its stiffness factor
times its nominal stiffness times its compression, enclosed as a product of intervals.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from detune.proof.loewner import static_interval
from detune.proof.selection_data import Floats, Integers


@dataclass(frozen=True, eq=False)
class StaticScatter:
    """Static rows with limits over V stiffness factors.

    fixed (n, n); axes (A, n) with stiffness (A,) N/m and variable (A,) (index of a factor or -1); load (n,).
    rows (R, n) with lower, upper (R,); scale (R,) and scale_variable (R,): the row's value is multiplied by
    scale and by that factor (-1: by scale alone), which makes a load of a compression. low, high (V,): factors.
    """

    fixed: Floats
    axes: Floats
    stiffness: Floats
    variable: Integers
    load: Floats
    rows: Floats
    scale: Floats
    scale_variable: Integers
    lower: Floats
    upper: Floats
    low: Floats
    high: Floats


@dataclass(frozen=True)
class StaticDecision:
    """Whether all static rows keep their limits; least and greatest are per row, the outer ones guaranteed.

    attained_low, attained_high: extremes evaluated exactly. bound_low, bound_high: enclosure of every value.
    row: the row that is violated (or -1), factors: where.
    """

    status: Literal["proven", "violated", "undecided"]
    attained_low: tuple[float, ...]
    attained_high: tuple[float, ...]
    bound_low: tuple[float, ...]
    bound_high: tuple[float, ...]
    row: int
    factors: tuple[float, ...]
    boxes: int


def static_matrices(problem: StaticScatter, factors: Floats) -> Floats:
    """Static stiffness matrices (N, n, n) for factors (N, V)."""
    padded = np.concatenate([factors, np.ones((factors.shape[0], 1))], axis=1)
    weights = padded[:, problem.variable] * problem.stiffness
    outer = np.einsum("ai,aj->aij", problem.axes, problem.axes).reshape(-1, problem.fixed.size)
    matrices: Floats = problem.fixed + (weights @ outer).reshape(len(factors), *problem.fixed.shape)
    return matrices


def static_values(problem: StaticScatter, factors: Floats) -> Floats:
    """Exact row values (N, R) for factors (N, V); raises numpy.linalg.LinAlgError for a singular stiffness."""
    q = np.linalg.solve(static_matrices(problem, factors), problem.load[:, None])[:, :, 0]
    padded = np.concatenate([factors, np.ones((factors.shape[0], 1))], axis=1)
    values: Floats = (q @ problem.rows.T) * problem.scale * padded[:, problem.scale_variable]
    return values


def static_enclosure(problem: StaticScatter, low: Floats, high: Floats) -> tuple[Floats, Floats]:
    """Enclosure (N, R), (N, R) of all row values over boxes of factors low, high (N, V)."""
    soft, stiff = static_matrices(problem, low), static_matrices(problem, high)
    z_low, z_high, _ = static_interval(soft, stiff, problem.rows, problem.load)
    ones = np.ones((len(low), 1))
    edges = [np.concatenate([edge, ones], axis=1)[:, problem.scale_variable] for edge in (low, high)]
    with np.errstate(invalid="ignore"):
        products = np.stack([z * problem.scale * edge for z in (z_low, z_high) for edge in edges])
    products[:, np.isnan(products).any(axis=0)] = np.nan
    least, most = products.min(axis=0), products.max(axis=0)
    return np.where(np.isnan(least), -np.inf, least), np.where(np.isnan(most), np.inf, most)


def decide_static(problem: StaticScatter, *, max_boxes: int = 4000) -> StaticDecision:
    """Bisect the factors until every row is within its limits, one is violated at an exact point, or max_boxes."""
    low, high = problem.low[None], problem.high[None]
    rows = len(problem.rows)
    attained_low, attained_high = np.full(rows, np.inf), np.full(rows, -np.inf)
    closed_low, closed_high = np.full(rows, np.inf), np.full(rows, -np.inf)
    boxes, row, where = 0, -1, 0.5 * (low + high)[0]
    while True:
        points = np.concatenate([0.5 * (low + high), low, high])
        values = static_values(problem, points)
        attained_low = np.minimum(attained_low, values.min(axis=0))
        attained_high = np.maximum(attained_high, values.max(axis=0))
        broken = (values < problem.lower) | (values > problem.upper)
        if broken.any():
            point, row = (int(v[0]) for v in np.nonzero(broken))
            where = points[point]
        least, most = static_enclosure(problem, low, high)
        boxes += len(low)
        done = ((least >= problem.lower) & (most <= problem.upper)).all(axis=1)
        closed_low = np.minimum(closed_low, least[done].min(axis=0, initial=np.inf))
        closed_high = np.maximum(closed_high, most[done].max(axis=0, initial=-np.inf))
        left = ~done
        if row >= 0 or not left.any() or boxes + 2 * int(left.sum()) > max_boxes:
            break
        if not bool((high[left] > low[left]).any(axis=1).all()):
            break
        low, high = _halve(low[left], high[left])
    bound_low = np.minimum(closed_low, least[left].min(axis=0, initial=np.inf))
    bound_high = np.maximum(closed_high, most[left].max(axis=0, initial=-np.inf))
    return StaticDecision(
        status="violated" if row >= 0 else ("undecided" if left.any() else "proven"),
        attained_low=tuple(attained_low.tolist()),
        attained_high=tuple(attained_high.tolist()),
        bound_low=tuple(bound_low.tolist()),
        bound_high=tuple(bound_high.tolist()),
        row=row,
        factors=tuple(where.tolist()),
        boxes=boxes,
    )


def _halve(low: Floats, high: Floats) -> tuple[Floats, Floats]:
    """Cut every box along its widest side."""
    side = np.argmax(high - low, axis=1)
    index = np.arange(len(low))
    cut = 0.5 * (low[index, side] + high[index, side])
    first_high, second_low = high.copy(), low.copy()
    first_high[index, side] = cut
    second_low[index, side] = cut
    return np.concatenate([low, second_low]), np.concatenate([first_high, high])
