"""Mounts with laws, and the check that batch evaluation and assessor agree, for the tests of parts and states."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import numpy as np

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.allowable.sag import Sag
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.tilt import Tilt
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.allowable.velocity import Velocity
from detune.brief.brief import Brief
from detune.brief.condition import Condition
from detune.brief.forcing.base_motion import BaseMotion
from detune.brief.forcing.base_pulse import BasePulse
from detune.brief.forcing.force_pulse import ForcePulse
from detune.brief.forcing.random_base_motion import RandomBaseMotion
from detune.brief.forcing.random_force import RandomForce
from detune.brief.state import State
from detune.parts.kinds.mount import Mount
from detune.parts.laws import AmplitudeTable, LawTable, LoadCurve, Relaxation, UnknownDamping
from detune.problem.build import Problem, build
from detune.problem.stages import stages
from detune.response.assess import assess
from detune.response.assessment import Assessment
from detune.response.design import Design
from detune.response.designs import Designs
from response import machines

TWO_PI = 2.0 * math.pi
# A margin as large as this is that of a value of rounding size.
ROUNDING = 1e12

LIMITS: tuple[Any, ...] = (
    Displacement(at="P", direction="z", measure="peak", limit=1.0),
    Acceleration(at="P", direction="resultant", measure="peak", limit=1e3),
    Velocity(at="P", direction="x", measure="peak", limit=1e3),
    TransmittedForce(through="floor", direction="z", measure="peak", limit=1e6),
    TransmittedForce(through="each-station", direction="resultant", measure="peak", limit=1e6),
    MountDeflection(part="dynamic", direction="axial", limit=1.0),
    MountDeflection(part="combined", direction="axial", limit=1.0),
)
STATIC: tuple[Any, ...] = (
    Sag(at="P", limit=1.0),
    Tilt(limit=1.0),
    Separation(limit=0.001),
)


def relaxing(part: Mount, ratio: float = 4.0, c: float = 1500.0) -> Mount:
    """The same mount as a three-parameter element on every axis."""
    return replace(part, loss_factor=(0.0,) * 3, viscous=(c,) * 3, relaxation=Relaxation(ratio))


def tabled(part: Mount, temperature: tuple[float, ...] = ()) -> Mount:
    """The same mount by a table over 1 to 1000 Hz: stiffness rises and loss peaks; colder is stiffer."""
    warm = ((0.9, 1.1, 1.5, 2.2), (0.08, 0.15, 0.25, 0.2))
    cold = ((1.4, 1.9, 2.8, 4.0), (0.15, 0.3, 0.4, 0.3))
    rows = (warm,) if not temperature else (cold, warm)
    table = LawTable(
        frequency=(1.0, 10.0, 100.0, 1000.0),
        temperature=temperature,
        stiffness_ratio=tuple(row[0] for row in rows),
        loss_factor=tuple(row[1] for row in rows),
        absolute=False,
        file="table.csv",
    )
    return replace(part, loss_factor=(0.08,) * 3, viscous=(0.0,) * 3, law_table=table)


def curved(part: Mount, reach: float = 0.03, harder: float = 3000.0, points: int = 13) -> Mount:
    """The same mount with load k d (1 + harder d^2), from minus a third of its reach to its reach."""
    k = part.stiffness_static[2]
    d = np.unique(np.append(np.linspace(-reach / 3.0, reach, points), 0.0))
    curve = LoadCurve(tuple(d.tolist()), tuple((k * d * (1.0 + harder * d**2)).tolist()), "curve.csv")
    return replace(part, load_curve=curve)


def air(part: Mount, rated: float = 600.0) -> Mount:
    """The same mount as an air spring whose stiffness holds at the rated load."""
    return replace(part, follows_load=True, load_rated=rated, load_min=0.0)


def softening(part: Mount) -> Mount:
    """The same mount softer and more damped at greater amplitude."""
    table = AmplitudeTable(
        amplitude=(1e-6, 1e-5, 1e-4, 1e-3),
        stiffness_ratio=(1.3, 1.15, 1.0, 0.8),
        loss_factor=(0.06, 0.1, 0.16, 0.2),
        file="amplitude.csv",
    )
    return replace(part, loss_factor=(0.06,) * 3, viscous=(0.0,) * 3, amplitude_table=table)


def unknown(part: Mount, rated: float = 700.0) -> Mount:
    """The same mount with its loss factor of unknown kind; both readings agree at the rated load's resonance."""
    eta = part.loss_factor[2]
    mass = rated / 9.80665
    c = tuple(None if k is None else eta * math.sqrt(k * mass) for k in part.stiffness_dynamic)
    readings = UnknownDamping(loss_factor=part.loss_factor, viscous=c)  # type: ignore[arg-type]
    return replace(part, load_rated=rated, damping_kind="unknown", damping_unknown=readings)


def forcings(seed: int) -> dict[str, tuple[Any, ...]]:
    """Base motion, noise, pulses and a passage, by name."""
    random = np.random.default_rng(seed)

    def direction() -> tuple[float, float, float]:
        x, y, z = random.normal(size=3)
        return float(x), float(y), float(z)

    noise = ((5.0, 0.01), (20.0, 0.04), (200.0, 0.01))
    return {
        "base motion": (
            BaseMotion(name="road", frequency=(8.0, 60.0), direction=direction(), velocity=2e-3),
        ),
        "noise": (
            RandomBaseMotion(name="ground", direction=direction(), duration=60.0, break_points=noise),
            RandomForce(
                name="jet", position=direction(), direction=direction(), duration=30.0,
                break_points=((5.0, 4.0), (200.0, 1.0)),
            ),
        ),
        "pulse": (
            BasePulse(name="shock", direction=direction(), shape="half-sine", amplitude=3.0, duration=0.02),
            ForcePulse(
                name="hit", position=direction(), force=(40.0, -30.0, 90.0), moment=(3.0, 4.0, 1.0),
                shape="terminal-peak-sawtooth", duration=0.03,
            ),
        ),
        "passage": (machines.unbalance(2e-3, position=direction(), axis=direction()),),
    }  # fmt: skip


def conditions(kind: str, state: str | None = None) -> tuple[Condition, ...]:
    if kind != "passage":
        return (Condition(name="running", state=state),)
    times: dict[str, Any] = {"shafts": {"rotor": (5.0, 40.0)}, "run_up": {"rotor": 1.5}}
    return (Condition(name="running", steady=False, state=state, **times),)


def machines_state(name: str, **changes: Any) -> State:
    return State(name=name, **changes)


def in_state(brief: Brief, state: State | None) -> Brief:
    """The same brief with every condition judged in a state."""
    if state is None:
        return brief
    judged = tuple(condition.model_copy(update={"state": state.name}) for condition in brief.conditions)
    return brief.model_copy(update={"states": (state,), "conditions": judged})


def problem_of(brief: Brief, *mounts: Mount) -> Problem:
    """The problem in which each group may take one mount alone."""
    listed = machines.catalog(*mounts)
    choices = tuple(
        choice.model_copy(update={"parts": (part.part,)})
        for choice, part in zip(brief.choices, listed.parts, strict=True)
    )
    return build(brief.model_copy(update={"choices": choices}), {"list": listed})


def batch_rows(problem: Problem) -> dict[tuple[str, str, str, str], float]:
    """The margin of the only design by (kind, quantity, place, condition); of several readings the least."""
    one = Designs(np.zeros((1, len(problem.model.groups)), dtype=np.intp), np.zeros(1, dtype=np.intp))
    found: dict[tuple[str, str, str, str], float] = {}
    for stage in stages(problem):
        if stage.bound:
            continue
        for requirement, margin in zip(stage.requirements, stage.margins(one), strict=True):
            allowable = requirement.allowable
            key = (allowable.kind, allowable.quantity(), requirement.place, requirement.condition)
            found[key] = min(float(margin[0]), found.get(key, np.inf))
    return found


def agreed(brief: Brief, *mounts: Mount, rel: float = 1e-4) -> Assessment:
    """The assessment, after making sure that the batch evaluation gives every margin to `rel`."""
    found = assess(brief, Design(brief.groups, mounts, 0.0))
    batch = batch_rows(problem_of(brief, *mounts))
    # A part that states no greatest deflection has no row of it in the assessment.
    assert len(batch) >= len(found.margins) >= len(brief.allowables)
    for row in found.margins:
        other = batch[(row.kind, row.quantity, row.place, row.condition)]
        if min(row.margin, other) > ROUNDING:
            continue
        if math.isinf(row.margin) or math.isinf(other):
            assert row.margin == other, row.label
            continue
        assert math.isclose(1.0 + other, 1.0 + row.margin, rel_tol=rel), (row.label, other, row.margin)
    return found
