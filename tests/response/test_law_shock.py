"""Shocks on progressive mounts: the whole curve in time against scipy.integrate, energy, and the linear limit."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.forcing.base_pulse import BasePulse
from detune.brief.forcing.drop import Drop
from detune.brief.forcing.force_pulse import ForcePulse
from detune.parts.kinds.mount import Mount
from detune.parts.laws import LoadCurve
from detune.problem.build import build
from response import law_machines

machines = law_machines.machines

TWO_PI = 2.0 * math.pi
MASS, K, BEND = 40.0, 1.0e5, 1.5e4
G = 9.80665
ACCELERATION = Acceleration(at="P", direction="z", measure="peak", limit=1e6)
DYNAMIC = MountDeflection(part="dynamic", limit=1.0)
COMBINED = MountDeflection(part="combined", limit=1.0)
FORCE = TransmittedForce(through="floor", direction="z", measure="peak", limit=1e9)


def push(d: np.ndarray | float) -> np.ndarray | float:
    """Static load of the mount over its deflection, N."""
    return K * d * (1.0 + BEND * d**2)


def part(
    c: float = 300.0, *, ratio: float = 1.0, pulls: bool = True, low: float = -0.02, high: float = 0.03
) -> Mount:
    """A mount on that curve; `ratio` is its dynamic over its static stiffness."""
    d = np.unique(np.append(np.linspace(low, high, 251), 0.0))
    curve = LoadCurve(tuple(d.tolist()), tuple(np.asarray(push(d)).tolist()), "curve.csv")
    return replace(machines.mount(k=ratio * K, static=1.0 / ratio, c=c, pulls=pulls), load_curve=curve)


REST = brentq(lambda d: push(d) - MASS * G, 0.0, 0.02, xtol=1e-16)


def by_hand(peak: float, time: float, c: float, ratio: float = 1.0, pulls: bool = True) -> dict[str, float]:
    """A mass on the curve under a half-sine of floor acceleration, x its rise from rest relative to the floor."""

    def force(x: np.ndarray) -> np.ndarray:
        total = MASS * G + ratio * (push(REST - x) - MASS * G)
        return (total if pulls else np.maximum(total, 0.0)) - MASS * G

    def shaken(t: np.ndarray) -> np.ndarray:
        return np.where(t < time, peak * np.sin(math.pi * np.minimum(t, time) / time), 0.0)

    def rates(t: float, y: np.ndarray) -> list[float]:
        return [y[1], float((force(y[0]) - c * y[1]) / MASS - shaken(np.array(t)))]

    moment = np.linspace(0.0, time + 2.0, 60001)
    found = solve_ivp(
        rates, (0.0, moment[-1]), [0.0, 0.0], t_eval=moment, rtol=1e-10, atol=1e-13, max_step=time / 20
    )
    x, v = found.y
    passed = force(x) - c * v
    return {
        "acceleration": float(np.abs(passed).max() / MASS),
        "mount-deflection": float(np.abs(x).max()),
        "transmitted-force": float(np.abs(passed).max()),
    }


@pytest.mark.parametrize(("ratio", "pulls"), [(1.0, True), (1.3, True), (1.0, False), (1.3, False)])
@pytest.mark.parametrize("peak", [3.0, 60.0])
def test_half_sine_against_solve_ivp(peak: float, ratio: float, pulls: bool) -> None:
    c, time = 300.0, 0.03
    shock = BasePulse(name="shock", direction="z", shape="half-sine", amplitude=peak, duration=time)
    brief = machines.one_axis(MASS, shock).model_copy(update={"allowables": (ACCELERATION, DYNAMIC, FORCE)})
    mount = part(c, ratio=ratio, pulls=pulls, low=-0.02 if pulls else 0.0)
    found = law_machines.agreed(brief, mount, rel=1e-3)
    expected = by_hand(peak, time, c, ratio, pulls)
    (dynamic,) = [
        r.value for r in found.margins if r.kind == "mount-deflection" and "static" not in r.quantity
    ]
    assert dynamic == pytest.approx(expected["mount-deflection"], rel=1e-3)
    for kind in ("acceleration", "transmitted-force"):
        assert machines.value(found, kind) == pytest.approx(expected[kind], rel=1e-3)


def test_a_small_shock_is_that_of_the_tangent() -> None:
    shock = BasePulse(name="shock", direction="z", shape="half-sine", amplitude=0.01, duration=0.03)
    brief = machines.one_axis(MASS, shock).model_copy(update={"allowables": (ACCELERATION,)})
    tangent = K * (1.0 + 3.0 * BEND * REST**2)
    plain = machines.mount(k=tangent, c=300.0)
    one = machines.value(law_machines.agreed(brief, part(), rel=1e-3), "acceleration")
    assert one == pytest.approx(machines.value(machines.assessed(brief, plain), "acceleration"), rel=1e-3)
    # A large one is not: the mount hardens.
    hit = BasePulse(name="shock", direction="z", shape="half-sine", amplitude=80.0, duration=0.03)
    hard = brief.model_copy(update={"forcing": (hit,)})
    large = machines.value(machines.assessed(hard, part()), "acceleration")
    assert large > 1.2 * machines.value(machines.assessed(hard, plain), "acceleration")


def test_a_fall_by_energy() -> None:
    # Undamped, from height h onto the free mount: m g (h + d) = K (d^2/2 + b d^4/4), the weight included.
    height = 0.05
    fall = Drop(name="fall", height=height)
    brief = machines.one_axis(MASS, fall).model_copy(update={"allowables": (COMBINED, ACCELERATION)})

    def missing(d: float) -> float:
        return K * (d**2 / 2.0 + BEND * d**4 / 4.0) - MASS * G * (height + d)

    deepest, highest = brentq(missing, 1e-4, 0.1, xtol=1e-15), brentq(missing, -0.1, -1e-4, xtol=1e-15)
    mount = part(c=0.0)
    found = law_machines.agreed(brief, mount, rel=1e-3)
    (combined,) = [r.value for r in found.margins if r.kind == "mount-deflection" and r.upper == 1.0]
    # Each side from the free height: compressed to the deepest point, drawn out to the highest.
    assert deepest > -highest > 0.0
    assert combined == pytest.approx(deepest, rel=1e-3)
    # Largest acceleration: the mount's push less the weight, over the mass.
    assert machines.value(found, "acceleration") == pytest.approx(push(deepest) / MASS - G, rel=1e-3)


def test_a_part_that_leaves_its_curve_fails_and_is_told() -> None:
    shock = BasePulse(name="shock", direction="z", shape="half-sine", amplitude=300.0, duration=0.03)
    brief = machines.one_axis(MASS, shock).model_copy(update={"allowables": (ACCELERATION,)})
    found = law_machines.agreed(brief, part(high=0.008), rel=1e-3)
    (row,) = [row for row in found.margins if row.kind == "acceleration"]
    assert row.value == math.inf and row.margin == -1.0 and not found.meets
    assert "left its load-deflection curve" in row.note
    longer = law_machines.agreed(brief, part(low=-0.04, high=0.05), rel=1e-3)
    (row,) = [row for row in longer.margins if row.kind == "acceleration"]
    assert math.isfinite(row.value) and row.note == ""


def test_force_pulse_and_problem_notes() -> None:
    # A suddenly applied and lasting force on an undamped hardening mount, from rest: by energy,
    # integral of (push - m g) from REST to d = F (d - REST).
    size = 600.0
    hit = ForcePulse(name="hit", position=(0, 0, 0), force=(0, 0, -size), shape="rectangle", duration=0.5)
    brief = machines.one_axis(MASS, hit).model_copy(update={"allowables": (DYNAMIC,)})

    def energy(d: float) -> float:
        stored = K * (d**2 / 2.0 + BEND * d**4 / 4.0) - K * (REST**2 / 2.0 + BEND * REST**4 / 4.0)
        return stored - (MASS * G + size) * (d - REST)

    deepest = brentq(energy, REST + 1e-4, 0.05, xtol=1e-15)
    found = law_machines.agreed(brief, part(c=0.0, ratio=1.0), rel=1e-3)
    (dynamic,) = [r.value for r in found.margins if r.kind == "mount-deflection" and r.upper == 1.0]
    # It may swing to the other side as well, once the force is gone: the larger counts.
    assert dynamic >= (deepest - REST) * (1.0 - 1e-3)
    problem = build(brief, {"list": machines.catalog(part(c=0.0))})
    assert any(
        "load-deflection curve of m" in note and "whole curve counts" in note for note in problem.assumed
    )


@pytest.mark.parametrize("pulls", [True, False])
def test_six_axes_batch_equals_assessor(pulls: bool) -> None:
    brief, (one, other) = machines.random_machine(6)
    shock = BasePulse(
        name="shock", direction=(0.3, -0.2, 1.0), shape="versed-sine", amplitude=25.0, duration=0.03
    )
    update = {
        "gravity_stiffness": True,
        "forcing": (shock,),
        "conditions": law_machines.conditions("pulse"),
        "allowables": law_machines.LIMITS[1:],
    }
    mount = replace(law_machines.curved(one, reach=0.05), pulls=pulls)
    law_machines.agreed(brief.model_copy(update=update), mount, other, rel=3e-4)


@pytest.mark.nightly
def test_a_fall_in_six_axes() -> None:
    brief, (one, other) = machines.random_machine(6)
    update = {
        "forcing": (Drop(name="fall", height=0.02),),
        "conditions": law_machines.conditions("pulse"),
        "allowables": law_machines.LIMITS[1:],
    }
    mount = law_machines.curved(one, reach=0.05)
    law_machines.agreed(brief.model_copy(update=update), mount, other, rel=3e-4)
