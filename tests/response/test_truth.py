"""Theorems every machine must obey, by random machines: reciprocity, energy, monotony, scaling, turning."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.brief.brief import Brief
from detune.brief.forcing.base_motion import BaseMotion
from detune.brief.forcing.harmonic_force import HarmonicForce
from detune.brief.machine import InertiaTensor, Point
from detune.parts.kinds.mount import Mount
from detune.physics.unsupported import UnsupportedMachine
from detune.response.assess import assess
from detune.response.design import Design
from detune.response.direct import DirectMachine
from detune.response.direct_views import DirectTone
from response import machines

SEEDS = st.integers(0, 10_000)
FEW = settings(deadline=None, max_examples=8)


def design_of(brief: Brief, mounts: tuple[Mount, ...]) -> Design:
    return Design(brief.groups, mounts, 0.0)


def changed(brief: Brief, **changes: Any) -> Brief:
    return brief.model_copy(update=changes)


@given(SEEDS, st.booleans())
@FEW
def test_reciprocity(seed: int, viscous: bool) -> None:
    """Maxwell and Betti: the motion at B along b for a force at A along a equals the motion at A for one at B."""
    brief, mounts = machines.random_machine(seed, viscous=viscous)
    random = np.random.default_rng(seed + 1)
    places = [tuple(random.uniform(-0.5, 0.5, 3)) for _ in range(2)]
    along = [random.normal(size=3) for _ in range(2)]
    brief = changed(brief, points=tuple(Point(name=f"P{i}", position=p) for i, p in enumerate(places)))
    machine = DirectMachine(brief, design_of(brief, mounts))
    omega = 2 * math.pi * np.array([[14.0, 33.0]])

    def motion(at: int, by: int) -> np.ndarray:
        force = HarmonicForce(name="f", frequency=20.0, position=places[by], force=tuple(along[by]))
        return DirectTone(machine, force.tones({}), omega).motion(f"P{at}")[0] @ along[at]

    one, other = motion(0, 1), motion(1, 0)
    assert np.abs(one - other).max() <= 1e-12 * np.abs(one).max()


@given(SEEDS, st.booleans(), st.booleans())
@FEW
def test_energy_closes_with_base_motion_and_a_flexible_floor(
    seed: int, viscous: bool, flexible: bool
) -> None:
    """Power put in equals power dissipated in every condition; a closing error above 1e-6 is a fault."""
    brief, mounts = machines.random_machine(seed, viscous=viscous, flexible_floor=flexible)
    direction = tuple(np.random.default_rng(seed).normal(size=3))
    base = BaseMotion(name="road", frequency=(10.0, 40.0), direction=direction, acceleration=0.5)
    for forcing in (brief.forcing, (base,), (*brief.forcing, base)):
        each = changed(brief, forcing=forcing)
        (power,) = assess(each, design_of(each, mounts)).power
        assert power.dissipated > 0.0
        assert power.closing_error < 1e-6


@given(SEEDS, st.floats(1.001, 3.0))
@FEW
def test_stiffening_a_group_lowers_no_natural_frequency(seed: int, factor: float) -> None:
    """Rayleigh (P1): adding stiffness raises every frequency or leaves it."""
    brief, (left, right) = machines.random_machine(seed)
    stiffer = replace(left, stiffness_dynamic=tuple(factor * k for k in left.stiffness_dynamic))
    before = [mode.frequency for mode in assess(brief, design_of(brief, (left, right))).modes]
    after = [mode.frequency for mode in assess(brief, design_of(brief, (stiffer, right))).modes]
    assert all(a >= b * (1 - 1e-10) for a, b in zip(after, before, strict=True))
    assert sum(after) > sum(before)


def test_p1_numbers() -> None:
    """Meirovitch's inclusion principle, numbers recomputed by hand for a chain of three masses.

    M = diag(10, 20, 15), K = [[3, -1, 0], [-1, 2.5, -1.5], [0, -1.5, 2]] 1e4: 2.85519, 7.04931, 9.14235 Hz; with
    +1e4 N/m to the ground on the second 3.78807, 7.33725, 9.26865 Hz. Row sums are the springs to the ground:
    2e4, 0 and .5e4 N/m; couplings 1e4 and 1.5e4 N/m.
    """
    from detune.brief.machine import Body, Connection, Station

    def spring(name: str, on: str, to: str, k: float) -> Connection:
        return Connection(
            name=name, on=on, to=to, position=(0.0, 0.0, 0.0), stiffness=(0.0, 0.0, k), loss_factor=0.0
        )

    def frequencies(ground_on_second: float) -> list[float]:
        bodies = tuple(
            Body(name=name, free=("z",), mass=m, centre=(0.0, 0.0, 0.0))
            for name, m in (("one", 10.0), ("two", 20.0), ("three", 15.0))
        )
        springs = [
            spring("1-2", "one", "two", 1e4),
            spring("2-3", "two", "three", 1.5e4),
            spring("3-0", "three", "floor", 5e3),
        ]
        if ground_on_second:
            springs.append(spring("2-0", "two", "floor", ground_on_second))
        brief = machines.brief_of(
            bodies=bodies,
            points=(Point(name="P", on="one", position=(0.0, 0.0, 0.0)),),
            stations=(Station(name="S", group="G", on="one", position=(0.0, 0.0, 0.0)),),
            connections=tuple(springs),
            forcing=(machines.force(5.0, on="one"),),
        )
        return [mode.frequency for mode in machines.assessed(brief, machines.mount(k=2e4)).modes]

    assert frequencies(0.0) == pytest.approx([2.85519, 7.04931, 9.14235], rel=2e-6)
    assert frequencies(1e4) == pytest.approx([3.78807, 7.33725, 9.26865], rel=2e-6)


@given(SEEDS, st.floats(0.1, 20.0))
@FEW
def test_scaling_mass_stiffness_damping_and_force_together_changes_no_motion(
    seed: int, factor: float
) -> None:
    """P8: every term of M q'' + C q' + K q = f times one factor; sag scales likewise and so stays."""
    brief, mounts = machines.random_machine(seed, viscous=True)
    (body,), (pipe,), (hum, wheel) = brief.bodies, brief.connections, brief.forcing
    inertia = InertiaTensor(**{key: factor * value for key, value in body.inertia.model_dump().items()})
    scaled = changed(
        brief,
        bodies=(body.model_copy(update={"mass": factor * body.mass, "inertia": inertia}),),
        connections=(
            pipe.model_copy(
                update={
                    "stiffness": tuple(factor * k for k in pipe.stiffness),
                    "viscous": tuple(factor * c for c in pipe.viscous),
                }
            ),
        ),
        floor=brief.floor.model_copy(
            update={key: factor * getattr(brief.floor, key) for key in ("mass", "stiffness", "damping")}
        ),
        forcing=(
            hum.model_copy(
                update={
                    "force": tuple(factor * f for f in hum.force),
                    "moment": tuple(factor * m for m in hum.moment),
                }
            ),
            wheel.model_copy(update={"unbalance": factor * wheel.unbalance}),
        ),
    )
    larger = tuple(
        replace(
            mount,
            stiffness_static=tuple(factor * k for k in mount.stiffness_static),
            stiffness_dynamic=tuple(factor * k for k in mount.stiffness_dynamic),
            viscous=tuple(factor * c for c in mount.viscous),
        )
        for mount in mounts
    )
    before, after = assess(brief, design_of(brief, mounts)), assess(scaled, design_of(scaled, larger))
    for one, other in zip(before.margins, after.margins, strict=True):
        if one.unit in ("length", "velocity", "angle"):
            assert other.margin == pytest.approx(one.margin, rel=1e-8)
    for one, other in zip(before.stations, after.stations, strict=True):
        assert other.compression == pytest.approx(one.compression, rel=1e-9)
        assert other.axial_load == pytest.approx(factor * one.axial_load, rel=1e-9)


@given(SEEDS, st.permutations(range(4)))
@FEW
def test_the_order_of_stations_does_not_matter(seed: int, order: list[int]) -> None:
    brief, mounts = machines.random_machine(seed)
    shuffled = changed(brief, stations=tuple(brief.stations[i] for i in order))
    by_group = dict(zip(brief.groups, mounts, strict=True))
    before = assess(brief, design_of(brief, mounts))
    after = assess(shuffled, design_of(shuffled, tuple(by_group[group] for group in shuffled.groups)))
    known = {(row.quantity, row.place, row.condition): row.margin for row in before.margins}
    for row in after.margins:
        assert row.margin == pytest.approx(
            known[(row.quantity, row.place, row.condition)], rel=1e-6, abs=1e-9
        )
    assert after.cost == before.cost


def turned(brief: Brief, angle: float) -> Brief:
    """The same machine described in axes turned about the vertical."""
    c, s = math.cos(angle), math.sin(angle)
    turn = np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]])

    def v(vector: Any) -> tuple[float, float, float]:
        return tuple(float(x) for x in turn @ np.array(vector))  # type: ignore[return-value]

    (body,), (hum, wheel) = brief.bodies, brief.forcing
    t = body.inertia
    tensor = turn @ np.array([[t.xx, t.xy, t.xz], [t.xy, t.yy, t.yz], [t.xz, t.yz, t.zz]]) @ turn.T
    inertia = InertiaTensor(
        xx=tensor[0, 0], yy=tensor[1, 1], zz=tensor[2, 2], xy=tensor[0, 1], xz=tensor[0, 2], yz=tensor[1, 2]
    )
    return changed(
        brief,
        bodies=(body.model_copy(update={"centre": v(body.centre), "inertia": inertia}),),
        points=tuple(p.model_copy(update={"position": v(p.position)}) for p in brief.points),
        stations=tuple(
            s.model_copy(update={"position": v(s.position), "axial": v(s.axial), "radial": v(s.radial)})
            for s in brief.stations
        ),
        # A pipe as stiff in x as in y looks the same from every side.
        connections=tuple(p.model_copy(update={"position": v(p.position)}) for p in brief.connections),
        forcing=(
            hum.model_copy(
                update={"position": v(hum.position), "force": v(hum.force), "moment": v(hum.moment)}
            ),
            wheel.model_copy(update={"position": v(wheel.position), "axis": v(wheel.axis)}),
        ),
        allowables=tuple(
            a if isinstance(a.direction, str) else a.model_copy(update={"direction": v(a.direction)})  # type: ignore[attr-defined]
            for a in brief.allowables
        ),
    )


@given(SEEDS, st.one_of(st.just(math.pi / 2), st.floats(-3.0, 3.0)))
@FEW
def test_turning_the_axes_about_the_vertical_changes_nothing(seed: int, angle: float) -> None:
    """P8: modes, resultants and a direction that turns with the machine stay as they are."""
    brief, mounts = machines.random_machine(seed)
    (pipe,) = brief.connections
    k = pipe.stiffness
    round_pipe = pipe.model_copy(update={"stiffness": (k[0], k[0], k[2])})
    brief = changed(
        brief,
        connections=(round_pipe,),
        allowables=(*brief.allowables, machines.far_limit(direction="resultant")),
    )
    around = turned(brief, angle)
    before, after = assess(brief, design_of(brief, mounts)), assess(around, design_of(around, mounts))
    frequencies = [mode.frequency for mode in before.modes]
    assert [mode.frequency for mode in after.modes] == pytest.approx(frequencies, rel=1e-9)
    for one, other in zip(before.margins, after.margins, strict=True):
        assert other.value == pytest.approx(one.value, rel=2e-4, abs=1e-12), one.label


@given(SEEDS)
@FEW
def test_no_margin_depends_on_how_a_known_phase_is_counted(seed: int) -> None:
    """Turning the phase of every source by the same angle moves the origin of time alone."""
    brief, mounts = machines.random_machine(seed)
    hum, wheel = brief.forcing

    def with_phase(angle: float) -> Brief:
        update = {"phase": angle}
        return changed(brief, forcing=(hum.model_copy(update=update), wheel.model_copy(update=update)))

    before = assess(with_phase(0.0), design_of(brief, mounts))
    after = assess(with_phase(1.234), design_of(brief, mounts))
    for one, other in zip(before.margins, after.margins, strict=True):
        assert other.value == pytest.approx(one.value, rel=1e-6, abs=1e-15)


def test_a_machine_on_two_stations_is_refused_not_judged() -> None:
    """Statics of a machine that can roll over its own line of support have no solution."""
    brief, (part, other) = machines.random_machine(0, flexible_floor=False)
    upright = [s.model_copy(update={"axial": "z", "radial": "x"}) for s in brief.stations[1:3]]
    line = [
        s.model_copy(update={"position": (x, 0.0, 0.0)}) for s, x in zip(upright, (-0.5, 0.5), strict=True)
    ]
    bare = changed(brief, stations=tuple(line), connections=())
    with pytest.raises(UnsupportedMachine):
        assess(bare, design_of(bare, (part, other)))


def test_a_part_without_lateral_figures_serves_a_vertical_study() -> None:
    """A list that states the axial stiffness alone is enough for a mass that moves vertically (W2)."""
    brief = machines.one_axis(100.0, machines.force(50.0, 350.0))
    part = machines.mount(k=7e5, c=2 * 0.2 * math.sqrt(7e5 * 100.0))
    assert part.stiffness_dynamic[0] is None and part.loss_factor[0] is None
    assert machines.value(machines.assessed(brief, part), "displacement") == pytest.approx(3.792e-5, rel=5e-4)
