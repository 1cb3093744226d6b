"""Tables of a study as a whole: front, comparison, alternatives, reasons, proof and inputs."""

from collections import Counter

from detune.ground.units import show
from detune.report.alternatives import Alternative
from detune.report.plots.modes_speed import excitation_sources
from detune.report.service_loads import ServiceLoad
from detune.report.summary import comparison_rows
from detune.report.tables import Table
from detune.report.words import (
    OBJECTIVE_WORDS,
    design_text,
    frequency_text,
    margin_text,
    number,
    objective_text,
    row_text,
)
from detune.response.assessment import Assessment
from detune.study.run import Result

PARTLY = "(without records and passages, for which there was no time)"


def front_table(result: Result) -> Table:
    """Return the points of the front with every objective and the requirement that is tightest."""
    rows = tuple(
        (
            str(index + 1),
            *point.design.parts,
            point.design.ballast_name,
            *(objective_text(point, name) for name in OBJECTIVE_WORDS),
            point.tightest.label,
        )
        for index, point in enumerate(result.front.points)
    )
    groups = result.study.brief.groups
    columns = ("number", *groups, "ballast", *OBJECTIVE_WORDS.values(), "tightest requirement")
    first = 2 + len(groups)
    return Table("Points of the front", columns, rows, frozenset({0, *range(first - 1, first + 5)}))


def comparison_table(result: Result) -> Table:
    """Return the named designs beside the answer (or, without one, beside the closest design)."""
    subject = result.subject
    heads = [f"named {i + 1}" if len(result.compared) > 1 else "named" for i in range(len(result.compared))]
    shown: list[Assessment] = list(result.compared)
    if subject is not None:
        shown.insert(0, subject)
        heads.insert(0, "answer" if result.answer is not None else "closest")
    rows = tuple((name, *cells) for name, cells in comparison_rows(shown))
    return Table("Named designs side by side", ("", *heads), rows, note="In brackets the margin.")


def alternatives_table(result: Result, alternatives: tuple[Alternative, ...]) -> Table:
    """Return the next cheaper and the next safer choices, and why they are not the answer."""
    brief = result.study.brief
    rows = []
    for item in alternatives:
        a = item.assessment
        failed = "; ".join(row_text(brief, row) for row in a.failed[:3])
        more = f"; and {len(a.failed) - 3} more" if len(a.failed) > 3 else ""
        why = f"misses {failed}{more}" if a.failed else item.why
        rows.append(
            (
                item.what,
                design_text(a.design),
                objective_text(a, "cost"),
                objective_text(a, "separation"),
                margin_text(a.least_margin),
                why,
            )
        )
    columns = ("choice", "design", "cost", "separation", "least margin", "why it is not the answer")
    return Table("Next cheaper and next safer choices", columns, tuple(rows), frozenset({2, 3, 4}))


def reasons_summary_table(result: Result) -> Table:
    """Return for each group how many parts fell out, by the requirement their closest design misses most."""
    counts: Counter[tuple[str, str]] = Counter()
    for reason in result.reasons:
        if reason.meets:
            counts[(reason.group, "in a design that meets the brief")] += 1
        elif reason.filtered is not None:
            counts[(reason.group, f"left out before: {reason.filtered}")] += 1
        else:
            counts[(reason.group, reason.hardest_rule or "not looked at")] += 1
    rows = tuple(
        (group, rule, str(n)) for (group, rule), n in sorted(counts.items(), key=lambda i: (i[0][0], -i[1]))
    )
    columns = ("group", "what became of the part: hardest requirement", "parts")
    return Table("Why parts fell out, in short", columns, rows, frozenset({2}))


def reasons_table(result: Result) -> Table:
    """Return what became of every part: the first and the hardest rule, the number excluded, the closest design."""
    rows = []
    for reason in result.reasons:
        if reason.meets:
            cheapest = "" if reason.cheapest is None else number(reason.cheapest, 6)
            words = (f"{reason.meets} designs with it meet, from cost {cheapest}", "", "", "")
        elif reason.filtered is not None:
            words = (f"left out before: {reason.filtered}", "", "", "")
        else:
            margin = "" if reason.hardest_margin is None else margin_text(reason.hardest_margin)
            first = (
                f"{reason.first_rule}: {reason.first_excluded} of {reason.designs}"
                if reason.first_rule
                else ""
            )
            hardest = reason.hardest_rule or ""
            words = (first, hardest if reason.whole else f"{hardest} {PARTLY}", margin, reason.closest or "")
        rows.append((reason.group, reason.mount.part, reason.mount.catalog, *words))
    columns = (
        "group",
        "part",
        "list",
        "first rule, designs excluded",
        "hardest rule",
        "margin there",
        "closest design",
    )
    note = (
        "First rule: the first in the order of the calculation that excluded designs with this part. Hardest rule: the "
        "requirement that the closest of its designs misses most."
    )
    return Table("Every part", columns, tuple(rows), frozenset({5}), note)


def proof_table(result: Result) -> Table:
    """Return the proof record: every rule that excluded designs, and the sum."""
    record = result.outcome.record
    rows = [(rule.stage, rule.rule, str(rule.excluded)) for rule in record.rules if rule.excluded]
    silent = sum(1 for rule in record.rules if not rule.excluded)
    excluded = sum(rule.excluded for rule in record.rules)
    rows += [
        ("", f"{silent} further rules excluded none that was left", "0"),
        ("", "excluded in all", str(excluded)),
        ("", "met every requirement", str(record.met)),
        ("", "sum", str(excluded + record.met)),
        ("", "designs", str(record.designs)),
    ]
    return Table(
        "Designs excluded by each rule, each counted once",
        ("stage", "rule", "designs"),
        tuple(rows),
        frozenset({2}),
    )


def speeds_table(result: Result, assessment: Assessment) -> Table:
    """Return the speeds at which an order meets a mode, inside the range of some condition."""
    rows: list[tuple[float, tuple[str, ...]]] = []
    for source in excitation_sources(result.study.brief):
        for span in source.ranges:
            state = "steady" if span.steady else "passed through"
            for order in span.orders:
                for mode in assessment.modes:
                    speed = mode.frequency / order
                    shown = frequency_text(speed, source.is_shaft)
                    if span.low <= speed <= span.high:
                        rows.append(
                            (speed, (source.name, shown, f"{order:g}", mode.name, span.condition, state))
                        )
    columns = ("source", "speed", "order", "mode", "condition", "state")
    note = "Pass these speeds without stopping; the amplitudes there are in the margins of the condition."
    ordered = tuple(cells for _, cells in sorted(rows, key=lambda row: row[0]))
    return Table("Speeds at which an order meets a mode", columns, ordered, frozenset({1, 2}), note)


def service_table(loads: tuple[ServiceLoad, ...]) -> Table:
    """Return the dynamic forces into the floor and the movement of the named points, the three axes side by side."""
    rows: dict[tuple[str, str, str], dict[str, str]] = {}
    for load in loads:
        where = frequency_text(load.frequency, load.is_shaft)
        text = show(load.value, load.unit) + (f" at {where}" if where else "") if load.value else "none"
        rows.setdefault((load.condition, load.what, load.place), {})[load.direction] = text
    note = (
        "Peak values over the whole range of the condition; sources with speeds of their own are added linearly. The "
        "force into the floor is the phasor sum over all parts and connections, each with its phase; beside it the "
        "magnitudes are added as if all pushed together (given connections as one), which no phase can exceed. Of "
        "damping whose kind a list leaves open, the worse reading."
    )
    return Table(
        "Forces into the floor and movement at the points",
        ("condition", "quantity", "place", "x", "y", "z"),
        tuple((*key, cells["x"], cells["y"], cells["z"]) for key, cells in rows.items()),
        frozenset({3, 4, 5}),
        note,
    )


def inputs_table(result: Result) -> Table:
    """Return every file that was read with its hash."""
    return Table("Files read", ("file", "SHA-256"), result.study.hashes)


def objective_words(result: Result) -> str:
    """Return the traded objectives in words, with the value of the answer."""
    words = " against ".join(OBJECTIVE_WORDS[name] for name in result.front.trade)
    answer = result.robust_answer or (None if result.guaranteed else result.answer)
    if answer is None:
        return words
    values = {name: objective_text(answer, name) for name in result.front.trade}
    return f"{words} (answer: {', '.join(f'{OBJECTIVE_WORDS[n]} {v}' for n, v in values.items())})"
