"""Exact global sizing of one mount axis: stiffness, damping and ballast, every feasible branch named.

At fixed mass the answer is exact (`envelope`, `exchange`). Ballast in steps is solved step by step; continuous
ballast by branch and bound over the mass alone (`ballast_search`), with the gap stated.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from detune.sizing.ballast_search import search_masses
from detune.sizing.envelope import Segment
from detune.sizing.exchange import LinePool, solve_slice
from detune.sizing.slice_objective import separation
from detune.sizing.statement import (
    STANDARD_GRAVITY,
    OneAxisProblem,
    ResponseLimit,
    SizingError,
    excitations,
    power_form,
)
from detune.sizing.worst_frequency import worst

# A limit or bound this close (relative) to its value is called tight.
TIGHT = 1e-6


@dataclass(frozen=True)
class LimitState:
    """One limit at one design: response/limit - 1 inverted to a margin, and where it is worst (Hz)."""

    name: str
    margin: float
    worst_frequency: float


@dataclass(frozen=True)
class SizedDesign:
    """One design: stiffness N/m, damping (N s/m or loss factor), ballast and total mass kg, frequency Hz.

    `objective` is in the goal's own sense (N/m, kg, a ratio, a separation, or the weighted sum).
    """

    stiffness: float
    damping: float
    ballast: float
    mass: float
    natural_frequency: float
    objective: float
    tight: tuple[str, ...]
    limits: tuple[LimitState, ...]


@dataclass(frozen=True)
class Branch:
    """One disjoint feasible region: its name, its interval of stiffness (N/m) and its best design.

    With continuous ballast the interval is that of the slice at the best mass, and branches are told apart
    by where the natural frequency lies among the excitations.
    """

    name: str
    stiffness_interval: tuple[float, float]
    best: SizedDesign


@dataclass(frozen=True)
class OneAxisOutcome:
    """All branches, global best first; empty means that no design meets all limits (proved).

    `bound` is a proven bound on the best objective, `gap` its distance to the best found (absolute);
    `violation` the largest relative excess of (response/limit)^2 over a range.
    """

    branches: tuple[Branch, ...]
    bound: float
    gap: float
    violation: float
    decided: bool

    @property
    def best(self) -> SizedDesign:
        """The global best; raises SizingError when there is none."""
        if not self.branches:
            raise SizingError("no stiffness, damping and ballast within the bounds meets all limits")
        return self.branches[0].best


def ordinal(number: int) -> str:
    """first, second, ... then 11th, 12th, ..."""
    words = ("first", "second", "third", "fourth", "fifth", "sixth", "seventh", "eighth", "ninth", "tenth")
    if number <= len(words):
        return words[number - 1]
    suffix = "th" if number % 100 in (11, 12, 13) else {1: "st", 2: "nd", 3: "rd"}.get(number % 10, "th")
    return f"{number}{suffix}"


def branch_name(low: float, high: float, intervals: tuple[tuple[float, float], ...]) -> str:
    """Name of a range of natural frequencies [low, high] (Hz) by its place among the excitations."""
    if not intervals:
        return "no excitation stated"
    slack = 1e-9
    crossed = [i for i, (a, b) in enumerate(intervals, 1) if low < b * (1 - slack) and high > a * (1 + slack)]
    crossed += [i for i, (a, b) in enumerate(intervals, 1) if a == b and low < a < high and i not in crossed]
    if crossed:
        first, last = min(crossed), max(crossed)
        a, b = intervals[first - 1]
        if first == last:
            inside = low >= a * (1 - slack) and high <= b * (1 + slack)
            return f"{'inside' if inside else 'across'} the {ordinal(first)} excitation"
        return f"across the {ordinal(first)} to the {ordinal(last)} excitation"
    below = sum(1 for _, b in intervals if 0.5 * (low + high) > b)
    if below == 0:
        return "below the first excitation"
    if below == len(intervals):
        return f"above the {ordinal(below)} excitation"
    return f"between the {ordinal(below)} and the {ordinal(below + 1)} excitation"


def margin_of(
    limit: ResponseLimit, problem: OneAxisProblem, stiffness: float, damping: float, mass: float
) -> LimitState:
    """Exact margin limit/response - 1 of one limit at one design, worst over its whole range."""
    gamma = damping**2 if problem.damping_kind == "viscous" else (damping * stiffness) ** 2
    u = [(2 * math.pi * f) ** 2 for f in (limit.lower_frequency, limit.upper_frequency)]
    form = power_form(limit)
    if u[0] == u[1]:
        loss = gamma * u[0] if problem.damping_kind == "viscous" else gamma
        top = form.scale * u[0] ** form.power * (mass**2 if form.mass_proportional else 1.0)
        top *= stiffness**2 + loss if form.transmission else 1.0
        dynamic = (stiffness - mass * u[0]) ** 2 + loss
        margin = math.sqrt(dynamic / top) - 1.0
        return LimitState(limit.name, margin, limit.lower_frequency)
    ratio, at = worst(
        form,
        problem.damping_kind,
        np.array([stiffness]),
        np.array([gamma]),
        mass,
        u[0],
        u[1],
    )
    margin = -1.0 if math.isinf(ratio[0]) else 1.0 / math.sqrt(ratio[0]) - 1.0
    return LimitState(limit.name, margin, math.sqrt(at[0]) / (2 * math.pi))


def describe(
    problem: OneAxisProblem, stiffness: float, damping: float, added: float, objective: float
) -> SizedDesign:
    """Judge one design (SI, `added` the ballast in kg) by the exact equations and name what is tight."""
    mass = problem.mass + added
    states = tuple(margin_of(x, problem, stiffness, damping, mass) for x in problem.limits)
    tight = [s.name for s in states if abs(s.margin) <= TIGHT]
    frequency = math.sqrt(stiffness / mass) / (2 * math.pi)

    def at(value: float, bound: float) -> bool:
        return abs(value - bound) <= TIGHT * max(abs(bound), 1e-12)

    for label, value, (low, high) in (
        ("stiffness", stiffness, problem.stiffness_bounds),
        ("damping", damping, problem.damping_bounds),
    ):
        tight += [f"least {label}"] if at(value, low) else []
        tight += [f"greatest {label}"] if at(value, high) else []
    if problem.ballast is not None:
        tight += ["least ballast"] if abs(added - problem.ballast.least) <= TIGHT * mass else []
        tight += ["greatest ballast"] if abs(added - problem.ballast.most) <= TIGHT * mass else []
    if problem.sag is not None:
        sag = mass * STANDARD_GRAVITY * problem.sag.dynamic_to_static / stiffness
        tight += ["greatest sag"] if at(sag, problem.sag.most) else []
        tight += ["least sag"] if at(sag, problem.sag.least) else []
    if problem.separation is not None:
        value = float(separation(np.array([frequency]), problem.excitation_intervals)[0])
        tight += ["separation"] if abs(value - problem.separation) <= TIGHT else []
    edges = [edge for pair in excitations(problem) for edge in pair]
    tight += (
        ["natural frequency at the edge of an excitation"] if any(at(frequency, x) for x in edges) else []
    )
    return SizedDesign(stiffness, damping, added, mass, frequency, objective, tuple(tight), states)


def _sign(problem: OneAxisProblem) -> float:
    return -1.0 if problem.objective.goal in ("stiffest", "greatest separation") else 1.0


def _branch(problem: OneAxisProblem, pool: LinePool, added: float, segment: Segment) -> Branch:
    scales = pool.scales
    viscous = problem.damping_kind == "viscous"
    # Scaling and back may leave a bound by one unit in the last place.
    softest, stiffest = problem.stiffness_bounds
    stiffness = min(max(segment.stiffness * scales.stiffness, softest), stiffest)
    root = math.sqrt(max(segment.gamma, 0.0) * scales.gamma(viscous))
    damping = root if viscous else root / stiffness
    low, high = problem.damping_bounds
    kilograms = problem.mass + added
    value = _sign(problem) * segment.value
    best = describe(problem, stiffness, min(max(damping, low), high), added, value)
    ends = (max(segment.left * scales.stiffness, softest), min(segment.right * scales.stiffness, stiffest))
    hertz = [math.sqrt(k / kilograms) / (2 * math.pi) for k in ends]
    return Branch(branch_name(hertz[0], hertz[1], excitations(problem)), ends, best)


def _number_islands(branches: list[Branch]) -> list[Branch]:
    """Tell branches of one name and one ballast apart by numbering them from the softest."""
    result = list(branches)
    groups: dict[tuple[str, float], list[int]] = {}
    for i, branch in enumerate(branches):
        groups.setdefault((branch.name, branch.best.ballast), []).append(i)
    for (name, _), members in groups.items():
        if len(members) > 1:
            members.sort(key=lambda i: branches[i].stiffness_interval[0])
            for number, i in enumerate(members, 1):
                result[i] = replace(branches[i], name=f"{name}, island {number}")
    return result


def solve_one_axis(problem: OneAxisProblem) -> OneAxisOutcome:
    """Global optimum of a one-axis sizing problem with every disjoint branch, best branch first.

    Raises SizingError when the problem is stated wrongly. An outcome without branches is a proof that
    nothing within the bounds meets all limits (points of zero width excepted).
    """
    pool = LinePool.of(problem)
    everything = (0.0, math.inf)
    branches: list[Branch] = []
    violation, gap = 0.0, 0.0
    ballast = problem.ballast
    if ballast is None or ballast.step is not None or ballast.least == ballast.most:
        if ballast is None:
            steps: tuple[float, ...] = (0.0,)
        else:
            steps = ballast.values() if ballast.step is not None else (ballast.least,)
        for kilograms in steps:
            mass = (problem.mass + kilograms) / pool.scales.mass()
            answer = solve_slice(pool, mass, everything)
            violation, gap = max(violation, answer.excess), max(gap, answer.gap)
            branches += [_branch(problem, pool, kilograms, s) for s in answer.segments]
        least = min((abs(b.best.objective) for b in branches), default=0.0)
        decided = violation <= 1e-9 and gap <= 1e-7 * max(least, 1e-12)
    else:
        results, gap, decided = search_masses(pool, excitations(problem))
        for mass, segment, excess in results:
            violation = max(violation, excess)
            added = min(max(mass * pool.scales.mass() - problem.mass, ballast.least), ballast.most)
            branches.append(_branch(problem, pool, added, segment))
    sign = _sign(problem)
    branches = _number_islands(branches)
    branches.sort(key=lambda x: (sign * x.best.objective, x.best.mass))
    if not branches:
        return OneAxisOutcome((), sign * math.inf, 0.0, violation, decided)
    return OneAxisOutcome(tuple(branches), branches[0].best.objective - sign * gap, gap, violation, decided)
