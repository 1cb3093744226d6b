"""Travel to each side by itself: shocks count with what they reach on that side, by scipy.signal.lsim set up apart."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from scipy.signal import lsim

from detune.brief.allowable.gap import Gap
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.forcing.base_pulse import BasePulse
from detune.brief.forcing.drop import Drop
from detune.brief.forcing.force_pulse import ForcePulse
from response import law_machines

machines = law_machines.machines

MASS, K, C, G = 40.0, 2.0e5, 900.0, 9.80665
SAG = MASS * G / K
PEAK, TIME = 55.0, 0.02
UP = Gap(at="P", direction="z", clearance_of="free", clearance=1.0)
DOWN = Gap(at="P", direction=(0.0, 0.0, -1.0), clearance_of="free", clearance=1.0)
INSTALLED = Gap(at="P", direction=(0.0, 0.0, -1.0), clearance_of="installed", clearance=1.0)
COMBINED = MountDeflection(part="combined", limit=1.0)
DYNAMIC = MountDeflection(part="dynamic", limit=1.0)
SHOCK = BasePulse(name="shock", direction="z", shape="half-sine", amplitude=PEAK, duration=TIME)


def extremes(sign: float = 1.0) -> tuple[float, float]:
    """Highest and lowest rise over the floor whose acceleration is a half-sine: m y'' + c y' + k y = -m a."""
    time = np.linspace(0.0, 0.5, 50_001)
    a = np.where(time < TIME, sign * PEAK * np.sin(math.pi * time / TIME), 0.0)
    _, y, _ = lsim(([-MASS], [MASS, C, K]), a, time)
    return float(y.max()), float(-y.min())


def values(forcing: Any, *allowables: Any, **changes: Any) -> list[float]:
    """The value of each allowable, by the assessor, after the batch evaluation was found to agree."""
    brief = machines.one_axis(MASS, forcing, **changes).model_copy(update={"allowables": allowables})
    found = law_machines.agreed(brief, machines.mount(k=K, c=C), rel=1e-4)
    kept = [row for row in found.margins if row.kind in ("gap", "mount-deflection") and row.upper == 1.0]
    return [row.value for row in kept]


@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_each_side_of_a_shock_by_itself(sign: float) -> None:
    up, down = extremes(sign)
    assert max(up, down) > 1.3 * min(up, down)
    shock = SHOCK.model_copy(update={"direction": (0.0, 0.0, sign)})
    found = values(shock, UP, DOWN, INSTALLED, COMBINED, DYNAMIC)
    expected = [up - SAG, down + SAG, down, max(down + SAG, up - SAG), max(up, down)]
    assert found == pytest.approx(expected, rel=1e-4)


def test_the_side_with_the_smaller_motion_can_be_the_worse() -> None:
    # The shock goes farther up than down, but sag stands on the other side of the sum.
    up, down = extremes(-1.0)
    (combined,) = values(SHOCK.model_copy(update={"direction": (0.0, 0.0, -1.0)}), COMBINED)
    assert up > down and down + SAG > up - SAG
    assert combined == pytest.approx(down + SAG, rel=1e-4)
    # Both ways alike, as it was counted before, would be more by the difference.
    assert combined < SAG + up - 1e-4


def test_a_tone_reaches_both_ways_and_adds() -> None:
    up, down = extremes()
    size = 300.0 / abs(K - MASS * (2 * math.pi * 20.0) ** 2 + 2j * math.pi * 20.0 * C)
    found = values((SHOCK, machines.force(20.0, 300.0)), UP, DOWN, COMBINED)
    assert found == pytest.approx([up + size - SAG, down + size + SAG, down + size + SAG], rel=1e-4)


def test_several_shocks_add_on_each_side() -> None:
    # A force upwards of m a acts as the floor's acceleration downwards.
    at, force = (0.0, 0.0, 0.0), (0.0, 0.0, MASS * PEAK)
    push = ForcePulse(name="push", position=at, force=force, shape="half-sine", duration=TIME)
    up, down = extremes()
    found = values((SHOCK, push), UP, DOWN, COMBINED)
    assert found == pytest.approx([up + down - SAG, up + down + SAG, up + down + SAG], rel=1e-4)


def test_a_fall_compresses_farther_than_it_draws_out() -> None:
    # Undamped, weight included: d = d_st (1 + sqrt(1 + 2 h/d_st)), out to d_st (sqrt(1 + 2 h/d_st) - 1).
    root = math.sqrt(1.0 + 2.0 * 0.05 / SAG)
    brief = machines.one_axis(MASS, Drop(name="fall", height=0.05))
    brief = brief.model_copy(update={"allowables": (UP, DOWN, COMBINED)})
    found = law_machines.agreed(brief, machines.mount(k=K), rel=1e-4)
    kept = [
        row.value for row in found.margins if row.kind in ("gap", "mount-deflection") and row.upper == 1.0
    ]
    assert kept == pytest.approx([SAG * (root - 1.0), SAG * (root + 1.0), SAG * (root + 1.0)], rel=1e-4)
