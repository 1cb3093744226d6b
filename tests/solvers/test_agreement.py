"""Enumeration, bounded search and Pyomo on random small problems: the same least cost, and the same front."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
import pytest

from detune.problem.build import Problem
from detune.proof.exact_test import exact_accept
from detune.proof.instances import InstanceSettings, make_instance
from detune.proof.search import SearchSettings
from detune.proof.search_front import search_least_cost
from detune.response.designs import Designs
from detune.solvers import bounded, enumeration
from detune.solvers.final_test import FinalTest
from detune.solvers.nondominated import as_minimised, nondominated
from detune.solvers.outcome import Outcome, Settings
from detune.solvers.own_process import OwnProcess
from detune.solvers.pyomo_model import Task, run
from detune.solvers.pyomo_statement import statement_of
from detune.solvers.second_opinion import least_cost
from proof import brute_force as brute
from solvers import briefs

SHAPES = [
    {"parts": 5, "groups": 2},
    {"parts": 4, "groups": 3, "empty": True},
    {"parts": 3, "groups": 3, "ballast_steps": 2},
    {"parts": 8, "groups": 1, "ballast_steps": 2},
    {"parts": 6, "groups": 2, "empty": True, "ballast_steps": 2},
]


@pytest.fixture(scope="module")
def process() -> Iterator[OwnProcess]:
    with OwnProcess(run) as own:
        yield own


def by_pyomo(process: OwnProcess, problem: Problem, backend: Any) -> float | None:
    """The least cost by Pyomo, None where it proves that none exists."""
    tests = FinalTest(problem)

    def meets(parts: tuple[int, ...], step: int) -> bool:
        return bool(tests.judge(Designs(np.array([parts]), np.array([step])))[0][0])

    opinion = least_cost(process, Task(statement_of(problem), (), (), backend, 120.0), meets, 300.0)
    assert opinion.stopped == "finished"
    if opinion.parts is None:
        return None
    statement = statement_of(problem)
    chosen = sum(float(c[j]) for c, j in zip(statement.cost, opinion.parts, strict=True))
    return chosen + float(statement.step_cost[opinion.step])


def cheapest(outcome: Outcome) -> float | None:
    assert outcome.stopped == "finished" and outcome.record.accounted
    return float(outcome.objectives["cost"].min()) if outcome.designs.count else None


def same(first: float | None, second: float | None) -> bool:
    if first is None or second is None:
        return first is second
    return first == pytest.approx(second, rel=1e-9)


def check_brief(process: OwnProcess, seed: int) -> None:
    problem = briefs.small_problem(seed)
    found = [cheapest(solver.solve(problem, Settings())) for solver in (enumeration, bounded)]
    found.append(by_pyomo(process, problem, "highs"))
    assert same(found[0], found[1]) and same(found[0], found[2]), found


def check_instance(process: OwnProcess, number: int) -> None:
    shape = SHAPES[number % len(SHAPES)]
    loose = InstanceSettings(seed=3000 + number, tight=False, response_share=0.4, separation=0.03, **shape)
    selection = make_instance(loose)
    every = [
        brute.cost_of(selection, design)
        for design in brute.all_designs(selection)
        if brute.assess(selection, design)[0]
    ]
    searched = search_least_cost(selection, settings=SearchSettings(kernels="numpy")).designs
    judge = exact_accept(selection)

    def meets(parts: tuple[int, ...], step: int) -> bool:
        return bool(judge(np.array([[*parts, step]]))[0][0])

    question = Task(briefs.statement_of_selection(selection), (), (), "highs", 120.0)
    opinion = least_cost(process, question, meets, 300.0)
    found = None if opinion.parts is None else brute.cost_of(selection, (*opinion.parts, opinion.step))
    assert opinion.stopped == "finished"
    assert same(min(every, default=None), searched[0].cost if searched else None)
    assert same(min(every, default=None), found)


@pytest.mark.parametrize("seed", range(2))
def test_three_ways_to_the_least_cost_of_a_brief(seed: int, process: OwnProcess) -> None:
    check_brief(process, seed)


@pytest.mark.parametrize("number", range(3))
def test_three_ways_to_the_least_cost_of_an_instance(number: int, process: OwnProcess) -> None:
    check_instance(process, number)


@pytest.mark.nightly
@pytest.mark.parametrize("seed", range(100, 130))
def test_three_ways_agree_on_thirty_briefs(seed: int, process: OwnProcess) -> None:
    check_brief(process, seed)


@pytest.mark.nightly
@pytest.mark.parametrize("number", range(100, 130))
def test_three_ways_agree_on_thirty_instances(number: int, process: OwnProcess) -> None:
    check_instance(process, number)


def front(problem: Problem, outcome: Outcome) -> np.ndarray:
    if not outcome.designs.count:
        return np.zeros((0, 2))
    values = as_minimised(outcome.objectives, problem.brief.objectives.trade)
    return values[nondominated(values)]


def check_front(seed: int) -> None:
    """Batches of other sizes round the last digits otherwise: values agree to 1e-7."""
    problem = briefs.small_problem(seed)
    every, searched = (solver.solve(problem, Settings()) for solver in (enumeration, bounded))
    alone = bounded.solve(problem, Settings(front=False))
    expected, found = front(problem, every), front(problem, searched)
    assert expected.shape == found.shape
    assert np.allclose(expected, found, rtol=1e-7, atol=1e-9)
    assert searched.record.accounted and alone.record.accounted
    assert same(cheapest(every), cheapest(alone))


@pytest.mark.parametrize("seed", range(200, 210))
def test_front_and_optimum_equal_enumeration(seed: int) -> None:
    check_front(seed)


@pytest.mark.nightly
@pytest.mark.parametrize("seed", range(210, 410))
def test_front_and_optimum_equal_enumeration_on_two_hundred_briefs(seed: int) -> None:
    check_front(seed)


def test_small_briefs_are_not_all_alike() -> None:
    """The comparison would be empty if all or none of the designs met their briefs."""
    shares, kinds = [], set()
    for seed in range(200, 206):
        problem = briefs.small_problem(seed)
        outcome = enumeration.solve(problem, Settings())
        shares.append(outcome.record.met / problem.count)
        for group in problem.model.groups:
            kinds |= {"parallel" for m in group.mounts if m.pieces > 1}
            kinds |= {"damper" for m in group.mounts if m.damper}
            kinds |= {"empty" for m in group.mounts if m.pieces == 0}
        kinds |= {"ballast"} if len(problem.model.ballast_mass) > 1 else set()
    assert kinds == {"parallel", "damper", "empty", "ballast"}
    assert min(shares) < 0.2 and max(shares) > 0.2
