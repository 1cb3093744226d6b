"""Results as CSV text: numbers in SI, the unit in each header."""

import csv
import io
import math
from collections.abc import Iterable, Sequence

from detune.ground.units import KINDS
from detune.report.forcing_shares import ForcingShare
from detune.report.response_data import ResponseCurve
from detune.report.words import OBJECTIVE_WORDS
from detune.response.assessment import Assessment
from detune.response.design import Design
from detune.study.front import objective_of
from detune.study.run import Result

Cell = str | float | int | None
BALLAST = ("ballast [kg]", "ballast pieces")
OBJECTIVE_UNITS: dict[str, str] = {"added-mass": "kg"}


def csv_text(columns: Sequence[str], rows: Iterable[Sequence[Cell]]) -> str:
    """Return CSV (RFC 4180 with plain line ends); None and what is no number are left empty."""
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows([_cell(cell) for cell in row] for row in rows)
    return out.getvalue()


def _cell(cell: Cell) -> str:
    if cell is None or (isinstance(cell, float) and math.isnan(cell)):
        return ""
    if isinstance(cell, float):
        return f"{cell:.9g}"
    return str(cell)


def _objective_headers() -> list[str]:
    return [f"{word} [{OBJECTIVE_UNITS.get(name, '-')}]" for name, word in OBJECTIVE_WORDS.items()]


def front_csv(result: Result) -> str:
    """Return the points of the front: parts, ballast and every objective, as assessed."""
    groups = result.study.brief.groups
    rows: list[list[Cell]] = []
    for index, point in enumerate(result.front.points):
        design = point.design
        values: list[Cell] = [objective_of(point, name) for name in OBJECTIVE_WORDS]
        rows.append([index + 1, *design.parts, *_ballast(design), *values, point.tightest.label])
    columns = ["number", *(f"part of {g}" for g in groups), *BALLAST, *_objective_headers(), "tightest"]
    return csv_text(columns, rows)


def designs_csv(result: Result) -> str:
    """Return every design that met the requirements in the solver's evaluation, cheapest first.

    Those marked as assessed are the points of the front; the others are the solver's claim.
    """
    front, problem = result.front, result.problem
    assessed = set(front.index)
    order = sorted(range(front.designs.count), key=lambda i: (float(front.objectives["cost"][i]), i))
    rows: list[list[Cell]] = []
    for i in order:
        design = problem.design(front.designs, i)
        values: list[Cell] = [float(front.objectives[name][i]) for name in OBJECTIVE_WORDS]
        rows.append([*design.parts, *_ballast(design), *values, "yes" if i in assessed else "no"])
    groups = result.study.brief.groups
    return csv_text([*(f"part of {g}" for g in groups), *BALLAST, *_objective_headers(), "assessed"], rows)


def _ballast(design: Design) -> tuple[Cell, Cell]:
    """Mass of the ballast, and its pieces where it comes from a list."""
    return design.ballast, "" if design.stack is None else design.stack.part


def margins_csv(assessment: Assessment) -> str:
    """Return every requirement of an assessed design."""
    columns = ["condition", "place", "quantity", "unit", "value", "lower limit", "upper limit", "margin [-]"]
    columns += ["at speed or frequency [Hz]", "note", "level reference"]
    rows: list[list[Cell]] = [
        [
            r.condition,
            r.place,
            r.quantity,
            KINDS[r.unit].si_unit or "-",
            r.value,
            r.lower,
            r.upper,
            r.margin,
            r.frequency,
            r.note,
            r.reference,
        ]
        for r in assessment.margins
    ]
    # What no requirement says is told at the end, so that it cannot be missed.
    rows += [["note", "", "", "", None, None, None, None, None, note, None] for note in assessment.notes]
    return csv_text(columns, rows)


def contributions_csv(shares: Sequence[ForcingShare]) -> str:
    """Return the share of each forcing in each governing response."""
    columns = ["condition", "place", "quantity", "unit", "forcing", "kind of forcing", "value of it alone"]
    columns += ["share [-]", "static part", "value of all together", "limit"]
    rows: list[list[Cell]] = []
    for s in shares:
        r = s.of.row
        head: list[Cell] = [r.condition, s.of.place, r.quantity, KINDS[r.unit].si_unit or "-"]
        rows.append([*head, s.forcing, s.kind, s.alone, s.share, s.at_rest, r.value, r.upper])
    return csv_text(columns, rows)


def stations_csv(assessment: Assessment) -> str:
    """Return what the fitter needs at each station."""
    columns = ["station", "group", "part", "parts in parallel", "x [m]", "y [m]", "z [m]", "axial load [N]"]
    columns += ["lateral load [N]", "compression [m]", "free height [m]", "installed height [m]"]
    rows: list[list[Cell]] = [
        [
            *(s.station, s.group, s.part, s.parallel, *s.position, s.axial_load, s.lateral_load),
            *(s.compression, s.free_height, s.installed_height, s.load_min, s.load_max),
        ]
        for s in assessment.stations
    ]
    return csv_text([*columns, "load_min [N]", "load_max [N]"], rows)


def modes_csv(assessment: Assessment) -> str:
    """Return every mode with its separation and its participation in the six directions."""
    columns = ["frequency [Hz]", "name", "amplification [-]", "separation [-]", "interval from [Hz]"]
    columns += [
        "interval to [Hz]",
        "exempt",
        *(f"participation {d} [-]" for d in ("x", "y", "z", "rx", "ry", "rz")),
    ]
    rows: list[list[Cell]] = []
    for m in assessment.modes:
        low, high = m.interval or (None, None)
        exempt = "yes" if m.exempt else "no"
        rows.append([m.frequency, m.name, m.amplification, m.separation, low, high, exempt, *m.participation])
    return csv_text(columns, rows)


def why_csv(result: Result) -> str:
    """Return what became of every part of every group."""
    columns = ["group", "part", "catalog", "file line", "designs with it", "of these meet", "least cost [-]"]
    columns += [
        "filtered because",
        "first rule",
        "excluded by it",
        "hardest rule",
        "margin there [-]",
        "closest design",
        "judged by every requirement",
    ]
    rows: list[list[Cell]] = [
        [
            *(
                r.group,
                r.mount.part,
                r.mount.catalog,
                r.mount.line,
                r.designs,
                r.meets,
                r.cheapest,
                r.filtered,
            ),
            *(r.first_rule, r.first_excluded, r.hardest_rule, r.hardest_margin, r.closest),
            None if r.hardest_rule is None else "yes" if r.whole else "no",
        ]
        for r in result.reasons
    ]
    return csv_text(columns, rows)


def responses_csv(curves: Sequence[ResponseCurve]) -> str:
    """Return every response curve, one row a speed."""
    columns = ["condition", "place", "quantity", "source", "speed or frequency [Hz]", "judged here"]
    rows: list[list[Cell]] = []
    for c in curves:
        unit = KINDS[c.row.unit].si_unit or "-"
        head: list[Cell] = [c.row.condition, c.row.place, c.row.quantity, c.source]
        for speed, value, inside in zip(c.speed.tolist(), c.value.tolist(), c.inside.tolist(), strict=True):
            rows.append([*head, f"{speed:.6g}", "yes" if inside else "no", f"{value:.6g}", c.limit, unit])
    return csv_text([*columns, "value", "limit", "unit"], rows)
