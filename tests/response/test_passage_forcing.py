"""Run-up and coast-down from a condition's stated time to the assessed and the batch value.

Ids are those of the project's table of checks; sources stand beside each.
"""

from __future__ import annotations

import math
from functools import partial

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.brief import Brief
from detune.brief.condition import Condition
from detune.brief.forcing.shaft_orders import ShaftOrders
from detune.problem.build import build
from detune.response.designs import Designs
from response import machines

TWO_PI = 2.0 * math.pi
MASS, FN = 25.0, 10.0
K = MASS * (TWO_PI * FN) ** 2


both = partial(machines.both, rel=1e-3)


def passing(low: float, high: float, forcing: object, **times: object) -> Brief:
    condition = Condition(name="start-up", steady=False, shafts={"rotor": (low, high)}, **times)
    return machines.one_axis(MASS, forcing, conditions=(condition,))


def constant_force(size: float = 1.0) -> ShaftOrders:
    order = {"order": 1.0, "force": (0.0, 0.0, size)}
    return ShaftOrders(name="hum", shaft="rotor", position=(0, 0, 0), orders=(order,))


DISPLACEMENT = Displacement(at="P", direction="z", measure="peak", limit=1e6)


@pytest.mark.parametrize(("q", "peak"), [(100, 36.53), (400, 73.29)])
def test_q1_undamped_linear_sweep(q: float, peak: float) -> None:
    # Q1: Lewis, Trans. ASME 54 (1932) 253: 3.67 sqrt(q) times the static deflection, q = fn^2/(df/dt).
    rate = FN**2 / q
    low, high = 0.2 * FN, 1.6 * FN
    brief = passing(low, high, constant_force(), run_up={"rotor": (high - low) / rate})
    assert both(brief, machines.mount(k=K), DISPLACEMENT) * K == pytest.approx(peak, rel=0.01)


@pytest.mark.parametrize(("eta", "ratio"), [(0.3, 0.98752), (3.0, 0.82886), (30.0, 0.46518)])
def test_q2_attenuation(eta: float, ratio: float) -> None:
    # Q2: Hok 1948: peak over the steady one at eta = Q^2 (df/dt)/fn^2, high Q.
    quality = {0.3: 40.0, 3.0: 100.0, 30.0: 300.0}[eta]
    rate = eta * FN**2 / quality**2
    width = 12.0 * (FN / quality + math.sqrt(rate))
    low, high = FN - width, FN + width
    part = machines.mount(k=K, c=math.sqrt(K * MASS) / quality)
    brief = passing(low, high, constant_force(), run_up={"rotor": (high - low) / rate})
    steady = quality / math.sqrt(1.0 - 0.25 / quality**2)
    assert both(brief, part, DISPLACEMENT) * K / steady == pytest.approx(ratio, rel=4e-3)


@pytest.mark.parametrize("way", ["run_up", "coast_down"])
@pytest.mark.parametrize("ratio", [0.01, 0.08])
def test_unbalance_against_an_ode(way: str, ratio: float) -> None:
    # X8: the modulus of a complex chirp's response by scipy.integrate.solve_ivp is the envelope.
    me, low, high, time = 0.02, 2.0, 25.0, 4.0
    c = 2.0 * ratio * math.sqrt(K * MASS)
    start, end = (low, high) if way == "run_up" else (high, low)
    slope = TWO_PI * (end - start) / time

    def rates(t: float, y: np.ndarray) -> list[complex]:
        omega = TWO_PI * start + slope * t
        load = me * omega**2 * np.exp(1j * (TWO_PI * start * t + 0.5 * slope * t * t))
        return [y[1], (load - c * y[1] - K * y[0]) / MASS]

    moment = np.linspace(0.0, time, 20001)
    found = solve_ivp(rates, (0.0, time), np.zeros(2, complex), t_eval=moment, rtol=1e-9, atol=1e-15)
    moved, fast = found.y
    brief = passing(low, high, machines.unbalance(me, axis="x"), **{way: {"rotor": time}})
    part = machines.mount(k=K, c=c)
    assert both(brief, part, DISPLACEMENT) == pytest.approx(float(np.abs(moved).max()), rel=1e-4)
    force = TransmittedForce(through="floor", direction="z", measure="peak", limit=1e9)
    expected = float(np.abs(K * moved + c * fast).max())
    assert both(brief, part, force) == pytest.approx(expected, rel=1e-4)


def test_a_slow_passage_is_the_steady_state_and_a_fast_one_less() -> None:
    part = machines.mount(k=K, loss=0.1)
    steady = machines.one_axis(MASS, machines.unbalance(0.02), shafts={"rotor": (5.0, 20.0)})
    whole = both(steady, part, DISPLACEMENT)
    slow = both(passing(5.0, 20.0, machines.unbalance(0.02), run_up={"rotor": 60.0}), part, DISPLACEMENT)
    fast = both(passing(5.0, 20.0, machines.unbalance(0.02), run_up={"rotor": 0.5}), part, DISPLACEMENT)
    # A viscous mode of the same loss factor peaks within eta^2/8 of the hysteretic one.
    assert slow == pytest.approx(whole, rel=5e-3)
    assert fast < 0.8 * whole
    # The worse of the two ways counts.
    ways = passing(5.0, 20.0, machines.unbalance(0.02), run_up={"rotor": 60.0}, coast_down={"rotor": 0.5})
    assert both(ways, part, DISPLACEMENT) == pytest.approx(slow, rel=1e-4)


@pytest.mark.parametrize(
    "seed", [0, *(pytest.param(seed, marks=pytest.mark.nightly) for seed in range(1, 5))]
)
@pytest.mark.parametrize("viscous", [False, True])
def test_six_axes_batch_equals_assessor(seed: int, viscous: bool) -> None:
    brief, mounts = machines.random_machine(seed, viscous=viscous)
    condition = Condition(
        name="start-up",
        steady=False,
        shafts={"rotor": (3.0, 40.0)},
        run_up={"rotor": 2.0},
        coast_down={"rotor": 5.0},
    )
    limits = (
        Acceleration(at="P", direction="resultant", measure="peak", limit=1e6),
        Displacement(at="P", direction="x", measure="rms", limit=1e6),
        TransmittedForce(through="floor", direction="z", measure="peak", limit=1e9),
        TransmittedForce(through="ground", direction="resultant", measure="peak", limit=1e9),
        TransmittedForce(through="each-station", direction="lateral", measure="peak", limit=1e9),
        MountDeflection(part="dynamic", limit=1.0),
    )
    brief = brief.model_copy(
        update={"allowables": limits, "conditions": (condition,), "forcing": brief.forcing[1:]}
    )
    problem = build(brief, {"list": machines.catalog(*mounts)})
    pairs = zip(problem.candidates, mounts, strict=True)
    parts = np.array([[[m.part for m in group].index(mount.part) for group, mount in pairs]])
    margins = machines.batch_margins(problem, Designs(parts, np.zeros(1, dtype=np.intp)))
    stated = {allowable.kind for allowable in limits}
    for row in machines.assessed(brief, *mounts).margins:
        if row.kind in stated:
            other = float(margins[(row.quantity, row.place, row.condition)][0])
            assert 1.0 + other == pytest.approx(1.0 + row.margin, rel=1e-3), row.label
