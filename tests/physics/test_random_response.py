"""Variance of random response against Lyapunov equations, quadrature and python-control. CHECKS sections 4 and 9."""

from collections.abc import Callable
from itertools import pairwise

import control
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.linalg import solve_continuous_lyapunov

from detune.physics import random_response
from detune.physics.array_types import ComplexArray, FloatArray
from detune.physics.random_response import QuadratureNotConverged, variance
from detune.physics.spectra import PowerSpectralDensity, mean_square

WIDE = PowerSpectralDensity(np.array([1e-7, 1e6]), np.array([1.0, 1.0]))


def oscillators(omega_n: FloatArray, ratio: FloatArray) -> Callable[[FloatArray], ComplexArray]:
    """Rows: deflection per base acceleration, absolute acceleration per base acceleration, velocity of deflection."""

    def transfer(omega: FloatArray) -> ComplexArray:
        w, z = omega_n[:, None], ratio[:, None]
        bottom = w**2 - omega**2 + 2j * z * w * omega
        return np.stack([-1.0 / bottom, (w**2 + 2j * z * w * omega) / bottom, -1j * omega / bottom])

    return transfer


def test_r1_one_oscillator_against_lyapunov_and_miles() -> None:
    # R1, Miles 1954: 100 Hz, Q = 10, 0.1 g2/Hz over all frequencies: 12.533141 g pseudo, 12.595651 g absolute,
    # 0.311330 mm rms deflection. The band here ends at 1 MHz, where the damper still passes a little.
    g = 9.80665
    omega, ratio = np.array([2.0 * np.pi * 100.0]), np.array([0.05])
    flat = PowerSpectralDensity(WIDE.frequency, 0.1 * WIDE.density)
    found = variance(oscillators(omega, ratio), flat, omega[:, None], (ratio * omega)[:, None], 1e-8)
    assert np.sqrt(found[0, 0]) * omega[0] ** 2 == pytest.approx(12.533141, rel=1e-6)
    assert np.sqrt(found[0, 0]) * g == pytest.approx(0.311330e-3, rel=1e-5)
    assert np.sqrt(found[1, 0]) == pytest.approx(12.595651, rel=1e-5)
    # Lyapunov: state (z, z'), noise intensity S/2 for a one-sided density in Hz.
    a = np.array([[0.0, 1.0], [-(omega[0] ** 2), -2.0 * 0.05 * omega[0]]])
    p = solve_continuous_lyapunov(a, -np.diag([0.0, 0.05]))
    c = np.array([-(omega[0] ** 2), -2.0 * 0.05 * omega[0]])
    assert np.sqrt(c @ p @ c) == pytest.approx(12.595651, abs=1e-6)
    assert found[2, 0] == pytest.approx(p[1, 1], rel=1e-5)


@pytest.mark.parametrize("ratio", [0.002, 0.02, 0.3, 0.9])
def test_x5_white_noise_variance_at_any_damping(ratio: float) -> None:
    # X5 and the figure of issue B: 1e-4 down to a damping ratio of 0.002; exact variance S/(8 z w^3) for deflection
    # under a one-sided density S in Hz (Crandall and Mark 1963, two-sided pi S0/(2 z w^3) with S0 = S/(4 pi)).
    omega, z = np.array([37.0]), np.array([ratio])
    pole = -z * omega + 1j * omega * np.sqrt(1.0 - z**2)
    found = variance(oscillators(omega, z), WIDE, pole.imag[:, None], -pole.real[:, None], 1e-6)
    assert found[0, 0] == pytest.approx(1.0 / (8.0 * ratio * 37.0**3), rel=1e-6)


def test_band_limited_segment_spectrum_against_adaptive_quadrature() -> None:
    # Independent quadrature: scipy.integrate.quad on the real axis with the resonance as a break point.
    points = np.array([4.0, 16.0, 40.0, 80.0, 200.0])
    level = np.array([0.01, 0.01, 0.001, 0.001, 1e-5])
    spectrum = PowerSpectralDensity(points, level)
    omega, ratio = 2.0 * np.pi * np.array([9.0, 16.0, 55.0, 300.0]), np.array([0.002, 0.01, 0.05, 0.1])
    found = variance(oscillators(omega, ratio), spectrum, omega[:, None], (ratio * omega)[:, None])
    for i in range(4):

        def power(f: float, i: int = i) -> float:
            w = 2.0 * np.pi * f
            bottom = omega[i] ** 2 - w**2 + 2j * ratio[i] * omega[i] * w
            density = float(np.exp(np.interp(np.log(f), np.log(points), np.log(level))))
            return float(density / abs(bottom) ** 2)

        corner = sorted({*points.tolist(), *(x for x in (omega[i] / (2 * np.pi),) if 4.0 < x < 200.0)})
        total = sum(quad(power, a, b, epsrel=1e-10, limit=400)[0] for a, b in pairwise(corner))
        assert found[0, i] == pytest.approx(total, rel=1e-6)


def random_machine(rng: np.random.Generator, count: int = 6) -> tuple[FloatArray, FloatArray, FloatArray]:
    root = rng.normal(size=(count, count))
    mass = root @ root.T / count + np.eye(count)
    root = rng.normal(size=(count, count))
    stiffness = 4e3 * (root @ root.T / count + 0.3 * np.eye(count))
    root = rng.normal(size=(count, count))
    return mass, 0.6 * (root @ root.T / count + 0.1 * np.eye(count)), stiffness


def test_x5_six_axis_machines_in_one_batch_against_lyapunov() -> None:
    # Non-proportional damping, close modes: 20 machines at once against solve_continuous_lyapunov, one by one.
    rng = np.random.default_rng(7)
    machines = [random_machine(rng) for _ in range(20)]
    states, force = [], rng.normal(size=6)
    for m, c, k in machines:
        inverse = np.linalg.inv(m)
        states.append(np.block([[np.zeros((6, 6)), np.eye(6)], [-inverse @ k, -inverse @ c]]))
    poles = np.array([sorted(np.linalg.eigvals(a), key=lambda p: -p.imag)[:6] for a in states])

    def transfer(omega: FloatArray) -> ComplexArray:
        m, c, k = (np.stack([machine[i] for machine in machines])[:, None] for i in range(3))
        w = omega[..., None, None]
        return np.moveaxis(np.linalg.solve(k + 1j * w * c - w**2 * m, force[:, None])[..., 0], -1, 0)

    found = variance(transfer, WIDE, poles.imag, -poles.real)
    for i, ((m, _, _), a) in enumerate(zip(machines, states, strict=True)):
        load = np.r_[np.zeros(6), np.linalg.solve(m, force)]
        covariance = solve_continuous_lyapunov(a, -0.5 * np.outer(load, load))
        assert found[:, i] == pytest.approx(np.diag(covariance)[:6], rel=1e-4)


def test_x2_against_the_h2_norm_of_python_control() -> None:
    # X2: ct.norm(sys, 2)^2 is the variance under noise of unit intensity, twice the one-sided density of 1.
    a = np.array([[0, 0, 1, 0], [0, 0, 0, 1], [-300.0, 100.0, -0.4, 0.1], [50.0, -80.0, 0.05, -0.2]])
    system = control.ss(a, [[0], [0], [1], [0.5]], [[1.0, -2.0, 0, 0]], [[0]])
    poles = np.linalg.eigvals(a)[np.linalg.eigvals(a).imag > 0]

    def transfer(omega: FloatArray) -> ComplexArray:
        return np.asarray(system(1j * omega.ravel(), squeeze=True)).reshape(1, *omega.shape)

    found = variance(transfer, WIDE, poles.imag[None], -poles.real[None])
    assert found[0, 0] == pytest.approx(0.5 * control.norm(system, 2) ** 2, rel=1e-4)


@settings(deadline=None, max_examples=40)
@given(
    ratio=st.floats(0.002, 0.5),
    frequency=st.floats(0.5, 300.0),
    wrong=st.floats(0.2, 5.0),
)
def test_wrong_poles_cost_points_and_not_accuracy(ratio: float, frequency: float, wrong: float) -> None:
    # Half widths wrong by up to a factor 5, and no pole at all against the right pole.
    spectrum = PowerSpectralDensity(np.array([1.0, 20.0, 20.0, 200.0]), np.array([1e-4, 0.1, 0.02, 1e-3]))
    omega, z = np.array([2.0 * np.pi * frequency]), np.array([ratio])
    transfer = oscillators(omega, z)
    right = variance(transfer, spectrum, omega[:, None], (z * omega)[:, None], 1e-7)
    off = variance(transfer, spectrum, omega[:, None], wrong * (z * omega)[:, None], 1e-4)
    assert off == pytest.approx(right, rel=1e-4)


def test_unit_transfer_gives_the_mean_square_of_the_spectrum() -> None:
    spectrum = PowerSpectralDensity(
        np.array([1, 4, 16, 16, 40, 80, 200.0]), np.array([5e-5, 0.01, 0.01, 0.02, 0.001, 0.001, 1e-5])
    )
    found = variance(lambda w: np.ones((1, *w.shape), complex), spectrum, [[60.0]], [[0.5]], 1e-6)
    assert found[0, 0] == pytest.approx(mean_square(spectrum), rel=1e-6)


def test_a_gap_in_the_spectrum_counts_nothing() -> None:
    spectrum = PowerSpectralDensity(
        np.array([2.0, 4.0, 4.0, 8.0, 8.0, 16.0]), np.array([1.0, 1.0, 0.0, 0.0, 3.0, 3.0])
    )
    found = variance(lambda w: np.ones((1, *w.shape), complex), spectrum, [[30.0]], [[0.1]])
    assert found[0, 0] == pytest.approx(2.0 + 24.0, rel=1e-6)


def test_an_undamped_pole_is_refused_and_an_unannounced_feature_is_not_passed_over() -> None:
    with pytest.raises(ValueError, match="undamped resonance"):
        variance(oscillators(np.array([5.0]), np.array([0.0])), WIDE, [[5.0]], [[0.0]])
    rng = np.random.default_rng(2)

    def noisy(omega: FloatArray) -> ComplexArray:
        return np.asarray(rng.normal(size=(1, *omega.shape)) + 0j)

    with pytest.raises(QuadratureNotConverged, match=r"designs \[0\]"):
        variance(noisy, PowerSpectralDensity(np.array([1.0, 2.0]), np.array([1.0, 1.0])), [[9.0]], [[0.1]])


def test_quadrature_rules_have_their_degrees() -> None:
    # Kronrod 15 integrates powers to 22, the Gauss 7 inside it to 13; Kronrod 7 to 10 and Gauss 3 to 5.
    for rule, kronrod, gauss in ((random_response.LONG_RULE, 22, 12), (random_response.SHORT_RULE, 10, 4)):
        node, better, worse = rule
        for power in range(0, kronrod + 1, 2):
            assert better @ node**power == pytest.approx(2.0 / (power + 1), abs=1e-15)
        for power in range(0, gauss + 1, 2):
            assert worse @ node**power == pytest.approx(2.0 / (power + 1), abs=1e-15)
        assert abs(worse @ node ** (gauss + 2) - 2.0 / (gauss + 3)) > 1e-6


def test_points_for_each_design_stay_few_at_light_damping() -> None:
    # The substitution makes the count nearly independent of damping: about 60 points a pole.
    rng = np.random.default_rng(0)
    omega, ratio = 2.0 * np.pi * rng.uniform(3.0, 60.0, (50, 6)), np.full((50, 6), 0.002)
    shapes = rng.normal(size=(4, 50, 6))
    columns: list[int] = []

    def transfer(w: FloatArray) -> ComplexArray:
        columns.append(w.shape[1])
        modal = 1.0 / (
            omega[:, :, None] ** 2 - w[:, None] ** 2 + 2j * ratio[..., None] * omega[..., None] * w[:, None]
        )
        return np.einsum("rdm,dmf->rdf", shapes, modal)

    spectrum = PowerSpectralDensity(
        np.array([1, 4, 16, 40, 80, 200.0]), np.array([5e-5, 0.01, 0.01, 1e-3, 1e-3, 1e-5])
    )
    variance(transfer, spectrum, omega, ratio * omega)
    assert sum(columns) <= 480
