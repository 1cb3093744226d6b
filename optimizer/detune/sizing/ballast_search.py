"""Continuous ballast in one-axis sizing: branch and bound over the mass, one position class at a time.

For an interval of masses the slice with every limit taken at the heaviest mass and the bounds at the better end
(`slice_kernels.Slices.room`) is a superset, so its best value is a lower bound; the exact slice at an inner mass
gives designs. The intervals are halved, best bound first, until bound and design meet. Branches are the positions
of the natural frequency between the excitation frequencies' edges; each position is searched on its own.
"""

from __future__ import annotations

import heapq
import itertools
import math
from dataclasses import dataclass

from detune.sizing.slice_kernels import Segment, Slices

GAP = 1e-6
BOXES = 2000
# A position that cannot beat the best of the others is left after so many boxes, as near to its own best as
# it has come.
HOPELESS = 400
# Relative width in mass to which the best design of a position is refined.
FINE = 1e-10


@dataclass(frozen=True)
class Found:
    """The best design of one position: its place (k/m, scaled), mass (kg), segment, and the excess of its limits."""

    place: tuple[float, float]
    mass: float
    segment: Segment
    excess: float


def positions(slices: Slices, intervals: tuple[tuple[float, float], ...]) -> list[tuple[float, float]]:
    """Intervals of scaled k/m, one per position among the excitations (inside a range is one of its own)."""
    to_u = slices.scales.to_u
    edges = [0.0]
    for low, high in intervals:
        edges.append(low**2 * to_u)
        if high > low:
            edges.append(high**2 * to_u)
    edges.append(math.inf)
    return list(itertools.pairwise(edges))


@dataclass
class _Position:
    """The search of one position class: its best design so far and its open boxes."""

    slices: Slices
    place: tuple[float, float]
    best: Found | None = None
    decided: bool = True

    def value(self, mass: float) -> float:
        """Best goal at one mass (infinite: none); remembers the best of all."""
        answer = self.slices.at(mass, self.place)
        self.slices.remember(answer)
        self.decided = self.decided and answer.decided
        segment = min(answer.segments, key=lambda each: each.value, default=None)
        if segment is None:
            return math.inf
        if self.best is None or segment.value < self.best.segment.value:
            self.best = Found(self.place, mass, segment, answer.excess)
        return segment.value

    @property
    def least(self) -> float:
        return math.inf if self.best is None else self.best.segment.value

    @property
    def enough(self) -> float:
        """A bound from which on a box need not be looked into."""
        return self.least - GAP * max(abs(self.least), 1e-12) if self.best is not None else math.inf

    def refine(self, low: float, high: float) -> None:
        """Golden section between two masses; infeasible masses count as infinite."""
        ratio = 0.5 * (math.sqrt(5.0) - 1.0)
        a, b = low, high
        left, right = b - ratio * (b - a), a + ratio * (b - a)
        at_left, at_right = self.value(left), self.value(right)
        while b - a > FINE * b and not at_left == at_right == math.inf:
            if at_left <= at_right:
                b, right, at_right = right, left, at_left
                left = b - ratio * (b - a)
                at_left = self.value(left)
            else:
                a, left, at_left = left, right, at_right
                right = a + ratio * (b - a)
                at_right = self.value(right)

    def search(self, low: float, high: float, others: float, patience: int) -> float:
        """Find the best design; returns its proven lower bound (infinite: proved empty).

        A position whose bound does not beat `others` is left after `patience` boxes.
        """
        count = itertools.count()
        heap = [(self.slices.bound(low, high, self.place, self.enough), next(count), low, high)]
        for done in range(BOXES):
            bound, _, a, b = heapq.heappop(heap)
            if done >= patience and bound >= others - GAP * abs(others):
                return bound
            if bound == math.inf or bound >= self.enough or b - a <= 1e-12 * b:
                if self.best is not None and bound < self.least - FINE * abs(self.least):
                    step = max(2.0 * (b - a), 1e-8 * b)
                    self.refine(max(low, self.best.mass - step), min(high, self.best.mass + step))
                return min(bound, self.least)
            middle = 0.5 * (a + b)
            self.value(middle)
            for c, d in ((a, middle), (middle, b)):
                inner = max(bound, self.slices.bound(c, d, self.place, self.enough))
                if inner < math.inf:
                    heapq.heappush(heap, (inner, next(count), c, d))
            if not heap:
                return self.least
        return heap[0][0]


def search_masses(
    slices: Slices, intervals: tuple[tuple[float, float], ...], only_best: bool = False
) -> tuple[list[Found], float, bool]:
    """Best design of every position class over the ballast bounds, the gap of the best, and whether all decided.

    The gap is absolute, in the goal's own unit. `only_best` leaves a position as soon as it cannot hold the best.
    """
    ballast = slices.problem.ballast
    assert ballast is not None
    low, high = (slices.problem.mass + x for x in (ballast.least, ballast.most))
    searches = [_Position(slices, place) for place in positions(slices, intervals)]
    # Positions with a design at some mass first, so that those without one know what they have to beat.
    for search in searches:
        for n in range(5):
            search.value(low + (high - low) * n / 4)
    bounds: list[float] = []
    top = math.inf
    for search in sorted(searches, key=lambda each: each.least):
        bounds.append(search.search(low, high, top, 0 if only_best else HOPELESS))
        top = min(top, search.least)
    results = [search.best for search in searches if search.best is not None]
    decided = all(search.decided for search in searches)
    if not results:
        return [], 0.0, decided and min(bounds) == math.inf
    gap = max(0.0, top - min(bounds))
    return results, gap, decided and gap <= 10 * GAP * max(abs(top), 1e-12)
