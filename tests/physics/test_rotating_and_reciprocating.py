"""Balance grades, slider-cranks, one-third octaves, levels. CHECKS section 7, C1, C8, C9, C10."""

import numpy as np
import pytest

from detune.physics import levels, octaves
from detune.physics.balance import (
    permissible_eccentricity,
    permissible_unbalance,
    rotating_force_vector,
    unbalance_force,
)
from detune.physics.oscillator import natural_frequency
from detune.physics.slider_crank import angle_past_dead_centre, reciprocating_forces


class TestBalance:
    def test_permissible_eccentricity(self):
        # ISO 21940-11:2016 (definition and grades read). C1.
        assert permissible_eccentricity(6.3e-3, 50.0) * 1e6 == pytest.approx(20.0535, rel=3e-6)
        assert permissible_eccentricity(2.5e-3, 60.0) * 1e6 == pytest.approx(6.6315, rel=1e-5)
        # The short rule 9549 G/n of the trade gives 20.0529 um.
        assert permissible_eccentricity(6.3e-3, 50.0) * 1e6 == pytest.approx(9549 * 6.3 / 3000, rel=3.2e-5)

    def test_unbalance_and_force(self):
        # C1: 50 kg at G6.3 and 3000 rpm: 1002.68 g mm and 98.96 N.
        unbalance = permissible_unbalance(6.3e-3, 50.0, 50.0)
        assert unbalance * 1e6 == pytest.approx(1002.68, rel=1e-5)
        assert unbalance_force(unbalance, 2 * np.pi * 50) == pytest.approx(98.96, rel=1e-4)

    @pytest.mark.parametrize("wrong", [(0.0, 50.0), (6.3e-3, 0.0), (np.nan, 50.0)])
    def test_faults(self, wrong):
        with pytest.raises(ValueError, match="grade"):
            permissible_eccentricity(*wrong)

    def test_rotation_sense(self):
        # About +z from +x: a quarter turn later along +y.
        a, b = rotating_force_vector([0, 0, 2.0], [3.0, 0, 1.0])
        np.testing.assert_allclose(a, [1, 0, 0], atol=1e-15)
        np.testing.assert_allclose(np.real((a - 1j * b) * np.exp(1j * np.pi / 2)), [0, 1, 0], atol=1e-15)

    def test_undecided_start(self):
        with pytest.raises(ValueError, match="along the shaft"):
            rotating_force_vector([0, 0, 1], [0, 0, 2])
        with pytest.raises(ValueError, match="direction"):
            rotating_force_vector([0, 0, 0])


def exact_force(mass, radius, rod, angle):
    """Inertia force of one piston over w^2, outward positive, by differentiating the exact position twice."""
    h = 1e-4
    place = lambda a: radius * np.cos(a) + np.sqrt(rod**2 - radius**2 * np.sin(a) ** 2)  # noqa: E731
    return -mass * (place(angle + h) - 2 * place(angle) + place(angle - h)) / h**2


class TestSliderCrank:
    def test_one_cylinder(self):
        # 2 kg, r 50 mm, l 200 mm: primary 0.1 kg m, secondary a quarter of it, both outward at top dead centre.
        forces = reciprocating_forces(2.0, 0.05, 0.2, 0.0, [0, 0, 1], [[0.3, 0, 0]])
        np.testing.assert_allclose(forces.force, [[0, 0, 0.1], [0, 0, 0.025]], atol=1e-15)
        # Upward force ahead of the reference (x > 0) pitches about -y: M = r x F = (0, -x F, 0).
        np.testing.assert_allclose(forces.moment, [[0, -0.03, 0], [0, -0.0075, 0]], atol=1e-15)

    def test_against_the_exact_crank(self):
        # Fourier coefficients of the exact motion; second order lacks (r/l)^2/4 and the fourth is left out.
        angle = np.linspace(0, 2 * np.pi, 720, endpoint=False)
        exact = exact_force(2.0, 0.05, 0.2, angle + 0.4)
        orders = [2 * np.mean(exact * np.exp(-1j * n * angle)) for n in (1, 2, 4)]
        forces = reciprocating_forces(2.0, 0.05, 0.2, 0.4, [0, 0, 1], [[0, 0, 0]])
        assert forces.force[0, 2] == pytest.approx(orders[0], rel=1e-6)
        assert forces.force[1, 2] == pytest.approx(orders[1], rel=0.25**2 / 4 * 1.2)
        assert abs(orders[2]) == pytest.approx(0.1 * 0.25**3 / 4, rel=0.1)

    def test_four_in_line(self):
        # Den Hartog, Mechanical Vibrations, ch. 5: cranks 0, 180, 180, 0 degrees balance primary force and couple and
        # secondary couple; the secondary force is four times that of one cylinder.
        place = np.array([[-0.15, 0, 0], [-0.05, 0, 0], [0.05, 0, 0], [0.15, 0, 0]])
        forces = reciprocating_forces(1.0, 0.04, 0.16, np.radians([0, 180, 180, 0]), [0, 0, 1], place)
        np.testing.assert_allclose(forces.force[0], 0, atol=1e-15)
        np.testing.assert_allclose(forces.moment, 0, atol=1e-15)
        np.testing.assert_allclose(forces.force[1], [0, 0, 4 * 0.04 / 4], atol=1e-15)

    def test_two_in_line_opposed(self):
        # Cranks at 0 and 180 degrees: primary couple m r a, secondary force twice that of one cylinder.
        forces = reciprocating_forces(1.0, 0.04, 0.16, [0, np.pi], [0, 0, 1], [[0.1, 0, 0], [-0.1, 0, 0]])
        np.testing.assert_allclose(forces.force[0], 0, atol=1e-15)
        np.testing.assert_allclose(forces.moment[0], [0, -0.2 * 0.04, 0], atol=1e-15)
        np.testing.assert_allclose(forces.force[1], [0, 0, 2 * 0.01], atol=1e-15)
        np.testing.assert_allclose(forces.moment[1], 0, atol=1e-15)

    def test_six_in_line_is_balanced(self):
        # 0, 120, 240, 240, 120, 0 degrees: primary and secondary, forces and couples.
        place = np.zeros((6, 3))
        place[:, 0] = np.arange(6) * 0.1 - 0.25
        forces = reciprocating_forces(
            1.0, 0.04, 0.16, np.radians([0, 120, 240, 240, 120, 0]), [0, 0, 1], place
        )
        np.testing.assert_allclose(forces.force, 0, atol=1e-14)
        np.testing.assert_allclose(forces.moment, 0, atol=1e-14)

    def test_ninety_degree_v_twin(self):
        # One throw, banks at +-45 degrees: the primary force is a vector of constant length m r turning with the
        # shaft (Bevan, Theory of Machines, ch. 14), and the secondary lies across, sqrt(2) times that of one cylinder.
        bank = np.radians([45.0, -45.0])
        along = np.stack([0 * bank, -np.sin(bank), np.cos(bank)], axis=1)
        forces = reciprocating_forces(
            1.0, 0.04, 0.16, angle_past_dead_centre(0.0, bank), along, np.zeros((2, 3))
        )
        turn = np.exp(1j * np.linspace(0, 2 * np.pi, 9))
        primary = np.real(forces.force[0] * turn[:, None])
        np.testing.assert_allclose(np.linalg.norm(primary, axis=1), 0.04, rtol=1e-12)
        np.testing.assert_allclose(primary[2], [0, -0.04, 0], atol=1e-15)
        np.testing.assert_allclose(np.abs(forces.force[1]), [0, np.sqrt(2) * 0.01, 0], atol=1e-15)

    def test_rod_must_be_longer_than_the_crank(self):
        with pytest.raises(ValueError, match="longer"):
            reciprocating_forces(1.0, 0.1, 0.1, 0.0, [0, 0, 1], [[0, 0, 0]])


class TestOctaves:
    def test_exact_centres(self):
        # IEC 61260-1:2014 (constants read in an open library). C8.
        np.testing.assert_allclose(
            octaves.exact_centre([-30, -21, -20, -12]), [1.00000, 7.94328, 10.0000, 63.0957], rtol=1e-6
        )

    def test_edges(self):
        # C8: 10 Hz band 8.91251 to 11.22018 Hz; relative bandwidth 0.230768.
        low, high = octaves.band_edges(-20)
        assert low == pytest.approx(8.91251, abs=1e-5)
        assert high == pytest.approx(11.22018, abs=1e-5)
        assert (high - low) / 10.0 == pytest.approx(0.230768, abs=1e-6)
        assert octaves.band_edges(-19)[0] == pytest.approx(high, rel=1e-15)

    def test_nominal_is_not_exact(self):
        # A trap of CHECKS 14: the band called 8 Hz is centred at 7.943 Hz, the one called 31.5 at 31.623.
        np.testing.assert_array_equal(
            octaves.nominal_centre([-21, -15, -30, -31, 0, 2]), [8, 31.5, 1, 0.8, 1000, 1600]
        )
        assert octaves.exact_centre(-15) == pytest.approx(31.6228, abs=1e-4)

    def test_nominal_centres_find_their_own_band(self):
        index = np.arange(-40, 14)
        np.testing.assert_array_equal(octaves.band_index(octaves.nominal_centre(index)), index)

    def test_band_of_a_line(self):
        assert octaves.band_index(24.7) == -16  # the band called 25 Hz, 22.4 to 28.2 Hz
        np.testing.assert_array_equal(octaves.band_indices(4.0, 80.0), np.arange(-24, -10))
        with pytest.raises(ValueError, match="positive"):
            octaves.band_index(0.0)
        with pytest.raises(ValueError, match="lowest"):
            octaves.band_indices(80.0, 4.0)


class TestLevels:
    def test_references(self):
        # ISO 1683:2015 (read in an open library). C9.
        assert levels.DISPLACEMENT_REFERENCE == 1e-12
        assert levels.FORCE_REFERENCE == 1e-6
        assert levels.level(1e-3, levels.VELOCITY_REFERENCE) == pytest.approx(120.0, abs=1e-9)
        assert levels.level(9.80665, levels.ACCELERATION_REFERENCE) == pytest.approx(139.830, abs=1e-3)

    def test_old_velocity_reference(self):
        # C9: re 1e-8 m/s every level is 20 dB lower; 50.8 um/s is 74.1 dB there.
        old = levels.level(50.8e-6, levels.OLD_VELOCITY_REFERENCE)
        assert old == pytest.approx(74.1, abs=0.05)
        assert levels.level(50.8e-6, levels.VELOCITY_REFERENCE) - old == pytest.approx(20.0)

    def test_both_ways(self):
        back = levels.rms_from_level(levels.level([1e-6, 3.0], 1e-9), 1e-9)
        np.testing.assert_allclose(back, [1e-6, 3.0], rtol=1e-12)
        assert levels.peak_from_rms(1.0) == pytest.approx(1.41421356)
        assert levels.rms_from_peak(levels.peak_from_rms(2.8)) == pytest.approx(2.8)

    @pytest.mark.parametrize("wrong", [0.0, -1.0, np.nan])
    def test_no_level_of_nothing(self, wrong):
        with pytest.raises(ValueError, match="positive"):
            levels.level(wrong, 1e-9)

    def test_rms_velocity_to_displacement(self):
        # C10: 2.8 mm/s rms at 25 Hz is 25.209 um peak, 50.418 um peak to peak.
        peak = levels.peak_from_rms(2.8e-3) / (2 * np.pi * 25)
        assert peak * 1e6 == pytest.approx(25.209, abs=1e-3)
        assert 2 * peak * 1e6 == pytest.approx(50.418, abs=1e-3)

    def test_stiffness_tolerance_in_frequency(self):
        # C10: +-15 % of stiffness is +7.24/-7.80 % of frequency, +-20 % is +9.54/-10.56 %.
        ratio = natural_frequency([1.15, 0.85, 1.2, 0.8], 1.0) / natural_frequency(1.0, 1.0) - 1
        np.testing.assert_allclose(ratio * 100, [7.24, -7.80, 9.54, -10.56], atol=5e-3)
