"""What a reader should look at first in an assessed design: facts of this result, not general cautions."""

from collections import Counter

from detune.brief.brief import Brief
from detune.ground.units import show
from detune.report.words import margin_text, percent, row_text
from detune.response.assessment import Assessment
from detune.study.run import Result

TIGHT = 0.05
CLOSURE = 1e-6


def points_to_check(brief: Brief, assessment: Assessment) -> tuple[str, ...]:
    """Return what to look at in one assessed design, the most pressing first."""
    return (
        *(f"Not met: {row_text(brief, row)}." for row in assessment.failed),
        *_power(assessment),
        *_tight(brief, assessment),
        *(_scatter(assessment) if brief.scatter is None else []),
        *_nearest_mode(assessment),
        *_exempt(assessment),
        *_stock(brief, assessment),
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
    tight = sorted((r for r in assessment.margins if 0.0 <= r.margin < TIGHT), key=lambda r: r.margin)
    return [f"Tight: {row_text(brief, row)}." for row in tight]


def _scatter(assessment: Assessment) -> list[str]:
    parts = {mount.part: mount.tolerance for mount in assessment.design.mounts}
    listed = ", ".join(
        f"{part} plus or minus {100.0 * tolerance:g} %"
        for part, tolerance in parts.items()
        if tolerance == tolerance
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


def pieces(brief: Brief, assessment: Assessment) -> dict[tuple[str, str], int]:
    """Return how many of each part a design takes, by catalog and part number."""
    design = assessment.design
    count: Counter[tuple[str, str]] = Counter()
    for station in brief.stations:
        mount = design.mounts[design.groups.index(station.group)]
        count[(mount.catalog, mount.part)] += station.parallel
    return dict(count)


def _stock(brief: Brief, assessment: Assessment) -> list[str]:
    stock = {(m.catalog, m.part): m.stock for m in assessment.design.mounts}
    notes = []
    for key, count in pieces(brief, assessment).items():
        held = stock[key]
        if held is not None and held < count:
            notes.append(f"{count} of {key[1]} are needed and the list {key[0]} states {held} in stock.")
    return notes


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
