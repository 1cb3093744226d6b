"""Requirements that the bounds do not know, judged by the assessor at sampled points of the scatter."""

import itertools

import numpy as np

from detune.brief.allowable.base import StaticAllowable
from detune.brief.brief import Brief
from detune.problem.requirement import Requirement
from detune.response.assess import assess
from detune.response.assessment import MarginRow
from detune.response.design import Design
from detune.response.margin import window_margin
from detune.solvers.perturbed import perturbed
from detune.solvers.scatter_machine import ScatterMap, corner_words
from detune.solvers.verdict import RowVerdict, Status

CORNERS = 4
INSIDE = 4


def sample_scatter(
    found: ScatterMap, corners: int = CORNERS, inside: int = INSIDE
) -> list[tuple[float, ...]]:
    """Nominal point, corners of up to `corners` variables (the others together), and points of a Latin hypercube.

    Of those, every variable has one in each of `inside` equal parts of its range.
    """
    low, high = found.low, found.high
    points = [tuple(found.nominal.tolist())]
    count = len(low)
    if not count:
        return points
    free = min(corners, count)
    for signs in itertools.product((0, 1), repeat=free):
        chosen = [*signs, *([signs[-1]] * (count - free))]
        points.append(tuple(float(high[i] if s else low[i]) for i, s in enumerate(chosen)))
    # Drawn here: for a handful of points, loading scipy.stats would take longer than all that is done with them.
    drawn = np.random.default_rng(20_011)
    part = np.column_stack([drawn.permutation(inside) for _ in range(count)])
    unit = (part + drawn.random((inside, count))) / inside
    points += [tuple((low + (high - low) * row).tolist()) for row in unit]
    return points


def sampled_verdicts(
    brief: Brief, design: Design, found: ScatterMap, wanted: list[tuple[Requirement, str]]
) -> list[RowVerdict]:
    """Return the worst of all samples for each requirement; "sampled" where every one kept its limit."""
    worst: dict[int, tuple[MarginRow, tuple[float, ...]]] = {}
    for point in sample_scatter(found):
        rows = {_key(row): row for row in assess(*perturbed(brief, design, found, point)).margins}
        for number, (requirement, _) in enumerate(wanted):
            row = rows.get(_key_of(requirement))
            if row is None:
                continue
            row = _forced(row, requirement, found)
            if number not in worst or row.margin < worst[number][0].margin:
                worst[number] = (row, point)
    out = []
    for number, (requirement, why) in enumerate(wanted):
        if number not in worst:
            continue
        row, point = worst[number]
        status: Status = "sampled" if row.margin >= 0.0 else "violated"
        out.append(
            RowVerdict(
                kind=row.kind, condition=row.condition, place=row.place, quantity=row.quantity, unit=row.unit,
                status=status, worst=row.value, guaranteed=None, lower=row.lower, upper=row.upper,
                margin=row.margin, guaranteed_margin=None, frequency=row.frequency,
                where=corner_words(found.variables, point), point=point,
                note="; ".join(text for text in (requirement.reading, f"sampled, not proven: {why}") if text),
            )
        )  # fmt: skip
    return out


def _key(row: MarginRow) -> tuple[str, str, str, str]:
    return row.kind, row.condition, row.place, row.quantity


def _key_of(requirement: Requirement) -> tuple[str, str, str, str]:
    allowable = requirement.allowable
    return allowable.kind, requirement.condition, requirement.place, allowable.quantity()


def _forced(row: MarginRow, requirement: Requirement, found: ScatterMap) -> MarginRow:
    """The row with the greatest forcing; its static part is raised as well, which errs on the safe side."""
    factor = 1.0 + found.forcing[1]
    if factor == 1.0 or isinstance(requirement.allowable, StaticAllowable) or row.upper is None:
        return row
    from dataclasses import replace

    value = row.value * factor
    margin = float(window_margin(np.array(value), None, np.array(row.upper)))
    return replace(row, value=value, margin=margin)
