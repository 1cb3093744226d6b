"""What the parts of a batch of designs cost, with the price of each part number at the quantity bought."""

from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.parts.kinds.mount import Mount
from detune.parts.prices import Breaks
from detune.response.model import Model

Floats = NDArray[np.float64]
Integers = NDArray[np.intp]
Key = tuple[str, str, str]


def single_price(mount: Mount) -> float:
    """Return the price of one piece of a mount without its damper, bought singly; 0 of an empty station."""
    return (mount.cost - mount.damper_cost) / mount.pieces if mount.pieces else 0.0


def least_cost(mount: Mount) -> float:
    """Return what a mount and the damper beside it cost at best, in whatever quantity they are bought."""
    own = min([single_price(mount), *(price for _, price in mount.cost_breaks)])
    beside = min([mount.damper_cost, *(price for _, price in mount.damper_breaks)])
    return mount.pieces * own + beside


def least_costs(model: Model, group: int) -> Floats:
    """Return what each part of a group costs at best (P,), at all stations of the group together."""
    stations = bought_stations(model, group)
    return stations * np.array([least_cost(mount) for mount in model.groups[group].mounts])


def bought_stations(model: Model, group: int) -> int:
    """Return how many places of a group a part is bought for."""
    return sum(station.bought for station in model.stations if station.group == group)


def has_breaks(mounts: Iterable[Mount]) -> bool:
    """Return whether some price falls with the quantity bought."""
    return any(mount.cost_breaks or mount.damper_breaks for mount in mounts)


@dataclass(frozen=True, eq=False)
class QuantityPrices:
    """Prices of the mounts and dampers of a model. G groups, K part numbers, B break quantities.

    `number`[g] (P, 2): the part number of each mount of a group and of the damper beside it, -1 for none;
    the same part in several groups has one number. `pieces`[g] (P, 2): how many of it the group buys.
    `quantities` (B,) rise from 1; `price` (K, B) is that of one piece from so many up.
    """

    number: tuple[Integers, ...]
    pieces: tuple[Integers, ...]
    quantities: NDArray[np.int64]
    price: Floats

    def cost(self, part: Integers) -> Floats:
        """Return the cost (D,) of all parts of designs (D, G)."""
        numbers = np.concatenate([n[part[:, g]] for g, n in enumerate(self.number)], axis=1)
        pieces = np.concatenate([p[part[:, g]] for g, p in enumerate(self.pieces)], axis=1)
        cost = np.zeros(len(part))
        for column in range(numbers.shape[1]):
            own = numbers[:, column]
            together = np.where(numbers == own[:, None], pieces, 0).sum(axis=1)
            reached = np.searchsorted(self.quantities, together, side="right") - 1
            cost += pieces[:, column] * self.price[own, np.maximum(reached, 0)]
        return cost


def quantity_prices(model: Model) -> QuantityPrices | None:
    """Return the prices of a model, None where no price falls with the quantity."""
    if not any(has_breaks(group.mounts) for group in model.groups):
        return None
    known: dict[Key, int] = {}
    breaks: list[tuple[float, Breaks]] = []

    def number_of(key: Key, single: float, falling: Breaks) -> int:
        if key not in known:
            known[key] = len(known)
            breaks.append((single, falling))
        return known[key]

    numbers, pieces = [], []
    for index, group in enumerate(model.groups):
        stations = bought_stations(model, index)
        number = np.full((len(group.mounts), 2), -1, dtype=np.intp)
        count = np.zeros((len(group.mounts), 2), dtype=np.intp)
        for row, mount in enumerate(group.mounts):
            if mount.pieces:
                key = ("part", mount.catalog, mount.base or mount.part)
                number[row, 0] = number_of(key, single_price(mount), mount.cost_breaks)
                count[row, 0] = stations * mount.pieces
            if mount.damper:
                key = ("damper", mount.damper_catalog, mount.damper)
                number[row, 1] = number_of(key, mount.damper_cost, mount.damper_breaks)
                count[row, 1] = stations
        numbers.append(number)
        pieces.append(count)
    quantities = sorted({1, *(least for _, falling in breaks for least, _ in falling)})
    table = np.array([[_price(*row, quantity) for quantity in quantities] for row in breaks])
    return QuantityPrices(tuple(numbers), tuple(pieces), np.array(quantities), table)


def _price(single: float, falling: Breaks, quantity: int) -> float:
    return next((price for least, price in reversed(falling) if quantity >= least), single)
