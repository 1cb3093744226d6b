"""Numbers as an engineer reads them: margins, limits, speeds, designs."""

import math

from detune.brief.allowable import KINDS
from detune.brief.allowable.base import HarmonicAllowable
from detune.brief.brief import Brief
from detune.brief.levels import REFERENCES
from detune.ground.units import KINDS as KINDS_OF_UNIT
from detune.ground.units import convert, show
from detune.response.assessment import Assessment, MarginRow
from detune.response.design import Design
from detune.response.direct_supremum import tones_of

OBJECTIVE_WORDS: dict[str, str] = {
    "cost": "cost",
    "separation": "separation",
    "least-margin": "least margin",
    "added-mass": "added mass",
    "part-numbers": "part numbers",
}
BEST_WORDS: dict[str, str] = {
    "cost": "cheapest",
    "separation": "one with the most separation",
    "least-margin": "one with the most margin",
    "added-mass": "one with the least added mass",
    "part-numbers": "one with the fewest part numbers",
}
BEYOND = 10.0


def percent(ratio: float) -> str:
    """Return a ratio in per cent, never so rounded that a number below zero reads as zero."""
    if math.isnan(ratio):
        return "not a number"
    if math.isinf(ratio):
        return "no bound" if ratio > 0.0 else "below any bound"
    value = 100.0 * ratio
    if value == 0.0 or abs(value) >= 10.0:
        return f"{value:.1f} %"
    return f"{value:.2f} %" if abs(value) >= 0.01 else f"{value:.1g} %"


def margin_text(margin: float) -> str:
    """Return a margin with its sign; one above a thousand per cent is only said to be that large."""
    if margin > BEYOND:
        return "> 1000 %"
    text = percent(margin)
    return f"+{text}" if margin > 0.0 and not math.isinf(margin) else text


def separation_text(separation: float) -> str:
    """Return a separation in per cent; where nothing excites at frequencies of its own, response governs."""
    return "none, governed by response" if math.isinf(separation) else percent(separation)


def frequency_text(frequency: float | None, is_shaft: bool) -> str:
    """Return a frequency in Hz, for a shaft with rev/min beside it."""
    if frequency is None or math.isnan(frequency):
        return ""
    text = show(frequency, "frequency")
    return f"{text} ({60.0 * frequency:.0f} rev/min)" if is_shaft else text


def is_shaft_speed(brief: Brief, row: MarginRow) -> bool:
    """Return whether the frequency of a row is a speed of a shaft (of one, where all its sources follow shafts)."""
    kind = KINDS.get(row.kind)
    if row.frequency is None or kind is None:
        return False
    # Under a unit load the frequency is that of the load itself.
    if issubclass(kind, HarmonicAllowable) and kind.unit_load is not HarmonicAllowable.unit_load:
        return False
    condition = next((c for c in brief.conditions if c.name == row.condition), None)
    return condition is not None and all(
        tone.speed in condition.shafts for tone in tones_of(brief, condition)
    )


def value_text(row: MarginRow) -> str:
    """Return the value of a row, in the unit of its limit."""
    if row.kind == "separation":
        return separation_text(row.value)
    if row.kind == "dwell-bands":
        return speed_width_text(row.value)
    if row.reference is not None:
        return level_text(row.value, row)
    return _in_unit(row.value, row.unit, _unit_of_limit(row))


def level_text(value: float, row: MarginRow) -> str:
    """Return a value as the level that the limit of its row is stated in, with the reference."""
    assert row.reference is not None
    if not 0.0 < value < math.inf:
        return show(value, row.unit)
    reference = reference_text(row.reference, row.unit)
    return f"{20.0 * math.log10(value / row.reference):.1f} dB re {reference}"


def reference_text(reference: float, kind: str) -> str:
    """Return the reference of a level as it is written: "1 nm/s"."""
    usual, written = REFERENCES[kind]
    return (
        written
        if math.isclose(reference, usual, rel_tol=1e-9)
        else f"{reference:g} {KINDS_OF_UNIT[kind].si_unit}"
    )


def speed_width_text(width: float) -> str:
    """Return a width of speed (Hz) in rev/min; without bound it is every speed."""
    return "every speed" if math.isinf(width) else f"{number(60.0 * width)} rev/min"


def limit_text(row: MarginRow) -> str:
    """Return the limit of a row: "at most", "at least", or a window."""

    def text(limit: float) -> str:
        if row.reference is not None:
            return level_text(limit, row)
        if row.kind == "dwell-bands":
            return speed_width_text(limit)
        return percent(limit) if row.kind == "separation" else _in_unit(limit, row.unit, _unit_of_limit(row))

    has_lower = row.lower is not None and not math.isnan(row.lower)
    has_upper = row.upper is not None and not math.isnan(row.upper)
    if has_lower and has_upper:
        assert row.lower is not None and row.upper is not None
        return f"{text(row.lower)} to {text(row.upper)}"
    if has_upper:
        assert row.upper is not None
        return f"at most {text(row.upper)}"
    if has_lower:
        assert row.lower is not None
        return f"at least {text(row.lower)}"
    return "none"


def unit_of(value: float, kind: str) -> str:
    """Return the unit in which a value of a kind is best shown, empty where it has none."""
    return show(value, kind).partition(" ")[2]


def _unit_of_limit(row: MarginRow) -> str:
    limits = [
        limit for limit in (row.upper, row.lower) if limit is not None and limit and math.isfinite(limit)
    ]
    return unit_of(limits[0] if limits else row.value, row.unit)


def _in_unit(value: float, kind: str, unit: str) -> str:
    if not unit or not math.isfinite(value):
        return show(value, kind)
    return f"{number(convert(value, kind, unit))} {unit}"


def number(value: float, digits: int = 4) -> str:
    """Return a number with so many significant digits; digits before the point are never dropped."""
    return show(value, "ratio", digits)


def objective_text(assessment: Assessment, name: str) -> str:
    """Return one objective of an assessed design, with its unit."""
    return objective_value_text(
        {
            "cost": assessment.cost,
            "separation": assessment.separation,
            "least-margin": assessment.least_margin,
            "added-mass": assessment.added_mass,
            "part-numbers": float(assessment.part_numbers),
        }[name],
        name,
    )


def objective_value_text(value: float, name: str) -> str:
    """Return the value of an objective as text."""
    if name == "separation":
        return separation_text(value)
    if name == "least-margin":
        return margin_text(value)
    if name == "added-mass":
        return f"{number(value)} kg"
    return number(value, 6) if name == "cost" else f"{value:.0f}"


def design_text(design: Design) -> str:
    """Return a design on one line; several groups with one part are named together."""
    if len(set(design.parts)) == 1 and len(design.parts) > 1:
        text = f"{design.parts[0]} at every station ({', '.join(design.groups)})"
        return f"{text}; ballast {design.ballast_name}" if design.ballast else text
    return str(design)


def row_text(brief: Brief, row: MarginRow) -> str:
    """Return a judged requirement as a sentence part: label, value, limit, margin, frequency."""
    where = frequency_text(row.frequency, is_shaft_speed(brief, row))
    at = f", worst at {where}" if where else ""
    return f"{row.label}: {value_text(row)}, limit {limit_text(row)}, margin {margin_text(row.margin)}{at}"
