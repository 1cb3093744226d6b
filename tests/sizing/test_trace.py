"""Traced boundaries against circles, saddles and exact one-axis branches."""

from __future__ import annotations

import math

import numpy as np
import pytest

from detune.sizing.one_axis import solve_one_axis
from detune.sizing.one_axis_map import feasible_region
from detune.sizing.statement import Objective, OneAxisProblem, ResponseLimit, SizingError
from detune.sizing.trace import one_axis_lines, trace_boundary, trace_region
from sizing import instances


def circle(x, y):
    return x**2 + y**2 - 1.0


def test_a_circle_is_one_closed_piece_with_its_length_and_area():
    lines = np.linspace(-2, 2, 9)
    pieces = trace_boundary(circle, lines, lines, tolerance=1e-5)
    assert len(pieces) == 1 and pieces[0].closed
    p = pieces[0].points
    assert np.abs(np.hypot(p[:, 0], p[:, 1]) - 1).max() < 1e-9
    length = np.linalg.norm(np.diff(p, axis=0), axis=1).sum()
    assert length == pytest.approx(2 * math.pi, rel=1e-4)
    area = 0.5 * abs(np.sum(p[:-1, 0] * p[1:, 1] - p[1:, 0] * p[:-1, 1]))
    assert area == pytest.approx(math.pi, rel=1e-4)


def test_two_branches_of_a_hyperbola_end_at_the_frame():
    lines = np.linspace(-3, 3, 14)
    pieces = trace_boundary(lambda x, y: 1.0 - x * y, lines, lines)
    assert len(pieces) == 2
    for piece in pieces:
        assert not piece.closed
        assert np.abs(piece.points[:, 0] * piece.points[:, 1] - 1).max() < 1e-9


def test_logarithmic_axes_find_the_same_curve():
    pieces = trace_boundary(
        lambda x, y: x * y - 10.0,
        np.geomspace(0.1, 1e3, 9),
        np.geomspace(0.1, 1e3, 9),
        logarithmic=(True, True),
    )
    assert len(pieces) == 1
    assert pieces[0].points.prod(axis=1) == pytest.approx(np.full(len(pieces[0].points), 10.0), rel=1e-10)


def test_region_marks_the_binding_parts_and_names_them():
    lines = np.linspace(-2, 2, 12)
    pieces = trace_region({"circle": circle, "half": lambda x, y: x - 0.2}, lines, lines)
    assert {p.name for p in pieces} == {"circle", "half"}
    for piece in pieces:
        x, y = piece.points.T
        expected = x <= 0.2 + 1e-9 if piece.name == "circle" else x**2 + y**2 <= 1 + 1e-9
        assert np.array_equal(piece.binding, expected)


def transmissibility_axis(top: float) -> OneAxisProblem:
    m, f1, f2 = 200.0, 12.0, 5.0
    soft = m * (2 * math.pi * f1) ** 2 * 0.3 / 1.3
    need = soft * (1 - 1e-4) - m * (2 * math.pi * f2) ** 2
    limits = (
        ResponseLimit("T", "transmissibility", 0.3, f1, f1),
        ResponseLimit("X", "displacement", 1e-4, f2, f2, "force", need * 1e-4),
    )
    return OneAxisProblem(m, "viscous", (2e5, 4e6), (1.0, top), Objective("softest"), limits)


def one_axis_excess(problem: OneAxisProblem):
    """Largest response/limit - 1 by plain complex arithmetic."""

    def g(k, c):
        worst = np.full(np.shape(k), -np.inf)
        for limit in problem.limits:
            w = 2 * np.pi * limit.lower_frequency
            mount = k + 1j * w * c
            top = np.abs(mount) if limit.quantity == "transmissibility" else limit.amplitude
            worst = np.maximum(worst, top / np.abs(mount - problem.mass * w**2) / limit.limit - 1)
        return worst

    return g


def test_an_island_smaller_than_the_grid_is_traced_from_the_exact_branches():
    problem = transmissibility_axis(20.0)
    branch = solve_one_axis(problem).branches[0]
    g = one_axis_excess(problem)
    x, y = np.geomspace(2e5, 4e6, 30), np.geomspace(1.0, 20.0, 20)
    plain = trace_boundary(g, x, y, logarithmic=(True, True))
    assert plain == []
    xs, ys = one_axis_lines(problem, x, y)
    found = trace_boundary(g, xs, ys, tolerance=1e-6, logarithmic=(True, True))
    # It reaches from the least to the greatest damping: a left side and a right side.
    assert len(found) == 2
    p = np.concatenate([piece.points for piece in found])
    low, high = branch.stiffness_interval
    assert p[:, 0].min() == pytest.approx(low, rel=1e-6)
    assert p[:, 0].max() == pytest.approx(high, rel=1e-6)
    assert np.abs(g(p[:, 0], p[:, 1])).max() < 1e-8


def test_a_sliver_is_drawn_whole_with_its_limits_named():
    problem = transmissibility_axis(300.0)
    pieces = feasible_region(problem, points=30)
    assert len(pieces) == 1
    piece = pieces[0]
    g = one_axis_excess(problem)
    assert np.all(g(piece.stiffness, piece.least_damping) <= 1e-9)
    assert np.all(g(piece.stiffness, piece.greatest_damping) <= 1e-9)
    assert set(piece.least_set_by) == {"X", "least damping"}
    assert set(piece.greatest_set_by) <= {"T", "greatest damping"}
    # Just outside a named curve that limit, and no other, is broken.
    for i in np.flatnonzero(np.array(piece.greatest_set_by) == "T"):
        assert g(piece.stiffness[i : i + 1], piece.greatest_damping[i : i + 1] * 1.001)[0] > 0


def test_region_of_random_problems_against_a_grid():
    for seed in range(12):
        problem = instances.random_problem(seed)
        pieces = feasible_region(problem, points=25)
        assert len(pieces) == len(solve_one_axis(problem).branches)
        for piece in pieces:
            for damping in (piece.least_damping, piece.greatest_damping):
                inside = instances.meets(problem, piece.stiffness, damping, problem.mass, 300, slack=1e-7)
                assert np.all(inside)
            middle = 0.5 * (piece.least_damping + piece.greatest_damping)
            assert np.all(instances.meets(problem, piece.stiffness, middle, problem.mass, 300, slack=1e-7))


def test_bad_lines_are_refused():
    with pytest.raises(SizingError, match="must rise"):
        trace_boundary(circle, np.array([0.0, 0.0]), np.array([0.0, 1.0]))
    with pytest.raises(SizingError, match="positive"):
        trace_boundary(circle, np.array([-1.0, 1.0]), np.array([1.0, 2.0]), logarithmic=(True, False))
