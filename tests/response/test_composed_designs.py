"""Mounts in parallel, dampers beside mounts, empty stations and quantity breaks: values by hand, batch = assessor."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from detune.brief.allowable.displacement import Displacement
from detune.brief.choice import Choice
from detune.brief.machine import Station
from detune.parts.compose import damper_refused, empty_station, in_parallel, with_damper
from detune.parts.laws import Relaxation
from detune.physics.unsupported import UnsupportedMachine
from detune.problem.build import Problem, build
from detune.problem.stages import objective_values
from detune.response.assess import assess, design_totals
from detune.response.design import Design
from detune.response.designs import Designs, all_designs, part_numbers, total_cost
from detune.solvers import enumeration
from detune.solvers.outcome import Settings
from solvers import briefs

machines = briefs.machines

G = 9.80665
ASH = machines.mount("ash", 2e5, static=0.5, cost=9.0, load_min=100.0, load_max=600.0, deflection_max=0.02)
POT = briefs.damper("pot", 500.0, 4.0, stroke=0.03)


def test_two_in_parallel_are_one_of_twice_the_stiffness_load_and_price() -> None:
    """f = sqrt(2 x 2e5 / 100) / 2 pi = 10.066 Hz; sag = 980.67 N / (2 x 1e5 N/m) = 4.903 mm."""
    brief = machines.one_axis(100.0, machines.force(25.0))
    judged = machines.assessed(brief, in_parallel(ASH, 2))
    assert judged.modes[0].frequency == pytest.approx(math.sqrt(4e5 / 100.0) / (2.0 * math.pi), rel=1e-12)
    assert judged.stations[0].compression == pytest.approx(100.0 * G / 2e5, rel=1e-12)
    assert (judged.stations[0].load_min, judged.stations[0].load_max) == (200.0, 1200.0)
    assert judged.cost == 18.0 and judged.part_numbers == 1
    (load,) = [row for row in judged.margins if row.kind == "load-range"]
    assert load.margin == pytest.approx(1200.0 / (100.0 * G) - 1.0, rel=1e-12)
    # One alone is overloaded: 980.67 N on 600 N.
    assert not machines.assessed(brief, ASH).meets
    assert str(judged.design) == "G: 2 x ash"


def test_a_damper_decides_the_peak_and_its_stroke_the_travel() -> None:
    """At resonance k = m w^2 and |X| = F / (c w), w = sqrt(2e5 / 100) = 44.72 rad/s: 10 / (500 x 44.72) = 0.447 mm.

    Half of the 30 mm stroke is 15 mm, less than the mount's 20 mm: 9.807 mm of sag leave a margin.
    """
    omega = math.sqrt(2e5 / 100.0)
    frequency = omega / (2.0 * math.pi)
    limit = Displacement(at="P", direction="z", measure="peak", limit=1e-3)
    brief = machines.one_axis(100.0, machines.force(frequency, 10.0), [limit])
    judged = machines.assessed(brief, with_damper(replace(ASH, load_max=2000.0), POT))
    (row,) = [r for r in judged.margins if r.kind == "displacement" and r.upper == 1e-3]
    assert row.value == pytest.approx(10.0 / (500.0 * omega), rel=1e-9)
    assert judged.cost == 13.0 and judged.part_numbers == 2
    (travel,) = [r for r in judged.margins if r.kind == "mount-deflection"]
    assert travel.upper == 0.015
    assert travel.value == pytest.approx(100.0 * G / 1e5 + 10.0 / (500.0 * omega), rel=1e-9)


def test_a_damper_is_refused_where_it_does_not_simply_add() -> None:
    in_series = replace(ASH, relaxation=Relaxation(2.0))
    elastic = replace(POT, stiffness_series=1e6)
    assert "in series" in str(damper_refused(in_series, POT))
    assert "elastic" in str(damper_refused(ASH, elastic))
    for mount, damper in ((in_series, POT), (ASH, elastic)):
        with pytest.raises(ValueError, match=r"series|elastic"):
            with_damper(mount, damper)
    with pytest.raises(ValueError, match="0 mounts"):
        in_parallel(ASH, 0)


def two_groups(**changes: Any) -> Any:
    stations = (
        Station(name="S", group="left", position=(0.0, 0.0, 0.0)),
        Station(name="T", group="right", position=(0.0, 0.0, 0.0)),
    )
    choices = (
        Choice(group="left", catalogs=("list",)),
        Choice(group="right", catalogs=("list",), empty=True),
    )
    return machines.one_axis(50.0, machines.force(25.0), stations=stations, choices=choices, **changes)


def test_an_empty_station_carries_nothing_and_costs_nothing() -> None:
    """50 kg on one ash of 2e5 N/m: 10.066 Hz; on two: 14.235 Hz."""
    brief = two_groups()
    alone = machines.assessed(brief, ASH, empty_station("list"))
    both = machines.assessed(brief, ASH, ASH)
    assert alone.modes[0].frequency == pytest.approx(math.sqrt(2e5 / 50.0) / (2 * math.pi), rel=1e-12)
    assert both.modes[0].frequency == pytest.approx(math.sqrt(4e5 / 50.0) / (2 * math.pi), rel=1e-12)
    assert (alone.cost, both.cost) == (9.0, 18.0)
    assert alone.part_numbers == both.part_numbers == 1
    assert alone.meets and alone.stations[1].axial_load == 0.0


def test_a_machine_on_empty_stations_alone_meets_nothing() -> None:
    """The batch counts it as failing the static limits; the assessor refuses to put numbers on it."""
    choices = tuple(Choice(group=g, catalogs=("list",), empty=True) for g in ("left", "right"))
    brief = two_groups().model_copy(update={"choices": choices})
    problem = build(brief, {"list": machines.catalog(ASH)})
    outcome = enumeration.solve(problem, Settings())
    assert outcome.record.accounted and problem.count == 4
    kept = {tuple(row) for row in outcome.designs.part.tolist()}
    assert kept == {(0, 0), (0, 1), (1, 0)}
    nothing = empty_station("list")
    with pytest.raises(UnsupportedMachine):
        assess(brief, Design(brief.groups, (nothing, nothing), 0.0))


def with_breaks() -> tuple[Any, Problem]:
    """Four stations in two groups; p costs 10, from 3 pieces 8, from 5 pieces 6; q costs 9; the damper 4."""
    brief, _ = machines.random_machine(2)
    stations = tuple(station.model_copy(update={"parallel": 1}) for station in brief.stations)
    choices = tuple(
        Choice(group=group, catalogs=("list",), parallel=(1, 2), dampers=("dashpots",))
        for group in ("left", "right")
    )
    brief = brief.model_copy(update={"stations": stations, "choices": choices})
    p = machines.mount("p", 3e5, lateral=1e5, loss=0.1, cost=10.0)
    q = machines.mount("q", 5e5, lateral=2e5, loss=0.1, cost=9.0)
    lists = {
        "list": machines.catalog(replace(p, cost_breaks=((3, 8.0), (5, 6.0))), q),
        "dashpots": briefs.dampers(POT),
    }
    return brief, build(brief, lists)


@pytest.mark.parametrize(
    ("left", "right", "cost", "numbers"),
    [
        # Two stations a group. Pieces of p, their price, and what else is bought.
        ("p", "q", 2 * 10 + 2 * 9, 2),
        ("p", "p", 4 * 8, 1),
        ("p", "2 x p", 6 * 6, 1),
        ("2 x p", "q", 4 * 8 + 2 * 9, 2),
        ("p + pot", "p", 4 * 8 + 2 * 4, 2),
        ("2 x p + pot", "q + pot", 4 * 8 + 2 * 4 + 2 * 9 + 2 * 4, 3),
        ("q", "2 x q", 6 * 9, 1),
    ],
)
def test_prices_fall_with_all_pieces_bought(left: str, right: str, cost: float, numbers: int) -> None:
    brief, problem = with_breaks()
    names = [mount.part for mount in problem.model.groups[0].mounts]
    assert names == ["p", "p + pot", "q", "q + pot", "2 x p", "2 x p + pot", "2 x q", "2 x q + pot"]
    design = Designs(np.array([[names.index(left), names.index(right)]]), np.array([0]))
    assert total_cost(problem.model, design)[0] == cost
    assert part_numbers(problem.model, design)[0] == numbers
    totals = design_totals(brief, problem.design(design, 0))
    assert (totals.cost[0], totals.part_numbers[0]) == (cost, numbers)


def test_batch_totals_are_the_assessors_for_every_design() -> None:
    brief, problem = with_breaks()
    designs = all_designs(problem.model, 0, problem.count)
    cost, numbers = total_cost(problem.model, designs), part_numbers(problem.model, designs)
    for index in range(designs.count):
        totals = design_totals(brief, problem.design(designs, index))
        assert (totals.cost[0], totals.part_numbers[0]) == (pytest.approx(cost[index]), numbers[index])


@pytest.mark.parametrize("seed", [0, 2, 3, 5, 7])
def test_batch_margins_are_the_assessors_for_composed_designs(seed: int) -> None:
    """Every requirement of random designs of random briefs: two routes to a supremum agree to about 1e-4."""
    problem = briefs.small_problem(seed)
    random = np.random.default_rng(seed)
    part = np.stack([random.integers(len(g.mounts), size=8) for g in problem.model.groups], axis=1)
    designs = Designs(part, random.integers(len(problem.model.ballast_mass), size=8))
    batch = machines.batch_margins(problem, designs)
    compared = 0
    for index in range(designs.count):
        design = problem.design(designs, index)
        try:
            judged = assess(problem.brief, design)
        except UnsupportedMachine:
            assert min(np.nan_to_num(m[index], nan=-1.0) for m in batch.values()) < 0.0
            continue
        values = objective_values(problem, designs.take(np.array([index])), np.zeros(1))
        assert values["cost"][0] == pytest.approx(judged.cost, rel=1e-12)
        assert values["separation"][0] == pytest.approx(judged.separation, rel=1e-9, abs=1e-9)
        assert values["part-numbers"][0] == judged.part_numbers
        for row in judged.margins:
            margin = batch[row.quantity, row.place, row.condition][index]
            if np.isfinite(row.margin):
                assert 1.0 + margin == pytest.approx(1.0 + row.margin, rel=1e-3, abs=1e-6)
                compared += 1
    assert compared > 40


def test_dampers_stroke_limits_even_a_mount_without_a_limit() -> None:
    bare = replace(ASH, deflection_max=None)
    assert with_damper(bare, POT).deflection_max == 0.015
    assert with_damper(in_parallel(bare, 2), POT).viscous == (None, None, 500.0)
