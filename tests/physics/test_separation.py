"""Separation of natural frequencies from excitation intervals."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.physics.separation import least_separation, separation


def test_above_and_below():
    # In the wording of the trade, by the excitation frequency: 30 Hz over 25 Hz is 20 %, 16 Hz under 20 Hz is 20 %.
    np.testing.assert_allclose(separation([30.0, 16.0], 20.0, 25.0), [0.2, 0.2])


def test_edges_inside_and_middle():
    assert separation(20.0, 20.0, 25.0) == pytest.approx(0.0, abs=1e-15)
    assert separation(25.0, 20.0, 25.0) == pytest.approx(0.0, abs=1e-15)
    # Least at 2 * 20 * 25 / 45 Hz: 1 - 50/45 = -1/9.
    inside = separation(np.linspace(20, 25, 5001), 20.0, 25.0)
    assert inside.min() == pytest.approx(-1 / 9, abs=1e-4)
    assert np.linspace(20, 25, 5001)[inside.argmin()] == pytest.approx(1000 / 45, abs=1e-3)


def test_single_frequency():
    np.testing.assert_allclose(separation([40.0, 50.0, 60.0], 50.0, 50.0), [0.2, 0.0, 0.2], atol=1e-15)


def test_from_standstill():
    np.testing.assert_allclose(separation([0.0, 10.0, 30.0], 0.0, 25.0), [-1.0, -0.6, 0.2])


@settings(deadline=None, max_examples=60)
@given(st.floats(0.1, 100), st.floats(0.1, 100), st.floats(0.0, 300), st.floats(1e-6, 1.0))
def test_continuous_and_of_the_right_sign(first, second, frequency, step):
    low, high = sorted([first, second])
    here, next_to_it = separation([frequency, frequency + step], low, high)
    assert abs(next_to_it - here) <= step / low * (1 + 1e-9) + 1e-12
    outside = frequency < low or frequency > high
    assert here >= -1e-12 if outside else here <= 1e-12


def test_least_over_modes_and_intervals():
    # Modes 10 and 40 Hz; intervals [16, 25] and [32, 50]: 40 Hz is inside the second by 1 - 40/32 or 40/50 - 1 = -0.2.
    assert least_separation([10.0, 40.0], [[16.0, 25.0]]) == pytest.approx(0.375)
    assert least_separation([10.0, 40.0], [[16.0, 25.0], [32.0, 50.0]]) == pytest.approx(-0.2)
    batch = least_separation(np.array([[10.0, 40.0], [12.0, 80.0]]), [[16.0, 25.0], [32.0, 50.0]])
    np.testing.assert_allclose(batch, [-0.2, 0.25])


def test_nothing_to_keep_away_from():
    assert least_separation([10.0], np.zeros((0, 2))) == np.inf


@pytest.mark.parametrize("wrong", [(-1.0, 5.0), (6.0, 5.0), (0.0, 0.0), (np.nan, 5.0)])
def test_faults(wrong):
    with pytest.raises(ValueError, match="interval"):
        separation(10.0, *wrong)
