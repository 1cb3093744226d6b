"""The report and the result folder of a sizing study."""

import shutil
from importlib.resources import files
from pathlib import Path
from types import ModuleType

from detune.ground.units import show
from detune.report import tables, tables_absorber, tables_convex, tables_opinion, tables_sizing
from detune.report.figures import Drawn, draw_one
from detune.report.folder import MARK, check_folder, put_in_place, sibling
from detune.report.page import TEMPLATE, Section
from detune.report.plots import sizing_absorber, sizing_front, sizing_map
from detune.report.points_to_check import points_to_check
from detune.report.strict_json import json_text
from detune.report.tables_sizing import GOALS, goal_text
from detune.report.words import margin_text, row_text
from detune.sizing.made_parts import sizing_of
from detune.solvers.size_specification import PurchaseSpecification
from detune.study.cautions import CAUTIONS
from detune.study.size import SizingResult

# Branches besides the best that the terminal lists.
SHOWN = 6
PLOTS: dict[str, ModuleType] = {
    "sizing-map": sizing_map,
    "sizing-front": sizing_front,
    "sizing-absorber": sizing_absorber,
}


def draw_sizing(result: SizingResult) -> tuple[Drawn, ...]:
    """Return every plot that has something to show."""
    drawn = []
    for name, module in PLOTS.items():
        data = module.data(result)
        if data is not None:
            drawn.append(draw_one(name, module, data))
    return tuple(drawn)


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
        lines += [
            f"Other branch: {b.name}, {GOALS[goal]} {goal_text(goal, b.objective)}" for b in others[:SHOWN]
        ]
        lines += [f"and {len(others) - SHOWN} more branches, in the report"] if len(others) > SHOWN else []
    lines += [tables_opinion.opinion_text(result)] if result.opinion is not None else []
    lines += [
        f"Under the stated scatter the worst response grows from {each.nominal:.4g} to {each.greatest:.4g} of "
        f"its limit (absorber {each.absorber}; sampled, no proof)"
        for each in result.scattered
    ]
    lines += [
        text for text in (tables_sizing.searches_text(result), tables_sizing.slopes_text(result)) if text
    ]
    near = result.nearest
    if near is not None and near.designs:
        first = near.designs[0].assessment
        told = "meets the brief" if first.meets else f"misses {first.tightest.label}"
        lines.append(f"Nearest real design: {first.design}, cost {first.cost:.6g}, {told}")
    lines += [f"Caution: {text}" for text in result.cautions]
    lines.append(f"{result.method} ({result.why_method}); {result.seconds:.1f} s")
    return "\n".join(lines)


def _none(result: SizingResult) -> str:
    if result.exact is not None and not result.exact.branches:
        return "No stiffness, damping and ballast within the bounds meets the brief (proven)."
    if result.branches:
        worst = result.branches[0].assessment.tightest
        return f"None found that meets the brief; the best one misses {worst.label} by {margin_text(worst.margin)}."
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
            f"Meets the brief: {GOALS[goal]} {goal_text(goal, best.objective)}, {best.name}. Least margin: "
            f"{row_text(brief, best.assessment.tightest)}."
        )
        worth = f"What this is worth: {result.worth}. {result.why_method[0].upper()}{result.why_method[1:]}."
        table = tables_sizing.unknowns_table(result, best)
        points = (*result.cautions, *points_to_check(brief, best.assessment))
        found.append(Section("answer", "The sized design", (text, worth), points, tables=(table,)))
    found.append(Section("cautions", "Cautions", points=CAUTIONS))
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
        found.append(Section("nearest", "Nearest real parts", tables=(tables_sizing.nearest_table(result),)))
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


def _further(result: SizingResult, plots: dict[str, Drawn]) -> list[Section]:
    found = []
    if result.convex:
        points = tables_convex.convex_points(result)
        found.append(
            Section("convex", "Convex answers", points=points, tables=(tables_convex.convex_table(result),))
        )
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
        unknowns = sizing_of(result.study.brief).unknown
        held = [
            f"{u.title} {show(v, u.unit)}"
            for u, v in zip(unknowns, bought.values.tolist(), strict=True)
            if u not in bought.unknowns
        ]
        text = (
            "For a design with room inside its limits" + (f", with {', '.join(held)}" if held else "") + "."
        )
        table = tables_sizing.specification_table(bought)
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
    target = Path(folder)
    check_folder(target, overwrite)
    target.parent.mkdir(parents=True, exist_ok=True)
    building = sibling(target, "writing")
    building.mkdir()
    try:
        _fill(result, building)
        put_in_place(building, target)
    finally:
        shutil.rmtree(building, ignore_errors=True)
    return target


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
        [tables_sizing.nearest_table(result)]
        if result.nearest is not None and result.answer is not None
        else []
    )
    if isinstance(result.specification, PurchaseSpecification):
        shown.append(tables_sizing.specification_table(result.specification))
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
        "cautions": result.cautions,
        "units": "SI: m, kg, s, N, rad, Hz; cost in the currency of the study; margins and separation are ratios",
    }
