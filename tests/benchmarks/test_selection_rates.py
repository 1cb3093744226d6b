"""Proven optima and whole fronts of large selections: time, memory, growth, and two workers."""

from __future__ import annotations

import json
import os
import statistics
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from detune.proof.exact_test import exact_accept
from detune.proof.instances import InstanceSettings, make_instance, random_designs

pytestmark = pytest.mark.benchmark
HERE = Path(__file__).parent
SEEDS = (1, 2, 3)


def one(parts: int, groups: int, seed: int, aim: str = "least cost", workers: int = 1) -> dict[str, Any]:
    """One search in a process of its own, its kernels loaded and warm before the clock starts."""
    path = os.pathsep.join([str(HERE.parents[1] / "optimizer"), os.environ.get("PYTHONPATH", "")])
    done = subprocess.run(
        [sys.executable, str(HERE / "run_one.py"), str(parts), str(groups), str(seed), aim, str(workers)],
        check=True,
        capture_output=True,
        text=True,
        env={**os.environ, "PYTHONPATH": path, "OPENBLAS_NUM_THREADS": "1"},
    )
    found: dict[str, Any] = json.loads(done.stdout)
    assert found["status"] == "complete" and found["accounted"]
    return found


def several(
    parts: int, groups: int, aim: str = "least cost", seeds: tuple[int, ...] = SEEDS
) -> dict[str, Any]:
    runs = [one(parts, groups, seed, aim) for seed in seeds]
    return {
        "median_seconds": statistics.median(run["seconds"] for run in runs),
        "median_processor_seconds": statistics.median(run["processor_seconds"] for run in runs),
        "peak_memory_mib": max(run["peak_memory_mib"] for run in runs),
        "points": [run["points"] for run in runs],
        "runs": runs,
    }


def test_share_of_feasible_designs(figures: dict[str, Any]) -> None:
    """How rare the designs are that meet all requirements, among two million drawn evenly."""
    shares = {}
    for groups in (3, 4):
        selection = make_instance(InstanceSettings(parts=200, groups=groups, seed=1))
        accept, random = exact_accept(selection), np.random.default_rng(7)
        met = sum(int(accept(random_designs(selection, 50_000, random))[0].sum()) for _ in range(40))
        shares[f"200^{groups}"] = met / 2e6
    figures["share of designs that are feasible"] = shares


@pytest.mark.parametrize(("parts", "groups"), [(200, 4), (1000, 3)])
def test_least_cost(parts: int, groups: int, figures: dict[str, Any]) -> None:
    figures[f"least cost {parts}^{groups}"] = several(parts, groups)


def test_least_cost_of_a_million_million(figures: dict[str, Any], long: bool) -> None:
    if not long:
        pytest.skip("takes minutes: --benchmark-long")
    figures["least cost 1000^4"] = several(1000, 4)


def test_whole_front(figures: dict[str, Any], long: bool) -> None:
    figures["whole front 200^4"] = several(200, 4, "front", SEEDS if long else SEEDS[:1])


def test_growth_with_parts_and_groups(figures: dict[str, Any]) -> None:
    found = {}
    for parts, groups in [(100, 2), (100, 3), (100, 4), (200, 4), (400, 4), (400, 3), (800, 3)]:
        figure = several(parts, groups)
        found[f"{parts}^{groups}"] = {key: figure[key] for key in figure if key != "runs"}
    figures["growth"] = found


def test_two_workers(figures: dict[str, Any]) -> None:
    """The same answer and counts that add up, whatever the number of workers."""
    ratios, runs = [], []
    for seed in SEEDS:
        alone, both = one(1000, 4, seed), one(1000, 4, seed, workers=2)
        assert alone["cost"] == both["cost"]
        ratios.append(alone["seconds"] / both["seconds"])
        runs += [alone, both]
    figures["two workers 1000^4"] = {
        "median_ratio": statistics.median(ratios),
        "ratios": ratios,
        "runs": runs,
    }
