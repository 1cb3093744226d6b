"""Measured records: faults by row, detrending, resampling, Welch densities and lines."""

import numpy as np
import pytest

from detune.physics.records import (
    RecordFault,
    checked,
    density_of_record,
    detrended,
    lines_of_record,
    resampled_record,
    sample_rate,
)
from detune.physics.spectra import density_at, mean_square


def test_gaps_repeats_and_missing_values_are_refused_by_row() -> None:
    time = np.arange(100) / 200.0
    assert sample_rate(np.round(time, 4)) == pytest.approx(200.0, rel=1e-4)
    with pytest.raises(RecordFault, match=r"row 51 at 0\.255 s"):
        sample_rate(np.delete(time, 50))
    with pytest.raises(RecordFault, match="row 4"):
        sample_rate([0.0, 0.1, 0.2, 0.2, 0.3, 0.4])
    # 256 Hz printed in whole milliseconds jitters by a quarter of a step and has no gap; in centiseconds it is lost.
    fine = np.arange(300) / 256.0
    assert sample_rate(np.round(fine, 3)) == pytest.approx(256.0, rel=1e-3)
    with pytest.raises(RecordFault, match="row 101"):
        sample_rate(np.round(np.delete(fine, 100), 3))
    with pytest.raises(RecordFault, match="not evenly spaced"):
        sample_rate(np.round(fine, 2))
    with pytest.raises(RecordFault, match="row 3 of the record is not a number"):
        checked([0.0, 1.0, np.nan, 2.0])
    with pytest.raises(RecordFault, match="two or more"):
        checked([1.0])


def test_detrending_against_polyfit() -> None:
    rng = np.random.default_rng(3)
    record = rng.normal(size=500) + np.linspace(0.0, 7.0, 500)
    place = np.arange(500)
    assert detrended(record, 0) == pytest.approx(record - record.mean())
    line = np.polyval(np.polyfit(place, record, 1), place)
    assert detrended(record, 1) == pytest.approx(record - line, abs=1e-11)


def test_resampling_keeps_a_slow_tone_and_removes_a_fast_one() -> None:
    time = np.arange(4000) / 1000.0
    slow, fast = np.sin(2 * np.pi * 7.0 * time), np.sin(2 * np.pi * 180.0 * time)
    new = resampled_record(slow + fast, 1000.0, 250.0)
    # 180 Hz lies above half of 250 Hz and would fold to 70 Hz.
    wanted = np.sin(2 * np.pi * 7.0 * np.arange(new.size) / 250.0)
    assert np.max(np.abs(new - wanted)[100:-100]) < 5e-3
    with pytest.raises(ValueError, match="ratio of whole numbers"):
        resampled_record(slow, 1000.0, 250.0 * np.pi / 3.0)


def test_welch_density_of_white_noise() -> None:
    # White noise of variance s^2 sampled at rate r has the one-sided density 2 s^2/r.
    rng = np.random.default_rng(11)
    record = 3.0 * rng.normal(size=200_000)
    spectrum, averages = density_of_record(record, 400.0, 1.0)
    assert averages == 999
    assert np.mean(density_at(spectrum, np.arange(20.0, 180.0))) == pytest.approx(2.0 * 9.0 / 400.0, rel=0.01)
    assert mean_square(spectrum) == pytest.approx(9.0, rel=0.02)
    with pytest.raises(RecordFault, match="do not fit"):
        density_of_record(record[:300], 400.0, 1.0)
    with pytest.raises(RecordFault, match="no motion"):
        density_of_record(np.ones(4000), 400.0, 1.0)


def test_lines_of_a_periodic_record() -> None:
    # 2 cos(2 pi 5 t + 0.3) + 0.5 sin(2 pi 12 t) over two seconds: phasors 2 exp(0.3 j) and -0.5 j.
    time = np.arange(400) / 200.0
    record = 4.0 + 2.0 * np.cos(2 * np.pi * 5.0 * time + 0.3) + 0.5 * np.sin(2 * np.pi * 12.0 * time)
    frequency, phasor, share = lines_of_record(record, 200.0, 1.0 - 1e-9)
    assert frequency == pytest.approx([5.0, 12.0])
    assert phasor == pytest.approx([2.0 * np.exp(0.3j), -0.5j])
    assert share == pytest.approx(1.0, abs=1e-12)
    # The strongest line alone holds 4/(4 + 0.25).
    frequency, _, share = lines_of_record(record, 200.0, 0.9)
    assert frequency == pytest.approx([5.0])
    assert share == pytest.approx(4.0 / 4.25)


def test_lines_hold_the_whole_mean_square() -> None:
    # Parseval's theorem, for even and odd lengths.
    rng = np.random.default_rng(5)
    for size in (256, 257):
        record = rng.normal(size=size)
        _, phasor, share = lines_of_record(record, 100.0, 1.0)
        own = 0.5 * np.abs(phasor) ** 2
        if size % 2 == 0:
            own[-1] *= 2.0
        assert share == pytest.approx(1.0)
        assert own.sum() == pytest.approx(record.var())
