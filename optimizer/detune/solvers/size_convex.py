"""Convex answers on one side of the excitation: largest separation and best objective by linear matrix inequalities.

All modes below (or above) every excitation is convex in stiffness and ballast. With the separation alone the
best of a side is a bound for any design of that side, and global where nothing else is limited. With the
response limits that can be held whatever the damping (`size_convex_limits`) it is a restriction that errs on
the safe side: how far, is judged by the exact response at its design and by the best design found otherwise.
Every design here is a start for the search.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.separation import Separation
from detune.brief.brief import Brief
from detune.brief.sizing import SizingUnknown
from detune.problem.build import Problem
from detune.sizing.lmi import (
    ConvexAnswer,
    Side,
    StiffnessModel,
    cheapest,
    damping_free_bound,
    greatest_separation,
)
from detune.sizing.made_parts import made_design, made_table, sizing_of
from detune.solvers.size_batch import batch, judge
from detune.solvers.size_convex_limits import HeldLimits, damping_free_limits

Floats = NDArray[np.float64]
Form = Literal["global", "bound", "restriction"]
LINEAR = ("cost", "stiffness", "added-mass")


@dataclass(frozen=True)
class ConvexSizing:
    """One side's answer: the unknowns (u,), the value reached, the solver's bound on it, and what it is worth.

    `form`: "global" among the designs of its side, "bound" on them (the design itself may miss limits), or
    "restriction", whose design holds the limits `held`. `left`: what only the assessor judges. `response` and
    `bounded` are the largest exact response over its limit and the largest bound over it, of the limits held
    (NaN without). `misses` is the requirement the design misses most, None where it meets the brief.
    `excitation`: its lowest and highest frequency in Hz. `partial`: an unknown is held where it is, and
    nothing is said of its other values. `cones`: those of `held` that hold with the damping of the design only;
    `response` and `bounded` leave them out where there are others.
    """

    side: Side
    what: str
    values: Floats
    value: float
    bound: float
    worth: str
    form: Form = "bound"
    held: tuple[str, ...] = ()
    left: tuple[str, ...] = ()
    response: float = float("nan")
    bounded: float = float("nan")
    misses: str | None = None
    excitation: tuple[float, float] = (0.0, float("inf"))
    partial: bool = False
    cones: tuple[str, ...] = ()


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


def convex_answers(brief: Brief, problem: Problem, middle: Floats) -> tuple[ConvexSizing, ...]:
    """The answers on both sides; `middle` (u,) gives the unknowns the convex forms leave alone."""
    model, columns, ballast = stiffness_model(brief, problem, middle)
    low = min(a for a, _ in problem.intervals)
    high = max(b for _, b in problem.intervals)
    found = []
    sides: tuple[tuple[Side, float], ...] = (("below", low), ("above", high))
    for side, frequency in sides:
        answer = greatest_separation(model, frequency, side)
        if answer.status != "solved" or answer.value < 0.0:
            continue
        place = _Place(brief, problem, model, columns, ballast, middle, side)
        text = f"no design with every mode {side} all excitation is farther from it{place.held}"
        told = place.told("separation", answer, "bound", text)
        found.append(_proven(brief, told, damping_free_limits(brief, problem, side)))
        if sizing_of(brief).goal in LINEAR:
            found += _objective(place, frequency)
    return tuple(replace(each, excitation=(low, high)) for each in found)


def _proven(brief: Brief, told: ConvexSizing, limits: HeldLimits) -> ConvexSizing:
    """A bound whose design meets every requirement is the best of its side."""
    stepped = any(unknown.steps is not None for unknown in sizing_of(brief).unknown)
    if told.misses is not None or stepped or told.partial:
        return told
    worth = f"global among designs with every mode {told.side} all excitation: the bound is reached by this design"
    return replace(told, form="global", worth=worth, left=limits.left)


@dataclass(frozen=True)
class _Place:
    """One side of one brief."""

    brief: Brief
    problem: Problem
    model: StiffnessModel
    columns: list[int]
    ballast: int | None
    middle: Floats
    side: Side

    @property
    def held(self) -> str:
        """What the forms hold that the study leaves open, in words."""
        kinds = [u.kind for u in sizing_of(self.brief).unknown]
        return (
            ", with the ballast at the middle of its range"
            if "ballast" in kinds and self.ballast is None
            else ""
        )

    def told(
        self, what: str, answer: ConvexAnswer, form: Form, worth: str, limits: HeldLimits | None = None,
        constant: float = 0.0, sense: float = 1.0,
    ) -> ConvexSizing:  # fmt: skip
        unknowns = sizing_of(self.brief).unknown
        values = self.middle.copy()
        values[self.columns] = answer.stiffness
        if self.ballast is not None:
            low, high = unknowns[self.ballast].bounds
            # What the solver leaves of nothing is nothing.
            kept = float(answer.ballast[0])
            values[self.ballast] = low + (kept if kept > 1e-6 * (high - low) else 0.0)
        if what == "cost":
            # Damping costs, and what is stated here holds whatever it is.
            for k, unknown in enumerate(unknowns):
                values[k] = unknown.bounds[0] if unknown.kind in ("loss-factor", "viscous") else values[k]
        judged = judge(self.brief, values[None])
        worst = int(np.argmin(judged.margins[:, 0]))
        held = set() if limits is None else set(limits.held)
        rows = [i for i, each in enumerate(judged.requirements) if each.label in held]
        response = float((1.0 / (1.0 + judged.margins[rows, 0])).max()) if rows else float("nan")
        return ConvexSizing(
            self.side, what, values, sense * answer.value + constant, sense * answer.bound + constant, worth, form,
            () if limits is None else limits.held, () if limits is None else limits.left, response,
            float("nan") if limits is None else self._bounded(limits, answer),
            judged.requirements[worst].label if judged.margins[worst, 0] < 0.0 else None, partial=bool(self.held),
        )  # fmt: skip

    def none(self, what: str, limits: HeldLimits) -> ConvexSizing:
        """A restriction that no design meets, told as such: NaN for its values."""
        nan = float("nan")
        worth = (
            f"safe restriction: no design with every mode {self.side} all excitation holds {_counted(limits)} whatever "
            "the damping, which is no proof that none meets them"
        )
        values = np.full(len(self.middle), nan)
        return ConvexSizing(self.side, what, values, nan, nan, worth, "restriction", limits.held, limits.left)

    def _bounded(self, limits: HeldLimits, answer: ConvexAnswer) -> float:
        shares: dict[str, float] = {}
        for limit in limits.limits:
            bound = damping_free_bound(self.model, limit, answer.stiffness, answer.ballast)
            shares[limit.name] = shares.get(limit.name, 0.0) + bound / limit.limit
        return max(shares.values(), default=float("nan"))


def _counted(limits: HeldLimits) -> str:
    many = len(limits.held)
    return f"{many} response limits" if many > 1 else "the response limit"


def asked_separation(brief: Brief) -> float:
    """The separation every mode must have, zero where a mode may be exempted or none is asked for."""
    asked = [a for a in brief.allowables if isinstance(a, Separation)]
    if any(each.exempt_amplification is not None for each in asked):
        return 0.0
    return max((each.limit for each in asked), default=0.0)


def _objective(place: _Place, frequency: float) -> list[ConvexSizing]:
    """The best objective of a side: the bound with responses left out, and the restriction with those held."""
    sizing = sizing_of(place.brief)
    stiffness, kilogram, constant = _weights(place.brief, place.columns, sizing.goal)
    if not (stiffness.any() or (kilogram and place.ballast is not None)):
        return []
    asked, side = asked_separation(place.brief), place.side
    edge = frequency * (1.0 - asked if side == "below" else 1.0 + asked)
    prices = np.array([kilogram]) if place.ballast is not None else np.zeros(0)
    below, above = (edge if side == "below" else None), (edge if side == "above" else None)
    limits = damping_free_limits(place.brief, place.problem, side)
    found = []
    for held in ((), limits.limits) if limits.limits else ((),):
        answer = cheapest(place.model, sizing.sense * stiffness, sizing.sense * prices, below, above, held)
        if answer.status == "infeasible" and held:
            found.append(place.none(sizing.goal, limits))
        if answer.status != "solved":
            continue
        if held:
            text = (
                f"safe restriction: holds {_counted(limits)} whatever the damping, with every mode "
                f"{side} all excitation; a better design may exist"
            )
            found.append(place.told(sizing.goal, answer, "restriction", text, limits, constant, sizing.sense))
            continue
        what = "more than this" if sizing.sense < 0.0 else "less than this"
        text = f"bound: no design with every mode {side} all excitation has {what}, whatever its responses{place.held}"
        told = place.told(sizing.goal, answer, "bound", text, None, constant, sizing.sense)
        found.append(_proven(place.brief, told, limits))
    return found


def stiffness_model(
    brief: Brief, problem: Problem, middle: Floats
) -> tuple[StiffnessModel, list[int], int | None]:
    """The linear model of the stiffness unknowns (columns) and, where mass and stiffness are linear in it,
    the ballast.
    """
    unknowns = sizing_of(brief).unknown
    columns = [k for k, u in enumerate(unknowns) if u.kind == "stiffness"]
    ballast = next((k for k, u in enumerate(unknowns) if u.kind == "ballast"), None)
    patterns = np.array([_pattern(brief, problem, unknowns[k], unknowns) for k in columns])
    made = made_design(brief, middle)
    fixed = _fixed_groups(brief, problem, made.design.mounts, columns)
    lower = np.array([unknowns[k].bounds[0] for k in columns])
    upper = np.array([unknowns[k].bounds[1] for k in columns])
    if ballast is None:
        mass, own = _with_ballast(brief, middle, None)
        none = np.zeros((0, *mass.shape))
        return StiffnessModel(mass, patterns, own + fixed, lower, upper, none, np.zeros(0)), columns, None
    low, high = unknowns[ballast].bounds
    (mass, own), (heavier, more), (heaviest, most) = (
        _with_ballast(brief, middle, (ballast, kg)) for kg in (low, low + 1.0, high)
    )
    per_mass, per_stiffness = heavier - mass, more - own
    span = high - low
    size = np.abs(heaviest).max(), np.abs(own + fixed).max() + np.abs(patterns).max() * upper.max()
    linear = np.abs(mass + span * per_mass - heaviest).max() <= 1e-9 * size[0]
    if not linear or np.abs(own + span * per_stiffness - most).max() > 1e-9 * size[1]:
        # The forms are linear in the ballast or leave it where it is.
        mass, own = _with_ballast(brief, middle, None)
        none = np.zeros((0, *mass.shape))
        return StiffnessModel(mass, patterns, own + fixed, lower, upper, none, np.zeros(0)), columns, None
    return (
        StiffnessModel(
            mass, patterns, own + fixed, lower, upper, per_mass[None], np.array([span]), per_stiffness[None]
        ),
        columns,
        ballast,
    )


def _with_ballast(brief: Brief, middle: Floats, at: tuple[int, float] | None) -> tuple[Floats, Floats]:
    """Mass, and stiffness that is not the parts', with one unknown put to a value."""
    values = middle.copy()
    if at is not None:
        values[at[0]] = at[1]
    model = batch(brief, [made_design(brief, values)])[0].model
    own = model.geometric[0] if model.with_gravity_stiffness else np.zeros_like(model.fixed_dynamic)
    return model.mass[0], model.fixed_dynamic + own


def _axes(
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
    weights = np.array(_axes(brief, unknown, unknowns))
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
                covered += np.array(_axes(brief, unknowns[k], unknowns)) > 0.0
        own = np.array([k or 0.0 for k in mounts[station.group].stiffness_dynamic]) * (covered == 0.0)
        total += station.parallel * station.rows.T @ (own[:, None] * station.rows)
    return total


def _weights(brief: Brief, columns: list[int], goal: str) -> tuple[Floats, float, float]:
    """What each N/m of the stiffness unknowns and each kg of ballast adds to the goal, and what it is besides.

    Of the cost the constant holds damping at its least, so that the sum stays a lower bound.
    """
    unknowns = sizing_of(brief).unknown
    pieces = {g: sum(s.parallel for s in brief.stations if s.group == g) for g in brief.groups}
    least = sum(unknown.bounds[0] for unknown in unknowns if unknown.kind == "ballast")
    axial = np.array([float(unknowns[k].axis == "axial") * pieces[str(unknowns[k].group)] for k in columns])
    if goal == "added-mass":
        return np.zeros(len(columns)), 1.0, least
    if goal == "stiffness":
        return axial, 0.0, sum(pieces[g] * (made_table(brief, g).stiffness or 0.0) for g in brief.groups)
    price = np.array([made_table(brief, str(unknowns[k].group)).cost_per_stiffness / 1e3 for k in columns])
    kilogram = 0.0 if brief.ballast is None else brief.ballast.cost_per_kg
    constant = kilogram * least
    for group in brief.groups:
        made = made_table(brief, group)
        own = {u.kind: u.bounds[0] for u in unknowns if u.group == group}
        each = made.cost + made.cost_per_loss_factor * own.get("loss-factor", made.loss_factor or 0.0)
        each += made.cost_per_damping * own.get("viscous", made.viscous or 0.0)
        each += made.cost_per_stiffness / 1e3 * (made.stiffness or 0.0)
        constant += pieces[group] * each
    return axial * price, kilogram, constant
