"""A vehicle that brakes or corners: loads, deflections and travel by the lever rule, and where it is refused."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

from detune.brief.allowable.gap import Gap
from detune.brief.allowable.load_range import LoadRange
from detune.brief.allowable.sag import Sag
from detune.brief.condition import Condition
from detune.brief.machine import Body, InertiaTensor, Point, Station
from detune.brief.state import State
from response import law_machines

machines = law_machines.machines
MASS, G, K, LATERAL, HALF, HEIGHT = 120.0, 9.80665, 3.0e5, 1.0e5, 0.5, 0.3


def rack(a: tuple[float, float, float], *allowables: Any, **changes: Any) -> Any:
    """A rack with its centre above four stations at the corners of a square, in a vehicle accelerated by a."""
    corners = {f"S{i}": (x, y, 0.0) for i, (x, y) in enumerate(
        [(-HALF, -HALF), (-HALF, HALF), (HALF, -HALF), (HALF, HALF)])}  # fmt: skip
    inertia = InertiaTensor(xx=20.0, yy=20.0, zz=20.0)
    return machines.brief_of(
        bodies=(Body(name="rack", mass=MASS, centre=(0.0, 0.0, HEIGHT), inertia=inertia),),
        points=(Point(name="P", position=(0.0, 0.0, HEIGHT)),),
        stations=tuple(Station(name=name, group="G", position=at) for name, at in corners.items()),
        conditions=(Condition(name="driving"), Condition(name="braking", state="brakes")),
        states=(State(name="brakes", sustained_acceleration=a),),
        forcing=(machines.force(30.0, 10.0),),
        allowables=(*allowables, LoadRange(), machines.far_limit()),
        **changes,
    )


def found(brief: Any) -> dict[tuple[str, str, str], float]:
    part = machines.mount(k=K, lateral=LATERAL, loss=0.1)
    return {(r.kind, r.place, r.condition): r.value for r in law_machines.agreed(brief, part).margins}


def test_braking_loads_the_front() -> None:
    # Braking: the floor decelerates, -4 m/s^2 along x. The rack leans forward: m a h = moment about y, taken up by the
    # axial springs, k HALF^2 * 4 * angle, and the lateral ones, whose feet move below the centre.
    a = 4.0
    rows = found(rack((-a, 0.0, 0.0), Sag(at="P", limit=1.0)))
    axial, side = 4.0 * K * HALF**2, 4.0 * LATERAL
    # u, t: displacement of the feet's plane along x and the turn about y; pull m a acts HEIGHT above it.
    turn = MASS * a * HEIGHT / axial
    feet = MASS * a / side
    for place, sign in (("S0", -1.0), ("S3", 1.0)):
        assert rows["load-range", place, "at rest, brakes"] == pytest.approx(
            MASS * G / 4.0 + sign * K * HALF * turn, rel=1e-9
        )
        assert rows["load-range", place, "at rest"] == pytest.approx(MASS * G / 4.0, rel=1e-9)
    gap = Gap(at="P", direction="x", clearance_of="free", clearance=1.0)
    travel = found(rack((-a, 0.0, 0.0), gap).model_copy(update={"forcing": (machines.force(30.0, 1e-9),)}))
    assert travel["gap", "P", "braking"] == pytest.approx(feet + HEIGHT * turn, rel=1e-6)
    assert travel["gap", "P", "driving"] == pytest.approx(0.0, abs=1e-9)


def test_an_acceleration_upwards_adds_weight() -> None:
    rows = found(rack((0.0, 0.0, 0.5 * G), Sag(at="P", limit=1.0)))
    assert rows["sag", "P", "at rest, brakes"] == pytest.approx(1.5 * MASS * G / (4.0 * K), rel=1e-9)
    assert rows["sag", "P", "at rest"] == pytest.approx(MASS * G / (4.0 * K), rel=1e-9)


def test_gravity_stiffness_follows_the_pull() -> None:
    # On a lift that starts with half a g, the upright rack is 1.5 times as near to toppling: its margin of stability
    # times 1.5 is the one at rest (linear eigenvalue problem in the load).
    from detune.brief.allowable.stability import Stability

    brief = rack((0.0, 0.0, 0.5 * G), Stability(limit=1.0), gravity_stiffness=True)
    rows = found(brief)
    key = next(key for key in rows if key[0] == "stability" and "brakes" in key[2])
    assert rows[("stability", key[1], "at rest")] == pytest.approx(1.5 * rows[key], rel=1e-9)


def test_a_curve_works_at_the_braked_load() -> None:
    # On a load-deflection curve the state has its own working point: k d (1 + 3000 d^2) = 1.5 m g/4.
    from scipy.optimize import brentq

    brief = rack((0.0, 0.0, 0.5 * G), Sag(at="P", limit=1.0))
    part = law_machines.curved(machines.mount(k=K, lateral=LATERAL, loss=0.1), points=401)
    rows = {(r.kind, r.condition): r.value for r in law_machines.agreed(brief, part).margins}
    expected = brentq(lambda d: K * d * (1.0 + 3000.0 * d**2) - 1.5 * MASS * G / 4.0, 0.0, 0.03)
    assert rows["sag", "at rest, brakes"] == pytest.approx(expected, rel=1e-5)
    assert math.isfinite(expected) and np.isfinite(rows["sag", "at rest"])
