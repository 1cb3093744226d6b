"""Limits on relative motion, floors, people, machine zones, gaps, level and settling, by both roads.

Ids are those of the project's table of checks; sources stand beside each.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

from detune.brief.allowable.base import Allowable, HarmonicAllowable
from detune.brief.allowable.floor_velocity import FloorVelocity
from detune.brief.allowable.gap import Gap
from detune.brief.allowable.level_difference import LevelDifference
from detune.brief.allowable.machine_velocity import MachineVelocity
from detune.brief.allowable.relative_motion import RelativeMotion
from detune.brief.allowable.settling_time import SettlingTime
from detune.brief.allowable.weighted_acceleration import WeightedAcceleration
from detune.brief.brief import Brief
from detune.brief.floor import Floor
from detune.brief.forcing.base_motion import BaseMotion
from detune.brief.forcing.base_pulse import BasePulse
from detune.brief.forcing.random_base_motion import RandomBaseMotion
from detune.brief.machine import Body, InertiaTensor, Point, Station
from detune.parts.kinds.mount import Mount
from detune.physics.weighting import weighted_rms_of_spectrum
from detune.problem.build import build
from detune.response.assessment import MarginRow
from detune.response.designs import Designs
from response import machines

TWO_PI = 2.0 * math.pi
G = 9.80665
MASS = 20.0


def rows_of(
    brief: Brief, mounts: tuple[Mount, ...], *limits: Allowable, rel: float = 1e-4
) -> list[MarginRow]:
    """The assessor's rows of these limits, after making sure that the batch evaluation has the same margins."""
    # A study needs some limit on a response.
    far = () if any(isinstance(limit, HarmonicAllowable) for limit in limits) else (machines.far_limit(),)
    brief = brief.model_copy(update={"allowables": (*far, *limits)})
    problem = build(brief, {"list": machines.catalog(*mounts)})
    pairs = zip(problem.candidates, mounts, strict=True)
    parts = np.array([[[m.part for m in group].index(mount.part) for group, mount in pairs]])
    margins = machines.batch_margins(problem, Designs(parts, np.zeros(1, dtype=np.intp)))
    kinds = {limit.kind for limit in limits}
    rows = [row for row in machines.assessed(brief, *mounts).margins if row.kind in kinds]
    assert rows
    for row in rows:
        other = float(margins[(row.quantity, row.place, row.condition)][0])
        assert 1.0 + other == pytest.approx(1.0 + row.margin, rel=rel), row.label
    return rows


def value(brief: Brief, part: Mount, limit: Allowable) -> float:
    (row,) = rows_of(brief, (part,), limit)
    return row.value


def tuned(frequency: float, ratio: float = 0.05, mass: float = MASS) -> Mount:
    k = mass * (TWO_PI * frequency) ** 2
    return machines.mount(k=k, c=2.0 * ratio * math.sqrt(k * mass))


def shaken(frequency: Any, acceleration: float, **changes: Any) -> BaseMotion:
    stated = {"name": "floor", "frequency": frequency, "direction": "z", "acceleration": acceleration}
    return BaseMotion(**{**stated, **changes})


def test_relative_motion_to_the_floor_is_the_mounts_deflection() -> None:
    # Relative displacement under base acceleration a: a/wn^2 / sqrt((1 - r^2)^2 + (2 z r)^2) (Rao 5e sec. 3.6).
    brief = machines.one_axis(MASS, shaken(30.0, 2.0))
    limit = RelativeMotion(at="P", to="floor", direction="z", measure="peak", limit=1.0)
    r, wn = 1.5, TWO_PI * 20.0
    expected = 2.0 / wn**2 / math.hypot(1 - r * r, 0.1 * r)
    assert value(brief, tuned(20.0), limit) == pytest.approx(expected, rel=1e-6)
    # K2 for a half-sine of fn T = 1 (closed form): the deflection of an undamped mount is the acceleration over wn^2.
    pulse = BasePulse(name="shock", direction="z", shape="half-sine", amplitude=G, duration=0.05)
    shock = value(machines.one_axis(MASS, pulse), tuned(20.0, 0.0), limit)
    assert shock == pytest.approx(1.732051 * G / wn**2, rel=1e-4)


def rocker(**changes: Any) -> Brief:
    """A body free to heave and pitch on two equal mounts at x = -0.5 and 0.5 m, points over them."""
    inertia = InertiaTensor(xx=2.0, yy=3.0, zz=2.0)
    places = (("L", -0.5), ("R", 0.5))
    return machines.brief_of(
        **{
            "bodies": (
                Body(name="machine", free=("z", "ry"), mass=MASS, centre=(0.1, 0, 0), inertia=inertia),
            ),
            "points": (
                *(Point(name=name, position=(x, 0.0, 0.0)) for name, x in places),
                Point(name="P", position=(0.0, 0.0, 0.0)),
            ),
            "stations": tuple(Station(name=name, group="G", position=(x, 0.0, 0.0)) for name, x in places),
            "forcing": (machines.force(8.0, 10.0, position=(0.4, 0.0, 0.0)),),
            **changes,
        }
    )


def test_relative_motion_between_two_points() -> None:
    # Two points 1 m apart on one body move against each other by its rotation: M'/(K' - I' w^2) with the two
    # freedoms coupled through the offset centre, solved by hand as a 2 x 2 system.
    k, w, ecc = 2e5, TWO_PI * 8.0, 0.1
    # About the mass centre: mounts at -0.6 and 0.4 m; z = z0 - x theta.
    stiffness = np.array([[2 * k, k * 0.2], [k * 0.2, k * (0.36 + 0.16)]])
    dynamic = stiffness - w * w * np.diag([MASS, 3.0])
    z0, theta = np.linalg.solve(dynamic, [10.0, -10.0 * (0.4 - ecc)])
    limit = RelativeMotion(at="L", to="R", direction="z", measure="peak", limit=1.0)
    assert value(rocker(), machines.mount(k=k, lateral=1e5), limit) == pytest.approx(abs(theta), rel=1e-6)
    assert z0 != 0.0


def test_level_difference_of_an_offset_load() -> None:
    # Centre 0.1 m off: the mounts carry 0.4 and 0.6 of the weight and sag by these over k.
    k = 2e5
    limit = LevelDifference(points=("L", "R", "P"), limit="1 mm")
    (row,) = rows_of(rocker(), (machines.mount(k=k, lateral=1e5),), limit)
    assert row.value == pytest.approx(0.2 * MASS * G / k, rel=1e-9)
    assert row.condition == "at rest"


def test_floor_velocity_on_a_soft_floor() -> None:
    # Two masses in a row under a force on the upper one, solved as 2 x 2 by hand.
    mf, kf, cf, k, w = 900.0, 4e6, 2e3, 3e5, TWO_PI * 9.0
    floor = Floor(kind="mass-spring-damper", mass=mf, stiffness=kf, damping=cf)
    part = machines.mount(k=k, loss=0.1)
    complex_k = k * (1 + 0.1j)
    matrix = np.array(
        [[complex_k - w * w * MASS, -complex_k], [-complex_k, complex_k + kf + 1j * w * cf - w * w * mf]]
    )
    _, moved = np.linalg.solve(matrix, [50.0, 0.0])
    brief = machines.one_axis(MASS, machines.force(9.0, 50.0), floor=floor)
    limit = FloorVelocity(measure="rms", limit=1.0)
    assert value(brief, part, limit) == pytest.approx(abs(moved) * w / math.sqrt(2.0), rel=1e-9)
    # Free floor motion of unit velocity acts through D_floor (DESIGN 3): the floor with the machine on it.
    free = BaseMotion(name="floor", frequency=9.0, direction="z", velocity=1e-3)
    own = (kf + 1j * w * cf - w * w * mf) * 1e-3 / (1j * w)
    _, moved = np.linalg.solve(matrix, [0.0, own])
    brief = machines.one_axis(MASS, free, floor=floor)
    assert value(brief, part, FloorVelocity(measure="peak", limit=1.0)) == pytest.approx(
        abs(moved) * w, rel=1e-9
    )


def test_c7_weighting_of_tones() -> None:
    # C7: Wd (ISO 2631-1) at 1, 2, 4, 8, 16, 80 Hz: 1.011, .890, .512, .253, .125, .021, at nominal centres; a
    # stiff follower of a floor of 1 m/s^2 rms shows them.
    stiff = tuned(1e5, 0.05)
    for frequency, factor in ((1, 1.011), (2, 0.890), (4, 0.512), (8, 0.253), (16, 0.125), (80, 0.021)):
        limit = WeightedAcceleration(at="P", direction="z", weighting="Wd", limit=1.0)
        brief = machines.one_axis(MASS, shaken(float(frequency), math.sqrt(2.0)))
        assert value(brief, stiff, limit) == pytest.approx(factor, abs=6e-4)


def test_weighted_noise() -> None:
    # The weighting on a flat floor density through a stiff mount: physics.weighting has the quadrature of its own.
    points = ((0.5, 0.01), (80.0, 0.01))
    noise = RandomBaseMotion(name="floor", direction="z", duration=60.0, break_points=points)
    limit = WeightedAcceleration(at="P", direction="z", weighting="Wk", limit=1.0)
    brief = machines.one_axis(MASS, noise)
    expected = weighted_rms_of_spectrum(noise.noises()[0].spectrum, "Wk")
    assert value(brief, tuned(1e4, 0.05), limit) == pytest.approx(expected, rel=2e-4)


@pytest.mark.parametrize(
    ("machine", "boundaries"),
    # C2: ISO 10816-3/20816-3 and 10816-1 annex B, mm/s rms.
    [
        ("group 2, rigid", (1.4, 2.8, 4.5)),
        ("group 2, flexible", (2.3, 4.5, 7.1)),
        ("group 1, rigid", (2.3, 4.5, 7.1)),
        ("group 1, flexible", (3.5, 7.1, 11.0)),
        ("class I", (0.71, 1.8, 4.5)),
        ("class II", (1.12, 2.8, 7.1)),
        ("class III", (1.8, 4.5, 11.2)),
        ("class IV", (2.8, 7.1, 18.0)),
    ],
)
def test_c2_machine_zones(machine: str, boundaries: tuple[float, float, float]) -> None:
    # A velocity of 1 mm/s rms on a free mass: F = m w v sqrt(2).
    force = machines.force(25.0, MASS * TWO_PI * 25.0 * 1e-3 * math.sqrt(2.0))
    brief = machines.one_axis(MASS, force)
    soft = machines.mount(k=1e-3, loss=0.1)
    for boundary, limit in zip(("A/B", "B/C", "C/D"), boundaries, strict=True):
        stated = MachineVelocity(at="P", direction="z", machine=machine, boundary=boundary)
        (row,) = rows_of(brief, (soft,), stated)
        assert row.value == pytest.approx(1e-3, rel=1e-6)
        assert row.upper == pytest.approx(limit * 1e-3, rel=1e-12)
        assert row.margin == pytest.approx(limit - 1.0, rel=1e-5)


def test_gap_adds_sag_signed_and_every_motion_linearly() -> None:
    part = tuned(10.0, 0.05)
    sag = G / (TWO_PI * 10.0) ** 2
    force = machines.force(10.0, 30.0)
    k = MASS * (TWO_PI * 10.0) ** 2
    moved = 30.0 / k / 0.1  # at resonance 1/(2 z) times the static deflection
    brief = machines.one_axis(MASS, force)

    def gap(**changes: Any) -> Gap:
        stated = {"at": "P", "direction": (0, 0, -1), "clearance_of": "free", "clearance": "30 mm"}
        return Gap(**{**stated, **changes})

    assert value(brief, part, gap()) == pytest.approx(sag + moved, rel=1e-6)
    assert value(brief, part, gap(direction="z")) == pytest.approx(moved - sag, rel=1e-6)
    assert value(brief, part, gap(clearance_of="installed")) == pytest.approx(moved, rel=1e-6)


def test_gap_to_a_stop_on_the_moving_floor() -> None:
    # Only the motion against the floor uses the gap up: that of the relative motion.
    brief = machines.one_axis(MASS, shaken(5.0, 1.0))
    part = tuned(20.0)
    limit = Gap(at="P", direction="z", clearance_of="installed", clearance=0.1)
    relative = RelativeMotion(at="P", to="floor", direction="z", measure="peak", limit=1.0)
    assert value(brief, part, limit) == pytest.approx(value(brief, part, relative), rel=1e-9)


def test_settling_time() -> None:
    # Free decay exp(-z wn t) (any text): to 2 % in ln(50)/(z wn). A loss factor decays at half of it.
    brief = machines.one_axis(MASS, machines.force(10.0))
    limit = SettlingTime(to="2 %", limit="2 s")
    (row,) = rows_of(brief, (tuned(5.0, 0.1),), limit)
    assert row.value == pytest.approx(math.log(50.0) / (0.1 * TWO_PI * 5.0), rel=1e-9)
    assert row.upper == 2.0
    assert row.lower is None
    assert row.margin == pytest.approx(2.0 / row.value - 1.0, rel=1e-9)
    k = MASS * (TWO_PI * 5.0) ** 2
    (row,) = rows_of(brief, (machines.mount(k=k, loss=0.02),), limit)
    assert row.value == pytest.approx(math.log(50.0) / (0.01 * TWO_PI * 5.0), rel=1e-4)
    (row,) = rows_of(brief, (machines.mount(k=k),), limit)
    assert row.margin == pytest.approx(-1.0)


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("viscous", [False, True])
def test_six_axes_batch_equals_assessor(seed: int, viscous: bool) -> None:
    brief, mounts = machines.random_machine(seed, viscous=viscous)
    noise = RandomBaseMotion(
        name="floor", direction=(0.3, 0.2, 0.9), duration=60.0, break_points=((1.0, 1e-3), (100.0, 1e-3))
    )
    brief = brief.model_copy(update={"forcing": (*brief.forcing, noise)})
    rows_of(
        brief,
        mounts,
        RelativeMotion(at="P", to="floor", direction="resultant", measure="peak", limit=1.0),
        FloorVelocity(measure="rms", limit=1.0),
        WeightedAcceleration(at="P", direction=(0.0, 1.0, 1.0), weighting="Wk", limit=1.0),
        MachineVelocity(at="P", direction="x", machine="group 2, flexible", boundary="B/C"),
        Gap(at="P", direction=(0.0, 1.0, -1.0), clearance_of="free", clearance=0.1),
        SettlingTime(to=0.05, limit=1.0),
        rel=1e-3,
    )
