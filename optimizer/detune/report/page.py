"""The report: one self-contained page for a design review, opening without a network."""

from dataclasses import dataclass
from importlib.resources import files
from pathlib import Path

from detune.brief.brief import Brief
from detune.ground.units import show
from detune.report import tables, tables_study
from detune.report.contributions import Contribution
from detune.report.figures import Drawn, draw_all
from detune.report.gathered import Gathered, gather, left_out_of
from detune.report.points_to_check import points_to_check, study_points
from detune.report.robust import robust_lines, robust_tables
from detune.report.summary import none_lines, partial_words, proof_lines
from detune.report.tables import Table
from detune.report.tables_contributions import contributions_table
from detune.report.tables_dwell import dwell_table, dwell_words
from detune.report.tables_listed import absorbers_table, ballast_table
from detune.report.words import (
    design_text,
    limit_text,
    margin_text,
    objective_text,
    row_text,
    separation_text,
    value_text,
)
from detune.response.assessment import Assessment
from detune.study.after_search import AfterSearch
from detune.study.cautions import cautions
from detune.study.run import Result

TEMPLATE = "report.html.jinja"

COMPUTED: tuple[tuple[str, str], ...] = (
    (
        "Static loads, sag, tilt",
        "Equilibrium of gravity and steady loads at the static stiffness of parts, given connections and floor "
        "(static equilibrium). Static and dynamic stiffness never stand in for each other.",
    ),
    (
        "Modes",
        "Undamped eigenproblem K u = (2 pi f)^2 M u at the dynamic stiffness, all bodies in their free directions and "
        "the floor's vertical freedom (undamped modes); the mode's loss factor from the energy it loses in the parts.",
    ),
    (
        "Separation",
        "f / f_high - 1 above an excitation interval, 1 - f / f_low below it, negative inside; intervals of steady "
        "conditions, each order its own (separation).",
    ),
    (
        "Responses",
        "D(w) q = f(w) with D = -w^2 M + sum of B^T K_s(w) B, K_s = k (1 + j eta) + j w c for each part (complex "
        "response). Orders of one shaft share one speed and are added by their amplitudes, as phasors where their "
        "phase is known; rms values as squares. Resultants are the major axis of the ellipse.",
    ),
    (
        "Worst over speed",
        "The supremum over the continuous range: samples on a background and round every complex pole, then every "
        "local maximum closed in on (supremum over a range). It is no maximum over a grid.",
    ),
    (
        "Power",
        "Power put in by the forces against power dissipated in parts, connections and floor (energy balance).",
    ),
    (
        "Who says so",
        "The solver goes through the designs with batch equations; each point of the front, the answer and every named "
        "design is then assessed from the brief on its own, with other matrices and another search for the worst "
        "speed. Only the assessment says that a design meets the brief.",
    ),
)


@dataclass(frozen=True)
class Section:
    """One section of the page: heading, text before, plots, tables, and tables that are folded away."""

    name: str
    heading: str
    texts: tuple[str, ...] = ()
    points: tuple[str, ...] = ()
    plots: tuple[Drawn, ...] = ()
    tables: tuple[Table, ...] = ()
    folded: tuple[Table, ...] = ()
    source: str = ""


def write_page(result: Result, path: str | Path) -> None:
    """Write the report of a study as one HTML file."""
    Path(path).write_text(page_text(result, draw_all(result)), encoding="utf-8", newline="\n")


def page_text(
    result: Result,
    drawn: tuple[Drawn, ...],
    gathered: Gathered | None = None,
    work: AfterSearch | None = None,
) -> str:
    """Return the report as HTML, with plots that were drawn already.

    gathered: the tables beside the assessment, where they are there already; work: what tells of what was left out.
    """
    import jinja2

    environment = jinja2.Environment(
        autoescape=True, trim_blocks=True, lstrip_blocks=True, undefined=jinja2.StrictUndefined
    )
    # A number and its per cent sign stay on one line.
    environment.filters["tied"] = lambda text: text.replace(" %", "\u00a0%")
    text = files("detune.report").joinpath("templates", TEMPLATE).read_text(encoding="utf-8")
    return environment.from_string(text).render(
        title=result.study.brief.title,
        notes=result.study.brief.notes,
        partial=partial_words(result),
        sections=sections(result, {plot.name: plot for plot in drawn}, gathered, work),
    )


def sections(
    result: Result,
    plots: dict[str, Drawn],
    gathered: Gathered | None = None,
    work: AfterSearch | None = None,
) -> tuple[Section, ...]:
    """Return the sections in the order of a design review; those with nothing to say are left out."""
    gathered = gathered or gather(result)
    subject = result.subject
    found: list[Section] = [_answer(result)]
    left_out, why = left_out_of(result, work)
    if left_out:
        found.append(Section("left-out", "Left out", (f"Left out {why}:",), left_out))
    found.append(Section("cautions", "Cautions", points=cautions(result.study.brief)))
    shown = robust_tables(result)
    if shown:
        found.append(Section("scatter", "Over the scatter", texts=tuple(robust_lines(result)), tables=shown))
    if result.problem.assumed:
        found.append(Section("assumed", "What was assumed", points=result.problem.assumed))
    if "front" in plots:
        table = (tables_study.front_table(result),) if result.front.points else ()
        found.append(
            Section(
                "front",
                f"Front: {tables_study.objective_words(result)}",
                plots=(plots["front"],),
                tables=table,
            )
        )
    if subject is not None:
        found += _of_design(result, subject, plots, gathered)
    if result.compared:
        found.append(Section("compared", "Named designs", tables=(tables_study.comparison_table(result),)))
    found += _choices(result, gathered)
    found += _why(result, plots)
    named = "The equations with their sources stand in docs/equations.md under the names in brackets."
    computed = tuple(f"{what}: {how}" for what, how in COMPUTED)
    found.append(Section("computed", "How each number was computed", texts=(named,), points=computed))
    found.append(_inputs(result))
    return tuple(found)


def _answer(result: Result) -> Section:
    brief = result.study.brief
    if result.answer is None:
        lines = none_lines(result)
        head = lines[: lines.index("")] if "" in lines else lines
        texts = [" ".join(line.strip() for line in head)]
        points: tuple[str, ...] = study_points(result)
        excluded = _most_excluded(result)
        shown: tuple[Table, ...] = (excluded,) if excluded.rows else ()
        if result.closest is not None:
            texts.append(f"Closest design found. {_described(result.closest)}.")
            points = (*points_to_check(brief, result.closest), *points)
            shown = (*shown, tables.answer_table(brief, result.closest))
        heading = "No design meets the brief" if result.outcome.none_exists else "None found"
        return Section("answer", heading, tuple(texts), points, tables=shown)
    answer = result.subject or result.answer
    texts = [
        *robust_lines(result),
        f"{_described(answer)}{' (at listed values)' if result.robust is not None else ''}.",
        f"Least margin: {row_text(brief, answer.tightest)}.",
        *proof_lines(result),
    ]
    points = (*points_to_check(brief, answer), *study_points(result))
    return Section("answer", "The answer", tuple(texts), points, tables=(tables.answer_table(brief, answer),))


def _described(assessment: Assessment) -> str:
    meets = "Meets the brief" if assessment.meets else "Does not meet the brief"
    return (
        f"{meets}: {design_text(assessment.design)}. Cost {objective_text(assessment, 'cost')}, separation "
        f"{separation_text(assessment.separation)}, least margin {margin_text(assessment.least_margin)}, "
        f"part numbers {assessment.part_numbers}"
    )


def _most_excluded(result: Result) -> Table:
    ranked = sorted(
        (rule for rule in result.outcome.record.rules if rule.excluded), key=lambda rule: -rule.excluded
    )
    rows = tuple((rule.rule, rule.stage, str(rule.excluded)) for rule in ranked[:6])
    note = "Each design is counted at the first rule it failed; it may fail others as well."
    return Table("Rules that excluded most", ("rule", "stage", "designs"), rows, frozenset({2}), note)


def _of_design(
    result: Result, subject: Assessment, plots: dict[str, Drawn], gathered: Gathered
) -> list[Section]:
    brief = result.study.brief
    loads = () if gathered.loads is None else (tables_study.service_table(gathered.loads),)
    of = "" if result.answer is not None else " of the closest design"
    missed = tuple(
        f"{row.label}: {value_text(row)} where the limit is {limit_text(row)}, margin {margin_text(row.margin)}"
        for row in subject.failed
    )
    found = [
        Section("margins", f"Margins{of}", points=missed, plots=_only(plots, "margins"),
                tables=(tables.margins_table(brief, subject),)),
        Section("stations", f"Stations{of}: installation sheet", texts=(_total_load(subject),),
                tables=(tables.stations_table(subject), *_besides(brief, subject), *loads)),
    ]  # fmt: skip
    barred = dwell_table(brief, subject)
    if barred is not None:
        found.append(
            Section("dwell", f"Speeds not to dwell at{of}", texts=dwell_words(brief), tables=(barred,))
        )
    if "response" in plots:
        found.append(Section("responses", f"Responses against limits{of}", plots=_only(plots, "response")))
    found += _in_time_and_noise(gathered.sources or (), plots, of)
    speeds = tables_study.speeds_table(result, subject)
    shown = [tables.modes_table(subject), tables.bump_table(subject)]
    if speeds.rows:
        shown.append(speeds)
    power = tables.power_table(subject)
    if power.rows:
        shown.append(power)
    found.append(Section("modes", f"Modes{of}", plots=_only(plots, "modes-speed"), tables=tuple(shown)))
    if "stiffness-damping" in plots:
        found.append(
            Section("map", "Map of stiffness against damping", plots=_only(plots, "stiffness-damping"))
        )
    return found


def _in_time_and_noise(sources: tuple[Contribution, ...], plots: dict[str, Drawn], of: str) -> list[Section]:
    """Return what noise, shocks, records and run-ups do, where any of them acts."""
    if not sources:
        return []
    rows = [part.of for part in sources]
    present = (
        ("noise", any(row.noises for row in rows)),
        ("shocks and records", any(row.transients for row in rows)),
        ("run-ups", any(row.condition.run_up or row.condition.coast_down for row in rows)),
    )
    words = ", ".join(word for word, acts in present if acts)
    shown = (*_only(plots, "spectral-density"), *_only(plots, "shock"))
    table = contributions_table(sources)
    return [Section("sources", f"{words[0].upper()}{words[1:]}{of}", plots=shown, tables=(table,))]


def _only(plots: dict[str, Drawn], name: str) -> tuple[Drawn, ...]:
    return (plots[name],) if name in plots else ()


def _besides(brief: Brief, subject: Assessment) -> list[Table]:
    """Absorbers and ballast, where the design has any."""
    both = (absorbers_table(brief, subject), ballast_table(brief, subject))
    return [table for table in both if table.rows]


def _total_load(subject: Assessment) -> str:
    return (
        f"Static load of machine, ballast and steady loads: {show(subject.total_load, 'force')} downward in all. "
        "Given connections carry what the stations do not; the floor's own weight is not contained."
    )


def _choices(result: Result, gathered: Gathered) -> list[Section]:
    found = gathered.beside
    if found is None or not found.items:
        return []
    texts: tuple[str, ...] = ()
    if found.cheaper is not None:
        # Where cost comes first, cheaper designs that met the brief would be the answer.
        none = "; none of them meets the brief" if result.front.trade[0] == "cost" else ""
        texts = (f"{found.cheaper} designs cost less than the answer{none}.",)
    table = tables_study.alternatives_table(result, found.items)
    return [Section("choices", table.title, texts, tables=(table,))]


def _why(result: Result, plots: dict[str, Drawn]) -> list[Section]:
    record = result.outcome.record
    finished = result.outcome.stopped == "finished"
    sums = (
        f"Method: {record.method}. {record.looked_at} of {record.designs} designs were looked at in "
        f"{record.seconds:.1f} s. "
        + (
            "Every design is either excluded by a stated rule or among those that meet all."
            if record.accounted
            else "The counts do not cover every design."
        )
        + ("" if finished else " The run was stopped early: this is no proof.")
    )
    return [
        Section("why", "Why parts fell out", plots=_only(plots, "why"),
                tables=(tables_study.reasons_summary_table(result),), folded=(tables_study.reasons_table(result),)),
        Section("proof", "Proof record", texts=(sums,), tables=(tables_study.proof_table(result),)),
    ]  # fmt: skip


def _inputs(result: Result) -> Section:
    return Section(
        "inputs",
        "Inputs in full",
        texts=("The study as run; the parts lists are known by their hashes.",),
        tables=(tables_study.inputs_table(result),),
        source=result.study.source,
    )
