"""One-axis sizing: book designs found backwards, brute force, continuum, disjoint branches, properties."""

from __future__ import annotations

import itertools
import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.sizing.one_axis import solve_one_axis
from detune.sizing.statement import (
    Ballast,
    Objective,
    OneAxisProblem,
    ResponseLimit,
    SagLimit,
    SizingError,
)
from sizing import instances

BROAD = (0.01, 1000.0)


def undamped(
    mass: float, limits: tuple[ResponseLimit, ...], goal: str = "stiffest", top: float = 1e9
) -> OneAxisProblem:
    return OneAxisProblem(mass, "viscous", (1e-9 * top, top), (0.0, 0.0), Objective(goal), limits)


def transmissibility(limit: float, hertz: float, upper: float | None = None) -> ResponseLimit:
    return ResponseLimit("T", "transmissibility", limit, hertz, upper or hertz)


# Below resonance T exceeds 1 for an undamped mount, so a limit under 1 leaves the soft side only.
@pytest.mark.parametrize(
    ("mass", "rpm", "limit", "mounts", "expected", "tolerance"),
    [
        (30.0, 580.0, 0.10, 3, 3353.7, 2e-5),  # Thomson, refrigerator problem (W4; published 3.35e3)
        (40.0, 1000.0, 0.10, 4, 9969.3, 1e-5),  # Rao 5e Example 9.4 (W5; Rao prints 9969.6)
        (50.0, 120 * 60 / (2 * math.pi), 0.05, 1, 34285.7, 1e-5),  # Rao 5e Example 9.5 (W5)
        (20.0 / 386.0, 600.0, 1 / 12, 1, 15.735, 5e-5),  # McLean & Nelson Ex. 19-25 (W9), lb, in, s
    ],
)
def test_stiffness_for_a_transmission_as_the_books_print_it(mass, rpm, limit, mounts, expected, tolerance):
    outcome = solve_one_axis(undamped(mass, (transmissibility(limit, rpm / 60),)))
    assert len(outcome.branches) == 1
    assert outcome.branches[0].name == "below the first excitation"
    assert outcome.best.stiffness / mounts == pytest.approx(expected, rel=tolerance)
    assert "T" in outcome.best.tight


def test_rao_example_9_5_amplitude_on_the_same_design():
    # W5: 1000 N at 120 rad/s, 50 kg: 1.45833 mm on the stiffness that transmits 5 %.
    hertz = 120 / (2 * math.pi)
    stroke = ResponseLimit("X", "displacement", 1.45833e-3, hertz, hertz, "force", 1000.0)
    outcome = solve_one_axis(undamped(50.0, (transmissibility(0.05, hertz), stroke)))
    assert outcome.best.limits[1].margin == pytest.approx(0.0, abs=5e-6)


@pytest.mark.parametrize(
    ("rpm", "isolation", "millimetres"),
    [(1500, 0.8, 2.385), (1500, 0.9, 4.372), (1500, 0.95, 8.346), (1500, 0.98, 20.270), (600, 0.9, 27.325)],
)
def test_deflection_needed_for_an_isolation(rpm, isolation, millimetres):
    # Rao 5e eq. 9.106 (S12).
    outcome = solve_one_axis(undamped(100.0, (transmissibility(1 - isolation, rpm / 60),)))
    assert 100 * 9.80665 / outcome.best.stiffness * 1e3 == pytest.approx(millimetres, rel=1e-3)


def test_damping_for_a_resonant_transmissibility_of_four():
    # Rao 5e Example 9.8 (W5): Td = 4 at r = 1 needs zeta = .129099.
    k, m = 4e5, 100.0
    fn = math.sqrt(k / m) / (2 * math.pi)
    problem = OneAxisProblem(
        m, "viscous", (k, k), (0.0, 1e5), Objective("least damping"), (transmissibility(4, fn),)
    )
    assert solve_one_axis(problem).best.damping / (2 * math.sqrt(k * m)) == pytest.approx(0.129099, rel=1e-5)


@pytest.mark.parametrize(
    ("quantity", "source", "unit", "height"),
    [
        ("displacement", "force", lambda k, m: 1 / k, 5.025189),  # S1
        ("transmissibility", "unit", lambda k, m: 1.0, 5.122774),  # S5
        ("displacement", "unbalance", lambda k, m: 1 / m, 5.025189),  # S3
    ],
)
def test_peak_over_the_continuum_gives_the_damping_back(quantity, source, unit, height):
    # Den Hartog ch. 2; Rao 5e sec. 3.4-3.7: peak heights at zeta = 0.1, over a range that is never sampled.
    k, m = 3e5, 40.0
    limit = ResponseLimit("peak", quantity, height * unit(k, m), *BROAD, source, 1.0)
    problem = OneAxisProblem(m, "viscous", (k, k), (1.0, 1e5), Objective("least damping"), (limit,))
    outcome = solve_one_axis(problem)
    assert outcome.best.damping / (2 * math.sqrt(k * m)) == pytest.approx(0.1, rel=1e-6)


def test_loss_factor_peak():
    # S9: constant loss factor, peak at r = 1 of height sqrt(1 + 1/eta^2) = 10.049876 at eta = 0.1.
    limit = transmissibility(10.049876, *BROAD)
    problem = OneAxisProblem(
        40.0, "loss factor", (3e5, 3e5), (0.001, 1.0), Objective("least damping"), (limit,)
    )
    assert solve_one_axis(problem).best.damping == pytest.approx(0.1, rel=1e-6)


def three_orders(**changes) -> OneAxisProblem:
    limits = tuple(
        ResponseLimit(f"{f} Hz", "displacement", 4e-5, f, f, "force", 1000.0 * (f / 10) ** 2)
        for f in (10.0, 20.0, 40.0)
    )
    problem = OneAxisProblem(
        500.0, "viscous", (1e4, 1e9), (10.0, 200.0), Objective("weighted sum", stiffness_weight=1.0), limits
    )
    return replace(problem, **changes)


def test_disjoint_branches_are_found_and_named():
    # Undamped window by hand: |k - m w^2| >= F/x; F/x = 2.5e7 (f/10)^2, m w^2 = 1.97e6 (f/10)^2 leaves only the
    # stiff side; with a tenth of the force every gap opens.
    problem = three_orders()
    assert [b.name for b in solve_one_axis(problem).branches] == ["above the third excitation"]
    mild = tuple(replace(x, amplitude=x.amplitude / 50) for x in problem.limits)
    outcome = solve_one_axis(replace(problem, limits=mild))
    assert [b.name for b in outcome.branches] == [
        "below the first excitation",
        "between the first and the second excitation",
        "between the second and the third excitation",
        "above the third excitation",
    ]
    # Undamped ends by hand (damping 200 N s/m moves them by about (c w)^2 / (2 F/x), under 2e-3 relative).
    ends = [(500 * (2 * math.pi * f) ** 2, 5e5 * (f / 10) ** 2) for f in (10.0, 20.0, 40.0)]
    assert outcome.branches[1].stiffness_interval[0] == pytest.approx(ends[0][0] + ends[0][1], rel=2e-3)
    assert outcome.branches[1].stiffness_interval[1] == pytest.approx(ends[1][0] - ends[1][1], rel=2e-3)


def test_an_island_narrower_than_any_grid():
    m, f1, f2 = 200.0, 12.0, 5.0
    soft_side = m * (2 * math.pi * f1) ** 2 * 0.3 / 1.3  # undamped T = 0.3 at f1
    need = soft_side * (1 - 1e-9) - m * (2 * math.pi * f2) ** 2
    limits = (
        transmissibility(0.3, f1),
        ResponseLimit("X", "displacement", 1e-4, f2, f2, "force", need * 1e-4),
    )
    problem = OneAxisProblem(m, "viscous", (2e5, 1e8), (0.0, 0.0), Objective("softest"), limits)
    outcome = solve_one_axis(problem)
    assert len(outcome.branches) == 1
    low, high = outcome.branches[0].stiffness_interval
    assert outcome.branches[0].name == "between the first and the second excitation"
    assert (high - low) / high == pytest.approx(1e-9, rel=1e-3)
    assert set(outcome.best.tight) >= {"T", "X"}


def test_a_range_forbids_what_its_two_ends_allow():
    # Lines at 10 and 12 Hz let a natural frequency of 11 Hz through; the range does not.
    lines = tuple(ResponseLimit(f"{f}", "acceleration", 5.3, f, f, "force", 800.0) for f in (10.0, 12.0))
    whole = (ResponseLimit("10 to 12 Hz", "acceleration", 5.3, 10.0, 12.0, "force", 800.0),)
    problem = OneAxisProblem(1000.0, "viscous", (1e5, 1e8), (100.0, 200.0), Objective("softest"), lines)
    names = [b.name for b in solve_one_axis(problem).branches]
    assert "between the first and the second excitation" in names
    names = [b.name for b in solve_one_axis(replace(problem, limits=whole)).branches]
    assert names == ["below the first excitation", "above the first excitation"]


def check_against_brute_force(seed: int, ballast: str = "none") -> int:
    problem = instances.random_problem(seed, ballast=ballast)
    outcome = solve_one_axis(problem)
    assert outcome.decided
    for branch in outcome.branches:
        d = branch.best
        assert instances.meets(problem, np.array([d.stiffness]), np.array([d.damping]), d.mass, points=4000)[
            0
        ]
    k = np.geomspace(*problem.stiffness_bounds, 160)[:, None]
    d = np.geomspace(*problem.damping_bounds, 50)[None, :]
    good = instances.meets(problem, k, d, problem.mass, points=30, slack=0)
    inside = np.zeros(good.shape, dtype=bool)
    for branch in outcome.branches:
        low, high = branch.stiffness_interval
        inside |= (k >= low * (1 - 1e-9)) & (k <= high * (1 + 1e-9))
    best = outcome.best.objective if outcome.branches else 0.0
    for i, j in np.argwhere(good):
        value = grid_value(problem, float(k[i, 0]), float(d[0, j]))
        slack = outcome.gap + 1e-9 * abs(best)
        better = value > best + slack if problem.objective.goal == "stiffest" else value < best - slack
        if not inside[i, j] or not outcome.branches or better:
            # Thirty points are a relaxation of the range; only a fine look may accuse the solver.
            fine = instances.meets(problem, k[i, 0], d[0, j], problem.mass, points=20000, slack=0)
            assert not fine, (seed, k[i, 0], d[0, j])
    return len(outcome.branches)


def grid_value(problem: OneAxisProblem, k: float, d: float) -> float:
    o = problem.objective
    if o.goal in ("softest", "stiffest"):
        return k
    if o.goal == "least damping":
        return d
    if o.goal == "least transmissibility":
        unit = transmissibility(1.0, o.frequency)
        return float(instances.response(unit, problem.damping_kind, k, d, problem.mass, o.frequency))
    return o.stiffness_weight * k + o.damping_weight * d + o.damping_squared_weight * d**2


def test_random_problems_against_a_grid():
    counts = [check_against_brute_force(seed) for seed in range(20)]
    assert sum(c > 1 for c in counts) >= 3


@pytest.mark.nightly
def test_many_random_problems_against_a_grid():
    for seed in range(1000, 1500):
        check_against_brute_force(seed)


@settings(deadline=None, max_examples=40)
@given(st.integers(0, 10_000), st.floats(1.0, 3.0), st.integers(0, 4))
def test_relaxing_a_limit_never_worsens(seed, factor, which):
    problem = instances.random_problem(seed)
    i = which % len(problem.limits)
    limits = tuple(replace(x, limit=x.limit * factor) if j == i else x for j, x in enumerate(problem.limits))
    tight, loose = solve_one_axis(problem), solve_one_axis(replace(problem, limits=limits))
    if tight.branches:
        sign = -1 if problem.objective.goal == "stiffest" else 1
        assert sign * loose.best.objective <= sign * tight.best.objective + 1e-8 * abs(tight.best.objective)


@settings(deadline=None, max_examples=25)
@given(st.integers(0, 10_000), st.floats(0.01, 100.0))
def test_mass_stiffness_damping_and_force_scale_together(seed, a):
    # P8: (m, k, c, F) x a leaves every motion and transmissibility as it was.
    p = replace(instances.random_problem(seed), objective=Objective("softest"))
    viscous = a if p.damping_kind == "viscous" else 1.0
    limits = tuple(
        replace(
            x,
            amplitude=x.amplitude * (a if x.source in ("force", "unbalance") else 1.0),
            limit=x.limit * (a if x.quantity == "transmitted force" else 1.0),
        )
        for x in p.limits
    )
    q = replace(
        p,
        mass=p.mass * a,
        stiffness_bounds=(p.stiffness_bounds[0] * a, p.stiffness_bounds[1] * a),
        damping_bounds=(p.damping_bounds[0] * viscous, p.damping_bounds[1] * viscous),
        limits=limits[::-1],
    )
    one, two = solve_one_axis(p), solve_one_axis(q)
    assert [b.name for b in one.branches] == [b.name for b in two.branches]
    for x, y in zip(one.branches, two.branches, strict=True):
        assert y.best.stiffness == pytest.approx(a * x.best.stiffness, rel=1e-8)


def test_a_line_inside_its_own_range_changes_nothing():
    for seed in range(15):
        problem = instances.random_problem(seed)
        wide = [x for x in problem.limits if x.upper_frequency > x.lower_frequency]
        if not wide:
            continue
        middle = 0.37 * wide[0].lower_frequency + 0.63 * wide[0].upper_frequency
        extra = replace(wide[0], name="line", lower_frequency=middle, upper_frequency=middle)
        a, b = solve_one_axis(problem), solve_one_axis(replace(problem, limits=(*problem.limits, extra)))
        assert len(a.branches) == len(b.branches)
        if a.branches:
            assert b.best.objective == pytest.approx(a.best.objective, rel=1e-8)


def test_every_branch_is_connected_and_its_gaps_are_empty():
    for seed in range(12):
        problem = instances.random_problem(seed)
        branches = sorted(solve_one_axis(problem).branches, key=lambda b: b.stiffness_interval)
        for branch in branches:
            low, high = branch.stiffness_interval
            k = np.linspace(low, high, 23)[1:-1]
            fixed = [replace(problem, stiffness_bounds=(x, x)) for x in k]
            assert all(solve_one_axis(p).branches for p in fixed)
        for left, right in itertools.pairwise(branches):
            middle = 0.5 * (left.stiffness_interval[1] + right.stiffness_interval[0])
            assert not solve_one_axis(replace(problem, stiffness_bounds=(middle, middle))).branches


def test_separation_and_its_greatest_value():
    # Lines at 10 and 40 Hz: f/10 - 1 = 1 - f/40 at f = 2/(1/10 + 1/40) = 16 Hz, separation 0.6.
    problem = OneAxisProblem(
        100.0,
        "viscous",
        (100 * (2 * math.pi * 9) ** 2, 100 * (2 * math.pi * 45) ** 2),
        (0.0, 10.0),
        Objective("greatest separation"),
        excitation_intervals=((10.0, 10.0), (40.0, 40.0)),
        separation=0.05,
    )
    outcome = solve_one_axis(problem)
    assert outcome.best.objective == pytest.approx(0.6, rel=1e-9)
    assert outcome.best.natural_frequency == pytest.approx(16.0, rel=1e-9)
    assert [b.name for b in outcome.branches] == [
        "between the first and the second excitation",
        "above the second excitation",
        "below the first excitation",
    ]


def test_sag_window_by_hand():
    # 100 kg, sag at most 5 mm, dynamic-to-static 1.25: k >= 100 * 9.80665 * 1.25 / 0.005 = 245166.25.
    problem = OneAxisProblem(
        100.0, "viscous", (1e3, 1e7), (1.0, 1e3), Objective("softest"), sag=SagLimit(0.0, 0.005, 1.25)
    )
    outcome = solve_one_axis(problem)
    assert outcome.best.stiffness == pytest.approx(245166.25, rel=1e-9)
    assert outcome.best.tight[-1] == "greatest sag"


def test_least_ballast_by_hand():
    # Undamped, k fixed: F/(m w^2 - k) <= x gives m = (F/x + k)/w^2 on the soft side.
    k, w, force, x = 2e5, 2 * math.pi * 10, 600.0, 1e-3
    limit = ResponseLimit("X", "displacement", x, 10.0, 10.0, "force", force)
    problem = OneAxisProblem(
        100.0,
        "viscous",
        (k, k),
        (0.0, 0.0),
        Objective("least added mass"),
        (limit,),
        ballast=Ballast(0.0, 400.0),
    )
    outcome = solve_one_axis(problem)
    assert outcome.best.ballast == pytest.approx((force / x + k) / w**2 - 100.0, rel=1e-9)
    assert outcome.decided and outcome.gap <= 1e-6 * outcome.best.ballast
    stepped = solve_one_axis(replace(problem, ballast=Ballast(0.0, 400.0, 5.0)))
    assert stepped.best.ballast == math.ceil(((force / x + k) / w**2 - 100.0) / 5.0) * 5.0


def test_continuous_ballast_is_never_beaten_by_any_mass():
    for seed in (3, 8):
        problem = instances.random_problem(seed, ballast="continuous")
        outcome = solve_one_axis(problem)
        sign = -1 if problem.objective.goal == "stiffest" else 1
        for added in np.linspace(problem.ballast.least, problem.ballast.most, 25):
            fixed = solve_one_axis(replace(problem, ballast=Ballast(float(added), float(added))))
            if fixed.branches:
                assert outcome.branches
                slack = outcome.gap + 1e-8 * abs(outcome.best.objective)
                assert sign * outcome.best.objective <= sign * fixed.best.objective + slack


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"stiffness_bounds": (2.0, 1.0)}, "stiffness: bounds"),
        ({"damping_bounds": (0.0, math.inf)}, "damping: bounds"),
        ({"mass": 0.0}, "mass must be positive"),
        ({"separation": 0.2}, "no excitation interval"),
        ({"objective": Objective("least added mass")}, "no ballast is allowed"),
    ],
)
def test_bad_statements_are_refused_in_plain_words(change, words):
    problem = OneAxisProblem(1.0, "viscous", (1.0, 2.0), (0.0, 1.0), Objective("softest"))
    with pytest.raises(SizingError, match=words):
        replace(problem, **change)


def test_infeasible_is_an_answer_and_best_says_so():
    problem = undamped(30.0, (transmissibility(0.1, 10.0),), top=1e9)
    outcome = solve_one_axis(replace(problem, stiffness_bounds=(1e6, 1e9)))
    assert outcome.branches == ()
    with pytest.raises(SizingError, match="no stiffness, damping and ballast"):
        _ = outcome.best
