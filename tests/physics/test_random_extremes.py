"""Extremes of Gaussian responses, resultants, Miles. Ids are those of CHECKS, section 4."""

from itertools import pairwise

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.optimize import minimize_scalar
from scipy.stats import chi

from detune.physics.extremes import (
    covariance_of_polarised,
    expected_extreme,
    expected_extreme_factor,
    miles_absolute_acceleration,
    miles_pseudo_acceleration,
    polarised_rows,
    resultant_exceedance,
    resultant_level,
    zero_crossing_rate,
)


def test_r1_trap_miles_relative_and_absolute() -> None:
    # R1, Miles 1954: sqrt(pi/2 f Q S) = 12.533141 g is exact for the pseudo acceleration; the absolute one is
    # 12.595651 g, larger by sqrt(1 + 4 z^2).
    assert miles_pseudo_acceleration(100.0, 10.0, 0.1) == pytest.approx(12.533141, abs=1e-6)
    assert miles_absolute_acceleration(100.0, 10.0, 0.1) == pytest.approx(12.595651, abs=1e-6)


def test_r13_best_damping_in_white_base_acceleration() -> None:
    # R13, Crandall and Mark 1963: absolute acceleration is least at z = 0.5, where (1 + 4 z^2)/(4 z) = 1.
    def mean_square(z: float) -> float:
        return float(miles_absolute_acceleration(1.0, 1.0 / (2.0 * z), 1.0) ** 2 / (np.pi))

    best = minimize_scalar(mean_square, bounds=(0.1, 2.0), method="bounded", options={"xatol": 1e-9})
    assert best.x == pytest.approx(0.5, abs=1e-6)
    assert best.fun == pytest.approx(1.0, abs=1e-12)


def test_r13_davenport_extreme() -> None:
    # R13, Davenport 1964: f = 50 Hz, T = 60 s: u = 4.00159, u + 0.5772/u = 4.14584 (1e-5).
    assert expected_extreme_factor(50.0, 60.0) == pytest.approx(4.14584, abs=1e-5)
    assert np.sqrt(2.0 * np.log(50.0 * 60.0)) == pytest.approx(4.00159, abs=1e-5)


def test_expected_extreme_against_the_mean_of_the_poisson_extreme() -> None:
    # Independent: mean of the largest of a Poisson stream of peaks, P(max < a) = exp(-n exp(-a^2/2)), by quadrature.
    for cycles in (100.0, 3000.0, 1e6):
        mean, _ = quad(lambda a, n=cycles: 1.0 - np.exp(-n * np.exp(-0.5 * a * a)), 0.0, 12.0)
        assert expected_extreme_factor(1.0, cycles) == pytest.approx(mean, rel=0.01)


def test_few_cycles_are_counted_as_ten_and_both_signs_raise_the_extreme() -> None:
    assert expected_extreme_factor(0.1, 5.0) == expected_extreme_factor(1.0, 10.0)
    assert expected_extreme_factor(50.0, 60.0, 2) == pytest.approx(expected_extreme_factor(100.0, 60.0))
    with pytest.raises(ValueError, match="duration"):
        expected_extreme_factor(1.0, 0.0)
    with pytest.raises(ValueError, match="one side or two"):
        expected_extreme_factor(1.0, 1.0, 3)


def test_crossing_rate_of_a_narrow_band_is_its_frequency() -> None:
    # x = a cos(w t): velocity variance is w^2 times the variance.
    assert zero_crossing_rate(0.3, 0.3 * (2.0 * np.pi * 17.0) ** 2) == pytest.approx(17.0)
    assert zero_crossing_rate(0.0, 0.0) == 0.0
    # sigma 2 mm, 50 Hz, 30 s, both signs: 2 x 4.14584 mm.
    assert expected_extreme(4.0, 4.0 * (2 * np.pi * 50.0) ** 2, 30.0) == pytest.approx(2 * 4.14584, abs=2e-5)


def test_resultant_of_three_equal_axes_exceeds_three_sigma_2_9_percent() -> None:
    # DESIGN section 4: 2.9 %; scipy.stats.chi with three degrees of freedom: 0.0292909.
    assert resultant_exceedance(np.eye(3), 3.0) == pytest.approx(0.0292909, abs=1e-7)
    assert resultant_level(4.0 * np.eye(3), float(chi.sf(3.0, 3))) == pytest.approx(6.0, rel=1e-9)


@pytest.mark.parametrize("level", [0.5, 2.0, 4.5])
def test_resultant_of_fewer_axes_against_chi(level: float) -> None:
    turn, _ = np.linalg.qr(np.random.default_rng(1).normal(size=(3, 3)))
    flat = turn @ np.diag([1.0, 1.0, 0.0]) @ turn.T
    line = turn @ np.diag([1.0, 0.0, 0.0]) @ turn.T
    both = resultant_exceedance(np.stack([flat, line]), np.array([level, level]))
    assert both == pytest.approx([chi.sf(level, 2), chi.sf(level, 1)], abs=1e-6)


def test_resultant_of_unequal_axes_against_imhofs_integral() -> None:
    # J. P. Imhof, Biometrika 48 (1961) 419: distribution of a weighted sum of chi-squares, one oscillating integral.
    square, level = np.array([1.0, 0.25, 0.04]), 2.0

    def integrand(u: float) -> float:
        angle = 0.5 * np.sum(np.arctan(square * u)) - 0.5 * level**2 * u
        return float(np.sin(angle) / (u * np.prod((1.0 + (square * u) ** 2) ** 0.25)))

    edges = np.r_[1e-12, np.arange(1, 400) * 2.0]
    total = 0.5 + sum(quad(integrand, a, b)[0] for a, b in pairwise(edges)) / np.pi
    assert resultant_exceedance(np.diag(square), level) == pytest.approx(total, rel=1e-4)


def test_a_resultant_level_needs_sense() -> None:
    with pytest.raises(ValueError, match="between 0 and 1"):
        resultant_level(np.eye(3), 0.0)
    with pytest.raises(ValueError, match="above zero"):
        resultant_exceedance(np.eye(3), 0.0)


def test_covariance_from_variances_of_sums() -> None:
    # Numbers that a reader can check: samples of three correlated signals, numpy's covariance.
    signal = np.random.default_rng(8).normal(size=(3, 5000)) + np.random.default_rng(9).normal(size=5000)
    variances = np.var(polarised_rows(signal), axis=1)
    assert covariance_of_polarised(variances) == pytest.approx(np.cov(signal, bias=True), rel=1e-12)
    assert covariance_of_polarised(np.ones((6, 4))).shape == (4, 3, 3)
