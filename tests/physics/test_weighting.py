"""ISO 2631-1 weightings. Ids are those of CHECKS, section 7 and 13."""

import numpy as np
import pytest
from scipy.integrate import quad

from detune.physics.spectra import PowerSpectralDensity
from detune.physics.weighting import (
    frequency_weighting,
    weighted_rms_of_bands,
    weighted_rms_of_lines,
    weighted_rms_of_spectrum,
)


def test_c7_wd_from_its_transfer_function() -> None:
    # C7, ISO 2631-1 table 3 (transcription): 1, 2, 4, 8, 16, 80 Hz; printed to three digits.
    found = np.abs(frequency_weighting([1.0, 2.0, 4.0, 8.0, 16.0, 80.0], "Wd"))
    assert found == pytest.approx([1.011, 0.890, 0.512, 0.253, 0.125, 0.021], abs=6e-4)


def test_rejected_wd_at_ten_hertz() -> None:
    # Rejects 1: transcriptions print .212 at 10 Hz; the transfer function gives .202.
    assert np.abs(frequency_weighting(10.0, "Wd")) == pytest.approx(0.202, abs=5e-4)


def test_wk_from_its_transfer_function() -> None:
    # ISO 2631-1 table 3, Wk in thousandths, from memory: the ends of the band limits, the step and the transition.
    frequency = [0.5, 1.0, 2.0, 4.0, 5.0, 6.3, 8.0, 10.0, 12.5, 16.0, 31.5, 63.0, 80.0]
    table = [0.418, 0.482, 0.531, 0.967, 1.039, 1.054, 1.036, 0.988, 0.902, 0.768, 0.405, 0.186, 0.132]
    assert np.abs(frequency_weighting(frequency, "Wk")) == pytest.approx(table, abs=1.5e-3)
    assert frequency_weighting(0.0, "Wk") == 0.0


def test_trap_lines_are_peaks_and_bands_are_rms() -> None:
    # A tone of 1 m/s2 peak at 4 Hz: rms .7071 times .967.
    assert weighted_rms_of_lines([4.0], [1.0], "Wk") == pytest.approx(0.7071 * 0.967, rel=1e-3)
    assert weighted_rms_of_bands([4.0], [0.7071], "Wk") == pytest.approx(0.7071 * 0.967, rel=1e-3)
    both = weighted_rms_of_lines([1.0, 8.0], [[1.0, 1j], [0.0, 2.0]], "Wd")
    assert both == pytest.approx([np.sqrt(0.5 * (1.011**2 + 0.253**2)), np.sqrt(2.0) * 0.253], rel=2e-3)


@pytest.mark.parametrize("weighting", ["Wk", "Wd"])
def test_weighted_density_against_quadrature(weighting: str) -> None:
    spectrum = PowerSpectralDensity(np.array([0.5, 3.0, 3.0, 80.0]), np.array([0.1, 0.4, 0.02, 0.001]))

    def power(f: float) -> float:
        ends = ((0.5, 3.0, 0.1, 0.4), (3.0, 80.0, 0.02, 0.001))
        low, high, first, last = ends[0] if f < 3.0 else ends[1]
        density = first * (f / low) ** (np.log(last / first) / np.log(high / low))
        return float(density * np.abs(frequency_weighting(f, weighting)) ** 2)  # type: ignore[arg-type]

    total = quad(power, 0.5, 3.0)[0] + quad(power, 3.0, 80.0)[0]
    assert weighted_rms_of_spectrum(spectrum, weighting) == pytest.approx(np.sqrt(total), rel=1e-4)  # type: ignore[arg-type]
