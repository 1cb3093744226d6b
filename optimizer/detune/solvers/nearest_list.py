"""A short list of real designs by margins that are linear round an ideal: no product of all parts is ever formed.

Groups are put together one after the other. Of the combinations so far the most promising are kept, as if the groups
that are still to come had their ideal parts; where there are few, all are kept.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Indices = NDArray[np.intp]
# Parts of a group, and combinations of groups, that are kept.
EACH, BEAM = 60, 1200
# Predicted shortfall up to which a design may well meet every limit.
SLACK = 0.02
# Designs that stay on the feasible side are ranked by how far they move the margins, with this weight.
MOVED = 1e-3


@dataclass(frozen=True)
class Options:
    """What one group may take: part numbers (P,), how far each moves the margins (P, R), its overload (P,), and what
    it adds to the objective (P,), less being better.
    """

    number: Indices
    moved: Floats
    over: Floats
    value: Floats

    def take(self, chosen: Indices) -> Options:
        """Some of the options, in the order `chosen`."""
        return Options(self.number[chosen], self.moved[chosen], self.over[chosen], self.value[chosen])


@dataclass(frozen=True)
class Listed:
    """A design of the short list: its rank (less is nearer), predicted shortfall, part of each group, ballast step."""

    rank: float
    short: float
    parts: tuple[int, ...]
    step: int


def shortfall(margins: Floats) -> Floats:
    """Root of the sum of squares (...,) of the margins (..., R) that are missed."""
    return np.asarray(np.sqrt(np.sum(np.minimum(margins, 0.0) ** 2, axis=-1)))


def best_of(margins: Floats, options: Options, count: int) -> Options:
    """The nearest options, and as many of the best in the objective among those that may meet every limit."""
    short = shortfall(margins + options.moved) + options.over
    rank = short + MOVED * np.linalg.norm(options.moved, axis=1)
    return options.take(_kept(rank, short, options.value, count))


def _kept(rank: Floats, short: Floats, value: Floats, count: int) -> Indices:
    """Numbers of the nearest and of the best, by turns, each once; only the nearest where the objective is no sum."""
    near = np.argsort(rank, kind="stable")[:count]
    if len(rank) <= count or np.ptp(value) == 0.0:
        return near
    good = np.flatnonzero(short <= SLACK)
    good = good[np.lexsort((rank[good], value[good]))][:count]
    turns = np.full(2 * count, -1, dtype=np.intp)
    turns[: 2 * len(near) : 2] = near
    turns[1 : 2 * len(good) : 2] = good
    turns = turns[turns >= 0]
    _, first = np.unique(turns, return_index=True)
    return turns[np.sort(first)][:count]


def listed_designs(margins: Floats, options: list[Options], count: int) -> list[Listed]:
    """At most `count` designs of one option of each group, the ballast last; the most promising first."""
    felt = _felt(margins, options)
    base = margins[felt]
    parts = np.zeros((1, 0), dtype=np.intp)
    moved, over, value = np.zeros((1, base.size)), np.zeros(1), np.zeros(1)
    for place, each in enumerate(options):
        pairs = len(parts) * len(each.number)
        parts = np.column_stack(
            [np.repeat(parts, len(each.number), axis=0), np.tile(each.number, len(parts))]
        )
        moved = (moved[:, None] + each.moved[None, :, felt]).reshape(pairs, base.size)
        over = (over[:, None] + each.over).ravel()
        value = (value[:, None] + each.value).ravel()
        short = shortfall(base + moved) + over
        rank = short + MOVED * np.linalg.norm(moved, axis=1)
        kept = _kept(rank, short, value, count if place == len(options) - 1 else BEAM)
        parts, moved, over, value = parts[kept], moved[kept], over[kept], value[kept]
        short, rank = short[kept], rank[kept]
    return [
        Listed(float(rank[k]), float(short[k]), tuple(parts[k, :-1].tolist()), int(parts[k, -1]))
        for k in range(len(parts))
    ]


def _felt(margins: Floats, options: list[Options]) -> Indices:
    """Rows that some combination might miss; all where none can."""
    least = margins + sum((each.moved.min(axis=0) for each in options), np.zeros(margins.size))
    found = np.flatnonzero(least < 0.0)
    return found if found.size else np.arange(margins.size)
