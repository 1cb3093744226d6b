"""Static displacement, support, and floors."""

import numpy as np
import pytest

from detune.ground.errors import DetuneError
from detune.physics.floor import floor_frequency_from_sag, floor_from_frequency, floor_modal_mass
from detune.physics.modes import undamped_frequencies
from detune.physics.rigid_body import attachment
from detune.physics.static import is_supported, solve_static, solve_static_where_supported
from detune.physics.unsupported import UnsupportedMachine

CORNERS = np.array([[1, 0.5, 0], [1, -0.5, 0], [-1, 0.5, 0], [-1, -0.5, 0]], dtype=float)


def on_corners(stiffness, stations=CORNERS):
    b = attachment(stations)
    return np.einsum("sai,a,saj->ij", b, np.asarray(stiffness, dtype=float), b)


class TestStatic:
    def test_sag_under_the_weight(self):
        # 400 kg on four springs of 100 N/mm: 400 * 9.80665 / 4e5 = 9.80665 mm.
        q = solve_static(on_corners([5e4, 5e4, 1e5]), [0, 0, -400 * 9.80665, 0, 0, 0])
        np.testing.assert_allclose(q, [0, 0, -9.80665e-3, 0, 0, 0], atol=1e-15)

    def test_offset_weight_tilts(self):
        # Moment 100 N at x = 0.4 m about a pitch stiffness 4 * 1e5 * 1^2: 40 / 4e5 rad, nose down is +ry.
        q = solve_static(on_corners([5e4, 5e4, 1e5]), [0, 0, -100.0, 0, 40.0, 0])
        assert q[4] == pytest.approx(1e-4)

    def test_batch(self):
        k = np.stack([on_corners([5e4, 5e4, 1e5]), on_corners([5e4, 5e4, 2e5])])
        q = solve_static(k, np.array([0, 0, -1e3, 0, 0, 0.0]))
        np.testing.assert_allclose(q[:, 2], [-2.5e-3, -1.25e-3])

    def test_a_direction_without_stiffness(self):
        with pytest.raises(UnsupportedMachine, match="without support"):
            solve_static(on_corners([0, 5e4, 1e5]), np.ones(6))

    def test_mounts_in_one_line_do_not_hold_the_roll(self):
        stations = CORNERS * [1, 0, 0]
        assert not is_supported(on_corners([5e4, 5e4, 1e5], stations))
        with pytest.raises(ValueError, match="support"):
            solve_static(on_corners([5e4, 5e4, 1e5], stations), np.ones(6))

    def test_close_stations_still_hold(self):
        # Stations within 20 mm under a machine with arms of a metre: soft, not unsupported.
        assert is_supported(on_corners([5e4, 5e4, 1e5], CORNERS * 0.02 + [0, 0, -1.0]))

    def test_negative_stiffness(self):
        assert not is_supported(np.array([[1.0, 2.0], [2.0, 1.0]]))
        assert not is_supported(np.diag([1.0, -1.0]))
        assert not is_supported(np.diag([1.0, np.nan]))

    def test_units_do_not_matter(self):
        # The same matrix in mm and mrad has entries ten orders apart and is as well supported.
        k = on_corners([5e4, 5e4, 1e5])
        scale = np.diag([1e-5] * 3 + [1e5] * 3)
        assert is_supported(scale @ k @ scale)

    def test_batch_with_an_unsupported_machine(self):
        k = np.stack([on_corners([5e4, 5e4, 1e5]), on_corners([0, 5e4, 1e5])])
        q, supported = solve_static_where_supported(k, np.array([0, 0, -1e3, 0, 0, 0.0]))
        assert supported.tolist() == [True, False]
        assert q[0, 2] == pytest.approx(-2.5e-3)
        assert np.isnan(q[1]).all()
        with pytest.raises(UnsupportedMachine, match="1 of 2 machines"):
            solve_static(k, np.ones(6))

    def test_the_error_is_one_of_ours(self):
        assert issubclass(UnsupportedMachine, DetuneError)
        assert issubclass(UnsupportedMachine, ValueError)


class TestFloor:
    def test_frequency_from_sag(self):
        # 17.75 Hz / sqrt(sag in mm): the trade's 0.18 sqrt(g/sag) to its two digits (AISC Design Guide 11, from
        # memory). Exact constant (pi/2) sqrt(5 g / 384).
        assert floor_frequency_from_sag(1e-3) == pytest.approx(17.75, abs=5e-3)
        assert floor_frequency_from_sag(9e-3) == pytest.approx(0.18 * np.sqrt(9.80665 / 9e-3), rel=0.02)
        with pytest.raises(ValueError, match="sag"):
            floor_frequency_from_sag(0.0)

    def test_frequency_from_sag_against_a_beam_of_masses(self):
        # Independent: 120 lumps on a simply supported beam by its flexibility matrix, sag from the same matrix.
        n = 120
        x = (np.arange(n) + 0.5) / n
        a, b = np.minimum.outer(x, x), np.maximum.outer(x, x)
        flexibility = a * (1 - b) * (1 - a**2 - (1 - b) ** 2) / 6  # E I = L = 1
        lumps = np.full(n, 1.0 / n)
        sag = (flexibility @ lumps * 9.80665)[n // 2 - 1 : n // 2 + 1].mean()
        first = 1.0 / np.sqrt(np.linalg.eigvalsh(flexibility / n)[-1]) / (2 * np.pi)
        assert floor_frequency_from_sag(sag) == pytest.approx(first, rel=3e-4)

    def test_modal_mass(self):
        assert floor_modal_mass(8000.0) == 4000.0

    def test_as_a_mass_on_spring_and_damper(self):
        m, k, c = floor_from_frequency(8.0, 4000.0, 0.03)
        assert undamped_frequencies([[m]], [[k]])[0] == pytest.approx(8.0)
        assert c / (2 * np.sqrt(k * m)) == pytest.approx(0.03)

    @pytest.mark.parametrize("wrong", [(0, 1, 0.03), (8, 0, 0.03), (8, 1, -0.1), (8, np.nan, 0.03)])
    def test_faults(self, wrong):
        with pytest.raises(ValueError, match="floor"):
            floor_from_frequency(*wrong)
