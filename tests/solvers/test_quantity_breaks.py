"""Prices that fall with the quantity: the bounded search against enumeration, and both against a count by hand."""

from __future__ import annotations

from collections import Counter
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from detune.parts.kinds.mount import Mount
from detune.problem.build import Problem, build
from detune.response.assess import assess
from detune.response.design import Design
from detune.response.designs import all_designs, total_cost
from detune.response.prices import least_cost, least_costs
from detune.solvers import bounded, enumeration
from detune.solvers.outcome import Settings
from solvers import briefs

machines = briefs.machines


def falling(random: np.random.Generator, cost: float) -> tuple[tuple[int, float], ...]:
    """Breaks at a few pieces, so that small machines reach them; some parts have none."""
    breaks = []
    for least in sorted(random.choice(np.arange(2, 9), int(random.integers(0, 3)), replace=False).tolist()):
        cost *= float(random.uniform(0.55, 0.95))
        breaks.append((int(least), round(cost, 2)))
    return tuple(breaks)


def priced_problem(seed: int) -> Problem:
    """A small problem in which the same parts, with quantity breaks, stand for choice in several groups."""
    random = np.random.default_rng([seed, 5])
    plain = briefs.small_problem(seed, ("cost", "separation") if seed % 2 else ("cost", "least-margin"))
    known: dict[str, Mount] = {}
    for group in plain.candidates:
        for mount in group:
            if mount.pieces == 1 and not mount.damper:
                known.setdefault(mount.part, mount)
    parts = [replace(m, cost_breaks=falling(random, m.cost), catalog="list") for m in known.values()]
    pots = [briefs.damper("d1", 900.0, 3.0), briefs.damper("d2", 3000.0, 6.0, lateral=400.0)]
    pots = [replace(pot, cost_breaks=falling(random, pot.cost)) for pot in pots]
    return build(plain.brief, {"list": machines.catalog(*parts), "dashpots": briefs.dampers(*pots)})


def cost_by_hand(problem: Problem, design: Design) -> float:
    """Count every piece by its number, find the price of that many, and add the ballast by weight."""
    count: Counter[tuple[str, str]] = Counter()
    prices: dict[tuple[str, str], tuple[float, Any]] = {}
    for group, mount in zip(design.groups, design.mounts, strict=True):
        places = sum(s.parallel for s in problem.brief.stations if s.group == group)
        if mount.pieces:
            name = mount.base or mount.part
            count["mount", name] += places * mount.pieces
            prices["mount", name] = ((mount.cost - mount.damper_cost) / mount.pieces, mount.cost_breaks)
        if mount.damper:
            count["damper", mount.damper] += places
            prices["damper", mount.damper] = (mount.damper_cost, mount.damper_breaks)
    total = 0.0
    for key, number in count.items():
        single, breaks = prices[key]
        for least, price in breaks:
            single = price if number >= least else single
        total += number * single
    assert problem.brief.ballast is not None
    return total + design.ballast * problem.brief.ballast.cost_per_kg


def check(seed: int) -> bool:
    problem = priced_problem(seed)
    every = all_designs(problem.model, 0, problem.count)
    costs = total_cost(problem.model, every)
    # Every design's cost by hand, and no sum of lowest prices above it.
    lowest = problem.model.ballast_cost[every.step] + sum(
        least_costs(problem.model, g)[every.part[:, g]] for g in range(len(problem.model.groups))
    )
    assert np.all(lowest <= costs * (1.0 + 1e-12))
    look = np.random.default_rng(seed).choice(problem.count, min(40, problem.count), replace=False)
    for index in look.tolist():
        design = problem.design(every, index)
        assert costs[index] == pytest.approx(cost_by_hand(problem, design), rel=1e-12)
    assert bounded.refusal(problem) is None
    listed, searched = (solver.solve(problem, Settings()) for solver in (enumeration, bounded))
    assert briefs.front_of(searched, problem) == briefs.front_of(listed, problem)
    alone = bounded.solve(problem, Settings(front=False))
    if not listed.designs.count:
        assert alone.record.lower_bound == np.inf and not alone.designs.count
        return False
    assert float(alone.objectives["cost"].min()) == pytest.approx(
        float(listed.objectives["cost"].min()), rel=1e-12
    )
    best = problem.design(listed.designs, int(np.argmin(listed.objectives["cost"])))
    judged = assess(problem.brief, best)
    assert judged.cost == pytest.approx(cost_by_hand(problem, best), rel=1e-12)
    return bool(np.any(lowest < costs * (1.0 - 1e-9)))


@pytest.mark.parametrize("seed", range(6))
def test_bounded_search_equals_enumeration_with_quantity_breaks(seed: int) -> None:
    check(seed)


@pytest.mark.nightly
def test_bounded_search_equals_enumeration_on_sixty_instances() -> None:
    assert sum(check(seed) for seed in range(6, 70)) > 20


def test_lowest_price_of_a_composed_mount() -> None:
    """Two of 9, from 4 pieces 7, beside a damper of 4, from 2 pieces 3: at best 2 x 7 + 3 = 17."""
    from detune.parts.compose import in_parallel, with_damper

    mount = replace(machines.mount("m", cost=9.0), cost_breaks=((4, 7.0),))
    pot = replace(briefs.damper("pot", 100.0, 4.0), cost_breaks=((2, 3.0),))
    assert least_cost(with_damper(in_parallel(mount, 2), pot)) == 17.0
    assert least_cost(in_parallel(mount, 2)) == 14.0


def test_dampers_of_several_groups_reach_their_break_together() -> None:
    """Two stations in two groups, one damper beside each: two dampers at 3 each, not one at 4 and one at 4."""
    from detune.brief.choice import Choice
    from detune.brief.machine import Station
    from detune.parts.compose import with_damper

    stations = tuple(Station(name=n, group=g, position=(0.0, 0.0, 0.0)) for n, g in (("S", "a"), ("T", "b")))
    choices = tuple(Choice(group=g, catalogs=("list",), dampers=("dashpots",)) for g in "ab")
    brief = machines.one_axis(50.0, machines.force(25.0), stations=stations, choices=choices)
    pot = replace(briefs.damper("pot", 100.0, 4.0), cost_breaks=((2, 3.0),))
    both = with_damper(machines.mount("m", cost=10.0), pot)
    assert machines.assessed(brief, both, both).cost == 26.0
    assert machines.assessed(brief, both, machines.mount("m", cost=10.0)).cost == 24.0
