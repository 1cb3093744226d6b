"""The assessor's motion in time against scipy's own: passages, records, and one step after another."""

from __future__ import annotations

import importlib.util
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.signal import StateSpace, lsim

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.condition import Condition
from detune.physics.sweep import faddeeva
from detune.response.design import Design
from detune.response.direct import DirectMachine
from detune.response.direct_modes import DirectModes, direct_modes
from detune.response.direct_motion import direct_passage_values
from detune.response.direct_stepping import Stepping, stepped, straight_states
from detune.response.direct_supremum import coherent_sets, tones_of

_spec = importlib.util.spec_from_file_location("machines", Path(__file__).with_name("machines.py"))
assert _spec is not None and _spec.loader is not None
machines: Any = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(machines)
TWO_PI = 2.0 * math.pi


def test_steps_taken_in_blocks_are_those_taken_one_by_one() -> None:
    random = np.random.default_rng(1)
    advance, drive, now = (
        random.normal(size=(4, 4)) / 4.0,
        random.normal(size=(137, 4)),
        random.normal(size=4),
    )
    found = stepped(advance, drive, now)
    for state, load in zip(found, [*drive, None], strict=True):
        np.testing.assert_allclose(state, now, rtol=1e-12, atol=1e-12)
        if load is not None:
            now = advance @ now + load
    assert stepped(advance, drive[:1], now).shape == (2, 4)


def causal_damping(found: DirectModes) -> np.ndarray:
    """The stated viscous damping and, of each mode, eta omega for its loss factor: M phi (eta omega) phi^T M."""
    carried, omega = found.mass @ found.shapes, TWO_PI * found.frequency
    lost = np.diag(found.shapes.T @ found.hysteretic @ found.shapes)
    return found.viscous + (carried * (lost / omega)) @ carried.T


@pytest.mark.parametrize("viscous", [False, True])
def test_a_record_against_scipy_signal_lsim(viscous: bool) -> None:
    """scipy.signal.lsim of the plain equations in metres and metres per second, the load straight between samples."""
    brief, mounts = machines.random_machine(2, viscous=viscous)
    found = direct_modes(DirectMachine(brief, Design(brief.groups, tuple(mounts), 0.0)), [])
    stepping, count = Stepping(found), len(found.frequency)
    random = np.random.default_rng(3)
    load, values, step = random.normal(size=count), random.normal(size=700), 2e-3
    start = 1e-4 * random.normal(size=2 * count)
    inverse, damping = np.linalg.inv(found.mass), causal_damping(found)
    matrix = np.block(
        [[np.zeros((count, count)), np.eye(count)], [-inverse @ found.stiffness, -inverse @ damping]]
    )
    inputs = np.concatenate([np.zeros(count), inverse @ load])[:, None]
    system = StateSpace(matrix, inputs, np.eye(2 * count), np.zeros((2 * count, 1)))
    _, _, expected = lsim(system, values, step * np.arange(len(values)), X0=start)
    pattern = stepping.loaded(load)
    states = straight_states(stepping, pattern, values, step, stepping.state(start[:count], start[count:]))
    rates, _ = stepping.rates(states, values[:, None] * pattern[count:])
    for number, part in enumerate((expected[:, :count], expected[:, count:])):
        np.testing.assert_allclose(rates[number], part, atol=1e-9 * np.abs(part).max())
    faster = (
        values[:, None] * load - expected[:, :count] @ found.stiffness - expected[:, count:] @ damping
    ) @ inverse
    np.testing.assert_allclose(rates[2], faster, atol=1e-9 * np.abs(faster).max())


def passing(viscous: bool, way: str) -> tuple[DirectMachine, Condition]:
    brief, mounts = machines.random_machine(3, viscous=viscous)
    condition = Condition(
        name="start-up", steady=False, shafts={"rotor": (3.0, 40.0)}, **{way: {"rotor": 2.0}}
    )
    brief = brief.model_copy(update={"conditions": (condition,), "forcing": brief.forcing[1:]})
    return DirectMachine(brief, Design(brief.groups, tuple(mounts), 0.0)), condition


@pytest.mark.parametrize(("viscous", "way"), [(False, "run_up"), (True, "coast_down")])
def test_a_six_axis_passage_against_an_ode(viscous: bool, way: str) -> None:
    """scipy.integrate.solve_ivp, DOP853 with rtol 1e-10, of the plain equations under each coherent set as a phasor;
    the modulus of the answer is the envelope, seen 400 times a cycle of the fastest motion."""
    machine, condition = passing(viscous, way)
    found = direct_modes(machine, [])
    ends = (3.0, 40.0) if way == "run_up" else (40.0, 3.0)
    sets = coherent_sets(tones_of(machine.brief, condition))
    count, inverse, damping = len(found.frequency), np.linalg.inv(found.mass), causal_damping(found)
    fastest = max(max(tones[0].order for tones in sets) * 40.0, float(found.frequency[-1]))
    moment = np.linspace(0.0, 2.0, int(2.0 * 400.0 * fastest))
    point = next(p for p in machine.brief.points if p.name == "P")
    along = machine.place(machine.brief.bodies[0].name, np.array(point.position))[0, machine.free]
    station = machine.stations[0]
    axial = machine.deflection_rows(station)[2, machine.free]
    expected = np.zeros((3, len(moment)))
    for tones in sets:
        (tone,) = tones
        order, vector = tone.order, machine.tone_load(tone, np.ones(1))[0][0, machine.free]

        def load(t: Any, order: float = order, power: int = tone.power) -> Any:
            speed = TWO_PI * order * (ends[0] + (ends[1] - ends[0]) * t / 2.0)
            phase = TWO_PI * order * (ends[0] * t + 0.5 * (ends[1] - ends[0]) * t**2 / 2.0)
            return speed**power * np.exp(1j * phase)

        def rates(t: float, y: Any, vector: Any = vector, load: Any = load) -> Any:
            force = load(t) * vector - found.stiffness @ y[:count] - damping @ y[count:]
            return np.concatenate([y[count:], inverse @ force])

        solved = solve_ivp(
            rates, (0.0, 2.0), np.zeros(2 * count, complex), "DOP853", moment, rtol=1e-10, atol=1e-16
        )
        moved, fast = solved.y[:count].T, solved.y[count:].T
        faster = (load(moment)[:, None] * vector - moved @ found.stiffness - fast @ damping) @ inverse
        expected += np.abs([moved @ along, faster @ along, moved @ axial])
    pairs = (
        (Displacement(at="P", direction="x", measure="peak", limit=1.0), "P"),
        (Acceleration(at="P", direction="x", measure="peak", limit=1.0), "P"),
        (MountDeflection(part="dynamic", direction="axial", limit=1.0), station.name),
    )
    values = direct_passage_values(machine, found, sets, (*ends, 2.0), pairs)
    np.testing.assert_allclose(values, expected.max(axis=1), rtol=5e-5)


def test_critical_damping_is_like_any_other() -> None:
    """A mass on a spring with c = 2 sqrt(k m) has no pair of complex modes; from rest under a force that grows from
    nothing at F t: x = F/k (t - 2/w + (t + 2/w) exp(-w t)), w = sqrt(k/m), by hand."""
    mass, omega = 25.0, TWO_PI * 5.0
    part = machines.mount(k=mass * omega**2, c=2.0 * mass * omega)
    brief = machines.one_axis(mass, machines.force((5.0, 6.0), 1.0))
    found = direct_modes(DirectMachine(brief, Design(brief.groups, (part,), 0.0)), [])
    stepping, time = Stepping(found), np.linspace(0.0, 1.0, 301)
    states = straight_states(stepping, stepping.loaded(np.ones(1)), time, time[1], np.zeros(2))
    moved = stepping.rates(states, time[:, None])[0][0, :, 0]
    expected = (time - 2.0 / omega + (time + 2.0 / omega) * np.exp(-omega * time)) / (mass * omega**2)
    np.testing.assert_allclose(moved, expected, atol=1e-9 * expected.max())


def test_the_series_of_the_faddeeva_function_meets_scipys() -> None:
    """scipy.special.wofz, on both sides of the circle where the series takes over."""
    from scipy.special import wofz

    radius = np.array([0.1, 1.0, 5.0, 8.999, 9.001, 12.0, 100.0, 1e6])
    z = (radius[:, None] * np.exp(1j * np.linspace(0.0, math.pi, 181))).ravel()
    z = z.real + 1j * np.abs(z.imag)
    np.testing.assert_allclose(faddeeva(z), wofz(z), rtol=3e-14)
