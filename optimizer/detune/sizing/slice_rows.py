"""The rows of one slice: each line, ridge, bound and closed range as a parabola in k that bounds gamma.

Every row bounds gamma by a parabola in k (`slice_response`): a line at one u, the tangent along a ridge, the bounds
of damping, and the supremum of a range where it is a parabola itself.
"""

from __future__ import annotations

import math

from detune.sizing.slice_data import (
    BY_MASS,
    CAUSE,
    CLOSED,
    FROM,
    HIGH,
    KIND,
    LOW,
    P0,
    P1,
    P2,
    POWER,
    SENSE,
    TO,
    TRANSMISSION,
    Bench,
    Question,
    Room,
)
from detune.sizing.slice_response import NEITHER, part_of_range, ridge

# --- compiled below ---


def closed_envelope(
    question: Question, bench: Bench, i: int
) -> tuple[bool, float, float, float, float, float]:
    """(True, e0, e1, e2, k1, k2) where gamma >= e0 + e1 k + e2 k^2 on [k1, k2] is all that a range says there.

    Maximising the bound at one u over u, with A^2 the level and unit mass:

        loss factor, A^2            u = k                      e = A^2
        loss factor, A^2 u          u = k + A^2/2              e = A^2 k + A^4/4
        loss factor, A^2 u^2        u = k/(1 - A^2)            e = A^2 k^2/(1 - A^2)
        loss factor, T > 1          u = k                      e = k^2/(T^2 - 1)
        viscous, A^2 u              u = k                      e = A^2
        viscous, A^2 u^2            u = k/sqrt(1 - A^2)        e = 2 k (1 - sqrt(1 - A^2))
        viscous, T > 1              u = k sqrt(1 - 1/T^2)      e = 2 k (1 - sqrt(1 - 1/T^2)) T^2/(T^2 - 1)

    In each the bound rises up to that u and falls after it (its derivative in u has one sign change), so its
    supremum over the range is e(k) where u lies inside and the line at the nearer end where it does not.
    """
    level, power = bench.level[i], int(question.limits[i][POWER])
    low, high = question.limits[i][LOW], question.limits[i][HIGH]
    slope, offset, e0, e1, e2 = 0.0, 0.0, 0.0, 0.0, 0.0
    if question.limits[i][TRANSMISSION] == 1:
        if level < 1.0:
            if question.viscous == 0:
                slope, e2 = 1.0, level / (1.0 - level)
            else:
                slope = math.sqrt(1.0 - level)
                e1 = 2.0 * (1.0 - slope) / (1.0 - level)
    elif question.viscous == 0:
        if power == 0:
            slope, e0 = 1.0, level
        elif power == 1:
            slope, offset, e0, e1 = 1.0, 0.5 * level, 0.25 * level * level, level
        elif level < 1.0:
            slope, e2 = 1.0 / (1.0 - level), level / (1.0 - level)
    elif power == 1:
        slope, e0 = 1.0, level
    elif level < 1.0:
        root = math.sqrt(1.0 - level)
        slope, e1 = 1.0 / root, 2.0 * (1.0 - root)
    if slope == 0.0:
        return False, 0.0, 0.0, 0.0, 0.0, 0.0
    return True, e0, e1, e2, (low - offset) / slope, (high - offset) / slope


def line_row(question: Question, bench: Bench, row: int, i: int, u: float, mass: float) -> float:
    """Write the row of limit i at one u and mass; returns where in k the rows of two masses m and 1 are one.

    With s = u or 1: receptance p = (level u^q [m^2] - (k - m u)^2)/s; transmission p = (level u^r k^2 - (k - m u)^2)/(s
    free). For fixed k the left side of a limit is convex in m, or it falls with m, so over an interval of masses the
    heavier end is the looser one for k below that place and the lighter end above it.
    """
    own = bench.rows[row]
    level = bench.level[i] * u ** int(question.limits[i][POWER])
    loss = u if question.viscous == 1 else 1.0
    a0, a1, a2, free = -mass * mass * u * u, 2.0 * mass * u, -1.0, 1.0
    same = 0.5 * (1.0 + mass) * u
    if question.limits[i][TRANSMISSION] == 1.0:
        a2, free = level - 1.0, 1.0 - level
    elif question.limits[i][BY_MASS] == 0.0:
        a0 += level * mass * mass
        same = 0.5 * (1.0 + mass) * (u * u - level) / u
    else:
        a0 += level
    own[SENSE] = 1.0 if free > NEITHER else (-1.0 if free < -NEITHER else 0.0)
    # A row without damping says -p >= 0 of its numerator.
    divide = loss * free if abs(free) > NEITHER else -1.0
    own[P0], own[P1], own[P2] = a0 / divide, a1 / divide, a2 / divide
    own[FROM], own[TO], own[CAUSE] = -math.inf, math.inf, i
    return float(same)


def ridge_row(
    question: Question, bench: Bench, row: int, i: int, k: float, share: float, stated: bool
) -> None:
    """Write the tangent at k of what limit i asks for at u = share k; a row that says nothing where it has none."""
    own = bench.rows[row]
    own[P0], own[P1], own[P2], own[SENSE] = 0.0, 0.0, 0.0, 0.0
    low, high, _ = part_of_range(question, bench, i, True)
    own[FROM], own[TO], own[CAUSE] = low / share, high / share, i
    if stated and low < share * k < high:
        value, slope, e1, e2 = ridge(question, bench, i, k, share)
        own[P0], own[P1], own[P2], own[SENSE] = value - slope * k, slope + e1, e2, 1.0


def fill_rows(question: Question, room: Room, bench: Bench, count: int) -> int:
    """Write the rows of all lines in use, of the damping bounds and of the closed envelopes; their number.

    Over an interval of masses each line has two rows, one on either side of where they are one, and nothing that holds
    at resonance has any.
    """
    r = 0
    for line in range(count):
        i, u = int(bench.pool[line][0]), bench.pool[line][1]
        share = bench.pool[line][2]
        if share > 0.0:
            ridge_row(question, bench, r, i, u, share, room.ratio == 1.0)
            r += 1
            continue
        line_row(question, bench, r, i, u, 1.0)
        r += 1
        if room.ratio < 1.0:
            same = line_row(question, bench, r, i, u, room.ratio)
            bench.rows[r - 1][TO], bench.rows[r][FROM] = same, same
            r += 1
    for bound in range(2):
        damping = room.least_damping if bound == 0 else room.most_damping
        bench.rows[r][P0], bench.rows[r][P1], bench.rows[r][P2] = 0.0, 0.0, 0.0
        if question.viscous == 1:
            bench.rows[r][P0] = damping * damping
        else:
            bench.rows[r][P2] = damping * damping
        bench.rows[r][SENSE] = 1 if bound == 0 else -1
        bench.rows[r][FROM], bench.rows[r][TO], bench.rows[r][CAUSE] = -math.inf, math.inf, -1 - bound
        r += 1
    for i in range(len(question.limits)):
        if question.limits[i][KIND] == CLOSED and room.ratio == 1.0:
            there, e0, e1, e2, k1, k2 = closed_envelope(question, bench, i)
            if there:
                bench.rows[r][P0], bench.rows[r][P1], bench.rows[r][P2], bench.rows[r][SENSE] = e0, e1, e2, 1
                bench.rows[r][FROM], bench.rows[r][TO], bench.rows[r][CAUSE] = k1, k2, i
                r += 1
    return r


def damping_interval(bench: Bench, rows: int, k: float) -> tuple[float, float, int, int]:
    """[L, U] of gamma at k and the rows that set them; L > U where no damping serves."""
    low, high, lower, upper = 0.0, math.inf, -1, -1
    for r in range(rows):
        if bench.rows[r][FROM] <= k <= bench.rows[r][TO]:
            p = bench.rows[r][P0] + k * (bench.rows[r][P1] + k * bench.rows[r][P2])
            if bench.rows[r][SENSE] > 0:
                if p > low or lower < 0:
                    low, lower = max(p, 0.0), r
            elif bench.rows[r][SENSE] < 0:
                if p < high:
                    high, upper = p, r
            elif p < 0.0:
                high, upper = -math.inf, r
    return low, high, lower, upper
