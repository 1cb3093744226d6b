"""Convex answers on one side of the excitation: largest separation and least cost by linear matrix inequalities.

All modes below (or above) every excitation is convex in stiffness and ballast, so these answers are global among the
designs of that side. Response limits are not in them: the least cost of a side is a lower bound for any design of that
side which meets the brief, and the design itself is only judged by the assessor.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.brief.sizing import SizingUnknown
from detune.problem.build import Problem
from detune.sizing.lmi import ConvexAnswer, StiffnessModel, cheapest, greatest_separation
from detune.sizing.made_parts import made_design, made_table, sizing_of
from detune.solvers.size_batch import batch

Floats = NDArray[np.float64]
Side = Literal["below", "above"]


@dataclass(frozen=True)
class ConvexSizing:
    """One side's answer: the unknowns (u,), the value reached, the solver's bound on it, and what it is worth."""

    side: Side
    what: Literal["separation", "cost"]
    values: Floats
    value: float
    bound: float
    worth: str


def why_not_convex(brief: Brief, problem: Problem) -> str | None:
    """Why the convex forms do not hold the brief's unknowns, None if they do."""
    kinds = {unknown.kind for unknown in sizing_of(brief).unknown}
    if not kinds <= {"stiffness", "loss-factor", "viscous", "ballast"} or "stiffness" not in kinds:
        return "absorbers or positions are unknown, or no stiffness is"
    if not problem.intervals:
        return "nothing excites the machine steadily"
    if brief.states:
        return "conditions are judged in several states"
    return None


def convex_answers(
    brief: Brief, problem: Problem, middle: Floats, separation: float
) -> tuple[ConvexSizing, ...]:
    """The answers on both sides; `middle` (u,) gives the unknowns the convex forms leave alone.

    `separation` is what the brief asks for (0 where it asks none); the cost is the least one with it.
    """
    model, columns, ballast = stiffness_model(brief, problem, middle)
    low = min(a for a, _ in problem.intervals)
    high = max(b for _, b in problem.intervals)
    found = []
    sides: tuple[tuple[Side, float], ...] = (("below", low), ("above", high))
    for side, frequency in sides:
        answer = greatest_separation(model, frequency, side)
        if answer.status == "solved" and answer.value >= 0.0:
            worth = f"global among designs with every mode {side} all excitation"
            found.append(_told(side, "separation", answer, middle, columns, ballast, worth))
        elif answer.status != "solved":
            continue
        stiffness, kilogram, constant = _prices(brief, columns, middle)
        if not (stiffness.any() or kilogram):
            continue
        edge = frequency * (1.0 - separation if side == "below" else 1.0 + separation)
        prices = np.array([kilogram]) if ballast is not None else np.zeros(0)
        least = cheapest(
            model, stiffness, prices,
            modes_below=edge if side == "below" else None, modes_above=edge if side == "above" else None,
        )  # fmt: skip
        if least.status == "solved":
            worth = (
                f"lower bound on the cost of any design with every mode {side} all excitation, response limits left "
                "out"
            )
            told = _told(side, "cost", least, middle, columns, ballast, worth)
            shift = constant
            found.append(
                ConvexSizing(told.side, "cost", told.values, told.value + shift, told.bound + shift, worth)
            )
    return tuple(found)


def stiffness_model(
    brief: Brief, problem: Problem, middle: Floats
) -> tuple[StiffnessModel, list[int], int | None]:
    """The linear model of the stiffness unknowns (columns) and, where gravity's stiffness allows, the ballast."""
    unknowns = sizing_of(brief).unknown
    columns = [k for k, u in enumerate(unknowns) if u.kind == "stiffness"]
    ballast = next((k for k, u in enumerate(unknowns) if u.kind == "ballast"), None)
    patterns = np.array([_pattern(brief, problem, unknowns[k], unknowns) for k in columns])
    made = made_design(brief, middle)
    at, _ = batch(brief, [made])
    model = at.model
    own = model.geometric[0] if model.with_gravity_stiffness else np.zeros_like(model.fixed_dynamic)
    if ballast is not None and np.abs(own).max() > 0.0:
        # Gravity's stiffness grows with the ballast; the linear forms hold it where it is.
        ballast = None
    constant = model.fixed_dynamic + own + _fixed_groups(brief, problem, made.design.mounts, columns)
    mass, extra, most = model.mass[0], np.zeros((0, *model.mass[0].shape)), np.zeros(0)
    if ballast is not None:
        low, high = unknowns[ballast].bounds
        mass, heavier = _masses(brief, middle, ballast, (low, low + 1.0))
        extra, most = (heavier - mass)[None], np.array([high - low])
    lower = np.array([unknowns[k].bounds[0] for k in columns])
    upper = np.array([unknowns[k].bounds[1] for k in columns])
    return StiffnessModel(mass, patterns, constant, lower, upper, extra, most), columns, ballast


def _masses(
    brief: Brief, middle: Floats, column: int, kilograms: tuple[float, float]
) -> tuple[Floats, Floats]:
    found = []
    for amount in kilograms:
        values = middle.copy()
        values[column] = amount
        found.append(batch(brief, [made_design(brief, values)])[0].model.mass[0])
    return found[0], found[1]


def _weights(
    brief: Brief, unknown: SizingUnknown, unknowns: tuple[SizingUnknown, ...]
) -> tuple[float, float, float]:
    """How much of an unknown's stiffness each local axis has."""
    if unknown.axis == "axial":
        own = {u.axis for u in unknowns if u.group == unknown.group and u.kind == "stiffness"}
        ratio = made_table(brief, str(unknown.group)).lateral_ratio or 0.0
        free = "lateral" in own
        return (0.0 if free or "x" in own else ratio, 0.0 if free or "y" in own else ratio, 1.0)
    return {"lateral": (1.0, 1.0, 0.0), "x": (1.0, 0.0, 0.0), "y": (0.0, 1.0, 0.0)}[str(unknown.axis)]


def _pattern(
    brief: Brief, problem: Problem, unknown: SizingUnknown, unknowns: tuple[SizingUnknown, ...]
) -> Floats:
    weights = np.array(_weights(brief, unknown, unknowns))
    n = problem.model.frame.count
    total = np.zeros((n, n))
    for station in problem.model.stations:
        if brief.groups[station.group] == unknown.group:
            total += station.parallel * station.rows.T @ (weights[:, None] * station.rows)
    return total


def _fixed_groups(brief: Brief, problem: Problem, mounts: tuple, columns: list[int]) -> Floats:  # type: ignore[type-arg]
    """Stiffness of groups, or of axes of groups, that no unknown covers."""
    unknowns = sizing_of(brief).unknown
    n = problem.model.frame.count
    total = np.zeros((n, n))
    for station in problem.model.stations:
        group = brief.groups[station.group]
        covered = np.zeros(3)
        for k in columns:
            if unknowns[k].group == group:
                covered += np.array(_weights(brief, unknowns[k], unknowns)) > 0.0
        own = np.array([k or 0.0 for k in mounts[station.group].stiffness_dynamic]) * (covered == 0.0)
        total += station.parallel * station.rows.T @ (own[:, None] * station.rows)
    return total


def _prices(brief: Brief, columns: list[int], middle: Floats) -> tuple[Floats, float, float]:
    """Cost per N/m of each stiffness unknown, per kg of ballast, and what is the same whatever they are.

    The constant holds damping at its least, so that the sum stays a lower bound.
    """
    unknowns = sizing_of(brief).unknown
    pieces = {g: sum(s.parallel for s in brief.stations if s.group == g) for g in brief.groups}
    stiffness = np.array([
        pieces[str(unknowns[k].group)] * made_table(brief, str(unknowns[k].group)).cost_per_stiffness / 1e3
        if unknowns[k].axis == "axial" else 0.0
        for k in columns
    ])  # fmt: skip
    kilogram = 0.0 if brief.ballast is None else brief.ballast.cost_per_kg
    constant = 0.0
    for group in brief.groups:
        made = made_table(brief, group)
        least = {
            u.kind: u.bounds[0] for u in unknowns if u.group == group and u.kind in ("loss-factor", "viscous")
        }
        each = made.cost + made.cost_per_loss_factor * least.get("loss-factor", made.loss_factor or 0.0)
        each += made.cost_per_damping * least.get("viscous", made.viscous or 0.0)
        each += made.cost_per_stiffness / 1e3 * (made.stiffness or 0.0)
        constant += pieces[group] * each
    for unknown in unknowns:
        if unknown.kind == "ballast":
            constant += kilogram * unknown.bounds[0]
    return stiffness, kilogram, constant


def _told(
    side: Side,
    what: Literal["separation", "cost"],
    answer: ConvexAnswer,
    middle: Floats,
    columns: list[int],
    ballast: int | None,
    worth: str,
) -> ConvexSizing:
    values = middle.copy()
    values[columns] = answer.stiffness
    if ballast is not None:
        values[ballast] = middle[ballast] * 0.0 + answer.ballast[0]
    return ConvexSizing(side, what, values, answer.value, answer.bound, worth)
