"""Six-axis machines by two routes and against other libraries' state space; suprema against dense searches."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
import scipy.signal

from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.allowable.velocity import Velocity
from detune.brief.brief import Brief
from detune.brief.forcing.base_motion import BaseMotion
from detune.brief.forcing.shaft_orders import Order, ShaftOrders
from detune.brief.machine import Body, InertiaTensor, Point, Station
from detune.parts.kinds.mount import Mount
from detune.problem.build import build
from detune.response.assemble import dynamic_matrices
from detune.response.assess import assess
from detune.response.design import Design
from detune.response.designs import all_designs
from detune.response.direct import DirectMachine
from detune.response.direct_modes import direct_modes
from detune.response.direct_supremum import amplitudes_at, coherent_sets
from detune.response.direct_views import DirectStatic, DirectTone
from detune.response.loads import condition_families
from detune.response.model import build_model
from detune.response.views import ToneBatch
from detune.response.views_static import static_batch
from response import machines

TWO_PI = 2.0 * math.pi


def with_base_motion(brief: Brief, seed: int) -> Brief:
    """The same machine on a floor that moves in all three directions at once."""
    direction = tuple(float(x) for x in np.random.default_rng(seed).normal(size=3))
    base = BaseMotion(name="road", frequency=(10.0, 60.0), direction=direction, velocity=2e-3)
    return brief.model_copy(update={"forcing": (*brief.forcing, base)})


def close(one: np.ndarray, other: np.ndarray, rel: float) -> bool:
    """Whether two vectors agree relative to the largest of their components."""
    return float(np.abs(one - other).max()) <= rel * float(np.abs(other).max())


@pytest.mark.parametrize("flexible", [True, False], ids=["flexible floor", "rigid floor"])
@pytest.mark.parametrize("seed", range(4))
def test_batch_and_direct_views_agree(seed: int, flexible: bool) -> None:
    """Two assemblies that share no code: agreement to 1e-9 in every view, for forces and base motion."""
    brief, mounts = machines.random_machine(seed, flexible_floor=flexible)
    brief = with_base_motion(brief, seed)
    model = build_model(brief, tuple((mount,) for mount in mounts))
    designs = all_designs(model, 0, 1)
    machine = DirectMachine(brief, Design(brief.groups, mounts, 0.0))
    omega = TWO_PI * np.array([[3.0, 11.7, 25.0, 60.0]])
    condition = brief.conditions[0]
    for family, forcing in zip(condition_families(brief, model, condition), brief.forcing, strict=True):
        batch = ToneBatch(model, designs, dynamic_matrices(model, designs), family.sets[0], omega)
        direct = DirectTone(machine, forcing.tones(condition.shafts), omega)
        assert close(batch.motion("P"), direct.motion("P"), 1e-9)
        assert close(batch.motion("P", rate=2), direct.motion("P", rate=2), 1e-9)
        for station in brief.stations:
            assert close(batch.station_force(station.name), direct.station_force(station.name), 1e-9)
            assert close(
                batch.station_deflection(station.name), direct.station_deflection(station.name), 1e-9
            )
        for surface in ("floor", "ground"):
            assert close(batch.total_force(surface), direct.total_force(surface), 1e-9)
    one, other = static_batch(model, designs), DirectStatic(machine)
    assert close(one.motion("P"), other.motion("P"), 1e-9)
    assert close(one.rotation("machine"), other.rotation("machine"), 1e-9)
    for station in brief.stations:
        assert close(one.station_load(station.name), other.station_load(station.name), 1e-9)


def by_hand(brief: Brief, mounts: tuple[Mount, ...]) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Mass, damping and stiffness (7, 7) of a viscous machine: six freedoms at its centre, then the floor.

    Written from the cross product alone: a point at r moves with d + theta x r.
    """
    (body,) = brief.bodies
    t = body.inertia
    mass = np.zeros((7, 7))
    mass[:3, :3] = body.mass * np.eye(3)
    mass[3:6, 3:6] = [[t.xx, t.xy, t.xz], [t.xy, t.yy, t.yz], [t.xz, t.yz, t.zz]]
    mass[6, 6] = brief.floor.mass
    damping, stiffness = np.zeros((7, 7)), np.zeros((7, 7))
    damping[6, 6], stiffness[6, 6] = brief.floor.damping, brief.floor.stiffness
    springs: list[tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray, int]] = []
    for station in brief.stations:
        part = mounts[brief.groups.index(station.group)]
        z = np.array(station.axial) / np.linalg.norm(station.axial)
        x = np.array(station.radial) - np.dot(station.radial, z) * z
        x /= np.linalg.norm(x)
        axes = np.array([x, np.cross(z, x), z])
        springs.append(
            (
                np.array(station.position),
                axes,
                np.array(part.stiffness_dynamic),
                np.array(part.viscous),
                station.parallel,
            )
        )
    for pipe in brief.connections:
        springs.append(
            (np.array(pipe.position), np.eye(3), np.array(pipe.stiffness), np.array(pipe.viscous), 1)
        )
    for position, axes, k, c, count in springs:
        r = position - np.array(body.centre)
        rows = np.zeros((3, 7))
        for column in range(3):
            unit = np.eye(3)[column]
            rows[:, column] = axes @ unit
            rows[:, 3 + column] = axes @ np.cross(unit, r)
        rows[:, 6] = -axes @ np.array([0.0, 0.0, 1.0])
        stiffness += count * rows.T @ np.diag(k) @ rows
        damping += count * rows.T @ np.diag(c) @ rows
    return mass, damping, stiffness


@pytest.mark.parametrize("seed", range(3))
def test_against_scipy_state_space(seed: int) -> None:
    """X1: scipy.signal.StateSpace with freqresp; 1e-7 relative to the largest component."""
    brief, mounts = machines.random_machine(seed, viscous=True)
    mass, damping, stiffness = by_hand(brief, mounts)
    (body,), hum = brief.bodies, brief.forcing[0]
    load = np.zeros(7)
    load[:3] = hum.force
    load[3:6] = np.array(hum.moment) + np.cross(np.array(hum.position) - np.array(body.centre), hum.force)
    inverse = np.linalg.inv(mass)
    a = np.block([[np.zeros((7, 7)), np.eye(7)], [-inverse @ stiffness, -inverse @ damping]])
    b = np.concatenate([np.zeros(7), inverse @ load])[:, None]
    c = np.zeros((3, 14))
    c[:, :3] = np.eye(3)
    r = np.array(brief.points[0].position) - np.array(body.centre)
    for column in range(3):
        c[:, 3 + column] = np.cross(np.eye(3)[column], r)
    omega = TWO_PI * np.array([12.0, 24.0, 57.0])
    machine = DirectMachine(brief, Design(brief.groups, mounts, 0.0))
    found = DirectTone(machine, hum.tones({}), omega[None]).motion("P")[0]
    # The library's own formula on its own matrices; row by row, as freqresp takes one output at a time.
    for row in range(3):
        system = scipy.signal.StateSpace(a, b, c[row : row + 1], np.zeros((1, 1)))
        expected = [
            (system.C @ np.linalg.solve(1j * w * np.eye(14) - system.A, system.B))[0, 0] for w in omega
        ]
        assert close(found[:, row], np.array(expected), 1e-7)


@pytest.mark.parametrize("seed", range(3))
def test_against_python_control(seed: int) -> None:
    """X2: control.ss evaluated at j w for the force into the ground and for base motion; 1e-7."""
    control = pytest.importorskip("control")
    brief, mounts = machines.random_machine(seed, viscous=True)
    mass, damping, stiffness = by_hand(brief, mounts)
    inverse = np.linalg.inv(mass)
    a = np.block([[np.zeros((7, 7)), np.eye(7)], [-inverse @ stiffness, -inverse @ damping]])
    inputs = np.vstack([np.zeros((7, 7)), inverse])
    system = control.ss(a, inputs, np.hstack([np.eye(7), np.zeros((7, 7))]), np.zeros((7, 7)))
    omega = TWO_PI * np.array([11.0, 30.0, 55.0])
    machine = DirectMachine(brief, Design(brief.groups, mounts, 0.0))
    hum = brief.forcing[0]
    load = np.zeros(7)
    load[:3] = hum.force
    load[3:6] = np.array(hum.moment) + np.cross(
        np.array(hum.position) - np.array(brief.bodies[0].centre), hum.force
    )
    ground = DirectTone(machine, hum.tones({}), omega[None]).total_force("ground")[0, :, 2]
    expected = [
        (brief.floor.stiffness + 1j * w * brief.floor.damping) * (system(1j * w) @ load)[6] for w in omega
    ]
    assert close(ground, np.array(expected), 1e-7)
    # A floor that would move freely with u: the load on it is what the bare floor needs for that, D_floor u.
    base = BaseMotion(name="road", frequency=20.0, direction="z", displacement=1e-3)
    view = DirectTone(machine, base.tones({}), omega[None])
    f = brief.floor
    for index, w in enumerate(omega):
        own = f.stiffness + 1j * w * f.damping - w**2 * f.mass
        q = system(1j * w) @ np.array([0, 0, 0, 0, 0, 0, own * 1e-3])
        assert close(view.q[index, :6], q[:6], 1e-7)


def test_w21_bounce_and_pitch() -> None:
    """Rao 5e Example 5.7: 5.85929 and 9.43409 rad/s; X/theta -2.64611 and .306110 m/rad.

    m = 1000 kg, radius of gyration .9 m, 18 kN/m 1.0 m ahead of the centre, 22 kN/m 1.5 m behind. With x
    ahead and z up, the front moves z - 1.0 ry: the book's x - l1 theta.
    """
    inertia = 1000.0 * 0.9**2
    brief = machines.brief_of(
        bodies=(
            Body(
                name="car", free=("z", "ry"), mass=1000.0, centre=(0.0, 0.0, 0.0),
                inertia=InertiaTensor(xx=inertia, yy=inertia, zz=inertia),
            ),
        ),
        points=(Point(name="P", position=(0.0, 0.0, 0.0)),),
        stations=(
            Station(name="front", group="front", position=(1.0, 0.0, 0.0)),
            Station(name="rear", group="rear", position=(-1.5, 0.0, 0.0)),
        ),
        forcing=(machines.force(5.0),),
    )  # fmt: skip
    mounts = (machines.mount("f", 18e3, lateral=1e3), machines.mount("r", 22e3, lateral=1e3))
    assessment = machines.assessed(brief, *mounts)
    assert [TWO_PI * mode.frequency for mode in assessment.modes] == pytest.approx(
        [5.85929, 9.43409], rel=1e-5
    )
    shapes = direct_modes(DirectMachine(brief, assessment.design), []).shapes
    ratios = shapes[0] / shapes[1]
    assert ratios == pytest.approx([-2.64611, 0.306110], rel=1e-5)


def test_w20_quarter_car() -> None:
    """Barton & Fieldhouse, Automotive Chassis Engineering, sec. 3.13 (read): 7.8786 and 68.7086 rad/s."""
    brief = machines.brief_of(
        bodies=(
            Body(name="sprung", free=("z",), mass=317.5, centre=(0.0, 0.0, 1.0)),
            Body(name="unsprung", free=("z",), mass=45.4, centre=(0.0, 0.0, 0.3)),
        ),
        points=(Point(name="P", on="sprung", position=(0.0, 0.0, 1.0)),),
        stations=(
            Station(name="spring", group="spring", on="sprung", to="unsprung", position=(0.0, 0.0, 0.6)),
            Station(name="tyre", group="tyre", on="unsprung", position=(0.0, 0.0, 0.0)),
        ),
        forcing=(BaseMotion(name="road", frequency=2.0, direction="z", displacement=0.01),),
    )
    assessment = machines.assessed(brief, machines.mount("s", 22e3), machines.mount("t", 192e3))
    assert [TWO_PI * mode.frequency for mode in assessment.modes] == pytest.approx(
        [7.8786, 68.7086], rel=1e-4
    )
    # Static: the spring carries the sprung mass, the tyre both (standard gravity).
    loads = {row.station: row.axial_load for row in assessment.stations}
    assert loads["spring"] == pytest.approx(317.5 * 9.80665, rel=1e-12)
    assert loads["tyre"] == pytest.approx((317.5 + 45.4) * 9.80665, rel=1e-12)


LIMITS: tuple[Any, ...] = (
    machines.far_limit(direction="resultant"),
    machines.far_limit(direction=(1.0, 2.0, -0.5)),
    Velocity(at="P", direction="resultant", measure="rms", limit=1e6),
    TransmittedForce(through="floor", direction="z", measure="peak", limit=1e9),
    TransmittedForce(through="ground", direction="resultant", measure="peak", limit=1e9),
    TransmittedForce(through="each-station", direction="lateral", measure="peak", limit=1e9),
    MountDeflection(part="dynamic", direction="axial", limit=1e3),
)


def lightly_damped(seed: int) -> tuple[Brief, tuple[Mount, ...]]:
    """Loss factor .003, three orders of one shaft from 10 to 60 Hz: modes are hit again and again."""
    brief, mounts = machines.random_machine(seed)
    random = np.random.default_rng(seed + 100)
    orders = ShaftOrders(
        name="engine", shaft="rotor", position=tuple(random.uniform(-0.2, 0.2, 3)),
        orders=tuple(
            Order(order=n, force=tuple(random.normal(0, 20, 3)), moment=tuple(random.normal(0, 4, 3)))
            for n in (0.5, 1.0, 2.0)
        ),
    )  # fmt: skip
    brief = brief.model_copy(
        update={
            "forcing": (orders,),
            "conditions": (brief.conditions[0].model_copy(update={"shafts": {"rotor": (10.0, 60.0)}}),),
            "connections": (brief.connections[0].model_copy(update={"loss_factor": 0.003}),),
            "allowables": LIMITS,
            "floor": brief.floor.model_copy(update={"damping": 60.0}),
        }
    )
    light = tuple(replace(mount, loss_factor=(0.003,) * 3) for mount in mounts)
    return brief, light


def dense_search(brief: Brief, mounts: tuple[Mount, ...]) -> np.ndarray:
    """The largest value of every requirement over samples laid thickly where the undamped modes are hit."""
    machine = DirectMachine(brief, Design(brief.groups, mounts, 0.0))
    (forcing,) = brief.forcing
    tones = forcing.tones(brief.conditions[0].shafts)
    stations = tuple(s.name for s in brief.stations)
    places = type("Places", (), {"points": ("P",), "stations": stations, "bodies": ("machine",)})
    pairs = tuple((limit, place) for limit in brief.allowables for place in limit.places(places))
    speed = [np.linspace(10.0, 60.0, 4001)]
    for mode in direct_modes(machine, []).frequency:
        for tone in tones:
            # 0.003 is a half-power width of 0.15 %: 0.4 % about each crossing with 401 points samples it 150 times.
            speed.append(mode / tone.order * (1.0 + np.linspace(-0.004, 0.004, 401)))
    found = np.unique(np.concatenate(speed))
    found = found[(found >= 10.0) & (found <= 60.0)]
    sets = coherent_sets(tones)
    parts = [amplitudes_at(machine, pairs, sets, chunk).max(axis=1) for chunk in np.array_split(found, 40)]
    return np.max(parts, axis=0)


@pytest.mark.parametrize(
    "seed", [0, 1, pytest.param(2, marks=pytest.mark.nightly), pytest.param(3, marks=pytest.mark.nightly)]
)
def test_suprema_of_assessor_and_batch_against_a_dense_search(seed: int) -> None:
    """Neither may lie below the dense search, and both agree, within 1e-3 (the stated accuracy)."""
    brief, mounts = lightly_damped(seed)
    dense = dense_search(brief, mounts)
    design = Design(brief.groups, mounts, 0.0)
    rows = [
        row for row in assess(brief, design).margins if row.condition == "running" and row.kind != "uplift"
    ]
    by_place = {(row.quantity, row.place): row.value for row in rows}
    renamed = machines.catalog(*mounts)
    choices = tuple(
        choice.model_copy(update={"parts": (part.part,)})
        for choice, part in zip(brief.choices, renamed.parts, strict=True)
    )
    problem = build(brief.model_copy(update={"choices": choices}), {"list": renamed})
    margins = machines.batch_margins(problem, all_designs(problem.model, 0, 1))
    at = 0
    for limit in brief.allowables:
        for place in (row.place for row in rows if row.quantity == limit.quantity()):
            key = (limit.quantity(), place)
            batch = limit.limit / (1.0 + margins[(*key, "running")][0])
            assert by_place[key] >= dense[at] * (1.0 - 1e-3), key
            assert batch >= dense[at] * (1.0 - 1e-3), key
            assert batch == pytest.approx(by_place[key], rel=1e-3), key
            at += 1
    assert at == len(dense)
