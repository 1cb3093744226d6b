"""A study from its files to its result: answers, fronts, named designs, no answer, and being stopped."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from detune.brief.choice import LARGER_IS_BETTER
from detune.ground.errors import BriefError
from detune.response.assess import assess
from detune.response.assessment import Assessment
from detune.solvers import enumeration
from detune.solvers.outcome import Progress, Settings
from detune.study.front import objective_of
from detune.study.load import Study, load_study
from detune.study.named import named_design
from detune.study.run import run_study

STUDY = """\
title = "Fan on four mounts"

[[body]]
name = "fan"
mass = "200 kg"
centre = ["0.05 m", "0 m", "0.3 m"]
inertia_box = ["0.9 m", "0.6 m", "0.5 m"]

[[point]]
name = "inlet"
position = ["0.4 m", "0 m", "0.5 m"]

[[station]]
name = "A"
group = "front"
position = ["-0.4 m", "-0.3 m", "0.1 m"]

[[station]]
name = "B"
group = "front"
position = ["-0.4 m", "0.3 m", "0.1 m"]

[[station]]
name = "C"
group = "back"
position = ["0.4 m", "-0.3 m", "0.1 m"]

[[station]]
name = "D"
group = "back"
position = ["0.4 m", "0.3 m", "0.1 m"]

[floor]
kind = "rigid"

[[condition]]
name = "running"
shafts = { fan = ["1400 rpm", "1480 rpm"] }

[[forcing]]
kind = "rotating-unbalance"
name = "wheel"
shaft = "fan"
position = ["0.1 m", "0 m", "0.4 m"]
axis = "x"
unbalance = "2000 g mm"

[[allowable]]
kind = "velocity"
at = "inlet"
direction = "resultant"
measure = "rms"
limit = "4.5 mm/s"

[[allowable]]
kind = "transmitted-force"
through = "floor"
direction = "z"
measure = "peak"
limit = "40 N"

[[allowable]]
kind = "separation"
limit = "10 %"

[[catalog]]
name = "list"
file = "list.csv"

[[choice]]
group = "front"
catalogs = ["list"]

[[choice]]
group = "back"
catalogs = ["list"]

[ballast]
position = ["0 m", "0 m", "0.15 m"]
size = ["0.6 m", "0.4 m", "0.1 m"]
steps = ["0 kg", "40 kg"]
cost_per_kg = 0.2

[objectives]
trade = ["cost", "separation"]
"""
FIRST_CHOICE = '[[choice]]\ngroup = "front"'
HEADER = (
    "part,family,stiffness_z_static [N/mm],stiffness_z_dynamic [N/mm],stiffness_x_static [N/mm],"
    "stiffness_x_dynamic [N/mm],loss_factor,load_min [N],load_max [N],cost"
)
ROWS = [
    "elm-a,rubber,30,36,15,18,0.1,100,900,14",
    "elm-b,rubber,50,60,25,30,0.1,100,900,12",
    "elm-c,rubber,90,108,45,54,0.1,100,900,11",
    "elm-d,rubber,400,480,200,240,0.1,100,900,9",
    "elm-e,rubber,40,48,20,24,0.1,100,300,5",
]


@pytest.fixture
def study(tmp_path: Path) -> Callable[..., Study]:
    """Write the study (with edits) and its parts list, and load it."""

    def make(*edits: tuple[str, str], rows: list[str] = ROWS) -> Study:
        text = STUDY
        for old, new in edits:
            assert old in text
            text = text.replace(old, new)
        (tmp_path / "study.toml").write_text(text)
        (tmp_path / "list.csv").write_text("\n".join([HEADER, *rows]) + "\n")
        return load_study(tmp_path / "study.toml")

    return make


def every_design(study: Study) -> list[Assessment]:
    parts = [part.part for part in study.catalogs["list"].parts]
    return [
        assess(
            study.brief, named_design(study.brief, study.catalogs, f"front={a}, back={b}, ballast={step} kg")
        )
        for a in parts
        for b in parts
        for step in (0, 40)
    ]


def test_the_answer_is_the_cheapest_of_all_designs_that_meet_the_brief(study: Callable[..., Study]) -> None:
    read = study()
    result = run_study(read)
    every = every_design(read)
    meeting = [a for a in every if a.meets]
    assert 0 < len(meeting) < len(every) == 50
    assert result.exit_code == 0
    assert result.answer is not None and result.answer.meets
    assert result.answer.cost == min(a.cost for a in meeting)
    assert result.outcome.designs.count == len(meeting)
    # elm-e carries 300 N and every corner weighs more: 200 kg on four corners is 490 N each on average.
    assert all("elm-e" not in a.design.parts for a in meeting)
    reason = next(r for r in result.reasons if r.mount.part == "elm-e" and r.group == "front")
    assert reason.meets == 0 and reason.first_rule is not None
    assert "static load of the part" in reason.first_rule
    assert reason.hardest_margin is not None and reason.hardest_margin < 0.0


@pytest.mark.parametrize(
    "trade",
    [("cost", "least-margin"), ("added-mass", "cost"), ("part-numbers", "separation", "cost")],
    ids="/".join,
)
def test_fronts_over_other_objectives(trade: tuple[str, ...], study: Callable[..., Study]) -> None:
    listed = ", ".join(f'"{name}"' for name in trade)
    read = study(('trade = ["cost", "separation"]', f"trade = [{listed}]"))
    front = run_study(read).front
    assert front.trade == trade

    def signed(assessment: Assessment) -> tuple[float, ...]:
        return tuple(
            round(objective_of(assessment, n), 3) * (-1 if LARGER_IS_BETTER[n] else 1) for n in trade
        )

    def best(points: set[tuple[float, ...]]) -> set[tuple[float, ...]]:
        return {
            p
            for p in points
            if not any(q != p and all(x <= y for x, y in zip(q, p, strict=True)) for q in points)
        }

    # Two routes to a supremum tell designs apart that three digits do not.
    meeting = {signed(a) for a in every_design(read) if a.meets}
    assert best({signed(a) for a in front.points}) == best(meeting)
    # In the order of the first objective, the best first.
    firsts = [signed(a)[0] for a in front.points]
    assert firsts == sorted(firsts)


def test_none_exists_is_an_answer_with_the_closest_design(study: Callable[..., Study]) -> None:
    result = run_study(study(('limit = "40 N"', 'limit = "0.1 N"')))
    assert result.exit_code == 1
    assert result.answer is None and result.front.points == ()
    assert result.outcome.none_exists
    assert result.closest is not None and not result.closest.meets
    assert result.closest.failed[0].margin == result.closest.tightest.margin < 0.0
    assert all(reason.meets == 0 for reason in result.reasons)
    assert all(reason.hardest_rule is not None for reason in result.reasons)


def test_interrupt_leaves_a_partial_result(
    study: Callable[..., Study], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(enumeration, "BLOCK", 10)
    seen: list[tuple[int, int]] = []

    def progress(far: Progress) -> None:
        seen.append((far.settled, far.designs))
        if far.settled >= 20:
            raise KeyboardInterrupt

    result = run_study(study(), Settings(progress=progress))
    assert seen == [(10, 50), (20, 50)]
    assert result.outcome.stopped == "interrupted"
    assert result.exit_code == 3
    assert not result.outcome.none_exists
    assert result.outcome.record.looked_at == 20
    assert not result.outcome.record.accounted
    # What has been found stands, and each point of it is assessed.
    assert all(point.meets for point in result.front.points)


def test_time_limit(study: Callable[..., Study]) -> None:
    result = run_study(study(), Settings(time_limit=0.0))
    assert result.outcome.stopped == "time limit"
    assert result.exit_code == 3
    assert result.answer is None and result.closest is None
    assert not result.outcome.none_exists


def test_a_named_design_is_judged_beside_the_answer(study: Callable[..., Study]) -> None:
    read = study()
    mine = named_design(read.brief, read.catalogs, "back=elm-b, front = elm-d, ballast=15 kg")
    assert mine.parts == ("elm-d", "elm-b")
    assert mine.ballast == 15.0
    result = run_study(read, compared=(mine,))
    (judged,) = result.compared
    # 2 x 9 and 2 x 12, and 15 kg at 0.2 each.
    assert judged.cost == pytest.approx(45.0)
    assert judged.part_numbers == 2
    assert judged.total_load == pytest.approx(215.0 * 9.80665)


def test_a_named_design_may_use_a_part_the_filters_leave_out(study: Callable[..., Study]) -> None:
    read = study(
        ('group = "front"\ncatalogs = ["list"]', 'group = "front"\ncatalogs = ["list"]\nparts = ["elm-a"]')
    )
    assert named_design(read.brief, read.catalogs, "front=elm-d, back=elm-d, ballast=0 kg").parts == (
        "elm-d",
        "elm-d",
    )


@pytest.mark.parametrize(
    ("text", "wanted"),
    [
        ("front=elm-a, back=elm-z, ballast=0 kg", [("back", "elm-z", "elm-a")]),
        ("frnt=elm-a, back=elm-b, ballast=0 kg", [("frnt", "frnt", "front"), ("front", "", None)]),
        ("front=elm-a, ballast=0 kg", [("back", "", None)]),
        ("front=elm-a, back=elm-b", [("ballast", "", None)]),
        ("front=elm-a, back=elm-b, ballast=40", [("ballast", "40", None)]),
        ("front=elm-a, back=elm-b, ballast=40 kgs", [("ballast", "40 kgs", "40 kg")]),
        ("front=elm-a, back=elm-b, ballast=-5 kg", [("ballast", "-5 kg", None)]),
        ("front=elm-a, front=elm-b, back=elm-b, ballast=0 kg", [("front", "elm-b", None)]),
        ("elm-a, back=elm-b, ballast=0 kg", [("elm-a", "elm-a", None), ("front", "", None)]),
        ("front=elm-q, back=elm-y, ballast=1 N",
         [("front", "elm-q", "elm-a"), ("back", "elm-y", "elm-a"), ("ballast", "1 N", None)]),
        ("", [("", "", None), ("front", "", None), ("back", "", None), ("ballast", "", None)]),
    ],
)  # fmt: skip
def test_faults_of_a_named_design_come_all_at_once(
    text: str, wanted: list[tuple[str, str, str | None]], study: Callable[..., Study]
) -> None:
    read = study()
    with pytest.raises(BriefError) as caught:
        named_design(read.brief, read.catalogs, text)
    assert [(f.where, f.found) for f in caught.value.faults] == [(where, found) for where, found, _ in wanted]
    for fault, (_, _, nearest) in zip(caught.value.faults, wanted, strict=True):
        assert fault.file == "--design" and fault.expected
        if nearest is not None:
            assert fault.nearest == nearest


def test_ballast_cannot_be_named_where_the_study_has_none(study: Callable[..., Study]) -> None:
    ballast = STUDY[STUDY.index("[ballast]") : STUDY.index("[objectives]")]
    read = study((ballast, ""))
    assert named_design(read.brief, read.catalogs, "front=elm-a, back=elm-a").ballast == 0.0
    with pytest.raises(BriefError, match="zero, or more where the study has a"):
        named_design(read.brief, read.catalogs, "front=elm-a, back=elm-a, ballast=20 kg")


def test_a_part_number_of_two_catalogs_is_asked_for_by_catalog(
    study: Callable[..., Study], tmp_path: Path
) -> None:
    (tmp_path / "other.csv").write_text("\n".join([HEADER, ROWS[0].replace(",14", ",7")]) + "\n")
    read = study((FIRST_CHOICE, '[[catalog]]\nname = "other"\nfile = "other.csv"\n\n' + FIRST_CHOICE))
    with pytest.raises(BriefError, match='"list:elm-a" or "other:elm-a"'):
        named_design(read.brief, read.catalogs, "front=elm-a, back=elm-b, ballast=0 kg")
    chosen = named_design(read.brief, read.catalogs, "front=other:elm-a, back=list:elm-a, ballast=0 kg")
    assert [mount.cost for mount in chosen.mounts] == [7.0, 14.0]


def test_a_named_part_without_lateral_figures_is_refused_where_the_machine_moves_sideways(
    study: Callable[..., Study], tmp_path: Path
) -> None:
    (tmp_path / "bare.csv").write_text(
        "part,family,stiffness_z_static [N/mm],stiffness_z_dynamic [N/mm],loss_factor,load_min [N],load_max [N],cost\n"
        "ash-a,rubber,30,36,0.1,100,900,14\n"
    )
    read = study((FIRST_CHOICE, '[[catalog]]\nname = "bare"\nfile = "bare.csv"\n\n' + FIRST_CHOICE))
    with pytest.raises(BriefError, match="no lateral stiffness for ash-a"):
        named_design(read.brief, read.catalogs, "front=ash-a, back=elm-a, ballast=0 kg")


def test_the_same_study_twice_gives_the_same_result(study: Callable[..., Study]) -> None:
    one, other = run_study(study()), run_study(study())
    assert one.study.hashes == other.study.hashes
    assert [p.design for p in one.front.points] == [p.design for p in other.front.points]
    assert [p.margins for p in one.front.points] == [p.margins for p in other.front.points]


def test_rows_in_another_order_give_the_same_answer(study: Callable[..., Study]) -> None:
    one = run_study(study())
    other = run_study(study(rows=ROWS[::-1]))
    assert one.answer is not None and other.answer is not None
    assert (one.answer.cost, one.answer.separation) == pytest.approx(
        (other.answer.cost, other.answer.separation)
    )
    assert len(one.front.points) == len(other.front.points)
