"""The nearest real parts of a sizing study, and what the restriction to real parts costs."""

from __future__ import annotations

from detune.report.tables import Table
from detune.report.tables_sizing import GOALS, goal_text
from detune.report.words import margin_text, number, percent
from detune.response.assessment import Assessment
from detune.sizing.made_parts import changes_brief, sizing_of
from detune.solvers.size_nearest import NearDesign, Nearest
from detune.solvers.verdict import STATUS_WORDS
from detune.study.over_scatter import OverScatter
from detune.study.size import SizingResult


def nearest_table(result: SizingResult) -> Table:
    """The nearest real designs, each assessed, with what they cost against the ideal."""
    nearest, best = result.nearest, result.answer
    assert nearest is not None and best is not None
    brief = result.study.brief
    goal = sizing_of(brief).goal
    scattered = any(each is not None for each in result.near_over)
    rows = []
    for design, judged in zip(nearest.designs, result.near_over, strict=True):
        real = design.assessment
        over = (_over_words(judged),) if scattered else ()
        first = (str(real.design), _met_words(real), margin_text(real.least_margin), *over)
        rows.append(
            (*first, number(real.cost, 6), _against(result, design) if real.meets else "meets no brief")
        )
    # `detune run` takes the machine as the study states it.
    moved = ", once the sized positions and masses are written into the study" if changes_brief(brief) else ""
    note = (
        f"Of {nearest.of} real designs {nearest.looked_at} were evaluated exactly, those with the least predicted "
        "shortfall and those predicted to meet every limit with the best objective; "
        f"{nearest.met} met every requirement; those shown were assessed. That is no proof of the "
        f"best real design: `detune run` gives it{moved}. "
        "The last column compares with the ideal, at the price stated for parts made to order."
    )
    over_column = ("over the scatter",) if scattered else ()
    columns = (
        "real design",
        "assessed",
        "least margin",
        *over_column,
        "cost",
        f"{GOALS[goal]} against the ideal",
    )
    numeric = frozenset({2, 3 + len(over_column), 4 + len(over_column)})
    return Table("Nearest real parts", columns, tuple(rows), numeric, note)


def nearest_text(result: SizingResult) -> str:
    """The best of the nearest real designs and what the restriction to real parts costs, for the terminal."""
    nearest = result.nearest
    if nearest is None or not nearest.designs:
        return ""
    first = nearest.designs[0]
    real = first.assessment
    text = f"Nearest real design: {real.design}, cost {real.cost:.6g}, {_met_words(real)}"
    if not real.meets:
        return f"{text}\n{_none_text(nearest)}"
    over = result.near_over[0]
    if over is not None:
        text += f"; over the scatter: {_over_words(over)}"
    goal = sizing_of(result.study.brief).goal
    return f"{text}\nReal parts instead of ideal ones: {GOALS[goal]} {_against(result, first)}"


def _none_text(nearest: Nearest) -> str:
    text = f"None of the {nearest.looked_at} real designs evaluated, of {nearest.of}, meets the brief"
    return text if nearest.looked_at == nearest.of else f"{text}; `detune run` tells whether another does"


def _met_words(real: Assessment) -> str:
    if real.meets:
        return "meets the brief"
    return f"misses {real.tightest.label} by {percent(-real.tightest.margin)}"


def _over_words(judged: OverScatter | None) -> str:
    if judged is None:
        return ""
    if judged.found is not None:
        return f"yield {percent(judged.found.share)}"
    assert judged.verdict is not None
    witness = judged.verdict.witness
    return STATUS_WORDS[judged.verdict.status] + ("" if witness is None else f": {witness.label}")


def _against(result: SizingResult, design: NearDesign) -> str:
    """The objective of a real design against that of the ideal, with the share that the restriction costs."""
    best = result.answer
    assert best is not None
    goal, value, ideal = sizing_of(result.study.brief).goal, design.objective, best.objective
    if goal == "separation":
        return f"{percent(value)} against {percent(ideal)}"
    told = f"{goal_text(goal, value)} against {goal_text(goal, ideal)}"
    if abs(ideal) <= 1e-9 * max(abs(value), 1e-9):
        return told
    share = value / ideal - 1.0
    return f"{told}, {'+' if share >= 0.0 else ''}{percent(share)}"
