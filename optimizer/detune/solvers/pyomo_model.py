"""The statement as a Pyomo model with disjunctions over parts, and one run of a MILP solver on it.

At each station and axis exactly one of F = k_j z holds, z the deflection and F the force: a disjunction, written with
explicit big-M rows whose M are the bounds of `pyomo_bounds`. Every variable is scaled to its bound and every limit
to itself, because solvers' tolerances are absolute.
"""

import math
import time
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from detune.solvers.pyomo_bounds import SLACK, Box, Cut, Tone, static_box, tone_box
from detune.solvers.pyomo_statement import Statement

Floats = NDArray[np.float64]
Status = Literal["optimal", "infeasible", "time limit", "failed"]
Backend = Literal["highs", "scip_direct"]
EXACT: dict[str, dict[str, float]] = {
    "highs": {"mip_rel_gap": 0.0, "mip_abs_gap": 1e-9},
    "scip_direct": {"limits/gap": 0.0, "limits/absgap": 0.0},
}
CORNERS = 8


@dataclass(frozen=True)
class Task:
    """One run: the statement, what has been cut off, the tones that are stated in full, and the time (s)."""

    statement: Statement
    cuts: tuple[Cut, ...]
    tones: tuple[Tone, ...]
    backend: Backend
    time_limit: float


@dataclass(frozen=True)
class Answer:
    """What the solver said: the cheapest design of the relaxation, or why there is none, and its lower bound.

    `seconds` is the processor time of the call.
    """

    status: Status
    parts: tuple[int, ...]
    step: int
    bound: float
    seconds: float
    detail: str


def run(task: Task) -> Answer:
    """Build and solve the model of a task. A status that is no proof is never reported as one."""
    from pyomo.contrib.solver.common.factory import SolverFactory
    from pyomo.contrib.solver.common.results import SolutionStatus, TerminationCondition

    model = build_model(task.statement, task.cuts, task.tones)
    # Processor time: others may share the machine, and the solvers work on one thread here.
    started = time.process_time()
    result = SolverFactory(task.backend).solve(
        model,
        load_solutions=False,
        raise_exception_on_nonoptimal_result=False,
        time_limit=task.time_limit,
        solver_options=EXACT[task.backend],
    )
    seconds = time.process_time() - started
    why = result.termination_condition
    detail = f"{why.name}, {result.solution_status.name}"
    bound = -math.inf if result.objective_bound is None else float(result.objective_bound)
    if why == TerminationCondition.provenInfeasible:
        return Answer("infeasible", (), 0, math.inf, seconds, detail)
    if why == TerminationCondition.maxTimeLimit:
        return Answer("time limit", (), 0, bound if math.isfinite(bound) else -math.inf, seconds, detail)
    proven = why == TerminationCondition.convergenceCriteriaSatisfied
    if not proven or result.solution_status != SolutionStatus.optimal:
        return Answer("failed", (), 0, -math.inf, seconds, detail)
    result.solution_loader.load_vars()
    parts = tuple(
        max(range(size), key=lambda j, g=g: float(model.part[g, j].value))  # type: ignore[misc]
        for g, size in enumerate(task.statement.sizes)
    )
    step = max(range(len(task.statement.step_cost)), key=lambda b: float(model.step[b].value))
    return Answer("optimal", parts, step, bound, seconds, detail)


def build_model(statement: Statement, cuts: Sequence[Cut], tones: Sequence[Tone]) -> Any:
    """Return the Pyomo model."""
    import pyomo.environ as pyo

    model = pyo.ConcreteModel()
    pairs = [(g, j) for g, size in enumerate(statement.sizes) for j in range(size)]
    model.part = pyo.Var(pairs, domain=pyo.Binary)
    model.step = pyo.Var(range(len(statement.step_cost)), domain=pyo.Binary)
    model.rows = pyo.ConstraintList()
    for g, size in enumerate(statement.sizes):
        model.rows.add(sum(model.part[g, j] for j in range(size)) == 1)
    model.rows.add(sum(model.step.values()) == 1)
    model.cost = pyo.Objective(
        expr=sum(float(statement.cost[g][j]) * model.part[g, j] for g, j in pairs)
        + sum(float(cost) * model.step[b] for b, cost in enumerate(statement.step_cost))
    )
    for cut in cuts:
        chosen = sum(model.part[g, j] for g, parts in enumerate(cut.parts) for j in parts)
        model.rows.add(chosen + model.step[cut.step] <= len(cut.parts))
    box = static_box(statement)
    if box is not None:
        _add_rest(model, statement, box)
    model.tones = pyo.Block(range(len(tones)))
    for number, tone in enumerate(tones):
        wide = tone_box(statement, tone)
        if wide is not None:
            _add_tone(model, model.tones[number], statement, tone, wide)
    return model


def _deflections(block: Any, statement: Statement, box: Box, name: str) -> dict[tuple[int, int], Any]:
    """Add displacements and return the deflection of every station and axis in units of its bound."""
    import pyomo.environ as pyo

    n = len(box.q)
    q = pyo.Var(range(n), bounds=(-1.0, 1.0))
    block.add_component(f"q_{name}", q)
    places = [(s, a) for s in range(len(statement.group)) for a in range(3) if box.deflection[s, a] > 0.0]
    z = pyo.Var(places, bounds=(-1.0, 1.0))
    block.add_component(f"z_{name}", z)
    for s, a in places:
        row = statement.rows[s, a] * box.q / box.deflection[s, a]
        block.own.add(z[s, a] == _dot(row, q))
    return {place: z[place] for place in places}


def _dot(row: Floats, variables: Any) -> Any:
    return sum(float(value) * variables[i] for i, value in enumerate(row) if value != 0.0)


def _add_rest(model: Any, statement: Statement, box: Box) -> None:
    """Add static equilibrium, the load windows of the parts, and the rows on the displacement."""
    import pyomo.environ as pyo

    block = model.rest = pyo.Block()
    block.own = pyo.ConstraintList()
    z = _deflections(block, statement, box, "rest")
    block.force = pyo.Var(list(z), bounds=(-1.0, 1.0))
    unit: dict[tuple[int, int], float] = {}
    for s, a in z:
        g = int(statement.group[s])
        stiffness = statement.static[g][:, a]
        size = max(float(stiffness.max()), 1e-12 * float(statement.static[g].max())) or 1.0
        unit[s, a] = size * box.deflection[s, a]
        for j, k in enumerate(stiffness):
            share, y = float(k) / size, model.part[g, j]
            big = 1.0 + share
            block.own.add(block.force[s, a] - share * z[s, a] <= big * (1 - y))
            block.own.add(block.force[s, a] - share * z[s, a] >= -big * (1 - y))
    scale = box.q
    for i in range(len(scale)):
        terms = statement.fixed_static[i] * scale
        pulls = {p: float(statement.parallel[p[0]] * statement.rows[p][i]) * unit[p] for p in z}
        loads = statement.load[:, i]
        size = max(
            float(np.abs(terms).max()), *(abs(v) for v in pulls.values()), float(np.abs(loads).max()), 1e-300
        )
        left = _dot(terms / size, block.q_rest) + sum(
            v / size * block.force[p] for p, v in pulls.items() if v
        )
        right = sum(float(load / size) * model.step[b] for b, load in enumerate(loads))
        if not isinstance(left, (int, float)):
            block.own.add(left == right)
    for s, g in enumerate(statement.group):
        most = box.deflection[s, 2]
        if most > 0.0:
            low, high = (np.clip(w[s] / most, -1.0, 1.0) for w in (statement.lower, statement.upper))
            down, parts = -z[s, 2], range(len(low))
            # Relaxed by a hair: the final test has the last word at the very limit.
            block.own.add(down >= sum(float(low[j] - SLACK) * model.part[int(g), j] for j in parts))
            block.own.add(down <= sum(float(high[j] + SLACK) * model.part[int(g), j] for j in parts))
    for row, least, most in zip(statement.sag_rows, statement.least, statement.most, strict=True):
        for limit, sign in ((most, 1.0), (least, -1.0)):
            if np.isfinite(limit):
                value = _dot(sign * row * scale / abs(limit), block.q_rest)
                block.own.add(value <= sign * float(np.sign(limit)) + SLACK)


def _add_tone(model: Any, block: Any, statement: Statement, tone: Tone, box: Box) -> None:
    """Add the complex equilibrium under one tone, and an octagon about each circle |row q| <= limit."""
    import pyomo.environ as pyo

    block.own = pyo.ConstraintList()
    real, imaginary = (_deflections(block, statement, box, name) for name in ("re", "im"))
    places = list(real)
    block.f_re, block.f_im = pyo.Var(places, bounds=(-1, 1)), pyo.Var(places, bounds=(-1, 1))
    unit: dict[tuple[int, int], float] = {}
    for s, a in places:
        g = int(statement.group[s])
        k = statement.dynamic[g][:, a]
        h = statement.loss[g][:, a] + tone.omega * statement.viscous[g][:, a]
        size = max(float((np.abs(k) + np.abs(h)).max()), 1e-12 * float(statement.dynamic[g].max())) or 1.0
        unit[s, a] = size * box.deflection[s, a]
        for j in range(len(k)):
            e, d, y = float(k[j]) / size, float(h[j]) / size, model.part[g, j]
            big = 1.0 + e + d
            for force, value in (
                (block.f_re[s, a], e * real[s, a] - d * imaginary[s, a]),
                (block.f_im[s, a], e * imaginary[s, a] + d * real[s, a]),
            ):
                block.own.add(force - value <= big * (1 - y))
                block.own.add(force - value >= -big * (1 - y))
    for b in range(len(statement.step_cost)):
        _add_equilibrium(model, block, statement, tone, box, unit, b)
    for row, limit in zip(tone.rows, tone.limits, strict=True):
        if np.isfinite(limit):
            scaled = row * box.q / limit
            for angle in 2.0 * math.pi * np.arange(CORNERS) / CORNERS:
                turned = _dot(math.cos(angle) * scaled, block.q_re) + _dot(
                    math.sin(angle) * scaled, block.q_im
                )
                if not isinstance(turned, (int, float)):
                    block.own.add(turned <= 1.0 + SLACK)


def _add_equilibrium(
    model: Any,
    block: Any,
    statement: Statement,
    tone: Tone,
    box: Box,
    unit: dict[tuple[int, int], float],
    step: int,
) -> None:
    """Add D_0 q + sum b^T F = f at one ballast step: its row binds only where that step is taken."""
    elastic = (statement.fixed_dynamic[step] - tone.omega**2 * statement.mass[step]) * box.q
    lossy = (statement.fixed_hysteretic + tone.omega * statement.fixed_viscous) * box.q
    only = len(statement.step_cost) == 1
    for i in range(len(box.q)):
        pulls = {p: float(statement.parallel[p[0]] * statement.rows[p][i]) * unit[p] for p in unit}
        load = complex(tone.load[i])
        size = max(float(np.abs(elastic[i]).max()), *(abs(v) for v in pulls.values()), abs(load), 1e-300)
        big = 0.0 if only else float(np.abs(elastic[i]).sum() + np.abs(lossy[i]).sum()) / size
        big += 0.0 if only else (sum(abs(v) for v in pulls.values()) + abs(load)) / size
        for q, other, sign, forces, value in (
            (block.q_re, block.q_im, -1.0, block.f_re, load.real),
            (block.q_im, block.q_re, 1.0, block.f_im, load.imag),
        ):
            left = _dot(elastic[i] / size, q) + _dot(sign * lossy[i] / size, other)
            left += sum(v / size * forces[p] for p, v in pulls.items() if v)
            if isinstance(left, (int, float)):
                continue
            if only:
                block.own.add(left == value / size)
            else:
                block.own.add(left - value / size <= big * (1 - model.step[step]))
                block.own.add(left - value / size >= -big * (1 - model.step[step]))
