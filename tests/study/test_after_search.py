"""The work after a search: made once, announced, interrupted, bounded by a time limit, and never silently short."""

from __future__ import annotations

import csv
import io
import json
import signal
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

from detune.problem.build import build
from detune.report import folder as writing
from detune.report.alternatives import alternatives
from detune.report.folder import write_folder
from detune.report.gathered import gather
from detune.report.page import page_text
from detune.report.summary import summary
from detune.report.terminal import Terminal
from detune.response import assessor
from detune.response.assessment import Assessment
from detune.response.assessor import Assessor
from detune.response.design import Design
from detune.solvers import enumeration
from detune.solvers.outcome import Progress, Settings
from detune.study import after_search
from detune.study.after_search import AfterSearch
from detune.study.closest import judge_closest
from detune.study.front import assessed_front
from detune.study.load import Study, load_study
from detune.study.named import named_design
from detune.study.run import run_study
from study import test_running as running

RUN_UP = """
[[condition]]
name = "start"
steady = false
shafts = { fan = ["120 rpm", "1400 rpm"] }
run_up = { fan = "4 s" }

[[allowable]]
kind = "displacement"
conditions = ["start"]
at = "inlet"
direction = "z"
measure = "peak"
limit = "0.035 mm"
"""


@pytest.fixture
def make(tmp_path: Path) -> Callable[..., Study]:
    def written(more: str = "") -> Study:
        (tmp_path / "study.toml").write_text(running.STUDY + more)
        (tmp_path / "list.csv").write_text("\n".join([running.HEADER, *running.ROWS]) + "\n")
        return load_study(tmp_path / "study.toml")

    return written


@pytest.fixture
def asked(monkeypatch: pytest.MonkeyPatch) -> list[Design]:
    """Every design of which an assessment is made."""
    designs: list[Design] = []
    made = assessor.assess

    def noted(brief: object, design: Design) -> Assessment:
        designs.append(design)
        return made(brief, design)  # type: ignore[arg-type]

    monkeypatch.setattr(assessor, "assess", noted)
    return designs


def over(work: AfterSearch, monkeypatch: pytest.MonkeyPatch) -> None:
    """Put the clock past the end of what `work` may still begin."""
    later = after_search.time.perf_counter() + 1e6
    monkeypatch.setattr(after_search.time, "perf_counter", lambda: later)


def test_a_design_is_assessed_once_in_a_run(make: Callable[..., Study], asked: list[Design]) -> None:
    study = make()
    front = run_study(study).front.points
    # The named design lies on the front: it has been assessed before it is asked for.
    named = f"front={front[0].design.parts[0]}, back={front[0].design.parts[1]}, ballast={front[0].design.ballast:g} kg"
    asked.clear()
    result = run_study(study, compared=(named_design(study.brief, study.catalogs, named),))
    page_text(result, (), gather(result))
    assert alternatives(result).items
    assert len(asked) == len(set(asked)) >= len(front)


def test_two_runs_share_nothing(make: Callable[..., Study], asked: list[Design]) -> None:
    study = make()
    first = run_study(study)
    count = len(asked)
    second = run_study(study)
    assert len(asked) == 2 * count and first.front.points == second.front.points


def test_the_answer_is_assessed_even_if_no_time_is_left(make: Callable[..., Study]) -> None:
    problem = build(make().brief, make().catalogs)
    outcome = enumeration.solve(problem, Settings())
    whole = assessed_front(problem, outcome)
    assert len(whole.points) > 2 and whole.unassessed == 0
    short = assessed_front(problem, outcome, Assessor(problem.brief), lambda: False)
    assert short.points == whole.points[:1] and short.index == whole.index[:1]
    assert short.unassessed == len(whole.points) - 1


def test_a_time_limit_bounds_what_is_optional_and_says_what_is_missing(
    make: Callable[..., Study], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The search ends in time, then the time is up: the answer stands; report and summary name the rest."""
    study = make()
    whole = run_study(study)
    work = AfterSearch(Settings(time_limit=1e5))
    over(work, monkeypatch)
    result = run_study(study, Settings(), work=work)
    assert whole.answer is not None and result.answer is not None
    assert result.answer.design == whole.answer.design and result.answer.margins == whole.answer.margins
    assert result.outcome.stopped == "finished" and result.exit_code == 0
    assert result.front.unassessed == len(whole.front.points) - 1
    target = write_folder(result, tmp_path / "out", work=work)
    text, page = " ".join(summary(result, work=work).split()), (target / "report.html").read_text()
    for words in ("designs that the search claims to lie on the front", "service loads", "contributions.csv",
                  "the choices beside the answer", "stiffness-damping"):  # fmt: skip
        assert words in text and words in page, words
    assert "Left out for lack of time (the limit is" in text and "Left out for lack of time" in page
    answer = json.loads((target / "answer.json").read_text(encoding="utf-8"))
    assert (
        answer["unassessed_on_the_front"] == result.front.unassessed and "service loads" in answer["left_out"]
    )
    # What is not there is not written as if it were.
    assert not (target / "contributions.csv").exists()
    assert {p.stem for p in (target / "plots").glob("*.svg")} == {
        "front",
        "margins",
        "response",
        "modes-speed",
        "why",
    }


def test_without_a_limit_nothing_is_left_out(make: Callable[..., Study]) -> None:
    result = run_study(make())
    assert result.left_out == () and result.why_left_out is None and result.front.unassessed == 0
    assert "Left out" not in summary(result) and "Left out" not in page_text(result, ())


def test_passages_of_the_closest_designs_are_left_out_and_told(
    make: Callable[..., Study], monkeypatch: pytest.MonkeyPatch
) -> None:
    study = make(RUN_UP)
    whole = run_study(study)
    start = [r for r in whole.reasons if r.hardest_rule is not None and "(start)" in r.hardest_rule]
    assert start and all(reason.whole for reason in whole.reasons)
    work = AfterSearch(Settings(time_limit=1e5))
    over(work, monkeypatch)
    short = run_study(study, Settings(), work=work)
    fell = [reason for reason in short.reasons if reason.hardest_rule is not None]
    assert fell and not any(reason.whole for reason in fell)
    by_key = {(r.group, r.mount.part): r for r in whole.reasons}
    for reason in fell:
        true = by_key[reason.group, reason.mount.part].hardest_margin
        # What was looked at can only make a design look better than it is.
        assert (
            reason.hardest_margin is not None and true is not None and reason.hardest_margin >= true - 1e-12
        )
    assert any("what records and passages do to the closest designs" in words for words in short.left_out)
    assert "without records and passages" in page_text(short, (), work=work)


def test_closest_designs_are_judged_once_each(make: Callable[..., Study]) -> None:
    """Every part that fell out has its row; the margins are those that the stages give it."""
    problem = build(make(RUN_UP).brief, make(RUN_UP).catalogs)
    outcome = enumeration.solve(problem, Settings())
    judged = judge_closest(problem, outcome)
    assert judged.margins.shape == (len(judged.labels), outcome.closest.count) and judged.unjudged == 0
    for index in range(outcome.closest.count):
        told = Assessor(problem.brief)(problem.design(outcome.closest, index))
        assert judged.least[index] == pytest.approx(told.tightest.margin, abs=1e-3)


def test_the_first_interrupt_keeps_what_was_found_and_the_second_stops(
    make: Callable[..., Study], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    study, told = make(), []
    made = assessor.assess

    def pressed(brief: object, design: Design) -> Assessment:
        signal.raise_signal(signal.SIGINT)
        return made(brief, design)  # type: ignore[arg-type]

    settings = Settings(stage=told.append)
    work = AfterSearch(settings)
    monkeypatch.setattr(assessor, "assess", pressed)
    result = run_study(study, settings, work=work)
    assert result.answer is not None and result.answer.meets and result.front.unassessed > 0
    assert result.why_left_out == "after an interruption"
    assert any("Ctrl-C once more stops at once" in line for line in told)
    target = write_folder(result, tmp_path / "out", work=work)
    assert (target / "answer.json").is_file() and not list((target / "plots").iterdir())
    assert "Left out after an interruption" in summary(result, work=work)

    def pressed_twice(brief: object, design: Design) -> Assessment:
        signal.raise_signal(signal.SIGINT)
        return pressed(brief, design)

    monkeypatch.setattr(assessor, "assess", pressed_twice)
    with pytest.raises(KeyboardInterrupt):
        run_study(study)
    assert signal.getsignal(signal.SIGINT) is signal.default_int_handler


def test_each_thing_done_after_the_search_is_told_in_one_line(
    make: Callable[..., Study], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    told: list[str] = []
    settings = Settings(stage=told.append)
    work = AfterSearch(settings)
    monkeypatch.setattr(writing, "draw_each", lambda plots, result: ())
    write_folder(run_study(make(), settings, work=work), tmp_path / "out", work=work)
    assert [line.split(" ")[0] for line in told] == ["Assessing", "Judging", "Working", "Drawing", "Writing"]
    assert not any("\n" in line for line in told)


class Screen(io.StringIO):
    def isatty(self) -> bool:
        return True


def test_the_terminal_speaks_to_who_watches_alone(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sys, "stderr", io.StringIO())
    unwatched = Terminal()
    assert unwatched.progress is None and unwatched.stage is None
    screen = Screen()
    monkeypatch.setattr(sys, "stderr", screen)
    watched = Terminal()
    assert watched.progress is not None and watched.stage is not None
    watched.progress(Progress(5, 20, 12.5, 10.0))
    watched.stage("Assessing the designs on the front.")
    # A search that was stopped leaves its line open; what follows begins a new one.
    first, second = screen.getvalue().rstrip("\n").split("\n")
    assert first.strip() == "25.0% of 20 designs settled; best so far 12.50; none left is cheaper than 10.00"
    assert second == "Assessing the designs on the front."


def test_the_reasons_tell_which_design_was_judged_by_all(make: Callable[..., Study], tmp_path: Path) -> None:
    target = write_folder(run_study(make(RUN_UP)), tmp_path / "out")
    rows = list(csv.DictReader((target / "why.csv").open(encoding="utf-8")))
    assert {row["judged by every requirement"] for row in rows if row["hardest rule"]} == {"yes"}
