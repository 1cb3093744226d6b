"""Sizing over the stated scatter: the sized design is judged over it, and sized again with room where it misses.

Local searches and the exact one-axis method work at listed values. What scatter takes from each limit is found on
their design: the ratio r of the worst value over the scatter (the bound, where it is undecided) to the value as sized.
With that limit divided by r the design is sized again, and so on until the design is proven over the scatter and its
objective settles (sequential optimisation and reliability assessment; X. Du and W. Chen, J. Mech. Des. 126 (2004)
225). What the last step says is the proof over the scatter, not the way there.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.band_limit import BandLimit
from detune.brief.allowable.base import Allowable, HarmonicAllowable, StaticAllowable
from detune.brief.allowable.gap import Gap
from detune.brief.allowable.machine_velocity import MachineVelocity
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.settling_time import SettlingTime
from detune.brief.allowable.stability import Stability
from detune.brief.allowable.velocity import Velocity
from detune.brief.brief import Brief
from detune.brief.levels import Level
from detune.problem.build import Problem
from detune.response.assess import assess
from detune.response.assessment import Assessment
from detune.response.design import Design
from detune.sizing.made_parts import made_design, sizing_of
from detune.solvers.size_batch import batch, judge
from detune.solvers.size_corners import least_over_corners
from detune.solvers.verdict import RowVerdict
from detune.study.over_scatter import OverScatter, over_scatter

Floats = NDArray[np.float64]
# A search on a brief with tighter limits from values (u,): the values it ends at, None where none meets them.
SizedAgain = Callable[[Brief, Floats], Floats | None]
HOLDS = ("proven", "sampled")
ROUNDS = 6
# Of one proof over the scatter, in s.
TIME_LIMIT = 20.0
# Of the proof of one real design.
REAL_LIMIT = 5.0
# Left beside what scatter takes, so that rounding does not decide, and the most taken at once.
ROOM, MOST = 1e-4, 4.0
# Share of the objective by which another round may still gain.
SETTLED = 1e-3


@dataclass(frozen=True)
class SizedOverScatter:
    """The sized design over the scatter: values (u,), objective at listed values, its assessment, and what was judged.

    `first` judges the design sized at listed values, with its `nominal` objective; where that design holds, it is the
    sized one. `rounds` tells how often it was sized again.
    """

    values: Floats
    objective: float
    assessment: Assessment
    judged: OverScatter
    first: OverScatter
    nominal: float
    rounds: int

    @property
    def changed(self) -> bool:
        """Whether the design is another than that sized at listed values."""
        return self.judged is not self.first


@dataclass(frozen=True)
class _Round:
    values: Floats
    objective: float
    assessment: Assessment
    judged: OverScatter

    @property
    def holds(self) -> bool:
        """Whether it meets the brief and no limit is known to be missed or left open; a distribution asks no more."""
        verdict = self.judged.verdict
        return self.assessment.meets and (verdict is None or verdict.status in HOLDS)


def held_over_scatter(brief: Brief, values: Floats, again: SizedAgain) -> SizedOverScatter | None:
    """Judge the design at `values` (u,) over the brief's scatter and size it `again` where that breaks a limit.

    None where the brief states no scatter. A distribution is answered by its yield alone. Raises BriefError where a
    tolerance is missing.
    """
    if brief.scatter is None:
        return None
    first = last = _judged(brief, values)
    if not first.holds and (other := least_over_corners(brief, values)) is not None:
        tried = _judged(brief, other)
        if tried.holds:
            return SizedOverScatter(
                other, tried.objective, tried.assessment, tried.judged, first.judged, first.objective, 1
            )
    best: _Round | None = None
    known: dict[int, float] = {}
    rounds, sense = 0, sizing_of(brief).sense
    while not first.holds and rounds < ROUNDS:
        known = _taken(brief, last, known)
        found = again(_with_room(brief, known), last.values) if known else None
        if found is None:
            break
        rounds += 1
        if np.allclose(found, last.values, rtol=1e-7):
            # Tighter limits that leave the same design the best will do so again.
            break
        last = _judged(brief, found)
        if not last.holds:
            continue
        settled = best is not None and abs(last.objective - best.objective) <= SETTLED * abs(best.objective)
        if best is None or sense * last.objective < sense * best.objective:
            best = last
        if settled:
            break
    kept = best or first
    return SizedOverScatter(
        kept.values, kept.objective, kept.assessment, kept.judged, first.judged, first.objective, rounds
    )


class RealOverScatter:
    """Judges real designs over the scatter as they are asked for, each once; without scatter every design holds."""

    def __init__(self, problem: Problem) -> None:
        self.problem = problem
        self.known: list[tuple[Design, OverScatter]] = []

    def __call__(self, design: Design) -> bool:
        """Whether no limit is known to be missed over the scatter or left open."""
        judged = self.of(design)
        return judged is None or judged.verdict is None or judged.verdict.status in HOLDS

    def of(self, design: Design) -> OverScatter | None:
        """What the scatter makes of a design, None where none is stated."""
        for known, judged in self.known:
            if known == design:
                return judged
        found = over_scatter(self.problem, design, REAL_LIMIT)
        if found is not None:
            self.known.append((design, found))
        return found


def _judged(brief: Brief, values: Floats) -> _Round:
    made = made_design(brief, values)
    problem, _ = batch(made.brief, [made])
    judged = over_scatter(problem, made.design, TIME_LIMIT)
    assert judged is not None
    objective = float(judge(brief, values[None]).objectives[sizing_of(brief).goal][0])
    return _Round(values, objective, assess(made.brief, made.design), judged)


def _taken(brief: Brief, last: _Round, known: dict[int, float]) -> dict[int, float]:
    """What scatter takes of each limit that it breaks, or broke before, by the number of the allowable.

    A ratio of values; of separation their difference.
    """
    assert last.judged.verdict is not None
    nominal = {(row.kind, row.condition, row.place, row.quantity): row for row in last.assessment.margins}
    found: dict[int, float] = {}
    for row in last.judged.verdict.rows:
        at = nominal.get((row.kind, row.condition, row.place, row.quantity))
        worst = _worst(row)
        if at is None or not np.isfinite(at.margin):
            continue
        for number, allowable in enumerate(brief.allowables):
            if not _same(brief, allowable, row) or (worst >= 0.0 and number not in known):
                continue
            if isinstance(allowable, Separation):
                open_still = row.status == "undecided" and row.guaranteed is not None
                value = row.guaranteed if open_still and row.guaranteed is not None else row.worst
                taken = at.value - value + ROOM
            else:
                taken = min((1.0 + at.margin) / max(1.0 + worst, 1e-9) * (1.0 + ROOM), MOST)
            found[number] = max(found.get(number, taken), taken)
    return found


def _worst(row: RowVerdict) -> float:
    """Least margin that is found or, where a limit is undecided, that cannot be ruled out."""
    if row.status == "undecided" and row.guaranteed_margin is not None:
        return row.guaranteed_margin
    return row.margin


def _same(brief: Brief, allowable: Allowable, row: RowVerdict) -> bool:
    """Whether a verdict's row is of an allowable; what holds at rest has no condition of the brief."""
    if allowable.kind != row.kind or allowable.quantity() != row.quantity:
        return False
    named = {condition.name for condition in brief.conditions}
    return allowable.conditions is None or row.condition in allowable.conditions or row.condition not in named


def _with_room(brief: Brief, taken: dict[int, float]) -> Brief:
    """The brief with limits tightened by what scatter takes of them."""
    allowables = tuple(
        _tighter(allowable, taken[number]) if number in taken else allowable
        for number, allowable in enumerate(brief.allowables)
    )
    return brief.model_copy(update={"allowables": allowables})


def _tighter(allowable: Allowable, taken: float) -> Allowable:
    """A limit with room for what is taken; itself where its limit is not a number that the study states."""
    if isinstance(allowable, Separation):
        return allowable.model_copy(update={"limit": allowable.limit + taken})
    if isinstance(allowable, Stability):
        return allowable.model_copy(update={"limit": allowable.limit * taken})
    if isinstance(allowable, BandLimit):
        curve = allowable.model_copy()
        curve._limit = allowable.bands()[1] / taken
        return curve
    if isinstance(allowable, MachineVelocity):
        # A zone boundary of a standard is no number of the study: the same limit, stated as one.
        return Velocity.model_construct(
            kind="velocity",
            at=allowable.at,
            direction=allowable.direction,
            conditions=allowable.conditions,
            measure="rms",
            limit=allowable.zone_limit() / taken,
        )
    if isinstance(allowable, Gap):
        return allowable.model_copy(update={"clearance": allowable.clearance / taken})
    limit = getattr(allowable, "limit", None)
    if not isinstance(allowable, (HarmonicAllowable, StaticAllowable, SettlingTime)) or not isinstance(
        limit, float
    ):
        return allowable
    tight = float(limit) / taken
    kept = Level(tight, limit.reference, limit.stated) if isinstance(limit, Level) else tight
    return allowable.model_copy(update={"limit": kept})
