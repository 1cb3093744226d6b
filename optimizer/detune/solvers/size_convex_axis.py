"""The soft side of one-axis sizing as one convex program, beside the exact answer.

With the natural frequency below all excitation a transmissibility below one is a cone in stiffness, damping
and mass, and so exact; a limit on motion becomes the affine row that holds whatever the damping, and so safe.
The answer is the best of its side where the first alone stand in it, and otherwise a restriction whose
distance to the exact answer of the same side is told.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np

from detune.brief.brief import Brief
from detune.sizing.convex_selection import SoftSideAnswer, soft_side_one_axis
from detune.sizing.made_parts import sizing_of
from detune.sizing.one_axis import SizedDesign
from detune.sizing.statement import STANDARD_GRAVITY, OneAxisProblem, ResponseLimit, excitations, power_form
from detune.solvers.one_axis_statement import OneAxis
from detune.solvers.size_batch import judge
from detune.solvers.size_convex import ConvexSizing
from detune.solvers.size_one_axis import constant_cost, values_of

TWO_PI = 2.0 * math.pi
# The solver's tolerance must not eat up what makes the restriction safe.
ROOM = 1e-6


@dataclass
class _Rows:
    """Cones (Hz, T), affine rows (Hz, force, stroke) and k/m <= `per_mass`; what each of them is worth.

    `motion` are the limits behind affine rows: held whatever the damping, where a cone holds with that of the design.
    """

    cones: list[tuple[float, float]] = field(default_factory=list)
    affine: list[tuple[float, float, float]] = field(default_factory=list)
    per_mass: float = math.inf
    safe: list[str] = field(default_factory=list)
    held: list[str] = field(default_factory=list)
    motion: list[str] = field(default_factory=list)
    left: list[str] = field(default_factory=list)


def soft_side(brief: Brief, axis: OneAxis) -> ConvexSizing | None:
    """The best of the soft side by one convex program; None where the objective is no linear one or it has
    no answer.
    """
    problem = axis.problem
    weights = _weights(problem)
    if weights is None or not excitations(problem):
        return None
    rows = _Rows()
    for limit, label in zip(problem.limits, axis.labels, strict=True):
        _add(rows, limit, label)
    least = 0.0
    if problem.sag is not None:
        least = STANDARD_GRAVITY * problem.sag.dynamic_to_static / problem.sag.most
        if problem.sag.least > 0.0:
            rows.per_mass = STANDARD_GRAVITY * problem.sag.dynamic_to_static / problem.sag.least
    lowest = excitations(problem)[0][0]
    rows.per_mass = min(rows.per_mass, (TWO_PI * lowest * (1.0 - (problem.separation or 0.0))) ** 2)
    frequencies = [f for f, _ in rows.cones] + [f for f, _, _ in rows.affine]
    if not frequencies:
        return None
    added = (0.0, 0.0) if problem.ballast is None else (problem.ballast.least, problem.ballast.most)
    answer = soft_side_one_axis(
        weights,
        problem.stiffness_bounds,
        problem.damping_bounds,
        (problem.mass + added[0], problem.mass + added[1]),
        tuple(rows.cones),
        tuple(rows.affine),
        problem.damping_kind == "loss factor",
        (least, rows.per_mass),
    )
    if answer.status != "solved":
        return None
    return _told(brief, axis, rows, answer)


def _weights(problem: OneAxisProblem) -> tuple[float, float, float] | None:
    """Weights of k, damping and m that are minimised, None where the objective is not linear in them."""
    goal, objective = problem.objective.goal, problem.objective
    viscous = problem.damping_kind == "viscous"
    if goal == "softest":
        return 1.0, 0.0, 0.0
    if goal == "stiffest":
        return -1.0, 0.0, 0.0
    if goal == "least damping" and viscous:
        return 0.0, 1.0, 0.0
    if goal == "least added mass":
        return 0.0, 0.0, 1.0
    linear = viscous or objective.damping_weight == 0.0
    if goal == "weighted sum" and linear and objective.damping_squared_weight == 0.0:
        return objective.stiffness_weight, objective.damping_weight, objective.mass_weight
    return None


def _add(rows: _Rows, limit: ResponseLimit, label: str) -> None:
    """One limit: at its lower end, where on the soft side it is worst, or with the power of the upper end on top."""
    form = power_form(limit)
    low, high = ((TWO_PI * f) ** 2 for f in (limit.lower_frequency, limit.upper_frequency))
    if form.transmission:
        rounded = form.power > 0 and high > low
        level = 1.0 / math.sqrt(form.scale * (high if rounded else low) ** form.power)
        if level >= 1.0:
            rows.left.append(f"{label}: a transmissibility of one or more may pass")
            return
        rows.cones.append((limit.lower_frequency, level * (1.0 - ROOM)))
        rows.safe += [label] if rounded else []
    else:
        # m - k/u >= sqrt(scale) u^(power/2 - 1): the left rises with u, the right falls for powers below two.
        top = high if form.power > 2 else low
        need = math.sqrt(form.scale) * top ** (form.power / 2.0 - 1.0) * low * (1.0 + ROOM)
        if form.mass_proportional:
            rows.per_mass = min(rows.per_mass, low - need)
            rows.affine.append((limit.lower_frequency, 0.0, 1.0))
        else:
            rows.affine.append((limit.lower_frequency, need, 1.0))
        rows.safe.append(label)
        rows.motion.append(label)
    rows.held.append(label)


def _told(brief: Brief, axis: OneAxis, rows: _Rows, answer: SoftSideAnswer) -> ConvexSizing:
    problem = axis.problem
    ratio = answer.damping / (answer.stiffness if problem.damping_kind == "loss factor" else 1.0)
    nan = math.nan
    added = answer.mass - problem.mass
    values = values_of(brief, axis.pieces, SizedDesign(answer.stiffness, ratio, added, nan, nan, nan, (), ()))
    goal = sizing_of(brief).goal
    shift = constant_cost(brief) if goal == "cost" else 0.0
    if goal == "added-mass":
        shift = -problem.mass
    elif goal == "cost":
        shift -= problem.objective.mass_weight * problem.mass
    sense = sizing_of(brief).sense
    stepped = problem.ballast is not None and problem.ballast.step is not None
    exact = not rows.safe and not rows.left and not stepped
    worth = (
        "global among designs with the natural frequency below all excitation: cones and affine rows alone"
        if exact
        else "safe restriction: limits on motion are held whatever the damping; a better design may exist"
        if not stepped
        else "bound with ballast between its steps"
        if not rows.safe and not rows.left
        else "safe restriction, with ballast between its steps"
    )
    judged = judge(brief, values[None])
    # The exact response of the limits that `bounded` bounds; of those on transmissibility where there are no others.
    compared = rows.motion or rows.held
    held = [
        i for i, each in enumerate(judged.requirements) if each.label in compared or _of(each.label, compared)
    ]
    worst = int(np.argmin(judged.margins[:, 0]))
    response = float((1.0 / (1.0 + judged.margins[held, 0])).max()) if held else nan
    return ConvexSizing(
        "below", goal, values, sense * answer.cost + shift, sense * answer.cost + shift, worth,
        "global" if exact else "restriction", tuple(dict.fromkeys(rows.held)),
        (*dict.fromkeys(rows.left), *axis.relaxed), response, _bounded(rows, answer),
        judged.requirements[worst].label if judged.margins[worst, 0] < -1e-6 else None,
        cones=tuple(label for label in dict.fromkeys(rows.held) if label not in rows.motion),
    )  # fmt: skip


def _bounded(rows: _Rows, answer: SoftSideAnswer) -> float:
    """What the affine rows take the largest response over its limit for, without damping; NaN without such rows.

    |X| <= F / (m w^2 - k) whatever the damping, over the limit: the need of the row over what is there.
    """
    shares = [
        need / (answer.mass * (TWO_PI * frequency) ** 2 - answer.stiffness) / (1.0 + ROOM)
        for frequency, need, _ in rows.affine
        if need > 0.0
    ]
    return max(shares, default=math.nan)


def _of(label: str, held: list[str]) -> bool:
    """Whether a requirement, which names its place, is one of the limits held, which do not."""
    return any(
        label.startswith(name.split(" (")[0]) and label.endswith(name[name.index(" (") :]) for name in held
    )
