"""The example of the page on scatter, run as it stands there; its figures, two of them by hand."""

import re
from pathlib import Path

import numpy as np
import pytest

from detune.brief.scatter import Scatter
from detune.solvers.outcome import Settings
from detune.study.load import load_study
from detune.study.run import run_study

TEXT = (Path(__file__).parents[2] / "docs" / "scatter.md").read_text(encoding="utf-8")
BLOCK = re.compile(r"^```\{code-block\} \w+\n:caption: (\S+)\n\n(.*?)^```$", re.DOTALL | re.MULTILINE)


def table_row(name: str) -> list[str]:
    (line,) = [line for line in TEXT.splitlines() if line.startswith(f"| {name} |")]
    return [cell.strip() for cell in line.strip("|").split("|")]


@pytest.fixture(scope="module")
def result(tmp_path_factory: pytest.TempPathFactory):
    folder = tmp_path_factory.mktemp("page")
    for name, text in BLOCK.findall(TEXT):
        (folder / name).write_text(text, encoding="utf-8")
    return run_study(load_study(folder / "instrument.toml"), Settings())


def test_the_example_comes_to_what_the_page_says(result):
    robust = result.robust
    names = {v.part: result.problem.candidates[0][v.part[0]].part for v in (robust.winner, *robust.violated)}
    assert names[robust.winner.part] == "aspen-m" and robust.optimal
    assert [names[v.part] for v in robust.violated] == ["aspen-s"]
    assert result.outcome.designs.count == 3
    cost, status, _, worst, guaranteed = table_row("aspen-m")[1:]
    assert float(cost) == robust.winner.cost and status == robust.winner.status == "proven"
    (row,) = [r for r in robust.winner.rows if r.kind == "acceleration"]
    assert f"{row.worst:.4g} m/s^2" == worst
    # The bound depends on where the bisection stops, which rounding may shift.
    assert row.guaranteed == pytest.approx(float(guaranteed.split()[0]), rel=1e-2) and row.guaranteed <= 0.13
    assert f"{100 * robust.price:.1f} %" in TEXT


def test_the_soft_foot_sags_as_by_hand(result):
    (row,) = [r for r in result.robust.violated[0].rows if r.kind == "sag"]
    by_hand = 120 * 9.80665 / (4 * 38e3 * 0.85)
    assert row.worst == pytest.approx(by_hand, rel=1e-9) and f"{1e3 * by_hand:.4g} mm" in table_row("aspen-s")


@pytest.mark.parametrize(("name", "k"), [("aspen-m", 72e3), ("aspen-h", 105e3)])
def test_the_random_values_by_a_dense_sum(name, k):
    """Rms of |k* / (k* - m w^2)| a over a flat 1e-6 g^2/Hz from 2 to 60 Hz, hardest and least damped, by
    400,000 steps."""
    w = 2 * np.pi * np.linspace(2.0, 60.0, 400_001)
    stiff = 4 * k * 1.15 * (1 + 0.12j * 0.7)
    transmissibility = np.abs(stiff / (stiff - 120 * w**2))
    rms = np.sqrt(np.trapezoid(transmissibility**2 * 1e-6 * 9.80665**2, w / (2 * np.pi)))
    assert f"{rms:.4g} m/s^2" == table_row(name)[4]


def test_every_key_of_the_table_is_told():
    keys = {
        cell[0].strip("` ")
        for cell in (line.strip("|").split("|") for line in TEXT.splitlines() if line.startswith("| `"))
    }
    assert {"stiffness", "damping", "mass", "centre", "forcing"} <= keys
    for key in ("judge", "distribution", "samples"):
        assert key in Scatter.model_fields and key in TEXT
