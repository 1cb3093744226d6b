"""What the stated scatter makes of a sized design, in words and as a table."""

from __future__ import annotations

from detune.report.named_scatter import headline
from detune.report.robust import scatter_words, worst_table
from detune.report.tables import Table
from detune.report.tables_sizing import GOALS, goal_text
from detune.sizing.made_parts import sizing_of
from detune.study.size import SizingResult


def over_text(result: SizingResult) -> str:
    """What the scatter makes of the sized design, and what it would have been without; empty where none is stated."""
    over, brief = result.over, result.study.brief
    if over is None:
        return ""
    text = f"Over the stated scatter ({scatter_words(brief)}): {headline(brief, over.judged)}"
    if result.map is not None or result.front is not None:
        text += " Map and front are at listed values."
    goal = sizing_of(brief).goal
    if over.changed:
        alone = f"{GOALS[goal]} {goal_text(goal, over.nominal)}"
        return (
            f"{text}\nSized at listed values alone it would be {alone}; that design, over the scatter: "
            f"{headline(brief, over.first)} The answer was sized again {over.rounds} times with room for the scatter."
        )
    if over.judged.proven is False or (over.judged.verdict is not None and over.rounds):
        text += (
            f"\nSized again {over.rounds} times with room for the scatter: none found that holds over it, which is "
            "no proof that none exists."
        )
    return text


def meets_text(result: SizingResult) -> str:
    """Whether the answer meets the brief, as the beginning of a sentence."""
    over = result.over
    if over is None:
        return "Meets the brief"
    if over.judged.found is not None:
        return "Meets the brief at listed values; its yield stands below"
    if over.judged.proven is False:
        return "Meets the brief at listed values, but NOT over the stated scatter"
    if over.judged.proven:
        return "Meets the brief, proven over the stated scatter"
    return "Meets the brief at listed values; over the stated scatter not proven"


def over_table(result: SizingResult) -> Table | None:
    """Every requirement at its worst over the scatter, None where the scatter is no interval or none is stated."""
    if result.over is None or result.over.judged.verdict is None:
        return None
    return worst_table(result.study.brief, result.over.judged.verdict)


def over_numbers(result: SizingResult) -> dict[str, object] | None:
    """What `over_text` says as numbers: verdict and its rows, or the yield, and the objective at listed values."""
    over = result.over
    if over is None:
        return None
    verdict = over.judged.verdict
    return {
        "status": None if verdict is None else verdict.status,
        "rows": () if verdict is None else verdict.rows,
        "yield": over.judged.found,
        "objective_at_listed_values_alone": over.nominal,
        "sized_again": over.rounds,
    }
