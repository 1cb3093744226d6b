"""Convex forms of sizing: linear matrix inequalities and cones, each answer labelled with what it is worth.

Stiffness K(k) = K0 + sum_i k_i T_i with T_i positive semidefinite, mass M(b) = M0 + sum_j b_j N_j.

* All modes below f is K(k) <= (2 pi f)^2 M(b), all modes above f is K(k) >= (2 pi f)^2 M(b), in the Loewner
  order (Courant-Fischer). Both are convex, so sizing under them is solved globally.
* Soft side, A = w^2 M - K > 0, and stiff side, A = K - w^2 M > 0: for any damping C >= 0 (viscous or loss factor),
  |c^T (-A + j C)^-1 f| <= sqrt(c^T A^-1 c  f^H A^-1 f): a congruence makes A the identity and C diagonal, then
  Cauchy-Schwarz. So c^T A^-1 c <= L s and f^H A^-1 f <= L / s, two Schur complements, keep |response| <= L
  whatever the damping: a safe restriction. A grows with w, so for a force of constant amplitude the limit
  then holds at every higher frequency too; on the stiff side at every lower one.
* One axis, soft side: transmissibility <= T < 1 at w is the cone ||(k, sqrt(1-T^2) w c)|| <= T (m w^2 - k).

All forms are scaled by the Cholesky factor of the mass and the frequency before they reach the solver.
"""

from __future__ import annotations

import math
import warnings
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from detune.sizing.damping_free import (
    DampingFreeLimit,
    Side,
    balanced_split,
    damping_free_bound,
    load_rows,
    shares_of,
)
from detune.sizing.statement import SizingError
from detune.sizing.stiffness_model import StiffnessModel

__all__ = [
    "ConvexAnswer",
    "DampingFreeLimit",
    "Side",
    "StiffnessModel",
    "cheapest",
    "damping_free_bound",
    "greatest_separation",
]

Floats = NDArray[np.float64]
Worth = Literal["global", "safe restriction", "lower bound"]
Status = Literal["solved", "infeasible", "inaccurate", "failed"]


def convex_library() -> Any:
    """CVXPY, imported on first use: it takes about a second to load."""
    import cvxpy

    return cvxpy


def solve_cones(problem: Any) -> None:
    """Solve a convex program by the interior-point solver; its status tells what came out.

    Raises cvxpy's SolverError. That an answer is inaccurate is told by the status and not by a warning.
    """
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", UserWarning)
        problem.solve(solver=convex_library().CLARABEL)


@dataclass(frozen=True)
class ConvexAnswer:
    """Stiffness (p,) N/m and ballast (q,) kg with the value reached, what it is worth and how it ended.

    `value` is computed by exact eigenvalues or sums at the returned point; `bound` is the solver's own value.
    """

    status: Status
    worth: Worth
    value: float
    bound: float
    stiffness: Floats
    ballast: Floats
    detail: str


def _nothing(model_size: int, ballast: int, worth: Worth, status: Status, detail: str) -> ConvexAnswer:
    nan = math.nan
    return ConvexAnswer(status, worth, nan, nan, np.full(model_size, nan), np.full(ballast, nan), detail)


class _Form:
    """The model in scaled unknowns x = k / upper in [lower/upper, 1] and y = b / most in [0, 1]."""

    def __init__(self, model: StiffnessModel, frequency: float) -> None:
        cp = convex_library()

        self.model = model
        self.omega2 = (2 * math.pi * frequency) ** 2
        factor = np.linalg.inv(np.linalg.cholesky(model.mass))
        self.factor = factor
        self.x = cp.Variable(model.lower.size)
        self.y = cp.Variable(model.ballast_most.size) if model.ballast_most.size else None

        def congruent(a: Floats) -> Floats:
            b = factor @ a @ factor.T
            return np.asarray(0.5 * (b + b.T))

        self.stiffness = congruent(model.constant) / self.omega2 + sum(
            self.x[i] * (congruent(t) * (model.upper[i] / self.omega2)) for i, t in enumerate(model.patterns)
        )
        self.mass: Any = np.eye(model.mass.shape[0])
        self.constraints: list[Any] = [self.x <= 1, self.x >= model.lower / model.upper]
        if self.y is not None:
            self.mass = self.mass + sum(
                self.y[j] * (congruent(t) * model.ballast_most[j])
                for j, t in enumerate(model.ballast_patterns)
            )
            if model.ballast_stiffness is not None:
                self.stiffness = self.stiffness + sum(
                    self.y[j] * (congruent(t) * (model.ballast_most[j] / self.omega2))
                    for j, t in enumerate(model.ballast_stiffness)
                )
            self.constraints += [self.y >= 0, self.y <= 1]

    def solve(self, goal: Any, extra: list[Any]) -> tuple[Status, str, float]:
        cp = convex_library()

        problem = cp.Problem(goal, self.constraints + extra)
        try:
            solve_cones(problem)
        except cp.SolverError as error:
            return "failed", str(error), math.nan
        status: Status = "failed"
        if problem.status == cp.OPTIMAL:
            status = "solved"
        elif problem.status == cp.OPTIMAL_INACCURATE:
            status = "inaccurate"
        elif problem.status in (cp.INFEASIBLE, cp.INFEASIBLE_INACCURATE):
            status = "infeasible" if problem.status == cp.INFEASIBLE else "failed"
        value = float(problem.value) if status in ("solved", "inaccurate") else math.nan
        return status, str(problem.status), value

    def point(self) -> tuple[Floats, Floats]:
        k = np.clip(np.asarray(self.x.value) * self.model.upper, self.model.lower, self.model.upper)
        if self.y is None:
            return k, np.zeros(0)
        return k, np.clip(np.asarray(self.y.value), 0.0, 1.0) * self.model.ballast_most


def greatest_separation(model: StiffnessModel, frequency: float, side: Side) -> ConvexAnswer:
    """Global: all modes as far as possible below (1 - f_max/f) or above (f_min/f - 1) the frequency `f` in Hz.

    One semidefinite program when the mass is fixed; bisection of feasibility programs when ballast is free
    (below: K <= t M is linear in (k, b) for each t; above likewise). `bound` is proven to the solver's
    tolerance.
    """
    cp = convex_library()

    form = _Form(model, frequency)
    if form.y is None:
        t = cp.Variable()
        identity = np.eye(model.mass.shape[0])
        if side == "below":
            goal, row = cp.Minimize(t), form.stiffness << t * identity
        else:
            goal, row = cp.Maximize(t), form.stiffness >> t * identity
        status, detail, level = form.solve(goal, [row])
        if status in ("infeasible", "failed"):
            return _nothing(model.lower.size, 0, "global", status, detail)
    else:
        found = _bisect(form, side)
        if found is None:
            return _nothing(model.lower.size, model.ballast_most.size, "global", "failed", "no point found")
        k, ballast, level = found
        return _separation_answer(model, frequency, side, k, ballast, level, "solved", "bisection")
    k, ballast = form.point()
    return _separation_answer(model, frequency, side, k, ballast, level, status, detail)


def _separation_answer(
    model: StiffnessModel,
    frequency: float,
    side: str,
    k: Floats,
    ballast: Floats,
    level: float,
    status: Status,
    detail: str,
) -> ConvexAnswer:
    exact = model.frequencies(k, ballast)
    root = math.sqrt(max(level, 0.0))
    if side == "below":
        value, bound = 1.0 - float(exact[-1]) / frequency, 1.0 - root
    else:
        value, bound = float(exact[0]) / frequency - 1.0, root - 1.0
    return ConvexAnswer(status, "global", value, bound, k, ballast, detail)


def _bisect(form: _Form, side: str) -> tuple[Floats, Floats, float] | None:
    """Bisection on t in K <= t M (below) or K >= t M (above); the bound is the last t proved impossible."""
    cp = convex_library()

    t = cp.Parameter(nonneg=True)
    slack = cp.Variable()
    gap = form.stiffness - t * form.mass if side == "above" else t * form.mass - form.stiffness
    # The slack program is always feasible, so the sign of its value decides and no status has to.
    row = [gap - slack * np.eye(form.model.mass.shape[0]) >> 0]
    problem = cp.Problem(cp.Maximize(slack), form.constraints + row)
    best: tuple[Floats, Floats] | None = None

    def possible(level: float) -> bool:
        nonlocal best
        t.value = level
        problem.solve(solver=cp.CLARABEL)
        if problem.status not in (cp.OPTIMAL, cp.OPTIMAL_INACCURATE):
            return False
        if float(slack.value) >= -1e-9:
            best = form.point()
            return True
        return False

    middle = form.model.frequencies(form.model.upper, np.zeros(form.model.ballast_most.size))
    top = (2 * math.pi * float(middle[-1])) ** 2 / form.omega2 * 1.01 + 1e-6
    low, high = 0.0, top
    if not possible(high if side == "below" else low):
        return None
    for _ in range(30):
        level = 0.5 * (low + high)
        if possible(level) == (side == "below"):
            high = level
        else:
            low = level
    assert best is not None
    return best[0], best[1], low if side == "below" else high


def _schur(form: _Form, w_ratio: float, vectors: Floats, cap: Any, side: Side) -> list[Any]:
    """sum of v^T A^-1 v over the rows v of `vectors` (r, n) <= cap, with A = +-(w_ratio M - K) in scaled form."""
    cp = convex_library()

    a = w_ratio * form.mass - form.stiffness
    a = a if side == "below" else -a
    rows, caps = [], []
    for part in vectors[np.any(vectors != 0.0, axis=1)]:
        v = form.factor @ part
        size = float(np.linalg.norm(v))
        g = cp.Variable(nonneg=True)
        unit = (v / size)[:, None]
        rows.append(cp.bmat([[cp.reshape(g, (1, 1), order="C"), unit.T], [unit, a]]) >> 0)
        caps.append(size**2 * g)
    return [*rows, sum(caps) <= cap]


def cheapest(
    model: StiffnessModel,
    stiffness_cost: Floats,
    ballast_cost: Floats,
    modes_below: float | None = None,
    modes_above: float | None = None,
    limits: tuple[DampingFreeLimit, ...] = (),
    rounds: int = 4,
) -> ConvexAnswer:
    """Least stiffness_cost . k + ballast_cost . b with all modes on one side and limits that hold at any damping.

    Costs per N/m and per kg, shapes (p,) and (q,). Without `limits` the answer is global; with them it is a
    safe restriction (never unsafe, perhaps dearer than needed). The split between a limit's two factors is
    rebalanced `rounds` times; each round is a valid restriction and the best is kept. Raises SizingError when
    neither a side nor a limit is given.
    """
    cp = convex_library()

    reference = modes_below or modes_above or (limits[0].frequency if limits else None)
    if reference is None:
        raise SizingError("nothing binds the stiffness: give a side for the modes or a limit")
    form = _Form(model, reference)
    extra: list[Any] = []
    if modes_below is not None:
        extra.append(form.stiffness << (modes_below / reference) ** 2 * form.mass)
    if modes_above is not None:
        extra.append(form.stiffness >> (modes_above / reference) ** 2 * form.mass)
    cost = (stiffness_cost * model.upper) @ form.x
    if form.y is not None:
        cost = cost + (ballast_cost * model.ballast_most) @ form.y
    size = float(np.abs(stiffness_cost * model.upper).sum() + np.abs(ballast_cost * model.ballast_most).sum())
    size = size or 1.0
    worth: Worth = "safe restriction" if limits else "global"
    best = _nothing(model.lower.size, model.ballast_most.size, worth, "infeasible", "no round was feasible")
    # The corner where every bound is least: if the limits can be met at all, the first round is feasible.
    below = all(x.side == "below" for x in limits)
    corner = model.lower if below else model.upper
    ballast = model.ballast_most * float(below)
    split = [balanced_split(model, x, corner, ballast) for x in limits]
    split = [s if math.isfinite(s) else _first_split(form, x) for s, x in zip(split, limits, strict=True)]
    shares = shares_of(model, limits, corner, ballast)
    for _ in range(rounds if limits else 1):
        rows = list(extra)
        for limit, s, share in zip(limits, split, shares, strict=True):
            ratio = (limit.frequency / reference) ** 2
            cap = limit.limit * share * form.omega2
            rows += _schur(form, ratio, np.atleast_2d(limit.row), cap * s, limit.side)
            rows += _schur(form, ratio, load_rows(limit.load), cap / s, limit.side)
        status, detail, value = form.solve(cp.Minimize(cost / size), rows)
        if status in ("infeasible", "failed"):
            if math.isnan(best.value):
                best = _nothing(model.lower.size, model.ballast_most.size, worth, status, detail)
            break
        k, ballast = form.point()
        exact = float(stiffness_cost @ k + (ballast_cost @ ballast if ballast.size else 0.0))
        if math.isnan(best.value) or (status != "solved", exact) < (best.status != "solved", best.value):
            best = ConvexAnswer(status, worth, exact, value * size, k, ballast, detail)
        split = [balanced_split(model, x, k, ballast) for x in limits]
        shares = shares_of(model, limits, k, ballast)
    return best


def _first_split(form: _Form, limit: DampingFreeLimit) -> float:
    row = float(np.linalg.norm(form.factor @ np.atleast_2d(limit.row).T))
    return row / float(np.linalg.norm(form.factor @ load_rows(limit.load).T))
