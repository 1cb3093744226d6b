"""Noise, records and shocks on curves through six-axis machines: seconds a design, batch and assessor."""

from __future__ import annotations

import importlib.util
import time
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.brief import Brief
from detune.brief.condition import Condition
from detune.brief.forcing.base_pulse import BasePulse
from detune.brief.forcing.measured_record import MeasuredRecord
from detune.brief.forcing.random_base_motion import RandomBaseMotion
from detune.parts.kinds.mount import Mount
from detune.problem.build import build
from detune.problem.stages import Stage, stages
from detune.response.assess import assess
from detune.response.design import Design
from detune.response.designs import all_designs

pytestmark = pytest.mark.benchmark
ROOT = Path(__file__).parents[2]
_spec = importlib.util.spec_from_file_location(
    "law_machines", ROOT / "tests" / "response" / "law_machines.py"
)
assert _spec is not None and _spec.loader is not None
law_machines: Any = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(law_machines)
machines = law_machines.machines
G = 9.80665
LIMITS = (
    Acceleration(at="P", direction="z", measure="rms", limit=1e3),
    Acceleration(at="P", direction="resultant", measure="peak", limit=1e3),
    MountDeflection(part="dynamic", direction="axial", limit=1.0),
)


def six_axis(forcing: Any, *, flexible_floor: bool = True, limits: Any = LIMITS) -> Brief:
    """A six-axis machine on four stations in two groups with a pipe, under one forcing."""
    brief, _ = machines.random_machine(3, flexible_floor=flexible_floor)
    changes = {"forcing": (forcing,), "allowables": limits, "conditions": (Condition(name="running"),)}
    return brief.model_copy(update=changes)


def rubber(count: int) -> list[Mount]:
    """Mounts from soft to stiff with loss factors between 0.02 and 0.2."""
    loss = np.random.default_rng(1).uniform(0.02, 0.2, count)
    return [
        machines.mount(f"m{i:03d}", float(k), lateral=float(0.6 * k), static=0.8, loss=float(loss[i]))
        for i, k in enumerate(np.geomspace(5e4, 1e6, count))
    ]


def whole_range(brief: Brief, parts: list[Mount]) -> tuple[Any, Stage]:
    problem = build(brief, {"list": machines.catalog(*parts)})
    return problem, next(s for s in stages(problem) if s.name == "response over the whole range")


def one_assessment(brief: Brief, part: Mount) -> float:
    """Processor time of a second assessment, everything being loaded."""
    design = Design(brief.groups, (part,) * len(brief.groups), 0.0)
    assess(brief, design)
    started = time.process_time()
    assess(brief, design)
    return time.process_time() - started


def test_ten_thousand_designs_under_one_density(figures: dict[str, Any]) -> None:
    points = ((5.0, 0.01), (16.0, 0.012), (40.0, 0.001), (80.0, 0.001), (200.0, 1e-5))
    road = RandomBaseMotion(
        name="road",
        direction="z",
        duration=60.0,
        break_points=tuple((f, s * G**2) for f, s in points),  # type: ignore[arg-type]
    )
    brief, parts = six_axis(road), rubber(100)
    problem, stage = whole_range(brief, parts)
    stage.margins(all_designs(problem.model, 0, 100))
    started = time.process_time()
    for first in range(0, 10_000, stage.size):
        stage.margins(all_designs(problem.model, first, first + stage.size))
    seconds = time.process_time() - started
    figures["noise, 10,000 six-axis designs, one density"] = {
        "rows": len(stage.requirements),
        "batch_seconds": seconds,
        "assessment_seconds_each": one_assessment(brief, parts[50]),
    }


def test_twenty_seconds_at_a_kilohertz(figures: dict[str, Any], tmp_path: Path) -> None:
    moment = np.arange(20_001) * 1e-3
    value = np.cumsum(np.random.default_rng(0).normal(size=moment.size))
    value -= np.convolve(value, np.ones(201) / 201, "same")
    lines = [f"{t:.3f},{v:.6f}" for t, v in zip(moment, 5.0 * value / np.abs(value).max(), strict=True)]
    (tmp_path / "road.csv").write_text("time [s],acceleration [m/s^2]\n" + "\n".join(lines) + "\n")
    stated = {"kind": "measured-record", "name": "road", "direction": "z", "file": "road.csv"}
    record = MeasuredRecord.model_validate(
        {**stated, "use": "time", "detrend": "mean"}, context={"folder": tmp_path}
    )
    brief, parts = six_axis(record), rubber(3)
    problem, stage = whole_range(brief, parts)
    stage.margins(all_designs(problem.model, 0, 1))
    started = time.process_time()
    stage.margins(all_designs(problem.model, 0, 3))
    figures["record of 20 s at 1 kHz, six axes"] = {
        "batch_seconds_each": (time.process_time() - started) / 3,
        "assessment_seconds_each": one_assessment(brief, parts[1]),
    }


def test_a_shock_on_curved_mounts(figures: dict[str, Any]) -> None:
    shock = BasePulse(name="shock", direction="z", shape="half-sine", amplitude=60.0, duration=0.011)
    brief = six_axis(shock, flexible_floor=False, limits=LIMITS[1:])
    parts = [law_machines.curved(part, reach=0.06) for part in rubber(7)[3:6]]
    problem, stage = whole_range(brief, parts)
    stage.margins(all_designs(problem.model, 0, 1))
    started = time.process_time()
    stage.margins(all_designs(problem.model, 0, 3))
    figures["shock on load-deflection curves, six axes"] = {
        "batch_seconds_each": (time.process_time() - started) / 3,
        "assessment_seconds_each": one_assessment(brief, parts[1]),
    }
