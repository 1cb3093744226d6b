"""Tables of measured figures: a smooth monotone curve through them, and no value beyond their ends.

The interpolation is the piecewise cubic of Fritsch and Butland (F. N. Fritsch, J. Butland, SIAM J. Sci. Stat.
Comput. 5 (1984) 300), known as PCHIP: it passes through every point and rises or falls only where the data
do.
"""

from __future__ import annotations

import numpy as np

from detune.physics.array_types import ArrayLike, FloatArray


class OutsideTable(ValueError):
    """A value was asked for beyond the ends of a table; nothing is extrapolated."""


def require_inside(name: str, unit: str, value: ArrayLike, low: float, high: float) -> None:
    """Refuse values outside [low, high] (a relative slack of 1e-12 allows for rounding).

    Raises OutsideTable with the name, the unit, the value asked for and the ends of the table.
    """
    asked = np.asarray(value, dtype=float)
    slack = 1e-12 * max(abs(low), abs(high))
    wrong = ~((asked >= low - slack) & (asked <= high + slack))
    if np.any(wrong):
        first = float(np.atleast_1d(asked)[np.atleast_1d(wrong)][0])
        raise OutsideTable(
            f"{name} {first:g} {unit} lies outside the table, which covers {low:g} to {high:g} {unit}"
        )


def require_rising(name: str, abscissa: FloatArray) -> None:
    """Refuse a column that is not finite or does not rise strictly. Raises ValueError with the row (from
    1).
    """
    if abscissa.ndim != 1 or abscissa.size < 2:
        raise ValueError(f"{name}: at least two rows are needed")
    bad = np.flatnonzero(~np.isfinite(abscissa))
    if bad.size:
        raise ValueError(f"{name}: row {bad[0] + 1} is not a finite number")
    back = np.flatnonzero(np.diff(abscissa) <= 0.0)
    if back.size:
        row = int(back[0]) + 2
        raise ValueError(f"{name}: row {row} ({abscissa[row - 1]:g}) does not rise above the row before it")


def monotone_slopes(abscissa: FloatArray, ordinate: FloatArray) -> FloatArray:
    """Slopes (P,) of the monotone cubic through abscissa (P,) and ordinate (P,).

    Inside: the weighted harmonic mean of the neighbouring secants, zero at a turning point. At the ends: the
    three-point formula, limited so that the curve keeps the shape of the data.
    """
    width = np.diff(abscissa)
    secant = np.diff(ordinate) / width
    if secant.size == 1:
        return np.repeat(secant, 2)
    slope = np.zeros_like(ordinate)
    same = secant[:-1] * secant[1:] > 0.0
    before, after = secant[:-1][same], secant[1:][same]
    weight_before = 2.0 * width[1:][same] + width[:-1][same]
    weight_after = width[1:][same] + 2.0 * width[:-1][same]
    slope[1:-1][same] = (weight_before + weight_after) / (weight_before / before + weight_after / after)
    slope[0] = _end_slope(width[0], width[1], secant[0], secant[1])
    slope[-1] = _end_slope(width[-1], width[-2], secant[-1], secant[-2])
    return slope


def _end_slope(width: float, next_width: float, secant: float, next_secant: float) -> float:
    slope = ((2.0 * width + next_width) * secant - width * next_secant) / (width + next_width)
    if slope * secant <= 0.0:
        return 0.0
    if secant * next_secant <= 0.0 and abs(slope) > 3.0 * abs(secant):
        return 3.0 * secant
    return float(slope)


def hermite(
    abscissa: FloatArray, ordinate: FloatArray, slope: FloatArray, query: ArrayLike
) -> tuple[FloatArray, FloatArray]:
    """Value and derivative of the cubic through points (P,) with given slopes (P,), at query (any shape).

    Outside the points the curve goes on as a straight line; a caller that must not extrapolate asks
    `require_inside` first.
    """
    asked = np.asarray(query, dtype=float)
    inside = np.clip(asked, abscissa[0], abscissa[-1])
    piece = np.clip(np.searchsorted(abscissa, inside, side="right") - 1, 0, abscissa.size - 2)
    width = abscissa[piece + 1] - abscissa[piece]
    t = (inside - abscissa[piece]) / width
    start, end = ordinate[piece], ordinate[piece + 1]
    start_slope, end_slope = slope[piece] * width, slope[piece + 1] * width
    rise = end - start
    third = start_slope + end_slope - 2.0 * rise
    second = 3.0 * rise - 2.0 * start_slope - end_slope
    value = start + t * (start_slope + t * (second + t * third))
    derivative = (start_slope + t * (2.0 * second + 3.0 * t * third)) / width
    return value + derivative * (asked - inside), derivative
