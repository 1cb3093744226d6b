"""What a reader should look at first in an assessed design: facts of this result, not general cautions."""

from detune.brief.brief import Brief
from detune.ground.units import show
from detune.report.dwell_words import dwell_lines
from detune.report.words import margin_text, percent, row_text
from detune.response.assessment import Assessment
from detune.response.bill import bill
from detune.response.direct_dwell import LEFT
from detune.study.run import Result

TIGHT = 0.05
CLOSURE = 1e-6


def points_to_check(brief: Brief, assessment: Assessment) -> tuple[str, ...]:
    """Return what to look at in one assessed design, the most pressing first."""
    return (
        *(f"Not met: {row_text(brief, row)}." for row in assessment.failed),
        *dwell_lines(assessment),
        *assessment.notes,
        *_power(assessment),
        *_tight(brief, assessment),
        *(_scatter(assessment) if brief.scatter is None else []),
        *_nearest_mode(assessment),
        *_exempt(assessment),
        *_stock(brief, assessment),
        *_estimated(assessment),
        *_height(assessment),
    )


def study_points(result: Result) -> tuple[str, ...]:
    """Return what to look at in a study as a whole."""
    notes = []
    for design in result.front.withdrawn:
        row = design.tightest
        notes.append(
            f"The solver counted {design.design} as meeting the brief; the assessor finds {row.label} at a margin "
            f"of {margin_text(row.margin)}. It is left out."
        )
    if result.outcome.stopped == "finished" and not result.outcome.record.accounted:
        notes.append(
            "The counts of the proof record do not add up to the number of designs: treat it as a fault."
        )
    return tuple(notes)


def _power(assessment: Assessment) -> list[str]:
    return [
        f"Power put in and power dissipated differ by {row.closing_error:.1g} in {row.condition}: a fault of the "
        "calculation, not a property of the machine."
        for row in assessment.power
        if row.closing_error > CLOSURE
    ]


def _tight(brief: Brief, assessment: Assessment) -> list[str]:
    # At the edge of a barred band a limit is just met by intent.
    near = (r for r in assessment.margins if 0.0 <= r.margin < TIGHT and LEFT not in r.note)
    tight = sorted(near, key=lambda r: r.margin)
    return [f"Tight: {row_text(brief, row)}." for row in tight]


def _scatter(assessment: Assessment) -> list[str]:
    parts = {mount.part: mount.tolerance for mount in assessment.design.mounts if mount.pieces}
    listed = ", ".join(
        f"{part} plus or minus {100.0 * tolerance:g} %"
        for part, tolerance in parts.items()
        # A part made to order has no listed tolerance: zero stands for none.
        if tolerance == tolerance and tolerance > 0.0
    )
    if not listed:
        return []
    return [
        f"Stiffness of delivered parts scatters ({listed}); the margins here are at listed values and do not "
        "contain it."
    ]


def _nearest_mode(assessment: Assessment) -> list[str]:
    held = [mode for mode in assessment.modes if mode.separation is not None and not mode.exempt]
    if not held:
        return []
    nearest = min(held, key=lambda mode: mode.separation if mode.separation is not None else 0.0)
    assert nearest.separation is not None and nearest.interval is not None
    low, high = nearest.interval
    span = show(low, "frequency") if low == high else f"{show(low, 'frequency')} to {show(high, 'frequency')}"
    return [
        f"Nearest to resonance: {nearest.name} at {show(nearest.frequency, 'frequency')}, separated by "
        f"{percent(nearest.separation)} from the excitation at {span}; it amplifies {nearest.amplification:.1f} times."
    ]


def _exempt(assessment: Assessment) -> list[str]:
    names = [f"{m.name} ({show(m.frequency, 'frequency')})" for m in assessment.modes if m.exempt]
    return [f"Exempted from separation by the brief: {', '.join(names)}."] if names else []


def _estimated(assessment: Assessment) -> list[str]:
    return [
        f"{part}: {why}; an estimate, so load a sample before relying on it."
        for part, why in {m.part: m.approximate for m in assessment.design.mounts if m.approximate}.items()
    ]


def _stock(brief: Brief, assessment: Assessment) -> list[str]:
    return [
        f"{row.quantity:g} of {row.part} are needed and the list {row.catalog} states {row.stock} in stock."
        for row in bill(brief, assessment.design)
        if row.stock is not None and row.stock < row.quantity
    ]


def _height(assessment: Assessment) -> list[str]:
    heights = [
        row.installed_height for row in assessment.stations if row.levels and row.installed_height is not None
    ]
    if len(heights) < 2:
        return []
    difference = max(heights) - min(heights)
    if difference < 1e-3:
        return []
    return [f"Installed heights differ by {show(difference, 'length')} between stations: see the shims."]
