"""Exact solution of one slice over lines and ranges: every disjoint interval of stiffness with its best design.

A range limit is the intersection of infinitely many line limits. Start from a few of its lines (a superset of what is
feasible), solve the slice exactly (`slice_envelope`), find the exact worst frequency (`slice_response`) at the
best point and both ends of every segment, add those lines, and solve again until nothing is exceeded. A range
that its ends and one parabola state whole (`closed_envelope`) needs no exchange.

* Every step is a superset, so no branch is ever lost and an empty slice is proved empty.
* At the end the points returned meet the limit over the continuum, and because the value of a superset is never above
  the true optimum, they are the global optimum up to the violation stated.
* A hole inside a segment. Let S(k) be the least gamma a range allows and I(k) the greatest. A line from below reads
  gamma >= p_u(k) with p_u'' = -2/s, s = u or 1; so p_u + k^2/s_low is convex in k for every u of the range, and so
  is S + k^2/s_low: between two stiffnesses S lies below the chord of S + k^2/s_low less k^2/s_low, a parabola.
  In the same way I + k^2/s_high is concave and I lies above a parabola. Where each of these parabolas from below
  stays under each from above over a cell, the cell holds no hole (`hole`); where one does not, the cell is
  divided there, until a hole is found and its lines are added or the cells are proved.
"""

from __future__ import annotations

import math
from typing import Any

from detune.sizing.slice_data import (
    BY_MASS,
    CAUSE,
    CLOSED,
    FIRST,
    GAMMA,
    HIGH,
    KIND,
    LAST,
    LEAST,
    LEEWAY,
    LEFT,
    LEFT_GAMMA,
    LOW,
    MOST,
    OPEN,
    P0,
    P1,
    P2,
    POWER,
    RIGHT,
    RIGHT_GAMMA,
    SCALE,
    STIFFNESS,
    TRANSMISSION,
    VALUE,
    Bench,
    Question,
    Room,
)
from detune.sizing.slice_envelope import collect, damping_interval, fill_rows, value_at
from detune.sizing.slice_response import VIOLATION, lowered_damping, raised_damping, worst_place

ROUNDS = 80
# Cells of one search for a hole; beyond them the slice counts as undecided.
CELLS = 20_000
# A range that closes a segment by less than this share of gamma touches it.
TOUCH = 1e-11

# --- compiled below ---


def add_line(bench: Bench, count: int, i: int, u: float) -> int:
    """Add a line to the pool; the same number when it stands there already (or when the pool is full)."""
    if count >= len(bench.pool):
        return count
    for j in range(count):
        if bench.pool[j][0] == i and abs(bench.pool[j][1] - u) <= 1e-14 * u:
            return count
    bench.pool[count][0] = i
    bench.pool[count][1] = u
    return count + 1


def prefer(question: Question, room: Room, own: Any, k: float, low: float, high: float) -> None:
    """Keep a design of a segment when it is better; of designs of one value the one with the most room for damping.

    At a crossing the limits from below and above are equal but for rounding; the one from below is the one to keep.
    """
    value, gamma = value_at(question, room, k, low, max(low, high))
    slack = 1e-14 * abs(own[VALUE]) if own[VALUE] < math.inf else 0.0
    if value < own[VALUE] - slack or (value <= own[VALUE] + slack and high - low > own[LEEWAY]):
        own[VALUE], own[STIFFNESS], own[GAMMA], own[LEEWAY] = min(value, own[VALUE]), k, gamma, high - low


def segments(question: Question, room: Room, bench: Bench, rows: int) -> int:
    """All disjoint feasible intervals of k in the room's window, rising, each with its best point; their number."""
    if room.left > room.right:
        return 0
    cuts = collect(question, room, bench, rows, room.left, room.right)
    found = 0
    open_one = False
    table = bench.segments
    right = bench.points[0]
    right_low, right_high, _, _ = damping_interval(bench, rows, right)
    for n in range(max(cuts - 1, 1)):
        left, left_low, left_high = right, right_low, right_high
        if cuts > 1:
            right = bench.points[n + 1]
            right_low, right_high, _, _ = damping_interval(bench, rows, right)
        middle = 0.5 * (left + right)
        low, high, _, _ = damping_interval(bench, rows, middle)
        good = low <= high
        for f in range(len(question.forbidden)):
            good = good and not question.forbidden[f][0] < middle < question.forbidden[f][1] * room.ratio
        if not good:
            open_one = False
            continue
        if not open_one:
            open_one = True
            table[found][LEFT], table[found][VALUE], table[found][FIRST] = left, math.inf, n
            table[found][LEEWAY], table[found][LEFT_GAMMA] = -1.0, left_low
            found += 1
        own = table[found - 1]
        own[RIGHT], own[LAST], own[RIGHT_GAMMA] = right, min(n + 1, cuts - 1), right_low
        prefer(question, room, own, left, left_low, left_high)
        prefer(question, room, own, middle, low, high)
        prefer(question, room, own, right, right_low, right_high)
    return found


def ceiling(question: Question, bench: Bench, i: int, k: float) -> float:
    """A bound from above on the gamma that range i asks for at k: its greatest level at the u nearest to k."""
    low, high, power = question.limits[i][LOW], question.limits[i][HIGH], int(question.limits[i][POWER])
    one, other = bench.level[i] * low**power, bench.level[i] * high**power
    top = max(one, other)
    least_free, most_free = 1.0, 1.0
    if question.limits[i][TRANSMISSION] == 1:
        least_free, most_free = 1.0 - top, 1.0 - min(one, other)
        top *= k * k
    if least_free <= 0.0:
        return math.inf
    away = max(low - k, k - high, 0.0)
    excess = top - away * away
    if question.viscous == 1:
        return float(excess / (high * most_free) if excess < 0.0 else excess / (low * least_free))
    return float(excess / most_free if excess < 0.0 else excess / least_free)


def ranges_at(
    question: Question, bench: Bench, rows: int, k: float, end: int, count: int
) -> tuple[bool, int]:
    """Least and greatest gamma of every open range at k, for an end (0 or 1) of a cell.

    Returns whether there is a hole at k (some gamma in between serves no combination) and the new number of lines.
    """
    n = len(question.limits)
    low, high, _, _ = damping_interval(bench, rows, k)
    high = max(low, high)
    top, bottom = low, high
    asked, allowed, asked_u, allowed_u = -1, -1, 0.0, 0.0
    for i in range(n):
        if question.limits[i][KIND] != OPEN:
            continue
        least, u = raised_damping(question, bench, i, k, low, high)
        most, v = lowered_damping(question, bench, i, k, low, high)
        # A range that asks for nothing here may ask for far less than what is there.
        bench.ranges[i][LEAST + end] = min(least, ceiling(question, bench, i, k))
        bench.ranges[i][MOST + end] = most
        if least > top:
            top, asked, asked_u = least, i, u
        if most < bottom:
            bottom, allowed, allowed_u = most, i, v
    if top <= bottom + TOUCH * abs(bottom):
        return False, count
    if asked >= 0:
        count = add_line(bench, count, asked, asked_u)
    if allowed >= 0:
        count = add_line(bench, count, allowed, allowed_u)
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
            bend = 1.0 / question.limits[i][LOW] if question.viscous == 1 else 1.0
            a0, a1, a2 = chord(k1, bench.ranges[i][LEAST], k2, bench.ranges[i][LEAST + 1], bend)
        for j in range(-1, n):
            if (j < 0 and i < 0) or (j >= 0 and question.limits[j][KIND] != OPEN):
                continue
            if j < 0:
                b0, b1, b2 = bench.rows[upper][P0], bench.rows[upper][P1], bench.rows[upper][P2]
            else:
                bend = 1.0 / question.limits[j][HIGH] if question.viscous == 1 else 1.0
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
            # Lines that stand already leave a closing of no width, at an end.
            if new > count:
                return new, cells
            continue
        suspect, at = doubtful(question, bench, k1, k2, lower, upper)
        if suspect and k2 - k1 > 1e-9 * k2 and waiting + 2 <= len(stack):
            # A division next to an end would not end.
            least = 1e-3 * (k2 - k1)
            at = min(max(at, k1 + least), k2 - least)
            stack[waiting][0], stack[waiting][1] = k1, at
            stack[waiting + 1][0], stack[waiting + 1][1] = at, k2
            waiting += 2
    return count, cells


def lift(question: Question, room: Room, bench: Bench, own: Any) -> None:
    """Raise gamma at the best point of a segment until every open range that more damping helps is met exactly."""
    k, gamma = own[STIFFNESS], own[GAMMA]
    for _ in range(60):
        before = gamma
        for i in range(len(question.limits)):
            if question.limits[i][KIND] == OPEN:
                raised, _ = raised_damping(question, bench, i, k, gamma, math.inf)
                if raised < math.inf:
                    gamma = max(gamma, raised)
        if gamma <= before * (1.0 + 1e-15):
            break
    if gamma > own[GAMMA]:
        value, _ = value_at(question, room, k, gamma, gamma)
        own[GAMMA], own[VALUE] = gamma, value


def set_levels(question: Question, room: Room, bench: Bench) -> None:
    """Scales of the limits at the mass of the slice."""
    for i in range(len(question.limits)):
        divide = room.mass * room.mass if question.limits[i][BY_MASS] == 1 else 1.0
        bench.level[i] = question.limits[i][SCALE] / divide


def exchange(question: Question, bench: Bench, rows: int, found: int, count: int) -> tuple[int, bool]:
    """Add the lines of open ranges that are exceeded at a best point, at an end, or else inside a segment.

    Returns the new number of lines and whether every cell could be looked at.
    """
    before = count
    table = bench.segments
    for s in range(found):
        own = table[s]
        for place in range(3):
            k = own[STIFFNESS if place == 0 else (LEFT if place == 1 else RIGHT)]
            gamma = own[GAMMA if place == 0 else (LEFT_GAMMA if place == 1 else RIGHT_GAMMA)]
            for i in range(len(question.limits)):
                if question.limits[i][KIND] == OPEN:
                    ratio, u = worst_place(question, bench, i, k, gamma)
                    if ratio > 1.0 + VIOLATION:
                        count = add_line(bench, count, i, u)
    if count > before:
        return count, True
    cells = 0
    for s in range(found):
        for n in range(int(table[s][FIRST]), int(table[s][LAST])):
            new, cells = hole(question, bench, rows, bench.points[n], bench.points[n + 1], count, cells)
            if new > count:
                count = new
                break
    return count, cells < CELLS


def solve(question: Question, room: Room, bench: Bench, count: int) -> tuple[int, int, float, float, bool]:
    """(segments, lines, excess, gap, decided) of one slice, the segments on the bench.

    `excess` is the largest of (response/limit)^2 - 1 at a best point, `gap` how far a best value lies above the proven
    bound of its segment. The pool is full when the lines reach its length: give it more and ask again.
    """
    set_levels(question, room, bench)
    wide = False
    for i in range(len(question.limits)):
        wide = wide or question.limits[i][KIND] == OPEN
    found, decided = 0, True
    for _ in range(ROUNDS):
        rows = fill_rows(question, room, bench, count)
        found = segments(question, room, bench, rows)
        if not wide or found == 0:
            return found, count, 0.0, 0.0, True
        new, decided = exchange(question, bench, rows, found, count)
        if new == count or new >= len(bench.pool):
            count = new
            break
        count = new
    excess, gap = 0.0, 0.0
    for s in range(found):
        own = bench.segments[s]
        before = own[VALUE]
        lift(question, room, bench, own)
        gap = max(gap, own[VALUE] - before)
        for i in range(len(question.limits)):
            if question.limits[i][KIND] == OPEN:
                ratio, _ = worst_place(question, bench, i, own[STIFFNESS], own[GAMMA])
                excess = max(excess, ratio - 1.0)
    return found, count, excess, gap, decided


def judge(question: Question, room: Room, bench: Bench, k: float, gamma: float) -> None:
    """(response/limit)^2 of every limit at one design, worst over its range, and its u, into `bench.ranges`."""
    set_levels(question, room, bench)
    for i in range(len(question.limits)):
        ratio, u = worst_place(question, bench, i, k, gamma)
        bench.ranges[i][0], bench.ranges[i][1] = ratio, u


def bound(question: Question, room: Room, bench: Bench, count: int) -> float:
    """The least goal over the lines in use alone: a bound from below for every design of the room."""
    set_levels(question, room, bench)
    found = segments(question, room, bench, fill_rows(question, room, bench, count))
    best = math.inf
    for s in range(found):
        best = min(best, bench.segments[s][VALUE])
    return best


def remember(question: Question, bench: Bench, found: int, count: int) -> int:
    """Add the lines of closed ranges that are tight at the best points found last; the new number of lines.

    Slices relaxed over an interval of masses state no closed envelopes and would not see the inside of a range
    otherwise.
    """
    for s in range(found):
        own = bench.segments[s]
        for i in range(len(question.limits)):
            if question.limits[i][KIND] == CLOSED:
                ratio, u = worst_place(question, bench, i, own[STIFFNESS], own[GAMMA])
                if ratio > 1.0 - 1e-6:
                    count = add_line(bench, count, i, u)
    return count


def region(
    question: Question, room: Room, bench: Bench, count: int, k: float
) -> tuple[float, float, int, int]:
    """[least, greatest] gamma at k over lines and whole ranges, and the limits that set them (-1, -2: bounds)."""
    set_levels(question, room, bench)
    rows = fill_rows(question, room, bench, count)
    low, high, lower, upper = damping_interval(bench, rows, k)
    below, above = int(bench.rows[lower][CAUSE]), int(bench.rows[upper][CAUSE])
    high = max(low, high)
    top, bottom = low, high
    for i in range(len(question.limits)):
        if question.limits[i][KIND] == OPEN:
            least, _ = raised_damping(question, bench, i, k, low, high)
            most, _ = lowered_damping(question, bench, i, k, low, high)
            if top < least < math.inf:
                top, below = least, i
            if -math.inf < most < bottom:
                bottom, above = most, i
    return top, max(top, bottom), below, above
