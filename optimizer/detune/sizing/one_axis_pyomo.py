"""One-axis sizing stated a second time, in Pyomo, and solved globally by SCIP in a process of its own.

The statement shares only the input types with `one_axis`. Unknowns: k, c (or the loss force h = eta k), ballast
(continuous or in whole steps) and optionally a whole number of equal mounts. A limit over a range is not
sampled: with u = w^2 it says that a polynomial P(u) is not negative on [ua, ub], and for degree two that holds
if and only if some tau >= 0 makes P(u) - tau (u - ua)(ub - u) non-negative for every real u (the S-lemma,
lossless for one quadratic): its three coefficients then satisfy p0, p2 >= 0 and 4 p0 p2 >= p1^2.
"""

from __future__ import annotations

import math
import multiprocessing
import time
from dataclasses import dataclass
from typing import Any, Literal

from detune.sizing.statement import STANDARD_GRAVITY, OneAxisProblem, ResponseLimit, SizingError

Status = Literal["optimal", "infeasible", "time limit", "failed"]

_ORDER = {"displacement": 0, "velocity": 1, "acceleration": 2, "deflection": 0}


@dataclass(frozen=True)
class MountCount:
    """A whole number of equal mounts in parallel, each at `cost`; the bounds of k and c are then per mount."""

    least: int
    most: int
    cost: float


@dataclass(frozen=True)
class SecondOpinion:
    """What SCIP said. Design values are NaN unless `status` is "optimal" (or a time limit left an incumbent).

    `seconds` is the solver call alone, without process start and imports. `detail` is the solver's own word.
    """

    status: Status
    objective: float
    bound: float
    stiffness: float
    damping: float
    ballast: float
    count: int
    seconds: float
    detail: str


def _nothing(status: Status, detail: str, seconds: float = math.nan) -> SecondOpinion:
    nan = math.nan
    return SecondOpinion(status, nan, nan, nan, nan, nan, 0, seconds, detail)


def _limit_polynomial(limit: ResponseLimit, v: dict[str, Any]) -> list[Any]:
    """Coefficients in u of |D|^2 - numerator / limit^2, multiplied through by a power of u where one divides."""
    k, m = v["k"], v["m"]
    zero, one = v["modulus"]  # |K|^2 = zero + one u
    dynamic = [zero, one - 2 * k * m, m * m]
    ratio = (limit.amplitude / limit.limit) ** 2
    base = limit.source.startswith("base")
    if base:
        order = ("displacement", "velocity", "acceleration").index(limit.source.split()[1])
    if limit.quantity == "transmissibility":
        power, top = 0, [ratio * zero, ratio * one]
    elif limit.quantity == "transmitted force":
        power, top = (2 if limit.source == "unbalance" else 0), [ratio * zero, ratio * one]
    elif base and limit.quantity == "deflection":
        power, top = 2 - order, [ratio * m * m]
    elif base:
        power, top = _ORDER[limit.quantity] - order, [ratio * zero, ratio * one]
    else:
        power = _ORDER[limit.quantity] + (2 if limit.source == "unbalance" else 0)
        top = [ratio]
    through = max(0, -power)
    left = [0] * through + dynamic
    right = [0] * max(0, power) + top
    size = max(len(left), len(right))
    left += [0] * (size - len(left))
    right += [0] * (size - len(right))
    return [a - b for a, b in zip(left, right, strict=True)]


def _degree(coefficients: list[Any]) -> int:
    return max(i for i, x in enumerate(coefficients) if not (isinstance(x, int | float) and x == 0))


class _Scaled:
    """Units in which k, m and u are of order one: kg of the bare mass, and the geometric middle stiffness."""

    def __init__(self, problem: OneAxisProblem) -> None:
        low, high = problem.stiffness_bounds
        self.mass = problem.mass
        self.stiffness = math.sqrt(low * high)
        self.omega2 = self.stiffness / self.mass
        self.damping = self.stiffness / math.sqrt(self.omega2)

    def limit(self, limit: ResponseLimit) -> ResponseLimit:
        from dataclasses import replace

        # Length 1 m, time 1/omega, mass m: a force unit is k * 1 m.
        w = math.sqrt(self.omega2)
        unit = {"displacement": 1.0, "deflection": 1.0, "velocity": w, "acceleration": w**2}
        unit |= {"transmitted force": self.stiffness, "transmissibility": 1.0}
        source = {"force": self.stiffness, "unbalance": self.mass, "unit": 1.0}
        source |= {"base displacement": 1.0, "base velocity": w, "base acceleration": w**2}
        return replace(
            limit,
            limit=limit.limit / unit[limit.quantity],
            amplitude=limit.amplitude / source[limit.source],
            lower_frequency=limit.lower_frequency / w,
            upper_frequency=limit.upper_frequency / w,
        )


def build_model(problem: OneAxisProblem, count: MountCount | None = None) -> Any:
    """The Pyomo model in scaled unknowns; raises SizingError for a range limit of degree above two in w^2."""
    import pyomo.environ as pyo

    scaled = _Scaled(problem)
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
    variables = {"k": model.k, "m": model.m, "modulus": modulus}
    model.tau = pyo.VarList(domain=pyo.NonNegativeReals)
    for limit in problem.limits:
        _add_limit(model, scaled.limit(limit), variables)
    _placement(model, problem, scaled)
    _objective(model, problem, scaled, variables, count)
    return model


def _ballast(model: Any, problem: OneAxisProblem, scaled: _Scaled) -> None:
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


def _add_limit(model: Any, limit: ResponseLimit, variables: dict[str, Any]) -> None:
    coefficients = _limit_polynomial(limit, variables)
    low, high = ((2 * math.pi * f) ** 2 for f in (limit.lower_frequency, limit.upper_frequency))
    if low == high:
        # Divided by u^2 so that a row far above resonance is of the order of the mass squared.
        size = max(low * low, 1.0)
        model.rows.add(sum(x * low**i for i, x in enumerate(coefficients)) / size >= 0)
        return
    degree = _degree(coefficients)
    if degree > 2:
        raise SizingError(
            f"limit '{limit.name}': over a range this limit has degree {degree} in the squared frequency; the "
            "second statement holds ranges up to degree two. State it at lines."
        )
    p = coefficients[:3] + [0] * (3 - len(coefficients))
    tau = model.tau.add()
    p0, p1, p2 = p[0] + tau * low * high, p[1] - tau * (low + high), p[2] + tau
    middle = 0.5 * (low + high)
    model.rows.add(p0 / middle**2 >= 0)
    model.rows.add(p2 >= 0)
    model.rows.add((4 * p0 * p2 - p1**2) / middle**2 >= 0)


def _placement(model: Any, problem: OneAxisProblem, scaled: _Scaled) -> None:
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


def _objective(
    model: Any, problem: OneAxisProblem, scaled: _Scaled, v: dict[str, Any], count: MountCount | None
) -> None:
    import pyomo.environ as pyo

    goal, objective = problem.objective.goal, problem.objective
    unit = scaled.damping if problem.damping_kind == "viscous" else 1.0
    added = (model.m - 1) * scaled.mass
    if goal == "softest":
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
        assert objective.frequency is not None
        u = (2 * math.pi * objective.frequency) ** 2 / scaled.omega2
        zero, one = v["modulus"]
        top = zero + one * u
        model.t = pyo.Var(bounds=(0, None))
        # Times 1/k_min^2: the solver's absolute tolerance must not decide a small transmissibility.
        size = float(model.k.lb) ** 2
        dynamic = top - 2 * model.k * model.m * u + (model.m * u) ** 2
        model.rows.add((model.t**2 * dynamic - top) / size >= 0)
        expression = model.t
    else:
        expression = (
            objective.stiffness_weight * scaled.stiffness * model.k
            + objective.damping_weight * unit * model.d
            + objective.damping_squared_weight * unit**2 * model.d**2
            + objective.mass_weight * added
        )
        if count:
            expression = expression + count.cost * model.n
    if objective.damping_squared_weight and goal == "weighted sum":
        # SCIP takes a linear objective only; the epigraph keeps the rest in a row.
        model.cost = pyo.Var()
        model.rows.add(model.cost >= expression)
        expression = model.cost
    model.goal = pyo.Objective(expr=expression)


def _value(variable: Any) -> float:
    """The variable's value; one that no row mentions is not sent to the solver and rests on its lower bound."""
    return float(variable.lb if variable.value is None else variable.value)


def _run(problem: OneAxisProblem, count: MountCount | None, limit: float, gap: float) -> SecondOpinion:
    from pyomo.contrib.solver.common.factory import SolverFactory
    from pyomo.contrib.solver.common.results import SolutionStatus, TerminationCondition

    model = build_model(problem, count)
    scaled = _Scaled(problem)
    solver = SolverFactory("scip_direct")
    start = time.perf_counter()
    result = solver.solve(
        model,
        load_solutions=False,
        raise_exception_on_nonoptimal_result=False,
        time_limit=limit,
        solver_options={
            "numerics/feastol": 1e-9,
            "numerics/dualfeastol": 1e-9,
            "limits/gap": gap,
            "limits/absgap": 0.0,
        },
    )
    seconds = time.perf_counter() - start
    why = result.termination_condition
    detail = f"{why.name}, {result.solution_status.name}"
    if why == TerminationCondition.provenInfeasible:
        return _nothing("infeasible", detail, seconds)
    done = why == TerminationCondition.convergenceCriteriaSatisfied
    if result.solution_status not in (SolutionStatus.optimal, SolutionStatus.feasible):
        return _nothing(
            "time limit" if why == TerminationCondition.maxTimeLimit else "failed", detail, seconds
        )
    if not done and why != TerminationCondition.maxTimeLimit:
        return _nothing("failed", detail, seconds)
    result.solution_loader.load_vars()
    goal = problem.objective.goal
    unit = {"softest": scaled.stiffness, "stiffest": -scaled.stiffness, "least added mass": scaled.mass}
    unit |= {"greatest separation": -1.0}
    if problem.damping_kind == "viscous":
        unit["least damping"] = scaled.damping
    factor = unit.get(goal, 1.0)
    return SecondOpinion(
        "optimal" if done else "time limit",
        factor * float(result.incumbent_objective),
        factor * float(result.objective_bound),
        _value(model.k) * scaled.stiffness,
        _value(model.d) * (scaled.damping if problem.damping_kind == "viscous" else 1.0),
        (_value(model.m) - 1.0) * scaled.mass,
        round(_value(model.n)) if count else 1,
        seconds,
        detail,
    )


def _serve(connection: Any) -> None:
    import pyomo.environ  # noqa: F401
    import pyscipopt  # noqa: F401

    connection.send("ready")
    while True:
        try:
            task = connection.recv()
        except EOFError:
            return
        try:
            connection.send(_run(*task))
        except (SizingError, ValueError, RuntimeError, ArithmeticError) as error:
            connection.send(_nothing("failed", f"{type(error).__name__}: {error}"))


def solve_with_scip(
    problems: list[OneAxisProblem],
    time_limit: float,
    counts: list[MountCount | None] | None = None,
    gap: float = 1e-8,
) -> list[SecondOpinion]:
    """Solve each problem globally by SCIP; `time_limit` (s) is hard and per problem.

    One child process serves the list; one that does not answer within the limit and two seconds is ended and
    replaced (its imports, before the clock starts, are given a minute).
    Raises SizingError, before any run, for a problem that cannot be stated.
    """
    many = counts if counts is not None else [None] * len(problems)
    for problem, count in zip(problems, many, strict=True):
        build_model(problem, count)
    context = multiprocessing.get_context("spawn")
    answers: list[SecondOpinion] = []
    process: Any = None
    ours: Any = None
    for problem, count in zip(problems, many, strict=True):
        if process is None:
            ours, theirs = context.Pipe()
            process = context.Process(target=_serve, args=(theirs,), daemon=True)
            process.start()
            theirs.close()
            if not ours.poll(60.0):
                process.kill()
                raise SizingError("the solver's process did not start within a minute")
            ours.recv()
        ours.send((problem, count, time_limit, gap))
        answer: SecondOpinion | None = None
        if ours.poll(time_limit + 2.0):
            try:
                answer = ours.recv()
            except EOFError:
                answer = _nothing("failed", "the solver's process died")
                process.join()
                process = None
        else:
            process.kill()
            process.join()
            process = None
            answer = _nothing("time limit", "ended from outside: the solver ignored its limit", time_limit)
        answers.append(answer)
    if process is not None:
        ours.close()
        process.join(5.0)
        if process.is_alive():
            process.kill()
            process.join()
    return answers
