"""The second opinion beside `detune size`: agreement, whole numbers, honest statuses, refusals, report."""

from __future__ import annotations

import importlib.util
import itertools
import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from detune.cli import main
from detune.ground.errors import BriefError
from detune.sizing.one_axis_pyomo import nothing
from detune.solvers import size_second_opinion
from detune.solvers.size_batch import judge
from detune.solvers.size_second_opinion import SizingOpinion
from detune.study.load import load_study
from detune.study.size import SizingResult, size_study

_spec = importlib.util.spec_from_file_location("sizing_briefs", Path(__file__).with_name("sizing_briefs.py"))
assert _spec is not None and _spec.loader is not None
briefs: Any = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(briefs)

BALLAST = """
[ballast]
position = ["0 m", "0 m", "0 m"]
size = ["1 m", "1 m", "0.1 m"]
steps = ["0 kg"]
cost_per_kg = 0.8
"""
EACH = '[[allowable]]\nkind = "transmitted-force"\nthrough = "each-station"\ndirection = "axial"\n'
EACH += 'measure = "peak"\nlimit = "{limit} N"\n'
LOSS = "[[sizing.unknown]]\nkind = 'loss-factor'\ngroup = 'feet'\nlower = 0.05\nupper = 0.4\n"
STEPS = "[[sizing.unknown]]\nkind = 'ballast'\nlower = '0 kg'\nupper = '60 kg'\nstep = '20 kg'\n"
PARALLEL = "[[sizing.unknown]]\nkind = 'parallel'\ngroup = 'feet'\nlower = 1\nupper = 5\n"
PRICES = "cost = 6\ncost_per_stiffness = 0.4\ncost_per_loss_factor = 25"


def whole_numbers(**changes: Any) -> str:
    """A study with ballast in steps and a number of parts, the force through each of which is limited."""
    given = {
        "more": BALLAST + EACH.format(limit=9.0) + briefs.DISPLACEMENT.format(limit=4e-5),
        "goal": "minimise = 'cost'", "mass": 120.0, "force": 60.0, "frequency": "['18 Hz', '25 Hz']",
        "softest": 1e4, "stiffest": 2e5, "unknowns": LOSS + STEPS + PARALLEL, "made": PRICES,
    }  # fmt: skip
    return str(briefs.one_axis(**{**given, **changes}))


def asked(folder: Path, text: str, limit: float = 20.0) -> SizingResult:
    path = folder / "study.toml"
    path.write_text(text.replace("[sizing]\n", "[sizing]\nspecification = false\n"), encoding="utf-8")
    return size_study(load_study(path), False, limit)


def test_steps_and_counts_agree_and_beat_every_design_of_a_grid(tmp_path):
    result = asked(tmp_path, whole_numbers())
    best, opinion = result.answer, result.opinion
    assert best is not None and opinion is not None
    assert opinion.status == "optimal" and opinion.agrees and opinion.difference is not None
    assert opinion.difference < 1e-6
    assert result.worth.endswith("confirmed by SCIP on a second statement")
    assert opinion.values is not None
    # Whole numbers are the same ones.
    assert opinion.values[2:] == pytest.approx(best.values[2:], abs=1e-6)
    assert best.values[2] % 20.0 == 0.0 and best.values[3] % 1.0 == 0.0
    assert sum(station.parallel for station in _stations(result)) == best.values[3]
    k, eta = np.geomspace(1e4, 2e5, 30), np.linspace(0.05, 0.4, 5)
    grid = np.array(list(itertools.product(k, eta, (0.0, 20.0, 40.0, 60.0), (1.0, 2.0, 3.0, 4.0, 5.0))))
    judged = judge(result.study.brief, grid)
    assert judged.met.any()
    assert judged.objectives["cost"][judged.met].min() >= best.objective * (1 - 1e-9)


def test_the_front_holds_the_number_of_parts_of_the_best(tmp_path):
    """Each point meets the brief with the objectives it states, judged by the batch evaluation of the whole brief."""
    text = whole_numbers(
        goal="minimise = 'cost'\ntrade = ['cost', 'stiffness', 'worst-response']\nfront_points = 4"
    )
    path = tmp_path / "study.toml"
    path.write_text(text.replace("[sizing]\n", "[sizing]\nspecification = false\n"), encoding="utf-8")
    result = size_study(load_study(path))
    best, front = result.answer, result.front
    assert best is not None and front is not None and len(front.points) >= 3
    points = np.array([point.values for point in front.points])
    assert (points[:, 3] == best.values[3]).all()
    judged = judge(result.study.brief, points)
    assert (judged.margins >= -1e-6).all()
    for name in front.trade:
        told = np.array([point.objectives[name] for point in front.points])
        assert judged.objectives[name] == pytest.approx(told, rel=1e-5)
    assert min(point.objectives["cost"] for point in front.points) == pytest.approx(best.objective, rel=1e-4)


def _stations(result: SizingResult):
    from detune.sizing.made_parts import made_design

    best = result.answer
    assert best is not None
    return made_design(result.study.brief, best.values).brief.stations


@pytest.mark.parametrize(
    "goal",
    [
        "minimise = 'worst-response'",
        "maximise = 'separation'",
        "minimise = 'added-mass'",
        "minimise = 'stiffness'",
    ],
)
def test_every_goal_agrees(tmp_path, goal):
    text = whole_numbers(goal=goal, unknowns=LOSS + STEPS)
    opinion = asked(tmp_path, text).opinion
    assert opinion is not None and opinion.agrees, opinion


def test_disjoint_branches_and_viscous_damping_agree(tmp_path):
    """Between two lines: the feasible set has two parts, and the cheaper one wins in both statements."""
    unknown = (
        "[[sizing.unknown]]\nkind = 'viscous'\ngroup = 'feet'\nlower = '20 N s/m'\nupper = '500 N s/m'\n"
    )
    text = briefs.one_axis(
        more=briefs.DISPLACEMENT.format(limit=4e-5), goal="minimise = 'cost'", mass=100.0, force=100.0,
        frequency="'10 Hz'", softest=2e5, stiffest=4e6, unknowns=unknown,
        made="cost_per_stiffness = 0.1\ncost_per_damping = 0.02",
    )  # fmt: skip
    result = asked(tmp_path, text)
    assert result.opinion is not None and result.opinion.agrees
    names = [branch.name for branch in result.branches]
    assert names == ["above the first excitation"]
    wide = asked(tmp_path, text.replace("200000.0 N/m", "1000.0 N/m").replace('force = ["0 N", "0 N", "100.0 N"]',
                                                                               'force = ["0 N", "0 N", "10'
                                                                               ' N"]'))  # fmt: skip
    assert len(wide.branches) == 2
    assert wide.opinion is not None and wide.opinion.agrees


def test_none_exists_for_both(tmp_path):
    text = briefs.one_axis(
        more=briefs.TRANSMISSIBILITY.format(limit=0.01), goal="minimise = 'stiffness'", mass=10.0, frequency="'10 Hz'",
        softest=1e4, stiffest=1e5, made="viscous = '0 N s/m'",
    )  # fmt: skip
    result = asked(tmp_path, text)
    assert result.exit_code == 1
    assert result.opinion is not None and result.opinion.status == "infeasible" and result.opinion.agrees


def test_a_disagreement_withdraws_the_answer_and_a_time_limit_says_nothing(tmp_path, monkeypatch):
    """A solver that answers otherwise is put in SCIP's place: neither is called proven."""

    def wrong(problems, *_):
        design = {
            "objective": 1.0,
            "bound": 1.0,
            "stiffness": 2e4,
            "damping": 0.1,
            "ballast": 0.0,
            "count": 1,
        }
        return [replace(nothing("optimal", "", 0.1), **design)]

    monkeypatch.setattr(size_second_opinion, "solve_with_scip", wrong)
    result = asked(tmp_path, whole_numbers())
    assert result.worth.startswith("withdrawn")
    from detune.report.sizing_page import sizing_summary

    assert "SECOND OPINION DIFFERS" in sizing_summary(result)
    late = lambda problems, *_: [nothing("time limit", "ended from outside", 20.0)]  # noqa: E731
    monkeypatch.setattr(size_second_opinion, "solve_with_scip", late)
    result = asked(tmp_path, whole_numbers())
    assert result.opinion is not None and result.opinion.agrees is None
    assert "came to no end" in result.worth and result.worth.startswith("global")
    assert "which says nothing" in sizing_summary(result)


def test_the_verb_writes_it_beside_the_exact_answer(tmp_path, capsys):
    path = tmp_path / "study.toml"
    path.write_text(
        whole_numbers().replace("[sizing]\n", "[sizing]\nspecification = false\n"), encoding="utf-8"
    )
    out = tmp_path / "out"
    assert main(["size", str(path), "--second-opinion", "--time-limit", "20 s", "--out", str(out)]) == 0
    said = capsys.readouterr().out
    assert "Second opinion (SCIP):" in said and "the same within" in said
    page = (out / "report.html").read_text(encoding="utf-8")
    assert "Second opinion" in page and "parts in parallel of feet" in page
    told = json.loads((out / "sizing.json").read_text(encoding="utf-8"))["second_opinion"]
    assert told["status"] == "optimal" and told["agrees"] is True
    assert (out / "second-opinion.csv").is_file()


def test_refusals_name_what_and_where(tmp_path, capsys):
    path = tmp_path / "study.toml"
    path.write_text(whole_numbers(), encoding="utf-8")
    assert main(["size", str(path), "--time-limit", "20 s", "--out", str(tmp_path / "a")]) == 2
    assert "--second-opinion beside it" in capsys.readouterr().err
    assert (
        main(["size", str(path), "--second-opinion", "--time-limit", "20", "--out", str(tmp_path / "b")]) == 2
    )
    assert "--time-limit" in capsys.readouterr().err
    two_ways = whole_numbers().replace('free = ["z"]', 'free = ["z", "ry"]')
    two_ways = two_ways.replace('centre = ["0 m", "0 m", "0 m"]', 'centre = ["0 m", "0 m", "0 m"]\n'
                                'inertia_box = ["1 m", "1 m", "1 m"]')  # fmt: skip
    first = '[[station]]\nname = "A"\ngroup = "feet"\nparallel = 1\nposition = ["0 m", "0 m", "0 m"]\n'
    both = first.replace('["0 m"', '["0.4 m"') + first.replace('"A"', '"B"').replace('["0 m"', '["-0.4 m"')
    assert first in two_ways
    two_ways = two_ways.replace(first, both)
    two_ways = two_ways.replace("dynamic_to_static = 1.0", "dynamic_to_static = 1.0\nlateral_ratio = 0.5")
    path.write_text(two_ways, encoding="utf-8")
    with pytest.raises(BriefError) as caught:
        size_study(load_study(path), False, 10.0)
    text = str(caught.value)
    assert (
        "more than the vertical" in text and "--second-opinion" in text and "sought on one axis alone" in text
    )
    assert any(fault.line is not None for fault in caught.value.faults)


BAD = {
    "on a map": (
        "minimise = 'cost'",
        "minimise = 'cost'\nmap = ['parts in parallel of feet', 'ballast']",
        "spans no map",
    ),
    "not whole": ("lower = 1\nupper = 5", "lower = 1\nupper = 2.5", "whole numbers of parts"),
    "none": ("lower = 1\nupper = 5", "lower = 0\nupper = 5", "above zero"),
    "crossed": ("lower = 1\nupper = 5", "lower = 5\nupper = 1", "crossed"),
    "no group": ("kind = 'parallel'\ngroup = 'feet'", "kind = 'parallel'", "the group of parts"),
    "two of them": (PARALLEL, PARALLEL + PARALLEL, "each unknown once"),
}


@pytest.mark.parametrize("name", BAD)
def test_bad_counts_are_refused(tmp_path, name):
    old, new, words = BAD[name]
    text = whole_numbers()
    assert old in text
    with pytest.raises(BriefError, match=words) as caught:
        asked(tmp_path, text.replace(old, new))
    assert any(fault.line is not None for fault in caught.value.faults)


def test_an_opinion_says_what_the_answer_is_worth():
    nan = float("nan")
    common = (None, None, None, None)
    agreed = SizingOpinion("optimal", 1.0, 1.0, *common, True, 0.1, 0.01, 1, "", ())
    assert agreed.worth("global").startswith("global; confirmed")
    late = SizingOpinion("failed", nan, nan, *common, None, 0.1, 0.01, 1, "", ())
    assert "came to no end" in late.worth("global")
