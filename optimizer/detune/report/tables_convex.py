"""Convex answers of a sizing study: bounds and restrictions of both sides, and how far they are from the best found."""

from __future__ import annotations

import math

from detune.ground.units import show
from detune.report.tables import Table
from detune.report.tables_sizing import GOALS, goal_text
from detune.report.words import number, percent
from detune.sizing.made_parts import sizing_of
from detune.solvers.size_convex import ConvexSizing
from detune.study.size import SizingResult


def convex_table(result: SizingResult) -> Table:
    """Every convex answer: what it is worth, its distance to the best found, and the exact response at its design."""
    rows = []
    unknowns = sizing_of(result.study.brief).unknown
    for answer in result.convex:
        none = not math.isfinite(answer.value)
        values = "" if none else "; ".join(
            f"{u.title} {show(v, u.unit)}" for u, v in zip(unknowns, answer.values.tolist(), strict=True)
        )  # fmt: skip
        rows.append(
            (
                answer.side,
                GOALS[answer.what],
                "none" if none else goal_text(answer.what, answer.value),
                against(result, answer),
                "" if math.isnan(answer.response) else number(answer.response, 4),
                "" if math.isnan(answer.bounded) else number(answer.bounded, 4),
                "" if none else "meets the brief" if answer.misses is None else f"misses {answer.misses}",
                answer.worth,
                values,
            )
        )
    columns = (
        "side", "quantity", "value", "against the best found", "response", "its bound", "design", "worth", "at",
    )  # fmt: skip
    note = (
        "Side: of all excitation, for every mode. Response: the largest exact response over its limit, of the limits "
        "the form holds whatever the damping (of all it holds where there are none); its bound: what the form "
        "takes it for. Damping stands at its least "
        "where it costs, else at the middle of its range."
    )
    return Table("Convex answers", columns, tuple(rows), frozenset({2, 3, 4, 5}), note)


def against(result: SizingResult, answer: ConvexSizing) -> str:
    """How far a convex value is from the best found of the same side; empty where there is none to compare."""
    best = result.answer
    goal = sizing_of(result.study.brief).goal
    if (
        best is None
        or answer.what != goal
        or not math.isfinite(answer.value)
        or side_of(result) != answer.side
    ):
        return ""
    share = (answer.value - best.objective) / max(abs(best.objective), 1e-12)
    return f"{'+' if share >= 0.0 else ''}{percent(share)}"


def side_of(result: SizingResult) -> str:
    """On which side of all excitation every mode of the best design lies; empty where they are on both."""
    from detune.response.loads import steady_intervals

    best = result.answer
    intervals = steady_intervals(result.study.brief)
    if best is None or not intervals:
        return ""
    frequencies = [mode.frequency for mode in best.assessment.modes]
    if max(frequencies) < min(low for low, _ in intervals):
        return "below"
    return "above" if min(frequencies) > max(high for _, high in intervals) else ""


def convex_points(result: SizingResult) -> tuple[str, ...]:
    """What the restrictions hold and leave, and what real parts cost at least on either side."""
    points = []
    for answer in result.convex:
        if answer.form != "restriction":
            continue
        free = [label for label in answer.held if label not in answer.cones]
        if free:
            points.append(f"{answer.side}, held whatever the damping: {'; '.join(free)}")
        if answer.cones:
            points.append(f"{answer.side}, held with the damping of the design: {'; '.join(answer.cones)}")
        if answer.left:
            points.append(f"{answer.side}, left to the assessor: {'; '.join(answer.left)}")
    for bound in result.parts_bounds:
        if math.isinf(bound.cost):
            points.append(f"Proven: no design of real parts has every mode {bound.side} all excitation.")
        else:
            points.append(
                f"Proven: no design of real parts with every mode {bound.side} all excitation costs less than "
                f"{number(bound.cost, 5)}."
            )
    return tuple(points)
