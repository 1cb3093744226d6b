"""Enumeration against going through every design one by one with the assessor, and what it must never do."""

from __future__ import annotations

import itertools
import time
from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.brief import Brief
from detune.brief.choice import LARGER_IS_BETTER, Ballast, Objectives
from detune.parts.kinds.mount import Mount
from detune.problem.build import Problem, build
from detune.response.assess import assess
from detune.response.assessment import Assessment
from detune.response.design import Design
from detune.response.designs import Designs
from detune.solvers import enumeration
from detune.solvers.nondominated import as_minimised, nondominated
from detune.solvers.outcome import Outcome, Progress, Settings
from detune.study.front import assessed_front, objective_of
from response import machines

BALLAST = Ballast(position=(0.0, 0.0, 0.1), size=(0.8, 0.5, 0.1), steps=(0.0, 60.0, 150.0), cost_per_kg=0.3)


def parts_list(seed: int, count: int) -> tuple[Mount, ...]:
    """Mounts from soft to stiff at prices of no order; whole prices, so that ties occur."""
    random = np.random.default_rng(seed)
    stiffness = np.geomspace(6e4, 2e6, count) * random.uniform(0.9, 1.1, count)
    return tuple(
        machines.mount(
            f"p{i}",
            float(k),
            lateral=float(k * random.uniform(0.3, 1.2)),
            static=0.8,
            loss=float(random.uniform(0.05, 0.2)),
            cost=float(random.integers(5, 12)),
            load_min=0.0,
            load_max=float(random.uniform(900, 2500)),
            deflection_max=float(random.uniform(0.005, 0.03)),
            pulls=False,
        )
        for i, k in enumerate(stiffness)
    )


def study(seed: int, limits: float = 1.0, trade: tuple[str, ...] = ("cost", "separation")) -> Brief:
    """A random skid with limits on motion, force and separation that some of its designs meet."""
    brief, _ = machines.random_machine(seed)
    return brief.model_copy(
        update={
            "stations": tuple(s.model_copy(update={"axial": "z", "radial": "x"}) for s in brief.stations),
            "allowables": (
                Displacement(at="P", direction="resultant", measure="peak", limit=6e-3 * limits),
                TransmittedForce(through="floor", direction="z", measure="peak", limit=2000.0 * limits),
                Separation(limit=0.02 / limits),
            ),
            "conditions": (brief.conditions[0].model_copy(update={"shafts": {"rotor": (26.0, 30.0)}}),),
            "forcing": (
                brief.forcing[0].model_copy(update={"frequency": 45.0}),
                brief.forcing[1].model_copy(update={"unbalance": 1e-3}),
            ),
            "ballast": BALLAST,
            "objectives": Objectives(trade=trade),
        }
    )


def solved(brief: Brief, parts: tuple[Mount, ...]) -> tuple[Problem, Outcome]:
    problem = build(brief, {"list": machines.catalog(*parts)})
    return problem, enumeration.solve(problem, Settings())


def one_by_one(brief: Brief, parts: tuple[Mount, ...]) -> list[Assessment]:
    """Every design there is, assessed."""
    listed = machines.catalog(*parts).parts
    steps = brief.ballast.steps if brief.ballast else (0.0,)
    return [
        assess(brief, Design(brief.groups, mounts, step))
        for mounts in itertools.product(listed, repeat=len(brief.groups))
        for step in steps
    ]


def best(assessments: Sequence[Assessment], trade: tuple[str, ...], digits: int) -> set[tuple[float, ...]]:
    """The nondominated points among rounded objectives, every one to be made small, by definition."""
    points = {
        tuple(round(objective_of(a, n), digits) * (-1 if LARGER_IS_BETTER[n] else 1) for n in trade)
        for a in assessments
    }
    return {
        p
        for p in points
        if not any(q != p and all(x <= y for x, y in zip(q, p, strict=True)) for q in points)
    }


TRADES = [("cost", "separation"), ("least-margin", "cost"), ("cost", "added-mass", "separation")]


@pytest.mark.parametrize(("seed", "trade"), [(3, TRADES[0]), (4, TRADES[1]), (7, TRADES[2])])
def test_front_is_that_of_all_designs_assessed_one_by_one(seed: int, trade: tuple[str, ...]) -> None:
    brief = study(seed, trade=trade)
    parts = parts_list(seed, 4)
    problem, outcome = solved(brief, parts)
    every = one_by_one(brief, parts)
    assert problem.count == len(every) == 4 * 4 * 3
    meeting = [a for a in every if a.meets]
    assert meeting, "the study is to have designs that meet it"
    assert len(meeting) < len(every), "and designs that do not"
    assert outcome.designs.count == len(meeting)
    front = assessed_front(problem, outcome)
    # Several designs may share a point, and two routes to a supremum agree to 1e-4: points are compared.
    digits = 3 if "least-margin" in trade else 9
    assert best(front.points, trade, digits) == best(meeting, trade, digits)
    assert front.withdrawn == ()


@pytest.mark.parametrize("seed", [3, 8])
def test_proof_record_accounts_for_every_design(seed: int) -> None:
    problem, outcome = solved(study(seed), parts_list(seed, 7))
    record = outcome.record
    assert record.designs == record.looked_at == problem.count == 7 * 7 * 3
    assert record.accounted
    assert record.met + sum(rule.excluded for rule in record.rules) == problem.count
    for rule in record.rules:
        assert [int(by_part.sum()) for by_part in rule.by_part] == [rule.excluded] * 2
    # Each rule's count again from the assessor: the first requirement in the order of the stages that fails.
    met = {
        (int(p[0]), int(p[1]), int(s))
        for p, s in zip(outcome.designs.part, outcome.designs.step, strict=True)
    }
    assert len(met) == record.met
    # For every part that no design is left with, the one that came furthest is named, once.
    for group in range(2):
        alive = {design[group] for design in met}
        named = [part for g, part in outcome.closest_of if g == group]
        assert sorted(named) == sorted(set(range(7)) - alive)


def test_exclusions_of_cheap_rules_are_those_of_the_assessor() -> None:
    """The count of designs that fail the static load range, counted by hand from the assessments."""
    brief = study(5)
    parts = parts_list(5, 4)
    _, outcome = solved(brief, parts)
    overloaded = [
        a for a in one_by_one(brief, parts) if any(r.kind == "load-range" and r.margin < 0 for r in a.margins)
    ]
    counted = sum(r.excluded for r in outcome.record.rules if "static load of the part" in r.rule)
    assert counted == len(overloaded) > 0


@given(st.integers(0, 10_000))
@settings(deadline=None, max_examples=5)
def test_adding_a_part_never_raises_the_least_cost(seed: int) -> None:
    parts = parts_list(seed, 5)
    brief = study(seed, 1.3)
    _, few = solved(brief, parts[:4])
    _, more = solved(brief, parts)
    least = [o.objectives["cost"].min() if o.designs.count else np.inf for o in (few, more)]
    assert least[1] <= least[0]
    assert more.designs.count >= few.designs.count


@given(st.integers(0, 10_000), st.floats(1.0, 3.0))
@settings(deadline=None, max_examples=5)
def test_relaxing_the_limits_never_raises_the_least_cost(seed: int, factor: float) -> None:
    parts = parts_list(seed, 4)
    _, tight = solved(study(seed), parts)
    _, loose = solved(study(seed, factor), parts)
    least = [o.objectives["cost"].min() if o.designs.count else np.inf for o in (tight, loose)]
    assert least[1] <= least[0]
    assert loose.designs.count >= tight.designs.count


@given(
    st.lists(st.tuples(*[st.integers(0, 4)] * 3), min_size=1, max_size=40),
    st.sampled_from([("cost", "separation"), ("added-mass", "cost", "least-margin")]),
)
@settings(deadline=None, max_examples=60)
def test_nondominated_by_definition(rows: list[tuple[int, int, int]], trade: tuple[str, ...]) -> None:
    """A point stays if no other is at least as good in all and better in one; of equal points one stays."""
    objectives = {name: np.array([float(row[i]) for row in rows]) for i, name in enumerate(trade)}
    values = as_minimised(objectives, trade)
    kept = nondominated(values)
    points = {tuple(row) for row in values}
    wanted = {
        p
        for p in points
        if not any(q != p and all(x <= y for x, y in zip(q, p, strict=True)) for q in points)
    }
    assert {tuple(values[i]) for i in kept} == wanted
    assert len(kept) == len(wanted)
    assert [tuple(values[i]) for i in kept] == sorted(wanted)


def test_a_time_limit_of_zero_looks_at_nothing_and_proves_nothing() -> None:
    problem = build(study(3), {"list": machines.catalog(*parts_list(3, 4))})
    outcome = enumeration.solve(problem, Settings(time_limit=0.0))
    assert outcome.stopped == "time limit"
    assert outcome.designs.count == 0 and outcome.record.looked_at == 0
    assert not outcome.none_exists
    assert not outcome.record.accounted


def test_an_interrupt_leaves_whole_blocks_and_no_half_counted_designs(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """Stopped after the first block of ten, and once more in the middle of the second."""
    monkeypatch.setattr(enumeration, "BLOCK", 10)
    problem = build(study(3), {"list": machines.catalog(*parts_list(3, 4))})

    def stop(far: Progress) -> None:
        assert (far.settled, far.designs) == (10, 48)
        raise KeyboardInterrupt

    outcome = enumeration.solve(problem, Settings(progress=stop))
    assert outcome.stopped == "interrupted"
    assert outcome.record.looked_at == 10
    assert outcome.record.met + sum(rule.excluded for rule in outcome.record.rules) == 10
    assert not outcome.none_exists

    real, calls = enumeration.stages, []

    def interrupted_stages(problem: Problem) -> tuple[object, ...]:
        *first, last = real(problem)

        def margins(designs: object) -> object:
            calls.append(1)
            if len(calls) == 2:
                raise KeyboardInterrupt
            return last.margins(designs)  # type: ignore[arg-type]

        return (*first, replace(last, margins=margins))

    monkeypatch.setattr(enumeration, "stages", interrupted_stages)
    outcome = enumeration.solve(problem, Settings())
    assert outcome.stopped == "interrupted"
    assert outcome.record.looked_at % 10 == 0
    assert (
        outcome.record.met + sum(rule.excluded for rule in outcome.record.rules) == outcome.record.looked_at
    )


def test_the_enumeration_does_not_depend_on_its_block_size(monkeypatch: pytest.MonkeyPatch) -> None:
    brief, parts = study(7), parts_list(7, 5)
    _, whole = solved(brief, parts)
    monkeypatch.setattr(enumeration, "BLOCK", 7)
    _, pieces = solved(brief, parts)
    assert np.array_equal(whole.designs.part, pieces.designs.part)
    assert [rule.excluded for rule in whole.record.rules] == [rule.excluded for rule in pieces.record.rules]
    assert whole.closest_of == pieces.closest_of


@pytest.mark.parametrize("way", ["time limit", "interrupted"])
def test_a_slow_stage_is_left_within_a_second(monkeypatch: pytest.MonkeyPatch, way: str) -> None:
    """A last stage that takes 20 ms a design, 48 of them in one block: stopped on the way, nothing half counted."""
    real = enumeration.stages

    def slow_stages(problem: Problem) -> tuple[object, ...]:
        *first, last = real(problem)

        def margins(designs: Designs) -> object:
            time.sleep(0.02 * designs.count)
            return last.margins(designs)

        # Before all others, so that every design comes to it.
        return (replace(last, margins=margins, bound=True), *first, last)

    monkeypatch.setattr(enumeration, "stages", slow_stages)
    problem = build(study(3), {"list": machines.catalog(*parts_list(3, 4))})
    begun = time.perf_counter()
    asked = Settings(time_limit=0.3) if way == "time limit" else Settings(
        interrupted=lambda: time.perf_counter() - begun > 0.3
    )  # fmt: skip
    outcome = enumeration.solve(problem, asked)
    # All 48 would take 0.96 s in this stage alone; sixteen at most are judged at once.
    assert outcome.stopped == way and outcome.record.looked_at < 48
    assert outcome.record.met + sum(r.excluded for r in outcome.record.rules) == outcome.record.looked_at
