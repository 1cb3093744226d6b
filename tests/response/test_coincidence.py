"""Rms of tones from different sources: mean squares at different frequencies, linear sums where they can coincide."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

from detune.brief.allowable.band_limit import BandLimit
from detune.brief.allowable.velocity import Velocity
from detune.brief.forcing.rotating_unbalance import RotatingUnbalance
from detune.response.coincidence import meeting
from detune.response.loads import Family, Load
from response import law_machines

machines = law_machines.machines

TWO_PI = 2.0 * math.pi
MASS, K, C = 80.0, 1.6e5, 700.0
RMS = Velocity(at="P", direction="z", measure="rms", limit=1.0)
PEAK = Velocity(at="P", direction="z", measure="peak", limit=1.0)


def speed_of(frequency: float, force: float) -> float:
    """Peak velocity of the mass under a force, m/s, by hand."""
    w = TWO_PI * frequency
    return w * force / abs(K - MASS * w**2 + 1j * w * C)


def judged(*forcing: Any, shafts: dict[str, tuple[float, float]] | None = None) -> tuple[float, float]:
    """The rms and the peak velocity, by the assessor, after the batch evaluation was found to agree."""
    brief = machines.one_axis(MASS, forcing, shafts=shafts).model_copy(update={"allowables": (RMS, PEAK)})
    found = law_machines.agreed(brief, machines.mount(k=K, c=C), rel=2e-4)
    rms, peak = (row.value for row in found.margins if row.kind == "velocity")
    return rms, peak


def turning(name: str, me: float) -> RotatingUnbalance:
    return machines.unbalance(me, name=name, shaft=name)


def test_fixed_tones_at_different_frequencies_add_as_mean_squares() -> None:
    # Parseval: the mean square of a sum of sinusoids of different frequency is the sum of their mean squares.
    one, two = speed_of(12.0, 20.0), speed_of(19.0, 30.0)
    rms, peak = judged(machines.force(12.0, 20.0, name="a"), machines.force(19.0, 30.0, name="b"))
    assert rms == pytest.approx(math.sqrt((one**2 + two**2) / 2.0), rel=1e-6)
    assert peak == pytest.approx(one + two, rel=1e-6)
    time = np.linspace(0.0, 1.0, 10_000, endpoint=False)
    signal = one * np.sin(TWO_PI * 12.0 * time + 0.7) + two * np.sin(TWO_PI * 19.0 * time)
    assert rms == pytest.approx(math.sqrt(np.mean(signal**2)), rel=1e-6)


def test_fixed_tones_at_one_frequency_add_linearly() -> None:
    rms, _ = judged(machines.force(12.0, 20.0, name="a"), machines.force(12.0, 30.0, name="b"))
    assert rms == pytest.approx(speed_of(12.0, 50.0) / math.sqrt(2.0), rel=1e-6)


def test_two_shafts_at_one_speed_add_linearly() -> None:
    # 12 Hz of one machine and 12 Hz of the other: in step they are one source of twice the force.
    at = speed_of(12.0, 2e-3 * (TWO_PI * 12.0) ** 2)
    rms, _ = judged(turning("a", 2e-3), turning("b", 2e-3), shafts={"a": (12.0, 12.0), "b": (12.0, 12.0)})
    assert rms == pytest.approx(2.0 * at / math.sqrt(2.0), rel=1e-6)
    # A shaft that can come to the frequency of a fixed tone.
    rms, _ = judged(turning("a", 2e-3), machines.force(12.0, 20.0), shafts={"a": (10.0, 12.0)})
    top = max(speed_of(f, 2e-3 * (TWO_PI * f) ** 2) for f in np.linspace(10.0, 12.0, 201))
    assert rms == pytest.approx((top + speed_of(12.0, 20.0)) / math.sqrt(2.0), rel=1e-4)


def test_shafts_that_cannot_meet_add_as_mean_squares() -> None:
    at = [speed_of(f, 2e-3 * (TWO_PI * f) ** 2) for f in (12.0, 20.0)]
    rms, _ = judged(turning("a", 2e-3), turning("b", 2e-3), shafts={"a": (12.0, 12.0), "b": (20.0, 20.0)})
    assert rms == pytest.approx(math.hypot(*at) / math.sqrt(2.0), rel=1e-6)


@pytest.mark.parametrize(("second", "linear"), [(12.0, True), (12.6, False)])
def test_a_band_holds_tones_that_meet_as_their_sum(second: float, linear: bool) -> None:
    # Both in the band of 12.5 Hz, 11.22 to 14.13 Hz.
    limit = BandLimit(at="P", direction="z", centres=(12.5,), velocity_rms=(1.0,))
    shafts = {"a": (12.0, 12.0), "b": (second, second)}
    brief = machines.one_axis(MASS, (turning("a", 2e-3), turning("b", 2e-3)), shafts=shafts)
    brief = brief.model_copy(update={"allowables": (limit,)})
    found = law_machines.agreed(brief, machines.mount(k=K, c=C), rel=1e-4)
    one, two = (speed_of(f, 2e-3 * (TWO_PI * f) ** 2) for f in (12.0, second))
    expected = (one + two if linear else math.hypot(one, two)) / math.sqrt(2.0)
    assert machines.value(found, "band-limit") == pytest.approx(expected, rel=1e-4)


def family(low: float, high: float, *orders: float) -> Family:
    loads = tuple((Load("x", order, np.zeros(1, dtype=complex), None, 0),) for order in orders)
    return Family(f"{low}-{high}", low, high, loads)


def test_which_families_can_meet() -> None:
    bands = [family(10.0, 12.0, 1.0), family(12.0, 15.0, 1.0), family(15.0, 19.0, 1.0)]
    assert len(set(meeting(bands))) == 3
    assert len(set(meeting([*bands, family(12.0, 12.0, 1.0)]))) == 2
    # The second order of 6 to 7 Hz, and a chain that links the first with the last.
    assert len(set(meeting([family(6.0, 7.0, 1.0, 2.0), family(13.0, 16.0, 1.0)]))) == 1
    assert len(set(meeting([family(1.0, 3.0, 1.0), family(5.0, 8.0, 1.0), family(2.0, 6.0, 1.0)]))) == 1
    assert meeting([]) == ()
