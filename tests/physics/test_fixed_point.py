"""Many fixed points at once against closed forms and scipy's root finder."""

import numpy as np
import pytest
from scipy.optimize import brentq

from detune.physics.fixed_point import fixed_points


def test_straight_maps_of_every_slope_settle() -> None:
    # a = 1 + s (a - 1) has the one root 1 for every slope s below 1; plain iteration diverges below s = -1.
    slope = np.array([0.9, 0.5, 0.0, -0.5, -0.99, -1.0, -3.0, -20.0, -60.0])
    found = fixed_points(
        lambda a, i: np.maximum(1.0 + slope[i] * (a - 1.0), 0.0), np.full((1, slope.size), 0.2)
    )
    assert found.settled.all()
    assert found.value[0] == pytest.approx(np.ones(slope.size), rel=1e-6)


def test_columns_do_not_disturb_each_other() -> None:
    # a = cos a (0.7390851, the Dottie number) beside a pair of coupled values.
    def step(a: np.ndarray, index: np.ndarray) -> np.ndarray:
        turned = np.stack([np.cos(a[0]), 0.5 * a[0] + 0.1])
        return np.where(index == 0, turned, 2.0 * turned)

    found = fixed_points(step, np.zeros((2, 2)))
    dottie = brentq(lambda a: np.cos(a) - a, 0.0, 1.0, xtol=1e-14)
    doubled = brentq(lambda a: 2.0 * np.cos(a) - a, 0.0, 2.0, xtol=1e-14)
    assert found.value[0] == pytest.approx([dottie, doubled], rel=1e-7)
    assert found.value[1] == pytest.approx([0.5 * dottie + 0.1, doubled + 0.2], rel=1e-7)


def test_a_map_without_a_root_is_told() -> None:
    found = fixed_points(lambda a, _: a + 1.0, np.ones((1, 2)), most_rounds=50)
    assert not found.settled.any()
    # From either side of an unstable root: each goes to its own end.
    ends = fixed_points(lambda a, _: a**2, np.array([[0.9, 0.0]]))
    assert ends.settled.all() and ends.value[0] == pytest.approx([0.0, 0.0], abs=1e-8)
