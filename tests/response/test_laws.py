"""Mounts whose stiffness depends on frequency, temperature or load: two roads, closed forms, other libraries."""

from __future__ import annotations

import importlib.util
import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

_spec = importlib.util.spec_from_file_location("law_machines", Path(__file__).with_name("law_machines.py"))
assert _spec is not None and _spec.loader is not None
law_machines = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(law_machines)
machines = law_machines.machines

TWO_PI = 2.0 * math.pi
LAWS = {
    "relaxation": law_machines.relaxing,
    "table": law_machines.tabled,
    "load curve": law_machines.curved,
    "air spring": law_machines.air,
}


@pytest.mark.parametrize("kind", ["tones", "base motion", "noise", "pulse", "passage"])
@pytest.mark.parametrize("law", LAWS)
def test_six_axes_batch_equals_assessor(law: str, kind: str) -> None:
    """Each law on one of two groups, a flexible floor, an offset centre and inclined stations."""
    seed = 3
    brief, (one, other) = machines.random_machine(seed)
    forcing = brief.forcing if kind == "tones" else law_machines.forcings(seed)[kind]
    conditions = brief.conditions if kind == "tones" else law_machines.conditions(kind)
    statics = law_machines.STATIC if kind == "tones" else law_machines.STATIC[:2]
    # After a shock the floor moves on, and absolute displacement has no greatest value.
    limits = law_machines.LIMITS[1:] if kind == "pulse" else law_machines.LIMITS
    brief = brief.model_copy(
        update={
            "gravity_stiffness": True,
            "forcing": forcing,
            "conditions": conditions,
            "allowables": (*limits, *statics),
        }
    )
    law_machines.agreed(brief, LAWS[law](one), other)
