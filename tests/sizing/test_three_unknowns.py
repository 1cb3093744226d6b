"""Stiffness, damping and ballast at once: the exact method against dense grids judged independently, and by hand.

The grids are judged by `dense_judge`, with nothing of the program in it. A grid can only lie above the true best, so
the exact answer may not be worse than any point of it and must itself be found good by the judge; on problems as
smooth as these the best of the grid comes near to it. Slivers and islands no grid would find are worked out by hand.
"""

from __future__ import annotations

import importlib.util
import math
import pathlib
from dataclasses import replace

import numpy as np
import pytest

from detune.sizing.one_axis import solve_one_axis
from detune.sizing.statement import Ballast, Objective, OneAxisProblem, ResponseLimit, SagLimit

_spec = importlib.util.spec_from_file_location(
    "dense_judge", pathlib.Path(__file__).with_name("dense_judge.py")
)
assert _spec is not None and _spec.loader is not None
judge = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(judge)

G = 9.80665
TWO_PI = 2.0 * math.pi


def ratio(limit: float, low: float, high: float | None = None, name: str = "T") -> ResponseLimit:
    return ResponseLimit(name, "transmissibility", limit, low, high or low)


def forced(quantity: str, limit: float, low: float, high: float, force: float, name: str) -> ResponseLimit:
    return ResponseLimit(name, quantity, limit, low, high, "force", force)


BASIC = OneAxisProblem(
    100.0, "viscous", (5e4, 2e7), (20.0, 6000.0),
    Objective("weighted sum", stiffness_weight=1e-4, damping_weight=0.02, mass_weight=1.0),
    (ratio(0.35, 24.0, 30.0), forced("displacement", 4e-4, 2.0, 30.0, 100.0, "X")),
    ballast=Ballast(0.0, 120.0),
)  # fmt: skip
STEPS = Ballast(0.0, 120.0, 30.0)
FEW = Ballast(0.0, 60.0, 60.0)
CASES = {
    "a range that holds the resonance": replace(BASIC, ballast=FEW),
    "loss factor": replace(
        BASIC, damping_kind="loss factor", damping_bounds=(0.01, 0.9), ballast=STEPS,
        objective=Objective("weighted sum", stiffness_weight=1e-4, damping_weight=40.0, mass_weight=1.0),
    ),
    "undamped lines": replace(
        BASIC, damping_bounds=(0.0, 0.0), ballast=STEPS, objective=Objective("stiffest"),
        limits=(ratio(0.35, 24.0, 30.0), forced("displacement", 4e-4, 3.0, 3.0, 50.0, "X")),
    ),
    "least damping": replace(BASIC, objective=Objective("least damping"), ballast=STEPS),
    "least ballast": replace(
        BASIC, objective=Objective("least added mass"),
        limits=(*BASIC.limits, forced("acceleration", 7.5, 24.0, 30.0, 900.0, "A")),
    ),
    "damping known": replace(BASIC, damping_bounds=(4600.0, 4600.0), ballast=STEPS),
    "stiffness known": replace(BASIC, stiffness_bounds=(3e5, 3e5), ballast=STEPS),
    "sag both sides": replace(BASIC, sag=SagLimit(0.0018, 0.0035, 1.2), ballast=FEW),
    "several excitations": replace(
        BASIC, limits=BASIC.limits[1:], objective=Objective("stiffest"), separation=0.15, ballast=STEPS,
        excitation_intervals=((6.0, 6.5), (12.0, 12.0), (24.0, 30.0)), stiffness_bounds=(5e4, 3e6),
    ),
    "moving floor": replace(
        BASIC, ballast=STEPS,
        limits=(
            ResponseLimit("a", "acceleration", 0.9, 5.0, 60.0, "base displacement", 2e-5),
            ResponseLimit("z", "deflection", 6e-5, 2.0, 60.0, "base displacement", 2e-5),
        ),
    ),
}  # fmt: skip


def grid(problem: OneAxisProblem, stiff: int = 60, damp: int = 28, heavy: int = 9) -> tuple[np.ndarray, ...]:
    """Stiffness, damping and mass (D,) of a grid over all three bounds."""
    low, high = problem.damping_bounds
    d = np.linspace(low, high, damp if high > low else 1)
    k = np.geomspace(
        *problem.stiffness_bounds, stiff if problem.stiffness_bounds[1] > problem.stiffness_bounds[0] else 1
    )
    ballast = problem.ballast or Ballast(0.0, 0.0)
    added = np.array(ballast.values()) if ballast.step else np.linspace(ballast.least, ballast.most, heavy)
    return tuple(x.ravel() for x in np.meshgrid(k, d, problem.mass + added, indexing="ij"))


@pytest.mark.parametrize("name", CASES)
def test_no_point_of_a_dense_grid_is_better(name):
    problem = CASES[name]
    outcome = solve_one_axis(problem)
    assert outcome.branches, name
    sign = -1.0 if problem.objective.goal == "stiffest" else 1.0
    for branch in outcome.branches:
        best = branch.best
        assert judge.meets(problem, best.stiffness, best.damping, best.mass, slack=1e-8)[0], (
            name,
            branch.name,
        )
    k, d, m = grid(problem)
    good = judge.meets(problem, k, d, m, slack=-1e-9)
    assert good.any() and not good.all()
    value = np.broadcast_to(judge.objective(problem, k, d, m), k.shape)
    best = sign * outcome.best.objective
    size = max(abs(best), 1e-9)
    assert value[good].min() >= best - outcome.gap - 1e-8 * size
    # The grid is a fine one: its best stands within a step of the exact answer, which is no fluke then.
    spread = np.ptp(value)
    assert value[good].min() - best <= 0.06 * spread + 1e-9
    if problem.ballast.step:
        for added in problem.ballast.values():
            here = good & (np.abs(m - problem.mass - added) < 1e-9)
            known = [b.stiffness_interval for b in outcome.branches if abs(b.best.ballast - added) < 1e-9]
            for each in k[here]:
                assert any(low * (1 - 1e-9) <= each <= high * (1 + 1e-9) for low, high in known)


def test_several_excitations_leave_four_named_gaps():
    """Natural frequencies allowed by 15 %: to 5.1, 7.475 to 10.2, 13.8 to 20.4, from 34.5 Hz on."""
    problem = replace(
        CASES["several excitations"], limits=(), ballast=None, stiffness_bounds=(100 * (TWO_PI * 2) ** 2, 1e8),
        objective=Objective("softest"),
    )  # fmt: skip
    found = {b.name: b.stiffness_interval for b in solve_one_axis(problem).branches}
    hertz = {name: [math.sqrt(k / 100.0) / TWO_PI for k in ends] for name, ends in found.items()}
    expected = {
        "below the first excitation": (2.0, 5.1),
        "between the first and the second excitation": (7.475, 10.2),
        "between the second and the third excitation": (13.8, 20.4),
        "above the third excitation": (34.5, math.sqrt(1e8 / 100.0) / TWO_PI),
    }
    assert set(hertz) == set(expected)
    for name, ends in expected.items():
        assert hertz[name] == pytest.approx(ends, rel=1e-9)


@pytest.mark.parametrize("width", [1e-3, 1e-6, 1e-8])
def test_a_sliver_across_all_masses(width):
    """Undamped T <= 0.3 at 20 Hz: k/m <= w^2 .3/1.3. Sag with the width to spare: k/m >= g/sag. Both go with k/m alone.

    The stiffest has the greatest mass: k = (m + b) w^2 .3/1.3; the softest the least: k = m (1 - width) of it.
    """
    top = (TWO_PI * 20.0) ** 2 * 0.3 / 1.3
    problem = OneAxisProblem(
        80.0, "viscous", (1e4, 1e7), (0.0, 0.0), Objective("stiffest"), (ratio(0.3, 20.0),),
        sag=SagLimit(0.0, G / (top * (1.0 - width)), 1.0), ballast=Ballast(0.0, 50.0),
    )  # fmt: skip
    stiffest = solve_one_axis(problem)
    assert stiffest.best.stiffness == pytest.approx(130.0 * top, rel=1e-7)
    softest = solve_one_axis(replace(problem, objective=Objective("softest")))
    assert softest.best.stiffness == pytest.approx(80.0 * top * (1.0 - width), rel=1e-7)
    # A little less than nothing to spare: no design.
    none = replace(problem, sag=SagLimit(0.0, G / (top * (1.0 + width)), 1.0))
    assert solve_one_axis(none).branches == ()


@pytest.mark.parametrize("width", [1e-2, 1e-5, 1e-7])
def test_an_island_at_the_end_of_the_ballast(width):
    """T <= 0.3 at 20 Hz wants k <= m t; 3 mm under F at 5 Hz below resonance wants k >= m w^2 + F/x (undamped).

    Both at once: m >= (F/x)/(t - w^2). The greatest ballast is chosen to lie a share `width` above that.
    """
    t, w2 = (TWO_PI * 20.0) ** 2 * 0.3 / 1.3, (TWO_PI * 5.0) ** 2
    need = 120.0
    force = 3e-3 * need * (t - w2)
    problem = OneAxisProblem(
        80.0, "viscous", (1e4, 1e7), (0.0, 0.0), Objective("least added mass"),
        (ratio(0.3, 20.0), forced("displacement", 3e-3, 5.0, 5.0, force, "X")),
        ballast=Ballast(0.0, need * (1.0 + width) - 80.0),
    )  # fmt: skip
    outcome = solve_one_axis(problem)
    assert [b.name for b in outcome.branches] == ["between the first and the second excitation"]
    assert outcome.best.ballast == pytest.approx(need - 80.0, rel=1e-6 + 2.0 * width * 1e-3)
    assert outcome.best.stiffness == pytest.approx(need * t, rel=1e-6 + 2.0 * width)
    short = replace(problem, ballast=Ballast(0.0, need * (1.0 - width) - 80.0))
    assert solve_one_axis(short).branches == ()


def test_limits_at_equality_leave_the_one_design():
    """A design of 3e5 N/m, 900 N s/m and 100 kg, and limits it just meets (to 1e-9) at a line and over a range."""
    k, c, m = np.array([3e5]), np.array([900.0]), np.array([100.0])
    raw = (ratio(1.0, 18.0), ratio(1.0, 4.0, 14.0, "peak"), forced("displacement", 1.0, 4.0, 4.0, 70.0, "X"))
    limits = tuple(replace(x, limit=float(judge.worst(x, "viscous", k, c, m)[0]) * (1.0 + 1e-9)) for x in raw)
    problem = OneAxisProblem(100.0, "viscous", (1e4, 1e7), (1.0, 1e4), Objective("softest"), limits)
    near = [
        b
        for b in solve_one_axis(problem).branches
        if b.stiffness_interval[0] <= 3e5 <= b.stiffness_interval[1]
    ]
    assert len(near) == 1
    # With damping and stiffness bound to the design nothing else is left, and it is still found.
    tied = replace(problem, stiffness_bounds=(3e5, 3e5), damping_bounds=(900.0, 900.0))
    (only,) = solve_one_axis(tied).branches
    assert (only.best.stiffness, only.best.damping) == (3e5, 900.0)


def drawn(seed: int) -> OneAxisProblem:
    """A problem with ballast in steps round two reference designs, which both meet it."""
    rng = np.random.default_rng(seed)
    mass = float(np.exp(rng.uniform(np.log(5.0), np.log(3000.0))))
    middle = (TWO_PI * float(rng.uniform(4.0, 30.0))) ** 2 * mass
    kind = "viscous" if rng.random() < 0.5 else "loss factor"
    unit = 2.0 * math.sqrt(middle * mass) if kind == "viscous" else 2.0
    low, high = [(0.002, 0.05), (0.02, 0.5), (0.2, 0.49), (0.05, 0.05)][int(rng.integers(4))]
    bounds = (low * unit, high * unit)
    stiffness = (middle / float(rng.uniform(3, 60)), middle * float(rng.uniform(3, 60)))
    ballast = Ballast(0.0, 0.6 * mass, 0.2 * mass)
    k = np.exp(rng.uniform(*np.log(stiffness), 2))
    d = rng.uniform(*bounds, 2)
    m = mass + rng.choice(ballast.values(), 2)
    room = float([1e-9, 1e-6, 1e-3, 0.05, 0.5][int(rng.integers(5))])
    limits = []
    for number in range(int(rng.integers(2, 6))):
        first = float(np.exp(rng.uniform(np.log(2.0), np.log(70.0))))
        last = first * (1.0 if rng.random() < 0.4 else float(rng.uniform(1.01, 4.0)))
        quantity = str(rng.choice(["displacement", "velocity", "acceleration", "transmitted force", "transmissibility",
                                   "deflection"]))  # fmt: skip
        source = "unit" if quantity == "transmissibility" else str(
            rng.choice(["force", "unbalance"] if quantity == "transmitted force" else
                       ["force", "unbalance", "base displacement", "base velocity", "base acceleration"])
        )  # fmt: skip
        raw = ResponseLimit(f"limit {number}", quantity, 1.0, first, last, source, 1.0)
        limits.append(replace(raw, limit=float(judge.worst(raw, kind, k, d, m).max()) * (1.0 + room)))
    goals = ("softest", "stiffest", "least damping", "least added mass")
    return OneAxisProblem(
        mass, kind, stiffness, bounds, Objective(goals[seed % 4]), tuple(limits), ballast=ballast
    )  # fmt: skip


def check(seed: int) -> None:
    problem = drawn(seed)
    outcome = solve_one_axis(problem)
    sign = -1.0 if problem.objective.goal == "stiffest" else 1.0
    assert outcome.branches, seed
    for branch in outcome.branches:
        best = branch.best
        assert judge.meets(problem, best.stiffness, best.damping, best.mass, slack=2e-8)[0], (
            seed,
            branch.name,
        )
    k, d, m = grid(problem, 40, 12)
    good = judge.meets(problem, k, d, m, slack=-1e-8)
    value = np.broadcast_to(judge.objective(problem, k, d, m), k.shape)
    best = sign * outcome.best.objective
    if good.any():
        assert value[good].min() >= best - outcome.gap - 1e-7 * max(abs(best), 1e-9), seed
    for stiff, heavy in zip(k[good], m[good], strict=True):
        here = [b.stiffness_interval for b in outcome.branches if abs(b.best.mass - heavy) < 1e-6 * heavy]
        assert any(low * (1 - 1e-7) <= stiff <= high * (1 + 1e-7) for low, high in here), (seed, stiff, heavy)


def test_drawn_problems_against_their_grids():
    for seed in range(12):
        check(seed)


@pytest.mark.nightly
def test_many_drawn_problems_against_their_grids():
    for seed in range(100, 400):
        check(seed)
