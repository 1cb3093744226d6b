"""Response curves against the closed forms of one mass on one spring (press.py)."""

import math

import numpy as np
import pytest

from detune.report.response_data import ResponseCurve, response_curves
from detune.report.service_loads import service_loads
from report import press

K, ETA = press.STIFFNESS["teasel-a"], press.LOSS["teasel-a"]


def curves_of(result, kind: str, condition: str) -> list[ResponseCurve]:
    curves = response_curves(result.study.brief, result.answer)
    return [c for c in curves if c.row.kind == kind and c.row.condition == condition]


def test_curves_follow_the_closed_forms_inside_and_outside_the_range(result):
    (velocity,) = curves_of(result, "velocity", "running")
    (force,) = curves_of(result, "transmitted-force", "running")
    assert (velocity.low, velocity.high) == (20.0, 30.0)
    assert velocity.is_shaft and velocity.source == "spindle" and not velocity.passage
    assert velocity.speed[0] < 5.0 and velocity.speed[-1] > 30.0
    expected = [press.velocity(f, K, ETA) for f in velocity.speed]
    np.testing.assert_allclose(velocity.value, expected, rtol=1e-9)
    np.testing.assert_allclose(force.value, [press.force(f, K, ETA) for f in force.speed], rtol=1e-9)
    assert velocity.limit == pytest.approx(0.012)


def test_the_largest_value_inside_is_the_judged_one(result):
    for curve in response_curves(result.study.brief, result.answer):
        assert curve.value[curve.inside].max() == pytest.approx(curve.row.value, rel=1e-6)
    (start,) = curves_of(result, "displacement", "start")
    top = start.speed[start.value.argmax()]
    assert start.value.max() == pytest.approx(press.peak_displacement(ETA), rel=1e-6)
    assert top == pytest.approx(press.natural_frequency(K) * math.sqrt(1.0 + ETA**2), rel=1e-3)


def test_a_second_source_is_added_so_that_the_maximum_stays_the_judged_one(variant):
    more = """
[[forcing]]
kind = "harmonic-force"
name = "pump"
conditions = ["running"]
position = ["0 m", "0 m", "0.2 m"]
force = ["0 N", "0 N", "100 N"]
frequency = "25 Hz"
"""
    result = variant(('limit = "12 mm/s"', 'limit = "20 mm/s"'), more=more)
    curves = curves_of(result, "velocity", "running")
    # The pump alone, by hand: F w / |k (1 + j eta) - m w^2| at 25 Hz.
    omega = 2.0 * math.pi * 25.0
    pump = 100.0 * omega / abs(K * (1.0 + 1j * ETA) - press.MASS * omega**2)
    total = press.velocity(30.0, K, ETA) + pump
    assert len(curves) == 2
    for curve in curves:
        assert curve.row.value == pytest.approx(total, rel=1e-6)
        assert curve.value[curve.inside].max() == pytest.approx(total, rel=1e-6)
    shaft = next(c for c in curves if c.is_shaft)
    np.testing.assert_allclose(
        shaft.value, [press.velocity(f, K, ETA) + pump for f in shaft.speed], rtol=1e-6
    )


def test_a_condition_in_a_state_is_drawn_in_that_state(variant):
    more = """
[[state]]
name = "cold"
stiffness_factor = 1.5

[[condition]]
name = "cold start"
steady = false
state = "cold"
shafts = { spindle = ["120 rpm", "1200 rpm"] }
"""
    result = variant(('conditions = ["start"]', 'conditions = ["start", "cold start"]'), more=more)
    (cold,) = curves_of(result, "displacement", "cold start")
    np.testing.assert_allclose(
        cold.value, [press.displacement(f, 1.5 * K, ETA) for f in cold.speed], rtol=1e-9
    )


def test_a_passage_is_marked_and_its_curve_is_the_steady_state(variant):
    shafts = 'steady = false\nshafts = { spindle = ["120 rpm", "1200 rpm"] }'
    # One design alone, since a passage is worked out in time for each.
    result = variant(
        (shafts, shafts + '\nrun_up = { spindle = "1 s" }'),
        ('catalogs = ["small list"]', 'catalogs = ["small list"]\nparts = ["teasel-a"]'),
        ('steps = ["0 kg", "100 kg"]', 'steps = ["0 kg"]'),
    )
    (start,) = curves_of(result, "displacement", "start")
    assert start.passage
    assert start.row.value < press.peak_displacement(ETA)
    assert start.value.max() == pytest.approx(press.peak_displacement(ETA), rel=1e-3)


def test_forces_into_the_floor_and_movement_of_points(result):
    loads = {(x.condition, x.place, x.direction): x for x in service_loads(result.study.brief, result.answer)}
    assert loads[("running", "floor", "z")].value == pytest.approx(press.force(20.0, K, ETA), rel=1e-6)
    assert loads[("running", "floor", "z")].frequency == pytest.approx(20.0)
    assert loads[("start", "table", "z")].value == pytest.approx(press.peak_displacement(ETA), rel=1e-5)
    assert loads[("running", "floor", "x")].value == 0.0
