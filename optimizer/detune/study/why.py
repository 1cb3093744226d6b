"""Why each part fell out: the first rule that excluded it and the hardest one."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from detune.problem.build import Problem
from detune.problem.listed import Listed
from detune.problem.other_candidates import BALLAST
from detune.solvers.outcome import Outcome
from detune.study.closest import ClosestDesigns, judge_closest


@dataclass(frozen=True)
class PartReason:
    """What became of one part in one group, or of one stack of ballast (group "ballast").

    `meets` is how many designs with it met the brief, of `designs`; `cheapest` the least cost among
    them. A part that fell out has the first rule that excluded designs with it (and how many), and
    the hardest: the rule its closest design misses by most, with that margin. `whole` says whether that design was
    judged by every requirement, or for want of time without records and passages.
    """

    group: str
    mount: Listed
    designs: int
    meets: int
    cheapest: float | None
    filtered: str | None
    first_rule: str | None
    first_excluded: int
    hardest_rule: str | None
    hardest_margin: float | None
    closest: str | None
    whole: bool = True


@dataclass(frozen=True)
class _Judged:
    """The closest design of a part: the first rule it fails, the one it misses by most, that margin, its name."""

    first: str | None
    hardest: str | None
    margin: float | None
    design: str | None
    whole: bool = True


def part_reasons(
    problem: Problem, outcome: Outcome, closest: ClosestDesigns | None = None
) -> tuple[PartReason, ...]:
    """Return what became of every part of every group, the filtered ones included.

    closest: the closest designs, where they were judged already.
    """
    hardest = _hardest(problem, outcome, closest or judge_closest(problem, outcome))
    reasons = []
    chosen = np.column_stack([outcome.designs.part, outcome.designs.step])
    for group, (name, mounts) in enumerate(_choices(problem)):
        each = problem.count // len(mounts)
        for part, mount in enumerate(mounts):
            with_part = np.flatnonzero(chosen[:, group] == part)
            counts = [
                (rule.rule, int(rule.by_part[group][part])) for rule in outcome.record.rules if rule.by_part
            ]
            judged = hardest.get((group, part), _Judged(None, None, None, None))
            first = next(((rule, count) for rule, count in counts if count), (judged.first, 0))
            reasons.append(
                PartReason(
                    group=name,
                    mount=mount,
                    designs=each,
                    meets=len(with_part),
                    cheapest=float(outcome.objectives["cost"][with_part].min()) if len(with_part) else None,
                    filtered=None,
                    first_rule=first[0],
                    first_excluded=first[1],
                    hardest_rule=judged.hardest,
                    hardest_margin=judged.margin,
                    closest=judged.design,
                    whole=judged.whole,
                )
            )
    for dropped in problem.dropped:
        reasons.append(
            PartReason(dropped.group, dropped.mount, 0, 0, None, dropped.reason, None, 0, None, None, None)
        )
    return tuple(reasons)


def _choices(problem: Problem) -> list[tuple[str, Sequence[Listed]]]:
    """Return every group with its parts, and ballast with its stacks where it is taken from a list."""
    found: list[tuple[str, Sequence[Listed]]] = [(group.name, group.mounts) for group in problem.model.groups]
    if problem.model.ballast[0].listed:
        found.append((BALLAST, problem.model.ballast))
    return found


def _hardest(problem: Problem, outcome: Outcome, closest: ClosestDesigns) -> dict[tuple[int, int], _Judged]:
    """Return which requirements the closest design of every part that fell out misses first and by most."""
    judged: dict[tuple[int, int], _Judged] = {}
    if not outcome.closest.count:
        return judged
    table, labels = closest.margins, closest.labels
    worst, first = table.argmin(axis=0), (table < 0.0).argmax(axis=0)
    for index, key in enumerate(outcome.closest_of):
        margin = float(table[worst[index], index])
        met = margin >= 0.0
        design = str(problem.design(outcome.closest, index))
        judged[key] = _Judged(
            None if met else labels[first[index]],
            labels[worst[index]],
            margin,
            design,
            bool(closest.whole[index]),
        )
    return judged
