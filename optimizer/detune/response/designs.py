"""Batches of designs as whole numbers: a part index for every group and a ballast step."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.parts.kinds.mount import Mount
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
    """Return the cost (D,) of all parts and the ballast, with the price of each part at the quantity bought."""
    cost: Floats = model.ballast_cost[designs.step].copy()
    quantity: dict[tuple[str, str], Floats] = {}
    prices: dict[tuple[str, str], Mount] = {}
    for index, group in enumerate(model.groups):
        stations = sum(station.bought for station in model.stations if station.group == index)
        part = designs.part[:, index]
        if not any(mount.cost_breaks for mount in group.mounts):
            cost += stations * group.arrays.cost[part]
            continue
        cost += stations * np.array([mount.damper_cost for mount in group.mounts])[part]
        for number, mount in enumerate(group.mounts):
            if mount.pieces:
                key = (mount.catalog, mount.base or mount.part)
                bought = np.where(part == number, float(stations * mount.pieces), 0.0)
                quantity[key] = quantity.get(key, 0.0) + bought
                prices.setdefault(key, mount)
    for key, bought in quantity.items():
        cost += bought * price_at(prices[key], bought)
    return cost


def price_at(mount: Mount, bought: Floats) -> Floats:
    """Return the price (D,) of one piece of a mount at quantities (D,)."""
    single = (mount.cost - mount.damper_cost) / mount.pieces
    price = np.full(len(bought), single)
    for least, cheaper in mount.cost_breaks:
        price = np.where(bought >= least, cheaper, price)
    return price


def part_numbers(model: Model, designs: Designs) -> Floats:
    """Return the number (D,) of different part numbers in each design, dampers counted too."""
    known: dict[tuple[str, str], int] = {}
    rows = []
    for index, group in enumerate(model.groups):
        codes = np.full((len(group.mounts), 2), -1)
        for number, mount in enumerate(group.mounts):
            for place, name in enumerate(mount.bought):
                codes[number, place] = known.setdefault(
                    ("damper" if place else mount.catalog, name), len(known)
                )
        rows.append(codes[designs.part[:, index]])
    every = np.sort(np.concatenate(rows, axis=1), axis=1)
    new = np.ones_like(every, dtype=bool)
    new[:, 1:] = np.diff(every, axis=1) > 0
    return np.asarray(np.count_nonzero(new & (every >= 0), axis=1), dtype=float)
