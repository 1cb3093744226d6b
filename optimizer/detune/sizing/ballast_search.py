"""Continuous ballast in one-axis sizing: branch and bound over the mass, one position class at a time.

For an interval of masses the slice with every limit relaxed to the better of the two ends is a superset
(`envelope.rows`), so its best value is a lower bound; the exact slice at an inner mass gives designs. The
intervals are halved, best bound first, until bound and design meet. Branches are the positions of the natural
frequency between the excitation frequencies' edges; each position is searched on its own.
"""

from __future__ import annotations

import heapq
import itertools
import math

from detune.sizing.envelope import Segment
from detune.sizing.exchange import LinePool, solve_slice

GAP = 1e-7
BOXES = 3000
# A position that cannot beat the best of the others is left after so many boxes, as near to its own best as
# it has come.
HOPELESS = 400

Found = tuple[float, Segment, float]


def _classes(pool: LinePool, intervals: tuple[tuple[float, float], ...]) -> list[tuple[float, float]]:
    """Intervals of scaled k/m, one per position among the excitations (inside a range is one of its own)."""
    to_u = (2 * math.pi) ** 2 / pool.scales.squared_frequency
    edges = [0.0]
    for low, high in intervals:
        edges.append(low**2 * to_u)
        if high > low:
            edges.append(high**2 * to_u)
    edges.append(math.inf)
    return list(itertools.pairwise(edges))


def _at(pool: LinePool, mass: float, place: tuple[float, float]) -> tuple[Segment | None, float]:
    answer = solve_slice(pool, mass, (place[0] * mass, place[1] * mass))
    if not answer.segments:
        return None, answer.excess
    return min(answer.segments, key=lambda s: s.value), answer.excess


def _bound(pool: LinePool, low: float, high: float, place: tuple[float, float]) -> float:
    found, _ = pool.slice((low, high), (place[0] * low, place[1] * high))
    return min((s.value for s in found), default=math.inf)


def _polish(pool: LinePool, best: Found, low: float, high: float, place: tuple[float, float]) -> Found:
    """Golden section on the exact slice value between two masses; infeasible masses count as infinite."""
    ratio = 0.5 * (math.sqrt(5.0) - 1.0)

    def value(mass: float) -> float:
        nonlocal best
        segment, excess = _at(pool, mass, place)
        if segment is None:
            return math.inf
        if segment.value < best[1].value:
            best = (mass, segment, excess)
        return segment.value

    a, b = low, high
    left, right = b - ratio * (b - a), a + ratio * (b - a)
    at_left, at_right = value(left), value(right)
    while b - a > 1e-9 * b and not at_left == at_right == math.inf:
        if at_left <= at_right:
            b, right, at_right = right, left, at_left
            left = b - ratio * (b - a)
            at_left = value(left)
        else:
            a, left, at_left = left, right, at_right
            right = a + ratio * (b - a)
            at_right = value(right)
    return best


def _search(
    pool: LinePool, place: tuple[float, float], low: float, high: float, others: float
) -> tuple[Found | None, float]:
    """Best of one position class and its proven lower bound (infinite: proved empty).

    `others` is the best value of the other classes found before.
    """
    best: Found | None = None

    def consider(mass: float) -> None:
        nonlocal best
        segment, excess = _at(pool, mass, place)
        if segment is not None and (best is None or segment.value < best[1].value):
            best = (mass, segment, excess)

    for i in range(9):
        consider(low + (high - low) * i / 8)
    if best is not None:
        step = (high - low) / 8
        best = _polish(pool, best, max(low, best[0] - step), min(high, best[0] + step), place)
    count = itertools.count()
    heap = [(_bound(pool, low, high, place), next(count), low, high)]
    for done in range(BOXES):
        bound, _, a, b = heapq.heappop(heap)
        if done >= HOPELESS and bound >= others - GAP * abs(others):
            return best, bound
        target = math.inf if best is None else best[1].value
        if bound == math.inf or bound >= target - GAP * max(abs(target), 1e-12) or b - a <= 1e-12 * b:
            return best, bound
        middle = 0.5 * (a + b)
        before = target
        consider(middle)
        if best is not None and best[1].value < before - 1e-3 * abs(before):
            best = _polish(pool, best, a, b, place)
        for c, d in ((a, middle), (middle, b)):
            heapq.heappush(heap, (max(bound, _bound(pool, c, d, place)), next(count), c, d))
    return best, heap[0][0]


def search_masses(
    pool: LinePool, intervals: tuple[tuple[float, float], ...]
) -> tuple[list[Found], float, bool]:
    """Best design of every position class over the ballast bounds, the gap of the best, and whether all decided.

    Returns (scaled mass, segment, violation) per class; the gap is absolute, in the objective's own unit.
    """
    ballast = pool.problem.ballast
    assert ballast is not None
    unit = pool.scales.mass()
    low, high = ((pool.problem.mass + x) / unit for x in (ballast.least, ballast.most))
    results: list[Found] = []
    bounds: list[float] = []
    places = _classes(pool, intervals)
    # Positions with a design at some mass first, so that those without one know what they have to beat.
    tried = [[_at(pool, low + (high - low) * i / 4, place)[0] for i in range(5)] for place in places]
    found = [min((s.value for s in each if s is not None), default=math.inf) for each in tried]
    for place in sorted(places, key=lambda each: found[places.index(each)]):
        others = min((x[1].value for x in results), default=math.inf)
        best, bound = _search(pool, place, low, high, others)
        bounds.append(bound)
        if best is not None:
            results.append(best)
    if not results:
        return [], 0.0, min(bounds) == math.inf
    top = min(x[1].value for x in results)
    gap = max(0.0, top - min(bounds))
    return results, gap, gap <= 10 * GAP * max(abs(top), 1e-12)
