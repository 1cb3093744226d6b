"""Exact global sizing of one mount axis: stiffness, damping and ballast, every feasible branch named.

At fixed mass the answer is exact (`slice_envelope`, `slice_exchange`). Ballast in steps is solved step by
step; continuous ballast by branch and bound over the mass alone (`ballast_search`), with the gap stated.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

from detune.sizing.ballast_search import search_masses
from detune.sizing.slice_kernels import Form, Segment, Slices
from detune.sizing.statement import STANDARD_GRAVITY, OneAxisProblem, SizingError

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
    inside = (low * (1 + slack), high * (1 - slack))
    crossed += [
        i
        for i, (a, b) in enumerate(intervals, 1)
        if a == b and inside[0] < a < inside[1] and i not in crossed
    ]
    if crossed:
        first, last = min(crossed), max(crossed)
        a, b = intervals[first - 1]
        if first == last:
            within = low >= a * (1 - slack) and high <= b * (1 + slack)
            return f"{'inside' if within else 'across'} the {ordinal(first)} excitation"
        return f"across the {ordinal(first)} to the {ordinal(last)} excitation"
    below = sum(1 for _, b in intervals if 0.5 * (low + high) > b)
    if below == 0:
        return "below the first excitation"
    if below == len(intervals):
        return f"above the {ordinal(below)} excitation"
    return f"between the {ordinal(below)} and the {ordinal(below + 1)} excitation"


def apart(frequency: float, intervals: tuple[tuple[float, float], ...]) -> float:
    """Least separation of a natural frequency from all excitation intervals (Hz both).

    f/f_b - 1 above and 1 - f/f_a below an interval; inside it the larger of the two, which is negative.
    """
    return min((max(frequency / b - 1.0, 1.0 - frequency / a) for a, b in intervals), default=math.inf)


def describe(slices: Slices, stiffness: float, damping: float, added: float, objective: float) -> SizedDesign:
    """Judge one design (SI, `added` the ballast in kg) by the exact equations and name what is tight."""
    problem = slices.problem
    mass = problem.mass + added
    margins = slices.margins(mass, stiffness, damping)
    states = tuple(
        LimitState(limit.name, margin, frequency)
        for limit, (margin, frequency) in zip(problem.limits, margins, strict=True)
    )
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
        value = apart(frequency, problem.excitation_intervals)
        tight += ["separation"] if abs(value - problem.separation) <= TIGHT else []
    edges = [edge for pair in slices.excitations for edge in pair]
    tight += (
        ["natural frequency at the edge of an excitation"] if any(at(frequency, x) for x in edges) else []
    )
    return SizedDesign(stiffness, damping, added, mass, frequency, objective, tuple(tight), states)


def _sign(problem: OneAxisProblem) -> float:
    return -1.0 if problem.objective.goal in ("stiffest", "greatest separation") else 1.0


def _branch(
    slices: Slices, added: float, segment: Segment, place: tuple[float, float] | None = None
) -> Branch:
    """A segment as a branch, named by its own natural frequencies or by those of a position (k/m, scaled)."""
    problem = slices.problem
    # Scaling and back may leave a bound by one unit in the last place.
    softest, stiffest = problem.stiffness_bounds
    stiffness = min(max(segment.stiffness, softest), stiffest)
    low, high = problem.damping_bounds
    kilograms = problem.mass + added
    value = _sign(problem) * segment.value
    best = describe(slices, stiffness, min(max(segment.damping, low), high), added, value)
    ends = (max(segment.left, softest), min(segment.right, stiffest))
    if place is None:
        hertz = [math.sqrt(k / kilograms) / (2 * math.pi) for k in ends]
    else:
        hertz = [math.sqrt(each / slices.scales.to_u) for each in place]
    return Branch(branch_name(hertz[0], hertz[1], slices.excitations), ends, best)


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


def _steps(problem: OneAxisProblem) -> tuple[float, ...] | None:
    """The ballasts (kg) to be tried one by one; None: ballast is continuous."""
    ballast = problem.ballast
    if ballast is None:
        return (0.0,)
    if ballast.step is not None:
        return ballast.values()
    return (ballast.least,) if ballast.least == ballast.most else None


@dataclass(frozen=True)
class _Solved:
    """Segments of every ballast that has any, as (ballast in kg, segment, position or None), and what is known."""

    found: tuple[tuple[float, Segment, tuple[float, float] | None], ...]
    violation: float
    gap: float
    decided: bool

    @property
    def least(self) -> float:
        """The least goal; infinite where there is no segment."""
        return min((segment.value for _, segment, _ in self.found), default=math.inf)


def _solved(slices: Slices, only_best: bool) -> _Solved:
    problem = slices.problem
    steps = _steps(problem)
    if steps is None:
        results, gap, decided = search_masses(slices, slices.excitations, only_best)
        assert problem.ballast is not None
        low, high = problem.ballast.least, problem.ballast.most
        several = [
            (min(max(each.mass - problem.mass, low), high), each.segment, each.place) for each in results
        ]
        violation = max((each.excess for each in results), default=0.0)
        return _Solved(tuple(several), violation, gap, decided)
    found: list[tuple[float, Segment, tuple[float, float] | None]] = []
    violation, gap, decided = 0.0, 0.0, True
    for kilograms in steps:
        answer = slices.at(problem.mass + kilograms)
        violation, gap = max(violation, answer.excess), max(gap, answer.gap)
        decided = decided and answer.decided
        found += [(kilograms, segment, None) for segment in answer.segments]
    least = min((abs(segment.value) for _, segment, _ in found), default=0.0)
    decided = decided and violation <= 1e-9 and gap <= 1e-7 * max(least, 1e-12)
    return _Solved(tuple(found), violation, gap, decided)


def _told(slices: Slices, solved: _Solved, only_best: bool) -> OneAxisOutcome:
    sign = _sign(slices.problem)
    found = solved.found
    if only_best and found:
        found = (min(found, key=lambda each: (each[1].value, each[0])),)
    branches = _number_islands([_branch(slices, *each) for each in found])
    branches.sort(key=lambda x: (sign * x.best.objective, x.best.mass))
    if not branches:
        return OneAxisOutcome((), sign * math.inf, 0.0, solved.violation, solved.decided)
    bound = branches[0].best.objective - sign * solved.gap
    return OneAxisOutcome(tuple(branches), bound, solved.gap, solved.violation, solved.decided)


def best_count(
    problem: OneAxisProblem, least: int, most: int, cost: float, form: Form = "auto"
) -> tuple[int, OneAxisOutcome] | None:
    """The best whole number of equal parts side by side, each of them adding `cost`, and its best design.

    The bounds of stiffness and viscous damping are those of one part. Every number is solved; None where no number of
    them has a design.
    """
    slices = Slices(_side_by_side(problem, most), form)
    best: tuple[float, OneAxisProblem, int, _Solved] | None = None
    for count in range(least, most + 1):
        # Limits, and with them the question and its lines, do not know the number of parts.
        slices.problem = _side_by_side(problem, count)
        solved = _solved(slices, only_best=True)
        total = solved.least + cost * count
        if solved.found and (best is None or total < best[0]):
            best = total, slices.problem, count, solved
    if best is None:
        return None
    slices.problem = best[1]
    return best[2], _told(slices, best[3], only_best=True)


def _side_by_side(problem: OneAxisProblem, count: int) -> OneAxisProblem:
    softest, stiffest = problem.stiffness_bounds
    low, high = problem.damping_bounds
    share = count if problem.damping_kind == "viscous" else 1
    return replace(
        problem,
        stiffness_bounds=(softest * count, stiffest * count),
        damping_bounds=(low * share, high * share),
    )


def solve_one_axis(problem: OneAxisProblem, form: Form = "auto", only_best: bool = False) -> OneAxisOutcome:
    """Global optimum of a one-axis sizing problem with every disjoint branch, best branch first.

    `form`: interpreted ("plain"), "compiled", or what serves the number of problems solved so far. `only_best` leaves
    out the other branches. Raises SizingError when the problem is stated wrongly. A decided outcome without branches is
    a proof that nothing within the bounds meets all limits (points of zero width excepted).
    """
    slices = Slices(problem, form)
    return _told(slices, _solved(slices, only_best), only_best)
