"""Holes inside a segment: whether a range closes a cell of stiffness between the lines that are in use.

Let S(k) be the least gamma a range asks for and I(k) the greatest it allows, both exact (`bounding_damping`). A line
from below reads gamma >= p_u(k) with p_u'' = -2/s, s = u or 1; so p_u + k^2/s_low is convex in k for every u of the
range, and so is S + k^2/s_low: between two stiffnesses S lies below the chord of S + k^2/s_low less k^2/s_low, a
parabola. In the same way I + k^2/s_high is concave and I lies above a parabola. Where each of these parabolas from
below stays under each from above over a cell, the cell holds no hole; where one does not, the cell is divided there,
until a hole is found and its lines are added or the cells are proved.
"""

from __future__ import annotations

import math

from detune.sizing.slice_data import (
    AT_LINE,
    KIND,
    LEAST,
    MOST,
    OPEN,
    P0,
    P1,
    P2,
    Bench,
    Question,
)
from detune.sizing.slice_response import EPSILON, bounding_damping, part_of_range, rounding_of
from detune.sizing.slice_rows import damping_interval

# Cells of one search for a hole; beyond them the slice counts as undecided.
CELLS = 20_000
# A range that closes a segment by less than this share of gamma touches it.
TOUCH = 1e-11
# A gamma beyond any that is asked for.
FAR = 1e30

# --- compiled below ---


def add_line(bench: Bench, count: int, i: int, place: float, share: float) -> int:
    """Add an entry to the pool; the same number when it stands there already (or when the pool is full)."""
    if count >= len(bench.pool):
        return count
    for j in range(count):
        own = bench.pool[j]
        if own[0] == i and abs(own[1] - place) <= 1e-14 * place and abs(own[2] - share) <= 1e-14 * share:
            return count
    bench.pool[count][0], bench.pool[count][1], bench.pool[count][2] = i, place, share
    return count + 1


def add_worst(question: Question, bench: Bench, count: int, i: int, k: float, gamma: float, u: float) -> int:
    """Add what limit i asks for beyond gamma at k: the tangent along its resonance where it peaks, else the line at u.

    With light damping a line is a needle, as narrow as the resonance; the tangent serves the whole range.
    """
    low, high, _ = part_of_range(question, bench, i, True)
    if low < high:
        asked, worst = bounding_damping(question, bench, i, k, True)
        share = worst / k
        if gamma < asked < math.inf and low < worst < high and share < 2.0:
            new = add_line(bench, count, i, k, share)
            if new > count:
                return new
    return add_line(bench, count, i, u, AT_LINE)


def ranges_at(
    question: Question, bench: Bench, rows: int, k: float, end: int, count: int
) -> tuple[bool, int]:
    """Least and greatest gamma of every open range at k, for an end (0 or 1) of a cell.

    Returns whether there is a hole at k (some gamma in between serves no combination) and the new number of lines.
    """
    low, high, lower, upper = damping_interval(bench, rows, k)
    # The rounding of both parabolas, and of (k - u)^2 in units of gamma.
    rounding = 4e-15 * (k if question.viscous == 1 else k * k)
    for row in (lower, upper):
        own = bench.rows[row]
        rounding += 16.0 * EPSILON * (abs(own[P0]) + abs(own[P1]) * k + abs(own[P2]) * k * k)
    high = max(low, high)
    top, bottom = low, high
    asked, allowed, asked_u, allowed_u = -1, -1, 0.0, 0.0
    for i in range(len(question.limits)):
        if question.limits[i][KIND] != OPEN:
            continue
        least, u = bounding_damping(question, bench, i, k, True)
        most, v = bounding_damping(question, bench, i, k, False)
        # Chords are drawn through these; what asks for nothing, or allows any, must not make them infinite.
        bench.ranges[i][LEAST + end] = max(least, -FAR)
        bench.ranges[i][MOST + end] = min(most, FAR)
        if least > top:
            top, asked, asked_u = least, i, u
        if most < bottom:
            bottom, allowed, allowed_u = most, i, v
    if asked >= 0 and top < math.inf:
        rounding += rounding_of(question, bench, asked, k, asked_u)
    if allowed >= 0 and bottom > -math.inf:
        rounding += rounding_of(question, bench, allowed, k, allowed_u)
    if top <= bottom + TOUCH * abs(bottom) + rounding:
        return False, count
    if asked >= 0:
        count = add_worst(question, bench, count, asked, k, bottom, asked_u)
    if allowed >= 0:
        count = add_line(bench, count, allowed, allowed_u, AT_LINE)
    return True, count


def chord(k1: float, v1: float, k2: float, v2: float, bend: float) -> tuple[float, float, float]:
    """The parabola -bend k^2 + a + b k through two points, lowest power first."""
    y1, y2 = v1 + bend * k1 * k1, v2 + bend * k2 * k2
    slope = (y2 - y1) / (k2 - k1)
    return y1 - slope * k1, slope, -bend


def doubtful(
    question: Question, bench: Bench, k1: float, k2: float, lower: int, upper: int
) -> tuple[bool, float]:
    """Whether a parabola from below may pass one from above inside [k1, k2], and where; from the values at its ends."""
    n = len(question.limits)
    for i in range(-1, n):
        if i >= 0 and question.limits[i][KIND] != OPEN:
            continue
        if i < 0:
            a0, a1, a2 = bench.rows[lower][P0], bench.rows[lower][P1], bench.rows[lower][P2]
        else:
            low, high, _ = part_of_range(question, bench, i, True)
            if low > high:
                continue
            bend = 1.0 / low if question.viscous == 1 else 1.0
            a0, a1, a2 = chord(k1, bench.ranges[i][LEAST], k2, bench.ranges[i][LEAST + 1], bend)
        for j in range(-1, n):
            if (j < 0 and i < 0) or (j >= 0 and question.limits[j][KIND] != OPEN):
                continue
            if j < 0:
                b0, b1, b2 = bench.rows[upper][P0], bench.rows[upper][P1], bench.rows[upper][P2]
            else:
                low, high, _ = part_of_range(question, bench, j, False)
                if low > high:
                    continue
                bend = 1.0 / high if question.viscous == 1 else 1.0
                b0, b1, b2 = chord(k1, bench.ranges[j][MOST], k2, bench.ranges[j][MOST + 1], bend)
            d1, d2 = a1 - b1, a2 - b2
            if d2 < 0.0:
                top = -0.5 * d1 / d2
                size = abs(b0 + top * (b1 + top * b2))
                if k1 < top < k2 and a0 - b0 + top * (d1 + top * d2) > TOUCH * size:
                    return True, top
    return False, 0.0


def hole(
    question: Question, bench: Bench, rows: int, left: float, right: float, count: int, cells: int
) -> tuple[int, int]:
    """Look for a hole in one cell whose L and U are single rows; new numbers of lines and of cells looked at.

    The number of lines grows when there is one.
    """
    _, _, lower, upper = damping_interval(bench, rows, 0.5 * (left + right))
    stack = bench.stack
    stack[0][0], stack[0][1] = left, right
    waiting = 1
    while waiting > 0 and cells < CELLS:
        waiting -= 1
        cells += 1
        k1, k2 = stack[waiting][0], stack[waiting][1]
        closed, new = ranges_at(question, bench, rows, k1, 0, count)
        if not closed:
            closed, new = ranges_at(question, bench, rows, k2, 1, count)
        if closed:
            # Lines that stand already and do not close the cell: rounding decides, which proves nothing.
            return (new, cells) if new > count else (count, CELLS)
        suspect, at = doubtful(question, bench, k1, k2, lower, upper)
        if suspect and k2 - k1 > 1e-9 * k2 and waiting + 2 <= len(stack):
            # A division next to an end would not end.
            least = 1e-3 * (k2 - k1)
            at = min(max(at, k1 + least), k2 - least)
            stack[waiting][0], stack[waiting][1] = k1, at
            stack[waiting + 1][0], stack[waiting + 1][1] = at, k2
            waiting += 2
    return count, cells
