"""The feasible set of one slice from its rows: piecewise parabolas, disjoint intervals, and the best of each.

Every row bounds gamma by a parabola in k (`slice_response`). For one k the feasible gamma are [L(k), U(k)], L the
upper envelope of the rows from below and U the lower envelope of those from above. Hence

* the components of the feasible set are the components in k of {L <= U};
* rows are inserted into L and U one by one: where a row meets a piece they cross at the roots of a quadratic, and
  between two crossings one midpoint decides. No grid is involved: an island of any width shows itself by its
  own ends, the crossings of L and U;
* a goal that is monotone in gamma has its optimum in a cell at an end or at a stationary point along the piece of L
  (of L or U for a transmissibility), and all of these are looked at:

      w_k k + w_d sqrt(p) + w_g p            4 p (w_k + w_g p')^2 = w_d^2 p'^2                        (viscous)
      w_k k + w_d sqrt(p)/k + w_g p/k^2      p (w_k k^3 + w_g (p' k - 2 p))^2 = w_d^2 k^2 (p' k/2 - p)^2    (loss)
      T^2 = (k^2 + s p)/((k - u)^2 + s p)    a quadratic (the cubic terms cancel)

All rows (`slice_rows`), not only those of the pieces, judge each cell and each point once more.
"""

from __future__ import annotations

import math
from typing import Any

from detune.sizing.slice_data import (
    FROM,
    LINEAR,
    P0,
    P1,
    P2,
    SENSE,
    SEPARATION,
    TO,
    Bench,
    Question,
    Room,
)
from detune.sizing.slice_response import quadratic_roots, roots_between

# Roots closer than this (relative) are one root; a gap or an island narrower than it is not told apart.
SAME_ROOT = 1e-13

# --- compiled below ---


def emit(pieces: Any, count: int, right: float, row: int) -> int:
    """Append a piece that reaches to `right`; one with the row of its neighbour prolongs it.

    pieces[t] is (left end, row), and pieces[count][0] the right end of the last one.
    """
    if right <= pieces[count][0]:
        return count
    if count > 0 and int(pieces[count - 1][1]) == row:
        pieces[count][0] = right
        return count
    pieces[count][1] = row
    pieces[count + 1][0] = right
    return count + 1


def insert(bench: Bench, pieces: Any, count: int, row: int) -> int:
    """Insert a row into the envelope (greatest of the rows from below, least of those from above); new number."""
    spare, rows = bench.spare, bench.rows
    sign, starts, stops = rows[row][SENSE], rows[row][FROM], rows[row][TO]
    spare[0][0] = pieces[0][0]
    new = 0
    for t in range(count):
        left, right, old = pieces[t][0], pieces[t + 1][0], int(pieces[t][1])
        low, high = max(left, starts), min(right, stops)
        if high <= low:
            new = emit(spare, new, right, old)
            continue
        new = emit(spare, new, low, old)
        if old < 0:
            new = emit(spare, new, high, row)
        else:
            q0 = rows[row][P0] - rows[old][P0]
            q1 = rows[row][P1] - rows[old][P1]
            q2 = rows[row][P2] - rows[old][P2]
            first, second = quadratic_roots(q2, q1, q0)
            if second < first or math.isnan(first):
                first, second = second, first
            at = low
            for cut in range(3):
                end = first if cut == 0 else (second if cut == 1 else high)
                if cut < 2 and not at < end < high:
                    continue
                middle = 0.5 * (at + end)
                better = sign * (q0 + middle * (q1 + middle * q2)) > 0.0
                new = emit(spare, new, end, row if better else old)
                at = end
        new = emit(spare, new, right, old)
    for t in range(new):
        pieces[t][0], pieces[t][1] = spare[t][0], spare[t][1]
    pieces[new][0] = spare[new][0]
    return new


def sort_points(points: Any, count: int) -> None:
    """Shell's sort in place."""
    gap = count // 2
    while gap > 0:
        for i in range(gap, count):
            value = points[i]
            j = i
            while j >= gap and points[j - gap] > value:
                points[j] = points[j - gap]
                j -= gap
            points[j] = value
        gap //= 2


def stationary(question: Question, room: Room, bench: Bench, row: int, low: float, high: float) -> int:
    """Stationary points of the goal along one row within [low, high], on the bench; their number."""
    p0, p1, p2 = bench.rows[row][P0], bench.rows[row][P1], bench.rows[row][P2]
    c = bench.work[0]
    if question.goal == SEPARATION:
        return 0
    if question.goal == LINEAR:
        w, d, g = room.stiffness, room.damping, room.squared
        if d == 0.0 and g == 0.0:
            return 0
        if question.viscous == 1:
            # w + g p'
            a0, a1 = w + g * p1, 2.0 * g * p2
            if d == 0.0:
                c[0], c[1] = a0, a1
                return roots_between(1, low, high, bench)
            # 4 p (a0 + a1 k)^2 - d^2 (p1 + 2 p2 k)^2
            s0, s1, s2 = a0 * a0, 2.0 * a0 * a1, a1 * a1
            c[0] = 4.0 * p0 * s0 - d * d * p1 * p1
            c[1] = 4.0 * (p0 * s1 + p1 * s0) - 4.0 * d * d * p1 * p2
            c[2] = 4.0 * (p0 * s2 + p1 * s1 + p2 * s0) - 4.0 * d * d * p2 * p2
            c[3] = 4.0 * (p1 * s2 + p2 * s1)
            c[4] = 4.0 * p2 * s2
            return roots_between(4, low, high, bench)
        # p' k - 2 p = -2 p0 - p1 k
        if d == 0.0:
            c[0], c[1], c[2], c[3] = -2.0 * g * p0, -g * p1, 0.0, w
            return roots_between(3, low, high, bench)
        # p (w k^3 - g (2 p0 + p1 k))^2 - d^2 k^2 (p0 + p1 k/2)^2
        b0, b1 = -2.0 * g * p0, -g * p1
        t0, t1, t2, t3, t4, t6 = b0 * b0, 2.0 * b0 * b1, b1 * b1, 2.0 * b0 * w, 2.0 * b1 * w, w * w
        c[0] = p0 * t0
        c[1] = p0 * t1 + p1 * t0
        c[2] = p0 * t2 + p1 * t1 + p2 * t0 - d * d * p0 * p0
        c[3] = p0 * t3 + p1 * t2 + p2 * t1 - d * d * p0 * p1
        c[4] = p0 * t4 + p1 * t3 + p2 * t2 - 0.25 * d * d * p1 * p1
        c[5] = p1 * t4 + p2 * t3
        c[6] = p0 * t6 + p2 * t4
        c[7] = p1 * t6
        c[8] = p2 * t6
        return roots_between(8, low, high, bench)
    u = question.goal_u
    s = u if question.viscous == 1 else 1.0
    # top = k^2 + s p, bottom = (k - u)^2 + s p: top' bottom - top bottom'.
    a0, a1, a2 = s * p0, s * p1, 1.0 + s * p2
    b0, b1 = a0 + u * u, a1 - 2.0 * u
    first, second = quadratic_roots(a2 * (b1 - a1), 2.0 * a2 * (b0 - a0), a1 * b0 - a0 * b1)
    count = 0
    for root in (first, second):
        if low < root < high:
            bench.work[1][count] = root
            count += 1
    return count


def distance(question: Question, k: float) -> float:
    """Least separation of the natural frequency from all excitation intervals (squares of frequency per unit mass)."""
    result = math.inf
    for i in range(len(question.excited)):
        low, high = question.excited[i][0], question.excited[i][1]
        result = min(result, max(math.sqrt(k / high) - 1.0, 1.0 - math.sqrt(k / low)))
    return result


def value_at(question: Question, room: Room, k: float, low: float, high: float) -> tuple[float, float]:
    """Least goal over gamma in [low, high] at k, and its gamma."""
    if question.goal == SEPARATION:
        return -distance(question, k), low
    if question.goal == LINEAR:
        d = math.sqrt(low)
        if question.viscous == 0:
            d /= k
        return room.stiffness * k + room.damping * d + room.squared * d * d + room.constant, low
    u = question.goal_u
    s = u if question.viscous == 1 else 1.0
    best, at = math.inf, low
    for end in range(2):
        gamma = low if end == 0 else high
        bottom = (k - u) * (k - u) + s * gamma
        ratio = (k * k + s * gamma) / bottom if bottom > 0.0 else math.inf
        if ratio < best:
            best, at = ratio, gamma
    return math.sqrt(best), at


def crossings(bench: Bench, lower: int, upper: int, count: int) -> int:
    """Add the crossings of the pieces of L with those of U to `bench.points`; the new number of points."""
    points = bench.points
    i, j = 0, 0
    while i < lower and j < upper:
        low = max(bench.lower[i][0], bench.upper[j][0])
        high = min(bench.lower[i + 1][0], bench.upper[j + 1][0])
        a, b = int(bench.lower[i][1]), int(bench.upper[j][1])
        if a >= 0 and b >= 0 and high > low:
            one, two = bench.rows[a], bench.rows[b]
            first, second = quadratic_roots(one[P2] - two[P2], one[P1] - two[P1], one[P0] - two[P0])
            for root in (first, second):
                if low < root < high:
                    points[count] = root
                    count += 1
        if bench.lower[i + 1][0] <= bench.upper[j + 1][0]:
            i += 1
        else:
            j += 1
    return count


def collect(question: Question, room: Room, bench: Bench, rows: int, left: float, right: float) -> int:
    """All cuts of [left, right], sorted and distinct, in `bench.points`; their number."""
    points = bench.points
    lower, upper = 1, 1
    bench.lower[0][0], bench.lower[1][0], bench.lower[0][1] = left, right, -1.0
    bench.upper[0][0], bench.upper[1][0], bench.upper[0][1] = left, right, -1.0
    count = 0
    for r in range(rows):
        if bench.rows[r][SENSE] > 0:
            lower = insert(bench, bench.lower, lower, r)
        elif bench.rows[r][SENSE] < 0:
            upper = insert(bench, bench.upper, upper, r)
        else:
            first, second = quadratic_roots(bench.rows[r][P2], bench.rows[r][P1], bench.rows[r][P0])
            points[count], points[count + 1] = first, second
            count += 2
    for n in range(len(question.forbidden)):
        points[count], points[count + 1] = question.forbidden[n][0], question.forbidden[n][1] * room.ratio
        count += 2
    if question.goal == SEPARATION:
        for n in range(len(question.peaks)):
            points[count] = question.peaks[n]
            count += 1
    count = crossings(bench, lower, upper, count)
    for side in range(2):
        pieces = bench.lower if side == 0 else bench.upper
        for t in range(lower if side == 0 else upper):
            points[count] = pieces[t][0]
            count += 1
            row = int(pieces[t][1])
            if row >= 0 and (side == 0 or question.goal != LINEAR):
                for n in range(stationary(question, room, bench, row, pieces[t][0], pieces[t + 1][0])):
                    points[count] = bench.work[1][n]
                    count += 1
    inside = 0
    for n in range(count):
        if left < points[n] < right:
            points[inside] = points[n]
            inside += 1
    sort_points(points, inside)
    kept = 1
    for n in range(inside, 0, -1):
        points[n] = points[n - 1]
    points[0] = left
    for n in range(1, inside + 1):
        if points[n] - points[kept - 1] > SAME_ROOT * points[n] and right - points[n] > SAME_ROOT * right:
            points[kept] = points[n]
            kept += 1
    if right > left:
        points[kept] = right
        kept += 1
    return kept
