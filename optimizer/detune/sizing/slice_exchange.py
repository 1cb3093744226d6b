"""Exact solution of one slice over lines and ranges: every disjoint interval of stiffness with its best design.

A range limit is the intersection of infinitely many line limits. Start from a few of its lines (a superset of what is
feasible), solve the slice exactly (`slice_envelope`), find the exact worst frequency (`slice_response`) at the
best point and both ends of every segment, add those lines, and solve again until nothing is exceeded. A range
that its ends and one parabola state whole (`closed_envelope`) needs no exchange.

* Every step is a superset, so no branch is ever lost and an empty slice is proved empty.
* At the end the points returned meet the limit over the continuum, and because the value of a superset is never above
  the true optimum, they are the global optimum up to the violation stated.
* A hole inside a segment, where a range closes it between two lines, is looked for by `slice_holes`.
"""

from __future__ import annotations

import math
from typing import Any

from detune.sizing.slice_data import (
    AT_LINE,
    BY_MASS,
    CAUSE,
    CLOSED,
    FIRST,
    GAMMA,
    KIND,
    LAST,
    LEEWAY,
    LEFT,
    LEFT_GAMMA,
    OPEN,
    RIGHT,
    RIGHT_GAMMA,
    SCALE,
    STIFFNESS,
    VALUE,
    Bench,
    Question,
    Room,
)
from detune.sizing.slice_envelope import collect, value_at
from detune.sizing.slice_holes import CELLS, add_line, add_worst, hole
from detune.sizing.slice_response import (
    VIOLATION,
    bounding_damping,
    worst_place,
)
from detune.sizing.slice_rows import damping_interval, fill_rows

ROUNDS = 80
# A design is one when no squared ratio exceeds one by more than this.
MET = 1e-9

# --- compiled below ---


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


def lifted(question: Question, bench: Bench, rows: int, k: float, gamma: float) -> float:
    """The gamma at or above `gamma` that every open range asks for at k; infinite where it does not serve them all."""
    low, high, _, _ = damping_interval(bench, rows, k)
    # At a crossing the two are equal but for rounding.
    high = max(low, high, gamma)
    for i in range(len(question.limits)):
        if question.limits[i][KIND] == OPEN:
            ratio, _ = worst_place(question, bench, i, k, gamma)
            if ratio > 1.0 + VIOLATION:
                least, _ = bounding_damping(question, bench, i, k, True)
                gamma = max(gamma, least)
    if gamma > high * (1.0 + MET):
        return math.inf
    for i in range(len(question.limits)):
        if question.limits[i][KIND] == OPEN:
            ratio, _ = worst_place(question, bench, i, k, gamma)
            if ratio > 1.0 + MET:
                return math.inf
    return gamma


def lift(question: Question, room: Room, bench: Bench, rows: int, own: Any) -> None:
    """Raise gamma at the best point of a segment to what every open range asks for there.

    Where that does not serve (the exchange was cut short) the best of the segment's cuts takes its place; a segment
    without any has no design: its value is infinite.
    """
    before = own[GAMMA]
    gamma = lifted(question, bench, rows, own[STIFFNESS], before)
    if gamma < math.inf:
        if gamma > before:
            own[VALUE], _ = value_at(question, room, own[STIFFNESS], gamma, gamma)
            own[GAMMA] = gamma
        return
    own[VALUE] = math.inf
    for n in range(int(own[FIRST]), int(own[LAST]) + 1):
        k = bench.points[n]
        low, _, _, _ = damping_interval(bench, rows, k)
        gamma = lifted(question, bench, rows, k, low)
        if gamma < math.inf:
            value, _ = value_at(question, room, k, gamma, gamma)
            if value < own[VALUE]:
                own[STIFFNESS], own[GAMMA], own[VALUE] = k, gamma, value


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
                        count = add_worst(question, bench, count, i, k, gamma, u)
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
    found, rows, decided = 0, 0, True
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
        lift(question, room, bench, rows, own)
        if own[VALUE] == math.inf:
            decided = False
            continue
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
                    count = add_line(bench, count, i, u, AT_LINE)
    return count


def compress(question: Question, room: Room, bench: Bench, found: int, count: int, first: int) -> int:
    """Keep the first lines of the pool and those that set L or U somewhere in the segments found last; their number."""
    rows = fill_rows(question, room, bench, count)
    for line in range(count):
        bench.spare[line][0] = 1.0 if line < first else 0.0
    for s in range(found):
        own = bench.segments[s]
        start, stop = int(own[FIRST]), int(own[LAST])
        for n in range(start, stop + 1):
            for half in range(2):
                k = bench.points[n] if half == 0 else 0.5 * (bench.points[n] + bench.points[min(n + 1, stop)])
                _, _, lower, upper = damping_interval(bench, rows, k)
                if lower < count:
                    bench.spare[lower][0] = 1.0
                if upper < count:
                    bench.spare[upper][0] = 1.0
    kept = 0
    for line in range(count):
        if bench.spare[line][0] == 1.0:
            for column in range(3):
                bench.pool[kept][column] = bench.pool[line][column]
            kept += 1
    return kept


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
            least, _ = bounding_damping(question, bench, i, k, True)
            most, _ = bounding_damping(question, bench, i, k, False)
            if top < least < math.inf:
                top, below = least, i
            if -math.inf < most < bottom:
                bottom, above = most, i
    return top, max(top, bottom), below, above
