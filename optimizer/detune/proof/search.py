"""Exact selection by bounded search: least cost, or the whole front of cost against value in one pass.

Depth first over the groups in cost order. At each prefix every remaining part is tested against the box of the
others (cost, static windows, forbidden bands); the designs that are left are enumerated, tested point by point,
screened by their response at the given frequencies, and judged by the caller's `accept`. Only `accept` says that
a design is feasible; every rule inside discards only designs that cannot be feasible or are dominated.
The value that `accept` returns must not exceed the nominal separation (value "separation") or the least
nominal margin of the counted rows (value "margin"): then a required value may be used to discard.
"""

from __future__ import annotations

import threading
import time
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass, field
from math import prod
from typing import Literal

import numpy as np

from detune.proof import search_bounds as bounds
from detune.proof.exact_test import Accept, ValueKind
from detune.proof.response_rows import response_margin
from detune.proof.search_archive import Aim, Archive, FoundDesign, required_value
from detune.proof.search_tables import SearchTable, build_tables, design_cost
from detune.proof.selection_data import Floats, Integers, Selection

Status = Literal["complete", "time_limit", "interrupted"]
Kernels = Literal["auto", "numpy", "compiled"]
ResponseMargin = Callable[[Selection, Integers, Floats | float], Floats]
Leaf = Callable[
    [SearchTable, bounds.Prefix, list[Integers], Callable[[], bounds.Demand], dict[str, int]],
    Iterator[tuple[Integers, Floats]],
]
Filter = Callable[
    [SearchTable, bounds.Prefix, list[Integers], bounds.Demand, dict[str, int]], list[Integers] | None
]


@dataclass(frozen=True)
class SearchProgress:
    """State of a running search: best cost so far, proven lower bound, share of all designs settled, seconds."""

    incumbent: float | None
    lower_bound: float
    share_excluded: float
    elapsed: float
    found: int


@dataclass(frozen=True)
class SearchSettings:
    """How to search.

    kernels: numpy reference, compiled, or auto (compiled when the predicted work is worth it).
    value: what `accept` returns and what a required value may be used on.
    static_counts, response_counts: whether the static windows and the response rows take part in the margin.
    cost_cap: designs above it are of no interest. time_limit in seconds. workers: threads (compiled kernels only).
    progress, interrupted, announce: called with a SearchProgress, asked for a stop, told of a compilation.
    """

    kernels: Kernels = "auto"
    value: ValueKind = "separation"
    static_counts: bool = True
    response_counts: bool = True
    cost_cap: float = np.inf
    time_limit: float | None = None
    workers: int = 1
    progress: Callable[[SearchProgress], None] | None = None
    interrupted: Callable[[], bool] | None = None
    announce: Callable[[str], None] | None = None


@dataclass(frozen=True)
class SearchResult:
    """What a search found and what it proved.

    designs: the one of least cost, or the front in order of cost. lower_bound: no design cheaper than it meets
    the brief except those listed (inf when every design was settled). counts: designs settled by each rule.
    """

    aim: Aim
    status: Status
    designs: tuple[FoundDesign, ...]
    lower_bound: float
    counts: dict[str, int]
    design_count: int
    elapsed: float
    kernels: str

    @property
    def gap(self) -> float:
        """(cost - lower bound) / cost of the cheapest design found; 0 when proven, nan when none was found."""
        if self.status == "complete":
            return 0.0
        if not self.designs:
            return float("nan")
        cost = self.designs[0].cost
        return max(0.0, cost - self.lower_bound) / abs(cost) if cost else 0.0


class SearchStopped(Exception):
    """Raised inside a search when its time is over or an interrupt was asked for; never leaves this module."""

    def __init__(self, status: Status) -> None:
        super().__init__(status)
        self.status = status


@dataclass(frozen=True)
class Task:
    """One part of the search: a ballast step and, unless the position is -1, the part of the first group."""

    bound: float
    table: int
    position: int


@dataclass(eq=False)
class Run:
    """Everything the workers of one search share."""

    selection: Selection
    accept: Accept
    settings: SearchSettings
    archive: Archive
    tables: tuple[SearchTable, ...]
    roots: list[list[Integers] | None]
    tasks: list[Task]
    filter: Filter
    leaf: Leaf
    leaf_groups: int
    margin: ResponseMargin
    started: float
    counts: dict[str, int] = field(default_factory=dict)
    lock: threading.RLock = field(default_factory=threading.RLock)
    next_task: int = 0
    running: dict[int, float] = field(default_factory=dict)
    unfinished: list[float] = field(default_factory=list)
    status: Status = "complete"
    failed: bool = False

    def demand(self) -> bounds.Demand:
        """What a design must reach now."""
        settings = self.settings
        return bounds.Demand(
            bands=self.selection.bands,
            cap=self.archive.cap(),
            staircase=self.archive.staircase(),
            separation_counts=settings.value == "separation",
            static_counts=settings.value == "margin" and settings.static_counts,
        )

    def check(self) -> None:
        """Raise SearchStopped when the search must end."""
        settings = self.settings
        if settings.interrupted is not None and settings.interrupted():
            raise SearchStopped("interrupted")
        if settings.time_limit is not None and time.perf_counter() - self.started > settings.time_limit:
            raise SearchStopped("time_limit")
        if self.status != "complete" or self.failed:
            raise SearchStopped(self.status)

    def lower_bound(self) -> float:
        """Least cost that an unsettled design can have."""
        with self.lock:
            open_bounds = [*self.running.values(), *self.unfinished]
            open_bounds += [task.bound for task in self.tasks[self.next_task : self.next_task + 1]]
        bound = min(open_bounds, default=np.inf)
        return float(bound) if bound <= self.archive.cap() else np.inf


def judge(run: Run, table: SearchTable, positions: Integers, cost: Floats, counts: dict[str, int]) -> None:
    """Screen candidates (D, G) of one table by response, judge them by `accept`, and offer them to the archive."""
    designs = np.empty((len(positions), len(table.groups) + 1), dtype=np.int64)
    for column, group in enumerate(table.groups):
        designs[:, group.number] = group.part[positions[:, column]]
    designs[:, -1] = table.step
    order = np.argsort(cost, kind="stable")
    size, start = 256, 0
    while start < len(order):
        pick = order[start : start + size]
        start, size = start + size, min(4 * size, 16384)
        exact_cost = design_cost(run.selection, designs[pick])
        keep = exact_cost <= run.archive.cap()
        bounds.add_counts(counts, "cost", int((~keep).sum()))
        batch, exact_cost = designs[pick][keep], exact_cost[keep]
        need = np.zeros(len(batch))
        if run.settings.value == "margin" and run.settings.response_counts:
            need = np.maximum(required_value(exact_cost, run.archive.staircase()), 0.0)
        keep = run.margin(run.selection, batch, need - 1e-8) >= need - 1e-8
        bounds.add_counts(counts, "response", int((~keep).sum()))
        batch, exact_cost = batch[keep], exact_cost[keep]
        if not len(batch):
            continue
        with run.lock:
            feasible, value = run.accept(batch)
            run.archive.offer(batch[feasible], exact_cost[feasible], value[feasible])
        bounds.add_counts(counts, "exact", int((~feasible).sum()))
        bounds.add_counts(counts, "met", int(feasible.sum()))


def explore(
    run: Run,
    table: SearchTable,
    prefix: bounds.Prefix,
    domains: list[Integers],
    counts: dict[str, int],
) -> None:
    """Settle every design of a node: filter the domains, then branch on the next group or enumerate."""
    run.check()
    filtered = run.filter(table, prefix, domains, run.demand(), counts)
    if filtered is None:
        return
    if len(filtered) <= run.leaf_groups:
        for positions, cost in run.leaf(table, prefix, filtered, run.demand, counts):
            judge(run, table, positions, cost, counts)
        return
    group = table.groups[len(prefix.chosen)]
    rest = sum(
        float(g.cost[d].min()) for g, d in zip(table.groups[-len(filtered) + 1 :], filtered[1:], strict=True)
    )
    others = prod(len(d) for d in filtered[1:])
    for index, position in enumerate(filtered[0].tolist()):
        child = bounds.extend(prefix, group, position)
        if child.cost + rest > run.archive.cap():
            bounds.add_counts(counts, "cost", (len(filtered[0]) - index) * others)
            return
        explore(run, table, child, filtered[1:], counts)


def run_task(run: Run, task: Task, counts: dict[str, int]) -> None:
    """Settle every design of one task."""
    table, domains = run.tables[task.table], run.roots[task.table]
    assert domains is not None
    prefix = bounds.root_prefix(table)
    if task.position < 0:
        explore(run, table, prefix, domains, counts)
        return
    if task.bound > run.archive.cap():
        bounds.add_counts(counts, "cost", prod(len(d) for d in domains[1:]))
        return
    explore(run, table, bounds.extend(prefix, table.groups[0], task.position), domains[1:], counts)


def make_tasks(run: Run, depth: int) -> None:
    """Filter each table at its root and cut the search into tasks in order of their cost bounds."""
    tasks: list[Task] = []
    for number, table in enumerate(run.tables):
        full = [np.arange(len(group.part), dtype=np.int64) for group in table.groups]
        domains = run.filter(table, bounds.root_prefix(table), full, run.demand(), run.counts)
        run.roots.append(domains)
        if domains is None:
            continue
        least = [float(g.cost[d].min()) for g, d in zip(table.groups, domains, strict=True)]
        if depth == 0:
            tasks.append(Task(table.cost + sum(least), number, -1))
            continue
        rest = table.cost + sum(least[1:])
        costs = table.groups[0].cost
        tasks.extend(Task(rest + float(costs[p]), number, p) for p in domains[0].tolist())
    run.tasks.extend(sorted(tasks, key=lambda task: (task.bound, task.table, task.position)))


def work(run: Run, worker: int) -> None:
    """Take tasks until none is left or the search must stop; keeps the counts and the open bounds."""
    while True:
        with run.lock:
            if run.next_task >= len(run.tasks) or run.status != "complete" or run.failed:
                return
            task = run.tasks[run.next_task]
            run.next_task += 1
            run.running[worker] = task.bound
        counts: dict[str, int] = {}
        failed = True
        try:
            run_task(run, task, counts)
            failed = False
        except SearchStopped as stop:
            failed = False
            with run.lock:
                run.unfinished.append(task.bound)
                if run.status == "complete":
                    run.status = stop.status
        finally:
            with run.lock:
                run.failed = run.failed or failed
                for rule, number in counts.items():
                    bounds.add_counts(run.counts, rule, number)
                run.running.pop(worker, None)
        report(run)


def report(run: Run) -> None:
    """Tell the caller how far the search is."""
    if run.settings.progress is None:
        return
    with run.lock:
        settled = sum(run.counts.values())
        designs = list(run.archive.designs)
    run.settings.progress(
        SearchProgress(
            incumbent=designs[0].cost if designs else None,
            lower_bound=run.lower_bound(),
            share_excluded=settled / run.selection.design_count,
            elapsed=time.perf_counter() - run.started,
            found=len(designs),
        )
    )


def start_run(selection: Selection, accept: Accept, settings: SearchSettings, aim: Aim) -> tuple[Run, str]:
    """Build the tables, choose the kernels and cut the tasks; returns the run and the name of the kernels."""
    started = time.perf_counter()
    compiled = settings.kernels == "compiled"
    if settings.kernels == "auto":
        from detune.proof.kernels_numba import worth_compiling

        compiled = worth_compiling(selection.design_count, selection.freedoms)
    run = Run(
        selection=selection,
        accept=accept,
        settings=settings,
        archive=Archive(aim, settings.cost_cap),
        tables=build_tables(selection),
        roots=[],
        tasks=[],
        filter=bounds.filter_domains,
        leaf=bounds.enumerate_leaf,
        leaf_groups=2 if len(selection.groups) > 2 else 1,
        margin=response_margin,
        started=started,
    )
    if compiled:
        from detune.proof.search_compiled import compiled_rules

        rules = compiled_rules(selection, run.tables, settings.announce, run.check)
        run.filter, run.leaf, run.margin = rules.filter, rules.leaf, rules.margin
        run.leaf_groups = rules.leaf_groups
    return run, "compiled" if compiled else "numpy"


def search(selection: Selection, accept: Accept, settings: SearchSettings, aim: Aim) -> SearchResult:
    """Run a search of either aim; see `search_least_cost` and `search_front` of `search_front.py`."""
    run, kernels = start_run(selection, accept, settings, aim)
    groups = len(selection.groups)
    make_tasks(run, 1 if groups > 1 and (kernels == "numpy" or groups > run.leaf_groups) else 0)
    workers = max(1, settings.workers) if kernels == "compiled" else 1
    if workers == 1:
        work(run, 0)
    else:
        with ThreadPoolExecutor(workers) as pool:
            for future in [pool.submit(work, run, number) for number in range(workers)]:
                future.result()
    return SearchResult(
        aim=aim,
        status=run.status,
        designs=tuple(run.archive.designs),
        lower_bound=run.lower_bound(),
        counts={rule: run.counts.get(rule, 0) for rule in bounds.RULES},
        design_count=selection.design_count,
        elapsed=time.perf_counter() - run.started,
        kernels=kernels,
    )
