"""The convex forms against exact equations on random systems: never unsafe, global where they say so."""

from __future__ import annotations

import math

import numpy as np
import pytest

from detune.sizing.convex_selection import selection_bound, soft_side_one_axis
from detune.sizing.lmi import (
    DampingFreeLimit,
    StiffnessModel,
    cheapest,
    damping_free_bound,
    greatest_separation,
)
from detune.sizing.one_axis import solve_one_axis
from detune.sizing.statement import Objective, OneAxisProblem, ResponseLimit, SizingError


def random_model(seed: int, n: int = 4, p: int = 3, ballast: int = 0) -> StiffnessModel:
    rng = np.random.default_rng(seed)
    root = rng.normal(size=(n, n))
    mass = 100 * (root @ root.T / n + np.eye(n))
    patterns = []
    for _ in range(p):
        b = rng.normal(size=(n, n))
        patterns.append(b.T @ b / n)
    extra = np.zeros((ballast, n, n))
    for j in range(ballast):
        v = rng.normal(size=n)
        extra[j] = np.outer(v, v)
    lower = 1e4 * rng.uniform(1, 3, p)
    return StiffnessModel(
        mass, np.array(patterns), np.zeros((n, n)), lower, lower * 30, extra, np.full(ballast, 40.0)
    )


@pytest.mark.parametrize("seed", range(4))
def test_greatest_separation_on_either_side_is_global(seed):
    model = random_model(seed)
    rng = np.random.default_rng(seed)
    sample = rng.uniform(model.lower, model.upper, size=(3000, 3))
    none = np.zeros(0)
    above = greatest_separation(model, 5.0, "above")
    below = greatest_separation(model, 60.0, "below")
    assert above.worth == below.worth == "global"
    assert above.value == pytest.approx(above.bound, abs=1e-6)
    assert below.value == pytest.approx(below.bound, abs=1e-6)
    exact = np.array([model.frequencies(k, none) for k in sample])
    assert above.value >= (exact[:, 0] / 5.0 - 1).max() - 1e-7
    assert below.value >= (1 - exact[:, -1] / 60.0).max() - 1e-7
    # Stiffness only raises frequencies (Rayleigh), so the two optima are the two corners.
    assert above.value == pytest.approx(model.frequencies(model.upper, none)[0] / 5.0 - 1, abs=1e-6)
    assert below.value == pytest.approx(1 - model.frequencies(model.lower, none)[-1] / 60.0, abs=1e-6)


def test_two_freedom_budget_by_hand():
    # Two masses of 10 kg each on a spring of its own: all modes above 3 Hz costs k = 10 (2 pi 3)^2 at each.
    unit = np.eye(2)
    model = StiffnessModel(
        10 * unit,
        np.array([np.diag([1.0, 0.0]), np.diag([0.0, 1.0])]),
        np.zeros((2, 2)),
        np.full(2, 1.0),
        np.full(2, 1e5),
        np.zeros((0, 2, 2)),
        np.zeros(0),
    )
    answer = cheapest(model, np.array([1.0, 2.0]), np.zeros(0), modes_above=3.0)
    need = 10 * (2 * math.pi * 3) ** 2
    assert answer.worth == "global"
    assert answer.stiffness == pytest.approx([need, need], rel=1e-5)
    assert answer.value == pytest.approx(3 * need, rel=1e-5)


def test_ballast_widens_the_soft_side_by_bisection():
    model = random_model(7, ballast=1)
    answer = greatest_separation(model, 60.0, "below")
    rng = np.random.default_rng(0)
    best = max(
        1 - model.frequencies(rng.uniform(model.lower, model.upper), rng.uniform(0, 40, 1))[-1] / 60.0
        for _ in range(2000)
    )
    assert answer.value >= best - 1e-6
    assert answer.value == pytest.approx(answer.bound, abs=1e-5)


def soft_limit(model: StiffnessModel, seed: int, slack: float) -> DampingFreeLimit:
    rng = np.random.default_rng(seed + 100)
    n = model.mass.shape[0]
    top = model.frequencies(model.lower, np.zeros(model.ballast_most.size))[-1]
    row, load = rng.normal(size=n), rng.normal(size=n) * 50 + 0j
    limit = DampingFreeLimit("x", 1.6 * top, row, load, 1.0)
    bound = damping_free_bound(model, limit, model.lower, np.zeros(model.ballast_most.size))
    return DampingFreeLimit("x", 1.6 * top, row, load, bound * slack)


def test_limits_that_hold_whatever_the_damping_are_never_unsafe():
    conservative = []
    for seed in range(8):
        model = random_model(seed)
        limit = soft_limit(model, seed, 1.3)
        # The stiffest (most expensive to leave soft) design the restriction allows.
        answer = cheapest(model, np.array([-1.0, -1.0, -1.0]), np.zeros(0), limits=(limit,))
        assert answer.worth == "safe restriction"
        assert answer.status == "solved"
        assert damping_free_bound(model, limit, answer.stiffness, answer.ballast) <= limit.limit * (1 + 1e-6)
        rng = np.random.default_rng(seed)
        worst = 0.0
        for _ in range(400):
            root = rng.normal(size=(4, 4)) * 10 ** rng.uniform(-2, 3)
            for stretch in (1.0, 1.3, 3.0):
                w = 2 * math.pi * limit.frequency * stretch
                d = model.stiffness_at(answer.stiffness) - w**2 * model.mass + 1j * w * root @ root.T
                worst = max(worst, abs(limit.row @ np.linalg.solve(d, limit.load)))
        undamped = model.stiffness_at(answer.stiffness) - (2 * math.pi * limit.frequency) ** 2 * model.mass
        worst = max(worst, abs(limit.row @ np.linalg.solve(undamped, limit.load)))
        assert worst <= limit.limit * (1 + 1e-6)
        conservative.append(worst / limit.limit)
    # How conservative: row and load are unrelated directions here, so the bound may be well above.
    assert max(conservative) > 0.2


@pytest.mark.parametrize("side", ["below", "above"])
def test_sums_and_resultants_on_either_side_hold_at_thousands_of_dampings(side):
    """Two loads that act together share one limit, and of three rows the root of the summed squares is limited.

    Checked by plain complex solves at 3000 random dampings (of any rank, viscous and loss factor) for each side.
    """
    for seed in range(4):
        model = random_model(seed)
        rng = np.random.default_rng(seed + 50)
        none = np.zeros(0)
        soft, stiff = model.frequencies(model.lower, none)[-1], model.frequencies(model.upper, none)[0]
        hertz = 1.5 * soft if side == "below" else stiff / 1.5
        rows = rng.normal(size=(3, 4))
        loads = [rng.normal(size=4) * 40 + 1j * rng.normal(size=4) * 20 for _ in range(2)]
        parts = [DampingFreeLimit("sum", hertz, rows, load, 1.0, side) for load in loads]
        at = model.lower if side == "below" else model.upper
        most = 1.4 * sum(damping_free_bound(model, part, at, none) for part in parts)
        limits = tuple(DampingFreeLimit("sum", hertz, rows, load, most, side) for load in loads)
        weights = -np.ones(3) if side == "below" else np.ones(3)
        edges = {"modes_below": hertz} if side == "below" else {"modes_above": hertz}
        answer = cheapest(model, weights, none, limits=limits, **edges)
        assert answer.status == "solved"
        assert sum(damping_free_bound(model, x, answer.stiffness, none) for x in limits) <= most * (1 + 1e-6)
        stiffness = model.stiffness_at(answer.stiffness)
        worst = 0.0
        for _ in range(750):
            root = rng.normal(size=(4, int(rng.integers(1, 5)))) * 10 ** rng.uniform(-2, 4)
            stretch = rng.uniform(1.0, 3.0) if side == "below" else rng.uniform(0.05, 1.0)
            w = 2 * math.pi * hertz * stretch
            kind = w if rng.random() < 0.5 else 1.0
            d = stiffness - w**2 * model.mass + 1j * kind * root @ root.T
            total = sum(
                float(np.sqrt((np.abs(rows @ np.linalg.solve(d, load)) ** 2).sum())) for load in loads
            )
            worst = max(worst, total)
        assert worst <= most * (1 + 1e-6)
        assert worst > 0.05 * most


def test_stiffness_that_goes_with_the_ballast():
    """Gravity takes stiffness away with every kg: the ballast that the soft side then wants, by hand for one freedom.

    m = 10 + b, k = 4e4 - 100 b, below 8 Hz: k <= (2 pi 8)^2 m = w^2 m, so b = (4e4 - 10 w^2)/(100 + w^2).
    """
    model = StiffnessModel(
        np.array([[10.0]]), np.array([[[1.0]]]), np.zeros((1, 1)), np.array([4e4]), np.array([4e4]),
        np.array([[[1.0]]]), np.array([100.0]), np.array([[[-100.0]]]),
    )  # fmt: skip
    w2 = (2 * math.pi * 8.0) ** 2
    answer = cheapest(model, np.zeros(1), np.ones(1), modes_below=8.0)
    assert answer.status == "solved"
    assert answer.ballast[0] == pytest.approx((4e4 - 10 * w2) / (100 + w2), rel=1e-6)
    assert model.frequencies(answer.stiffness, answer.ballast)[0] == pytest.approx(8.0, rel=1e-6)


def test_collocated_limit_is_exact_without_damping():
    # Drive point (row = load direction): sqrt(c A^-1 c f A^-1 f) is the undamped response itself.
    model = random_model(3)
    limit = soft_limit(model, 3, 1.0)
    row = limit.row
    drive = DampingFreeLimit("drive", limit.frequency, row, 20.0 * row + 0j, 1.0)
    bound = damping_free_bound(model, drive, model.lower, np.zeros(0))
    d = model.stiffness_at(model.lower) - (2 * math.pi * drive.frequency) ** 2 * model.mass
    assert bound == pytest.approx(abs(row @ np.linalg.solve(d, 20.0 * row)), rel=1e-10)


def test_transmissibility_cone_agrees_with_the_exact_axis():
    for seed in range(6):
        rng = np.random.default_rng(seed)
        mass, frequency, limit = (
            float(rng.uniform(50, 500)),
            float(rng.uniform(10, 40)),
            float(rng.uniform(0.05, 0.5)),
        )
        top = mass * (2 * math.pi * frequency) ** 2
        weights = (-1.0, -0.3 * math.sqrt(top / mass) / 10, 0.0)
        damping = (1e-3 * math.sqrt(top * mass), 1.0 * math.sqrt(top * mass))
        cone = soft_side_one_axis(weights, (1e-4 * top, top), damping, (mass, mass), ((frequency, limit),))
        assert (cone.status, cone.worth) == ("solved", "global")
        w = 2 * math.pi * frequency
        mount = cone.stiffness + 1j * w * cone.damping
        assert abs(mount / (mount - mass * w**2)) <= limit * (1 + 1e-6)
        exact = solve_one_axis(
            OneAxisProblem(
                mass,
                "viscous",
                (1e-4 * top, top),
                (cone.damping, cone.damping),
                Objective("stiffest"),
                (ResponseLimit("T", "transmissibility", limit, frequency, frequency),),
            )
        )
        assert exact.best.stiffness == pytest.approx(cone.stiffness, rel=1e-4)


def test_selection_bound_is_below_every_real_choice():
    rng = np.random.default_rng(5)
    mass = np.diag([20.0, 30.0])
    patterns = (np.array([[1.0, 0.2], [0.2, 0.5]]), np.array([[0.3, -0.1], [-0.1, 1.0]]))
    stiff = [np.sort(rng.uniform(1e3, 4e5, 12)) for _ in patterns]
    costs = tuple(5 + s / 1e4 + rng.uniform(0, 5, 12) for s in stiff)
    stacks = tuple(s[:, None, None] * t[None] for s, t in zip(stiff, patterns, strict=True))
    bound = selection_bound(mass, np.zeros((2, 2)), stacks, costs, None, 8.0)
    assert bound.status == "solved"
    real = [
        costs[0][i] + costs[1][j]
        for i in range(12)
        for j in range(12)
        if np.linalg.eigvalsh(np.linalg.solve(mass, stacks[0][i] + stacks[1][j]) @ np.eye(2))[0] >= 0
        and min(np.linalg.eigvals(np.linalg.solve(mass, stacks[0][i] + stacks[1][j])).real)
        >= (2 * math.pi * 8.0) ** 2
    ]
    assert real and bound.cost <= min(real)
    assert bound.cost >= 0.5 * min(real)
    assert selection_bound(mass, np.zeros((2, 2)), stacks, costs, None, 500.0).status == "infeasible"


def test_bad_models_are_refused():
    model = random_model(0)
    with pytest.raises(SizingError, match="not positive semidefinite"):
        StiffnessModel(
            model.mass,
            -model.patterns,
            model.constant,
            model.lower,
            model.upper,
            np.zeros((0, 4, 4)),
            np.zeros(0),
        )
    with pytest.raises(SizingError, match="nothing binds"):
        cheapest(model, np.ones(3), np.zeros(0))


def test_every_program_is_a_disciplined_convex_one(monkeypatch):
    """CVXPY's own grammar (DCP) accepts each form as it is solved; so each is convex by construction."""
    import cvxpy

    seen = []

    class Checked(cvxpy.Problem):
        def solve(self, *args, **options):
            seen.append((self.is_dcp(), self.is_qp() or self.is_dcp(dpp=True)))
            return super().solve(*args, **options)

    monkeypatch.setattr(cvxpy, "Problem", Checked)
    model, ballasted = random_model(2), random_model(7, ballast=1)
    greatest_separation(model, 5.0, "above")
    greatest_separation(ballasted, 60.0, "below")
    limit = soft_limit(model, 2, 1.3)
    cheapest(model, -np.ones(3), np.zeros(0), limits=(limit,))
    cheapest(ballasted, np.ones(3), np.ones(1), modes_above=3.0)
    stack = np.stack([np.eye(2) * 1e4, np.eye(2) * 4e4])
    selection_bound(10.0 * np.eye(2), np.zeros((2, 2)), (stack,), (np.array([1.0, 2.0]),), 30.0, None)
    soft_side_one_axis(
        (1.0, 0.1, 1.0), (1e3, 1e6), (1.0, 1e4), (50.0, 150.0), ((20.0, 0.4),), ((20.0, 10.0, 1e-4),)
    )
    assert len(seen) >= 10 and all(dcp and dpp for dcp, dpp in seen)
