"""Convex forms of a study: agreement with the exact equations, bounds never beaten, and how far restrictions err."""

from __future__ import annotations

import itertools
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from detune.problem.build import build
from detune.report.sizing_page import write_sizing
from detune.report.tables_convex import convex_points, convex_table
from detune.response.assess import assess
from detune.response.design import Design
from detune.sizing.lmi import damping_free_bound
from detune.sizing.made_parts import bounds, made_design
from detune.solvers import size_many_starts
from detune.solvers.size_batch import batch, judge
from detune.solvers.size_convex import asked_separation, convex_answers, stiffness_model
from detune.solvers.size_convex_limits import damping_free_limits
from detune.solvers.size_convex_parts import parts_bounds
from detune.study.load import load_study
from detune.study.size import size_study
from study import sizing_briefs as one
from study import test_running as running

SKID = (Path(__file__).parent / "skid_to_size.toml").read_text(encoding="utf-8")
# Positions are no unknown of the convex forms.
SKID = SKID[: SKID.index('[[sizing.unknown]]\nkind = "position"')] + SKID[SKID.index("[[sizing.made]]") :]


def written(folder: Path, text: str):
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    return load_study(path)


def parts_of(brief: Any) -> tuple[Any, np.ndarray]:
    middle = size_many_starts.Coordinates(brief).outward(np.full(len(brief.sizing.unknown), 0.5))
    return batch(brief, [made_design(brief, middle)])[0], middle


@pytest.fixture(scope="module")
def skid(tmp_path_factory):
    return written(tmp_path_factory.mktemp("skid"), SKID.replace('limit = "1.2 mm/s"', 'limit = "3.5 mm/s"'))


@pytest.fixture(scope="module")
def sized(skid):
    return size_study(skid, drawings=False)


def test_the_model_is_the_machine_with_its_ballast(skid):
    """Modes of the linear model are the assessor's, for random stiffness and ballast (gravity's stiffness included)."""
    brief = skid.brief
    problem, middle = parts_of(brief)
    model, columns, ballast = stiffness_model(brief, problem, middle)
    assert ballast is not None and model.ballast_stiffness is not None
    rng = np.random.default_rng(0)
    for _ in range(4):
        values = size_many_starts.Coordinates(brief).outward(rng.random(len(middle)))
        made = made_design(brief, values)
        exact = sorted(mode.frequency for mode in assess(made.brief, made.design).modes)
        assert model.frequencies(values[columns], values[[ballast]]) == pytest.approx(exact, rel=1e-9)


def test_no_damping_breaks_a_limit_held_whatever_the_damping(skid):
    """The study's own response at two thousand random designs of the soft side never exceeds its bound."""
    brief = skid.brief
    problem, middle = parts_of(brief)
    model, columns, ballast = stiffness_model(brief, problem, middle)
    held = damping_free_limits(brief, problem, "below")
    assert held.held == ("velocity resultant, rms at flange (running)",)
    assert any("transmitted force" in text for text in held.left)
    rng = np.random.default_rng(1)
    drawn = size_many_starts.Coordinates(brief).outward(rng.random((2000, len(middle))))
    # Loss factors from nothing to far more than any rubber has.
    damping = [k for k, u in enumerate(brief.sizing.unknown) if u.kind == "loss-factor"]
    wide = brief.sizing.model_copy(
        update={
            "unknown": tuple(
                u.model_validate({**u.model_dump(exclude_unset=True), "lower": 1e-4, "upper": "500 %"})
                if k in damping
                else u
                for k, u in enumerate(brief.sizing.unknown)
            )
        }
    )
    drawn[:, damping] = np.exp(rng.uniform(np.log(1e-4), np.log(5.0), (2000, len(damping))))
    judged = judge(brief.model_copy(update={"sizing": wide}), drawn)
    row = next(i for i, each in enumerate(judged.requirements) if each.label in held.held)
    response = 1.0 / (1.0 + judged.margins[row])
    compared, closest = 0, 0.0
    for values, ratio in zip(drawn, response, strict=True):
        bound = sum(
            damping_free_bound(model, x, values[columns], values[[ballast]]) / x.limit for x in held.limits
        )
        if math.isfinite(bound):
            compared += 1
            assert ratio <= bound * (1 + 1e-9)
            closest = max(closest, ratio / bound)
    assert compared > 50 and closest > 0.3


def test_bounds_are_never_beaten_and_the_restriction_is_safe(skid, sized):
    """Random designs of the soft side cost no less than the bound; the restriction's own design holds its limit."""
    brief = skid.brief
    by_form = {(a.side, a.what, a.form): a for a in sized.convex}
    bound, safe = by_form["below", "cost", "bound"], by_form["below", "cost", "restriction"]
    best = sized.answer
    assert best is not None
    assert bound.bound <= best.objective * (1 + 1e-9)
    assert bound.bound <= safe.value * (1 + 1e-6)
    assert safe.bounded <= 1.0 and safe.response <= safe.bounded
    rng = np.random.default_rng(2)
    drawn = size_many_starts.Coordinates(brief).outward(rng.random((400, len(best.values))))
    judged = judge(brief, drawn)
    problem, middle = parts_of(brief)
    model, columns, ballast = stiffness_model(brief, problem, middle)
    tops = np.array([model.frequencies(v[columns], v[[ballast]])[-1] for v in drawn])
    soft = tops < 0.8 * min(low for low, _ in problem.intervals)
    assert soft.any()
    assert judged.objectives["cost"][soft].min() >= bound.bound * (1 - 1e-9)
    apart = by_form["below", "separation", "bound"]
    assert judged.objectives["separation"][soft].max() <= apart.bound + 1e-9


def test_the_worth_tells_the_distance_to_the_bound(sized):
    assert (
        "from the global best among designs with every mode below all excitation (convex bound)"
        in sized.worth
    )
    table = convex_table(sized)
    assert len(table.rows) == len(sized.convex) and all(len(row) == len(table.columns) for row in table.rows)
    assert any("held whatever the damping" in point for point in convex_points(sized))


def test_a_side_without_other_limits_is_global(tmp_path):
    """Separation alone binds: the cheapest soft side is its bound, and the local search finds the same design."""
    text = SKID.replace('minimise = "cost"', 'maximise = "separation"').replace(
        'limit = "1.2 mm/s"', 'limit = "1 m/s"'
    )
    text = text.replace('limit = "12 N"', 'limit = "1 MN"').replace('limit = "6 mm"', 'limit = "1 m"')
    # The machine's own weight must not lift a part off its spring on so soft a mount.
    text = text.replace("dynamic_to_static = 1.2", "dynamic_to_static = 1.2\npulls = true")
    result = size_study(written(tmp_path, text), drawings=False)
    told = next(a for a in result.convex if a.side == "below" and a.what == "separation")
    assert told.form == "global" and told.misses is None
    assert told.value == pytest.approx(told.bound, abs=1e-6)
    best = result.answer
    assert best is not None
    assert best.objective == pytest.approx(told.value, abs=1e-5)
    assert result.worth.startswith("global among designs with every mode below all excitation")


def test_no_restriction_is_told_as_no_proof(tmp_path):
    """With 1.2 mm/s the bound whatever the damping is too wide for any stiffness, though designs meet the limit."""
    result = size_study(written(tmp_path, SKID), drawings=False)
    assert result.answer is not None
    none = next(a for a in result.convex if a.form == "restriction")
    assert math.isnan(none.value) and "no proof that none" in none.worth


def test_the_stiff_side_holds_limits_as_well(tmp_path):
    """One mass free in x, y and z far above its excitation: |X| <= F/(k - m w^2) at any damping, and by
    hand at none.
    """
    text = SKID.replace('limit = "1.2 mm/s"', 'limit = "0.5 mm/s"').replace(
        'limit = "12 N"', 'limit = "1 MN"'
    )
    text = text.replace(
        'shafts = { rotor = ["1350 rpm","1500 rpm"] }', 'shafts = { rotor = ["100 rpm","150 rpm"] }'
    )
    brief = written(tmp_path, text).brief
    problem, middle = parts_of(brief)
    answers = convex_answers(brief, problem, middle)
    stiff = [a for a in answers if a.side == "above"]
    assert {a.what for a in stiff} == {"separation", "cost"}
    safe = next(a for a in stiff if a.form == "restriction")
    assert safe.response <= safe.bounded <= 1.0
    low, high = bounds(brief)
    rng = np.random.default_rng(4)
    model, columns, ballast = stiffness_model(brief, problem, middle)
    held = damping_free_limits(brief, problem, "above")
    drawn = low + (high - low) * rng.random((300, len(low)))
    judged = judge(brief, drawn)
    row = next(i for i, each in enumerate(judged.requirements) if each.label in held.held)
    for values, ratio in zip(drawn, 1.0 / (1.0 + judged.margins[row]), strict=True):
        bound = sum(
            damping_free_bound(model, x, values[columns], values[[ballast]]) / x.limit for x in held.limits
        )
        assert ratio <= bound * (1 + 1e-9)


def test_cone_on_one_axis_is_exact_and_its_restriction_near(tmp_path):
    """Transmissibility alone: the cone's optimum is the exact one. With a limit on motion it is dearer, and said so."""
    unknown = (
        "[[sizing.unknown]]\nkind = 'viscous'\ngroup = 'feet'\nlower = '200 N s/m'\nupper = '4000 N s/m'"
    )
    common = {
        "goal": "maximise = 'stiffness'", "mass": 60.0, "frequency": "['14 Hz', '25 Hz']", "softest": 1e4,
        "stiffest": 3e6, "unknowns": unknown,
    }  # fmt: skip
    text = one.one_axis(more=one.TRANSMISSIBILITY.format(limit=0.6), **common)
    result = one.sized(tmp_path, text, drawings=True)
    (cone,) = result.convex
    below = next(branch for branch in result.branches if branch.name.startswith("below"))
    assert cone.form == "global" and cone.value == pytest.approx(below.objective, rel=1e-5)
    more = one.TRANSMISSIBILITY.format(limit=0.6) + one.DISPLACEMENT.format(limit=4e-6)
    result = one.sized(tmp_path, one.one_axis(more=more, **common), drawings=True)
    (cone,) = result.convex
    below = next(branch for branch in result.branches if branch.name.startswith("below"))
    assert cone.form == "restriction" and cone.misses is None
    assert cone.value <= below.objective * (1 + 1e-6)
    assert cone.response <= 1.0
    page = (write_sizing(result, tmp_path / "out") / "report.html").read_text(encoding="utf-8")
    assert "Convex answers" in page and "safe restriction" in page


@pytest.mark.parametrize("seed", range(6))
def test_cone_of_a_loss_factor_agrees_with_the_exact_branch(tmp_path, seed):
    rng = np.random.default_rng(seed)
    unknown = "[[sizing.unknown]]\nkind = 'loss-factor'\ngroup = 'feet'\nlower = 0.05\nupper = 0.5"
    text = one.one_axis(
        more=one.TRANSMISSIBILITY.format(limit=float(rng.uniform(0.1, 0.8))), goal="maximise = 'stiffness'",
        mass=float(rng.uniform(20, 300)), frequency=f"'{float(rng.uniform(10, 40))} Hz'", softest=1e3, stiffest=1e7,
        unknowns=unknown,
    )  # fmt: skip
    result = one.sized(tmp_path, text, drawings=True)
    below = next(branch for branch in result.branches if branch.name.startswith("below"))
    assert result.convex[0].form == "global"
    assert result.convex[0].value == pytest.approx(below.objective, rel=1e-5)


def test_no_real_design_of_a_side_is_cheaper_than_its_bound(tmp_path):
    """Catalog weights in [0, 1] bound the cheapest of all designs with every mode on one side, gone through
    one by one.
    """
    (tmp_path / "study.toml").write_text(running.STUDY, encoding="utf-8")
    (tmp_path / "list.csv").write_text("\n".join([running.HEADER, *running.ROWS]) + "\n", encoding="utf-8")
    study = load_study(tmp_path / "study.toml")
    problem = build(study.brief, study.catalogs)
    found = {bound.side: bound.cost for bound in parts_bounds(problem)}
    low = min(a for a, _ in problem.intervals) * (1 - asked_separation(study.brief))
    high = max(b for _, b in problem.intervals) * (1 + asked_separation(study.brief))
    sizes = [len(group.mounts) for group in problem.model.groups]
    least = {"below": math.inf, "above": math.inf}
    for *parts, step in itertools.product(*(range(n) for n in sizes), range(len(problem.model.ballast_mass))):
        mounts = tuple(group.mounts[j] for group, j in zip(problem.model.groups, parts, strict=True))
        judged = assess(
            study.brief, Design(study.brief.groups, mounts, float(problem.model.ballast_mass[step]))
        )
        frequencies = [mode.frequency for mode in judged.modes]
        if max(frequencies) <= low:
            least["below"] = min(least["below"], judged.cost)
        if min(frequencies) >= high:
            least["above"] = min(least["above"], judged.cost)
    assert set(found) == {"below", "above"}
    assert min(least.values()) < math.inf
    for side, cost in found.items():
        assert cost <= least[side] * (1 + 1e-9)
        if math.isinf(cost):
            assert math.isinf(least[side])


def test_on_one_axis_the_bound_whatever_the_damping_is_not_below_the_response(tmp_path):
    """|X| = F/|m w^2 - k + j w c| <= F/(m w^2 - k), by hand; the transmissibility beside it holds with its damping."""
    text = one.one_axis(
        more=one.TRANSMISSIBILITY.format(limit=0.1) + one.DISPLACEMENT.format(limit=4e-5),
        goal='minimise = "stiffness"', mass=100, frequency='["20 Hz", "25 Hz"]', softest=2e4, stiffest=5e6, force=40,
        unknowns="[[sizing.unknown]]\nkind = 'viscous'\ngroup = 'feet'\nlower = '10 N s/m'\nupper = '900 N s/m'",
    )  # fmt: skip
    (safe,) = one.sized(tmp_path, text, drawings=True).convex
    k, w = float(safe.values[0]), 2 * math.pi * 20.0
    assert safe.bounded == pytest.approx(40.0 / (100.0 * w**2 - k) / 4e-5, rel=1e-5)
    assert safe.response <= safe.bounded
    (cone,) = safe.cones
    assert "transmissibility" in cone and cone in safe.held
