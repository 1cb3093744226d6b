"""Reference rules of the search in numpy: the domain filter at a prefix, and the enumeration of the last groups.

A node of the search is a prefix (parts chosen for the first groups) and a domain (parts still possible) for each
group that remains. Every rule removes only designs that violate a requirement, cost more than the cap, or
cannot be nondominated; `counts` tells how many designs each rule removed.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from math import prod

import numpy as np

from detune.proof.kernels_numpy import eigenvalues, unpack
from detune.proof.loewner import Flags, eigenvalue_prune, static_interval
from detune.proof.search_archive import required_value
from detune.proof.search_tables import GroupTable, SearchTable
from detune.proof.selection_data import Floats, ForbiddenBands, Integers

WINDOW_SLACK = 1.0e-9
"""Relative slack given to every limit inside the search; the exact test of the survivors has none."""

RULES = (
    "cost",
    "static_box",
    "eigenvalue_box",
    "static_pair",
    "static",
    "eigenvalue",
    "response",
    "exact",
    "met",
)
"""Rules in the order in which they are applied; `met` counts the designs that passed all."""


@dataclass(frozen=True, eq=False)
class Prefix:
    """Parts chosen so far (positions in the tables' groups), their packed stiffness sums and their cost."""

    chosen: tuple[int, ...]
    static: Floats
    dynamic: Floats
    cost: float


@dataclass(frozen=True, eq=False)
class Demand:
    """What a design must reach at the time of asking: the cost cap, and the archive's staircase of values.

    tighten says what a required value acts on: the bands (separation) or the limits of the static windows (margin).
    """

    bands: ForbiddenBands
    cap: float
    staircase: tuple[Floats, Floats]
    separation_counts: bool
    static_counts: bool

    def edges(self, cost: Floats) -> tuple[Floats, Floats]:
        """Edges (N, I) of the forbidden bands as omega^2 (negative below zero) for cost bounds (N,)."""
        separation = np.broadcast_to(self.bands.separation, (cost.shape[0], self.bands.low.shape[0]))
        if self.separation_counts:
            separation = np.maximum(separation, required_value(cost, self.staircase)[:, None])
        low = 2.0 * np.pi * self.bands.low * (1.0 - separation)
        high = 2.0 * np.pi * self.bands.high * (1.0 + separation)
        return low * np.abs(low), high * np.abs(high)

    def tightening(self, cost: Floats) -> Floats:
        """Factor (N,) >= 1 by which static limits are tightened for cost bounds (N,)."""
        if not self.static_counts:
            return np.ones_like(cost)
        return 1.0 + np.maximum(required_value(cost, self.staircase), 0.0)


def root_prefix(table: SearchTable) -> Prefix:
    """The empty prefix of a table."""
    return Prefix((), table.base_static, table.base_dynamic, table.cost)


def extend(prefix: Prefix, group: GroupTable, position: int) -> Prefix:
    """The prefix with one more part."""
    return Prefix(
        (*prefix.chosen, position),
        prefix.static + group.matrix_map @ group.static[position],
        prefix.dynamic + group.matrix_map @ group.dynamic[position],
        prefix.cost + float(group.cost[position]),
    )


def add_counts(counts: dict[str, int], rule: str, number: int) -> None:
    """Add to the count of a rule."""
    counts[rule] = counts.get(rule, 0) + int(number)


def filter_domains(
    table: SearchTable,
    prefix: Prefix,
    domains: list[Integers],
    demand: Demand,
    counts: dict[str, int],
) -> list[Integers] | None:
    """Remove from each remaining domain the parts that no completion can save; None when a domain is empty.

    domains[i] holds positions in table.groups[len(prefix.chosen) + i]. The removed designs are counted.
    """
    first = len(prefix.chosen)
    groups = table.groups[first:]
    domains = list(domains)
    for index, group in enumerate(groups):
        others = prod(len(d) for i, d in enumerate(domains) if i != index)
        rest = sum(float(groups[i].cost[d].min()) for i, d in enumerate(domains) if i != index)
        bound = prefix.cost + rest + group.cost[domains[index]]
        keep = bound <= demand.cap
        add_counts(counts, "cost", int((~keep).sum()) * others)
        domains[index] = domains[index][keep]
        if not len(domains[index]):
            return None
        bound = bound[keep]
        static_fails, eigen_fails = _box_tests(table, prefix, domains, index, demand, bound)
        add_counts(counts, "static_box", int(static_fails.sum()) * others)
        add_counts(counts, "eigenvalue_box", int((eigen_fails & ~static_fails).sum()) * others)
        domains[index] = domains[index][~(static_fails | eigen_fails)]
        if not len(domains[index]):
            return None
    return domains


def _box_tests(
    table: SearchTable, prefix: Prefix, domains: list[Integers], index: int, demand: Demand, bound: Floats
) -> tuple[Flags, Flags]:
    """Static and eigenvalue test of each part of one domain against the box of the other domains."""
    first = len(prefix.chosen)
    own = table.groups[first + index]
    static_low, static_high = prefix.static, prefix.static
    dynamic_low, dynamic_high = prefix.dynamic, prefix.dynamic
    for i, domain in enumerate(domains):
        if i == index:
            continue
        group = table.groups[first + i]
        static_low = static_low + group.matrix_map @ group.static[domain].min(axis=0)
        static_high = static_high + group.matrix_map @ group.static[domain].max(axis=0)
        dynamic_low = dynamic_low + group.matrix_map @ group.dynamic[domain].min(axis=0)
        dynamic_high = dynamic_high + group.matrix_map @ group.dynamic[domain].max(axis=0)
    part_static = own.static[domains[index]] @ own.matrix_map.T
    part_dynamic = own.dynamic[domains[index]] @ own.matrix_map.T
    lower, upper = _windows(table, prefix, domains, index)
    static_fails = _static_fails(
        table, part_static + static_low, part_static + static_high, lower, upper, demand.tightening(bound)
    )
    eigen_fails = np.zeros(len(bound), dtype=bool)
    if demand.bands.low.size:
        n = table.freedoms
        low = eigenvalues(part_dynamic + dynamic_low, n)
        high = eigenvalues(part_dynamic + dynamic_high, n)
        eigen_fails = eigenvalue_prune(low, high, *demand.edges(bound))
    return static_fails, eigen_fails


def _windows(
    table: SearchTable, prefix: Prefix, domains: list[Integers], index: int
) -> tuple[Floats, Floats]:
    """Windows (P, R) of all rows for each part of one domain: own, chosen, or the union over a domain."""
    count = len(domains[index])
    lower, upper = np.empty((count, len(table.rows))), np.empty((count, len(table.rows)))
    for position, group in enumerate(table.groups):
        span = slice(*group.rows)
        if position < len(prefix.chosen):
            lower[:, span] = group.lower[:, prefix.chosen[position]]
            upper[:, span] = group.upper[:, prefix.chosen[position]]
            continue
        domain = domains[position - len(prefix.chosen)]
        if position - len(prefix.chosen) == index:
            lower[:, span], upper[:, span] = group.lower[:, domain].T, group.upper[:, domain].T
        else:
            lower[:, span] = group.lower[:, domain].min(axis=1)
            upper[:, span] = group.upper[:, domain].max(axis=1)
    stations = table.groups[-1].rows[1]
    lower[:, stations:], upper[:, stations:] = table.row_lower, table.row_upper
    return lower, upper


def relaxed_window(lower: Floats, upper: Floats, tighten: Floats) -> tuple[Floats, Floats]:
    """Windows (N, R) tightened by a factor (N,) where that has a meaning, then relaxed by the slack.

    A positive lower limit rises and a positive upper limit falls with the required margin; others stay.
    """
    factor = tighten[:, None]
    lower = np.where(lower > 0.0, lower * factor, lower)
    upper = np.where(upper > 0.0, upper / factor, upper)
    with np.errstate(invalid="ignore"):
        lower = lower - WINDOW_SLACK * np.abs(lower)
        upper = upper + WINDOW_SLACK * np.abs(upper)
    return lower, upper


def _static_fails(
    table: SearchTable, low: Floats, high: Floats, lower: Floats, upper: Floats, tighten: Floats
) -> Flags:
    """Whether every stiffness between low and high (N, m) breaks some window (N, R) or is not supported."""
    n = table.freedoms
    z_low, z_high, valid = static_interval(unpack(low, n), unpack(high, n), table.rows, table.load)
    lower, upper = relaxed_window(lower, upper, tighten)
    with np.errstate(invalid="ignore"):
        fails = valid & ((z_high < lower) | (z_low > upper) | (lower > upper)).any(axis=1)
    loose = ~valid
    if loose.any():
        # Not even the stiffest completion is positive definite: nothing carries the load.
        values = eigenvalues(high[loose], n)
        fails[loose] = values[:, 0] < -1e-12 * np.abs(values[:, -1])
    flags: Flags = fails
    return flags


def enumerate_leaf(
    table: SearchTable,
    prefix: Prefix,
    domains: list[Integers],
    demand: Callable[[], Demand],
    counts: dict[str, int],
    *,
    batch: int = 16384,
) -> Iterator[tuple[Integers, Floats]]:
    """Batches (positions (D, G), cost (D,)) of the designs of a node that pass cost, static windows and bands.

    `demand` is asked anew for each batch, since what was found in one batch may exclude designs of the next.
    """
    first = len(prefix.chosen)
    groups = table.groups[first:]
    shape = tuple(len(d) for d in domains)
    total = prod(shape)
    for start in range(0, total, batch):
        now = demand()
        flat = np.arange(start, min(start + batch, total))
        picks = np.unravel_index(flat, shape)
        chosen = [domains[i][pick] for i, pick in enumerate(picks)]
        cost = prefix.cost + sum(group.cost[c] for group, c in zip(groups, chosen, strict=True))
        keep = np.asarray(cost <= now.cap)
        add_counts(counts, "cost", int((~keep).sum()))
        cost = np.asarray(cost)[keep]
        chosen = [c[keep] for c in chosen]
        if cost.size:
            good = _check_points(table, prefix, chosen, cost, now, counts)
            if good.size:
                head = [np.full(good.size, p, dtype=np.int64) for p in prefix.chosen]
                yield np.stack([*head, *(c[good] for c in chosen)], axis=1), cost[good]


def _check_points(
    table: SearchTable,
    prefix: Prefix,
    chosen: list[Integers],
    cost: Floats,
    demand: Demand,
    counts: dict[str, int],
) -> Integers:
    """Indices of the points that pass static windows and bands."""
    first = len(prefix.chosen)
    static = np.broadcast_to(prefix.static, (cost.size, prefix.static.size)).copy()
    dynamic = np.broadcast_to(prefix.dynamic, static.shape).copy()
    lower, upper = np.empty((cost.size, len(table.rows))), np.empty((cost.size, len(table.rows)))
    for position, group in enumerate(table.groups):
        span = slice(*group.rows)
        pick = np.full(cost.size, prefix.chosen[position]) if position < first else chosen[position - first]
        lower[:, span], upper[:, span] = group.lower[:, pick].T, group.upper[:, pick].T
        if position >= first:
            static += group.static[pick] @ group.matrix_map.T
            dynamic += group.dynamic[pick] @ group.matrix_map.T
    stations = table.groups[-1].rows[1]
    lower[:, stations:], upper[:, stations:] = table.row_lower, table.row_upper
    fails = _static_fails(table, static, static, lower, upper, demand.tightening(cost))
    add_counts(counts, "static", int(fails.sum()))
    good = np.flatnonzero(~fails)
    if demand.bands.low.size and good.size:
        values = eigenvalues(dynamic[good], table.freedoms)
        inside = eigenvalue_prune(values, values, *demand.edges(cost[good]))
        add_counts(counts, "eigenvalue", int(inside.sum()))
        good = good[~inside]
    return good
