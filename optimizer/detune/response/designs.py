"""Batches of designs as whole numbers: a part index for every group and a ballast step."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.response.model import Model

Floats = NDArray[np.float64]
Integers = NDArray[np.intp]


@dataclass(frozen=True)
class Designs:
    """D designs: `part` (D, G) indexes each group's mounts, `step` (D,) the ballast steps."""

    part: Integers
    step: Integers

    @property
    def count(self) -> int:
        return int(self.part.shape[0])

    def take(self, index: NDArray[np.generic]) -> "Designs":
        """Return the designs at these indices, or where this mask holds."""
        return Designs(self.part[index], self.step[index])


def all_designs(model: Model, first: int, last: int) -> Designs:
    """Return designs number `first` up to `last` of the full product, ballast step running fastest."""
    sizes = [len(group.mounts) for group in model.groups] + [len(model.ballast_mass)]
    numbers = np.arange(first, last)
    columns = np.unravel_index(numbers, sizes)
    return Designs(np.stack(columns[:-1], axis=1), np.asarray(columns[-1]))


def design_count(model: Model) -> int:
    """Return how many designs there are."""
    count = len(model.ballast_mass)
    for group in model.groups:
        count *= len(group.mounts)
    return count


def total_cost(model: Model, designs: Designs) -> Floats:
    """Return the cost (D,) of all parts and the ballast."""
    cost: Floats = model.ballast_cost[designs.step].copy()
    for index, group in enumerate(model.groups):
        pieces = sum(station.bought for station in model.stations if station.group == index)
        cost += pieces * group.arrays.cost[designs.part[:, index]]
    return cost


def part_numbers(model: Model, designs: Designs) -> Floats:
    """Return the number (D,) of different part numbers in each design."""
    known: dict[tuple[str, str], int] = {}
    codes = []
    for index, group in enumerate(model.groups):
        code = np.array([known.setdefault((m.catalog, m.part), len(known)) for m in group.mounts])
        codes.append(code[designs.part[:, index]])
    ordered = np.sort(np.stack(codes, axis=1), axis=1)
    return 1.0 + np.count_nonzero(np.diff(ordered, axis=1), axis=1)
