"""Named designs over the stated scatter, in words: what is proven, violated, undecided with its bracket, or
sampled."""

import textwrap
from collections.abc import Sequence

from detune.brief.brief import Brief
from detune.report.robust import as_margin_row, bracket_words, scatter_words, told
from detune.report.words import margin_text, value_text
from detune.solvers.verdict import STATUS_WORDS, DesignVerdict, RowVerdict
from detune.study.over_scatter import OverScatter

WIDTH = 100


def scatter_text(brief: Brief, judged: OverScatter | None) -> str:
    """Return what the scatter makes of one design as plain text, empty where the study states none."""
    if judged is None:
        return ""
    stated = f"What stands above is at listed values. Over the stated scatter ({scatter_words(brief)}):"
    lines = [*textwrap.wrap(stated, WIDTH), *textwrap.wrap(headline(brief, judged), WIDTH)]
    if judged.verdict is not None:
        lines += ["", "Every requirement over the scatter, least guaranteed margin first"]
        for row in sorted(judged.verdict.rows, key=_order):
            lines += textwrap.wrap(_row(row), WIDTH, initial_indent="  ", subsequent_indent="      ")
    return "\n".join(lines) + "\n"


def headline(brief: Brief, judged: OverScatter) -> str:
    """Return what the scatter makes of one design in a sentence or two: its yield, or what is proven of it."""
    if judged.found is not None:
        found = judged.found
        text = (
            f"Yield {100 * found.share:.1f} %: {found.met} of {found.samples} samples meet the brief; "
            f"{100 * found.confidence:g} % confidence {100 * found.low:.1f} to {100 * found.high:.1f} %."
        )
        if found.missed:
            text += f" Missed most: {found.missed[0][0]} ({found.missed[0][1]} times)."
        return text
    verdict = judged.verdict
    assert verdict is not None
    text = _verdict_words(brief, verdict)
    if judged.stopped:
        text += (
            " PARTIAL: the time limit or an interruption ended the proof; with more time more may be decided."
        )
    return f"{text} ({verdict.boxes:,} boxes, {judged.seconds:.1f} s)"


def _verdict_words(brief: Brief, verdict: DesignVerdict) -> str:
    witness = verdict.witness
    if witness is not None:
        return f"VIOLATED: {told(brief, witness)}."
    if verdict.status == "proven":
        return f"PROVEN for every value in it and the whole speed range. Tightest: {told(brief, verdict.tightest)}."
    sampled = [row for row in verdict.rows if row.status == "sampled"]
    open_rows = [row for row in verdict.rows if row.status == "undecided"]
    text = "NOT PROVEN."
    if open_rows:
        text += f" Undecided: {'; '.join(bracket_words(row) for row in open_rows)}."
    if sampled:
        text += (
            f" {len(sampled)} limits are sampled, not proven: every sample kept them, but no bound covers "
            "their kind."
        )
    return text


def _order(row: RowVerdict) -> float:
    return row.margin if row.guaranteed_margin is None else row.guaranteed_margin


def _row(row: RowVerdict) -> str:
    own = as_margin_row(row)
    note = f" ({row.note})" if row.note and row.status != "sampled" else ""
    text = (
        f"{STATUS_WORDS[row.status]}: {row.label}{note}: worst found {value_text(own)}, margin "
        f"{margin_text(row.margin)}"
    )
    if row.guaranteed is not None:
        bound = as_margin_row(row, guaranteed=True)
        text += f"; guaranteed {value_text(bound)}, margin {margin_text(bound.margin)}"
    return text


def scatter_rows(judged: Sequence[OverScatter | None]) -> list[tuple[str, tuple[str, ...]]]:
    """Return rows for a comparison of designs: one cell a design, none where no scatter is stated."""
    if any(each is None for each in judged):
        return []
    known = [each for each in judged if each is not None]
    if all(each.found is not None for each in known):
        cells = tuple(
            f"yield {100 * e.found.share:.1f} % ({100 * e.found.low:.1f} to {100 * e.found.high:.1f} %)"
            for e in known
            if e.found is not None
        )
        return [("over the scatter", cells)]
    verdicts = [each.verdict for each in known if each.verdict is not None]
    rows = [
        (
            "over the scatter",
            tuple(
                STATUS_WORDS[v.status] + (" (stopped early)" if e.stopped else "")
                for v, e in zip(verdicts, known, strict=True)
            ),
        ),
        ("least margin over the scatter, found", tuple(margin_text(v.tightest.margin) for v in verdicts)),
    ]
    guaranteed = tuple(_guaranteed(v) for v in verdicts)
    return [*rows, ("least margin over the scatter, guaranteed", guaranteed)]


def _guaranteed(verdict: DesignVerdict) -> str:
    margins = [row.guaranteed_margin for row in verdict.rows]
    known = [margin for margin in margins if margin is not None]
    if not known:
        return "none"
    part = f" ({len(margins) - len(known)} limits sampled)" if len(known) < len(margins) else ""
    return margin_text(min(known)) + part
