"""The second opinion on one-axis sizing, beside the exact answer."""

from __future__ import annotations

from detune.ground.units import show
from detune.report.tables import Table
from detune.report.tables_sizing import GOALS, goal_text
from detune.report.words import margin_text
from detune.sizing.made_parts import sizing_of
from detune.solvers.size_second_opinion import AGREE
from detune.study.size import SizingResult


def opinion_table(result: SizingResult) -> Table:
    """Both answers side by side: what each says, the unknowns, the time each took."""
    opinion = result.opinion
    assert opinion is not None
    sizing = sizing_of(result.study.brief)
    goal = sizing.goal
    exact = None if result.exact is None or not result.exact.branches else result.exact.branches[0]
    none = "none"
    rows = [
        ("says", "none exists" if exact is None else "global best", said(result)),
        (
            GOALS[goal],
            none if exact is None else goal_text(goal, exact.objective),
            none if opinion.values is None else goal_text(goal, opinion.objective),
        ),
    ]
    for place, unknown in enumerate(sizing.unknown):
        first = none if exact is None else show(float(exact.values[place]), unknown.unit, 5)
        second = none if opinion.values is None else show(float(opinion.values[place]), unknown.unit, 5)
        rows.append((unknown.title, first, second))
    judged = none if opinion.assessment is None else margin_text(opinion.assessment.least_margin)
    best = none if not result.branches else margin_text(result.branches[0].assessment.least_margin)
    rows.append(("least margin, assessed", best, judged))
    rows.append(("processor time", show(opinion.exact_seconds, "time", 2), show(opinion.seconds, "time", 2)))
    note = (
        f"Called the same where the objectives differ by less than {AGREE:g} of their value. SCIP stands on "
        "its limits within its own tolerance, so that its margin may be a rounding below zero; the exact "
        "design stands two parts in a million inside. Processor time is from the statement to the answer, "
        "without the start of SCIP's process."
    )
    if opinion.relaxed:
        note += " Both leave to the assessor: " + "; ".join(opinion.relaxed) + "."
    return Table("Second opinion", ("", "exact", "SCIP"), tuple(rows), frozenset({1, 2}), note)


def said(result: SizingResult) -> str:
    """What SCIP said, in words."""
    opinion = result.opinion
    assert opinion is not None
    words = {
        "optimal": "global best",
        "infeasible": "none exists",
        "time limit": "no end within its time limit, which says nothing",
        "failed": f"failed ({opinion.detail}), which says nothing",
    }
    return words[opinion.status]


def opinion_text(result: SizingResult) -> str:
    """The second opinion in one sentence, for the terminal."""
    opinion = result.opinion
    assert opinion is not None
    goal = sizing_of(result.study.brief).goal
    times = f"{show(opinion.seconds, 'time', 2)} against {show(opinion.exact_seconds, 'time', 2)}"
    if opinion.agrees is None:
        return f"Second opinion (SCIP): {said(result)}."
    if opinion.status == "infeasible":
        same = "none exists as well" if opinion.agrees else "none exists, WHERE THE EXACT METHOD FOUND ONE"
        return f"Second opinion (SCIP): {same}; {times} of processor time."
    found = goal_text(goal, opinion.objective)
    if opinion.agrees:
        within = f"{max(opinion.difference or 0.0, 1e-12):.1e}"
        return f"Second opinion (SCIP): {found}, the same within {within}; {times} of processor time."
    exact = "none" if opinion.exact is None else goal_text(goal, opinion.exact)
    return f"SECOND OPINION DIFFERS: SCIP {found}, exact {exact}. Neither is proven."
