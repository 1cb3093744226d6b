"""Limits as levels in decibels: C9 of the table of checks (ISO 1683:2015), what is refused, and both calculations."""

from __future__ import annotations

import math
import pickle
from pathlib import Path
from typing import Any

import pytest

from brief.scale_study import LIMIT, scale
from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.allowable.velocity import Velocity
from detune.brief.levels import Level
from detune.brief.read import scan_brief
from detune.report.tables import margins_table
from detune.report.words import limit_text, value_text
from response import law_machines

machines = law_machines.machines
POINT = {"at": "P", "direction": "z", "measure": "rms"}
FORCE = {"through": "floor", "direction": "z", "measure": "rms"}


@pytest.mark.parametrize(
    ("kind", "stated", "limit", "value"),
    [
        # C9: 1e-12 m, 1e-9 m/s, 1e-6 m/s2, 1e-6 N; 1 mm/s = 120 dB, g0 = 139.830 dB.
        (Velocity, POINT, "120 dB", 1e-3),
        (Acceleration, POINT, "139.830 dB", 9.80665),
        (Displacement, POINT, "120 dB", 1e-6),
        (TransmittedForce, FORCE, "120 dB", 1.0),
        (Velocity, POINT, "0 dB", 1e-9),
        (Velocity, POINT, "74.1 dB re 1e-8 m/s", 50.7e-6),  # the old American reference, 20 dB lower
        (Velocity, POINT, "94.1 dB re 1 nm/s", 50.7e-6),
        (Velocity, POINT, "100.5 dB", 1.0593e-4),
    ],
)
def test_c9_levels(kind: Any, stated: dict[str, Any], limit: str, value: float) -> None:
    found = kind(**stated, limit=limit)
    assert float(found.limit) == pytest.approx(value, rel=1e-4)
    assert found.level_reference() is not None
    assert ("ISO 1683" in " ".join(found.assumed())) is (" re " not in limit)
    assert pickle.loads(pickle.dumps(found.limit)).reference == found.level_reference()
    assert isinstance(found.model_copy().limit, Level)


def test_a_level_is_judged_as_its_rms_value_and_shown_with_its_reference() -> None:
    # 100 kg on 100 N/mm (eta 0.1) under 50 N at 12 Hz: 50/|1e5 (1 + 0.1 j) - 100 w^2| w/sqrt 2 m/s rms.
    w = 2.0 * math.pi * 12.0
    rms = 50.0 / abs(1e5 * (1.0 + 0.1j) - 100.0 * w**2) * w / math.sqrt(2.0)
    limit = Velocity(**POINT, limit="130 dB")
    brief = machines.one_axis(100.0, machines.force(12.0, 50.0)).model_copy(update={"allowables": (limit,)})
    found = law_machines.agreed(brief, machines.mount(k=1e5, loss=0.1))
    (row,) = [row for row in found.margins if row.kind == "velocity"]
    assert row.value == pytest.approx(rms, rel=1e-9)
    level = 20.0 * math.log10(rms / 1e-9)
    assert value_text(row) == f"{level:.1f} dB re 1 nm/s" and limit_text(row) == "at most 130.0 dB re 1 nm/s"
    assert row.margin == pytest.approx(10.0 ** ((130.0 - level) / 20.0) - 1.0, rel=1e-9)
    assert "10^(difference / 20 dB) - 1" in margins_table(brief, found).note


@pytest.mark.parametrize(
    ("limit", "measure", "expected"),
    [
        ("105 dB", "peak", 'measure = "rms" beside a limit in dB'),
        ("105 dB", "3-sigma", 'measure = "rms" beside a limit in dB'),
        ("105 dBA", "rms", "without a frequency weighting"),
        ("105 dB(A)", "rms", "without a frequency weighting"),
        ("105 dB above VC-A", "rms", "with its reference"),
        ("105 dB re 1 mm", "rms", "velocity"),
        ("1,5 dB", "rms", "a level such as"),
        ("1e5 dB", "rms", "between -400 dB and 400 dB"),
    ],
)
def test_what_is_no_level_is_refused_in_place(
    limit: str, measure: str, expected: str, tmp_path: Path
) -> None:
    allowable = LIMIT.replace("acceleration", "velocity").replace("peak", measure)
    study = scale(allowable=allowable.replace("1 m/s^2", limit))
    (tmp_path / "study.toml").write_text(study, encoding="utf-8")
    (fault,) = scan_brief(tmp_path / "study.toml").faults
    assert expected in fault.expected
    line = study.splitlines()[(fault.line or 0) - 1]
    assert line.startswith("measure" if measure != "rms" else "limit")


def test_other_limits_take_no_level(tmp_path: Path) -> None:
    allowable = (
        'kind = "relative-motion"\nat = "pan"\nto = "floor"\ndirection = "z"\nmeasure = "rms"\nlimit'
        ' = "90 dB"\n'
    )
    study = scale(allowable=allowable)
    (tmp_path / "study.toml").write_text(study, encoding="utf-8")
    (fault,) = scan_brief(tmp_path / "study.toml").faults
    assert fault.found == "90 dB" or "dB" in (fault.found or "")
