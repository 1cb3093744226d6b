"""Barred bands of a design as sentences."""

from math import ceil, floor

from detune.response.assessment import Assessment


def dwell_lines(assessment: Assessment) -> list[str]:
    """Return the bands found for a design, for the terminal."""
    return [
        f"Do not dwell at {outward(band.low, up=False)} to {outward(band.high, up=True)} rev/min of {band.shaft} "
        f"({band.condition}): {band.why}."
        for band in assessment.barred
    ]


def outward(frequency: float, *, up: bool) -> str:
    """Return an edge (Hz) in rev/min to a tenth, rounded away from the speeds that are left."""
    tenths = 600.0 * frequency
    # An edge that is a whole tenth up to rounding stays where it is.
    whole = round(tenths)
    if abs(tenths - whole) > 1e-9 * max(1.0, tenths):
        whole = ceil(tenths) if up else floor(tenths)
    return f"{whole / 10.0:.1f}"
