"""Local searches over a six-axis brief, absorbers against closed forms."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from detune.ground.errors import BriefError
from detune.physics.absorber import den_hartog, minimax_tuning
from detune.response.assess import assess
from detune.sizing.made_parts import bounds, made_design
from detune.solvers import size_many_starts
from detune.solvers.size_batch import batch, judge
from detune.solvers.size_convex import convex_answers, stiffness_model
from detune.study.load import load_study
from detune.study.size import size_study

SKID = (Path(__file__).parent / "skid_to_size.toml").read_text(encoding="utf-8")
ABSORBER = (Path(__file__).parent / "fan_absorber.toml").read_text(encoding="utf-8")


def written(folder: Path, text: str):
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    return load_study(path)


@pytest.fixture(scope="module")
def skid(tmp_path_factory):
    return written(tmp_path_factory.mktemp("skid"), SKID)


@pytest.fixture(scope="module")
def skid_result(skid):
    return size_study(skid, drawings=False)


def test_the_best_of_many_starts_is_assessed_and_never_called_global(skid_result):
    best = skid_result.answer
    assert best is not None and skid_result.searches is not None
    assert "not proven global" in skid_result.worth and skid_result.bound is None
    assert assess(*_of(skid_result.study.brief, best.values)).meets
    low, median, high = skid_result.searches.spread
    assert low <= median <= high and best.objective == pytest.approx(low, rel=1e-6)


def _of(brief, values):
    made = made_design(brief, values)
    return made.brief, made.design


def test_no_random_design_is_cheaper(skid, skid_result):
    low, _ = bounds(skid.brief)
    to = size_many_starts.Coordinates(skid.brief)
    drawn = to.outward(np.random.default_rng(3).random((200, len(low))))
    # One position for all, so that they are judged as one batch.
    drawn[:, -1] = skid_result.answer.values[-1]
    judged = judge(skid.brief, drawn)
    assert judged.met.any()
    assert judged.objectives["cost"][judged.met].min() >= skid_result.answer.objective


def test_the_same_seed_gives_the_same_answer(skid):
    first, second = (
        size_many_starts.solve(skid.brief, "cost", 1.0, starts=1, seed=5, iterations=8) for _ in range(2)
    )
    assert np.array_equal(first.searches[0].values, second.searches[0].values)


def test_convex_sides_are_bounds(skid, skid_result):
    """Eigenvalues by the program's own batch evaluation never beat the convex optimum of their side."""
    assert {answer.side for answer in skid_result.convex} <= {"below", "above"}
    brief = skid.brief
    middle = size_many_starts.Coordinates(brief).outward(np.full(len(brief.sizing.unknown), 0.5))
    # Positions are no convex unknowns; without them the forms hold.
    fixed = brief.sizing.model_copy(
        update={"unknown": tuple(u for u in brief.sizing.unknown if u.kind != "position")}
    )
    plain = brief.model_copy(update={"sizing": fixed})
    problem, _ = batch(plain, [made_design(plain, middle[:-1])])
    answers = convex_answers(plain, problem, middle[:-1])
    best = {a.side: a for a in answers if a.what == "separation"}
    assert best
    model, columns, _ = stiffness_model(plain, problem, middle[:-1])
    low, high = bounds(plain)
    rng = np.random.default_rng(0)
    edge = min(a for a, _ in problem.intervals)
    for _ in range(50):
        k = np.exp(rng.uniform(np.log(low[columns]), np.log(high[columns])))
        frequencies = model.frequencies(k, np.zeros(model.ballast_most.size))
        if frequencies[-1] < edge and "below" in best:
            assert 1.0 - frequencies[-1] / edge <= best["below"].bound + 1e-6
    # The model is the machine's: its modes are those of the assessor.
    values = middle[:-1].copy()
    exact = sorted(mode.frequency for mode in assess(*_of(plain, values)).modes)
    column = [k for k, u in enumerate(plain.sizing.unknown) if u.kind == "ballast"]
    ballast = values[column] if model.ballast_most.size else np.zeros(0)
    assert model.frequencies(values[columns], ballast) == pytest.approx(exact, rel=1e-6)


def test_absorber_tuning_of_the_books(tmp_path):
    """Least worst displacement of an undamped primary: the exact minimax, near Den Hartog's closed form (CHECKS T1).

    mu = 0.05: f = 0.952381, z2 = 0.133631 (of the absorber's own frequency), height of the fixed points 6.403124.
    """
    result = size_study(written(tmp_path, ABSORBER), drawings=False)
    best = result.answer
    assert best is not None
    tuning, damping = best.values
    form, exact = den_hartog(0.05), minimax_tuning(0.05)
    assert tuning / 10.0 == pytest.approx(exact.frequency_ratio, rel=2e-3)
    assert damping == pytest.approx(exact.damping_ratio, rel=2e-2)
    assert tuning / 10.0 == pytest.approx(0.952381, rel=5e-3) and form.frequency_ratio == pytest.approx(
        0.952381, rel=1e-6
    )
    row = next(row for row in best.assessment.margins if row.kind == "displacement")
    static = 1.0 / (100.0 * (2.0 * np.pi * 10.0) ** 2)
    assert row.value / static == pytest.approx(exact.reached, rel=2e-3)
    assert row.value / static == pytest.approx(6.403124, rel=5e-3)
    assert {each.share for each in result.detuned} >= {-0.05, 0.05}
    on = next(e.worst_response for e in result.detuned if e.share == 0.0)
    assert all(
        each.worst_response >= on * (1.0 - 1e-3) for each in result.detuned if "mass" not in each.unknown
    )


BAD_POSITIONS = {
    "a station on the origin has no side": (
        ('position = ["-0.5 m","-0.3 m","0 m"]', 'position = ["0 m","-0.3 m","0 m"]'),
        r'stations\[1\]: found .station "A" at x = 0., expected a station with its x above or below zero',
    ),
    "a station moves once along an axis": (
        ("[[sizing.made]]", "[[sizing.unknown]]\nkind = 'position'\nstations = ['B']\naxis = 'x'\nlower = '0.2 m'\n"
         "upper = '0.3 m'\n[[sizing.made]]"),
        r"stations\[1\]: found .B., expected each station once along x",
    ),
    "bounds the wrong way round": (('lower = "0.3 m"', 'lower = "0.6 m"'), "the lower bound first"),
    "no such station": (('stations = ["A","B"]', 'stations = ["A","E"]'), "the name of a station"),
}  # fmt: skip


@pytest.mark.parametrize("name", BAD_POSITIONS)
def test_bad_positions_are_refused(tmp_path, name):
    (old, new), words = BAD_POSITIONS[name]
    assert old in SKID
    with pytest.raises(BriefError, match=words):
        written(tmp_path, SKID.replace(old, new, 1))
