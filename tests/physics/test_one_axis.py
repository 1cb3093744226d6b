"""One mass on one mount, by closed form and by the general path (matrices, then solve). CHECKS section 1."""

import numpy as np
import pytest

from detune.physics import oscillator
from detune.physics.damping import (
    complex_stiffness,
    loss_factor_from_amplification,
    loss_factor_from_transmissibility_peak,
    viscous_from_ratio_at_rated_load,
    viscous_ratio_from_amplification,
    viscous_ratio_from_loss_factor,
)
from detune.physics.envelope import supremum
from detune.physics.response import dynamic_stiffness, solve_response

GRAVITY = 9.80665


def solved(r, ratio=0.0, loss_factor=0.0):
    """Displacement of m = k = 1 under a unit force, by the general path."""
    r, ratio, loss_factor = np.broadcast_arrays(r, ratio, loss_factor)
    dynamic = dynamic_stiffness(
        [[1.0]],
        [[1.0]],
        loss_factor[..., None, None],
        2.0 * ratio[..., None, None],
        np.asarray(r, dtype=float),
    )
    return solve_response(dynamic, np.ones(1))[..., 0]


def mount(r, ratio=0.0, loss_factor=0.0):
    return complex_stiffness(1.0, loss_factor, 2.0 * np.asarray(ratio), r)


class TestPeaks:
    # Den Hartog, Mechanical Vibrations, ch. 2; Rao, Mechanical Vibrations, 5th ed., sec. 3.4 (recomputed). S1.
    S1 = [
        (0.05, 0.997497, 10.012523),
        (0.1, 0.989949, 5.025189),
        (0.2, 0.959166, 2.551552),
        (0.5, 0.707107, 1.154701),
    ]

    @pytest.mark.parametrize(("ratio", "place", "height"), S1)
    def test_force_excited_displacement(self, ratio, place, height):
        r, peak = oscillator.displacement_peak(ratio)
        assert r == pytest.approx(place, abs=1e-6)
        assert peak == pytest.approx(height, abs=1e-6)
        assert abs(solved(place, ratio)) == pytest.approx(height, abs=1e-6)
        found = supremum(lambda w: np.abs(solved(w, ratio))[None], 0.05, 3.0, [[1.0]], [[ratio]])
        assert found.value[0, 0] == pytest.approx(height, rel=1e-4)
        assert found.value[0, 0] <= height * (1 + 1e-6)

    def test_no_peak_from_the_critical_ratio_on(self):
        # S1, z = 0.75: the curve only falls, maximum 1 for r -> 0.
        assert oscillator.displacement_peak(0.75) == (0.0, 1.0)
        curve = np.abs(solved(np.linspace(1e-6, 5.0, 500), 0.75))
        assert np.all(np.diff(curve) < 0)
        assert curve[0] == pytest.approx(1.0, abs=1e-9)

    @pytest.mark.parametrize(
        ("ratio", "place", "height"), [(0.1, 1.010153, 5.025189), (0.2, 1.042572, 2.551552)]
    )
    def test_unbalance(self, ratio, place, height):
        # Rao 5e sec. 3.7; Thomson, Theory of Vibration, sec. 3.2 (recomputed). S3.
        r, peak = oscillator.unbalance_peak(ratio)
        assert (r, peak) == (pytest.approx(place, abs=1e-6), pytest.approx(height, abs=1e-6))
        assert abs(place**2 * solved(place, ratio)) == pytest.approx(height, abs=1e-6)
        assert abs(oscillator.unbalance_response(place, ratio)) == pytest.approx(height, abs=1e-6)
        assert abs(oscillator.unbalance_response(1e6, ratio)) == pytest.approx(1.0, abs=1e-9)
        assert oscillator.unbalance_peak(0.8) == (np.inf, 1.0)

    @pytest.mark.parametrize(
        ("ratio", "place", "height"),
        [
            (0.05, 0.9975216, 10.062214),
            (0.1, 0.9903343, 5.122774),
            (0.2, 0.9647297, 2.733921),
            (0.5, 0.8555997, 1.467890),
        ],
    )
    def test_transmissibility(self, ratio, place, height):
        # Inman, Engineering Vibration, sec. 2.4 (recomputed; the stationary point agrees by algebra). S5.
        r, peak = oscillator.transmissibility_peak(ratio)
        assert (r, peak) == (pytest.approx(place, abs=1e-6), pytest.approx(height, abs=1e-6))
        assert abs(mount(place, ratio) * solved(place, ratio)) == pytest.approx(height, abs=1e-6)
        # The same figures the other way round: damping ratio from the amplification a supplier prints.
        assert viscous_ratio_from_amplification(height) == pytest.approx(ratio, abs=1e-6)

    def test_undamped_peaks_are_infinite(self):
        assert oscillator.displacement_peak(0.0) == (1.0, np.inf)
        assert oscillator.transmissibility_peak(0.0) == (1.0, np.inf)

    def test_stationary_point_of_the_transmissibility_by_algebra(self):
        # X7: 2 z^2 r^4 + r^2 - 1 = 0 is the stationarity of T^2, and there T^2 = 1/(1 - r^4).
        sympy = pytest.importorskip("sympy")
        u, z = sympy.symbols("u z", positive=True)
        square = (1 + 4 * z**2 * u) / ((1 - u) ** 2 + 4 * z**2 * u)
        numerator = sympy.numer(sympy.together(sympy.diff(square, u)))
        assert sympy.rem(sympy.expand(numerator), 2 * z**2 * u**2 + u - 1, u) == 0
        on_peak = sympy.simplify((square * (1 - u**2) - 1).subs(z, sympy.sqrt((1 - u) / (2 * u**2))))
        assert on_peak == 0


class TestTransmissibility:
    @pytest.mark.parametrize("ratio", [0.0, 0.01, 0.05, 0.2, 0.5, 1.0, 2.0])
    def test_one_at_root_two_viscous(self, ratio):
        # Rao 5e sec. 3.6; Harris' Shock and Vibration Handbook ch. 30 (statement read). S4.
        r = np.sqrt(2.0)
        assert abs(oscillator.transmissibility(r, ratio)) == pytest.approx(1.0, abs=1e-12)
        assert abs(mount(r, ratio) * solved(r, ratio)) == pytest.approx(1.0, abs=1e-12)

    @pytest.mark.parametrize("loss_factor", [0.0, 0.1, 0.5, 1.0])
    def test_one_at_root_two_loss_factor(self, loss_factor):
        # S4 again: |1 + j eta| over |1 - 2 + j eta|.
        r = np.sqrt(2.0)
        assert abs(oscillator.transmissibility(r, 0.0, loss_factor)) == pytest.approx(1.0, abs=1e-12)
        assert abs(mount(r, 0.0, loss_factor) * solved(r, 0.0, loss_factor)) == pytest.approx(1.0, abs=1e-12)

    def test_table(self):
        # S6, any text.
        ratios = np.array([0.01, 0.05, 0.1, 0.2, 0.5])
        for r, table in (
            (3.0, [0.125221, 0.130412, 0.145366, 0.193096, 0.370117]),
            (10.0, [0.010301, 0.014284, 0.022582, 0.041614, 0.101000]),
        ):
            np.testing.assert_allclose(np.abs(oscillator.transmissibility(r, ratios)), table, atol=1e-6)
            np.testing.assert_allclose(np.abs(mount(r, ratios) * solved(r, ratios)), table, atol=1e-6)

    def test_loss_factor(self):
        # Den Hartog; Snowdon, Vibration and Shock in Damped Mechanical Systems (1968) (recomputed). S9.
        r = np.array([1.0, 3.0, 10.0])
        table = [10.049876, 0.125614, 0.010151]
        np.testing.assert_allclose(np.abs(oscillator.transmissibility(r, 0.0, 0.1)), table, atol=1e-6)
        np.testing.assert_allclose(np.abs(mount(r, 0.0, 0.1) * solved(r, 0.0, 0.1)), table, atol=1e-6)
        # The peak sqrt(1 + 1/eta^2) inverted.
        assert loss_factor_from_transmissibility_peak(np.sqrt(101.0)) == pytest.approx(0.1, rel=1e-12)

    def test_phase(self):
        # S9: displacement lags by 166.5043 degrees at z = 0.1, r = 1.5, and by 90 at r = 1 whatever the damping.
        lag = -np.degrees(np.angle(solved(1.5, 0.1)))
        assert lag == pytest.approx(166.5043, abs=1e-4)
        np.testing.assert_allclose(
            -np.degrees(np.angle(solved(1.0, np.array([0.01, 0.1, 1.0])))), 90.0, atol=1e-10
        )

    def test_signs_of_the_trade_off(self):
        # P9: below root two damping lowers T, above it raises T; above, a stiffer mount never lowers T.
        ratio = np.linspace(0.01, 1.5, 60)[:, None]
        below = np.abs(oscillator.transmissibility(np.linspace(0.02, 1.41, 200), ratio))
        above = np.abs(oscillator.transmissibility(np.linspace(1.42, 20.0, 400), ratio))
        assert np.all(np.diff(below, axis=0) < 0)
        assert np.all(np.diff(above, axis=0) > 0)
        assert np.all(np.diff(above, axis=1) < 0)


class TestHalfPower:
    def test_mobility_band_is_exactly_c_over_m(self):
        # Crandall and Mark, Random Vibration (1963). S7.
        low, high = oscillator.half_power_band_of_mobility(10.0, 80.0, 4e5)
        assert low == pytest.approx(196.0400, abs=1e-4)
        assert high == pytest.approx(204.0400, abs=1e-4)
        assert high - low == pytest.approx(8.0, rel=1e-9)
        assert low * high == pytest.approx(40000.0, rel=1e-9)
        omega = np.array([low, 200.0, high])
        power = np.real(
            1j
            * omega
            * solve_response(dynamic_stiffness([[10.0]], [[4e5]], [[0.0]], [[80.0]], omega), [1.0])[..., 0]
        )
        np.testing.assert_allclose(power / power[1], [0.5, 1.0, 0.5], rtol=1e-9)

    def test_displacement_band_is_not_two_z(self):
        # S7: z = 0.2 gives r = 0.726692 and 1.145390, a width of 0.418698 and not 0.4.
        edges = np.abs(solved(np.array([0.726692, 1.145390]), 0.2))
        np.testing.assert_allclose(edges, 2.551552 / np.sqrt(2.0), rtol=2e-6)

    def test_roots_by_algebra(self):
        # X7: the half-power condition of mobility, (r - 1/r)^2 = 4 z^2, has roots sqrt(1 + z^2) -+ z.
        sympy = pytest.importorskip("sympy")
        z = sympy.symbols("z", positive=True)
        for sign in (-1, 1):
            r = sympy.sqrt(1 + z**2) + sign * z
            assert sympy.simplify((r - 1 / r) ** 2 - 4 * z**2) == 0


class TestDeflection:
    def test_natural_frequency_from_deflection(self):
        # Harris' Handbook; Bevan, Theory of Machines, ch. 15. S11.
        sag = np.array([1.0, 5.0, 10.0, 25.0, 50.0, 100.0]) * 1e-3
        np.testing.assert_allclose(
            oscillator.natural_frequency_from_deflection(sag),
            [15.7609, 7.0485, 4.9840, 3.1522, 2.2289, 1.5761],
            atol=1e-4,
        )
        assert oscillator.natural_frequency_from_deflection(0.01) == pytest.approx(4.98403, abs=1e-5)
        inch = oscillator.natural_frequency_from_deflection(0.0254)
        assert inch == pytest.approx(3.12726, abs=1e-5)
        assert inch * 60 == pytest.approx(187.635, abs=1e-3)

    def test_deflection_says_nothing_when_the_dynamic_stiffness_differs(self):
        # A trap of CHECKS 14: k = 1 N/mm static and 1.4 dynamic under 10 kg; sag 98.0665 mm, but f is that of 1.4.
        stiff = oscillator.natural_frequency(1400.0, 10.0)
        assert oscillator.natural_frequency_from_deflection(
            0.0980665, dynamic_to_static=1.4
        ) == pytest.approx(stiff)
        assert oscillator.natural_frequency_from_deflection(0.0980665) == pytest.approx(stiff / np.sqrt(1.4))

    def test_deflection_for_isolation(self):
        # Rao 5e eq. 9.106. S12.
        sag = oscillator.deflection_for_isolation(25.0, np.array([0.8, 0.9, 0.95, 0.98]))
        np.testing.assert_allclose(sag * 1e3, [2.385, 4.372, 8.346, 20.270], rtol=1e-3)
        slow = oscillator.deflection_for_isolation(10.0, 0.9)
        assert slow * 1e3 == pytest.approx(27.325, rel=1e-3)
        # Back through the response: such a mount transmits a tenth.
        r = 10.0 / oscillator.natural_frequency_from_deflection(slow)
        assert abs(oscillator.transmissibility(r)) == pytest.approx(0.1, rel=1e-9)

    @pytest.mark.parametrize("wrong", [1.0, 90.0, -0.1])
    def test_an_isolation_is_a_share(self, wrong):
        with pytest.raises(ValueError, match="isolation"):
            oscillator.deflection_for_isolation(25.0, wrong)

    def test_no_deflection_no_frequency(self):
        with pytest.raises(ValueError, match="deflection"):
            oscillator.natural_frequency_from_deflection(0.0)


class TestDampingStatements:
    def test_ratio_at_rated_load(self):
        # 2 z sqrt(k m): 0.1, 40 kN/m, 100 kg -> 400 N s/m.
        assert viscous_from_ratio_at_rated_load(0.1, 40e3, 100.0) == pytest.approx(400.0)

    def test_amplification(self):
        # Q = 1/eta under a force: X k / F of a hysteretic mount at resonance.
        eta = loss_factor_from_amplification(8.0)
        assert eta == 0.125
        assert abs(solved(1.0, 0.0, eta)) == pytest.approx(8.0)
        assert viscous_ratio_from_loss_factor(eta) == 0.0625

    def test_large_amplification_keeps_its_digits(self):
        # z -> 1/(2 Q) with a relative deviation of order 1/Q^2.
        assert viscous_ratio_from_amplification(1e7) == pytest.approx(0.5e-7, rel=1e-12)

    @pytest.mark.parametrize("wrong", [1.0, 0.5, np.nan])
    def test_amplification_of_one_or_less_has_no_ratio(self, wrong):
        with pytest.raises(ValueError, match="exceeds 1"):
            viscous_ratio_from_amplification(wrong)
        with pytest.raises(ValueError, match="exceed 1"):
            loss_factor_from_transmissibility_peak(wrong)

    def test_amplification_must_be_positive(self):
        with pytest.raises(ValueError, match="positive"):
            loss_factor_from_amplification(0.0)

    def test_both_kinds_together(self):
        # 1000 (1 + 0.1 j) + j 10 * 5.
        assert complex_stiffness(1000.0, 0.1, 5.0, 10.0) == 1000.0 + 150.0j

    def test_the_kinds_differ_twofold_above_resonance(self):
        # S6 and S9 at r = 10: z = 0.1 transmits 0.022582, eta = 0.2 only the undamped 1/99 times |1+0.2j|.
        assert abs(oscillator.transmissibility(10.0, 0.1)) == pytest.approx(0.022582, abs=1e-6)
        assert abs(oscillator.transmissibility(10.0, 0.0, 0.2)) == pytest.approx(
            np.sqrt(1.04) / 99.0, rel=1e-4
        )
