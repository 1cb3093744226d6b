"""Books solved backwards from a study file, branches, bad input, the demonstration."""

from __future__ import annotations

import importlib.util
import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from detune.ground.errors import BriefError
from detune.response.assess import assess
from detune.sizing.made_parts import made_design
from detune.solvers import size_nearest
from detune.solvers.size_batch import judge
from detune.study.load import load_study, study_of
from detune.study.size import size_study

_spec = importlib.util.spec_from_file_location("sizing_briefs", Path(__file__).with_name("sizing_briefs.py"))
assert _spec is not None and _spec.loader is not None
briefs = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(briefs)

UNDAMPED = "viscous = '0 N s/m'"


@pytest.mark.parametrize(
    ("mass", "rpm", "limit", "parts", "expected", "source"),
    [
        (30.0, 580.0, 0.10, 3, 3353.7, "Thomson, refrigerator problem; published 3.35e3 (CHECKS W4)"),
        (40.0, 1000.0, 0.10, 4, 9969.3, "Rao 5e Example 9.4; published 9969.6 (CHECKS W5)"),
    ],
)
def test_stiffness_for_a_transmission_as_books_print_it(tmp_path, mass, rpm, limit, parts, expected, source):
    text = briefs.one_axis(
        more=briefs.TRANSMISSIBILITY.format(limit=limit), goal="maximise = 'stiffness'", mass=mass, parts=parts,
        frequency=f"'{rpm} rpm'", softest=10.0, stiffest=1e5, made=UNDAMPED,
    )  # fmt: skip
    result = briefs.sized(tmp_path, text)
    assert result.answer is not None and result.worth.startswith("global")
    soft = next(branch for branch in result.branches if branch.name.startswith("below"))
    assert soft.values[0] == pytest.approx(expected, rel=2e-4), source
    assert soft.assessment.meets


def test_rao_example_9_5(tmp_path):
    """Rao 5e Example 9.5: 50 kg, 1000 cos 120 t N, 5 % undamped: k = 34285.7 N/m, amplitude 1.45833 mm (CHECKS W5)."""
    hertz = 120.0 / (2.0 * math.pi)
    text = briefs.one_axis(
        more=briefs.TRANSMISSIBILITY.format(limit=0.05) + briefs.DISPLACEMENT.format(limit=0.0016),
        goal="maximise = 'stiffness'", mass=50.0, force=1000.0, frequency=f"'{hertz} Hz'", softest=100.0, stiffest=6e5,
        made=UNDAMPED,
    )  # fmt: skip
    best = briefs.sized(tmp_path, text).branches
    soft = next(branch for branch in best if branch.name.startswith("below"))
    assert soft.values[0] == pytest.approx(34285.7, rel=1e-5)
    amplitude = next(row.value for row in soft.assessment.margins if row.kind == "displacement")
    assert amplitude == pytest.approx(1.45833e-3, rel=1e-4)


def test_two_branches_are_named_and_the_best_comes_first(tmp_path):
    """Displacement under 1 N at one line: |k - m w^2| >= F/X, so k <= m w^2 - F/X or k >= m w^2 + F/X, by hand."""
    mass, hertz, limit = 100.0, 10.0, 1e-5
    centre = mass * (2.0 * math.pi * hertz) ** 2
    text = briefs.one_axis(
        more=briefs.DISPLACEMENT.format(limit=limit), goal="minimise = 'stiffness'", mass=mass, frequency="'10 Hz'",
        softest=1e4, stiffest=4e6, made=UNDAMPED,
    )  # fmt: skip
    result = briefs.sized(tmp_path, text)
    names = [branch.name for branch in result.branches]
    assert names == ["below the first excitation", "above the first excitation"]
    assert result.answer is result.branches[0]
    assert result.branches[0].values[0] == pytest.approx(1e4, rel=1e-6)
    assert result.branches[1].values[0] == pytest.approx(centre + 1.0 / limit, rel=1e-5)
    assert result.exact is not None
    below = result.exact.branches[0].stiffness
    assert below[1] == pytest.approx(centre - 1.0 / limit, rel=1e-6)


def test_loss_factor_from_the_peak_transmissibility(tmp_path):
    """Peak of a loss-factor mount over a range holding it: sqrt(1 + 1/eta^2) (CHECKS S9: 10.049876 at eta = 0.1)."""
    unknown = "[[sizing.unknown]]\nkind = 'loss-factor'\ngroup = 'feet'\nlower = 0.001\nupper = 1.0"
    text = briefs.one_axis(
        more=briefs.TRANSMISSIBILITY.format(limit=10.049876), goal="minimise = 'damping'", mass=10.0,
        frequency="['5 Hz', '20 Hz']", softest=39478.0, stiffest=39478.0, unknowns=unknown,
    )  # fmt: skip
    best = briefs.sized(tmp_path, text).answer
    assert best is not None
    assert best.values[1] == pytest.approx(0.1, rel=1e-5)


def test_damping_for_a_peak_of_four_at_any_stiffness(tmp_path):
    """Least worst response equals the ratio at the best corner: bisection against a dense grid of assessed margins."""
    unknown = "[[sizing.unknown]]\nkind = 'viscous'\ngroup = 'feet'\nlower = '20 N s/m'\nupper = '400 N s/m'"
    text = briefs.one_axis(
        more=briefs.TRANSMISSIBILITY.format(limit=2.0), goal="minimise = 'worst-response'", mass=10.0,
        frequency="['8 Hz', '20 Hz']", softest=1e3, stiffest=1e5, unknowns=unknown,
    )  # fmt: skip
    result = briefs.sized(tmp_path, text)
    assert result.answer is not None
    study = result.study
    k, c = np.meshgrid(np.geomspace(1e3, 1e5, 25), np.geomspace(20.0, 400.0, 9))
    grid = judge(study.brief, np.stack([k.ravel(), c.ravel()], axis=1)).objectives["worst-response"]
    assert result.answer.objective <= grid.min() * (1.0 + 1e-6)
    assert result.answer.objective == pytest.approx(
        float(judge(study.brief, result.answer.values[None]).objectives["worst-response"][0]), rel=1e-4
    )


def test_relaxing_a_limit_never_worsens(tmp_path):
    unknown = "[[sizing.unknown]]\nkind = 'viscous'\ngroup = 'feet'\nlower = '20 N s/m'\nupper = '4000 N s/m'"
    found = []
    for limit in (0.6, 0.8, 1.2):
        text = briefs.one_axis(
            more=briefs.TRANSMISSIBILITY.format(limit=limit), goal="minimise = 'cost'", mass=60.0,
            frequency="['14 Hz', '25 Hz']", softest=1e4, stiffest=3e6, unknowns=unknown,
            made="cost_per_stiffness = 0.1\ncost_per_damping = 0.02",
        )  # fmt: skip
        answer = briefs.sized(tmp_path, text).answer
        assert answer is not None
        found.append(answer.objective)
    assert found[0] >= found[1] >= found[2]


def test_nothing_feasible_is_said_to_be_proven(tmp_path):
    text = briefs.one_axis(
        more=briefs.TRANSMISSIBILITY.format(limit=0.01), goal="minimise = 'stiffness'", mass=10.0, frequency="'10 Hz'",
        softest=1e4, stiffest=1e5, made=UNDAMPED,
    )  # fmt: skip
    result = briefs.sized(tmp_path, text)
    assert result.answer is None and result.exit_code == 1
    from detune.report.sizing_page import sizing_summary

    assert "(proven)" in sizing_summary(result)


BAD = {
    "crossed": (
        "lower = '10.0 N/m'\nupper = '100000.0 N/m'",
        "lower = '5 N/mm'\nupper = '1 N/mm'",
        "crossed",
    ),
    "no unit": ("lower = '10.0 N/m'", "lower = 10.0", "above zero"),
    "no goal": ("maximise = 'stiffness'", "", "exactly one"),
    "no damping": (UNDAMPED, "", "damping"),
    "unknown group": ("group = 'feet'\naxis", "group = 'foot'\naxis", "group of stations"),
}


@pytest.mark.parametrize("name", ["crossed", "no goal", "no damping", "unknown group"])
def test_bad_tables_are_refused_in_plain_words(tmp_path, name):
    text = briefs.one_axis(
        more=briefs.TRANSMISSIBILITY.format(limit=0.1), goal="maximise = 'stiffness'", mass=30.0, frequency="'10 Hz'",
        softest=10.0, stiffest=1e5, made=UNDAMPED,
    ).replace('"', "'")  # fmt: skip
    old, new, words = BAD[name]
    assert old in text
    with pytest.raises(BriefError, match=words):
        briefs.sized(tmp_path, text.replace(old, new))


def test_an_unknown_nothing_depends_on_and_an_objective_nothing_changes(tmp_path):
    ballast = "[[sizing.unknown]]\nkind = 'ballast'\nlower = '0 kg'\nupper = '50 kg'"
    table = "[ballast]\nposition = ['0 m', '0 m', '0 m']\n"
    table += "size = ['1 m', '1 m', '1 m']\nsteps = ['0 kg']\ncost_per_kg = 0\n"
    common = {"mass": 30.0, "frequency": "'10 Hz'", "softest": 10.0, "stiffest": 1e5, "made": UNDAMPED}
    free = briefs.one_axis(
        more=table + "[[allowable]]\nkind = 'separation'\nlimit = 0.2\n" + briefs.DISPLACEMENT.format(limit=1.0),
        goal="minimise = 'cost'", unknowns=ballast, **common,
    )  # fmt: skip
    with pytest.raises(BriefError, match="every design costs the same"):
        briefs.sized(tmp_path, free)
    place = "[[sizing.unknown]]\nkind = 'position'\n"
    place += "stations = ['A']\naxis = 'z'\nlower = '0.1 m'\nupper = '0.4 m'"
    idle = briefs.one_axis(
        more=briefs.DISPLACEMENT.format(limit=1.0), goal="minimise = 'stiffness'", unknowns=place, **common,
    )  # fmt: skip
    with pytest.raises(BriefError, match="nothing here changes with it"):
        briefs.sized(tmp_path, idle)


STUDY = Path(__file__).parents[2] / "studies" / "weighing-platform.toml"


@pytest.fixture(scope="module")
def platform():
    """The demonstration with a small front and no specification."""
    brief = load_study(STUDY).brief
    small = brief.sizing.model_copy(update={"front_points": 4, "specification": False})
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(size_nearest, "SHORT_LIST", 60)
        return size_study(study_of(brief.model_copy(update={"sizing": small})))


def test_platform_demo(platform):
    best = platform.answer
    assert best is not None and platform.worth.startswith("global")
    # No random design within the bounds that meets the brief is cheaper.
    rng = np.random.default_rng(0)
    low, high = np.array([4e3, 20.0, 0.0]), np.array([4e5, 4000.0, 120.0])
    drawn = np.column_stack(
        [np.exp(rng.uniform(np.log(low[:2]), np.log(high[:2]), (150, 2))), rng.uniform(0, 120, 150)]
    )
    judged = judge(platform.study.brief, drawn)
    assert judged.met.any()
    assert judged.objectives["cost"][judged.met].min() >= best.objective * (1.0 - 1e-6)


def test_platform_map_lines_lie_on_their_limits(platform):
    drawn = platform.map
    assert drawn is not None and len(drawn.dots) > 40 and drawn.pieces
    brief = platform.study.brief
    for line in drawn.traced.boundaries:
        some = line.points[:: max(1, len(line.points) // 6)]
        points = np.repeat(drawn.values[None], len(some), axis=0)
        points[:, 0], points[:, 1] = some[:, 0], some[:, 1]
        judged = judge(brief, points)
        rows = [
            k for k, r in enumerate(judged.requirements)
            if line.name == f"{r.allowable.quantity()} ({r.condition})"
        ]  # fmt: skip
        assert rows, line.name
        assert np.abs(judged.margins[rows].min(axis=0)).max() < 2e-2


def test_platform_front_points_meet_the_brief_and_beat_each_other(platform):
    front = platform.front
    assert front is not None and len(front.points) >= 4
    judged = judge(platform.study.brief, np.array([point.values for point in front.points]))
    assert (judged.margins >= -1e-6).all()
    table = np.array([[point.objectives[name] for name in front.trade] for point in front.points])
    for row in table:
        assert not np.any(np.all(table < row * (1.0 - 1e-6), axis=1))


def test_platform_nearest_real_parts_are_assessed(platform):
    near = platform.nearest
    assert near is not None and near.designs
    first = near.designs[0].assessment
    assert first.meets
    again = assess(platform.study.brief, first.design)
    assert again.meets and again.cost == first.cost
    assert first.design.mounts[0].catalog == "platform mounts"
    assert first.design.ballast in platform.study.brief.ballast.steps


def test_platform_report_opens_and_names_everything(platform, tmp_path):
    from detune.report.sizing_page import write_sizing

    folder = write_sizing(platform, tmp_path / "out")
    page = (folder / "report.html").read_text(encoding="utf-8")
    for heading in (
        "The sized design",
        "Branches",
        "Map of what is feasible",
        "Front:",
        "Nearest real parts",
    ):
        assert heading in page
    assert "http://" not in page.replace("http://www.w3.org", "")
    assert (folder / "plots" / "sizing-map.png").is_file() and (folder / "branches.csv").is_file()


def test_made_design_puts_values_where_they_belong():
    brief = load_study(STUDY).brief
    made = made_design(brief, np.array([2e4, 500.0, 40.0]))
    mount = made.design.mounts[0]
    assert mount.stiffness_dynamic[2] == 2e4 and mount.viscous[2] == 500.0 and made.design.ballast == 40.0
    # 45 + 0.4 * 20 + 0.06 * 500 for one part, as the study prices them; 1.4 a kilogram of ballast.
    assert mount.cost == pytest.approx(83.0)
    assert assess(made.brief, made.design).cost == pytest.approx(4 * 83.0 + 56.0)
    assert replace(mount, cost=0.0).part == "part for feet"
