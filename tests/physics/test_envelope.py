"""The largest response over a continuous range: closed forms, dense searches, adversarial cases, cost."""

import numpy as np
import pytest

from detune.physics import oscillator
from detune.physics.envelope import centres_of_orders, centres_of_poles, first_samples, supremum
from detune.physics.modes import damped_poles, modal_loss_factors, undamped_modes
from detune.physics.response import dynamic_stiffness, solve_response
from detune.physics.rigid_body import attachment, box_inertia, mass_matrix

LOW, HIGH = 2 * np.pi * 10.0, 2 * np.pi * 60.0
ORDERS = np.array([1.0, 2.0, 0.5])


class Modal:
    """Designs as sums over modes with real residues, a constant and a power of omega: cheap and adversarial."""

    def __init__(self, seed, designs, modes, kind):
        rng = np.random.default_rng(seed)
        shape = (designs, modes)
        self.centre = np.exp(rng.uniform(np.log(0.7 * LOW), np.log(1.3 * HIGH), shape))
        self.loss = np.exp(rng.uniform(np.log(1e-3), np.log(0.2), shape))
        if kind == "same":
            self.loss = np.repeat(self.loss[:, :1], modes, axis=1)
        elif kind == "light":
            self.loss[:] = 1e-3
        elif kind == "close":
            apart = (
                0.5
                * self.loss[:, :-1:2]
                * np.exp(rng.uniform(np.log(0.05), np.log(10), (designs, modes // 2)))
            )
            self.centre[:, 1::2] = self.centre[:, :-1:2] * (1 + apart)
        elif kind == "edge":
            width = self.centre * self.loss / 2
            self.centre[:, 0] = LOW + width[:, 0] * rng.normal(0, 2, designs)
            self.centre[:, -1] = HIGH + width[:, -1] * rng.normal(0, 2, designs)
        self.residue = rng.normal(size=shape) * np.exp(rng.normal(0, 1.5, shape))
        if kind == "hidden":
            self.residue[:, modes // 2 :] *= 1e-3
        self.constant = rng.normal(size=designs) * rng.choice([0, 1, 10], designs) / (2 * np.pi * 30) ** 2
        self.power = rng.integers(0, 3, designs)

    def points(self, design, omega):
        c, eta = self.centre[design], self.loss[design]
        modes = self.residue[design] / (c**2 - omega[:, None] ** 2 + 1j * eta * c**2)
        value = np.abs(modes.sum(axis=1) + self.constant[design])
        return (value * (omega / LOW) ** self.power[design])[None]

    def everywhere(self, omega):
        design = np.repeat(np.arange(omega.shape[0]), omega.shape[1])
        return self.points(design, omega.ravel()).reshape(1, *omega.shape)

    def dense(self, design):
        spread = np.sinh(np.linspace(-9, 9, 801))
        near = self.centre[design] * (1 + self.loss[design] / 2 * spread[:, None])
        grid = np.unique(np.clip(np.concatenate([np.linspace(LOW, HIGH, 4001), near.ravel()]), LOW, HIGH))
        value = self.points(np.full(grid.size, design), grid)[0]
        at = value.argmax()
        fine = np.linspace(grid[max(at - 1, 0)], grid[min(at + 1, grid.size - 1)], 101)
        return self.points(np.full(fine.size, design), fine)[0].max()

    def check(self, designs, **options):
        found = supremum(
            self.everywhere,
            LOW,
            HIGH,
            self.centre,
            self.centre * self.loss / 2,
            points=self.points,
            **options,
        )
        dense = np.array([self.dense(d) for d in range(designs)])
        return 1 - found.value[0] / dense, found


KINDS = ["plain", "same", "light", "close", "edge", "hidden"]


@pytest.mark.parametrize("kind", KINDS)
def test_modal_sums_against_a_dense_search(kind):
    for seed, modes in ((1, 2), (2, 7), (3, 21)):
        short, found = Modal(seed, 40, modes, kind).check(40)
        assert short.max() < 1e-3
        assert short.min() > -1e-6  # never above the true supremum, to what the dense search resolves
        assert found.relative_error.max() < 1e-3
        assert found.evaluated / 40 < 120


@pytest.mark.nightly
@pytest.mark.parametrize("kind", KINDS)
def test_many_modal_sums_against_a_dense_search(kind):
    for seed in range(100, 120):
        short, found = Modal(seed, 200, 2 + seed % 20, kind).check(200)
        assert short.max() < 1e-3
        assert found.relative_error.max() < 1e-3


def machines(seed, designs, loss=(1e-3, 0.2), viscous=False):
    """Six freedoms and a floor: M, K, H, C with a leading axis of designs."""
    rng = np.random.default_rng(seed)
    m, k, h, c = (np.zeros((designs, 7, 7)) for _ in range(4))
    for d in range(designs):
        mass, size = rng.uniform(100, 1500), rng.uniform(0.4, 2.0, 3)
        m[d, :6, :6] = mass_matrix(mass, rng.normal(0, 0.08, 3), box_inertia(mass, size))
        natural = 2 * np.pi * rng.uniform(6, 45)
        eta = np.exp(rng.uniform(*np.log(loss)))
        corners = size / 2 * np.array([[1, 1, -1], [1, -1, -1], [-1, 1, -1], [-1, -1, -1]])
        b = np.zeros((4, 3, 7))
        b[..., :6] = attachment(corners)
        b[:, 2, 6] = -1
        each = mass * natural**2 / 4 * np.exp(rng.normal(0, 0.1, (4, 1))) * [*rng.uniform(0.3, 1.2, 2), 1.0]
        lossy = each * eta * np.exp(rng.normal(0, 0.3, (4, 3)))
        k[d] = np.einsum("sai,sa,saj->ij", b, each, b)
        lossy_matrix = np.einsum("sai,sa,saj->ij", b, lossy, b)
        if viscous:
            c[d] = lossy_matrix / natural
        else:
            h[d] = lossy_matrix
        floor_mass, floor_omega = mass * rng.uniform(0.5, 20), 2 * np.pi * rng.uniform(5, 30)
        m[d, 6, 6] = floor_mass
        k[d, 6, 6] += floor_mass * floor_omega**2
        c[d, 6, 6] += 2 * rng.uniform(0.005, 0.03) * floor_mass * floor_omega
    return m, k, h, c


class Shaft:
    """Eight response rows of machines under three orders of one shaft: the sum of the amplitudes of the orders."""

    def __init__(self, seed, designs, **kind):
        rng = np.random.default_rng(seed)
        self.matrices = machines(seed, designs, **kind)
        self.rows = rng.normal(size=(8, 7))
        self.load = rng.normal(size=(3, 7)) + 1j * rng.normal(size=(3, 7))
        self.power = rng.integers(0, 3, 8)

    def value(self, matrices, omega):
        total = 0.0
        for order, load in zip(ORDERS, self.load, strict=True):
            q = solve_response(dynamic_stiffness(*matrices, order * omega), load)
            power = self.power.reshape(8, *(1,) * omega.ndim)
            total = total + np.abs(np.einsum("rn,...n->r...", self.rows, q)) * (order * omega / HIGH) ** power
        return total * omega**2

    def everywhere(self, omega):
        return self.value([a[:, None] for a in self.matrices], omega)

    def points(self, design, omega):
        return self.value([a[design] for a in self.matrices], omega)

    def centres(self):
        m, k, h, c = self.matrices
        frequency, shapes = undamped_modes(m, k)
        return centres_of_orders(frequency, modal_loss_factors(shapes, h, c, frequency), ORDERS)

    def dense(self, design):
        m, k, h, c = (a[design : design + 1] for a in self.matrices)
        poles = damped_poles(m, c, h, k)[0]
        spread = np.sinh(np.linspace(-8, 8, 401))
        near = [(p.imag - p.real * spread) / order for p in poles for order in ORDERS]
        grid = np.unique(np.clip(np.concatenate([np.linspace(LOW, HIGH, 2001), *near]), LOW, HIGH))
        return self.value((m, k, h, c), grid).max(axis=-1)


@pytest.mark.parametrize(
    "kind",
    [{}, {"loss": (1e-3, 1.01e-3)}, {"loss": (0.1, 0.3)}, {"viscous": True}],
    ids=["mixed", "light", "heavy", "viscous"],
)
def test_machines_under_three_orders_against_a_dense_search(kind):
    # 7 modes, orders 1, 2, 1/2, 10 to 60 Hz, 8 rows of 8 designs each.
    shaft = Shaft(5, 8, **kind)
    found = supremum(shaft.everywhere, LOW, HIGH, *shaft.centres(), points=shaft.points)
    short = np.stack([1 - found.value[:, d] / shaft.dense(d) for d in range(8)])
    assert short.max() < 1e-3
    # The dense search has a spacing of 4 per cent of a half width: it can fall short by 2e-4 itself.
    assert short.min() > -3e-4
    assert found.relative_error.max() < 1e-3
    assert found.evaluated / 8 < 150


def test_heavily_damped_machines_by_their_poles():
    # Viscous mounts of loss factor 0.3 to 2 on a light floor: modes of different damping overlap.
    shaft = Shaft(17, 8, loss=(0.3, 2.0), viscous=True)
    m, k, h, c = shaft.matrices
    centres = centres_of_poles(damped_poles(m, c, h, k), ORDERS)
    found = supremum(shaft.everywhere, LOW, HIGH, *centres, points=shaft.points)
    short = np.stack([1 - found.value[:, d] / shaft.dense(d) for d in range(8)])
    assert short.max() < 1e-3
    assert short.min() > -3e-4


def test_the_two_ways_of_asking_agree():
    shaft = Shaft(9, 6)
    one = supremum(shaft.everywhere, LOW, HIGH, *shaft.centres(), points=shaft.points)
    other = supremum(shaft.everywhere, LOW, HIGH, *shaft.centres())
    np.testing.assert_allclose(one.value, other.value, rtol=2e-4)
    assert one.evaluated < other.evaluated
    # Each found place gives the found value.
    d, r = 3, 5
    again = shaft.points(np.array([d]), found_at := one.omega[r, d : d + 1])[r, 0]
    assert again == pytest.approx(one.value[r, d], rel=1e-9)
    assert LOW <= found_at[0] <= HIGH


class TestClosedForms:
    @pytest.mark.parametrize("loss_factor", [1e-3, 0.02, 0.2])
    def test_hysteretic_peak_is_one_over_the_loss_factor(self, loss_factor):
        # Den Hartog: X k / F = 1/eta at r = 1 exactly.
        found = supremum(
            lambda w: np.abs(oscillator.dynamic_displacement(w, 0.0, loss_factor))[None],
            0.3,
            3.0,
            [[1.0]],
            [[loss_factor / 2]],
        )
        assert found.value[0, 0] == pytest.approx(1 / loss_factor, rel=1e-4)
        assert found.omega[0, 0] == pytest.approx(1.0, abs=loss_factor / 50)

    @pytest.mark.parametrize("ratio", [5e-4, 0.05, 0.2, 0.5])
    def test_viscous_peaks(self, ratio):
        # S1, S3 and S5 closed forms: heights 1/(2 z sqrt(1 - z^2)) and T of Inman, sec. 2.4.
        curves = lambda w: np.stack(  # noqa: E731
            [
                np.abs(f(w, ratio))
                for f in (
                    oscillator.dynamic_displacement,
                    oscillator.unbalance_response,
                    oscillator.transmissibility,
                )
            ]
        )
        found = supremum(curves, 0.05, 20.0, [[1.0]], [[ratio]])
        height = 1 / (2 * ratio * np.sqrt(1 - ratio**2))
        s = np.sqrt(1 + 8 * ratio**2)
        peak = 4 * ratio**2 / np.sqrt(16 * ratio**4 - 8 * ratio**2 - 2 + 2 * s) if ratio > 0.01 else np.nan
        np.testing.assert_allclose(found.value[:2, 0], height, rtol=1e-4)
        if ratio > 0.01:
            assert found.value[2, 0] == pytest.approx(peak, rel=1e-4)
        assert np.all(found.value[:2, 0] <= height * (1 + 1e-12))

    def test_peak_outside_gives_the_edge(self):
        curve = lambda w: np.abs(oscillator.dynamic_displacement(w, 0.0, 0.01))[None]  # noqa: E731
        above = supremum(curve, 1.2, 3.0, [[1.0]], [[0.005]])
        assert (above.omega[0, 0], above.value[0, 0]) == (
            1.2,
            pytest.approx(1 / np.hypot(0.44, 0.01), rel=1e-12),
        )
        below = supremum(curve, 0.1, 0.8, [[1.0]], [[0.005]])
        assert (below.omega[0, 0], below.value[0, 0]) == (
            0.8,
            pytest.approx(1 / np.hypot(0.36, 0.01), rel=1e-12),
        )

    @pytest.mark.parametrize("offset", [-3.0, -0.5, -0.02, 0.0, 0.02, 0.5, 3.0])
    def test_peak_at_the_edge(self, offset):
        # Interval starting offset half widths from resonance, eta = 0.001: the edge if above it, 1/eta if not.
        low = 1.0 + offset * 5e-4
        found = supremum(
            lambda w: np.abs(oscillator.dynamic_displacement(w, 0.0, 1e-3))[None], low, 2.0, [[1.0]], [[5e-4]]
        )
        expected = 1000.0 if offset <= 0 else 1 / np.hypot(1 - low**2, 1e-3)
        assert found.value[0, 0] == pytest.approx(expected, rel=1e-4)

    def test_single_frequency(self):
        curve = lambda w: np.abs(oscillator.dynamic_displacement(w, 0.0, 0.1))[None]  # noqa: E731
        found = supremum(curve, 2.0, 2.0, [[1.0]], [[0.05]])
        assert found.value[0, 0] == pytest.approx(1 / np.hypot(3.0, 0.1), rel=1e-12)
        assert found.omega[0, 0] == 2.0
        assert found.relative_error[0, 0] == 0.0

    def test_every_design_its_own_interval(self):
        curve = lambda w: np.abs(oscillator.dynamic_displacement(w, 0.0, 0.1))[None]  # noqa: E731
        found = supremum(curve, [0.5, 2.0, 3.0], [1.5, 2.0, 4.0], np.ones((3, 1)), np.full((3, 1), 0.05))
        np.testing.assert_allclose(
            found.value[0], [10.0, 1 / np.hypot(3, 0.1), 1 / np.hypot(8, 0.1)], rtol=1e-4
        )
        np.testing.assert_allclose(found.omega[0, 1:], [2.0, 3.0])

    def test_orders_add_up_at_one_speed(self):
        # Order 2 meets the mode at speed 0.5, order 1 adds its value there, 1/(1 - 0.25); not the sum of suprema.
        curve = lambda w: sum(np.abs(oscillator.dynamic_displacement(n * w, 0.0, 1e-3)) for n in (1, 2))[None]  # noqa: E731
        centres, widths = centres_of_orders([[1 / (2 * np.pi)]], [[1e-3]], [1.0, 2.0])
        found = supremum(curve, 0.3, 0.9, centres, widths)
        assert found.value[0, 0] == pytest.approx(1000.0 + 1 / 0.75, rel=1e-4)
        assert found.omega[0, 0] == pytest.approx(0.5, abs=1e-5)

    def test_from_standstill(self):
        found = supremum(
            lambda w: np.abs(oscillator.dynamic_displacement(w, 0.0, 1e-3))[None],
            0.0,
            100.0,
            [[1.0]],
            [[5e-4]],
        )
        assert found.value[0, 0] == pytest.approx(1000.0, rel=1e-4)


class TestHardCases:
    def test_locked_masses_need_the_damped_poles(self):
        # A dashpot strong enough to lock two masses: the peak is at sqrt((k1 + 0)/(m1 + m2)) of the locked pair, far
        # from both undamped frequencies, and as sharp as the ground spring's loss factor of 0.002.
        m, k = np.diag([1.0, 1.0]), np.array([[1.0 + 9.0, -9.0], [-9.0, 9.0]])
        c = 4e4 * np.array([[1.0, -1.0], [-1.0, 1.0]])
        h = 0.002 * np.diag([1.0, 0.0])
        poles = damped_poles(m, c, h, k)
        curve = lambda w: np.abs(solve_response(dynamic_stiffness(m, k, h, c, w), [1.0, 0.0])[None, ..., 0])  # noqa: E731
        found = supremum(curve, 0.1, 5.0, poles.imag, -poles.real)
        assert found.omega[0, 0] == pytest.approx(np.sqrt(0.5), rel=1e-3)
        # Locked: F / (k eta); the dashpot's own slip adds a little.
        assert found.value[0, 0] == pytest.approx(500.0, rel=0.02)

    def test_two_modes_that_cancel_at_their_own_frequency(self):
        # Equal and opposite at w = 1: the response is small there and large beside it.
        def curve(w):
            narrow = 0.1 / (1 - w**2 + 0.001j)
            broad = 1.0 / (1 - w**2 + 0.01j)
            return np.abs(broad - narrow)[None]

        found = supremum(curve, 0.5, 2.0, [[1.0, 1.0]], [[0.0005, 0.005]])
        grid = 1 + np.linspace(-0.02, 0.02, 400001)
        assert found.value[0, 0] == pytest.approx(curve(grid).max(), rel=1e-4)
        assert curve(np.ones(1))[0, 0] < 1e-9 * found.value[0, 0]

    def test_anti_resonance_beside_the_peak(self):
        # A zero one half width from the pole.
        def curve(w):
            return np.abs((1.0005**2 - w**2) / (1 - w**2 + 0.001j))[None]

        found = supremum(curve, 0.9, 1.1, [[1.0]], [[0.0005]])
        grid = 1 + np.linspace(-0.003, 0.003, 200001)
        assert found.value[0, 0] == pytest.approx(curve(grid).max(), rel=1e-4)

    def test_no_response_at_all(self):
        found = supremum(lambda w: np.zeros((2, *w.shape)), 1.0, 2.0, [[1.5]], [[0.1]])
        assert found.value.tolist() == [[0.0], [0.0]]
        assert found.relative_error.max() == 0.0

    def test_a_constant_response(self):
        found = supremum(lambda w: np.full((1, *w.shape), 3.0), 1.0, 2.0, [[1.5]], [[0.1]])
        assert found.value[0, 0] == 3.0

    def test_no_modes_known(self):
        found = supremum(lambda w: (1 + np.sin(w))[None], 0.0, 3.0, np.zeros((1, 0)), np.zeros((1, 0)))
        assert found.value[0, 0] == pytest.approx(2.0, rel=1e-4)

    def test_no_designs(self):
        found = supremum(lambda w: np.zeros((4, *w.shape)), 1.0, 2.0, np.zeros((0, 3)), np.zeros((0, 3)))
        assert found.value.shape == (4, 0)

    def test_scale_does_not_matter(self):
        for factor in (1e-12, 1e9):
            found = supremum(
                lambda w, factor=factor: factor * np.abs(oscillator.dynamic_displacement(w, 0.0, 0.01))[None],
                0.3,
                3.0,
                [[1.0]],
                [[0.005]],
            )
            assert found.value[0, 0] == pytest.approx(100 * factor, rel=1e-4)


class TestFaults:
    @staticmethod
    def run(amplitude=lambda w: np.ones((1, *w.shape)), low=1.0, high=2.0, centres=((1.5,),), **more):
        return supremum(amplitude, low, high, centres, np.full(np.shape(centres), 0.1), **more)

    def test_a_response_that_is_not_a_number(self):
        with pytest.raises(FloatingPointError, match="not a finite number"):
            self.run(lambda w: np.full((1, *w.shape), np.nan))
        with pytest.raises(FloatingPointError):
            self.run(lambda w: np.where(w > 1.99, np.inf, 1.0)[None])

    def test_nan_found_only_on_refining(self):
        def amplitude(w):
            value = np.abs(oscillator.dynamic_displacement(w, 0.0, 0.01))
            return value[None]

        def points(design, w):
            return np.full((1, w.size), np.nan)

        with pytest.raises(FloatingPointError):
            supremum(amplitude, 0.5, 2.0, [[1.0]], [[0.005]], points=points)

    def test_negative_amplitude(self):
        with pytest.raises(ValueError, match="negative"):
            self.run(lambda w: -np.ones((1, *w.shape)))

    def test_wrong_shapes(self):
        with pytest.raises(ValueError, match="shape"):
            self.run(lambda w: np.ones(w.shape))
        with pytest.raises(ValueError, match="shape"):
            supremum(lambda w: np.ones((1, *w.shape)), 1.0, 2.0, [[1.5]], [[0.1, 0.1]])

    @pytest.mark.parametrize(("low", "high"), [(2.0, 1.0), (-1.0, 1.0), (0.0, np.inf), (np.nan, 1.0)])
    def test_wrong_interval(self, low, high):
        with pytest.raises(ValueError, match="interval"):
            self.run(low=low, high=high)

    def test_wrong_modes_and_tolerance(self):
        with pytest.raises(ValueError, match="not a number"):
            self.run(centres=((np.nan,),))
        with pytest.raises(ValueError, match="tolerance"):
            self.run(tolerance=0.0)


class TestSamples:
    def test_first_samples_hold_ends_and_centres(self):
        samples = first_samples(np.array([1.0]), np.array([10.0]), np.array([[0.5, 3.0, 20.0]]), 12)
        assert samples.shape == (1, 17)
        assert np.all(np.diff(samples) >= 0)
        assert {1.0, 3.0, 10.0} <= set(samples[0])
        assert 0.5 not in samples
        # No gap wider than a twelfth of the range times two on the blended scale.
        scale = np.log(samples + 0.5)
        assert np.diff(scale).max() < 2 * (scale[0, -1] - scale[0, 0]) / 12

    def test_centres_of_orders(self):
        centres, widths = centres_of_orders([[10.0, 20.0]], [[0.1, np.inf]], [1.0, 2.0])
        np.testing.assert_allclose(centres, 2 * np.pi * np.array([[10.0, 5.0, 20.0, 10.0]]))
        np.testing.assert_allclose(widths, centres * [0.05, 0.05, 1.0, 1.0])

    def test_centres_of_poles(self):
        centres, widths = centres_of_poles([[-1.0 + 10.0j, -4.0 + 20.0j]], [1.0, 2.0])
        np.testing.assert_allclose(centres, [[10.0, 5.0, 20.0, 10.0]])
        np.testing.assert_allclose(widths, [[1.0, 0.5, 4.0, 2.0]])
