"""Natural frequencies, names, participation, poles. CHECKS X3, P1, and properties."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.physics.modes import (
    amplification_at_mode,
    damped_poles,
    energy_shares,
    modal_loss_factors,
    mode_name,
    participation,
    undamped_frequencies,
    undamped_modes,
)
from detune.physics.orientation import rotation_about, six_axis_rotation
from detune.physics.rigid_body import attachment, box_inertia, mass_matrix
from detune.physics.unsupported import UnsupportedMachine

NAMES = ["x", "y", "z", "rx", "ry", "rz"]
quick = settings(deadline=None, max_examples=40)
seeds = st.integers(0, 2**32 - 1)


def machine(seed):
    """A box of 100 to 1000 kg, its centre off the middle, on four to six mounts of three axes each."""
    rng = np.random.default_rng(seed)
    mass, size = rng.uniform(100, 1000), rng.uniform(0.4, 2.0, 3)
    m = mass_matrix(mass, rng.normal(0, 0.1, 3), box_inertia(mass, size))
    stations = np.concatenate(
        [
            size / 2 * [[1, 1, -1], [1, -1, -1], [-1, 1, -1], [-1, -1, -1]],
            rng.normal(0, 0.5, (rng.integers(0, 3), 3)),
        ]
    )
    each = np.exp(rng.uniform(np.log(2e4), np.log(8e5), (len(stations), 3)))
    b = attachment(stations)
    k = np.einsum("sai,sa,saj->ij", b, each, b)
    h = np.einsum("sai,sa,saj->ij", b, each * rng.uniform(0.01, 0.2, each.shape), b)
    return m, k, h, (b, each)


class TestFrequencies:
    # P1, Meirovitch, Elements of Vibration Analysis, inclusion principle (recomputed).
    MASS = np.diag([10.0, 20.0, 15.0])
    STIFFNESS = np.array([[3.0, -1.0, 0.0], [-1.0, 2.5, -1.5], [0.0, -1.5, 2.0]]) * 1e4

    def test_three_masses(self):
        np.testing.assert_allclose(
            undamped_frequencies(self.MASS, self.STIFFNESS), [2.85519, 7.04931, 9.14235], atol=5e-6
        )

    def test_a_spring_to_ground_raises_and_interlaces(self):
        stiffer = self.STIFFNESS + np.diag([0, 1e4, 0])
        np.testing.assert_allclose(
            undamped_frequencies(self.MASS, stiffer), [3.78807, 7.33725, 9.26865], atol=5e-6
        )

    def test_mass_lowers(self):
        heavier = self.MASS + np.diag([0, 0, 5.0])
        np.testing.assert_allclose(
            undamped_frequencies(heavier, self.STIFFNESS), [2.67402, 6.53775, 9.11546], atol=5e-6
        )

    def test_locking_a_coordinate(self):
        locked = undamped_frequencies(self.MASS[:2, :2], self.STIFFNESS[:2, :2])
        np.testing.assert_allclose(locked, [5.03292, 9.07323], atol=5e-6)

    def test_resilient_supports_in_two_planes_of_symmetry(self):
        # X3, closed forms of Harris' Handbook ch. 3: heave, yaw, and two coupled pairs of sway and roll from
        # (r^2 - kx/kz..) i.e. roots of (kx - m w^2)(kr - J w^2) = (kx a)^2 with a the height of the supports.
        mass, kx, ky, kz, hx, hy, depth = 300.0, 4e4, 5e4, 9e4, 0.6, 0.4, -0.35
        inertia = np.array([20.0, 30.0, 35.0])
        b = attachment([[hx, hy, depth], [hx, -hy, depth], [-hx, hy, depth], [-hx, -hy, depth]])
        k = np.einsum("sai,a,saj->ij", b, [kx, ky, kz], b)
        found = (2 * np.pi * undamped_frequencies(mass_matrix(mass, np.zeros(3), np.diag(inertia)), k)) ** 2
        pairs = []
        for side, arm, j in ((ky, hy, inertia[0]), (kx, hx, inertia[1])):
            s, r = 4 * side, 4 * (kz * arm**2 + side * depth**2)
            half = (s / mass + r / j) / 2
            root = np.sqrt(half**2 - (s * r - (s * depth) ** 2) / (mass * j))
            pairs += [half - root, half + root]
        expected = np.sort([4 * kz / mass, 4 * (kx * hy**2 + ky * hx**2) / inertia[2], *pairs])
        np.testing.assert_allclose(found, expected, rtol=1e-12)

    @quick
    @given(seeds)
    def test_against_scipy(self, seed):
        # X3: scipy.linalg.eigh(K, M).
        linalg = pytest.importorskip("scipy.linalg")
        m, k, _, _ = machine(seed)
        frequency, shapes = undamped_modes(m, k)
        np.testing.assert_allclose(
            (2 * np.pi * frequency) ** 2, linalg.eigh(k, m, eigvals_only=True), rtol=1e-9
        )
        np.testing.assert_allclose(shapes.T @ m @ shapes, np.eye(6), atol=1e-9)
        np.testing.assert_allclose(
            shapes.T @ k @ shapes, np.diag((2 * np.pi * frequency) ** 2), rtol=1e-9, atol=1e-6
        )

    @quick
    @given(seeds)
    def test_one_more_spring_interlaces(self, seed):
        # Weyl and Cauchy: l_i <= l'_i <= l_(i+1) for one spring of one axis.
        m, k, _, _ = machine(seed)
        row = np.random.default_rng(seed).normal(size=6)
        before, after = undamped_frequencies(m, k), undamped_frequencies(m, k + 1e5 * np.outer(row, row))
        slack = 1e-9 * before[-1]
        assert np.all(after >= before - slack)
        assert np.all(after[:-1] <= before[1:] + slack)

    @quick
    @given(seeds)
    def test_stiffer_raises_heavier_lowers_locked_interlaces(self, seed):
        m, k, _, (b, each) = machine(seed)
        before = undamped_frequencies(m, k)
        slack = 1e-9 * before[-1]
        stiffer = np.einsum(
            "sai,sa,saj->ij", b, each * np.random.default_rng(seed).uniform(1, 1.5, each.shape), b
        )
        assert np.all(undamped_frequencies(m, stiffer) >= before - slack)
        ballast = mass_matrix(50.0, [0.2, 0.1, 0.3], box_inertia(50.0, [0.1, 0.2, 0.3]))
        assert np.all(undamped_frequencies(m + ballast, k) <= before + slack)
        locked = undamped_frequencies(m[1:, 1:], k[1:, 1:])
        assert np.all(locked >= before[:-1] - slack)
        assert np.all(locked <= before[1:] + slack)

    @quick
    @given(seeds, st.floats(0.01, 100.0))
    def test_scaling_and_turning(self, seed, factor):
        # P8: (m, k) times a, and turned axes, leave the frequencies as they are.
        m, k, _, _ = machine(seed)
        frequency = undamped_frequencies(m, k)
        np.testing.assert_allclose(undamped_frequencies(factor * m, factor * k), frequency, rtol=1e-9)
        np.testing.assert_allclose(undamped_frequencies(m, factor**2 * k), factor * frequency, rtol=1e-9)
        turn = six_axis_rotation(rotation_about([1.0, -2.0, 0.5], factor))
        np.testing.assert_allclose(
            undamped_frequencies(turn @ m @ turn.T, turn @ k @ turn.T), frequency, rtol=1e-9
        )

    @quick
    @given(seeds)
    def test_the_reference_point_does_not_matter(self, seed):
        rng = np.random.default_rng(seed)
        shift = rng.normal(0, 0.5, 3)
        inertia, stations, each = (
            box_inertia(200.0, [0.5, 0.7, 1.0]),
            rng.normal(0, 0.6, (5, 3)),
            rng.uniform(1e4, 1e5, 3),
        )
        found = []
        for origin in (np.zeros(3), shift):
            b = attachment(stations - origin)
            k = np.einsum("sai,a,saj->ij", b, each, b)
            found.append(undamped_frequencies(mass_matrix(200.0, [0.1, 0, 0.2] - origin, inertia), k))
        np.testing.assert_allclose(found[0], found[1], rtol=1e-8)

    def test_batches_of_either(self):
        pairs = [machine(seed) for seed in range(4)]
        m, k = (np.stack([pair[i] for pair in pairs]) for i in (0, 1))
        frequency, shapes = undamped_modes(m, k)
        assert frequency.shape == (4, 6)
        assert shapes.shape == (4, 6, 6)
        np.testing.assert_allclose(frequency[2], undamped_frequencies(m[2], k[2]), rtol=1e-12)
        np.testing.assert_allclose(
            undamped_frequencies(m[0], k)[3], undamped_frequencies(m[0], k[3]), rtol=1e-12
        )

    def test_free_directions_have_frequency_zero(self):
        frequency, _ = undamped_modes(np.eye(2), [[1.0, -1.0], [-1.0, 1.0]])
        np.testing.assert_allclose(frequency, [0.0, np.sqrt(2.0) / (2 * np.pi)], atol=1e-8)

    def test_negative_stiffness_is_refused(self):
        with pytest.raises(UnsupportedMachine, match="pushed away"):
            undamped_frequencies(np.eye(2), np.diag([1.0, -1e-3]))
        with pytest.raises(UnsupportedMachine, match="1 of 2 machines"):
            undamped_modes(np.eye(2), np.stack([np.eye(2), np.diag([1.0, -1e-3])]))

    def test_massless_freedom_is_refused(self):
        with pytest.raises(np.linalg.LinAlgError):
            undamped_frequencies(np.diag([1.0, 0.0]), np.eye(2))


class TestDampingOfModes:
    def test_loss_factor_of_one_material_is_that_of_every_mode(self):
        m, k, _, _ = machine(3)
        frequency, shapes = undamped_modes(m, k)
        eta = modal_loss_factors(shapes, 0.13 * k, 0 * k, frequency)
        np.testing.assert_allclose(eta, 0.13, rtol=1e-9)
        np.testing.assert_allclose(amplification_at_mode(eta), 1 / 0.13, rtol=1e-9)

    def test_viscous_mode_has_twice_its_damping_ratio(self):
        frequency, shapes = undamped_modes([[50.0]], [[2e5]])
        ratio = 400.0 / (2 * np.sqrt(2e5 * 50.0))
        assert modal_loss_factors(shapes, [[0.0]], [[400.0]], frequency)[0] == pytest.approx(2 * ratio)

    def test_limits(self):
        assert amplification_at_mode([0.0, np.inf]).tolist() == [np.inf, 0.0]
        frequency, shapes = undamped_modes([[1.0]], [[0.0]])
        assert modal_loss_factors(shapes, [[0.0]], [[1.0]], frequency)[0] == np.inf

    @quick
    @given(seeds)
    def test_between_the_least_and_the_largest_part(self, seed):
        m, k, h, (_b, _each) = machine(seed)
        frequency, shapes = undamped_modes(m, k)
        eta = modal_loss_factors(shapes, h, 0 * k, frequency)
        assert np.all(eta >= 0.01 - 1e-9)
        assert np.all(eta <= 0.2 + 1e-9)


class TestPoles:
    def test_viscous_single(self):
        # p = -z w +- j w sqrt(1 - z^2): w = 2, z = 0.6 -> -1.2 + 1.6 j.
        pole = damped_poles([[1.0]], [[2.4]], [[0.0]], [[4.0]])
        np.testing.assert_allclose(pole, [-1.2 + 1.6j], atol=1e-12)

    def test_hysteretic_single(self):
        # p^2 = -k (1 + j eta): Im p = w0 sqrt((1 + sqrt(1 + eta^2)) / 2).
        pole = damped_poles([[1.0]], [[0.0]], [[0.75 * 4]], [[4.0]])[0]
        assert pole**2 == pytest.approx(-4.0 * (1 + 0.75j))
        assert pole.imag == pytest.approx(2 * np.sqrt((1 + 1.25) / 2))
        assert pole.real < 0

    def test_overdamped_gives_the_slower_pole(self):
        # p^2 + 5 p + 4 = (p + 1)(p + 4).
        np.testing.assert_allclose(damped_poles([[1.0]], [[5.0]], [[0.0]], [[4.0]]), [-1.0], atol=1e-9)

    def test_coalescing_absorber(self):
        # Sadek and others, EESD 26 (1997) 617 (abstract): mu = .05, f = .952381, z2 = .218218 makes both modes one,
        # of decay .109109 and damping ratio .111803. A double root: half the digits. T10.
        mu, f, z2 = 0.05, 0.952381, 0.218218
        k2, c2 = mu * f**2, 2 * z2 * mu * f
        poles = damped_poles(
            np.diag([1.0, mu]), [[c2, -c2], [-c2, c2]], np.zeros((2, 2)), [[1 + k2, -k2], [-k2, k2]]
        )
        np.testing.assert_allclose(-poles.real, 0.109109, atol=2e-3)
        np.testing.assert_allclose(-poles.real / np.abs(poles), 0.111803, atol=2e-3)
        assert -poles.real.mean() == pytest.approx(0.109109, abs=1e-6)

    @quick
    @given(seeds)
    def test_poles_solve_the_equation_and_decay(self, seed):
        m, k, h, _ = machine(seed)
        rng = np.random.default_rng(seed)
        row = rng.normal(size=6)
        c = rng.uniform(0, 3e3) * np.outer(row, row)
        poles = damped_poles(m, c, h, k)
        assert np.all(poles.real < 0)
        assert np.all(np.diff(poles.imag) >= 0)
        for pole in poles:
            dynamic = pole**2 * m + pole * c + k + 1j * h
            values = np.linalg.svd(dynamic, compute_uv=False)
            assert values[-1] < 1e-9 * values[0]

    def test_lightly_damped_poles_are_the_modes(self):
        m, k, _, _ = machine(11)
        frequency, _shapes = undamped_modes(m, k)
        poles = damped_poles(m, 0 * k, 1e-3 * k, k)
        np.testing.assert_allclose(poles.imag, 2 * np.pi * frequency, rtol=1e-6)
        np.testing.assert_allclose(-poles.real, 0.5e-3 * 2 * np.pi * frequency, rtol=1e-5)

    def test_batches(self):
        parts = [machine(seed) for seed in range(3)]
        m, k, h = (np.stack([part[i] for part in parts]) for i in range(3))
        batch = damped_poles(m, 0 * k, h, k)
        np.testing.assert_allclose(batch[1], damped_poles(m[1], 0 * k[1], h[1], k[1]), rtol=1e-9)


class TestNamesAndParticipation:
    def test_symmetric_machine_has_pure_heave_and_yaw(self):
        m = mass_matrix(300.0, np.zeros(3), box_inertia(300.0, [1.2, 0.8, 0.9]))
        b = attachment(np.array([[1, 1, -1], [1, -1, -1], [-1, 1, -1], [-1, -1, -1]]) * [0.6, 0.25, 0.3])
        k = np.einsum("sai,a,saj->ij", b, [4e4, 5e4, 9e4], b)
        _, shapes = undamped_modes(m, k)
        names = [mode_name(shapes[:, i], NAMES, m) for i in range(6)]
        assert "heave" in names
        assert "yaw" in names
        # Supports below the centre couple sway with roll; surge and pitch stay apart, their arm being long.
        assert {"sway with roll", "roll with sway", "surge", "pitch"} < set(names)

    def test_shares(self):
        # 3 kg at 2 and 1 kg at 2: three quarters and one.
        np.testing.assert_allclose(energy_shares([2.0, -2.0], np.diag([3.0, 1.0])), [0.75, 0.25])

    @pytest.mark.parametrize(
        ("shape", "names", "expected"),
        [
            ([0.1, 1.0], ["floor", "z"], "heave"),
            ([1.0, 0.1], ["floor", "z"], "floor"),
            ([1.0, 0.8], ["floor", "z"], "floor with heave"),
            ([1.0, 1.0], ["y", "rx"], "sway with roll"),
            ([1.0, 1.0], ["rx", "y"], "roll with sway"),
            ([0.2, 1.0], ["frame z", "machine z"], "heave of machine"),
            ([1.0, 0.9], ["frame z", "machine z"], "heave of frame with heave of machine"),
            ([1.0], ["z"], "heave"),
        ],
    )
    def test_names(self, shape, names, expected):
        assert mode_name(shape, names, np.eye(len(names))) == expected

    def test_a_name_for_each_freedom(self):
        with pytest.raises(ValueError, match="one name"):
            mode_name([1.0, 0.0], ["z"], np.eye(2))

    @quick
    @given(seeds)
    def test_participation_adds_up(self, seed):
        m, k, _, _ = machine(seed)
        _, shapes = undamped_modes(m, k)
        np.testing.assert_allclose(participation(m, shapes).sum(axis=0), 1.0, rtol=1e-8)
        # As one body in heave: two stacked masses.
        stacked = np.diag([2.0, 1.0])
        _, two = undamped_modes(stacked, [[3.0, -1.0], [-1.0, 1.0]])
        share = participation(stacked, two, [[1.0], [1.0]])
        assert share.shape == (2, 1)
        assert share.sum() == pytest.approx(1.0)
        assert share[0, 0] > 0.8
