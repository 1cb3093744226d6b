"""Limits on the parts' own temperatures and heights, and a torque pulse, from the statement to both calculations."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from pydantic import ValidationError
from scipy.integrate import solve_ivp

from detune.brief.allowable.height import Height
from detune.brief.allowable.relative_motion import RelativeMotion
from detune.brief.allowable.temperature_range import TemperatureRange
from detune.brief.forcing.torque_pulse import TorquePulse
from detune.brief.machine import Body, InertiaTensor, Point, Station
from response import law_machines

machines = law_machines.machines
MASS, G, K = 40.0, 9.80665, 1e5


def row(part: Any, allowable: Any) -> Any:
    brief = machines.one_axis(MASS, machines.force(30.0), (allowable,))
    found = law_machines.agreed(brief, part)
    (only,) = [each for each in found.margins if each.kind == allowable.kind]
    return only


@pytest.mark.parametrize(
    ("low", "high", "reserve"),
    [(-30.0, 80.0, 10.0), (-20.0, 60.0, 0.0), (-15.0, 90.0, -5.0), (-40.0, 55.0, -5.0)],
)
def test_the_reserve_of_a_temperature_range(low: float, high: float, reserve: float) -> None:
    # Asked: -20 to 60 degC. Reserve is the lesser of both ends by subtraction; a limit of zero is met by zero.
    part = replace(machines.mount(k=K), temperature_min=low, temperature_max=high)
    found = row(part, TemperatureRange(lowest="-20 degC", highest="60 degC"))
    assert found.value == reserve and (found.margin >= 0.0) == (reserve >= 0.0)


def test_a_part_without_a_range_does_not_meet_one() -> None:
    found = row(machines.mount(k=K), TemperatureRange(lowest=-20.0, highest=60.0))
    assert found.value == found.margin == -math.inf


def test_the_highest_is_not_below_the_lowest() -> None:
    with pytest.raises(ValidationError, match="not below the lowest"):
        TemperatureRange(lowest=20.0, highest=10.0)


def test_the_installed_height_is_the_free_one_less_the_compression() -> None:
    # 60 mm free, 40 kg on 100 N/mm (static as dynamic): 60 - 3.92266 mm.
    part = replace(machines.mount(k=K), free_height=0.060)
    found = row(part, Height(limit="58 mm"))
    assert found.value == pytest.approx(0.060 - MASS * G / K, rel=1e-12)
    assert found.margin == pytest.approx(0.058 / found.value - 1.0, rel=1e-12)
    assert row(machines.mount(k=K), Height(limit=1.0)).margin == -1.0


@pytest.mark.parametrize("torque", [90.0, -90.0])
def test_a_starting_torque_turns_the_frame(torque: float) -> None:
    # A frame on two stations turns about x: J a'' + (k a')' ... = M(t), trapezoid with sides of a tenth, by solve_ivp.
    inertia, arm, c, time = 6.0, 0.4, 200.0, 0.5
    start = TorquePulse(name="start", axis="x", torque=torque, shape="trapezoid", duration=time)
    assert start.assumed()
    brief = machines.brief_of(
        bodies=(Body(name="set", mass=MASS, centre=(0.0, 0.0, 0.0), free=("z", "rx"),
                     inertia=InertiaTensor(xx=inertia, yy=6.0, zz=6.0)),),
        points=(Point(name="P", position=(0.0, arm, 0.0)),),
        stations=tuple(Station(name=n, group="G", position=(0.0, y, 0.0)) for n, y in (("a", -arm), ("b", arm))),
        forcing=(start,),
        allowables=(RelativeMotion(at="P", to="floor", direction="z", measure="peak", limit=1.0),),
    )  # fmt: skip
    found = law_machines.agreed(brief, machines.mount(k=K, lateral=K, c=c, c_lateral=c))

    def rates(t: float, y: np.ndarray) -> list[float]:
        moment = torque * float(np.interp(t, [0.0, 0.1 * time, 0.9 * time, time], [0.0, 1.0, 1.0, 0.0]))
        return [y[1], (moment - 2.0 * arm**2 * (K * y[0] + c * y[1])) / inertia]

    run = solve_ivp(rates, (0.0, 2.0), [0.0, 0.0], rtol=1e-9, atol=1e-13, max_step=1e-3)
    assert machines.value(found, "relative-motion") == pytest.approx(arm * np.abs(run.y[0]).max(), rel=1e-4)


def test_a_torque_pulse_without_torque_is_refused() -> None:
    with pytest.raises(ValidationError, match="not zero"):
        TorquePulse(name="x", axis="x", torque=0.0, shape="rectangle", duration=1.0)
