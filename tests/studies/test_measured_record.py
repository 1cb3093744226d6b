"""An open measured record through the whole road: file, study, solver, assessor, report.

The record is AKT013 E-W of 11 August 1996, a K-NET strong-motion file that stands in the tests of the package
obspy (an extra of the tests; where it is not installed, these are skipped). Nothing of it is kept here.
"""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest
import scipy.signal

from detune.brief.forcing.measured_record import MeasuredRecord
from detune.report.figures import draw_all
from detune.report.page import page_text
from detune.response.assessment import MarginRow
from detune.solvers.outcome import Settings
from detune.study.load import load_study
from detune.study.run import Result, run_study
from small_studies import limit, mass_on_mounts, parts_from, study_text, table, written

obspy = pytest.importorskip("obspy")

MASS = 80.0
STEP = 0.01
# Part: axial stiffness N/m, viscous coefficient N s/m.
PARTS = {"rowan-a": (30e3, 150.0), "rowan-b": (120e3, 300.0)}
LIST = """\
part,family,stiffness_z_static [N/m],stiffness_z_dynamic [N/m],viscous [N s/m],load_min [N],load_max [N],pulls,cost
rowan-a,spring,30000,30000,150,0,2000,yes,20
rowan-b,spring,120000,120000,300,0,2000,yes,16
"""
STUDY = study_text(
    "Balance on a floor that was recorded",
    mass_on_mounts("80 kg", stations={"foot": 0.0}, body="balance", point="pan", centre=0.2, top=0.4),
    table("condition", name="tremor", steady=False),
    table(
        "forcing",
        kind="measured-record",
        name="floor",
        direction="z",
        file="record.csv",
        use="time",
        detrend="mean",
        between="straight",
    ),
    limit("acceleration", "0.06 m/s^2", at="pan"),
    limit("relative-motion", "0.2 mm", at="pan", to="floor"),
    parts_from("mounts"),
)


@pytest.fixture(scope="module")
def acceleration() -> np.ndarray:
    """The record in m/s^2, as the package reads it: counts times its calibration."""
    file = Path(obspy.__file__).parent / "io" / "nied" / "tests" / "data" / "test.knet"
    trace = obspy.read(str(file))[0]
    assert (trace.stats.npts, trace.stats.sampling_rate) == (5900, 100.0)
    return np.asarray(trace.data * trace.stats.calib, dtype=float)


@pytest.fixture(scope="module")
def result(acceleration: np.ndarray, tmp_path_factory: pytest.TempPathFactory) -> Result:
    folder = tmp_path_factory.mktemp("record")
    rows = "\n".join(f"{STEP * i:.2f},{value:.12g}" for i, value in enumerate(acceleration))
    (folder / "record.csv").write_text(f"time [s],acceleration [m/s^2]\n{rows}\n", encoding="utf-8")
    return run_study(load_study(written(folder, STUDY, mounts=LIST)), Settings())


def by_lsim(acceleration: np.ndarray, part: str) -> tuple[float, float]:
    """Largest absolute acceleration and largest motion against the floor, by scipy.signal.lsim.

    m z'' + c z' + k z = -m a with z against the floor; what the mass feels is -(c z' + k z)/m. The record runs
    straight between its samples, and goes on with ten seconds of rest; looked at on a mesh 20 times finer.
    """
    k, c = PARTS[part]
    free = acceleration - acceleration.mean()
    within = np.interp(np.arange((len(free) - 1) * 20 + 1) / 20, np.arange(len(free)), free)
    record = np.concatenate([within, np.zeros(20 * 1000)])
    time = np.arange(len(record)) * STEP / 20
    system = scipy.signal.StateSpace(
        [[0.0, 1.0], [-k / MASS, -c / MASS]],
        [[0.0], [-1.0]],
        [[1.0, 0.0], [-k / MASS, -c / MASS]],
        [[0.0], [0.0]],
    )
    _, out, _ = scipy.signal.lsim(system, record, time)
    return float(np.abs(out[:, 1]).max()), float(np.abs(out[:, 0]).max())


def row(result: Result, kind: str) -> MarginRow:
    assert result.answer is not None
    return next(each for each in result.answer.margins if each.kind == kind)


def test_the_record_keeps_the_peak_that_stands_in_its_file(result: Result) -> None:
    """The file's own header prints 4.383 gal; with the mean taken away the samples give 4.3833."""
    (forcing,) = result.study.brief.forcing
    assert isinstance(forcing, MeasuredRecord)
    (transient,) = forcing.transients()
    assert transient.record is not None
    assert float(np.abs(transient.record).max()) == pytest.approx(0.043833, rel=1e-4)
    assert transient.step == pytest.approx(STEP, rel=1e-9)


def test_the_answer_and_its_response_by_lsim(result: Result, acceleration: np.ndarray) -> None:
    """The harder part is the cheaper one and feels 0.076 m/s^2 where 0.06 is allowed; the softer one feels 0.047."""
    assert by_lsim(acceleration, "rowan-b")[0] == pytest.approx(0.076, abs=1e-3)
    assert result.answer is not None and result.answer.meets
    assert result.answer.design.parts == ("rowan-a",)
    felt, moved = by_lsim(acceleration, "rowan-a")
    assert row(result, "acceleration").value == pytest.approx(felt, rel=1e-4)
    assert row(result, "relative-motion").value == pytest.approx(moved, rel=1e-4)
    # 30 N/mm under 80 kg.
    assert result.answer.modes[0].frequency == pytest.approx(
        math.sqrt(30e3 / 80.0) / (2.0 * math.pi), rel=1e-9
    )


def test_the_report_shows_the_record_at_work(result: Result) -> None:
    page = page_text(result, draw_all(result))
    assert "tremor" in page and "record.csv" in page
