"""Separation from resonance through the whole program, by the excitation frequency (DESIGN 2), and two bodies."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

from detune.brief.allowable.separation import Separation
from detune.brief.condition import Condition
from detune.brief.forcing.shaft_orders import Order, ShaftOrders
from detune.brief.machine import Body, InertiaTensor, Point, Station
from detune.response.assemble import dynamic_matrices
from detune.response.design import Design
from detune.response.designs import all_designs
from detune.response.direct import DirectMachine
from detune.response.direct_views import DirectTone
from detune.response.loads import condition_families
from detune.response.model import build_model
from detune.response.views import ToneBatch
from response import machines

M = 100.0
TEN_HERTZ = M * (2.0 * math.pi * 10.0) ** 2


def ten_hertz(*orders: float, conditions: tuple[Condition, ...], limit: Separation, loss: float = 0.1) -> Any:
    """A mass that rings at exactly 10 Hz, under orders of one shaft."""
    forcing = ShaftOrders(
        name="pump",
        shaft="rotor",
        position=(0.0, 0.0, 0.0),
        orders=tuple(Order(order=n, force=(0.0, 0.0, 1.0)) for n in orders),
    )
    brief = machines.one_axis(M, forcing, [limit], conditions=conditions)
    return machines.assessed(brief, machines.mount(k=TEN_HERTZ, loss=loss))


def speeds(low: float, high: float, *, name: str = "running", steady: bool = True) -> Condition:
    return Condition(name=name, steady=steady, shafts={"rotor": (low, high)})


@pytest.mark.parametrize(
    ("low", "high", "expected"),
    [
        (12.0, 15.0, 1.0 - 10.0 / 12.0),
        (5.0, 8.0, 10.0 / 8.0 - 1.0),
        (9.0, 11.0, 10.0 / 11.0 - 1.0),
        (10.0, 12.0, 0.0),
        (8.0, 10.0, 0.0),
        (10.0, 10.0, 0.0),
        (20.0, 20.0, 0.5),
    ],
)
def test_separation_by_the_excitation_frequency(low: float, high: float, expected: float) -> None:
    """f/high - 1 above the interval, 1 - f/low below it, negative inside, 0 at both edges."""
    limit = Separation(limit=0.2)
    assessment = ten_hertz(1.0, conditions=(speeds(low, high),), limit=limit)
    assert assessment.separation == pytest.approx(expected, abs=1e-12)
    (row,) = [row for row in assessment.margins if row.kind == "separation"]
    # Value over limit less one, whatever its sign.
    assert row.margin == pytest.approx(expected / 0.2 - 1.0, abs=1e-11)


def test_each_order_has_an_interval_of_its_own() -> None:
    """Orders 1 and 3 of 4 to 5 Hz excite 4-5 and 12-15 Hz, not what lies between: 10 Hz is 1/6 below 12."""
    assessment = ten_hertz(1.0, 3.0, conditions=(speeds(4.0, 5.0),), limit=Separation(limit=0.1))
    assert assessment.separation == pytest.approx(1.0 / 6.0, rel=1e-12)
    assert assessment.modes[0].interval == pytest.approx((12.0, 15.0))


def test_passing_through_is_judged_by_response_alone() -> None:
    """A run-up over the mode leaves its separation from the steady speed as it is."""
    conditions = (speeds(20.0, 25.0), speeds(2.0, 20.0, name="run-up", steady=False))
    assessment = ten_hertz(1.0, conditions=conditions, limit=Separation(limit=0.2))
    assert assessment.separation == pytest.approx(0.5, rel=1e-12)
    # And its response counts: at the 10 Hz of the run-up it is 1/eta = 10 times the static one.
    value = machines.value(assessment, "displacement", condition="run-up")
    assert value == pytest.approx(math.sqrt(1.0 + 1.0 / 0.1**2) / math.hypot(1.0, 0.1) / TEN_HERTZ, rel=2e-3)


@pytest.mark.parametrize(("loss", "separation"), [(0.5, math.inf), (0.3, -1.0 / 11.0)])
def test_a_mode_that_amplifies_little_may_be_exempted_and_its_response_still_binds(
    loss: float, separation: float
) -> None:
    """Amplification 1/0.5 = 2 is below 2.5, 1/0.3 = 3.3 is not; DESIGN 2."""
    limit = Separation(limit=0.2, exempt_amplification=2.5)
    assessment = ten_hertz(1.0, conditions=(speeds(9.0, 11.0),), limit=limit, loss=loss)
    assert assessment.separation == pytest.approx(separation)
    assert assessment.modes[0].exempt is (loss == 0.5)
    assert assessment.modes[0].amplification == pytest.approx(1.0 / loss)
    assert machines.value(assessment, "displacement") > 0.0
    assert assessment.meets is (loss == 0.5)


def test_a_mode_is_not_exempted_because_it_is_not_excited() -> None:
    """A vertical force at the centre excites no rocking, and the rocking mode still counts."""
    brief = machines.brief_of(
        bodies=(
            Body(
                name="pump", free=("z", "ry"), mass=M, centre=(0.0, 0.0, 0.0),
                inertia=InertiaTensor(xx=8.0, yy=8.0, zz=8.0),
            ),
        ),
        points=(Point(name="P", position=(0.0, 0.0, 0.0)),),
        stations=tuple(
            Station(name=name, group="feet", position=(x, 0.0, 0.0)) for name, x in (("A", -0.4), ("B", 0.4))
        ),
        forcing=(machines.force(14.0),),
    )  # fmt: skip
    k = TEN_HERTZ / 2.0
    assessment = machines.assessed(brief, machines.mount(k=k, lateral=k, loss=0.1))
    # By hand: bounce 10 Hz; rocking k 2 (0.4)^2 = .16 TEN_HERTZ on 8 kg m^2, 10 sqrt(.16 100/8) = 14.1421 Hz.
    assert [mode.frequency for mode in assessment.modes] == pytest.approx([10.0, 14.1421356], rel=1e-7)
    assert assessment.separation == pytest.approx(14.1421356 / 14.0 - 1.0, rel=1e-6)


@pytest.mark.parametrize("seed", range(3))
def test_two_bodies_by_two_routes(seed: int) -> None:
    """A machine on an inertia base on the floor, inclined stations between them: both assemblies to 1e-9."""
    brief, (left, right) = machines.random_machine(seed)
    random = np.random.default_rng(seed)
    base = Body(
        name="base", mass=900.0, centre=(0.0, 0.1, -0.6), inertia=InertiaTensor(xx=80.0, yy=120.0, zz=170.0)
    )
    upper = tuple(s.model_copy(update={"on": "machine", "to": "base"}) for s in brief.stations)
    lower = tuple(
        s.model_copy(
            update={
                "name": f"L{i}",
                "group": "under",
                "on": "base",
                "to": "floor",
                "position": (1.2 * s.position[0], 1.2 * s.position[1], -0.9),
                "axial": (float(random.normal(0, 0.2)), 0.1, 1.0),
            }
        )
        for i, s in enumerate(brief.stations)
    )
    brief = brief.model_copy(
        update={
            "bodies": (*brief.bodies, base),
            "stations": (*upper, *lower),
            "points": (
                brief.points[0].model_copy(update={"on": "machine"}),
                Point(name="Q", on="base", position=(0.5, 0.2, -0.5)),
            ),
            "connections": tuple(c.model_copy(update={"on": "machine"}) for c in brief.connections),
            "forcing": tuple(f.model_copy(update={"on": "machine"}) for f in brief.forcing),
        }
    )
    under = machines.mount("u", 8e5, lateral=4e5, static=0.7, loss=0.12)
    mounts = (left, right, under)
    model = build_model(brief, tuple((mount,) for mount in mounts))
    machine = DirectMachine(brief, Design(brief.groups, mounts, 0.0))
    assert model.frame.count == 13
    omega = 2.0 * math.pi * np.array([[4.0, 13.0, 37.0]])
    designs = all_designs(model, 0, 1)
    condition = brief.conditions[0]
    for family, forcing in zip(condition_families(brief, model, condition), brief.forcing, strict=True):
        batch = ToneBatch(model, designs, dynamic_matrices(model, designs), family.sets[0], omega)
        direct = DirectTone(machine, forcing.tones(condition.shafts), omega)
        pairs = [(batch.motion(p), direct.motion(p)) for p in ("P", "Q")]
        pairs += [(batch.station_force(s.name), direct.station_force(s.name)) for s in brief.stations]
        pairs += [(batch.total_force(s), direct.total_force(s)) for s in ("floor", "ground")]
        for one, other in pairs:
            assert np.abs(one - other).max() <= 1e-9 * np.abs(other).max()
        # The ground has to carry what the machine's inertia leaves: nothing is lost between the two stages.
        put_in, lost = direct.power()
        assert put_in == pytest.approx(lost, rel=1e-9)
