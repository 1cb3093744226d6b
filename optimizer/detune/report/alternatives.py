"""The next cheaper and the next safer choices, judged like the answer."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.report.quick_stages import quick_stages, stage_margins
from detune.report.words import margin_text, number, percent
from detune.response.assessment import Assessment
from detune.response.designs import Designs, all_designs, total_cost
from detune.study.run import Result

Floats = NDArray[np.float64]
CHEAPER = 3
# Listing the costs of more designs than this would take longer than the report is worth.
COUNTABLE = 4_000_000
BLOCK = 500_000
LOOKED_AT = 400
ROUNDING = 1e-9
SAFER_MARGINS = (0.05, 0.10, 0.20)


@dataclass(frozen=True)
class Alternative:
    """A choice beside the answer: what it is, its assessment, and why it is not the answer."""

    what: str
    assessment: Assessment
    why: str


@dataclass(frozen=True)
class Alternatives:
    """What stands beside the answer; `cheaper` is how many designs cost less, None where they are not counted."""

    cheaper: int | None
    items: tuple[Alternative, ...]


def alternatives(result: Result) -> Alternatives:
    """Return the cheaper choices that miss least, the next point of the front, and cheapest ones with more margin."""
    answer = result.answer
    if answer is None:
        return Alternatives(None, ())
    others = (*_next_on_front(result, answer), *_safer(result, answer))
    if result.problem.count > COUNTABLE or result.outcome.stopped != "finished":
        return Alternatives(None, others)
    costs = _costs(result)
    below = int((costs < answer.cost * (1.0 - ROUNDING)).sum())
    return Alternatives(below, (*_cheaper(result, answer), *others))


def _costs(result: Result) -> Floats:
    model = result.problem.model
    starts = range(0, result.problem.count, BLOCK)
    blocks = [total_cost(model, all_designs(model, i, min(i + BLOCK, result.problem.count))) for i in starts]
    return np.concatenate(blocks)


def _cheaper(result: Result, answer: Assessment) -> list[Alternative]:
    """Return the cheaper designs that come nearest to the brief, of those worth looking at."""
    looked_at = _near_misses(result, answer)
    found = []
    for index in range(looked_at.count):
        judged = result.assess(result.problem.design(looked_at, index))
        why = "worse in what comes first"
        if result.front.trade[0] == "cost":
            # A design that meets is reached here only where solver and assessor differ: the reader must know.
            why = "the solver excluded it, but the assessor finds it met: report this with the study file"
        found.append(Alternative(f"cheaper by {number(answer.cost - judged.cost, 3)}", judged, why))
    return sorted(found, key=lambda item: -item.assessment.tightest.margin)


def _near_misses(result: Result, answer: Assessment) -> Designs:
    """Return the cheaper ones that miss least: of the answer with one choice changed, and of the closest ones kept."""
    problem = result.problem
    near = _with_one_choice_changed(result)
    every = Designs(
        np.concatenate([near.part, result.outcome.closest.part]),
        np.concatenate([near.step, result.outcome.closest.step]),
    )
    cost = total_cost(problem.model, every)
    order = np.argsort(-cost, kind="stable")
    kept = every.take(order[cost[order] < answer.cost * (1.0 - ROUNDING)][:LOOKED_AT])
    least = np.full(kept.count, np.inf)
    for stage in quick_stages(problem) if kept.count else ():
        least = np.minimum(least, stage_margins(stage, kept).min(axis=0))
        # The stages go from cheap to dear: only the best are worth the next one.
        best = np.argsort(-least, kind="stable")[: max(CHEAPER, kept.count // 3)]
        kept, least = kept.take(best), least[best]
    table = np.column_stack([kept.part, kept.step])
    _, first = np.unique(table, axis=0, return_index=True)
    return kept.take(np.sort(first)[:CHEAPER])


def _with_one_choice_changed(result: Result) -> Designs:
    model, answer = result.problem.model, result.front.designs.take(np.array([result.front.index[0]]))
    parts, steps = [], []
    for group, data in enumerate(model.groups):
        changed = np.repeat(answer.part, len(data.mounts), axis=0)
        changed[:, group] = np.arange(len(data.mounts))
        parts.append(changed)
        steps.append(np.repeat(answer.step, len(data.mounts)))
    parts.append(np.repeat(answer.part, len(model.ballast_mass), axis=0))
    steps.append(np.arange(len(model.ballast_mass), dtype=np.intp))
    return Designs(np.concatenate(parts), np.concatenate(steps))


def _next_on_front(result: Result, answer: Assessment) -> list[Alternative]:
    if len(result.front.points) < 2:
        return []
    point = result.front.points[1]
    first, second = result.front.trade[:2]
    if (first, second) != ("cost", "separation"):
        return [Alternative("next on the front", point, "worse in what comes first")]
    more = number(point.cost - answer.cost, 4)
    change = f"separation {percent(point.separation)} instead of {percent(answer.separation)}"
    return [Alternative("next on the front", point, f"costs {more} more; {change}")]


def _safer(result: Result, answer: Assessment) -> list[Alternative]:
    front = result.front
    margins, costs = front.objectives.get("least-margin"), front.objectives.get("cost")
    if margins is None or costs is None:
        return []
    found: list[Alternative] = []
    for wanted in SAFER_MARGINS:
        able = np.flatnonzero(margins >= wanted)
        if wanted <= answer.least_margin or len(able) == 0:
            continue
        index = int(able[np.lexsort((-margins[able], costs[able]))[0]])
        judged = result.assess(result.problem.design(front.designs, index))
        if any(other.assessment.design == judged.design for other in found):
            continue
        why = f"costs {number(judged.cost - answer.cost, 4)} more than the answer"
        found.append(Alternative(f"cheapest with every margin at least {100.0 * wanted:g} %", judged, why))
    if not found:
        index = int(margins.argmax()) if len(margins) else -1
        if index >= 0 and margins[index] > answer.least_margin:
            judged = result.assess(result.problem.design(front.designs, index))
            more = number(judged.cost - answer.cost, 4)
            why = f"costs {more} more; its least margin is {margin_text(judged.least_margin)}"
            found.append(Alternative("most margin of all", judged, why))
    return found
