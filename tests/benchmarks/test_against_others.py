"""The same problems given to general-purpose libraries: Pyomo with SCIP and HiGHS, and differential evolution."""

from __future__ import annotations

import importlib.util
import math
import statistics
import time
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from detune.proof.exact_test import exact_accept, natural_frequencies, separation, static_margin
from detune.proof.instances import InstanceSettings, make_instance
from detune.proof.response_rows import response_margin
from detune.proof.search import SearchSettings
from detune.proof.search_front import search_least_cost
from detune.proof.search_tables import design_cost
from detune.proof.selection_data import Selection
from detune.sizing.one_axis import OneAxisOutcome, best_count, solve_one_axis
from detune.sizing.one_axis_pyomo import PartCount
from detune.sizing.statement import Objective, OneAxisProblem, ResponseLimit
from detune.solvers.own_process import OwnProcess
from detune.solvers.pyomo_model import Task, run
from detune.solvers.second_opinion import least_cost
from detune.solvers.size_scip import solve_with_scip

pytestmark = pytest.mark.benchmark
TESTS = Path(__file__).parents[1]


def _load(name: str, path: Path) -> Any:
    spec = importlib.util.spec_from_file_location(name, path)
    assert spec is not None and spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


briefs = _load("briefs", TESTS / "solvers" / "briefs.py")
sizing_instances = _load("sizing_instances", TESTS / "sizing" / "instances.py")


def search_seconds(selection: Selection, kernels: Any, repeats: int = 5) -> tuple[float, float | None]:
    """The median processor time of a warm search on one core, and the least cost."""
    settings = SearchSettings(kernels=kernels)
    search_least_cost(selection, settings=settings)
    times = []
    for _ in range(repeats):
        started = time.process_time()
        result = search_least_cost(selection, settings=settings)
        times.append(time.process_time() - started)
    return statistics.median(times), result.designs[0].cost if result.designs else None


@pytest.mark.parametrize("backend", ["scip_direct", "highs"])
def test_twenty_parts_at_three_groups_by_pyomo(backend: Any, figures: dict[str, Any], long: bool) -> None:
    """Processor time of the MILP solver's call alone, without building models; half an hour at most."""
    runs = []
    for seed in (1, 2, 3) if long else (1,):
        selection = make_instance(InstanceSettings(parts=20, groups=3, seed=seed))
        fastest, cost = min((search_seconds(selection, k) for k in ("numpy", "compiled")), key=lambda x: x[0])
        judge = exact_accept(selection)

        def meets(parts: tuple[int, ...], step: int, judge: Any = judge) -> bool:
            return bool(judge(np.array([[*parts, step]]))[0][0])

        with OwnProcess(run) as process:
            question = Task(briefs.statement_of_selection(selection), (), (), backend, 1800.0)
            started = time.perf_counter()
            opinion = least_cost(process, question, meets, 1800.0)
            whole = time.perf_counter() - started
        found = None
        if opinion.parts is not None:
            found = float(design_cost(selection, np.array([[*opinion.parts, opinion.step]]))[0])
        runs.append(
            {
                "seed": seed,
                "search_seconds": fastest,
                "solver_seconds": opinion.solver_seconds,
                "whole_seconds": whole,
                "runs": opinion.runs,
                "stopped": opinion.stopped,
                "times": opinion.solver_seconds / fastest,
                "same_cost": found == cost,
                "lower_bound": opinion.lower_bound,
                "least_cost": cost,
            }
        )
        assert opinion.stopped != "finished" or found == cost
    figures[f"20^3 by Pyomo and {backend}"] = {
        "median_times": statistics.median(entry["times"] for entry in runs),
        "runs": runs,
    }


class OutOfTime(Exception):
    """Differential evolution has used its time."""


@dataclass
class Penalised:
    """Cost plus a penalty for what is not met, by the batched numpy evaluator; keeps the best feasible design."""

    selection: Selection
    until: float
    best: float = np.inf
    asked: int = 0

    def __call__(self, x: np.ndarray) -> np.ndarray:
        if time.process_time() > self.until:
            raise OutOfTime
        selection = self.selection
        place = np.clip(np.floor(x.T).astype(np.int64), 0, np.array(selection.sizes) - 1)
        # Neighbours are to be alike: the parts stand in the order of their axial stiffness.
        part = [
            np.argsort(group.kappa_static[:, 2])[p]
            for group, p in zip(selection.groups, place.T, strict=True)
        ]
        designs = np.column_stack([*part, np.zeros(len(place), dtype=np.int64)])
        self.asked += len(designs)
        cost = design_cost(selection, designs)
        miss = np.maximum(-np.nan_to_num(static_margin(selection, designs), neginf=-10.0, posinf=10.0), 0.0)
        apart = separation(natural_frequencies(selection, designs), selection.bands)
        miss += np.maximum(selection.bands.separation.max() - apart, 0.0)
        miss += np.maximum(-response_margin(selection, designs), 0.0)
        met = miss <= 0.0
        if met.any():
            self.best = min(self.best, float(cost[met].min()))
        return cost + np.where(met, 0.0, 500.0 * (1.0 + miss))


def test_differential_evolution_given_ten_times_the_time(figures: dict[str, Any]) -> None:
    """200 parts at 4 groups, five seeds; with restarts until the time is over."""
    from scipy.optimize import differential_evolution

    selection = make_instance(InstanceSettings(parts=200, groups=4, seed=1))
    seconds, optimum = search_seconds(selection, "compiled", 3)
    assert optimum is not None
    gaps = []
    for seed in range(5):
        penalised = Penalised(selection, time.process_time() + 10.0 * seconds)
        restart = 0
        try:
            while True:
                differential_evolution(
                    penalised, [(0.0, 200.0)] * 4, seed=100 * seed + restart, vectorized=True,
                    updating="deferred", popsize=40, maxiter=10_000, polish=False, tol=1e-6,
                )  # fmt: skip
                restart += 1
        except OutOfTime:
            found = np.isfinite(penalised.best)
            gaps.append(penalised.best / optimum - 1.0 if found else None)
    figures["differential evolution 200^4, ten times the time"] = {
        "search_seconds": seconds,
        "optimum": optimum,
        "gaps": gaps,
        "found_nothing": sum(gap is None for gap in gaps),
    }


def thirty_lines(seed: int) -> OneAxisProblem:
    """The problem of a seed with thirty limits on displacement from 5 to 60 Hz instead of its own."""
    rng = np.random.default_rng(seed)
    problem = sizing_instances.random_problem(seed, ranges=False)
    k = float(np.exp(rng.uniform(*np.log(problem.stiffness_bounds))))
    d = float(np.exp(rng.uniform(*np.log(problem.damping_bounds))))
    limits = []
    for f in np.linspace(5.0, 60.0, 30).tolist():
        raw = ResponseLimit(f"{f} Hz", "displacement", 1.0, f, f, "force", 1.0)
        level = float(sizing_instances.response(raw, problem.damping_kind, k, d, problem.mass, f))
        limits.append(replace(raw, limit=level * float(rng.uniform(1.0, 3.0))))
    return replace(problem, limits=tuple(limits), sag=None)


def of_equal_mounts(seed: int) -> tuple[OneAxisProblem, PartCount]:
    """A problem whose bounds are those of one of two to six equal mounts, and what each of them costs."""
    problem = sizing_instances.random_problem(seed, ranges=False)
    share = 4.0 if problem.damping_kind == "viscous" else 1.0
    low, high = problem.damping_bounds
    k_low, k_high = problem.stiffness_bounds
    single = replace(
        problem,
        stiffness_bounds=(k_low / 4.0, k_high / 4.0),
        damping_bounds=(low / share, high / share),
        objective=Objective("weighted sum", stiffness_weight=1.0 / k_high, damping_weight=1.0 / high),
    )
    return single, PartCount(2, 6, 0.05)


CASES = (
    "two to five limits",
    "thirty limits",
    "ballast in steps",
    "continuous ballast",
    "a number of mounts",
)


def cases(what: str) -> tuple[list[OneAxisProblem], list[PartCount | None]]:
    """The problems of one kind and, for a number of mounts, their counts."""
    make = sizing_instances.random_problem
    if what == "a number of mounts":
        pairs = [of_equal_mounts(seed) for seed in range(30)]
        return [problem for problem, _ in pairs], [count for _, count in pairs]
    problems = {
        "two to five limits": [make(seed) for seed in range(200)],
        "thirty limits": [thirty_lines(seed) for seed in range(40)],
        "ballast in steps": [make(seed, ballast="steps") for seed in range(1000, 1040)],
        "continuous ballast": [make(seed, ballast="continuous") for seed in range(1001, 1031)],
    }[what]
    return problems, [None] * len(problems)


@pytest.mark.parametrize("what", CASES)
def test_one_axis_sizing_against_scip(what: str, figures: dict[str, Any]) -> None:
    """Processor time, each from its statement to its answer; of the exact method the median of three.

    The exact method gives every branch, but the best alone where SCIP's one design is dearer to be compared with all:
    of continuous ballast and of a number of mounts.
    """
    problems, counts = cases(what)
    second = solve_with_scip(problems, 20.0, counts)
    solve_one_axis(problems[0], "compiled")
    exact, ratios, scip, worst, undecided, disjoint = [], [], [], 0.0, 0, 0
    for problem, count, other in zip(problems, counts, second, strict=True):
        times = []
        for _ in range(3):
            started = time.process_time()
            if count is None:
                first = solve_one_axis(problem, "compiled", only_best="continuous" in what)
            else:
                found = best_count(problem, count.least, count.most, count.cost, "compiled")
                first = OneAxisOutcome((), math.inf, 0.0, 0.0, True) if found is None else found[1]
            times.append(time.process_time() - started)
        disjoint += len(first.branches) > 1
        if other.status not in ("optimal", "infeasible"):
            undecided += 1
            continue
        exact.append(statistics.median(times))
        scip.append(other.seconds)
        ratios.append(other.seconds / exact[-1])
        assert (other.status == "infeasible") == (not first.branches)
        if first.branches:
            best = first.best.objective
            if count is not None and found is not None:
                best += count.cost * found[0]
            worst = max(worst, abs(other.objective - best) / max(abs(best), 1e-9))
    figures[f"one-axis sizing, {what}"] = {
        "exact_median_ms": 1e3 * statistics.median(exact),
        "exact_greatest_ms": 1e3 * max(exact),
        "scip_median_ms": 1e3 * statistics.median(scip),
        "median_ratio": statistics.median(ratios),
        "least_ratio": min(ratios),
        "ratio_of_sums": sum(scip) / sum(exact),
        "share_of_15_and_more": sum(ratio >= 15.0 for ratio in ratios) / len(ratios),
        "largest_difference": worst,
        "compared": len(ratios),
        "disjoint": disjoint,
        "undecided_by_scip": undecided,
    }
