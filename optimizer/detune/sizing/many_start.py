"""Smooth sizing of n freedoms by SLSQP from many seeded starts: the best of them, never called global."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from detune.sizing.smooth_problem import (
    SmoothProblem,
    joined_ratios,
    least_separation,
    natural_frequencies,
    ratios,
    sag_ratios,
)
from detune.sizing.statement import SizingError

Floats = NDArray[np.float64]
SmoothGoal = Literal["least worst response", "least cost", "greatest separation"]

# The p-norm that joins rows: an upper bound of their maximum, 12 equal rows are overstated by 2 %.
NORM = 120.0
MET = 1e-6


@dataclass(frozen=True)
class Start:
    """One start: its objective, the worst excess over all limits (0 = met), and the optimiser's own word."""

    objective: float
    excess: float
    converged: bool
    detail: str
    physical: Floats


@dataclass(frozen=True)
class Spread:
    """How far the starts that met every limit lie apart: best, median and worst objective, share within 1 %."""

    met: int
    best: float
    median: float
    worst: float
    within_one_per_cent: float


@dataclass(frozen=True)
class ManyStartOutcome:
    """Best local answer of all starts. `physical` is (k, eta, b) or None when no start met every limit.

    `worth` is always the same sentence: nothing here is proven. `evaluations` counts gradient evaluations.
    """

    objective: float
    physical: Floats | None
    worst_ratio: float
    separation: float
    starts: tuple[Start, ...]
    spread: Spread
    evaluations: int
    worth: str = "best of many local searches; not proven global"


class _Functions:
    """Objective and constraints as SciPy wants them, sharing one evaluation at each point."""

    def __init__(self, problem: SmoothProblem, goal: SmoothGoal, gradients: bool) -> None:
        self.problem, self.goal, self.gradients = problem, goal, gradients
        self.size = problem.lower.size
        self.free = goal != "least cost"
        self.key: bytes = b""
        self.count = 0
        self.values = np.zeros(0)
        self.slopes = np.zeros((0, 0))
        self.below: list[int] = []
        self.unit = max(float(np.abs(problem.cost * problem.upper).sum()), 1e-300)

    def fix_sides(self, x: Floats) -> None:
        """Hold the number of modes below each excitation interval at what it is at the start."""
        frequency, _ = natural_frequencies(self.problem, x)
        self.below = [int(np.sum(frequency < np.sqrt(a * b))) for a, b in self.problem.excitation_intervals]

    def _refresh(self, y: Floats) -> None:
        key = y.tobytes()
        if key == self.key:
            return
        self.key = key
        self.count += 1
        problem, x = self.problem, y[: self.size]
        level = y[-1] if self.goal == "least worst response" else 1.0
        value, slope = joined_ratios(problem, x, NORM)
        parts, slopes = [level - value], [-slope]
        extra = [np.full(value.size, 1.0)]
        if problem.sag_limits.size:
            sag, sag_slope = sag_ratios(problem, x)
            parts += [1 - sag, 1 + sag]
            slopes += [-sag_slope, sag_slope]
            extra += [np.zeros(2 * sag.size)]
        asked = self.goal == "greatest separation" or problem.separation > 0
        if problem.excitation_intervals.size and asked:
            target = y[-1] if self.goal == "greatest separation" else problem.separation
            distance, distance_slope = self._distances(x)
            parts.append(distance - target)
            slopes.append(distance_slope)
            extra.append(np.full(distance.size, -1.0 if self.goal == "greatest separation" else 0.0))
        self.values = np.concatenate(parts)
        self.slopes = np.concatenate(slopes)
        if self.free:
            last = np.concatenate(extra)
            if self.goal == "greatest separation":
                last = np.where(last > 0, 0.0, last)
            self.slopes = np.column_stack([self.slopes, last])

    def _distances(self, x: Floats) -> tuple[Floats, Floats]:
        frequency, slope = natural_frequencies(self.problem, x)
        values, slopes = [], []
        for (low, high), count in zip(self.problem.excitation_intervals, self.below, strict=True):
            for i in range(frequency.size):
                below = i < count
                values.append(1 - frequency[i] / low if below else frequency[i] / high - 1)
                slopes.append(-slope[i] / low if below else slope[i] / high)
        return np.array(values), np.array(slopes)

    def objective(self, y: Floats) -> float:
        if self.free:
            return float(-y[-1] if self.goal == "greatest separation" else y[-1])
        k, eta, ballast = self.problem.split(y[: self.size])
        return float(self.problem.cost @ np.concatenate([k, eta, ballast])) / self.unit

    def objective_slope(self, y: Floats) -> Floats:
        if self.free:
            slope = np.zeros(y.size)
            slope[-1] = -1.0 if self.goal == "greatest separation" else 1.0
            return slope
        k, eta, ballast = self.problem.split(y[: self.size])
        chain = np.concatenate([k, eta, np.ones(ballast.size)])
        return np.asarray(self.problem.cost * chain / self.unit)

    def constraint(self, y: Floats) -> Floats:
        self._refresh(y)
        return self.values

    def constraint_slope(self, y: Floats) -> Floats:
        self._refresh(y)
        return self.slopes


def _start_points(problem: SmoothProblem, starts: int, seed: int) -> Floats:
    """Latin hypercube over ln k, ln eta and b, one row per start."""
    rng = np.random.default_rng(seed)
    low, high = problem.join(problem.lower), problem.join(problem.upper)
    cells = np.stack([rng.permutation(starts) for _ in range(low.size)], axis=1)
    return np.asarray(low + (high - low) * (cells + rng.random(cells.shape)) / starts)


def _one(functions: _Functions, x: Floats, iterations: int) -> tuple[Floats, bool, str]:
    from scipy.optimize import minimize

    problem, goal = functions.problem, functions.goal
    functions.fix_sides(x)
    y = x
    bounds = list(zip(problem.join(problem.lower), problem.join(problem.upper), strict=True))
    if goal == "least worst response":
        y = np.append(x, joined_ratios(problem, x, NORM)[0].max())
        bounds.append((0.0, np.inf))
    elif goal == "greatest separation":
        y = np.append(x, min(functions._distances(x)[0].min(), 0.0))
        bounds.append((-10.0, np.inf))
    options: dict[str, Any] = {"maxiter": iterations, "ftol": 1e-10}
    row: dict[str, Any] = {"type": "ineq", "fun": functions.constraint}
    slope: Callable[[Floats], Floats] | None = None
    if functions.gradients:
        row["jac"] = functions.constraint_slope
        slope = functions.objective_slope
    try:
        with np.errstate(all="ignore"):
            found = minimize(
                functions.objective,
                y,
                method="SLSQP",
                jac=slope,
                bounds=bounds,
                constraints=[row],
                options=options,
            )
    except np.linalg.LinAlgError as error:
        return x, False, f"stopped at a singular response: {error}"
    return np.asarray(found.x[: problem.lower.size]), bool(found.success), str(found.message)


def _judge(problem: SmoothProblem, goal: SmoothGoal, x: Floats) -> tuple[float, float, float, float]:
    """(objective, excess over every limit, worst ratio, separation) with true maxima, no p-norm."""
    k, eta, ballast = problem.split(x)
    worst = float(ratios(problem, x).max())
    apart = least_separation(problem, x)
    excess = 0.0 if goal == "least worst response" else max(0.0, worst - 1)
    if problem.sag_limits.size:
        excess = max(excess, float(np.abs(sag_ratios(problem, x)[0]).max()) - 1)
    if goal == "greatest separation":
        return -apart, excess, worst, apart
    if problem.separation > 0:
        excess = max(excess, problem.separation - apart)
    if goal == "least cost":
        return float(problem.cost @ np.concatenate([k, eta, ballast])), excess, worst, apart
    return worst, excess, worst, apart


def size_from_many_starts(
    problem: SmoothProblem,
    goal: SmoothGoal,
    starts: int = 12,
    seed: int = 0,
    iterations: int = 200,
    adjoint: bool = True,
    first: Floats | None = None,
) -> ManyStartOutcome:
    """Best local answer of `starts` seeded SLSQP runs, judged by the true maxima at the given frequencies.

    `first` (p + e + q,) adds one start at a known design, e.g. a convex answer. `adjoint=False` leaves SciPy to
    finite differences (for comparison). `objective` is negative for "greatest separation". The frequencies given
    are the only ones looked at: whoever calls this closes the continuum with an assessment.
    Raises SizingError for "greatest separation" without excitation intervals.
    """
    if goal == "greatest separation" and not problem.excitation_intervals.size:
        raise SizingError("greatest separation needs at least one excitation interval")
    points = list(_start_points(problem, starts, seed))
    if first is not None:
        points.insert(0, problem.join(np.clip(first, problem.lower, problem.upper)))
    functions = _Functions(problem, goal, adjoint)
    done: list[Start] = []
    for x in points:
        found, converged, detail = _one(functions, x, iterations)
        found = np.clip(found, problem.join(problem.lower), problem.join(problem.upper))
        value, excess, _, _ = _judge(problem, goal, found)
        physical = np.concatenate(problem.split(found))
        done.append(Start(value, excess, converged, detail, np.clip(physical, problem.lower, problem.upper)))
    good = sorted((s for s in done if s.excess <= MET), key=lambda s: s.objective)
    if not good:
        nan = float("nan")
        spread = Spread(0, nan, nan, nan, 0.0)
        return ManyStartOutcome(nan, None, nan, nan, tuple(done), spread, functions.count)
    values = np.array([s.objective for s in good])
    near = float(np.mean(values <= values[0] + 0.01 * abs(values[0]))) * len(good) / len(done)
    best = good[0]
    _, _, worst, apart = _judge(problem, goal, problem.join(best.physical))
    spread = Spread(len(good), float(values[0]), float(np.median(values)), float(values[-1]), near)
    return ManyStartOutcome(best.objective, best.physical, worst, apart, tuple(done), spread, functions.count)
