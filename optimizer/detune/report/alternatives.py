"""The next cheaper and the next safer choices, judged like the answer."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.report.words import margin_text, number, percent
from detune.response.assess import assess
from detune.response.assessment import Assessment
from detune.response.designs import all_designs, total_cost
from detune.study.run import Result

Floats = NDArray[np.float64]
CHEAPER = 3
# Listing the costs of more designs than this would take longer than the report is worth.
COUNTABLE = 4_000_000
BLOCK = 500_000
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
    """Return the cheaper choices nearest in cost, the next point of the front, and cheapest ones with more margin."""
    answer = result.answer
    if answer is None:
        return Alternatives(None, ())
    others = (*_next_on_front(result, answer), *_safer(result, answer))
    if result.problem.count > COUNTABLE or result.outcome.stopped != "finished":
        return Alternatives(None, others)
    costs = _costs(result)
    below = np.flatnonzero(costs < answer.cost - 1e-9 * abs(answer.cost))
    nearest = below[np.argsort(-costs[below], kind="stable")[:CHEAPER]]
    return Alternatives(len(below), (*(_cheaper(result, answer, int(i)) for i in nearest), *others))


def _costs(result: Result) -> Floats:
    model = result.problem.model
    starts = range(0, result.problem.count, BLOCK)
    blocks = [total_cost(model, all_designs(model, i, min(i + BLOCK, result.problem.count))) for i in starts]
    return np.concatenate(blocks)


def _cheaper(result: Result, answer: Assessment, index: int) -> Alternative:
    design = result.problem.design(all_designs(result.problem.model, index, index + 1), 0)
    judged = assess(result.study.brief, design)
    why = "meets the brief, but is worse in what comes first"
    if result.front.trade[0] == "cost":
        # Only reached where solver and assessor differ: the reader must know.
        why = "the solver excluded it, the assessor finds that it meets the brief: report this with the study file"
    return Alternative(f"next cheaper, by {number(answer.cost - judged.cost, 3)}", judged, why)


def _next_on_front(result: Result, answer: Assessment) -> list[Alternative]:
    if len(result.front.points) < 2:
        return []
    point = result.front.points[1]
    first, second = result.front.trade[:2]
    if (first, second) != ("cost", "separation"):
        return [Alternative("next on the front", point, "worse in what comes first")]
    gain, more = percent(point.separation - answer.separation), number(point.cost - answer.cost, 4)
    return [Alternative("next on the front", point, f"costs {more} more for {gain} more separation")]


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
        judged = assess(result.study.brief, result.problem.design(front.designs, index))
        if any(other.assessment.design == judged.design for other in found):
            continue
        why = f"costs {number(judged.cost - answer.cost, 4)} more than the answer"
        found.append(Alternative(f"cheapest with every margin at least {percent(wanted)}", judged, why))
    if not found:
        index = int(margins.argmax()) if len(margins) else -1
        if index >= 0 and margins[index] > answer.least_margin:
            judged = assess(result.study.brief, result.problem.design(front.designs, index))
            more = number(judged.cost - answer.cost, 4)
            why = f"costs {more} more; its least margin is {margin_text(judged.least_margin)}"
            found.append(Alternative("most margin of all", judged, why))
    return found
