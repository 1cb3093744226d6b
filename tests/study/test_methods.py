"""Studies by each method asked for: the same answer, refusals in words, partial results with bound and gap, folders."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from detune.cli import main
from detune.ground.errors import BriefError
from detune.report.folder import write_folder
from detune.report.summary import summary
from detune.solvers import SOLVERS
from detune.solvers.outcome import Progress, Settings
from detune.study.load import Study, load_study
from detune.study.run import run_study
from study import test_running as running


@pytest.fixture
def path(tmp_path: Path) -> Path:
    (tmp_path / "study.toml").write_text(running.STUDY)
    (tmp_path / "list.csv").write_text("\n".join([running.HEADER, *running.ROWS]) + "\n")
    return tmp_path / "study.toml"


@pytest.fixture
def study(path: Path) -> Study:
    return load_study(path)


@pytest.mark.parametrize("method", SOLVERS)
def test_every_method_gives_the_same_answer_and_a_result_folder(
    method: str, path: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """The cheapest of the 50 designs, found in test_running by assessing every one of them."""
    expected = run_study(load_study(path)).answer
    assert expected is not None
    out = tmp_path / "out"
    assert main(["run", str(path), "--method", method, "--out", str(out)]) == 0
    assert f"cost {expected.cost:.4g}" in capsys.readouterr().out
    answer = json.loads((out / "answer.json").read_text(encoding="utf-8"))
    assert answer["answer"]["cost"] == expected.cost and answer["stopped"] == "finished"
    proof = json.loads(next(out.glob("proof*.json")).read_text(encoding="utf-8"))
    assert proof["method"] == method and proof["accounted"] and proof["designs"] == 50


def test_a_method_that_cannot_treat_the_study_says_why(
    path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    text = path.read_text().replace('trade = ["cost", "separation"]', 'trade = ["added-mass", "cost"]')
    path.write_text(text)
    for method, words in (("bounded search", "fronts of cost"), ("second opinion", "the least cost")):
        with pytest.raises(BriefError, match=words) as caught:
            run_study(load_study(path), solver=method)
        assert "enumeration" in caught.value.faults[0].expected
        assert main(["run", str(path), "--method", method]) == 2
        assert words in capsys.readouterr().err


@pytest.mark.parametrize("method", SOLVERS)
def test_a_time_limit_gives_a_bound_and_no_claim(method: str, study: Study) -> None:
    """Nothing is cheaper than the cheapest part at every station: four at 5 each, and no ballast."""
    result = run_study(study, Settings(time_limit=0.0), solver=method)
    assert result.exit_code == 3
    text = " ".join(summary(result).split())
    assert "PARTIAL RESULT: stopped by the time limit" in text
    assert "No design meets the brief" not in text
    if method != "second opinion":
        assert "None of them costs less than 20.00." in text


def test_an_interrupted_search_keeps_what_it_found_with_the_gap(study: Study, tmp_path: Path) -> None:
    whole = run_study(study, solver="bounded search")
    assert whole.answer is not None

    def stop(progress: Progress) -> None:
        if progress.incumbent is not None:
            raise KeyboardInterrupt

    result = run_study(study, Settings(progress=stop), solver="bounded search")
    assert result.exit_code == 3 and result.answer is not None and result.answer.meets
    bound = result.outcome.record.lower_bound
    assert bound is not None
    assert min(bound, result.answer.cost) <= whole.answer.cost <= result.answer.cost
    text = " ".join(summary(result).split())
    assert "PARTIAL RESULT: stopped by an interruption" in text
    gap = (result.answer.cost - bound) / result.answer.cost
    if gap > 0.0:
        assert f"None of them costs less than {bound:.2f}" in text and f"a gap of {100 * gap:.1f}%" in text
    else:
        assert "None of them costs less than the cheapest one found" in text
    write_folder(result, tmp_path / "partial", False)
    proof = json.loads(next((tmp_path / "partial").glob("proof*.json")).read_text(encoding="utf-8"))
    assert proof["stopped"] == "interrupted" and not proof["accounted"]
