"""Fronts of one axis: no design of a dense grid beats a point, and passing over levels leaves nothing out."""

from __future__ import annotations

import itertools
from pathlib import Path

import numpy as np
import pytest

from detune.report.figures import draw_one
from detune.report.plots import sizing_front
from detune.sizing.made_parts import bounds, made_design
from detune.solvers import size_front
from detune.solvers.one_axis_statement import one_axis
from detune.solvers.size_batch import batch, judge
from detune.solvers.size_front import nondominated, one_axis_front
from detune.study.load import load_study
from detune.study.size import size_study

ONE_AXIS = (Path(__file__).parent / "spec_one_axis.toml").read_text(encoding="utf-8")
MASS, PIECES = 200.0, 4


# Start-up passes the natural frequency, which wants damping; running wants little of it.
START = """
[[condition]]
name = "start-up"
steady = false
[[forcing]]
kind = "harmonic-force"
name = "start"
conditions = ["start-up"]
position = ["0 m", "0 m", "0.4 m"]
frequency = ["3 Hz", "9 Hz"]
force = ["0 N", "0 N", "10 N"]
[[allowable]]
kind = "displacement"
conditions = ["start-up"]
at = "top"
direction = "z"
measure = "peak"
limit = "70 um"
"""


def read(folder: Path, trade: tuple[str, ...], more: str = ""):
    start = ONE_AXIS
    for old in ('name = "pump"', 'kind = "transmissibility"', 'kind = "displacement"'):
        start = start.replace(old, f'{old}\nconditions = ["running"]')
    start = start.replace("[sizing]\n", START + "[sizing]\n", 1)
    text = start.replace("[sizing]\n", f"[sizing]\nspecification = false\ntrade = {list(trade)}\n{more}", 1)
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    return load_study(path)


def front_of(study, count: int):
    low, _ = bounds(study.brief)
    problem, _ = batch(study.brief, [made_design(study.brief, low)])
    axis = one_axis(study.brief, problem)
    return axis, one_axis_front(study.brief, axis, count)


def grid(trade: tuple[str, ...]):
    """Objectives (N, k) of every design of a dense grid that meets the limits, by the formulas of the textbook.

    Force ratio at most 0.45 and displacement at most 11 um under 10 N from 14 to 25 Hz, and at most 70 um under 10 N
    from 3 to 9 Hz: Rao, Mechanical Vibrations, ch. 3.
    """
    k, c = np.meshgrid(PIECES * np.geomspace(1e4, 4e5, 260), PIECES * np.geomspace(50.0, 4000.0, 260))
    worst = np.zeros(k.shape)
    for w in 2.0 * np.pi * np.linspace(14.0, 25.0, 60):
        away = np.abs(k - MASS * w**2 + 1j * w * c)
        worst = np.maximum(worst, np.abs(k + 1j * w * c) / away / 0.45)
        worst = np.maximum(worst, 10.0 / away / 11e-6)
    for w in 2.0 * np.pi * np.linspace(3.0, 9.0, 121):
        worst = np.maximum(worst, 10.0 / np.abs(k - MASS * w**2 + 1j * w * c) / 70e-6)
    each = {"stiffness": k, "damping": c, "worst-response": worst}
    good = worst <= 1.0
    return np.stack([each[name][good] for name in trade], axis=1)


@pytest.mark.parametrize("trade", [("damping", "worst-response"), ("damping", "stiffness", "worst-response")])
def test_no_design_of_a_dense_grid_beats_a_point(tmp_path, trade):
    study = read(tmp_path, trade)
    _, front = front_of(study, 5)
    assert front.exact and len(front.points) >= 3
    assert judge(study.brief, np.array([point.values for point in front.points])).margins.min() >= -1e-6
    others = grid(trade)
    # A resonance between two frequencies of the grid is up to 2e-3 higher than at either.
    for point in front.points:
        own = np.array([point.objectives[name] for name in trade])
        assert not np.any(np.all(others < own * (1.0 - 2e-3), axis=1)), point


def test_levels_that_are_passed_over_hold_no_other_design(tmp_path):
    """Every pair of levels solved by itself, as the front did before it passed any over."""
    trade = ("damping", "stiffness", "worst-response")
    study = read(tmp_path, trade)
    axis, front = front_of(study, 4)
    solved = size_front._Solved(study.brief, axis, size_front.with_room(axis.problem))
    spans = [size_front._range(solved, name) for name in trade[1:]]
    found = [
        solved.point("damping", dict(zip(trade[1:], levels, strict=True)))
        for levels in itertools.product(*(np.linspace(*span, 4).tolist() for span in spans))
    ]
    every = nondominated([point for point in found if point is not None], trade)
    table = np.array([[point.objectives[name] for name in trade] for point in front.points])
    for point in every:
        own = np.array([point.objectives[name] for name in trade])
        # The design itself, or one as good in everything.
        assert np.any(np.all(table <= own * (1.0 + 1e-6), axis=1)), point


def test_three_objectives_are_drawn_in_three_panels_with_the_unit_of_the_damping(tmp_path):
    result = size_study(read(tmp_path, ("damping", "stiffness", "worst-response"), "front_points = 4\n"))
    data = sizing_front.data(result)
    assert data.units == ("N s/m", "N/mm", "-")
    # The answer of the front is its least damping; stiffness is shown in N/mm.
    assert data.values[:, 1].max() < 4 * 400.0 + 1e-6
    drawn = draw_one("sizing-front", sizing_front, data)
    assert drawn.svg.count("points-") >= 2
