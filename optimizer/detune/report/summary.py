"""The terminal summary: the answer first, then what to look at, the cautions, and where the files are."""

import math
import textwrap
from collections.abc import Iterable, Sequence
from pathlib import Path

from detune.brief.brief import Brief
from detune.report.gathered import left_out_of
from detune.report.points_to_check import points_to_check, study_points
from detune.report.robust import robust_lines
from detune.report.words import (
    BEST_WORDS,
    OBJECTIVE_WORDS,
    design_text,
    limit_text,
    margin_text,
    objective_text,
    row_text,
    separation_text,
    value_text,
)
from detune.response.assessment import Assessment, MarginRow
from detune.study.after_search import AfterSearch
from detune.study.cautions import cautions
from detune.study.run import Result

WIDTH = 100
SHOWN_FRONT = 12
SHOWN_RULES = 6


def summary(result: Result, folder: Path | None = None, work: AfterSearch | None = None) -> str:
    """Return the summary of a study as plain text; `work` tells of what its report left out."""
    lines = [result.study.brief.title, ""]
    lines += _partial(result)
    lines += _answer(result) if result.answer is not None else none_lines(result)
    left_out, why = left_out_of(result, work)
    if left_out:
        lines += ["", f"Left out {why}", *_bullets(left_out)]
    for other in result.compared:
        lines += ["", "Named design", *_design(result.study.brief, other)]
    subject = result.subject
    if subject is not None:
        points = (*points_to_check(result.study.brief, subject), *study_points(result))
        heading = "Look at" if result.answer is not None else "Look at, in the closest design"
        lines += ["", heading, *_bullets(points)]
    lines += ["", "Cautions", *_bullets(cautions(result.study.brief))]
    if folder is not None:
        lines += ["", "Files", f"  {folder}", f"  {folder / 'report.html'}"]
    return "\n".join(lines) + "\n"


def assess_text(brief: Brief, assessment: Assessment) -> str:
    """Return the assessment of one named design as plain text, every requirement listed."""
    lines = [brief.title, "", *_design(brief, assessment), "", "Every requirement, least margin first"]
    for row in sorted(assessment.margins, key=lambda row: row.margin):
        lines += _wrapped(row_text(brief, row), "  ")
    lines += ["", "Look at", *_bullets(points_to_check(brief, assessment))]
    lines += ["", "Cautions", *_bullets(cautions(brief))]
    return "\n".join(lines) + "\n"


def compare_text(
    assessments: Sequence[Assessment],
    names: Sequence[str] | None = None,
    more: Sequence[tuple[str, tuple[str, ...]]] = (),
) -> str:
    """Return assessments side by side, one column each; `names` heads the columns, `more` are further rows on top.

    A requirement is one row; all designs of one brief have the same requirements, save limits that
    only some parts state.
    """
    heads = list(names) if names is not None else [str(i + 1) for i in range(len(assessments))]
    table: list[list[str]] = [["", *heads]]
    first, *others = comparison_rows(assessments)
    for name, cells in (first, *more, *others):
        table.append([name, *cells])
    widths = [max(len(row[column]) for row in table) for column in range(len(table[0]))]
    lines = [
        "  ".join(cell.ljust(width) for cell, width in zip(row, widths, strict=True)).rstrip()
        for row in table
    ]
    return "\n".join(lines) + "\n"


def comparison_rows(assessments: Sequence[Assessment]) -> list[tuple[str, tuple[str, ...]]]:
    """Return the rows of a comparison: what is compared, and one cell for each assessment."""
    rows: list[tuple[str, tuple[str, ...]]] = []
    rows.append(("meets the brief", tuple("yes" if a.meets else "no" for a in assessments)))
    for index, group in enumerate(assessments[0].design.groups):
        rows.append((group, tuple(a.design.parts[index] for a in assessments)))
    rows.append(("ballast", tuple(a.design.ballast_name for a in assessments)))
    rows.append(("cost", tuple(objective_text(a, "cost") for a in assessments)))
    rows.append(("separation", tuple(separation_text(a.separation) for a in assessments)))
    rows.append(("least margin", tuple(margin_text(a.least_margin) for a in assessments)))
    rows.append(("part numbers", tuple(str(a.part_numbers) for a in assessments)))
    found = [{_key(row): row for row in a.margins} for a in assessments]
    keys = dict.fromkeys(key for rows_of in found for key in rows_of)
    least = {key: min(rows_of[key].margin for rows_of in found if key in rows_of) for key in keys}
    for key in sorted(keys, key=lambda key: least[key]):
        label = next(rows_of[key].label for rows_of in found if key in rows_of)
        rows.append((label, tuple(_cell(rows_of.get(key)) for rows_of in found)))
    return rows


def _key(row: MarginRow) -> tuple[str, str, str, str]:
    return (row.kind, row.quantity, row.place, row.condition)


def _cell(row: MarginRow | None) -> str:
    if row is None:
        return "no limit"
    return f"{value_text(row)} ({margin_text(row.margin)})"


def proof_lines(result: Result) -> list[str]:
    """Return in words what is proven about the answer."""
    record, trade = result.outcome.record, result.front.trade
    if result.outcome.stopped != "finished":
        return [
            f"Not proven: {record.looked_at} of {record.designs} designs were looked at before the "
            f"{'time limit' if result.outcome.stopped == 'time limit' else 'interruption'}."
        ]
    if not record.accounted:
        return ["Not proven: the counts of the proof record do not add up."]
    met = result.front.designs.count
    return [
        f"Proven by {record.method}: of {record.designs} designs every one is counted, each excluded one "
        f"under the requirement it failed; {met} remain, and {_which(result)} the {BEST_WORDS[trade[0]]} of "
        "them, confirmed by the assessor. Parts at their listed values."
    ]


def _which(result: Result) -> str:
    """Return what is the best at listed values: the design shown, or another one than the proven design shown."""
    if (
        result.robust_answer is None
        or result.answer is None
        or result.robust_answer.design == result.answer.design
    ):
        return "this is"
    return f"{design_text(result.answer.design)} (cost {objective_text(result.answer, 'cost')}) is"


def none_lines(result: Result) -> list[str]:
    """Return the words for a study without an answer: none exists only where that is proven."""
    record = result.outcome.record
    if result.outcome.none_exists:
        head = f"No design meets the brief: none of the {record.designs} designs does."
    else:
        head = (
            f"No design that meets the brief was found among the {record.looked_at} of {record.designs} designs "
            "looked at. That is no proof that none exists."
        )
    lines = _wrapped(head)
    ranked = sorted((rule for rule in record.rules if rule.excluded), key=lambda rule: -rule.excluded)
    if ranked:
        lines += ["", "Excluded most, each design counted at the first rule it failed"]
    lines += [f"  {rule.excluded:>9}  {rule.rule}, {rule.stage}" for rule in ranked[:SHOWN_RULES]]
    if result.closest is not None:
        lines += ["", "Closest design found", *_design(result.study.brief, result.closest)]
    return lines


def partial_words(result: Result) -> str | None:
    """Return the sentence that says a result is partial, or None."""
    record, stopped = result.outcome.record, result.outcome.stopped
    if stopped == "finished":
        return None
    why = "the time limit" if stopped == "time limit" else "an interruption"
    return (
        f"PARTIAL RESULT: stopped by {why} after {record.looked_at:,} of {record.designs:,} designs. "
        f"A better design may exist among those not looked at. {_bracket(result)}".rstrip()
    )


def _bracket(result: Result) -> str:
    """Return what is proven about the cost of a partial result: the lower bound, and the gap to the best found."""
    bound = result.outcome.record.lower_bound
    if bound is None or bound == -math.inf:
        return ""
    if not result.outcome.designs.count:
        return f"None of them costs less than {bound:.2f}." if math.isfinite(bound) else ""
    best = float(result.outcome.objectives["cost"].min())
    if bound >= best:
        return f"None of them costs less than the cheapest one found ({best:.2f})."
    gap = (best - bound) / best
    return f"None of them costs less than {bound:.2f}; the cheapest one found costs {best:.2f}: a gap of {gap:.1%}."


def _partial(result: Result) -> list[str]:
    words = partial_words(result)
    return [] if words is None else [*_wrapped(words), ""]


def _answer(result: Result) -> list[str]:
    assert result.answer is not None
    brief, trade = result.study.brief, result.front.trade
    lines = [
        *(line for text in robust_lines(result) for line in _wrapped(text)),
        *([""] if result.robust is not None else []),
        *_design(brief, result.subject or result.answer),
        *(line for text in proof_lines(result) for line in _wrapped(text)),
    ]
    points = result.front.points
    if len(points) > 1:
        words = " against ".join(OBJECTIVE_WORDS[name] for name in trade)
        more = result.front.unassessed
        lines += ["", f"Front, {words}: {len(points)} designs{f', {more} more not assessed' if more else ''}"]
        for point in points[:SHOWN_FRONT]:
            values = "  ".join(f"{objective_text(point, name):>9}" for name in trade)
            lines.append(f"  {values}  {design_text(point.design)}")
        if len(points) > SHOWN_FRONT:
            lines.append(f"  and {len(points) - SHOWN_FRONT} more in front.csv")
    return lines


def _design(brief: Brief, assessment: Assessment) -> list[str]:
    verdict = "Meets the brief" if assessment.meets else "Does not meet the brief"
    if brief.scatter is not None:
        verdict += " at listed values"
    lines = _wrapped(f"{verdict}: {design_text(assessment.design)}")
    lines.append(
        f"  cost {objective_text(assessment, 'cost')}, separation {separation_text(assessment.separation)}, "
        f"least margin {margin_text(assessment.least_margin)}"
    )
    word = "Tightest" if assessment.meets else "Missed most"
    lines += _wrapped(f"{word}: {row_text(brief, assessment.tightest)}", "  ")
    return lines


def _bullets(texts: Iterable[str]) -> list[str]:
    lines: list[str] = []
    for text in texts:
        lines += textwrap.wrap(text, WIDTH, initial_indent="  - ", subsequent_indent="    ")
    return lines


def _wrapped(text: str, indent: str = "") -> list[str]:
    return textwrap.wrap(text, WIDTH, initial_indent=indent, subsequent_indent=indent + "  ") or [""]


__all__ = [
    "assess_text",
    "compare_text",
    "comparison_rows",
    "limit_text",
    "none_lines",
    "partial_words",
    "summary",
]
