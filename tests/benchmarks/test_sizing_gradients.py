"""Six-axis sizing: slopes by adjoint against finite differences, on the same searches, with 8, 12 and 16 unknowns.

Finite differences are the batched ones of `size_many_starts` without `adjoint`: all neighbours of a point are evaluated
together, which is already several times faster than one after the other.
"""

from __future__ import annotations

import statistics
import time
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from detune.brief.brief import Brief
from detune.solvers import size_gradients, size_many_starts
from detune.solvers.size_batch import judge
from detune.study.load import load_study

pytestmark = pytest.mark.benchmark
HERE = Path(__file__).parents[1] / "study"
REPEATS = 7


def skid(folder: Path, axes: tuple[str, ...], ballast: bool) -> Brief:
    """A skid on four stations, each a group of its own, with these stiffnesses and a loss factor unknown in each."""
    text = (HERE / "skid_to_size.toml").read_text(encoding="utf-8")
    head, _ = text.split("[sizing]")
    for name in "ABCD":
        at = head.index(f'name = "{name}"')
        start, end = head.index("group", at), head.index("\n", head.index("group", at))
        head = head[:start] + f'group = "{name}"' + head[end:]
    parts = ["[sizing]\nminimise = 'cost'\nspecification = false\n"]
    for name in "ABCD":
        parts += [
            f"[[sizing.unknown]]\nkind = 'stiffness'\ngroup = '{name}'\naxis = '{axis}'\n"
            "lower = '50 N/mm'\nupper = '2000 N/mm'\n"
            for axis in axes
        ]
        parts.append(
            f"[[sizing.unknown]]\nkind = 'loss-factor'\ngroup = '{name}'\nlower = 0.03\nupper = 0.3\n"
        )
        ratio = "" if "x" in axes or "lateral" in axes else "lateral_ratio = 0.6\n"
        parts.append(
            f"[[sizing.made]]\ngroup = '{name}'\ndynamic_to_static = 1.2\n{ratio}cost = 30\n"
            "cost_per_stiffness = 0.05\ncost_per_loss_factor = 100\n"
        )
    if ballast:
        parts.append("[[sizing.unknown]]\nkind = 'ballast'\nlower = '0 kg'\nupper = '150 kg'\n")
    path = folder / f"skid-{len(axes)}.toml"
    path.write_text(head + "".join(parts), encoding="utf-8")
    return load_study(path).brief


def median_time(call: Any) -> float:
    call()
    times = []
    for _ in range(REPEATS):
        started = time.process_time()
        call()
        times.append(time.process_time() - started)
    return statistics.median(times)


def one_point(brief: Brief) -> dict[str, float]:
    """Milliseconds for all requirements and their slopes at one point, both ways."""
    to = size_many_starts.Coordinates(brief)
    y = 0.2 + 0.6 * np.random.default_rng(1).random(len(to.low))
    values = to.outward(y)
    found = size_gradients.prepared(brief)
    held = size_gradients.sides(found, values)
    neighbours = to.outward(np.concatenate([y[None], y + 1e-4 * np.eye(len(y))]))
    adjoint = median_time(lambda: size_gradients.evaluated(found, values, held))
    batch = median_time(lambda: judge(brief, neighbours))
    one = median_time(lambda: judge(brief, neighbours[:1]))
    return {
        "unknowns": len(y),
        "adjoint, ms": 1e3 * adjoint,
        "differences in one batch, ms": 1e3 * batch,
        "differences one by one, ms": 1e3 * one * (len(y) + 1),
        "batch over adjoint": batch / adjoint,
    }


def searched(brief: Brief, starts: int) -> dict[str, float]:
    """Seconds and best cost of the same starts, both ways."""
    told: dict[str, float] = {}
    for name, adjoint in (("adjoint", True), ("differences", False)):
        started = time.process_time()
        found = size_many_starts.solve(brief, "cost", 1.0, starts=starts, seed=1, adjoint=adjoint)
        told[f"{name}, s"] = time.process_time() - started
        told[f"{name}, met"] = found.met
        told[f"{name}, best cost"] = found.spread[0]
        told[f"{name}, worst cost"] = found.spread[2]
    told["differences over adjoint"] = told["differences, s"] / told["adjoint, s"]
    return told


def test_slopes_of_a_brief(figures: dict[str, Any], tmp_path: Path) -> None:
    briefs = {
        "8 unknowns of parts": skid(tmp_path, ("axial",), False),
        "16 unknowns of parts": skid(tmp_path, ("axial", "x", "y"), False),
        "12 unknowns, positions, absorber, noise": load_study(HERE / "everything_to_size.toml").brief,
    }
    figures["six-axis sizing, one point"] = {name: one_point(brief) for name, brief in briefs.items()}
    figures["six-axis sizing, searches"] = {
        "8 unknowns of parts": searched(briefs["8 unknowns of parts"], 4),
        "16 unknowns of parts": searched(briefs["16 unknowns of parts"], 3),
    }
    for told in figures["six-axis sizing, searches"].values():
        assert told["adjoint, met"] >= 1
        # The same optimum: not a figure of speed.
        assert told["adjoint, best cost"] <= told["differences, best cost"] * (1.0 + 1e-3)
