"""Archive of the designs a search has accepted: the incumbent of least cost, or the front of cost against value."""

from __future__ import annotations

import threading
from dataclasses import dataclass, field
from typing import Literal

import numpy as np

from detune.proof.selection_data import Floats, Integers

Aim = Literal["least_cost", "front"]

COST_ROUNDING = 1.0e-12
"""Relative slack when a sum of costs is compared with another sum added in a different order."""


@dataclass(frozen=True)
class FoundDesign:
    """One accepted design: part of each group in the selection's order, ballast step, cost and value."""

    parts: tuple[int, ...]
    ballast: int
    cost: float
    value: float


@dataclass
class Archive:
    """Accepted designs that are not dominated, kept in order of cost; shared by all workers of one search.

    aim least_cost keeps one design: least cost, then greatest value, then the smallest part numbers.
    aim front keeps every nondominated pair of cost and value, of equal pairs the smallest part numbers.
    """

    aim: Aim
    cost_cap: float = np.inf
    designs: list[FoundDesign] = field(default_factory=list)
    lock: threading.RLock = field(default_factory=threading.RLock)

    def offer(self, designs: Integers, cost: Floats, value: Floats) -> int:
        """Take in accepted designs (D, G+1) with cost (D,) and value (D,); returns how many were kept.

        Raises ValueError for a value that is not a number.
        """
        kept = 0
        if bool(np.isnan(value).any()):
            raise ValueError("the final test returned a value that is not a number")
        with self.lock:
            for row, price, worth in zip(designs.tolist(), cost.tolist(), value.tolist(), strict=True):
                if price > self.cost_cap:
                    continue
                found = FoundDesign(tuple(row[:-1]), row[-1], price, worth)
                kept += self._insert(found)
        return kept

    def _insert(self, found: FoundDesign) -> int:
        if self.aim == "least_cost":
            if self.designs and _key(self.designs[0]) <= _key(found):
                return 0
            self.designs = [found]
            return 1
        for other in self.designs:
            better = other.cost <= found.cost and other.value >= found.value
            if better and (other.cost, other.value) != (found.cost, found.value):
                return 0
            if better and _key(other) <= _key(found):
                return 0
        self.designs = [d for d in self.designs if not (found.cost <= d.cost and found.value >= d.value)]
        self.designs.append(found)
        self.designs.sort(key=_key)
        return 1

    def cap(self) -> float:
        """Cost above which no design is of interest, slack for rounding included."""
        with self.lock:
            cap = self.cost_cap
            if self.aim == "least_cost" and self.designs:
                cap = min(cap, self.designs[0].cost)
            elif self.designs and self.designs[-1].value == np.inf:
                # Nothing can be better than a value without bound: only cheaper designs are of interest.
                cap = min(cap, self.designs[-1].cost)
        return cap + COST_ROUNDING * abs(cap) if np.isfinite(cap) else cap

    def staircase(self) -> tuple[Floats, Floats]:
        """Costs (F,) ascending and values (F,): a design of cost >= costs[i] must reach values[i]."""
        with self.lock:
            if self.aim == "least_cost":
                return np.zeros(0), np.zeros(0)
            cost = np.array([d.cost for d in self.designs])
            value = np.array([d.value for d in self.designs])
        return cost, value


def _key(found: FoundDesign) -> tuple[float, float, tuple[int, ...], int]:
    return (found.cost, -found.value, found.parts, found.ballast)


def required_value(cost: Floats, staircase: tuple[Floats, Floats]) -> Floats:
    """Value (N,) that a design of at least the given cost (N,) must reach to be nondominated; -inf if any."""
    steps, values = staircase
    if steps.size == 0:
        return np.full(cost.shape, -np.inf)
    position = np.searchsorted(steps, cost - COST_ROUNDING * np.abs(cost), side="right") - 1
    # A value equal to the required one is dominated; the slack lets ties through to the exact comparison.
    return np.where(position >= 0, values[np.maximum(position, 0)] - 1e-9, -np.inf)
