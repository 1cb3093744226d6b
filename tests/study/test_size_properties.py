"""Six-axis sizing from study files: dense grids over three unknowns, scaling, units, and the gaps of fronts."""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest

from detune.response.assess import assess
from detune.sizing.made_parts import bounds, made_design
from detune.solvers import size_many_starts
from detune.solvers.size_batch import judge
from detune.solvers.size_front_bounds import ANY, gap, with_bounds
from detune.solvers.size_front_searched import searched_front
from detune.study.load import load_study

HERE = Path(__file__).parent
CUBE = (HERE / "cube_to_size.toml").read_text(encoding="utf-8")
PAIR = (HERE / "pair_to_size.toml").read_text(encoding="utf-8")
# Slow excitation, so that every mode lies above it and separation costs stiffness.
STIFF = (
    CUBE.replace('["24 Hz", "26 Hz"]', '["3 Hz", "4 Hz"]')
    .replace("limit = 0.3", "limit = 2.5")
    .replace('"0.02 mm"', '"1 mm"')
)
GRID = 18


def brief_of(folder, text):
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    return load_study(path).brief


def sized(brief, goal="cost", sense=1.0):
    found = size_many_starts.solve(brief, goal, sense, starts=3, seed=2)
    assert found.best is not None and found.differenced == ()
    made = made_design(brief, found.best.values)
    assert assess(made.brief, made.design).meets
    return found


@pytest.fixture(scope="module")
def grid():
    brief = load_study(HERE / "pair_to_size.toml").brief
    to = size_many_starts.Coordinates(brief)
    axis = np.linspace(0.0, 1.0, GRID)
    points = to.outward(np.stack(np.meshgrid(axis, axis, axis, indexing="ij"), axis=-1).reshape(-1, 3))
    return brief, points, judge(brief, points)


@pytest.mark.parametrize(("goal", "sense"), [("cost", 1.0), ("worst-response", 1.0), ("separation", -1.0)])
def test_no_point_of_a_dense_grid_is_better(grid, goal, sense):
    """5,832 designs over two stiffnesses and a loss factor, each judged by the batch evaluation of `detune run`."""
    brief, _, judged = grid
    value = judged.objectives[goal]
    met = judged.met if goal != "worst-response" else _met_but_for_responses(judged)
    best = sense * value[met]
    assert met.any() and not met.all()
    found = sized(brief, goal, sense).best
    assert sense * found.objective <= best.min() + 1e-4 * abs(best.min())
    # The grid comes near: the answer is no fluke of one evaluation.
    spread = np.ptp(best)
    assert best.min() - sense * found.objective <= 0.12 * spread


def _met_but_for_responses(judged):
    from detune.brief.allowable.base import HarmonicAllowable

    rows = [i for i, r in enumerate(judged.requirements) if not isinstance(r.allowable, HarmonicAllowable)]
    return (judged.margins[rows] >= 0.0).all(axis=0)


def scaled(text, share):
    """The study with every mass, stiffness and force times `share`."""
    for unit in ("kg", "N/mm", "N"):
        text = re.sub(rf'"([\d.]+) {unit}"', lambda m, u=unit: f'"{float(m[1]) * share} {u}"', text)
    return re.sub(
        r"cost_per_stiffness = ([\d.]+)", lambda m: f"cost_per_stiffness = {float(m[1]) / share}", text
    )


@pytest.mark.parametrize("share", [0.01, 7.0])
def test_masses_stiffnesses_and_forces_scale_together(tmp_path, share):
    """Motions and force ratios depend on k/m and F/m alone: the stiffness found is a times as much, at the
    same cost.
    """
    plain = sized(brief_of(tmp_path, PAIR)).best
    other = sized(brief_of(tmp_path, scaled(PAIR, share))).best
    assert other.values[:2] == pytest.approx(share * plain.values[:2], rel=1e-5)
    assert other.values[2] == pytest.approx(plain.values[2], rel=1e-5)
    assert other.objective == pytest.approx(plain.objective, rel=1e-7)


def test_millimetres_and_metres_give_the_same_answer(tmp_path):
    text = re.sub(r'"(-?[\d.]+) m"', lambda m: f'"{1e3 * float(m[1])} mm"', PAIR)
    text = re.sub(r'"([\d.]+) N/mm"', lambda m: f'"{1e3 * float(m[1])} N/m"', text)
    text = text.replace('"0.16 mm"', '"1.6e-4 m"').replace('"100 kg"', '"100000 g"')
    assert text.count(' mm"') > 10
    plain, other = sized(brief_of(tmp_path, PAIR)).best, sized(brief_of(tmp_path, text)).best
    assert other.values == pytest.approx(plain.values, rel=1e-6)
    assert other.objective == pytest.approx(plain.objective, rel=1e-9)


def test_the_order_of_stations_does_not_matter(tmp_path):
    blocks = re.findall(r"\[\[station\]\][^\[]*(?:\[\"[^\]]*\][^\[]*)", PAIR)
    assert len(blocks) == 4
    turned = PAIR.replace("".join(blocks), "".join(reversed(blocks)))
    assert turned != PAIR
    plain, other = sized(brief_of(tmp_path, PAIR)).best, sized(brief_of(tmp_path, turned)).best
    assert other.objective == pytest.approx(plain.objective, rel=1e-9)


def test_every_point_of_a_searched_front_states_its_gap(tmp_path):
    """Bounds hold against a grid: no design of it that is as good in the other objective falls below them."""
    brief = brief_of(
        tmp_path, STIFF.replace("starts = 3", 'starts = 3\nfront_points = 4\ntrade = ["cost", "separation"]')
    )
    front = searched_front(brief, sized(brief).best.values)
    assert len(front.points) >= 4 and not front.exact and "no proof" in front.worth
    to = size_many_starts.Coordinates(brief)
    axis = np.linspace(0.0, 1.0, 14)
    points = to.outward(np.stack(np.meshgrid(axis, axis, axis, indexing="ij"), axis=-1).reshape(-1, 3))
    judged = judge(brief, points)
    low, _ = bounds(brief)
    least = float(judge(brief, low[None]).objectives["cost"][0])
    compared = 0
    for point in front.points:
        told = dict(point.bounds)
        assert told[ANY] == pytest.approx(least)
        assert told["designs with every mode above all excitation"] <= point.objectives["cost"] * (1.0 + 1e-6)
        share, which = gap(front.minimised, point)
        assert 0.0 <= share <= 0.01 and which != ANY
        as_good = judged.met & (judged.objectives["separation"] >= point.objectives["separation"])
        if as_good.any():
            compared += 1
            cheapest = judged.objectives["cost"][as_good].min()
            assert cheapest >= max(told.values()) * (1.0 - 1e-6)
            assert point.objectives["cost"] <= cheapest * (1.0 + 1e-4)
    assert compared >= 3


def test_a_front_without_prices_that_rise_has_no_bound(grid):
    brief, _, _ = grid
    point = searched_front(
        brief.model_copy(
            update={
                "sizing": brief.sizing.model_copy(
                    update={"trade": ("worst-response", "added-mass"), "front_points": 1}
                )
            }
        ),
        sized(brief).best.values,
    ).points[0]
    (told,) = with_bounds(brief, "worst-response", (point,))
    assert told.bounds == () and gap("worst-response", told) is None


STATES = """
[[state]]
name = "aged"
stiffness_factor = 1.4
groups = ["left"]
creep = 0.2
packing = { A = "1 mm" }
[[state]]
name = "one lost"
lost = ["D"]
[[connection]]
name = "pipe"
on = "machine"
to = "floor"
position = ["0.4 m", "0.2 m", "0.6 m"]
stiffness = ["20 N/mm", "30 N/mm", "40 N/mm"]
loss_factor = 0.05
[[steady_load]]
name = "belt"
on = "machine"
position = ["0 m", "0.1 m", "0.4 m"]
force = ["100 N", "50 N", "0 N"]
moment = ["0 N m", "0 N m", "0 N m"]
"""


def test_states_connections_and_steady_loads_have_slopes_too(tmp_path):
    """A lost mount, packing, creep, stiffer parts, a pipe, a belt: rows as the batch says, slopes by
    central differences.

    Rows of responses are compared where both neighbours peak alike; their peaks are found anew at each,
    which differences see as noise.
    """
    from detune.solvers import size_gradients

    text = (HERE / "everything_to_size.toml").read_text(encoding="utf-8")
    text = text.replace('name = "next door"\n', 'name = "next door"\nstate = "aged"\n', 1)
    text = text.replace('name = "fan running"\n', 'name = "fan running"\nstate = "one lost"\n', 1)
    brief = brief_of(tmp_path, text.replace("[ballast]", STATES + "[ballast]", 1))
    found = size_gradients.prepared(brief)
    assert found.differenced == () and len(found.states) == 3
    to = size_many_starts.Coordinates(brief)
    x = to.outward(np.full(12, 0.45))
    held = size_gradients.sides(found, x)
    rows = size_gradients.evaluated(found, x, held, whole=True).rows
    judged = judge(brief, x[None])
    for requirement, margin in zip(judged.requirements, judged.margins[:, 0], strict=True):
        own = [i for i, r in enumerate(rows.requirement) if r == requirement]
        if own and margin < 1e5 and np.isfinite(rows.log[own[0]]):
            assert np.exp(-max(rows.log[own])) - 1.0 == pytest.approx(margin, rel=3e-4, abs=3e-4)
    low, high = bounds(brief)
    for k in range(12):
        step = 3e-5 * (high[k] - low[k])
        pair = []
        for way in (-1.0, 1.0):
            beside = x.copy()
            beside[k] += way * step
            pair.append(size_gradients.evaluated(found, beside, held, whole=True).rows)
        slope = (pair[1].value - pair[0].value) / (2.0 * step)
        size = np.maximum(np.abs(rows.slopes * (high - low)).max(axis=1), 1e-6)
        off = np.abs(slope - rows.slopes[:, k]) * (high[k] - low[k]) / size
        still = np.isnan(rows.log)
        assert off[still].max() < 1e-5
        responses = ~still & (rows.log > -19.0)
        assert np.quantile(off[responses], 0.97) < 1e-3


KNOCK = """
[[condition]]
name = "knock"
steady = false
[[forcing]]
kind = "base-pulse"
name = "knock"
conditions = ["knock"]
direction = "z"
shape = "half-sine"
duration = "11 ms"
amplitude = "3 g"
[[allowable]]
kind = "acceleration"
at = "top"
conditions = ["knock"]
direction = "z"
measure = "peak"
limit = "1.1 g"
"""


def test_a_shock_is_differenced_in_its_own_rows_and_the_result_says_so(tmp_path):
    text = PAIR.replace('name = "rotor"\n', 'name = "rotor"\nconditions = ["running", "start-up"]\n')
    brief = brief_of(tmp_path, text.replace("[sizing]", KNOCK + "[sizing]"))
    found = size_many_starts.solve(brief, "cost", 1.0, starts=1, seed=2)
    assert found.slopes_from == "adjoint" and found.slopes > 0
    assert found.differenced == ("acceleration z, peak (knock)", "axial dynamic force against uplift (knock)")
    assert found.best is not None
    made = made_design(brief, found.best.values)
    assessment = assess(made.brief, made.design)
    assert assessment.meets
    plain = size_many_starts.solve(brief, "cost", 1.0, starts=1, seed=2, adjoint=False)
    assert plain.slopes_from == "finite differences" and plain.best is not None
    assert found.best.objective <= plain.best.objective * (1.0 + 1e-4)
