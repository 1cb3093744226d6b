"""Harmonic response of many freedoms. CHECKS X1, X2, P3 to P6, P8 and ellipses of phased axes."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.physics.damping import relaxation_stiffness
from detune.physics.envelope import supremum
from detune.physics.modes import damped_poles
from detune.physics.orientation import rotation_about, six_axis_rotation
from detune.physics.response import (
    dynamic_stiffness,
    ellipse_major,
    ellipse_minor,
    energy_balance,
    mean_power,
    solve_response,
)
from detune.physics.rigid_body import attachment, box_inertia, mass_matrix

quick = settings(deadline=None, max_examples=40)
seeds = st.integers(0, 2**32 - 1)


def machine(seed):
    """Six-axis machine on five mounts with loss factors and dashpots, not proportional: M, K, H, C."""
    rng = np.random.default_rng(seed)
    mass = rng.uniform(100, 1000)
    m = mass_matrix(mass, rng.normal(0, 0.1, 3), box_inertia(mass, rng.uniform(0.4, 2.0, 3)))
    b = attachment(
        np.concatenate([rng.normal(0, 0.2, (1, 3)), [[1, 1, -1], [1, -1, 0], [-1, 1, 0], [-1, -1, -1]]])
    )
    each = np.exp(rng.uniform(np.log(2e4), np.log(8e5), (5, 3)))
    k, h, c = (
        np.einsum("sai,sa,saj->ij", b, each * share, b)
        for share in (np.ones((5, 3)), rng.uniform(0, 0.2, (5, 3)), rng.uniform(0, 2e-3, (5, 3)))
    )
    return m, k, h, c


def state_space(m, k, c):
    n = len(m)
    a = np.zeros((2 * n, 2 * n))
    a[:n, n:] = np.eye(n)
    a[n:, :n] = -np.linalg.solve(m, k)
    a[n:, n:] = -np.linalg.solve(m, c)
    return a, np.concatenate([np.zeros((n, n)), np.linalg.inv(m)])


class TestAgainstOthers:
    # Its way through polynomials warns of its own conditioning; four states still agree.
    @pytest.mark.filterwarnings("ignore::scipy.signal.BadCoefficients")
    def test_two_freedoms_with_absorber_against_scipy(self):
        # X1: scipy.signal.StateSpace and freqresp, seven frequencies, 1e-9 relative.
        signal = pytest.importorskip("scipy.signal")
        m, k2, c2 = np.diag([20.0, 1.0]), 900.0, 6.0
        k = np.array([[2e4 + k2, -k2], [-k2, k2]])
        c = np.array([[30.0 + c2, -c2], [-c2, c2]])
        a, b = state_space(m, k, c)
        omega = np.array([5.0, 20.0, 28.0, 31.0, 33.0, 40.0, 90.0])
        system = signal.StateSpace(a, b[:, :1], [[1.0, 0, 0, 0]], [[0.0]])
        _, reference = signal.freqresp(system, omega)
        q = solve_response(dynamic_stiffness(m, k, 0 * k, c, omega), np.array([1.0, 0.0]))
        np.testing.assert_allclose(q[:, 0], reference, rtol=1e-9)

    @pytest.mark.parametrize("seed", range(5))
    def test_six_axes_against_python_control(self, seed):
        # X2: ct.ss(A, B, C, D)(1j w), all 36 receptances; and the largest singular value over all frequencies for one
        # input and output against the envelope.
        control = pytest.importorskip("control")
        m, k, _, c = machine(seed)
        a, b = state_space(m, k, c)
        system = control.ss(a, b, np.eye(6, 12), np.zeros((6, 6)))
        for omega in (10.0, 47.0, 120.0, 300.0):
            dynamic = dynamic_stiffness(m, k, 0 * k, c, omega)
            found = solve_response(dynamic, np.eye(6, dtype=complex))
            reference = system(1j * omega)
            np.testing.assert_allclose(found, reference, atol=1e-10 * np.abs(reference).max())

    @pytest.mark.parametrize("seed", [0, *(pytest.param(s, marks=pytest.mark.nightly) for s in range(1, 8))])
    def test_peak_over_all_frequencies_against_python_control(self, seed):
        # X2: the H-infinity norm (a Hamiltonian bisection, nothing like a search over frequency).
        control = pytest.importorskip("control")
        m, k, _, c = machine(seed)
        a, b = state_space(m, k, c)
        reference = control.norm(control.ss(a, b[:, 2:3], np.eye(6, 12)[2:3], 0), p="inf")
        poles = damped_poles(m, c, 0 * k, k)
        found = supremum(
            lambda w: np.abs(
                solve_response(dynamic_stiffness(m, k, 0 * k, c, w), np.eye(6)[2])[None, ..., 2]
            ),
            0.0,
            2e3,
            poles.imag,
            -poles.real,
        )
        assert found.value[0, 0] == pytest.approx(reference, rel=1e-3)

    @quick
    @given(seeds)
    def test_modal_sum(self, seed):
        # With one loss factor for all mounts the response is the sum over undamped modes (any text).
        linalg = pytest.importorskip("scipy.linalg")
        m, k, _, _ = machine(seed)
        squares, shapes = linalg.eigh(k, m)
        omega, load = 60.0, np.random.default_rng(seed).normal(size=6)
        expected = shapes @ ((shapes.T @ load) / (squares * (1 + 0.08j) - omega**2))
        found = solve_response(dynamic_stiffness(m, k, 0.08 * k, 0 * k, omega), load)
        np.testing.assert_allclose(found, expected, rtol=1e-7, atol=1e-9 * np.abs(expected).max())


class TestTheorems:
    def test_energy_of_one_freedom(self):
        # P3: m 50, k 2e5, c 400, F 100 N, 12 Hz: 1.117564 mm, 1.420027 W both ways, 0.118336 J a cycle.
        omega = 2 * np.pi * 12
        q = solve_response(dynamic_stiffness([[50.0]], [[2e5]], [[0.0]], [[400.0]], omega), np.array([100.0]))
        assert abs(q[0]) == pytest.approx(1.117564e-3, abs=1e-9)
        given_, lost = energy_balance(omega, [[0.0]], [[400.0]], q, [100.0])
        assert given_ == pytest.approx(1.420027, abs=1e-6)
        assert lost == pytest.approx(1.420027, abs=1e-6)
        assert lost / 12 == pytest.approx(0.118336, abs=1e-6)
        assert np.pi * 400 * omega * abs(q[0]) ** 2 == pytest.approx(0.118336, abs=1e-6)

    def test_largest_power_of_one_freedom(self):
        # P3: F^2/(2 c) = 12.5 W at the natural frequency.
        omega = np.sqrt(2e5 / 50)
        q = solve_response(dynamic_stiffness([[50.0]], [[2e5]], [[0.0]], [[400.0]], omega), np.array([100.0]))
        assert mean_power([100.0], 1j * omega * q) == pytest.approx(12.5, rel=1e-12)

    @quick
    @given(seeds, st.floats(1.0, 600.0))
    def test_energy_balance(self, seed, omega):
        m, k, h, c = machine(seed)
        rng = np.random.default_rng(seed)
        load = rng.normal(size=6) + 1j * rng.normal(size=6)
        q = solve_response(dynamic_stiffness(m, k, h, c, omega), load)
        supplied, lost = energy_balance(omega, h, c, q, load)
        assert supplied == pytest.approx(lost, rel=1e-6)
        assert lost >= 0

    @quick
    @given(seeds, st.floats(1.0, 600.0))
    def test_reciprocity(self, seed, omega):
        # P4, damping not proportional.
        m, k, h, c = machine(seed)
        receptance = solve_response(dynamic_stiffness(m, k, h, c, omega), np.eye(6, dtype=complex))
        np.testing.assert_allclose(receptance, receptance.T, atol=1e-11 * np.abs(receptance).max())

    @quick
    @given(seeds, st.floats(1.0, 600.0))
    def test_passivity(self, seed, omega):
        # P5: the real part of the mobility matrix is positive semidefinite.
        m, k, h, c = machine(seed)
        mobility = 1j * omega * solve_response(dynamic_stiffness(m, k, h, c, omega), np.eye(6, dtype=complex))
        values = np.linalg.eigvalsh((mobility + mobility.conj().T) / 2)
        assert values[0] >= -1e-11 * np.abs(mobility).max()

    @quick
    @given(seeds, st.floats(0.01, 100.0))
    def test_scaling(self, seed, factor):
        # P8: mass, stiffness and damping times a divide the response by a; transmissibility stays.
        m, k, h, c = machine(seed)
        load = np.arange(1.0, 7.0)
        q = solve_response(dynamic_stiffness(m, k, h, c, 80.0), load)
        scaled = solve_response(dynamic_stiffness(factor * m, factor * k, factor * h, factor * c, 80.0), load)
        np.testing.assert_allclose(factor * scaled, q, rtol=1e-8, atol=1e-10 * np.abs(q).max())

    @quick
    @given(seeds, st.floats(-3.0, 3.0))
    def test_turned_axes(self, seed, angle):
        m, k, h, c = machine(seed)
        turn = six_axis_rotation(rotation_about([0.3, 1.0, -0.4], angle))
        load = np.arange(1.0, 7.0) + 0.5j
        q = solve_response(dynamic_stiffness(m, k, h, c, 80.0), load)
        turned = solve_response(
            dynamic_stiffness(*(turn @ a @ turn.T for a in (m, k, h, c)), 80.0), turn @ load
        )
        np.testing.assert_allclose(turned, turn @ q, atol=1e-9 * np.abs(q).max())
        assert ellipse_major(turned[:3]) == pytest.approx(ellipse_major(q[:3]), rel=1e-8)

    def test_kramers_kronig_of_the_relaxation_element(self):
        # P6: k1 = 1, k2 = 3, c = 2, w0 = 0.7: K_inf - K'(w0) = 2.463504 (integral 2.463502), sum rule 3.0. A constant
        # loss factor fails: its integral over ln w diverges instead of giving K_inf - K_0 = 0.
        grid = np.exp(np.linspace(np.log(1e-7), np.log(1e7), 40001))
        element = relaxation_stiffness(1.0, 2.0, 3.0, grid)
        assert np.real(relaxation_stiffness(1.0, 2.0, 3.0, 1e9)) == pytest.approx(4.0)
        total = 2 / np.pi * np.trapezoid(element.imag, np.log(grid))
        assert total == pytest.approx(3.0, rel=1e-6)
        at = relaxation_stiffness(1.0, 2.0, 3.0, 0.7)
        assert 4.0 - at.real == pytest.approx(2.463504, abs=1e-6)
        # Principal value: the integrand is finite at w0 once w0 K'' is taken off; samples stay off the point itself.
        off = np.exp(np.linspace(np.log(1e-7), np.log(1e7), 40000)) * 1.0000123
        integrand = (off * relaxation_stiffness(1.0, 2.0, 3.0, off).imag - 0.7 * at.imag) / (off**2 - 0.49)
        assert 2 / np.pi * np.trapezoid(integrand, off) == pytest.approx(2.463502, abs=2e-4)


class TestEllipse:
    def test_in_phase_is_the_plain_length(self):
        assert ellipse_major([3.0, 4.0, 12.0]) == pytest.approx(13.0)
        assert ellipse_minor(np.array([3.0, 4.0, 12.0]) * np.exp(0.7j)) == pytest.approx(0.0, abs=1e-7)

    def test_circle(self):
        # Quadrature: radius 2, not the root-sum-square 2.83 of the axis peaks.
        assert ellipse_major([2.0, 2.0j, 0.0]) == pytest.approx(2.0)
        assert ellipse_minor([2.0, 2.0j, 0.0]) == pytest.approx(2.0)

    @quick
    @given(seeds)
    def test_against_the_motion_itself(self, seed):
        rng = np.random.default_rng(seed)
        v = rng.normal(size=(4, 3)) + 1j * rng.normal(size=(4, 3))
        turn = np.exp(1j * np.linspace(0, 2 * np.pi, 4001))
        length = np.linalg.norm(np.real(v[:, None, :] * turn[:, None]), axis=-1)
        np.testing.assert_allclose(ellipse_major(v), length.max(axis=1), rtol=1e-5)
        np.testing.assert_allclose(ellipse_minor(v), length.min(axis=1), rtol=1e-3, atol=3e-3)
        square = np.sum(np.abs(v) ** 2, axis=-1)
        np.testing.assert_allclose(ellipse_major(v) ** 2 + ellipse_minor(v) ** 2, square, rtol=1e-12)


class TestShapes:
    def test_designs_by_frequencies(self):
        parts = [machine(seed) for seed in range(3)]
        m, k, h, c = (np.stack([part[i] for part in parts])[:, None] for i in range(4))
        omega = np.linspace(10.0, 200.0, 12).reshape(3, 4)
        q = solve_response(dynamic_stiffness(m, k, h, c, omega), np.arange(6.0))
        assert q.shape == (3, 4, 6)
        single = solve_response(dynamic_stiffness(*parts[2], omega[2, 1]), np.arange(6.0))
        np.testing.assert_allclose(q[2, 1], single, rtol=1e-9)

    def test_several_loads_have_as_many_axes_as_the_matrix(self):
        m, k, h, c = machine(1)
        dynamic = dynamic_stiffness(m, k, h, c, np.array([30.0, 50.0]))
        loads = np.zeros((1, 6, 2))
        loads[0, 2, 0] = loads[0, 4, 1] = 1.0
        q = solve_response(dynamic, loads)
        assert q.shape == (2, 6, 2)
        np.testing.assert_allclose(q[..., 1], solve_response(dynamic, loads[0, :, 1]), rtol=1e-12)

    def test_a_load_for_each_frequency(self):
        m, k, h, c = machine(1)
        dynamic = dynamic_stiffness(m, k, h, c, np.array([30.0, 50.0]))
        loads = np.eye(6)[:2]
        np.testing.assert_allclose(
            solve_response(dynamic, loads)[1], solve_response(dynamic[1], loads[1]), rtol=1e-12
        )

    def test_undamped_at_resonance_is_refused(self):
        with pytest.raises(np.linalg.LinAlgError):
            solve_response(dynamic_stiffness([[1.0]], [[4.0]], [[0.0]], [[0.0]], 2.0), [1.0])
