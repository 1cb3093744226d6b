"""Sizing a study: unknowns to an assessed design made to order, then real parts, map, front and specification."""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.brief.finding import Finding
from detune.ground.errors import BriefError
from detune.problem.build import Problem, build
from detune.response.assess import assess
from detune.response.assessment import Assessment
from detune.sizing.made_parts import bounds, made_design, sizing_of
from detune.solvers import size_many_starts, size_one_axis
from detune.solvers.size_absorber import (
    ClosedForm,
    Detuned,
    ScatteredAbsorber,
    absorber_starts,
    closed_forms,
    detuning,
    scattered,
)
from detune.solvers.size_batch import batch, judge
from detune.solvers.size_conflict import Conflict, conflict
from detune.solvers.size_convex import ConvexSizing, convex_answers, why_not_convex
from detune.solvers.size_convex_axis import soft_side
from detune.solvers.size_convex_parts import PartsBound, parts_bounds
from detune.solvers.size_front import SizingFront, one_axis_front
from detune.solvers.size_many_starts import ManyStarts
from detune.solvers.size_map import SizingMap
from detune.solvers.size_nearest import Nearest, nearest_parts
from detune.solvers.size_one_axis import OneAxisSizing
from detune.solvers.size_second_opinion import SizingOpinion, at_best_count, second_opinion
from detune.solvers.size_specification import (
    PurchaseSpecification,
    brief_with_room,
    specify,
    why_no_specification,
)
from detune.solvers.size_whole import on_steps, step_of
from detune.study.load import Study
from detune.study.over_scatter import OverScatter
from detune.study.size_cautions import at_ends, not_fixed
from detune.study.size_drawn import map_of
from detune.study.size_scatter import RealOverScatter, SizedOverScatter, held_over_scatter
from detune.study.size_sense import check_sense, faults_of, one_axis_only

Floats = NDArray[np.float64]
# A gap of the proof above this share of the objective is told.
GAP = 1e-5
# Shares of room inside the limits that the design of a specification is tried with.
ROOMS = (0.2, 0.1, 0.05, 0.02)
# Points of the front from which real parts are looked for as well.
ANCHORS = 6


@dataclass(frozen=True)
class SizedBest:
    """The best design of one branch or of the local searches: the unknowns (u,), objective and its assessment.

    `bound` is what stopped an unknown at the end of its own range, in words, where nothing else did.
    """

    name: str
    values: Floats
    objective: float
    assessment: Assessment
    tight: tuple[str, ...]


@dataclass(frozen=True)
class SizingResult:
    """What a sizing study came to.

    `branches` are all assessed, best first. `exact` holds the one-axis answer, `searches` that of many starts.
    `worth` says in words what the best is worth; `bound` is a proven bound on the objective, None where there is none.
    `over` judges the best over the scatter that the study states, None where it states none; `near_over` each of the
    nearest real designs. `no_convex`: why no convex form holds the unknowns of a search.
    """

    study: Study
    method: str
    why_method: str
    worth: str
    branches: tuple[SizedBest, ...]
    bound: float | None
    exact: OneAxisSizing | None
    searches: ManyStarts | None
    nearest: Nearest | None
    map: SizingMap | None
    front: SizingFront | None
    convex: tuple[ConvexSizing, ...]
    specification: PurchaseSpecification | str | None
    detuned: tuple[Detuned, ...]
    cautions: tuple[str, ...]
    seconds: float
    opinion: SizingOpinion | None = None
    parts_bounds: tuple[PartsBound, ...] = ()
    closed_forms: tuple[ClosedForm, ...] = ()
    scattered: tuple[ScatteredAbsorber, ...] = ()
    over: SizedOverScatter | None = None
    conflict: Conflict | None = None
    near_over: tuple[OverScatter | None, ...] = ()
    no_convex: str | None = None

    @property
    def answer(self) -> SizedBest | None:
        """The best design that the assessor says meets the brief, None where there is none."""
        return next((branch for branch in self.branches if branch.assessment.meets), None)

    @property
    def exit_code(self) -> int:
        """0 a design meets the brief, over its scatter where that is an interval; 3 that is open; 1 none does."""
        if self.answer is None:
            return 1 if self.exact is None or self.exact.proven else 3
        if self.over is None or self.over.judged.verdict is None or self.over.judged.proven:
            return 0
        return 1 if self.over.judged.proven is False else 3


def size_study(study: Study, drawings: bool = True, opinion_limit: float | None = None) -> SizingResult:
    """Return the result of sizing a study. Raises BriefError where it states no sizing, or one without sense.

    `opinion_limit` (s) asks for a second opinion on one axis, with that hard time limit; elsewhere it is refused.
    """
    started = time.perf_counter()
    brief = study.brief
    if brief.sizing is None:
        expected = "a [sizing] table with its unknowns"
        raise BriefError(faults_of(study, (Finding(("sizing",), "", expected),)))
    sizing = brief.sizing
    cautions = check_sense(study)
    low, _ = bounds(brief)
    problem, _ = batch(brief, [made_design(brief, low)])
    solved = size_one_axis.solve(brief, problem)
    convex: tuple[ConvexSizing, ...] = ()
    searches: ManyStarts | None = None
    exact: OneAxisSizing | None = None
    opinion: SizingOpinion | None = None
    fighting: Conflict | None = None
    if isinstance(solved, str):
        one_axis_only(study, solved, opinion_limit is not None)
        why = f"{solved}, so the exact one-axis method does not apply"
        convex = _convex(study, problem)
        middle = size_many_starts.Coordinates(brief).outward(np.full(len(sizing.unknown), 0.5))
        starts = (answer.values for answer in convex if np.isfinite(answer.value))
        first = (*starts, *_best_two(study, absorber_starts(brief, middle)))
        searches = _searched(study, first)
        branches, worth, bound = _of_searches(study, searches), searches.worth, None
    else:
        exact, bound = solved, solved.bound
        why = "one mass on one stiffness and one damping: every feasible branch is found"
        branches = _of_branches(study, exact)
        worth = _worth(exact, branches)
        fighting = None if branches else conflict(brief, problem)
        if opinion_limit is not None:
            opinion = second_opinion(brief, problem, exact, opinion_limit)
            worth = opinion.worth(worth)
        if exact.branches and exact.statement.relaxed and not branches[0].assessment.meets:
            # The relaxation's best misses what it left out: go on by local searches, with its bound.
            searches = _searched(study, tuple(branch.values for branch in exact.branches))
            branches = tuple(sorted((*_of_searches(study, searches), *branches), key=_rank(sizing.sense)))
            worth = f"{searches.worth}; the relaxed problem bounds it"
    found = SizingResult(
        study, "one axis, exact" if searches is None else "many starts", why, worth, branches, bound, exact, searches,
        None, None, None, convex, None, (), cautions, 0.0, opinion, conflict=fighting,
    )  # fmt: skip
    if isinstance(solved, str):
        found = replace(found, no_convex=why_not_convex(brief, problem))
    return _with_rest(_over_the_scatter(found), problem, drawings, started)


def _over_the_scatter(found: SizingResult) -> SizingResult:
    """The result with its best design judged over the scatter, and before it one with room where that is needed."""
    best, brief = found.answer, found.study.brief
    if best is None:
        return found
    exact = found.searches is None
    over = held_over_scatter(brief, best.values, lambda tight, near: _sized_again(tight, near, exact))
    if over is None or not over.changed:
        return replace(found, over=over)
    tight = tuple(row.label for row in over.assessment.margins if abs(row.margin) < 1e-3)
    first = SizedBest("with room for the scatter", over.values, over.objective, over.assessment, tight)
    worth = "sized again with room for the scatter; not proven the best of all that hold over it"
    return replace(found, branches=(first, *found.branches), over=over, bound=None, worth=worth)


def _worth(exact: OneAxisSizing, branches: tuple[SizedBest, ...]) -> str:
    """What the first branch that meets the brief is worth, in words."""
    if not branches:
        none = "no design within the bounds meets the limits"
        return f"global: proven that {none}" if exact.proven else f"none found, and not proven that {none}"
    if not branches[0].assessment.meets:
        return f"best of the branches the assessor accepts; nothing is better than {branches[0].objective:.6g} (proven)"
    if exact.gap > GAP * max(abs(branches[0].objective), 1e-12):
        return f"within {exact.gap:.2g} of the global best (proven)"
    return "global: proven best of all feasible branches"


def _best_two(study: Study, points: tuple[Floats, ...]) -> tuple[Floats, ...]:
    """The two closed-form starts with the least worst response."""
    if not points:
        return ()
    worst = judge(study.brief, np.array(points)).objectives["worst-response"]
    return tuple(points[k] for k in np.argsort(worst, kind="stable")[:2])


def _rank(sense: float) -> Callable[[SizedBest], tuple[bool, float]]:
    return lambda branch: (not branch.assessment.meets, sense * branch.objective)


def _with_rest(found: SizingResult, problem: Problem, drawings: bool, started: float) -> SizingResult:
    best = found.answer
    # What is drawn and specified holds the number of parts side by side where the best has it.
    brief = at_best_count(found.study.brief, None if best is None else best.values)
    study = replace(found.study, brief=brief)
    sizing = sizing_of(brief)
    cautions = list(found.cautions)
    near = plan = front = None
    near_over: tuple[OverScatter | None, ...] = ()
    sides: tuple[PartsBound, ...] = ()
    convex = found.convex
    real: Problem | None = None
    if best is not None:
        cautions += at_ends(found.study.brief, best.values)
        cautions += (
            () if found.searches is None else not_fixed(found.study.brief, best.values, best.objective)
        )
        if drawings and sizing.trade:
            front = _front(replace(found, study=study), best)
            if found.searches is not None and any(step_of(unknown) is not None for unknown in sizing.unknown):
                cautions.append("the front takes ballast as continuous: its points need not stand on a step")
        if brief.choices:
            real = build(made_design(brief, best.values).brief, study.catalogs)
            near, near_over = _nearest(found, best, brief, real, front)
            sides = parts_bounds(real) if drawings else ()
    around = best or (found.branches[0] if found.branches else None)
    axis = None if found.exact is None else found.exact.statement
    if drawings and axis is not None and best is not None:
        soft = soft_side(brief, axis)
        convex = convex if soft is None else (soft,)
    if drawings and sizing.map:
        plan = map_of(study, None if around is None else around.values, axis, best is not None, real)
    plan_of_purchase = None
    if best is not None and sizing.specification:
        plan_of_purchase = _specified(replace(found, study=study), best)
    return replace(
        found,
        specification=plan_of_purchase,
        detuned=() if best is None else detuning(brief, best.values),
        closed_forms=() if best is None else closed_forms(brief, best.values),
        scattered=() if best is None else scattered(brief, best.values),
        nearest=near,
        near_over=near_over,
        map=plan,
        front=front,
        convex=convex,
        parts_bounds=sides,
        worth=with_convex(found, convex),
        cautions=tuple(cautions),
        seconds=time.perf_counter() - started,
    )


def _nearest(
    found: SizingResult, best: SizedBest, brief: Brief, real: Problem, front: SizingFront | None
) -> tuple[Nearest, tuple[OverScatter | None, ...]]:
    """The nearest of the `real` designs to answer, other branches and points of the front, each over the scatter."""
    sizing = sizing_of(brief)
    ideals = [
        best.values,
        *(b.values for b in found.branches if b.assessment.meets and b is not best),
    ][:3]
    ideals = [values for values in ideals if at_best_count(found.study.brief, values) == brief]
    if front is not None and front.points:
        chosen = np.linspace(0, len(front.points) - 1, ANCHORS).round().astype(int)
        ideals += [front.points[k].values for k in dict.fromkeys(chosen.tolist())]
    holds = RealOverScatter(real)
    there = made_design(brief, best.values).brief
    near = nearest_parts(there, ideals, real, sizing.goal, sizing.sense, wanted=holds)
    return near, tuple(holds.of(design.assessment.design) for design in near.designs)


def with_convex(found: SizingResult, convex: tuple[ConvexSizing, ...]) -> str:
    """What the answer of local searches is worth beside the convex bound of its own side."""
    best, sizing = found.answer, sizing_of(found.study.brief)
    if best is None or found.searches is None or found.exact is not None:
        return found.worth
    frequencies = [mode.frequency for mode in best.assessment.modes]
    for answer in convex:
        low, high = answer.excitation
        here = max(frequencies) < low if answer.side == "below" else min(frequencies) > high
        if not here or answer.what != sizing.goal or answer.form == "restriction" or answer.partial:
            continue
        gap = sizing.sense * (best.objective - answer.bound) / max(abs(best.objective), 1e-12)
        side = f"designs with every mode {answer.side} all excitation"
        if gap <= GAP:
            return f"global among {side}, by the convex bound; of other designs {found.worth}"
        return f"{found.worth}; at most {100.0 * gap:.2g} % from the global best among {side} (convex bound)"
    return found.worth


def _front(found: SizingResult, best: SizedBest) -> SizingFront:
    brief = found.study.brief
    if found.exact is not None and found.searches is None:
        return one_axis_front(brief, found.exact.statement, sizing_of(brief).front_points)
    from detune.solvers.size_front_searched import searched_front

    return searched_front(brief, best.values)


def _searched(study: Study, first: tuple[Floats, ...]) -> ManyStarts:
    sizing = sizing_of(study.brief)
    found = size_many_starts.solve(
        study.brief, sizing.goal, sizing.sense, starts=sizing.starts, seed=sizing.seed, first=first
    )
    return on_steps(study.brief, found)


def _convex(study: Study, problem: Problem) -> tuple[ConvexSizing, ...]:
    """Convex answers of both sides, which also serve as starts; none where the forms do not hold the unknowns."""
    brief = study.brief
    if why_not_convex(brief, problem) is not None:
        return ()
    middle = size_many_starts.Coordinates(brief).outward(np.full(len(sizing_of(brief).unknown), 0.5))
    return convex_answers(brief, problem, middle)


def _sized_again(tight: Brief, near: Floats, exact: bool) -> Floats | None:
    """The values (u,) that a brief with tighter limits comes to, searched for from `near`; None where none is found."""
    sizing = sizing_of(tight)
    if exact:
        problem, _ = batch(tight, [made_design(tight, near)])
        solved = size_one_axis.solve(tight, problem)
        return None if isinstance(solved, str) or not solved.branches else solved.branches[0].values
    searched = size_many_starts.solve(
        tight, sizing.goal, sizing.sense, starts=2, seed=sizing.seed, first=(near,)
    )
    best = on_steps(tight, searched).best
    return None if best is None else best.values


def _specified(found: SizingResult, best: SizedBest) -> PurchaseSpecification | str:
    why = why_no_specification(found.study.brief)
    if why is not None:
        return why
    told = "no design has room inside its limits: any scatter of a part would miss one"
    for room in ROOMS:
        # The design of the same objective with the most room; one that no proof holds for gives way to the next.
        brief = found.study.brief
        values = _sized_again(brief_with_room(brief, room), best.values, found.searches is None)
        if values is None:
            continue
        bought = specify(brief, values)
        if not isinstance(bought, str):
            return bought
        told = bought
    return told


def _of_branches(study: Study, exact: OneAxisSizing) -> tuple[SizedBest, ...]:
    found = []
    for branch in exact.branches:
        made = made_design(study.brief, branch.values)
        assessment = assess(made.brief, made.design)
        found.append(SizedBest(branch.name, branch.values, branch.objective, assessment, branch.tight))
    return tuple(found)


def _of_searches(study: Study, searches: ManyStarts) -> tuple[SizedBest, ...]:
    """The best three local answers that differ, assessed."""
    found: list[SizedBest] = []
    low, high = bounds(study.brief)
    for search in searches.searches:
        near = [
            np.allclose(search.values, other.values, rtol=1e-2, atol=1e-3 * (high - low).max())
            for other in found
        ]
        if any(near) or len(found) == 3:
            continue
        made = made_design(study.brief, search.values)
        assessment = assess(made.brief, made.design)
        tight = tuple(row.label for row in assessment.margins if abs(row.margin) < 1e-3)
        found.append(
            SizedBest(f"local search {len(found) + 1}", search.values, search.objective, assessment, tight)
        )
    return tuple(found)
