"""The speeds at which the machine may not dwell: stated by the brief, or found for the design."""

from detune.brief.brief import Brief
from detune.brief.dwell import chosen_in, dwell_notes, left_of
from detune.report.dwell_words import outward
from detune.report.tables import Table
from detune.response.assessment import Assessment

COLUMNS = ("condition", "shaft", "from (rev/min)", "to (rev/min)", "width (rev/min)", "why")


def dwell_table(brief: Brief, assessment: Assessment) -> Table | None:
    """Return every barred band, and for each shaft their total width, None where no condition bars speeds."""
    rows: list[tuple[str, ...]] = []
    told: set[str] = set()
    for condition in brief.conditions:
        whole = condition.whole
        if whole.name in told:
            continue
        told.add(whole.name)
        for shaft, bands in whole.barred.items():
            rows += [_row(whole.name, shaft, low, high, "stated in the brief") for low, high in sorted(bands)]
            low, high = whole.shafts[shaft]
            left = sum(b - a for a, b in left_of(low, high, bands))
            rows.append(_total(whole.name, shaft, high - low - left, high - low, ""))
        limit = chosen_in(brief, condition)
        if limit is not None:
            found = [band for band in assessment.barred if band.condition == condition.name]
            rows += [_row(b.condition, b.shaft, b.low, b.high, b.why) for b in found]
            low, high = condition.shafts[limit.shaft]
            allowed = f"{60.0 * limit.allowance(low, high):.5g} rev/min may be barred"
            if limit.bands is not None:
                allowed += f", in at most {limit.bands} band{'s' if limit.bands > 1 else ''}"
            width = sum(band.high - band.low for band in found)
            rows.append(_total(condition.name, limit.shaft, width, high - low, allowed))
    if not rows:
        return None
    note = (
        "Outside these bands every limit on the response and the separation hold; the edges lie on the side where they "
        "do. Steady running alone is judged: the bands are still passed through."
    )
    return Table("Barred bands", COLUMNS, tuple(rows), frozenset({2, 3, 4}), note)


def dwell_words(brief: Brief) -> tuple[str, ...]:
    """Return how far passing through the barred bands is judged, condition by condition."""
    return tuple(f"{note[0].upper()}{note[1:]}." for note in dwell_notes(brief))


def _row(condition: str, shaft: str, low: float, high: float, why: str) -> tuple[str, ...]:
    width = f"{60.0 * (high - low):.1f}"
    return (condition, shaft, outward(low, up=False), outward(high, up=True), width, why)


def _total(condition: str, shaft: str, width: float, span: float, allowed: str) -> tuple[str, ...]:
    share = f"{100.0 * width / span:.3g} % of the range of {60.0 * span:.5g} rev/min"
    words = f"in all, {share}; {allowed}" if allowed else f"in all, {share}"
    return (condition, shaft, "", "", f"{60.0 * width:.1f}", words)
