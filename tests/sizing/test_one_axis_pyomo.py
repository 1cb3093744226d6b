"""The Pyomo statement solved by SCIP against the exact solver: two independent statements of one problem."""

from __future__ import annotations

import importlib.util
import json
import pathlib
import statistics
import time
from dataclasses import replace

import pytest

from detune.sizing.one_axis import solve_one_axis
from detune.sizing.one_axis_pyomo import MountCount, build_model, solve_with_scip
from detune.sizing.statement import Ballast, Objective, OneAxisProblem, ResponseLimit, SizingError

_spec = importlib.util.spec_from_file_location(
    "sizing_instances", pathlib.Path(__file__).with_name("instances.py")
)
assert _spec is not None and _spec.loader is not None
instances = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(instances)


def statable(count: int, first: int, ballast: str = "none"):
    problems, seed = [], first
    while len(problems) < count:
        problem = instances.random_problem(seed, ballast=ballast)
        seed += 1
        try:
            build_model(problem)
        except SizingError:
            continue
        problems.append(problem)
    return problems


def agree(problems, time_limit: float):
    """Compare; returns (disjoint instances, undecided by SCIP, time ratios)."""
    disjoint, undecided, ratios = 0, 0, []
    for problem, second in zip(problems, solve_with_scip(problems, time_limit), strict=True):
        start = time.perf_counter()
        first = solve_one_axis(problem)
        seconds = time.perf_counter() - start
        disjoint += len(first.branches) > 1
        if second.status == "time limit":
            undecided += 1
            continue
        if not first.branches:
            assert second.status == "infeasible"
            continue
        assert second.status == "optimal", second
        assert second.objective == pytest.approx(first.best.objective, rel=1e-6, abs=1e-9)
        ratios.append(second.seconds / seconds)
    return disjoint, undecided, ratios


def test_twenty_random_instances_agree():
    disjoint, undecided, _ = agree(statable(20, 0), 6.0)
    assert disjoint >= 3
    assert undecided <= 1


def test_ballast_in_steps_agrees():
    _, undecided, _ = agree(statable(4, 1000, "steps"), 6.0)
    assert undecided <= 1


@pytest.mark.nightly
def test_two_hundred_random_instances_agree():
    disjoint, undecided, _ = agree(statable(200, 0), 20.0)
    assert disjoint >= 20
    assert undecided <= 10


@pytest.mark.nightly
def test_ballast_random_instances_agree():
    agree(statable(25, 3000, "steps") + statable(25, 4000, "continuous"), 20.0)


@pytest.mark.benchmark
def test_time_ratio_of_the_two(tmp_path):
    _, undecided, ratios = agree(statable(60, 0), 20.0)
    thirty = [thirty_lines(seed) for seed in range(20)]
    _, more, wide = agree(thirty, 20.0)
    figures = {
        "median ratio, few limits": statistics.median(ratios),
        "median ratio, thirty lines": statistics.median(wide),
        "undecided by SCIP": undecided + more,
    }
    (tmp_path / "one_axis.json").write_text(json.dumps(figures))
    print(json.dumps(figures))


def thirty_lines(seed: int) -> OneAxisProblem:
    import numpy as np

    rng = np.random.default_rng(seed)
    problem = instances.random_problem(seed, ranges=False)
    k = float(np.exp(rng.uniform(*np.log(problem.stiffness_bounds))))
    d = float(np.exp(rng.uniform(*np.log(problem.damping_bounds))))
    limits = []
    for i, f in enumerate(np.linspace(5, 60, 30)):
        raw = ResponseLimit(f"{i}", "displacement", 1.0, float(f), float(f), "force", 1.0)
        level = float(instances.response(raw, problem.damping_kind, k, d, problem.mass, f))
        limits.append(replace(raw, limit=level * float(rng.uniform(1.0, 3.0))))
    return replace(problem, limits=tuple(limits), sag=None)


def test_a_count_of_equal_mounts_is_chosen_like_by_trying_each():
    limit = ResponseLimit("X", "displacement", 2e-4, 12.0, 12.0, "force", 900.0)
    goal = Objective("weighted sum", stiffness_weight=2e-5, damping_weight=1e-3)
    problem = OneAxisProblem(300.0, "viscous", (5e4, 1.5e6), (50.0, 4000.0), goal, (limit,))
    second = solve_with_scip([problem], 20.0, [MountCount(2, 6, 3.0)])[0]
    tried = {}
    for n in range(2, 7):
        bounds = (5e4 * n, 1.5e6 * n), (50.0 * n, 4000.0 * n)
        outcome = solve_one_axis(replace(problem, stiffness_bounds=bounds[0], damping_bounds=bounds[1]))
        if outcome.branches:
            tried[n] = outcome.best.objective + 3.0 * n
    assert second.status == "optimal"
    assert second.count == min(tried, key=tried.__getitem__)
    assert second.objective == pytest.approx(min(tried.values()), rel=1e-6)


def test_separation_objective_agrees():
    problem = OneAxisProblem(
        100.0,
        "viscous",
        (1e5, 1e7),
        (0.0, 10.0),
        Objective("greatest separation"),
        excitation_intervals=((9.0, 11.0), (30.0, 50.0)),
        ballast=Ballast(0.0, 50.0, 10.0),
    )
    second = solve_with_scip([problem], 20.0)[0]
    assert second.status == "optimal"
    assert second.objective == pytest.approx(solve_one_axis(problem).best.objective, rel=1e-6)


def test_a_range_of_high_degree_is_refused_with_a_reason():
    limit = ResponseLimit("a", "acceleration", 1.0, 10.0, 20.0, "unbalance", 1.0)
    problem = OneAxisProblem(1.0, "viscous", (1.0, 2.0), (0.0, 1.0), Objective("softest"), (limit,))
    with pytest.raises(SizingError, match="State it at lines"):
        build_model(problem)
