"""Batch tracing: a circle by its radius and length, an island, and lines that do not rise."""

from __future__ import annotations

import math

import numpy as np
import pytest

from detune.sizing.batch_trace import trace_batch
from detune.sizing.never_binds import never_binds
from detune.sizing.statement import Objective, OneAxisProblem, ResponseLimit, SizingError


def circle(x, y):
    return np.stack([1.0 - x**2 - y**2, 0.5 + 0.0 * x])


def test_a_circle_has_its_radius_and_its_length():
    grid = np.linspace(-1.5, 1.5, 21)
    found = trace_batch(circle, ("circle", "always met"), grid, grid)
    assert [line.name for line in found.boundaries] == ["circle"]
    line = found.boundaries[0]
    assert line.closed and line.binding.all()
    radius = np.hypot(line.points[:, 0], line.points[:, 1])
    assert np.abs(radius - 1.0).max() < 1e-4
    length = float(np.hypot(*np.diff(line.points, axis=0).T).sum())
    assert length == pytest.approx(2.0 * math.pi, rel=2e-3)


def test_binding_is_where_the_other_requirement_is_met():
    def two(x, y):
        return np.stack([1.0 - x**2 - y**2, x])

    grid = np.linspace(-1.5, 1.5, 24)
    found = trace_batch(two, ("circle", "right"), grid, grid)
    for line in found.boundaries:
        inside = line.points[:, 0] if line.name == "circle" else 1.0 - np.sum(line.points**2, axis=1)
        clear = np.abs(inside) > 1e-3
        assert np.array_equal(line.binding[clear], inside[clear] > 0.0)


def test_logarithmic_axes_find_the_same_curve():
    def ratio(x, y):
        return (x * y - 10.0)[None]

    found = trace_batch(ratio, ("product",), np.geomspace(1, 100, 15), np.geomspace(1, 100, 15), (True, True))
    points = found.boundaries[0].points
    assert np.abs(points[:, 0] * points[:, 1] / 10.0 - 1.0).max() < 2e-3


def test_lines_must_rise():
    with pytest.raises(SizingError, match="rise"):
        trace_batch(circle, ("a", "b"), np.array([1.0, 0.0]), np.array([0.0, 1.0]))


def test_a_limit_that_never_binds_is_met_everywhere():
    """|X| <= F/(w c): with c >= 10 N s/m at 10 Hz and 1 N never above 1.592 mm."""
    highest = 1.0 / (2.0 * math.pi * 10.0 * 10.0)
    for share, expected in ((1.001, True), (0.999, False)):
        limit = ResponseLimit("x", "displacement", share * highest, 10.0, 10.0, "force", 1.0)
        problem = OneAxisProblem(10.0, "viscous", (1e3, 1e6), (10.0, 100.0), Objective("softest"), (limit,))
        assert never_binds(problem, limit) is expected
