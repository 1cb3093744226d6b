"""How far viscous damping in time is from the loss factor it stands for: closed form on one axis."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.forcing.base_pulse import BasePulse
from detune.brief.forcing.force_pulse import ForcePulse
from detune.response.design import Design
from detune.response.direct import DirectMachine
from detune.response.direct_modes import direct_modes
from detune.response.direct_stand_in import stand_in_difference
from response import machines

MASS, K, ETA = 50.0, 2.0e5, 0.2
SHOCK = BasePulse(name="shock", direction="z", shape="half-sine", amplitude=50.0, duration=0.011)
PUSH = ForcePulse(
    name="push", position=(0.0, 0.0, 0.0), force=(0.0, 0.0, 100.0), shape="half-sine", duration=0.01
)


def ratio(what: str) -> tuple[np.ndarray, np.ndarray]:
    """Frequency ratio from 0.5 to 1.5, and the relative difference: k(1 + j eta) against k(1 + j eta r)."""
    r = np.linspace(0.5, 1.5, 20_001)
    one, two = 1.0 + 1j * ETA, 1.0 + 1j * ETA * r
    true, other = 1.0 / (one - r**2), 1.0 / (two - r**2)
    if what == "force":
        true, other = one * true, two * other
    return r, np.abs(other / true - 1.0)


@pytest.mark.parametrize("forcing", [SHOCK, PUSH])
@pytest.mark.parametrize(
    ("allowable", "what"),
    [
        (MountDeflection(part="dynamic", limit=1.0), "motion"),
        (TransmittedForce(through="floor", direction="z", measure="peak", limit=1e6), "force"),
        (TransmittedForce(through="each-station", direction="axial", measure="peak", limit=1e6), "force"),
    ],
)
def test_the_difference_by_closed_form(forcing: Any, allowable: Any, what: str) -> None:
    brief = machines.one_axis(MASS, forcing).model_copy(update={"allowables": (allowable,)})
    machine = DirectMachine(brief, Design(brief.groups, (machines.mount(k=K, loss=ETA),), 0.0))
    found = direct_modes(machine, [])
    place = "floor" if getattr(allowable, "through", "") == "floor" else "S"
    worst = stand_in_difference(machine, found, brief.conditions[0], ((allowable, place),))
    r, apart = ratio(what)
    natural = math.sqrt(K / MASS) / (2.0 * math.pi)
    assert worst is not None
    assert worst.size == pytest.approx(float(apart.max()), rel=1e-3)
    assert worst.frequency / natural == pytest.approx(float(r[apart.argmax()]), rel=2e-2)
    assert (worst.low, worst.high) == pytest.approx((0.5 * natural, 1.5 * natural), rel=1e-9)


def test_the_assessment_states_it_once_for_each_condition() -> None:
    limit = Acceleration(at="P", direction="z", measure="peak", limit=1e3)
    brief = machines.one_axis(MASS, SHOCK).model_copy(update={"allowables": (limit,)})
    (note,) = machines.assessed(brief, machines.mount(k=K, loss=ETA)).notes
    assert (
        note.startswith("running: in time each mode is damped viscously")
        and "axial dynamic force against uplift, S" in note
    )
    # Of the force the closed form above, of the motion less.
    assert f"{100.0 * ratio('force')[1].max():.2g} %" in note
    # A dashpot is what it is in time and in frequency; tones need no stand-in.
    assert machines.assessed(brief, machines.mount(k=K, c=500.0)).notes == ()
    steady = machines.one_axis(MASS, machines.force(20.0)).model_copy(update={"allowables": (limit,)})
    assert machines.assessed(steady, machines.mount(k=K, loss=ETA)).notes == ()


def test_six_axes_differ_by_no_more_than_their_damping_lets_them() -> None:
    brief, mounts = machines.random_machine(2)
    limit = Acceleration(at="P", direction="resultant", measure="peak", limit=1e3)
    brief = brief.model_copy(update={"forcing": (SHOCK,), "allowables": (limit,)})
    machine = DirectMachine(brief, Design(brief.groups, mounts, 0.0))
    worst = stand_in_difference(machine, direct_modes(machine, []), brief.conditions[0], ((limit, "P"),))
    assert worst is not None and 1e-3 < worst.size < 0.6
