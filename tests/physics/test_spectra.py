"""Power spectral densities: overall levels of published profiles, slopes, bands. Ids are those of CHECKS, section 4."""

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.physics.band_spectra import (
    band_index_of_centre,
    lines_in_third_octaves,
    spectrum_from_third_octaves,
    third_octave_rms,
    tones_from_third_octaves,
)
from detune.physics.spectra import (
    PowerSpectralDensity,
    band_averaged,
    density_at,
    differentiated,
    exponent_from_slope,
    mean_square,
    mean_square_between,
    resampled,
    root_mean_square,
    scaled,
    segment_exponents,
    slope_from_exponent,
    spectrum_from_slopes,
)


def profile(*points: tuple[float, float]) -> PowerSpectralDensity:
    frequency, density = zip(*points, strict=True)
    return PowerSpectralDensity(np.array(frequency), np.array(density))


def test_r2_slope_of_minus_one_integrates_to_a_logarithm() -> None:
    # R2, NAVMAT appendix and any text; recomputed: p1 f1 ln(f2/f1) = 0.04 x 350 x ln(2000/350) = 24.40157 (1e-6).
    spectrum = spectrum_from_slopes([350.0, 2000.0], [-10.0 * np.log10(2.0)], 0.04, 350.0)
    assert mean_square(spectrum) == pytest.approx(24.40157, abs=1e-5)


def test_r2_trap_three_decibels_per_octave_is_not_exponent_one() -> None:
    # R2 and the trap of section 14: 3/3.0103 = 0.99658. The choice of this program is the exact definition.
    assert exponent_from_slope(3.0) == pytest.approx(0.99658, abs=1e-5)
    assert exponent_from_slope(10.0 * np.log10(2.0)) == pytest.approx(1.0, abs=1e-15)
    assert slope_from_exponent(2.0) == pytest.approx(6.0206, abs=1e-4)


def test_r3_gevs_qualification() -> None:
    # R3, GSFC-STD-7000A table 2.4-3, read in a transcription; published 14.1 g.
    spectrum = profile((20, 0.026), (50, 0.16), (800, 0.16), (2000, 0.026))
    assert root_mean_square(spectrum) == pytest.approx(14.1356, abs=5e-5)
    assert root_mean_square(scaled(spectrum, np.sqrt(0.5))) == pytest.approx(9.9954, abs=5e-5)
    assert slope_from_exponent(segment_exponents(spectrum)[0]) == pytest.approx(5.97, abs=5e-3)
    assert density_at(spectrum, 35.0) == pytest.approx(0.078875, abs=1e-6)


def test_r4_navmat_screening() -> None:
    # R4, NAVMAT P-9492, read: 6.058 g with the slopes as exponents +1 and -1 (20 Hz at 0.01), published 6.06.
    exact = spectrum_from_slopes([20, 80, 350, 2000], [3.0103, 0.0, -3.0103], 0.04, 80.0)
    assert root_mean_square(exact) == pytest.approx(6.058, abs=5e-4)
    assert density_at(exact, 20.0) == pytest.approx(0.01, rel=1e-5)
    # The words "3 dB per octave" taken exactly give 0.1 % more; the difference is known and stated.
    worded = spectrum_from_slopes([20, 80, 350, 2000], [3.0, 0.0, -3.0], 0.04, 350.0)
    assert root_mean_square(worded) == pytest.approx(6.058 * 1.00102, abs=1e-3)


@pytest.mark.parametrize(
    ("points", "factor", "expected"),
    [
        # R5: NASA-STD-7001 table 1 (overall read, points from memory); MIL-STD-810 method 514; ASTM D4169 air.
        ([(20, 0.01), (80, 0.04), (500, 0.04), (2000, 0.01)], 1.0, 6.784),
        ([(20, 0.04), (1000, 0.04), (2000, 0.01)], 1.0, 7.694),
        ([(2, 0.0002), (12, 0.01), (100, 0.01), (300, 1e-5)], 1.0, 1.0517),
        ([(2, 0.0002), (12, 0.01), (100, 0.01), (300, 1e-5)], 2.0, 1.4874),
        ([(2, 0.0002), (12, 0.01), (100, 0.01), (300, 1e-5)], 0.5, 0.7437),
        # R6: ASTM D4169 before 2016 = D4728 appendix X1 (points and overall read); ISO 13355 via D4728-06.
        ([(1, 5e-5), (4, 0.01), (16, 0.01), (40, 0.001), (80, 0.001), (200, 1e-5)], 1.0, 0.5167),
        ([(1, 5e-5), (4, 0.01), (16, 0.01), (40, 0.001), (80, 0.001), (200, 1e-5)], 2.0, 0.7307),
        ([(1, 5e-5), (4, 0.01), (16, 0.01), (40, 0.001), (80, 0.001), (200, 1e-5)], 0.5, 0.3654),
        ([(3, 5e-4), (6, 0.012), (18, 0.012), (40, 0.001), (200, 5e-4)], 1.0, 0.5877),
        # R10: ISO 16750-3:2007 tests IV and VII, in m/s2; published 27.8 and 57.9.
        ([(10, 20), (55, 6.5), (180, 0.25), (300, 0.25), (360, 0.14), (1000, 0.14)], 1.0, 27.784),
        ([(10, 18), (20, 36), (30, 36), (180, 1), (2000, 1)], 1.0, 57.879),
    ],
)
def test_r5_r6_r10_published_profiles(
    points: list[tuple[float, float]], factor: float, expected: float
) -> None:
    assert root_mean_square(scaled(profile(*points), np.sqrt(factor))) == pytest.approx(expected, rel=2e-4)


@settings(deadline=None, max_examples=60)
@given(
    exponent=st.one_of(st.floats(-12.0, 12.0), st.floats(-1.0 - 1e-9, -1.0 + 1e-9)),
    ratio=st.floats(1.0001, 50.0),
)
def test_segment_area_against_high_precision_quadrature(exponent: float, ratio: float) -> None:
    spectrum = profile((3.0, 0.2), (3.0 * ratio, 0.2 * ratio**exponent))
    rule = mpmath.quad(lambda x: 0.2 * 3.0 * x ** (exponent), mpmath.linspace(1, ratio, 6))
    assert mean_square(spectrum) == pytest.approx(float(rule), rel=1e-9)


@settings(deadline=None, max_examples=40)
@given(cut=st.floats(1.0, 1000.0))
def test_mean_squares_add_up_at_any_cut(cut: float) -> None:
    spectrum = profile((1, 5e-5), (4, 0.01), (16, 0.01), (16, 0.002), (40, 0.001), (800, 1e-5))
    whole = mean_square_between(spectrum, 0.5, cut) + mean_square_between(spectrum, cut, 2000.0)
    assert whole == pytest.approx(mean_square(spectrum), rel=1e-12)


def test_a_vertical_step_takes_its_upper_side_and_no_area() -> None:
    spectrum = profile((10, 1.0), (20, 1.0), (20, 4.0), (30, 4.0))
    assert mean_square(spectrum) == pytest.approx(10.0 + 40.0, rel=1e-14)
    assert density_at(spectrum, [5.0, 10.0, 19.999, 20.0, 30.0, 31.0]) == pytest.approx([0, 1, 1, 4, 4, 0])


def test_differentiation_keeps_lines_straight() -> None:
    # (2 pi f)^2 per differentiation: 1e-6 (m/s)^2/Hz at 10 Hz is 1e-6 (62.832)^2 = 3.948e-3 (m/s2)^2/Hz.
    velocity = profile((10, 1e-6), (100, 1e-6))
    acceleration = differentiated(velocity, 1)
    assert density_at(acceleration, 10.0) == pytest.approx(3.94784e-3, rel=1e-5)
    # Between: 1e-6 (2 pi)^2 (f2^3 - f1^3)/3.
    assert mean_square(acceleration) == pytest.approx(1e-6 * 39.4784176 * (1e6 - 1e3) / 3.0, rel=1e-8)
    assert np.allclose(differentiated(acceleration, -1).density, velocity.density, rtol=1e-14)


def test_resampling_is_exact_where_the_corners_are_kept_and_averaging_keeps_the_mean_square() -> None:
    spectrum = profile((20, 0.026), (50, 0.16), (800, 0.16), (2000, 0.026))
    finer = resampled(spectrum, [20, 31, 50, 300, 800, 1111, 2000])
    assert mean_square(finer) == pytest.approx(mean_square(spectrum), rel=1e-12)
    stairs = band_averaged(spectrum, np.geomspace(20, 2000, 24))
    assert mean_square(stairs) == pytest.approx(mean_square(spectrum), rel=1e-12)


@pytest.mark.parametrize(
    ("frequency", "density", "words"),
    [
        ([10, 20], [1, -1], "row 2 has a negative density"),
        ([0, 20], [1, 1], "row 1 has a frequency that is not above zero"),
        ([10, 20, 15], [1, 1, 1], "row 3 has a lower frequency"),
        ([10, 20, 20, 20], [1, 1, 2, 3], "row 4 is the third row at one frequency"),
        ([10, 20, 30], [1, np.nan, 1], "row 2 is not a finite number"),
        ([10, 20], [1, 0], "write a step"),
        ([10], [1], "two or more"),
    ],
)
def test_bad_break_points_are_refused_by_row(
    frequency: list[float], density: list[float], words: str
) -> None:
    with pytest.raises(ValueError, match=words):
        PowerSpectralDensity(np.array(frequency), np.array(density))


def test_a_known_level_off_the_break_points_is_refused() -> None:
    with pytest.raises(ValueError, match="not at one of the break points"):
        spectrum_from_slopes([20, 80], [3.0], 0.04, 50.0)


def test_third_octave_bands_as_noise_keep_each_band() -> None:
    # Bandwidth of a one-third-octave band is 0.230768 of its centre (IEC 61260-1, CHECKS C8): 1 um/s at 10 Hz.
    spectrum = spectrum_from_third_octaves([8, 10, 12.5, 20], [3e-6, 1e-6, 2e-6, 5e-6])
    assert density_at(spectrum, 10.0) == pytest.approx(1e-12 / 2.30768, rel=1e-5)
    assert third_octave_rms(spectrum, [-21, -20, -19, -18, -17]) == pytest.approx(
        [3e-6, 1e-6, 2e-6, 0.0, 5e-6]
    )
    assert root_mean_square(spectrum) == pytest.approx(1e-6 * np.sqrt(9 + 1 + 4 + 25), rel=1e-12)


def test_trap_nominal_and_exact_centres_name_the_same_band() -> None:
    # CHECKS C8: exact centres 7.94328, 10, 63.0957 Hz; 31.5 stands for 31.6228.
    assert band_index_of_centre([8.0, 7.94328, 63.0, 63.0957, 31.5]).tolist() == [-21, -21, -12, -12, -15]
    with pytest.raises(ValueError, match=r"9 Hz is no one-third-octave centre"):
        band_index_of_centre([8.0, 9.0])


def test_trap_rms_and_peak_bands_as_tones() -> None:
    # A band value of 1 rms is a tone of peak 1.41421 anywhere from 8.91251 to 11.22018 Hz (CHECKS C8).
    low, high, peak = tones_from_third_octaves([10.0], [1.0])
    assert (low[0], high[0], peak[0]) == pytest.approx((8.91251, 11.22018, 1.414214), rel=1e-6)


def test_lines_add_as_mean_squares_within_a_band_and_with_phase_at_one_frequency() -> None:
    index, rms = lines_in_third_octaves([10.0, 10.5, 25.0, 25.0], [3.0, 4.0, 1.0, -1.0])
    # sqrt((9 + 16)/2) = 3.5355; two lines of opposite phase at 25 Hz cancel.
    assert index.tolist() == [-20, -16]
    assert rms == pytest.approx([3.535534, 0.0], abs=1e-6)


@pytest.mark.parametrize(
    ("centre", "rms", "words"),
    [([8, 10], [1, -1], "row 2"), ([10, 8], [1, 1], "must rise"), ([8, 10], [1], "one rms value")],
)
def test_bad_bands_are_refused(centre: list[float], rms: list[float], words: str) -> None:
    with pytest.raises(ValueError, match=words):
        spectrum_from_third_octaves(centre, rms)
