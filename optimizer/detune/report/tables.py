"""Tables of one assessed design as plain text cells, units chosen for people."""

import math
from dataclasses import dataclass

from detune.brief.brief import Brief
from detune.ground.units import show
from detune.report.words import (
    frequency_text,
    is_shaft_speed,
    limit_text,
    margin_text,
    number,
    percent,
    separation_text,
    value_text,
)
from detune.response.assessment import Assessment, ModeRow, StationRow
from detune.response.bill import bill

DIRECTIONS = ("x", "y", "z", "about x", "about y", "about z")
SMALL_SHARE = 0.005
# A lateral load below this share of the axial one is what rounding leaves of none.
ROUNDING = 1e-9


@dataclass(frozen=True)
class Table:
    """A table: a heading, column heads, rows of texts, a note. `numeric` columns are set to the right."""

    title: str
    columns: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    numeric: frozenset[int] = frozenset()
    note: str = ""


def answer_table(brief: Brief, assessment: Assessment) -> Table:
    """Return the parts list: what to buy."""
    rows = [
        (
            row.part,
            row.catalog,
            ", ".join(row.groups),
            f"{row.quantity:g} kg" if row.by_weight else f"{row.quantity:g}",
            f"{number(row.price, 6)} per kg" if row.by_weight else number(row.price, 6),
            number(row.cost, 6),
            "" if row.by_weight else "not stated" if row.stock is None else str(row.stock),
        )
        for row in bill(brief, assessment.design)
    ]
    rows.append(("total", "", "", "", "", number(assessment.cost, 6), ""))
    columns = ("part", "list", "groups", "number", "price", "cost", "in stock")
    note = "The price is that of one piece at the number bought of it together."
    return Table("Parts", columns, tuple(rows), frozenset({3, 4, 5, 6}), note)


def margins_table(brief: Brief, assessment: Assessment) -> Table:
    """Return every requirement, the least margin first."""
    rows = tuple(
        (
            row.condition,
            row.place,
            row.told,
            value_text(row),
            limit_text(row),
            margin_text(row.margin),
            frequency_text(row.frequency, is_shaft_speed(brief, row)),
        )
        for row in sorted(assessment.margins, key=lambda row: row.margin)
    )
    note = (
        "Margin: limit / value - 1 for an upper limit, value / limit - 1 for a lower one, the lesser of both for a "
        "window; positive is met. Amplitudes are peak unless rms or peak-to-peak is said. Parts at their listed values."
    )
    if any(row.reference is not None for row in assessment.margins):
        note += (
            " Levels in dB are 20 log10 of the rms value over the reference that stands with them (ISO 1683); their "
            "margin is the ratio of the amplitudes too, 10^(difference / 20 dB) - 1."
        )
    columns = ("condition", "place", "quantity", "value", "limit", "margin", "worst at")
    return Table("Margins", columns, rows, frozenset({3, 4, 5, 6}), note)


def stations_table(assessment: Assessment) -> Table:
    """Return the installation sheet: part, place, load, compression, height and shim of each station."""
    heights = [row.installed_height for row in assessment.stations if row.levels]
    known = [height for height in heights if height is not None]
    highest = max(known) if len(known) == len(heights) and known else None
    rows = tuple(_station(row, highest) for row in assessment.stations)
    note = (
        "Load and compression of one part under gravity and steady loads, at the static stiffness; creep is not "
        "contained. Shim: what brings every upright part on the floor to the height of the highest one, if the floor "
        "and the feet are as stated and level; heights scatter by 1-2 mm in common practice, so measure and shim "
        "under load."
    )
    columns = (
        *("station", "group", "part", "in parallel", "x", "y", "z", "load", "its range", "lateral load"),
        *("compression", "free height", "installed height", "shim"),
    )
    return Table("Stations", columns, rows, frozenset(range(3, 14)), note)


def _station(row: StationRow, highest: float | None) -> tuple[str, ...]:
    def length(value: float | None) -> str:
        return "not stated" if value is None else f"{1e3 * value:.1f} mm"

    shim = (
        ""
        if highest is None or row.installed_height is None or not row.levels
        else f"{1e3 * (highest - row.installed_height):.1f} mm"
    )
    return (
        row.station,
        row.group,
        row.part,
        str(row.parallel),
        *(f"{1e3 * value:.0f} mm" for value in row.position),
        show(row.axial_load, "force"),
        f"{number(row.load_min)} to {show(row.load_max, 'force')}",
        show(row.lateral_load if row.lateral_load > ROUNDING * abs(row.axial_load) else 0.0, "force", 2),
        length(row.compression),
        length(row.free_height),
        length(row.installed_height),
        shim,
    )


def modes_table(assessment: Assessment) -> Table:
    """Return the modes with names, amplification, separation and participation."""
    rows = tuple(
        (
            show(mode.frequency, "frequency"),
            mode.name,
            f"{mode.amplification:.1f}" if math.isfinite(mode.amplification) else "undamped",
            ""
            if mode.separation is None
            else separation_text(mode.separation) + (", exempt" if mode.exempt else ""),
            _interval(mode.interval),
            *(
                f"{share:.0%}".replace("%", " %") if share >= SMALL_SHARE else "-"
                for share in mode.participation
            ),
        )
        for mode in assessment.modes
    )
    note = (
        "Undamped natural frequencies at the dynamic stiffness. Amplification: 1 / the mode's loss factor. Separation "
        "from the nearest excitation interval of the steady conditions, by the excitation frequency: f / f_high - 1 "
        "above it, 1 - f / f_low below it. Participation: share of the moving mass in each direction, a dash where it "
        "is below 0.5 %."
    )
    columns = ("frequency", "mode", "amplification", "separation", "from excitation at", *DIRECTIONS)
    return Table("Modes", columns, rows, frozenset({0, 2, 3, 4, 5, 6, 7, 8, 9, 10}), note)


def _interval(interval: tuple[float, float] | None) -> str:
    if interval is None:
        return ""
    low, high = interval
    return show(low, "frequency") if low == high else f"{number(low)} to {show(high, 'frequency')}"


def bump_table(assessment: Assessment) -> Table:
    """Return the frequencies a bump test should find, with what the parts' tolerance makes of them."""
    tolerances = [m.tolerance for m in assessment.design.mounts if m.tolerance == m.tolerance]
    tolerance = max(tolerances, default=0.0)
    rows = tuple(_bump(mode, tolerance) for mode in assessment.modes)
    note = (
        "Frequency range: if all parts are softer or stiffer together by their listed tolerance "
        f"({percent(tolerance)}) and nothing else changes. Half-power width: frequency / amplification. A strong bump "
        "drives rubber to larger amplitudes, at which it is softer. Frequencies elsewhere mean a soft floor, a pipe, a "
        "loose foot, or a frame that is not rigid."
    )
    columns = ("mode", "frequency", "lowest", "highest", "half-power width", "strike along")
    return Table("Frequencies a bump test should find", columns, rows, frozenset({1, 2, 3, 4}), note)


def _bump(mode: ModeRow, tolerance: float) -> tuple[str, ...]:
    # A direction in which nothing can move has no share.
    shares = [share if share == share else 0.0 for share in mode.participation]
    strongest = max(range(len(shares)), key=shares.__getitem__)
    direction = DIRECTIONS[strongest]
    words = f"{direction}, at a corner" if "about" in direction else direction
    return (
        mode.name,
        show(mode.frequency, "frequency"),
        show(mode.frequency * math.sqrt(1.0 - tolerance), "frequency"),
        show(mode.frequency * math.sqrt(1.0 + tolerance), "frequency"),
        show(mode.frequency / mode.amplification, "frequency", 2)
        if math.isfinite(mode.amplification)
        else "0 Hz",
        words,
    )


def power_table(assessment: Assessment) -> Table:
    """Return the power balance of each condition."""
    rows = tuple(
        (
            row.condition,
            show(row.speed, "frequency"),
            show(row.put_in, "power"),
            show(row.dissipated, "power"),
            f"{row.closing_error:.1e}",
        )
        for row in assessment.power
        if row.speed > 0.0
    )
    note = (
        "Mean power of all tones at the middle of the range. What is put in must be dissipated; a closing error above "
        "1e-6 is a fault of the calculation."
    )
    columns = ("condition", "at speed or frequency", "put in", "dissipated", "closing error")
    return Table("Power balance", columns, rows, frozenset({1, 2, 3, 4}), note)
