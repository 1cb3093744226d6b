"""A named design over the stated scatter, by `detune assess` and `detune compare`; values of one mass by
hand."""

import re
import shutil
from pathlib import Path

import numpy as np
import pytest

from detune.cli import main
from detune.problem.build import build
from detune.study.load import load_study
from detune.study.named import named_design
from detune.study.over_scatter import over_scatter

REPORT = Path(__file__).parents[1] / "report"
SCATTER = '\n[scatter]\njudge = "interval"\nstiffness = { lot = "10 %" }\ndamping = { lot = "20 %" }\n'


def study(folder: Path, scatter: str = SCATTER, **limits: str) -> Path:
    shutil.copy(REPORT / "small_list.csv", folder)
    text = (REPORT / "small_study.toml").read_text(encoding="utf-8")
    for old, new in limits.items():
        text = text.replace({"force": '"200 N"', "rise": '"0.8 mm"'}[old], f'"{new}"')
    path = folder / "study.toml"
    path.write_text(text + scatter, encoding="utf-8")
    return path


def transmitted(s: float, t: float, frequency: float) -> float:
    """Force (N) of 0.02 kg m passed on by four of teasel-a (120 N/mm, loss factor 0.2) under 400 kg."""
    omega = 2 * np.pi * frequency
    k = 4 * 120e3 * s * (1 + 0.2j * t)
    return float(0.02 * omega**2 * abs(k / (k - 400 * omega**2)))


def test_a_proven_design(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Over +-10 % of stiffness the force is worst where the mounts are hardest and damp most, at 1,800 or
    1,200 rpm."""
    path = study(tmp_path)
    assert main(["assess", str(path), "--design", "feet=teasel-a, ballast=0 kg"]) == 0
    text = " ".join(capsys.readouterr().out.split())
    assert "Over the stated scatter (stiffness +-10 % by lot, damping +-20 % by lot)" in text
    assert "PROVEN for every value in it and the whole speed range" in text
    problem = build(load_study(path).brief, load_study(path).catalogs)
    judged = over_scatter(
        problem, named_design(problem.brief, load_study(path).catalogs, "feet=teasel-a, ballast=0 kg")
    )
    assert judged is not None and judged.proven and judged.verdict is not None and not judged.stopped
    (row,) = [row for row in judged.verdict.rows if row.kind == "transmitted-force"]
    by_hand = max(transmitted(s, t, f) for s in (0.9, 1.1) for t in (0.8, 1.2) for f in (20.0, 30.0))
    assert row.worst == pytest.approx(by_hand, rel=1e-6)
    assert row.guaranteed is not None and by_hand <= row.guaranteed <= 200.0


def test_a_violated_design_names_its_point(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """A limit between the listed value and the worst: met at listed values, violated over the scatter, exit
    code 1."""
    listed = max(transmitted(1.0, 1.0, f) for f in (20.0, 30.0))
    path = study(tmp_path, force=f"{1.02 * listed:.4f} N")
    assert main(["assess", str(path), "--design", "feet=teasel-a, ballast=0 kg"]) == 1
    text = capsys.readouterr().out
    assert re.search(r"VIOLATED: transmitted force[^:]*", text) and "stiffness lot teasel-a +10 %" in text
    assert (
        main(
            [
                "assess",
                str(study(tmp_path, "", force=f"{1.02 * listed:.4f} N")),
                "--design",
                "feet=teasel-a, ballast=0 kg",
            ]
        )
        == 0
    )
    assert "Over the stated scatter" not in capsys.readouterr().out


def test_a_proof_that_is_cut_short_is_open_and_says_so(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = study(tmp_path)
    code = main(["assess", str(path), "--design", "feet=teasel-a, ballast=0 kg", "--time-limit", "0 s"])
    text = " ".join(capsys.readouterr().out.split())
    assert (
        code == 3 and "NOT PROVEN" in text and "PARTIAL: the time limit" in text and "occurs, at most" in text
    )


def test_compare_shows_the_scatter(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = study(tmp_path)
    assert (
        main(
            [
                "compare",
                str(path),
                "--design",
                "feet=teasel-a, ballast=0 kg",
                "--design",
                "feet=teasel-c, ballast=0 kg",
            ]
        )
        == 0
    )
    lines = capsys.readouterr().out.splitlines()
    (row,) = [line for line in lines if line.startswith("over the scatter")]
    assert row.split()[3:] == ["proven", "violated"]
    assert any(line.startswith("least margin over the scatter, guaranteed") for line in lines)


def test_a_distribution_gives_a_yield(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """Of stiffnesses uniform over +-10 %, 70 % lie below +4 %; the limit is the force at +4 % and listed damping."""
    scatter = SCATTER.replace('"interval"', '"distribution"\ndistribution = "uniform"\nsamples = 256')
    scatter = scatter.replace('damping = { lot = "20 %" }', 'damping = { lot = "0 %" }')
    limit = max(transmitted(1.04, 1.0, f) for f in (20.0, 30.0))
    path = study(tmp_path, scatter, force=f"{limit:.6f} N")
    assert main(["assess", str(path), "--design", "feet=teasel-a, ballast=0 kg"]) == 0
    found = re.search(r"Yield ([\d.]+) %", capsys.readouterr().out)
    assert found is not None and float(found[1]) == pytest.approx(70.0, abs=1.0)
