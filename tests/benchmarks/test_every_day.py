"""What a user waits for: help, check, the first result of the demonstration, and many small evaluations."""

from __future__ import annotations

import importlib.util
import os
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from detune.problem.build import build
from detune.response.assess import assess
from detune.response.designs import all_designs
from detune.solvers import enumeration
from detune.solvers.outcome import Settings

pytestmark = pytest.mark.benchmark
ROOT = Path(__file__).parents[2]
BYTECODE = Path(tempfile.gettempdir()) / "detune-benchmark-bytecode"
DEMO = ROOT / "studies" / "cold-store-compressor.toml"
_spec = importlib.util.spec_from_file_location("briefs", ROOT / "tests" / "solvers" / "briefs.py")
assert _spec is not None and _spec.loader is not None
briefs: Any = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(briefs)
machines = briefs.machines


def command(*arguments: str, repeats: int = 5) -> float:
    """The median processor time of a command in a new process, after one that warms the disk and the bytecode."""
    warm = {k: v for k, v in os.environ.items() if k != "PYTHONDONTWRITEBYTECODE"}
    path = os.pathsep.join([str(ROOT / "optimizer"), os.environ.get("PYTHONPATH", "")])
    times = []
    for _ in range(repeats + 1):
        before = resource.getrusage(resource.RUSAGE_CHILDREN)
        done = subprocess.run(
            [sys.executable, *arguments],
            check=False,
            capture_output=True,
            env={**warm, "PYTHONPATH": path, "PYTHONPYCACHEPREFIX": str(BYTECODE)},
        )
        after = resource.getrusage(resource.RUSAGE_CHILDREN)
        times.append(after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime)
        assert done.returncode == 0, done.stderr.decode()
    return statistics.median(times[1:])


def test_start_up(figures: dict[str, Any], tmp_path: Path) -> None:
    run = ["-m", "detune", "run", str(DEMO), "--overwrite", "--out", str(tmp_path / "out")]
    solve = (
        "from detune.study.load import load_study; from detune.study.run import run_study;"
        f"print(run_study(load_study({str(DEMO)!r})).answer.cost)"
    )
    figures["start-up, seconds"] = {
        "python -c pass": command("-c", "pass"),
        "detune --help": command("-m", "detune", "--help"),
        "detune check": command("-m", "detune", "check", str(DEMO)),
        "the demonstration's answer and front": command("-c", solve, repeats=3),
        "detune run with its whole result folder": command(*run, repeats=3),
    }


def test_ten_thousand_small_evaluations(figures: dict[str, Any]) -> None:
    """A mass on one of 10,000 mounts: the batch, and single assessments, which each state the machine anew."""
    stiffness = np.geomspace(1e4, 1e6, 10_000)
    parts = [machines.mount(f"m{i}", float(k), loss=0.1) for i, k in enumerate(stiffness)]
    brief = machines.one_axis(100.0, machines.force((20.0, 30.0), 10.0))
    problem = build(brief, {"list": machines.catalog(*parts)})
    started = time.process_time()
    outcome = enumeration.solve(problem, Settings())
    batch = time.process_time() - started
    assert outcome.record.accounted and outcome.record.designs == 10_000
    designs = all_designs(problem.model, 0, 200)
    started = time.process_time()
    for index in range(200):
        assess(brief, problem.design(designs, index))
    single = (time.process_time() - started) / 200
    figures["small evaluations"] = {"batch_ms_each": 1e3 * batch / 10_000, "assessment_ms_each": 1e3 * single}
