"""What the scatter makes of a study, in words and tables: nominal and proven kept apart everywhere."""

import math

from detune.brief.brief import Brief
from detune.brief.scatter import interval_of
from detune.report.tables import Table
from detune.report.words import (
    design_text,
    frequency_text,
    is_shaft_speed,
    limit_text,
    margin_text,
    objective_text,
    percent,
    separation_text,
    value_text,
)
from detune.response.assessment import MarginRow
from detune.response.designs import Designs
from detune.solvers.robust import RobustResult
from detune.solvers.verdict import STATUS_WORDS, DesignVerdict, RowVerdict
from detune.solvers.yields import Yield
from detune.study.run import Result

SHOWN_CHEAPER = 20


def scatter_words(brief: Brief) -> str:
    """Return the stated scatter in one sentence."""
    scatter = brief.scatter
    assert scatter is not None
    parts = []
    for name, stated in (("stiffness", scatter.stiffness), ("damping", scatter.damping)):
        if stated is None:
            parts.append(f"{name} as assumed")
            continue
        for by, value in (("by lot", stated.lot), ("by part", stated.part)):
            if value == "listed":
                parts.append(f"{name} by its listed tolerance {by}")
            elif value is not None and not isinstance(value, str) and interval_of(value) != (0.0, 0.0):
                parts.append(f"{name} {_interval(*interval_of(value))} {by}")
    for name, value in (("mass", scatter.mass), ("forcing", scatter.forcing)):
        if value is not None:
            parts.append(f"{name} {_interval(*interval_of(value))}")
    if scatter.centre is not None:
        parts.append("centre +-" + " / ".join(f"{1e3 * c:g}" for c in scatter.centre) + " mm")
    return ", ".join(parts) or "nothing scatters"


def _interval(low: float, high: float) -> str:
    return f"+-{100 * high:g} %" if low == -high else f"{100 * low:+g} % to {100 * high:+g} %"


def as_margin_row(row: RowVerdict, guaranteed: bool = False) -> MarginRow:
    """Return a verdict's row as the assessor would write it: the worst value found, or the guaranteed one."""
    value = row.guaranteed if guaranteed and row.guaranteed is not None else row.worst
    margin = row.guaranteed_margin if guaranteed and row.guaranteed_margin is not None else row.margin
    return MarginRow(
        row.kind, row.condition, row.place, row.quantity, row.unit, value, row.lower, row.upper, margin, row.frequency,
        row.note,
    )  # fmt: skip


def told(brief: Brief, row: RowVerdict) -> str:
    """One row at its worst place, in words."""
    own = as_margin_row(row)
    at = _frequency(brief, row)
    return (
        f"{own.label}: {value_text(own)}, limit {limit_text(own)}, margin {margin_text(own.margin)}"
        f"{f' at {at}' if at else ''}, with {row.where}"
    )


def _frequency(brief: Brief, row: RowVerdict) -> str:
    return frequency_text(row.frequency, is_shaft_speed(brief, as_margin_row(row)))


def subject_verdict(result: Result) -> DesignVerdict | None:
    """Return what certification says of the design a reader looks at, None where it was not certified."""
    import numpy as np

    robust, subject = result.robust, result.subject
    if robust is None or subject is None:
        return None
    for verdict in (robust.winner, robust.nominal, *robust.front):
        if verdict is None:
            continue
        chosen = Designs(np.array([verdict.part], dtype=np.intp), np.array([verdict.step], dtype=np.intp))
        if result.problem.design(chosen, 0) == subject.design:
            return verdict
    return None


def design_words(result: Result, verdict: DesignVerdict) -> str:
    """Return a certified design on one line."""
    import numpy as np

    chosen = Designs(np.array([verdict.part], dtype=np.intp), np.array([verdict.step], dtype=np.intp))
    return design_text(result.problem.design(chosen, 0))


def robust_lines(result: Result) -> list[str]:
    """Return the headline sentences on the scatter, empty without it."""
    robust, brief = result.robust, result.study.brief
    if robust is None:
        return []
    stated = scatter_words(brief)
    if robust.judge == "distribution":
        return [
            f"Scatter ({stated}), judged as a distribution:",
            *(_yield_line(result, i, y) for i, y in enumerate(robust.yields)),
        ]
    lines: list[str] = []
    if robust.winner is not None:
        tight = robust.winner.tightest
        lines.append(
            f"Proven to meet the brief over the stated scatter ({stated}) and the whole speed range: "
            f"{design_words(result, robust.winner)}; cost {robust.winner.cost:g}."
        )
        lines.append(f"Tightest over the scatter: {told(brief, tight)}.")
        if robust.price is not None and robust.nominal is not None:
            lines.append(
                f"Price of robustness: {percent(robust.price)} over the cheapest design at listed values "
                f"({design_words(result, robust.nominal)}; cost {robust.nominal.cost:g}), "
                f"which is {_fate(brief, robust.nominal)}."
            )
        cheaper = (
            f"{len(robust.violated)} cheaper designs that meet the brief at listed values break a limit over "
            "the scatter"
        )
        if robust.optimal:
            lines.append(
                f"It is the cheapest such design: {cheaper}, each at a stated point, and none is undecided."
            )
        else:
            lines.append(
                f"It is the cheapest PROVEN design: {cheaper}; {len(robust.undecided) + len(robust.sampled)} "
                "more could be neither proven nor violated, so a cheaper one may exist."
            )
    elif robust.nominal is not None:
        lines.append(f"NOT PROVEN over the stated scatter ({stated}): {_no_winner(robust)}")
        lines.append(f"The cheapest design at listed values is {_fate(brief, robust.nominal)}.")
    if robust.stopped != "finished":
        bound = (
            ""
            if robust.lower_bound is None
            else f" No design cheaper than {robust.lower_bound:g} can be proven, save those listed."
        )
        lines.append(
            f"PARTIAL RESULT over the scatter: {robust.stopped} after {robust.examined} designs.{bound}"
        )
    return lines


def _no_winner(robust: RobustResult) -> str:
    if robust.undecided:
        return (
            f"{len(robust.undecided)} designs could be neither proven nor violated, {len(robust.violated)} "
            "are violated."
        )
    if robust.sampled:
        return (
            f"{len(robust.sampled)} designs kept every limit at all samples, but some limits are of kinds that "
            "no bound covers here."
        )
    return (
        f"all {len(robust.violated)} designs examined, which meet the brief at listed values, break a limit."
    )


def _fate(brief: Brief, verdict: DesignVerdict) -> str:
    """What becomes of a design over the scatter, as the end of a sentence."""
    witness = verdict.witness
    if witness is not None:
        return f"violated over the scatter: {told(brief, witness)}"
    return {
        "proven": "proven over the scatter as well",
        "sampled": "within its limits at every sample, which is no proof",
    }.get(
        verdict.status,
        "undecided over the scatter: "
        + "; ".join(bracket_words(row) for row in verdict.rows if row.status == "undecided"),
    )


def bracket_words(row: RowVerdict) -> str:
    """What is known of an undecided row: the greatest value found, and the bound, in words."""
    known = row.guaranteed is not None and abs(row.guaranteed) < float("inf")
    bound = "no bound" if not known else value_text(as_margin_row(row, guaranteed=True))
    return f"{row.label}: at least {value_text(as_margin_row(row))} occurs, at most {bound} is proven"


def _yield_line(result: Result, index: int, found: Yield | None) -> str:
    name = design_text(result.front.points[index].design)
    if found is None:
        return f"  {name}: not sampled before the run was stopped"
    worst = f"; missed most: {found.missed[0][0]} ({found.missed[0][1]} times)" if found.missed else ""
    return (
        f"  {name}: yield {100 * found.share:.1f} % ({found.met} of {found.samples} samples; "
        f"{100 * found.confidence:g} % confidence {100 * found.low:.1f} to {100 * found.high:.1f} %){worst}"
    )


def _status_words(row: RowVerdict) -> str:
    """The status and the note of a row, which for a sampled one says so itself."""
    status = STATUS_WORDS[row.status]
    if status in row.note:
        return row.note
    return f"{status} ({row.note})" if row.note else status


def worst_table(brief: Brief, verdict: DesignVerdict) -> Table:
    """Return every requirement at its worst over the scatter, the least guaranteed margin first."""

    def order(row: RowVerdict) -> float:
        return row.margin if row.guaranteed_margin is None else row.guaranteed_margin

    def unknown(value: float | None) -> bool:
        return value is None or math.isnan(value)

    rows = tuple(
        (
            row.label,
            _status_words(row),
            limit_text(as_margin_row(row)),
            value_text(as_margin_row(row)),
            margin_text(row.margin),
            "none" if unknown(row.guaranteed) else value_text(as_margin_row(row, guaranteed=True)),
            "none" if row.guaranteed_margin is None else margin_text(row.guaranteed_margin),
            ", ".join(text for text in (_frequency(brief, row), row.where) if text),
        )
        for row in sorted(verdict.rows, key=order)
    )
    note = (
        "Worst found: evaluated exactly at the place named. Guaranteed: no value within the scatter and the speed "
        "range is worse; the proof was carried on only until the limit was decided, so the truth lies between the "
        "two. A lot's and a part's deviation multiply. Static parts of a travel or of an uplift limit are taken at "
        "their own worst."
    )
    columns = (
        "requirement", "status", "limit", "worst found", "margin", "guaranteed", "guaranteed margin",
        "worst at",
    )  # fmt: skip
    return Table("Worst case over the scatter", columns, rows, frozenset({2, 3, 4, 5, 6}), note)


def price_table(result: Result) -> Table | None:
    """Return nominal and robust winner side by side, None unless both are known."""
    robust, nominal, proven = result.robust, result.answer, result.robust_answer
    if robust is None or nominal is None or proven is None or robust.nominal is None or robust.winner is None:
        return None
    heads = ("", "cheapest at listed values", "cheapest proven over the scatter")
    both, verdicts = (nominal, proven), (robust.nominal, robust.winner)
    rows: list[tuple[str, ...]] = [("design", *(design_text(each.design) for each in both))]
    rows += [
        ("cost", *(objective_text(each, "cost") for each in both)),
        ("separation at listed values", *(separation_text(each.separation) for each in both)),
        ("least margin at listed values", *(margin_text(each.least_margin) for each in both)),
        ("least margin over the scatter, found", *(margin_text(v.tightest.margin) for v in verdicts)),
        ("over the scatter", *(STATUS_WORDS[v.status] for v in verdicts)),
        ("boxes bounded", *(f"{v.boxes}" for v in verdicts)),
    ]
    if robust.price is not None:
        rows.append(("price of robustness", "", percent(robust.price)))
    return Table("Nominal winner and robust winner", heads, tuple(rows))


def points_table(result: Result) -> Table | None:
    """Return what becomes of the nominal front's points over the scatter."""
    robust = result.robust
    if robust is None or robust.judge != "interval" or not any(robust.front):
        return None
    rows = []
    for point, verdict in zip(result.front.points, robust.front, strict=True):
        row = None if verdict is None else (verdict.witness or verdict.tightest)
        rows.append(
            (
                objective_text(point, "cost"),
                separation_text(point.separation),
                design_text(point.design),
                "not examined" if verdict is None else STATUS_WORDS[verdict.status],
                "" if row is None else told(result.study.brief, row),
            )
        )
    columns = ("cost", "separation at listed values", "design", "over the scatter", "tightest or violated")
    return Table("Front points over the scatter", columns, tuple(rows), frozenset({0, 1}))


def cheaper_table(result: Result) -> Table | None:
    """Return the designs cheaper than the winner that fell out or stayed undecided over the scatter."""
    robust = result.robust
    if robust is None or robust.judge != "interval":
        return None
    every = sorted((*robust.violated, *robust.undecided, *robust.sampled), key=lambda v: v.cost)
    rows = []
    for verdict in every[:SHOWN_CHEAPER]:
        witness = verdict.witness
        why = (
            told(result.study.brief, witness)
            if witness is not None
            else "; ".join(
                bracket_words(row) for row in verdict.rows if row.status in ("undecided", "sampled")
            )
        )
        rows.append((f"{verdict.cost:g}", design_words(result, verdict), STATUS_WORDS[verdict.status], why))
    if not rows:
        return None
    note = (
        ""
        if len(every) <= SHOWN_CHEAPER
        else f"The first {SHOWN_CHEAPER} of {len(every)}; all are in proof-record.json."
    )
    return Table(
        "Cheaper designs over the scatter",
        ("cost", "design", "status", "why"),
        tuple(rows),
        frozenset({0}),
        note,
    )


def yield_table(result: Result) -> Table | None:
    """Return the yields of the front's points."""
    robust = result.robust
    if robust is None or robust.judge != "distribution":
        return None
    rows = []
    for point, found in zip(result.front.points, robust.yields, strict=True):
        if found is None:
            continue
        rows.append(
            (
                objective_text(point, "cost"),
                design_text(point.design),
                f"{100 * found.share:.2f} %",
                f"{100 * found.low:.2f} to {100 * found.high:.2f} %",
                f"{found.met} of {found.samples}",
                "; ".join(f"{label}: {count}" for label, count in found.missed[:3]),
            )
        )
    scatter = result.study.brief.scatter
    assert scatter is not None
    note = (
        f"Share of machines that meet the brief, factors {scatter.distribution}; interval of confidence "
        f"{100 * scatter.confidence:g} % (Clopper and Pearson). Samples from a scrambled Sobol sequence."
    )
    columns = ("cost", "design", "yield", "confidence interval", "samples that met", "missed most often")
    return Table("Yield over the scatter", columns, tuple(rows), frozenset({0, 2, 3, 4}), note)


def robust_tables(result: Result) -> tuple[Table, ...]:
    """Return all tables on the scatter, in the order of a review."""
    robust = result.robust
    if robust is None:
        return ()
    found = [price_table(result)]
    if robust.winner is not None:
        found.append(worst_table(result.study.brief, robust.winner))
    elif robust.nominal is not None:
        found.append(worst_table(result.study.brief, robust.nominal))
    found += [points_table(result), cheaper_table(result), yield_table(result)]
    return tuple(table for table in found if table is not None)
