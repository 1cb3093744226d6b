"""The search rules on compiled kernels: the same filter, leaf and response screen as `search_bounds.py`."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np

from detune.proof import search_bounds as bounds
from detune.proof.block_data import Ask, Domain, Frame, Node
from detune.proof.kernels_numba import load_kernels, mark_ready
from detune.proof.kernels_numpy import pack
from detune.proof.response_rows import case_margin, station_counts
from detune.proof.search_tables import GroupTable, SearchTable
from detune.proof.selection_data import Floats, Integers, Selection

RULE_ORDER = ("cost", "static_box", "eigenvalue_box", "static_pair", "static", "eigenvalue")
ENOUGH = 2048
MOST_NODES = 256


@dataclass(frozen=True, eq=False)
class CompiledRules:
    """Filter, leaf and response margin on compiled kernels, and how many groups a leaf takes."""

    filter: Callable[..., list[Integers] | None]
    leaf: Callable[..., Iterator[tuple[Integers, Floats]]]
    margin: Callable[..., Floats]
    leaf_groups: int


def compiled_rules(
    selection: Selection,
    tables: tuple[SearchTable, ...],
    announce: Callable[[str], None] | None,
    check: Callable[[], None],
) -> CompiledRules:
    """Rules for one selection; compiles the kernels if they are not in the cache yet."""
    kernels = load_kernels(selection.freedoms, announce)
    screen = response_screen(selection, kernels)
    relaxed = {id(group): relaxed_windows(group) for table in tables for group in table.groups}
    nodes = _Nodes(kernels, relaxed, check)
    mark_ready(selection.freedoms)
    groups = len(selection.groups)
    return CompiledRules(nodes.filter, nodes.leaf, screen, min(3, groups) if groups != 3 else 2)


def relaxed_windows(group: GroupTable) -> tuple[Floats, Floats]:
    """Windows of a group with the search's slack."""
    tighten = np.ones(group.lower.shape[0])
    return bounds.relaxed_window(group.lower, group.upper, tighten)


@dataclass(frozen=True, eq=False)
class _Nodes:
    """The compiled functions with the windows of all groups."""

    kernels: Any
    windows: dict[int, tuple[Floats, Floats]]
    check: Callable[[], None]

    def row_windows(
        self, table: SearchTable, prefix: bounds.Prefix, domains: list[Integers]
    ) -> tuple[Floats, Floats]:
        """Windows (R,): of the chosen parts, unions over the domains, and of the static rows."""
        low, high = np.empty(len(table.rows)), np.empty(len(table.rows))
        for position, group in enumerate(table.groups):
            span = slice(*group.rows)
            lower, upper = self.windows[id(group)]
            if position < len(prefix.chosen):
                low[span], high[span] = lower[:, prefix.chosen[position]], upper[:, prefix.chosen[position]]
            else:
                domain = domains[position - len(prefix.chosen)]
                low[span], high[span] = lower[:, domain].min(axis=1), upper[:, domain].max(axis=1)
        stations = table.groups[-1].rows[1]
        lower, upper = bounds.relaxed_window(table.row_lower[None], table.row_upper[None], np.ones(1))
        low[stations:], high[stations:] = lower[0], upper[0]
        return low, high

    def filter(
        self,
        table: SearchTable,
        prefix: bounds.Prefix,
        domains: list[Integers],
        demand: bounds.Demand,
        counts: dict[str, int],
    ) -> list[Integers] | None:
        """As `search_bounds.filter_domains`."""
        first = len(prefix.chosen)
        domains = list(domains)
        for index, domain in enumerate(domains):
            group = table.groups[first + index]
            others, rest = 1, prefix.cost
            soft_s = stiff_s = prefix.static
            soft_d = stiff_d = prefix.dynamic
            for i, other in enumerate(domains):
                if i == index:
                    continue
                g = table.groups[first + i]
                others *= len(other)
                rest += float(g.cost[other].min())
                soft_s = soft_s + g.matrix_map @ g.static[other].min(axis=0)
                stiff_s = stiff_s + g.matrix_map @ g.static[other].max(axis=0)
                soft_d = soft_d + g.matrix_map @ g.dynamic[other].min(axis=0)
                stiff_d = stiff_d + g.matrix_map @ g.dynamic[other].max(axis=0)
            cost = rest + group.cost[domain]
            keep = cost <= demand.cap
            bounds.add_counts(counts, "cost", int((~keep).sum()) * others)
            domains[index] = domain = domain[keep]
            if not len(domain):
                return None
            verdict = np.zeros(len(domain), dtype=np.int64)
            windows = self.row_windows(table, prefix, domains)
            self.kernels.filter_group(
                Frame(table.rows, table.load),
                Node(soft_s, soft_d, rest, *windows),
                Node(stiff_s, stiff_d, rest, *windows),
                self.domain(group, domain),
                rest,
                ask_of(demand),
                verdict,
            )
            bounds.add_counts(counts, "static_box", int((verdict == 1).sum()) * others)
            bounds.add_counts(counts, "eigenvalue_box", int((verdict == 2).sum()) * others)
            domains[index] = domain[verdict == 0]
            if not len(domains[index]):
                return None
        return domains

    def domain(self, group: GroupTable, lanes: Integers) -> Domain:
        """Some parts of a group as the compiled code takes them."""
        lower, upper = self.windows[id(group)]
        return Domain(
            group.matrix_map,
            np.ascontiguousarray(group.static[lanes].T),
            np.ascontiguousarray(group.dynamic[lanes].T),
            np.ascontiguousarray(group.cost[lanes]),
            np.ascontiguousarray(lower[:, lanes]),
            np.ascontiguousarray(upper[:, lanes]),
            group.rows[0],
        )

    def leaf(
        self,
        table: SearchTable,
        prefix: bounds.Prefix,
        domains: list[Integers],
        demand: Callable[[], bounds.Demand],
        counts: dict[str, int],
    ) -> Iterator[tuple[Integers, Floats]]:
        """As `search_bounds.enumerate_leaf`, for one to three groups."""
        first = len(prefix.chosen)
        groups = table.groups[first:]
        if len(groups) == 1:
            yield from bounds.enumerate_leaf(table, prefix, domains, demand, counts)
            return
        # The last two domains in order of their supporting stiffness: chunks of similar parts make small boxes.
        domains = list(domains)
        for i in (-2, -1):
            domains[i] = domains[i][np.argsort(groups[i].static[domains[i], 2], kind="stable")]
        lanes_of = [self.domain(group, domain) for group, domain in zip(groups, domains, strict=True)]
        frame = Frame(table.rows, table.load)
        node = Node(prefix.static, prefix.dynamic, prefix.cost, *self.row_windows(table, prefix, domains))
        size, start = len(domains[0]) if len(groups) == 3 else 1, 0
        while start < size:
            self.check()
            removed = np.zeros(len(RULE_ORDER), dtype=np.int64)
            ask = ask_of(demand())
            if len(groups) == 3:
                lanes, start = self.kernels.last_three(
                    frame, node, *lanes_of, ask, removed, start, ENOUGH, MOST_NODES
                )
            else:
                lanes, start = self.kernels.last_two(frame, node, *lanes_of, ask, removed), 1
            for rule, number in zip(RULE_ORDER, removed.tolist(), strict=True):
                bounds.add_counts(counts, rule, number)
            if len(lanes):
                picks = [domain[lanes[:, i]] for i, domain in enumerate(domains)]
                cost = prefix.cost + np.sum([g.cost[p] for g, p in zip(groups, picks, strict=True)], axis=0)
                head = [np.full(len(lanes), p, dtype=np.int64) for p in prefix.chosen]
                yield np.stack([*head, *picks], axis=1), cost


def ask_of(demand: bounds.Demand) -> Ask:
    """A demand as the compiled code takes it."""
    bands = np.stack([demand.bands.low, demand.bands.high, demand.bands.separation]).astype(np.float64)
    flags = np.array([demand.separation_counts, demand.static_counts], dtype=np.int64)
    return Ask(np.ascontiguousarray(bands), float(demand.cap), *demand.staircase, flags)


def response_screen(selection: Selection, kernels: Any) -> Callable[..., Floats]:
    """A compiled `response_rows.response_margin` for one selection."""
    b = selection.stations
    count, _, n = b.shape
    axes = np.ascontiguousarray(b.reshape(count * 3, n))
    parallel = np.repeat(station_counts(selection), 3)
    outer = np.ascontiguousarray(pack(np.einsum("ai,aj->aij", axes, axes)) * parallel[:, None])
    axis_group = np.repeat(selection.station_group, 3).astype(np.int64)
    starts = np.concatenate([[0], np.cumsum(selection.sizes)[:-1]]).astype(np.int64)
    stiffness = np.concatenate([g.kappa_dynamic for g in selection.groups])
    loss = np.concatenate([g.loss for g in selection.groups])
    viscous = np.concatenate([g.viscous for g in selection.groups])
    mass, cases, fixed = pack(selection.ballast.mass), selection.harmonic, selection.fixed
    total = np.ascontiguousarray(cases.total.reshape(-1, 3 * count))

    def one_case(designs: Integers, case: int) -> Floats:
        omega = 2.0 * np.pi * float(cases.frequency[case])
        margin, good = np.empty(len(designs)), np.empty(len(designs))
        drive = cases.base[case].reshape(-1)
        kernels.batch_margin(
            omega, mass, pack(fixed.dynamic), pack(fixed.hysteretic + omega * fixed.viscous), outer, axes,
            parallel, axis_group, starts, stiffness, loss, viscous, np.ascontiguousarray(designs),
            np.ascontiguousarray(cases.load[case].real), np.ascontiguousarray(cases.load[case].imag),
            np.ascontiguousarray(drive.real), np.ascontiguousarray(drive.imag), bool(drive.any()),
            cases.rows, np.ascontiguousarray(cases.row_limit[case]),
            np.ascontiguousarray(cases.deflection_limit[case].reshape(-1)),
            np.ascontiguousarray(cases.force_limit[case].reshape(-1)),
            total, np.ascontiguousarray(cases.total_limit[case]), margin, good,
        )  # fmt: skip
        doubtful = good != 1.0
        if doubtful.any():
            margin[doubtful] = case_margin(selection, designs[doubtful], case)
        return margin

    def screen(_: Selection, designs: Integers, need: Floats | float = -np.inf) -> Floats:
        margin = np.full(len(designs), np.inf)
        wanted = np.broadcast_to(np.asarray(need, dtype=np.float64), margin.shape)
        alive = np.arange(len(designs))
        for case in range(len(cases.frequency)):
            if not alive.size:
                break
            margin[alive] = np.minimum(margin[alive], one_case(designs[alive], case))
            alive = alive[margin[alive] >= wanted[alive]]
        return margin

    return screen
