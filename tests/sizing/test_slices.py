"""Slices of one-axis sizing: interpreted and compiled alike, roots, damping over a range, holes, bounds over masses."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.sizing import slice_response
from detune.sizing.ballast_search import positions
from detune.sizing.one_axis import best_count, solve_one_axis
from detune.sizing.slice_data import bench, pool
from detune.sizing.slice_kernels import Slices
from detune.sizing.statement import Ballast, Objective, OneAxisProblem, ResponseLimit
from sizing import instances


@settings(deadline=None, max_examples=100)
@given(st.lists(st.floats(-3.0, 3.0), min_size=1, max_size=6), st.floats(0.2, 2.0))
def test_roots_between_against_numpy(places, scale):
    """numpy.polynomial builds the polynomial from its roots; those apart from their neighbours must come back."""
    coefficients = scale * np.polynomial.polynomial.polyfromroots(places)
    work = bench(pool(1, False), 1, False)
    for j, value in enumerate(coefficients):
        work.work[0][j] = float(value)
    count = slice_response.roots_between(len(places), -2.0, 2.0, work)
    found = np.array(work.work[1][:count])
    for place in places:
        alone = sum(abs(place - other) < 0.05 for other in places) == 1
        if alone and abs(place) < 1.95:
            assert np.min(np.abs(found - place), initial=np.inf) < 1e-6
    assert np.all(np.diff(found) >= 0)


def test_interpreted_and_compiled_rules_say_the_same():
    for seed in range(60):
        kind = ("none", "steps", "continuous")[seed % 3]
        problem = instances.random_problem(seed, ballast=kind)
        plain, fast = solve_one_axis(problem, "plain"), solve_one_axis(problem, "compiled")
        assert plain.decided and fast.decided
        assert [b.name for b in plain.branches] == [b.name for b in fast.branches]
        for one, two in zip(plain.branches, fast.branches, strict=True):
            assert two.best.objective == pytest.approx(one.best.objective, rel=1e-9)


@pytest.mark.parametrize(("kind", "acceleration"), [("viscous", 1.3), ("loss factor", 0.75)])
def test_least_and_greatest_damping_over_a_range_against_a_dense_look(kind, acceleration):
    """At one stiffness the damping allowed is an interval; dense frequencies and dampings find its ends."""
    limits = (
        ResponseLimit("X", "displacement", 6.0e-5, 8.0, 15.0, "force", 10.0),
        ResponseLimit("a", "acceleration", acceleration, 20.0, 40.0, "base displacement", 1e-4),
    )
    mass, k = 100.0, 100.0 * (2 * math.pi * 11.0) ** 2
    top = 6e3 if kind == "viscous" else 2.0
    problem = OneAxisProblem(mass, kind, (k / 10, k * 10), (1e-3 * top, top), Objective("softest"), limits)
    low, high, below, above = Slices(problem, "plain").damping_at(mass, k)
    d = np.linspace(1e-3 * top, top, 2001)
    good = instances.meets(problem, k, d, mass, points=2000)
    assert low == pytest.approx(d[good].min(), abs=1.01 * (d[1] - d[0]))
    assert high == pytest.approx(d[good].max(), abs=1.01 * (d[1] - d[0]))
    assert (below, above) == (0, 1)


def test_a_hole_that_no_end_and_no_best_point_shows():
    """|X| <= F/(m |(w0^2 - w^2)|) undamped, over 10 to 12 Hz: between f0 = 10 and 12 Hz only damping helps. With too
    little of it the stiffnesses between two by hand close: k < m w1^2 - F/X and k > m w2^2 + F/X.
    """
    mass, force, stroke = 200.0, 50.0, 1e-3
    limit = ResponseLimit("X", "displacement", stroke, 10.0, 12.0, "force", force)
    problem = OneAxisProblem(mass, "viscous", (1e5, 1e7), (0.0, 1e-3), Objective("softest"), (limit,))
    w1, w2 = 2 * math.pi * 10.0, 2 * math.pi * 12.0
    outcome = solve_one_axis(problem)
    assert [b.name for b in outcome.branches] == ["below the first excitation", "above the first excitation"]
    assert outcome.branches[0].stiffness_interval[1] == pytest.approx(mass * w1**2 - force / stroke, rel=1e-9)
    assert outcome.branches[1].stiffness_interval[0] == pytest.approx(mass * w2**2 + force / stroke, rel=1e-9)
    # Damping that holds the peak, F/(c w0) at least, lets everything through: one branch.
    wet = replace(problem, damping_bounds=(0.0, 2 * force / (stroke * w1)))
    assert len(solve_one_axis(wet).branches) == 1


def test_bounds_over_an_interval_of_masses_are_never_above_a_design_of_any_of_them():
    for seed in range(4000, 4030):
        problem = instances.random_problem(seed, ballast="continuous")
        slices = Slices(problem, "plain")
        low, high = problem.mass * 1.1, problem.mass * 1.3
        for place in positions(slices, slices.excitations):
            bound = slices.bound(low, high, place, math.inf)
            for mass in np.linspace(low, high, 5).tolist():
                values = [s.value for s in slices.at(mass, place).segments]
                if values:
                    assert bound <= min(values) + 1e-9 * abs(min(values))


def test_the_bound_over_masses_closes_as_the_interval_does():
    problem = instances.random_problem(1021, ballast="continuous")
    slices = Slices(problem, "plain")
    place = (0.0, math.inf)
    exact = min(s.value for s in slices.at(problem.mass * 1.2, place).segments)
    gaps = [
        exact - slices.bound(problem.mass * 1.2, problem.mass * (1.2 + width), place, math.inf)
        for width in (1e-2, 1e-4, 1e-6)
    ]
    assert gaps[2] < 1e-2 * gaps[1] + 1e-12 and gaps[1] < 1e-1 * gaps[0] + 1e-12


def test_the_best_alone_is_the_best_of_all_branches():
    for seed in range(30):
        problem = instances.random_problem(seed, ballast=("none", "steps", "continuous")[seed % 3])
        outcome, alone = solve_one_axis(problem), solve_one_axis(problem, only_best=True)
        assert len(alone.branches) == min(len(outcome.branches), 1)
        if outcome.branches:
            assert alone.best.objective == pytest.approx(outcome.best.objective, rel=1e-6)


def test_the_best_number_of_mounts_by_hand():
    """Undamped and soft: T = k/(m w^2 - k) <= 1/9 gives k <= m w^2/10 for all together; sag at most m g n/(n k_1)."""
    mass, hertz = 120.0, 25.0
    most = mass * (2 * math.pi * hertz) ** 2 / 10.0
    limit = ResponseLimit("T", "transmissibility", 1.0 / 9.0, hertz, hertz)
    one = OneAxisProblem(
        mass, "viscous", (most / 3.5, most / 3.5), (0.0, 0.0), Objective("stiffest"), (limit,)
    )
    # Three fit below the limit, four do not; each is as stiff as the others, so the stiffest is three.
    found = best_count(one, 1, 6, 0.0)
    assert found is not None and found[0] == 3
    assert found[1].best.stiffness == pytest.approx(3 * most / 3.5, rel=1e-12)
    assert best_count(one, 4, 6, 0.0) is None


def test_two_problems_of_one_thread_share_scratch_without_disturbing_each_other():
    one, two = instances.random_problem(4), instances.random_problem(7)
    first, second = Slices(one, "plain"), Slices(two, "plain")
    alone = [s.value for s in first.at(one.mass).segments]
    second.at(two.mass)
    assert [s.value for s in first.at(one.mass).segments] == alone


def test_ballast_position_names_come_from_the_position():
    problem = instances.random_problem(2000, ballast="continuous")
    names = [b.name for b in solve_one_axis(problem).branches]
    assert len(names) >= 3 and len(names) == len(set(names))
    assert all(not name.startswith("across") for name in names)


def test_a_separation_of_more_than_the_whole_leaves_the_stiff_side():
    """f/10 Hz - 1 >= 1.5 gives f >= 25 Hz and k >= m (2 pi 25)^2; below the line 1 - f/10 never reaches 1.5."""
    problem = OneAxisProblem(
        100.0,
        "viscous",
        (1e3, 1e8),
        (0.0, 10.0),
        Objective("softest"),
        excitation_intervals=((10.0, 10.0),),
        separation=1.5,
    )
    outcome = solve_one_axis(problem)
    assert [b.name for b in outcome.branches] == ["above the first excitation"]
    assert outcome.best.stiffness == pytest.approx(100.0 * (2 * math.pi * 25.0) ** 2, rel=1e-12)


def test_continuous_ballast_with_a_resonance_in_the_range_is_not_beaten_by_any_mass():
    """Smooth optimum between the bounds of ballast: every fixed mass of a fine row costs as much or more."""
    limits = (
        ResponseLimit("T", "transmissibility", 0.35, 24.0, 30.0),
        ResponseLimit("X", "displacement", 4e-4, 2.0, 30.0, "force", 100.0),
    )
    goal = Objective("weighted sum", stiffness_weight=1e-4, damping_weight=0.02, mass_weight=1.0)
    problem = OneAxisProblem(
        100.0, "viscous", (5e4, 2e7), (20.0, 6000.0), goal, limits, ballast=Ballast(0.0, 120.0)
    )
    outcome = solve_one_axis(problem)
    assert outcome.decided and outcome.gap <= 1e-6 * outcome.best.objective * 1.01
    for added in np.linspace(0.0, 120.0, 49):
        fixed = solve_one_axis(replace(problem, ballast=Ballast(float(added), float(added))))
        if fixed.branches:
            assert fixed.best.objective >= outcome.best.objective * (1 - 1e-9)
