"""One-axis sizing stated a second time, in Pyomo, and solved globally by SCIP.

The statement shares only the input types with `one_axis`. Unknowns: k, c (or the loss force h = eta k),
ballast (continuous or in whole steps), optionally a whole number of equal parts side by side, and optionally
one level by which all response limits are multiplied. A limit over a range is not sampled: with u = w^2 it
says that a polynomial P(u) is not negative on [ua, ub]. For degree two that holds if and only if some tau >=
0 makes P(u) - tau (u - ua)(ub - u) non-negative for every real u (the S-lemma, lossless for one quadratic):
its three coefficients then satisfy p0, p2 >= 0 and 4 p0 p2 >= p1^2. A limit of higher degree is stated at
lines, and the worst place of its range joins them until none is exceeded: each such run is a relaxation, so
its bound holds throughout.
"""

from __future__ import annotations

import math
import time
from dataclasses import dataclass
from typing import Any, Literal

from detune.sizing.one_axis_pyomo_limits import Scaled, degree, limit_sides, range_of, worst_place
from detune.sizing.statement import STANDARD_GRAVITY, OneAxisProblem, ResponseLimit

Status = Literal["optimal", "infeasible", "time limit", "failed"]
# A limit may be exceeded by this share of its square before another line is stated; lines nearer than SAME are one, for
# SCIP holds a line only within its own tolerance. At most ROUNDS runs are made.
EXCESS, SAME, ROUNDS = 2e-9, 1e-6, 60
Lines = dict[str, tuple[float, ...]]


@dataclass(frozen=True)
class PartCount:
    """A whole number n of equal parts side by side; the bounds of k and c in the problem are then those for n = 1.

    Each adds `cost` and `cost_per_damping` times the damping to a weighted sum. Limits named in `shared` are
    n times as wide: they hold the force through one part.
    """

    least: int
    most: int
    cost: float
    cost_per_damping: float = 0.0
    shared: tuple[str, ...] = ()


@dataclass(frozen=True)
class ScipTask:
    """One question. `level`: the objective is the least factor on all response limits, not that of the problem."""

    problem: OneAxisProblem
    count: PartCount | None
    level: bool
    time_limit: float
    gap: float


@dataclass(frozen=True)
class ScipAnswer:
    """What SCIP said. Design values are NaN unless `status` is "optimal" (or a time limit left an incumbent).

    `seconds` of processor time are from the statement to the answer, without process start and imports;
    `runs` how often SCIP ran. `detail` is its own word.
    """

    status: Status
    objective: float
    bound: float
    stiffness: float
    damping: float
    ballast: float
    count: int
    seconds: float
    runs: int
    detail: str


def nothing(status: Status, detail: str, seconds: float = math.nan, runs: int = 0) -> ScipAnswer:
    """An answer without a design."""
    nan = math.nan
    return ScipAnswer(status, nan, nan, nan, nan, nan, 0, seconds, runs, detail)


def build_model(task: ScipTask, lines: Lines) -> Any:
    """The Pyomo model in scaled unknowns; `lines` are the u (scaled) at which limits of high degree are stated."""
    import pyomo.environ as pyo

    problem, count = task.problem, task.count
    scaled = Scaled(problem)
    model = pyo.ConcreteModel()
    most = count.most if count else 1
    k_low, k_high = (x / scaled.stiffness for x in problem.stiffness_bounds)
    model.n = pyo.Var(bounds=(count.least, most) if count else (1, 1), domain=pyo.Integers)
    model.k = pyo.Var(bounds=(k_low, k_high * most))
    viscous = problem.damping_kind == "viscous"
    unit = scaled.damping if viscous else 1.0
    d_low, d_high = (x / unit for x in problem.damping_bounds)
    model.d = pyo.Var(bounds=(d_low, d_high * (most if viscous else 1)))
    model.rows = pyo.ConstraintList()
    if count:
        model.rows.add(model.k >= k_low * model.n)
        model.rows.add(model.k <= k_high * model.n)
        if viscous:
            model.rows.add(model.d >= d_low * model.n)
            model.rows.add(model.d <= d_high * model.n)
    _ballast(model, problem, scaled)
    if viscous:
        modulus = (model.k**2, model.d**2)
    else:
        model.h = pyo.Var(bounds=(d_low * k_low, d_high * k_high * most))
        model.rows.add(model.h == model.d * model.k)
        modulus = (model.k**2 + model.h**2, 0)
    # |K|^2 = modulus[0] + modulus[1] u; `level` is squared, as the limits are.
    model.level = pyo.Var(bounds=(0.0, None) if task.level else (1.0, 1.0))
    model.tau = pyo.VarList(domain=pyo.NonNegativeReals)
    for limit in problem.limits:
        scale: Any = model.level if task.level else 1
        if count and limit.name in count.shared:
            scale = scale * model.n**2
        sides = limit_sides(scaled.limit(limit), model.k, model.m, modulus, scale)
        _add_limit(model, scaled.limit(limit), [a - b for a, b in zip(*sides, strict=True)], lines)
    _placement(model, problem, scaled)
    _objective(model, task, scaled, modulus)
    return model


def _ballast(model: Any, problem: OneAxisProblem, scaled: Scaled) -> None:
    import pyomo.environ as pyo

    ballast = problem.ballast
    if ballast is None:
        model.m = pyo.Var(bounds=(1.0, 1.0))
        return
    low, high = (1.0 + x / scaled.mass for x in (ballast.least, ballast.most))
    model.m = pyo.Var(bounds=(low, high))
    if ballast.step is not None:
        model.steps = pyo.Var(bounds=(0, len(ballast.values()) - 1), domain=pyo.Integers)
        model.rows.add(model.m == low + model.steps * (ballast.step / scaled.mass))


def needs_lines(limit: ResponseLimit) -> bool:
    """Whether a limit is one over a range whose polynomial is of higher degree than two."""
    if limit.lower_frequency == limit.upper_frequency:
        return False
    return degree([a - b for a, b in zip(*limit_sides(limit, 1.0, 1.0, (2.0, 3.0), 5.0), strict=True)]) > 2


def _add_limit(model: Any, limit: ResponseLimit, coefficients: list[Any], lines: Lines) -> None:
    low, high = range_of(limit)
    if low == high or limit.name in lines:
        for u in lines.get(limit.name, (low,)):
            # Divided by u^2 so that a row far above resonance is of the order of the mass squared.
            model.rows.add(sum(x * u**i for i, x in enumerate(coefficients)) / max(u * u, 1.0) >= 0)
        return
    p = coefficients[:3] + [0] * (3 - len(coefficients))
    tau = model.tau.add()
    p0, p1, p2 = p[0] + tau * low * high, p[1] - tau * (low + high), p[2] + tau
    # Below resonance p0 is of the order of k^2, which is one; above it grows as the ends of the range.
    size = max(low * high, 1.0)
    model.rows.add(p0 / size >= 0)
    model.rows.add(p2 >= 0)
    model.rows.add((4 * p0 * p2 - p1**2) / size >= 0)


def _placement(model: Any, problem: OneAxisProblem, scaled: Scaled) -> None:
    import pyomo.environ as pyo

    k, m = model.k, model.m
    if problem.sag is not None:
        ratio = STANDARD_GRAVITY * problem.sag.dynamic_to_static / scaled.omega2
        # In stiffness, not in metres: the solver's tolerance is absolute.
        if problem.sag.most == 0:
            model.rows.add(m <= 0)
        else:
            model.rows.add(k >= m * (ratio / problem.sag.most))
        if problem.sag.least > 0:
            model.rows.add(k <= m * (ratio / problem.sag.least))
    hertz = math.sqrt(scaled.omega2) / (2 * math.pi)
    count = len(problem.excitation_intervals)
    maximise = problem.objective.goal == "greatest separation"
    if problem.separation is None and not maximise:
        return
    model.above = pyo.Var(range(count), domain=pyo.Binary)
    top = float(k.ub) / float(m.lb)
    model.f = pyo.Var(bounds=(math.sqrt(float(k.lb) / float(m.ub)), math.sqrt(top)))
    model.rows.add(model.f**2 * m == k)
    model.s = pyo.Var(bounds=(-1.0 if problem.separation is None else problem.separation, None))
    for i, (a, b) in enumerate(problem.excitation_intervals):
        low, high = a / hertz, b / hertz
        big_low, big_high = math.sqrt(top) / low + 1, 2.0 + math.sqrt(top) / high
        bound = max(big_low, big_high)
        model.s.setub(bound if model.s.ub is None else min(bound, float(model.s.ub)))
        model.rows.add(1 - model.f / low >= model.s - (big_low + bound) * model.above[i])
        model.rows.add(model.f / high - 1 >= model.s - (big_high + bound) * (1 - model.above[i]))


def _objective(model: Any, task: ScipTask, scaled: Scaled, modulus: tuple[Any, Any]) -> None:
    import pyomo.environ as pyo

    problem, count = task.problem, task.count
    goal, objective = problem.objective.goal, problem.objective
    unit = scaled.damping if problem.damping_kind == "viscous" else 1.0
    added = (model.m - 1) * scaled.mass
    if task.level:
        expression = model.level
    elif goal == "softest":
        expression = model.k
    elif goal == "stiffest":
        expression = -model.k
    elif goal == "least damping":
        expression = model.d
    elif goal == "least added mass":
        expression = added / scaled.mass
    elif goal == "greatest separation":
        expression = -model.s
    elif goal == "least transmissibility":
        expression = _transmissibility(model, problem, scaled, modulus)
    else:
        expression = (
            objective.stiffness_weight * scaled.stiffness * model.k
            + objective.damping_weight * unit * model.d
            + objective.damping_squared_weight * unit**2 * model.d**2
            + objective.mass_weight * added
        )
        if count:
            expression = expression + count.cost * model.n + count.cost_per_damping * unit * model.d * model.n
        if objective.damping_squared_weight or (count and count.cost_per_damping):
            # SCIP takes a linear objective only; the epigraph keeps the rest in a row.
            model.cost = pyo.Var()
            model.rows.add(model.cost >= expression)
            expression = model.cost
    model.goal = pyo.Objective(expr=expression)


def _transmissibility(model: Any, problem: OneAxisProblem, scaled: Scaled, modulus: tuple[Any, Any]) -> Any:
    import pyomo.environ as pyo

    assert problem.objective.frequency is not None
    u = (2 * math.pi * problem.objective.frequency) ** 2 / scaled.omega2
    top = modulus[0] + modulus[1] * u
    model.t = pyo.Var(bounds=(0, None))
    # Times 1/k_min^2: the solver's absolute tolerance must not decide a small transmissibility.
    size = float(model.k.lb) ** 2
    dynamic = top - 2 * model.k * model.m * u + (model.m * u) ** 2
    model.rows.add((model.t**2 * dynamic - top) / size >= 0)
    return model.t


def _value(variable: Any) -> float:
    """The variable's value; one that no row mentions is not sent to the solver and rests on its lower bound."""
    return float(variable.lb if variable.value is None else variable.value)


def run(task: ScipTask | None) -> ScipAnswer:
    """Solve one question; None only imports the libraries. To be run in a process of its own."""
    import pyscipopt  # noqa: F401

    if task is None:
        return nothing("optimal", "ready")
    scaled = Scaled(task.problem)
    ranged = {limit.name: scaled.limit(limit) for limit in task.problem.limits if needs_lines(limit)}
    lines: Lines = {name: range_of(limit) for name, limit in ranged.items()}
    seconds, started = 0.0, time.perf_counter()
    answer = nothing("failed", "no run")
    for runs in range(1, ROUNDS + 1):
        left = task.time_limit - (time.perf_counter() - started)
        if left <= 0.0:
            return nothing("time limit", "between two runs", seconds, runs - 1)
        answer, model = _once(task, scaled, lines, left, seconds, runs)
        seconds = answer.seconds
        if answer.status != "optimal":
            return answer
        more = _exceeded(task, model, ranged, lines)
        if not more:
            return answer
        lines = {name: (*places, *more.get(name, ())) for name, places in lines.items()}
    return nothing(
        "failed", f"the worst frequencies of a range were still moving after {ROUNDS} runs", seconds, ROUNDS
    )


def _exceeded(task: ScipTask, model: Any, ranged: dict[str, ResponseLimit], lines: Lines) -> Lines:
    """The worst place of every limit that is exceeded between its lines."""
    k, m, d, n = (_value(each) for each in (model.k, model.m, model.d, model.n))
    modulus = (k * k, d * d) if task.problem.damping_kind == "viscous" else (k * k * (1.0 + d * d), 0.0)
    found: Lines = {}
    for name, limit in ranged.items():
        worst, place = worst_place(limit, k, m, modulus)
        allowed = _value(model.level) if task.level else 1.0
        allowed *= n * n if task.count and name in task.count.shared else 1.0
        new = all(abs(place - u) > SAME * u for u in lines[name])
        if new and worst > allowed * (1.0 + EXCESS):
            found[name] = (place,)
    return found


def _once(
    task: ScipTask, scaled: Scaled, lines: Lines, limit: float, before: float, runs: int
) -> tuple[ScipAnswer, Any]:
    from pyomo.contrib.solver.common.factory import SolverFactory
    from pyomo.contrib.solver.common.results import SolutionStatus, TerminationCondition

    solver = SolverFactory("scip_direct")
    start = time.process_time()
    model = build_model(task, lines)
    result = solver.solve(
        model,
        load_solutions=False,
        raise_exception_on_nonoptimal_result=False,
        time_limit=limit,
        solver_options={
            "numerics/feastol": 1e-9,
            "numerics/dualfeastol": 1e-9,
            "limits/gap": task.gap,
            "limits/absgap": 0.0,
        },
    )
    seconds = before + time.process_time() - start
    why = result.termination_condition
    detail = f"{why.name}, {result.solution_status.name}"
    if why == TerminationCondition.provenInfeasible:
        return nothing("infeasible", detail, seconds, runs), model
    done = why == TerminationCondition.convergenceCriteriaSatisfied
    if result.solution_status not in (SolutionStatus.optimal, SolutionStatus.feasible):
        status: Status = "time limit" if why == TerminationCondition.maxTimeLimit else "failed"
        return nothing(status, detail, seconds, runs), model
    if not done and why != TerminationCondition.maxTimeLimit:
        return nothing("failed", detail, seconds, runs), model
    result.solution_loader.load_vars()
    objective, bound = _in_si(task, scaled, float(result.incumbent_objective), float(result.objective_bound))
    return ScipAnswer(
        "optimal" if done else "time limit",
        objective,
        bound,
        _value(model.k) * scaled.stiffness,
        _value(model.d) * (scaled.damping if task.problem.damping_kind == "viscous" else 1.0),
        (_value(model.m) - 1.0) * scaled.mass,
        round(_value(model.n)) if task.count else 1,
        seconds,
        runs,
        detail,
    ), model


def _in_si(task: ScipTask, scaled: Scaled, *values: float) -> tuple[float, ...]:
    """Objective values in SI and in the sense of the goal."""
    if task.level:
        return tuple(math.sqrt(max(value, 0.0)) for value in values)
    unit = {"softest": scaled.stiffness, "stiffest": -scaled.stiffness, "least added mass": scaled.mass}
    unit |= {"greatest separation": -1.0}
    if task.problem.damping_kind == "viscous":
        unit["least damping"] = scaled.damping
    factor = unit.get(task.problem.objective.goal, 1.0)
    return tuple(factor * value for value in values)
