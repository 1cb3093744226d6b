"""Batches of designs as whole numbers: a part index for every group and a ballast step."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.response.model import Model
from detune.response.prices import bought_stations, quantity_prices

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
    """Return the cost (D,) of all parts and the ballast, with the price of each part at the quantity bought."""
    cost: Floats = model.ballast_cost[designs.step].copy()
    prices = quantity_prices(model)
    if prices is not None:
        return cost + prices.cost(designs.part)
    for index, group in enumerate(model.groups):
        cost += bought_stations(model, index) * group.arrays.cost[designs.part[:, index]]
    return cost


def part_numbers(model: Model, designs: Designs) -> Floats:
    """Return the number (D,) of different part numbers in each design; dampers and pieces of ballast count too."""
    known: dict[tuple[str, str, str], int] = {}
    rows = []
    for index, group in enumerate(model.groups):
        codes = np.full((len(group.mounts), 2), -1)
        for number, mount in enumerate(group.mounts):
            if mount.pieces:
                key = ("part", mount.catalog, mount.base or mount.part)
                codes[number, 0] = known.setdefault(key, len(known))
            if mount.damper:
                key = ("damper", mount.damper_catalog, mount.damper)
                codes[number, 1] = known.setdefault(key, len(known))
        rows.append(codes[designs.part[:, index]])
    every = np.sort(np.concatenate(rows, axis=1), axis=1)
    new = np.ones_like(every, dtype=bool)
    new[:, 1:] = np.diff(every, axis=1) > 0
    pieces = np.array([float(step.pieces > 0) for step in model.ballast])
    return np.asarray(np.count_nonzero(new & (every >= 0), axis=1) + pieces[designs.step], dtype=float)
