"""The report and the result folder of a sizing study."""

from functools import partial
from importlib.resources import files
from pathlib import Path
from types import ModuleType

from detune.report import (
    tables,
    tables_absorber,
    tables_convex,
    tables_nearest,
    tables_opinion,
    tables_size_scatter,
    tables_sizing,
    tables_specification,
)
from detune.report.figures import Drawn, draw_each
from detune.report.folder import MARK, write_whole
from detune.report.page import TEMPLATE, Section
from detune.report.plots import sizing_absorber, sizing_front, sizing_map
from detune.report.points_to_check import points_to_check
from detune.report.strict_json import json_text
from detune.report.tables_sizing import GOALS, goal_text
from detune.report.words import percent, row_text
from detune.sizing.made_parts import sizing_of
from detune.solvers.size_conflict import conflict_text
from detune.solvers.size_specification import PurchaseSpecification
from detune.study.cautions import cautions
from detune.study.size import SizedBest, SizingResult

# Branches besides the best that the terminal lists.
SHOWN = 6
PLOTS: dict[str, ModuleType] = {
    "sizing-map": sizing_map,
    "sizing-front": sizing_front,
    "sizing-absorber": sizing_absorber,
}


def draw_sizing(result: SizingResult) -> tuple[Drawn, ...]:
    """Return every plot that has something to show."""
    return draw_each(PLOTS, result)


def sizing_summary(result: SizingResult) -> str:
    """The answer in a few lines, for the terminal."""
    brief = result.study.brief
    goal = sizing_of(brief).goal
    lines = [brief.title, ""]
    best = result.answer
    if best is None:
        lines.append(_none(result))
    else:
        word = "least" if sizing_of(brief).minimise else "greatest"
        lines.append(f"{word} {GOALS[goal]} {goal_text(goal, best.objective)} ({best.name}); {result.worth}")
        table = tables_sizing.unknowns_table(result, best)
        lines += [f"  {row[0]}: {row[1]}" for row in table.rows]
        lines.append(f"Least margin: {row_text(brief, best.assessment.tightest)}.")
        others = [branch for branch in result.branches if branch is not best]
        lines += [_other(result, b, goal) for b in others[:SHOWN]]
        lines += [f"and {len(others) - SHOWN} more branches, in the report"] if len(others) > SHOWN else []
    over = tables_size_scatter.over_text(result)
    lines += [over] if over else []
    forms = tables_absorber.forms_text(result)
    lines += [forms] if forms else []
    lines += [tables_opinion.opinion_text(result)] if result.opinion is not None else []
    lines += [
        f"Under the stated scatter the worst response grows from {each.nominal:.4g} to {each.greatest:.4g} of "
        f"its limit (absorber {each.absorber}; sampled, no proof)"
        for each in result.scattered
    ]
    lines += [
        text for text in (tables_sizing.searches_text(result), tables_sizing.slopes_text(result)) if text
    ]
    near = tables_nearest.nearest_text(result)
    lines += [near] if near else []
    lines += [f"Caution: {text}" for text in result.cautions]
    lines.append(f"{result.method} ({result.why_method}); {result.seconds:.1f} s")
    return "\n".join(lines)


def _other(result: SizingResult, branch: SizedBest, goal: str) -> str:
    text = f"Other branch: {branch.name}, {GOALS[goal]} {goal_text(goal, branch.objective)}"
    if not branch.assessment.meets:
        return f"{text}; misses {branch.assessment.tightest.label}"
    return text if result.over is None else f"{text}; {tables_sizing.met_text(result)}"


def _none(result: SizingResult) -> str:
    if result.exact is not None and not result.exact.branches:
        text = "No stiffness, damping and ballast within the bounds meets the brief"
        if not result.exact.proven:
            return (
                "None found that meets the brief; the search ended before it was proven that there is none."
            )
        return f"{text} (proven)." + ("" if result.conflict is None else f" {conflict_text(result.conflict)}")
    if result.branches:
        assessment = result.branches[0].assessment
        worst = assessment.tightest
        text = (
            f"None found that meets the brief; the best one misses {worst.label} by {percent(-worst.margin)}"
        )
        missed = dict.fromkeys(row.label for row in assessment.margins if not row.margin >= 0.0)
        also = [label for label in missed if label != worst.label]
        return f"{text}, and {', '.join(also[:SHOWN])}." if also else f"{text}."
    return "None found."


def sizing_sections(result: SizingResult, plots: dict[str, Drawn]) -> tuple[Section, ...]:
    """Return the sections of the report; those with nothing to say are left out."""
    brief, best = result.study.brief, result.answer
    goal = sizing_of(brief).goal
    found: list[Section] = []
    if best is None:
        found.append(Section("answer", "No design meets the brief", (_none(result),)))
    else:
        text = (
            f"{tables_size_scatter.meets_text(result)}: {GOALS[goal]} {goal_text(goal, best.objective)}, "
            f"{best.name}. Least margin at listed values: "
            f"{row_text(brief, best.assessment.tightest)}."
        )
        worth = f"What this is worth: {result.worth}. {result.why_method[0].upper()}{result.why_method[1:]}."
        table = tables_sizing.unknowns_table(result, best)
        points = (*result.cautions, *points_to_check(brief, best.assessment))
        found.append(Section("answer", "The sized design", (text, worth), points, tables=(table,)))
    found.append(Section("cautions", "Cautions", points=cautions(brief)))
    found += _scatter(result)
    if result.branches:
        told = (tables_sizing.searches_text(result), tables_sizing.slopes_text(result))
        table = tables_sizing.branches_table(result)
        found.append(Section("branches", table.title, tuple(text for text in told if text), tables=(table,)))
    if result.opinion is not None:
        text = tables_opinion.opinion_text(result)
        found.append(
            Section("opinion", "Second opinion", (text,), tables=(tables_opinion.opinion_table(result),))
        )
    if result.exact is not None and result.exact.statement.relaxed:
        text = "What the one-axis problem leaves to the assessor, which judged every branch in full:"
        found.append(Section("relaxed", "What the assessor decided", (text,), result.exact.statement.relaxed))
    if "sizing-map" in plots:
        found.append(Section("map", "Map of what is feasible", plots=(plots["sizing-map"],)))
    if result.front is not None:
        shown = (plots["sizing-front"],) if "sizing-front" in plots else ()
        heading = "Front: " + " against ".join(GOALS[name] for name in result.front.trade)
        found.append(Section("front", heading, plots=shown, folded=(tables_sizing.front_table(result),)))
    if result.nearest is not None:
        found.append(Section("nearest", "Nearest real parts", tables=(tables_nearest.nearest_table(result),)))
    found += _further(result, plots)
    if best is not None:
        found.append(
            Section(
                "margins",
                "Margins of the sized design",
                tables=(tables.margins_table(brief, best.assessment),),
            )
        )
        shown_tables = (tables.stations_table(best.assessment), tables.modes_table(best.assessment))
        found.append(Section("stations", "Stations and modes", tables=shown_tables))
    hashes = tables.Table("Files read", ("file", "SHA-256"), result.study.hashes)
    found.append(Section("inputs", "Inputs in full", tables=(hashes,), source=result.study.source))
    return tuple(found)


def _scatter(result: SizingResult) -> list[Section]:
    text, table = tables_size_scatter.over_text(result), tables_size_scatter.over_table(result)
    if not text:
        return []
    shown = () if table is None else (table,)
    return [Section("scatter", "Over the stated scatter", tuple(text.split("\n")), tables=shown)]


def _further(result: SizingResult, plots: dict[str, Drawn]) -> list[Section]:
    found = []
    if result.convex:
        points = tables_convex.convex_points(result)
        found.append(
            Section("convex", "Convex answers", points=points, tables=(tables_convex.convex_table(result),))
        )
    elif result.no_convex is not None:
        found.append(Section("convex", "Convex answers", (f"None: {result.no_convex}.",)))
    if result.detuned:
        shown = [tables_absorber.forms_table(result)] if result.closed_forms else []
        shown += [tables_absorber.scatter_table(result)] if result.scattered else []
        drawn = (plots["sizing-absorber"],) if "sizing-absorber" in plots else ()
        folded = (tables_absorber.detuning_table(result),)
        found.append(Section("absorber", "Absorber", plots=drawn, tables=tuple(shown), folded=folded))
    bought = result.specification
    if isinstance(bought, str):
        found.append(Section("specification", "Purchase specification", (f"None: {bought}.",)))
    elif bought is not None:
        text = tables_specification.specification_text(result, bought)
        table = tables_specification.specification_table(bought)
        found.append(Section("specification", table.title, (text,), tables=(table,)))
    return found


def sizing_page(result: SizingResult, drawn: tuple[Drawn, ...]) -> str:
    """Return the report as HTML, opening without a network."""
    import jinja2

    environment = jinja2.Environment(
        autoescape=True, trim_blocks=True, lstrip_blocks=True, undefined=jinja2.StrictUndefined
    )
    environment.filters["tied"] = lambda text: text.replace(" %", "\u00a0%")
    text = files("detune.report").joinpath("templates", TEMPLATE).read_text(encoding="utf-8")
    return environment.from_string(text).render(
        title=f"{result.study.brief.title}: sizing",
        notes=result.study.brief.notes,
        partial="",
        sections=sizing_sections(result, {plot.name: plot for plot in drawn}),
    )


def write_sizing(result: SizingResult, folder: str | Path, overwrite: bool = False) -> Path:
    """Write the result folder of a sizing study and return its path. Raises FolderExists as `write_folder` does."""
    return write_whole(folder, partial(_fill, result), overwrite)


def _fill(result: SizingResult, folder: Path) -> None:
    drawn = draw_sizing(result)
    (folder / "plots").mkdir()
    texts = {
        "study.toml": result.study.source,
        "inputs.json": json_text({"sha256": dict(result.study.hashes)}),
        "sizing.json": json_text(_numbers(result)),
        MARK: json_text(
            {"method": result.method, "worth": result.worth, "bound": result.bound, "seconds": result.seconds}
        ),
        "report.html": sizing_page(result, drawn),
    }
    shown = [tables_sizing.branches_table(result)] if result.branches else []
    shown += [tables_sizing.front_table(result)] if result.front is not None else []
    shown += (
        [tables_nearest.nearest_table(result)]
        if result.nearest is not None and result.answer is not None
        else []
    )
    if isinstance(result.specification, PurchaseSpecification):
        shown.append(tables_specification.specification_table(result.specification))
    shown += [tables_absorber.forms_table(result)] if result.closed_forms else []
    shown += [tables_opinion.opinion_table(result)] if result.opinion is not None else []
    for table in shown:
        texts[f"{table.title.lower().replace(' ', '-')}.csv"] = _csv(table)
    for plot in drawn:
        texts[f"plots/{plot.name}.svg"] = plot.svg
        (folder / "plots" / f"{plot.name}.png").write_bytes(plot.png)
    for name, text in texts.items():
        (folder / name).write_text(text, encoding="utf-8", newline="\n")


def _csv(table: tables.Table) -> str:
    import csv
    import io

    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(table.columns)
    writer.writerows(table.rows)
    return text.getvalue()


def _numbers(result: SizingResult) -> dict[str, object]:
    unknowns = sizing_of(result.study.brief).unknown
    return {
        "title": result.study.brief.title,
        "method": result.method,
        "worth": result.worth,
        "bound": result.bound,
        "exit_code": result.exit_code,
        "unknowns": [unknown.title for unknown in unknowns],
        "branches": result.branches,
        "nearest": None if result.nearest is None else result.nearest.designs,
        "front": None if result.front is None else result.front.points,
        "second_opinion": result.opinion,
        "convex": result.convex,
        "parts_bounds": result.parts_bounds,
        "closed_forms": result.closed_forms,
        "scattered": result.scattered,
        "over_scatter": tables_size_scatter.over_numbers(result),
        "cautions": result.cautions,
        "units": "SI: m, kg, s, N, rad, Hz; cost in the currency of the study; margins and separation are ratios",
    }
