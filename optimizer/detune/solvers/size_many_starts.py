"""Sizing by local searches from many seeded starts over all requirements of the brief; never called global."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.physics.unsupported import UnsupportedMachine
from detune.problem.requirement import Requirement
from detune.sizing.made_parts import bounds, logarithmic, sizing_of
from detune.solvers.size_batch import Judged, judge, response_margin
from detune.solvers.size_gradients import Gradients, Sides, prepared, sides
from detune.solvers.size_slopes import ROOM, Handed, handed

Floats = NDArray[np.float64]
WORTH = "best of many local searches from seeded starts; not proven global"
STEP = 1e-4
SNAP = 1e-9
# Margins beyond this never bind and are flattened.
FAR = 3.0
MET = -1e-6
# Differenced, a minimax creeps along the edge between two peaks; further iterations gain nothing.
MINIMAX = 25
EXTRA = ("worst-response", "separation")


@dataclass(frozen=True)
class LocalSearch:
    """One start: the unknowns (u,) it ended at, objective, least margin, and the optimiser's own word."""

    values: Floats
    objective: float
    least_margin: float
    detail: str


@dataclass(frozen=True)
class ManyStarts:
    """Every local search, best first; those that missed a requirement last. `evaluations` counts designs judged.

    `spread` (best, median, worst) of the objective and `near`, the share within 1 % of the best, over those that met.
    `slopes` counts points at which slopes were found; `slopes_from` says how; `differenced` names the
    requirements whose
    rows were differenced because they have no adjoint.
    """

    searches: tuple[LocalSearch, ...]
    met: int
    spread: tuple[float, float, float]
    near: float
    evaluations: int
    slopes: int = 0
    slopes_from: str = "adjoint"
    differenced: tuple[str, ...] = ()
    worth: str = WORTH

    @property
    def best(self) -> LocalSearch | None:
        """The best search that met every requirement, None where none did."""
        return self.searches[0] if self.met else None


class Coordinates:
    """Unknowns as numbers from 0 to 1, by their logarithm where that is their scale."""

    def __init__(self, brief: Brief) -> None:
        self.low, self.high = bounds(brief)
        self.logs = np.array([logarithmic(unknown) for unknown in sizing_of(brief).unknown])

    def inward(self, values: Floats) -> Floats:
        """Coordinates (..., u) of values in SI."""
        low, high = self._scale(self.low), self._scale(self.high)
        span = np.where(high > low, high - low, 1.0)
        return np.asarray((self._scale(values) - low) / span)

    def outward(self, y: Floats) -> Floats:
        """Values in SI (..., u) of coordinates."""
        low, high = self._scale(self.low), self._scale(self.high)
        raw = low + np.clip(y, 0.0, 1.0) * (high - low)
        return np.clip(np.where(self.logs, np.exp(np.where(self.logs, raw, 0.0)), raw), self.low, self.high)

    def scale(self, values: Floats) -> Floats:
        """How values (u,) in SI change with their coordinates."""
        low, high = self._scale(self.low), self._scale(self.high)
        return np.asarray((high - low) * np.where(self.logs, values, 1.0))

    def _scale(self, values: Floats) -> Floats:
        return np.where(self.logs, np.log(np.where(self.logs, values, 1.0)), values)


class _Differenced:
    """Objective and margins with their slopes by one batch of a design and its neighbours at each point."""

    way = "finite differences"

    def __init__(self, brief: Brief, goal: str, sense: float, held: dict[str, float]) -> None:
        self.brief, self.goal, self.sense, self.held = brief, goal, sense, held
        self.to = Coordinates(brief)
        self.size = len(self.to.low)
        self.extra = goal in EXTRA
        self.count = 0
        self.key = b""
        self.values = np.zeros(0)
        self.slopes = np.zeros((0, 0))
        self.unit = 1.0

    def at(self, y: Floats) -> Judged:
        """Judge points (N, u) in coordinates."""
        self.count += len(y)
        return judge(self.brief, self.to.outward(y))

    def refresh(self, y: Floats) -> None:
        """Evaluate the point and its neighbours, once."""
        if y.tobytes() == self.key:
            return
        self.key = y.tobytes()
        x = np.clip(y[: self.size], 0.0, 1.0)
        # Steps go inward at the upper bound.
        step = np.where(x + STEP <= 1.0, STEP, -STEP)
        found = self.at(np.concatenate([x[None], x + np.diag(step)]))
        rows = self.rows_of(found)
        slopes = (rows[:, 1:] - rows[:, :1]) / step
        if self.extra:
            slopes = np.column_stack([slopes, np.zeros(len(rows))])
            if self.goal == "worst-response":
                slopes[-1, -1] = 1.0
                rows[-1, 0] += y[-1]
            else:
                slopes[-1, -1] = -1.0
                rows[-1, 0] -= y[-1]
        self.values, self.slopes = rows[:, 0], slopes

    def rows_of(self, found: Judged) -> Floats:
        """What must not be negative: margins, levels held, and last the row of the extra variable."""
        margins = found.margins
        if self.goal == "worst-response":
            from detune.brief.allowable.base import BandAllowable, HarmonicAllowable

            forms = (HarmonicAllowable, BandAllowable)
            keep = [i for i, r in enumerate(found.requirements) if not isinstance(r.allowable, forms)]
            margins = margins[keep]
        rows = [np.minimum(margins, FAR) - ROOM]
        for name, level in self.held.items():
            over = found.objectives[name]
            rows.append(
                (over - level)[None] if name == "separation" else (1.0 - over / max(level, 1e-9))[None]
            )
        if self.goal == "worst-response":
            ratio = 1.0 / (1.0 + response_margin(found.requirements, found.margins))
            rows.append(-np.minimum(ratio, 1e3)[None])
        elif self.goal == "separation":
            rows.append(np.minimum(found.objectives["separation"], FAR)[None])
        else:
            self.target = found.objectives[self.goal]
        return np.concatenate(rows)

    def start(self, y: Floats) -> tuple[Floats, list[tuple[float, float | None]]]:
        """The variables at coordinates y, and their bounds."""
        limits: list[tuple[float, float | None]] = [(0.0, 1.0)] * self.size
        if not self.extra:
            return y, limits
        level = float(self.at(y[None]).objectives[self.goal][0])
        worst = self.goal == "worst-response"
        limits.append((0.0, None) if worst else (-1.0, FAR))
        return np.append(y, min(level, 1e3) if worst else max(min(level, FAR), -1.0)), limits

    def objective(self, y: Floats) -> float:
        if self.extra:
            return float(y[-1]) if self.goal == "worst-response" else -float(y[-1])
        self.refresh(y)
        return float(self.sense * self.target[0] / self.unit)

    def objective_slope(self, y: Floats) -> Floats:
        slope = np.zeros(y.size)
        if self.extra:
            slope[-1] = 1.0 if self.goal == "worst-response" else -1.0
            return slope
        self.refresh(y)
        x = np.clip(y[: self.size], 0.0, 1.0)
        step = np.where(x + STEP <= 1.0, STEP, -STEP)
        return np.asarray(self.sense * (self.target[1:] - self.target[0]) / step / self.unit)

    def constraint(self, y: Floats) -> Floats:
        self.refresh(y)
        return self.values

    def constraint_slope(self, y: Floats) -> Floats:
        self.refresh(y)
        return self.slopes


class _Adjoint(_Differenced):
    """Objective and rows with slopes by adjoint; only requirements without one are differenced, in their own rows."""

    way = "adjoint"

    def __init__(
        self, brief: Brief, goal: str, sense: float, held: dict[str, float], found: Gradients
    ) -> None:
        super().__init__(brief, goal, sense, held)
        self.gradients = found
        self.sides: Sides = ()
        self.last: Handed | None = None
        self.slopes_found = 0

    def refresh(self, y: Floats) -> None:
        if y.tobytes() == self.key:
            return
        values = self.to.outward(np.clip(y[: self.size], 0.0, 1.0))
        level = float(y[-1]) if self.extra else 0.0
        self.last = handed(
            self.gradients, values, self.to.scale(values), self.sides, self.goal, self.held, level
        )
        self.key = y.tobytes()
        self.slopes_found += 1
        self.values, self.slopes = self.last.rows, self.last.slopes

    def start(self, y: Floats) -> tuple[Floats, list[tuple[float, float | None]]]:
        limits: list[tuple[float, float | None]] = [(0.0, 1.0)] * self.size
        self.key = b""
        self.sides = sides(self.gradients, self.to.outward(y))
        if not self.extra:
            return y, limits
        level = float(self.at(y[None]).objectives[self.goal][0])
        if self.goal == "worst-response":
            return np.append(y, np.log(min(max(level, 1e-8), 1e6))), [*limits, (None, None)]  # type: ignore[list-item]
        return np.append(y, max(min(level, FAR), -1.0)), [*limits, (-1.0, None)]

    def objective(self, y: Floats) -> float:
        if self.extra:
            return float(y[-1]) if self.goal == "worst-response" else -float(y[-1])
        self.refresh(y)
        assert self.last is not None
        return self.sense * self.last.goal / self.unit

    def objective_slope(self, y: Floats) -> Floats:
        if self.extra:
            return super().objective_slope(y)
        self.refresh(y)
        assert self.last is not None and self.last.goal_slopes is not None
        return np.asarray(self.sense * self.last.goal_slopes / self.unit)


def start_points(size: int, starts: int, seed: int) -> Floats:
    """Latin hypercube (starts, u) in coordinates."""
    rng = np.random.default_rng(seed)
    cells = np.stack([rng.permutation(starts) for _ in range(size)], axis=1)
    return np.asarray((cells + rng.random(cells.shape)) / starts)


def solve(
    brief: Brief,
    goal: str,
    sense: float,
    *,
    starts: int,
    seed: int,
    first: tuple[Floats, ...] = (),
    held: dict[str, float] | None = None,
    iterations: int = 80,
    pool: int = 12,
    adjoint: bool = True,
    gradients: Gradients | None = None,
    interrupted: Callable[[], bool] | None = None,
) -> ManyStarts:
    """Best of `starts` local searches; the starts are the least-violating share of `pool` times as many points.

    `first` are values (u,) to start from besides; `held` holds other objectives at levels (upper ones; separation
    lower). The points are drawn with `seed`: the same call gives the same answer. Without `adjoint` every slope is
    differenced. `gradients` saves preparing the same brief again.
    """
    functions = _Differenced(brief, goal, sense, held or {})
    # A whole number of parts has no slopes.
    if adjoint and all(u.kind != "parallel" or u.bounds[0] == u.bounds[1] for u in sizing_of(brief).unknown):
        functions = _Adjoint(brief, goal, sense, held or {}, gradients or prepared(brief))
    drawn = start_points(functions.size, starts * pool, seed)
    judged = functions.at(drawn)
    order = np.argsort(-np.minimum(judged.margins, 0.0).sum(axis=0), kind="stable")
    points = [functions.to.inward(values) for values in first] + list(drawn[order[:starts]])
    functions.unit = (
        max(float(np.abs(judged.objectives.get(goal, np.ones(1))).max()), 1e-12)
        if not functions.extra
        else 1.0
    )
    done = []
    for y in points:
        if interrupted is not None and interrupted():
            break
        done.append(_search(functions, y, iterations))
    return gather(functions, done, sense)


def _told(requirements: tuple[Requirement, ...]) -> tuple[str, ...]:
    """Requirements in words, those of one quantity at several places once."""
    return tuple(dict.fromkeys(f"{r.allowable.quantity()} ({r.condition})" for r in requirements))


def ordered(done: list[LocalSearch], sense: float) -> tuple[list[LocalSearch], list[LocalSearch]]:
    """Searches that met every requirement, the best first, and those that did not, the least missing first.

    Of searches with one and the same objective, but for rounding, the one with the most margin comes first.
    """
    good = [s for s in done if s.least_margin >= MET]
    bad = sorted((s for s in done if s.least_margin < MET), key=lambda s: -s.least_margin)
    unit = max((abs(s.objective) for s in good), default=0.0) or 1.0
    good.sort(key=lambda s: (round(sense * s.objective / unit, 9), -round(s.least_margin, 6)))
    return good, bad


def gather(functions: _Differenced, done: list[LocalSearch], sense: float) -> ManyStarts:
    """Order the searches and tell their spread."""
    good, bad = ordered(done, sense)
    nan = float("nan")
    spread, near = (nan, nan, nan), 0.0
    if good:
        values = np.array([s.objective for s in good])
        spread = (float(values[0]), float(np.median(values)), float(values[-1]))
        near = float(np.mean(np.abs(values - values[0]) <= 0.01 * abs(values[0])))
    found: tuple[int, tuple[str, ...]] = (0, ())
    if isinstance(functions, _Adjoint):
        found = functions.slopes_found, _told(functions.gradients.differenced)
    return ManyStarts(
        (*good, *bad), len(good), spread, near, functions.count, found[0], functions.way, found[1]
    )


def _search(functions: _Differenced, y: Floats, iterations: int) -> LocalSearch:
    found = _descended(functions, y, iterations)
    if isinstance(functions, _Adjoint) and found.least_margin < MET:
        # Modes are held to the sides they had at the start; from where it ended they may lie on others.
        again = functions.to.inward(found.values)
        if sides(functions.gradients, found.values) != functions.sides:
            found = max(found, _descended(functions, again, iterations), key=lambda s: s.least_margin)
    return found


def _descended(functions: _Differenced, y: Floats, iterations: int) -> LocalSearch:
    from scipy.optimize import minimize

    rows: dict[str, Any] = {"type": "ineq", "fun": functions.constraint, "jac": functions.constraint_slope}
    creeps = functions.extra and functions.way != "adjoint"
    options = {"maxiter": min(iterations, MINIMAX) if creeps else iterations, "ftol": 1e-9}
    try:
        start, limits = functions.start(y)
        with np.errstate(all="ignore"):
            found = minimize(
                functions.objective, start, method="SLSQP", jac=functions.objective_slope, bounds=limits,
                constraints=[rows], options=options,
            )  # fmt: skip
        end, word = np.asarray(found.x[: functions.size]), str(found.message)
    except (np.linalg.LinAlgError, UnsupportedMachine) as error:
        end, word = y, f"stopped where the machine is not held: {error}"
    return _judged(functions, np.clip(end, 0.0, 1.0), word)


def _judged(functions: _Differenced, x: Floats, word: str) -> LocalSearch:
    # A bound that the optimiser reaches but for rounding is reached.
    x = np.where(x < SNAP, 0.0, np.where(x > 1.0 - SNAP, 1.0, x))
    judged = functions.at(x[None])
    least = float(judged.margins[:, 0].min())
    for name, level in functions.held.items():
        over = float(judged.objectives[name][0])
        least = min(least, over - level if name == "separation" else 1.0 - over / max(level, 1e-9))
    if functions.goal == "worst-response":
        rows_kept = functions.rows_of(judged)[:-1, 0]
        least = float(rows_kept.min(initial=0.0)) + ROOM
    values = functions.to.outward(x)
    return LocalSearch(values, float(judged.objectives[functions.goal][0]), least, word)
