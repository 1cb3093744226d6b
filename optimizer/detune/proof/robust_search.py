"""Cheapest design that is proven over its scatter: nominally feasible designs are certified in order of cost.

Meeting the brief at nominal values is necessary, so the nominal search is a valid relaxation. It is run with a
rising cost cap that collects every nominally feasible design below it; these are certified in order of cost and the
first proven one is optimal. Designs that stay undecided are reported, never dropped: while one is cheaper than the
winner, the winner is only the cheapest *proven* design.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from detune.proof.exact_test import Accept, exact_accept
from detune.proof.loewner import Flags
from detune.proof.search import SearchResult, SearchSettings
from detune.proof.search_archive import FoundDesign
from detune.proof.search_front import search_front, search_least_cost
from detune.proof.search_tables import design_cost
from detune.proof.selection_data import Floats, Integers, Selection

Verdict = Literal["proven", "violated", "undecided"]
Certifier = Callable[[Integers], Verdict]


@dataclass(frozen=True)
class RobustSearchResult:
    """The cheapest proven design, the nominal one, and what lies between.

    status: complete when every cheaper design is excluded, violated or listed as undecided. undecided: designs cheaper
    than the winner whose scatter could not be decided. examined: designs certified. lower_bound: no cheaper
    design can be proven, save the undecided ones. nominal: result of the nominal search.
    """

    status: Literal["complete", "time_limit", "interrupted"]
    winner: FoundDesign | None
    undecided: tuple[FoundDesign, ...]
    examined: int
    lower_bound: float
    nominal: SearchResult

    @property
    def optimal(self) -> bool:
        """Whether the winner is proven to be the cheapest robust design: nothing cheaper is undecided."""
        return self.status == "complete" and self.winner is not None and not self.undecided

    @property
    def price(self) -> float:
        """Price of robustness: winner's cost over the nominal optimum's, less one; nan without a winner."""
        if self.winner is None or not self.nominal.designs:
            return float("nan")
        return self.winner.cost / self.nominal.designs[0].cost - 1.0


def search_robust(
    selection: Selection,
    certifier: Certifier,
    accept: Accept | None = None,
    settings: SearchSettings | None = None,
    *,
    step: float = 0.04,
) -> RobustSearchResult:
    """Find the cheapest design that `certifier` proves, among those that `accept` finds nominally feasible.

    step: relative rise of the cost cap from round to round (doubled each time). settings.time_limit covers the
    whole search. Raises ValueError for a step that is not positive.
    """
    if step <= 0.0:
        raise ValueError("step must be positive")
    settings = settings or SearchSettings()
    nominal_test = accept or exact_accept(selection, settings.value)
    started = time.perf_counter()
    nominal = search_least_cost(selection, nominal_test, settings)
    undecided: list[FoundDesign] = []
    examined, done_to = 0, -np.inf
    status, bound = nominal.status, nominal.lower_bound
    if status != "complete" or not nominal.designs:
        return RobustSearchResult(status, None, (), 0, bound, nominal)
    cap, most = nominal.designs[0].cost, _most_cost(selection)
    while True:
        found, result = designs_between(selection, nominal_test, _rest(settings, started), cap, done_to)
        if result.status != "complete":
            return RobustSearchResult(
                result.status, None, tuple(undecided), examined, _after(done_to, result.lower_bound), nominal
            )
        for design in found:
            stop = _stopped(settings, started)
            if stop is not None:
                return RobustSearchResult(stop, None, tuple(undecided), examined, design.cost, nominal)
            verdict = certifier(np.array([*design.parts, design.ballast], dtype=np.int64))
            examined += 1
            if verdict == "proven":
                return RobustSearchResult(
                    "complete", design, tuple(undecided), examined, design.cost, nominal
                )
            if verdict == "undecided":
                undecided.append(design)
        if cap >= min(most, settings.cost_cap):
            return RobustSearchResult("complete", None, tuple(undecided), examined, np.inf, nominal)
        done_to = cap
        cap = min(cap + step * max(abs(cap), 1e-12), settings.cost_cap)
        step *= 2.0


def _after(done_to: float, bound: float) -> float:
    return max(done_to, bound) if np.isfinite(bound) else done_to


def _most_cost(selection: Selection) -> float:
    groups = sum(float(group.cost.max()) for group in selection.groups)
    return groups + float(selection.ballast.cost.max())


def _rest(settings: SearchSettings, started: float) -> SearchSettings:
    if settings.time_limit is None:
        return settings
    return replace(settings, time_limit=max(0.0, settings.time_limit - (time.perf_counter() - started)))


def _stopped(settings: SearchSettings, started: float) -> Literal["time_limit", "interrupted"] | None:
    if settings.interrupted is not None and settings.interrupted():
        return "interrupted"
    if settings.time_limit is not None and time.perf_counter() - started > settings.time_limit:
        return "time_limit"
    return None


def designs_between(
    selection: Selection, test: Accept, settings: SearchSettings, cap: float, done_to: float
) -> tuple[list[FoundDesign], SearchResult]:
    """All nominally feasible designs of cost in (done_to, cap], in order of cost; every one, not only a front."""
    kept: list[FoundDesign] = []

    def collecting(designs: Integers) -> tuple[Flags, Floats]:
        feasible, value = test(designs)
        cost = design_cost(selection, designs)
        wanted = feasible & (cost > done_to) & (cost <= cap)
        for row, price, worth in zip(
            designs[wanted].tolist(), cost[wanted].tolist(), value[wanted].tolist(), strict=True
        ):
            kept.append(FoundDesign(tuple(row[:-1]), row[-1], price, worth))
        # Nothing is offered to the archive: an incumbent would cut off designs that are still wanted.
        return np.zeros(len(designs), dtype=bool), value

    result = search_front(selection, collecting, replace(settings, cost_cap=cap))
    kept.sort(key=lambda design: (design.cost, -design.value, design.parts, design.ballast))
    return kept, result
