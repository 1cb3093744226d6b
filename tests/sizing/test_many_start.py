"""Smooth sizing: gradients against complex step, textbook and exact one-axis answers, seeds, cost of gradients."""

from __future__ import annotations

import json
import math
import time

import numpy as np
import pytest

from detune.sizing.many_start import size_from_many_starts
from detune.sizing.one_axis import solve_one_axis
from detune.sizing.smooth_problem import (
    SmoothProblem,
    joined_ratios,
    natural_frequencies,
    ratios,
    responses,
    sag_ratios,
)
from detune.sizing.statement import Objective, OneAxisProblem, ResponseLimit, SizingError


def skid(seed: int = 0, groups: int = 3, frequencies: int = 15, ballast: bool = True) -> SmoothProblem:
    """A rigid body on 2 * groups stations, random but seeded: six freedoms, 3 stiffnesses a group."""
    rng = np.random.default_rng(seed)
    mass = np.diag([600.0, 600.0, 600.0, 60.0, 90.0, 110.0])
    patterns, damping = [], []
    for g in range(groups):
        for axis in range(3):
            t = np.zeros((6, 6))
            for sign in (-1, 1):
                r = np.array([sign * rng.uniform(0.4, 0.8), rng.uniform(-0.5, 0.5), -0.3])
                skew = np.array([[0, -r[2], r[1]], [r[2], 0, -r[0]], [-r[1], r[0], 0]])
                b = np.hstack([np.eye(3), -skew])[axis]
                t += np.outer(b, b)
            patterns.append(t)
            damping.append(g)
    q = 1 if ballast else 0
    place = np.hstack([np.eye(3), -np.array([[0, -0.2, 0.1], [0.2, 0, -0.3], [-0.1, 0.3, 0]])])
    extra = np.array([place.T @ place])[:q]
    f = np.linspace(12.0, 40.0, frequencies)
    w = 2 * np.pi * f
    shape = rng.normal(size=6) + 1j * rng.normal(size=6)
    loads = 0.01 * w[:, None] ** 2 * shape[None]
    rows = np.vstack([np.eye(6), rng.normal(size=(4, 6))])
    p = len(patterns)
    lower = np.concatenate([np.full(p, 3e4), np.full(groups, 0.03), np.zeros(q)])
    upper = np.concatenate([np.full(p, 3e6), np.full(groups, 0.3), np.full(q, 200.0)])
    cost = np.concatenate([np.full(p, 1e-5), np.full(groups, 30.0), np.full(q, 0.5)])
    gravity = np.zeros(6)
    gravity[2] = -600.0 * 9.80665
    return SmoothProblem(
        mass, extra, np.array(patterns), np.zeros((6, 6), complex), np.array(damping), f, loads,
        np.zeros((q, frequencies, 6), complex), rows, np.full((frequencies, 10), 2e-4), lower, upper, cost,
        np.eye(6)[2:3], np.array([0.012]), gravity, -9.80665 * np.eye(6)[2:3][:q], np.full(p, 1.2),
        np.zeros((0, 2)), 0.0,
    )  # fmt: skip


def real_form_ratios(problem: SmoothProblem, x: np.ndarray, norm: float) -> np.ndarray:
    """p-norm per frequency in purely real arithmetic (2n system), analytic in x: takes a complex step."""
    p, e = problem.patterns.shape[0], problem.groups
    k, eta, ballast = np.exp(x[:p]), np.exp(x[p : p + e]), x[p + e :]
    stiffness = problem.constant.real + sum(k[i] * problem.patterns[i] for i in range(p))
    loss = problem.constant.imag + sum(
        k[i] * eta[problem.damping_group[i]] * problem.patterns[i] for i in range(p)
    )
    mass = problem.mass + sum(b * t for b, t in zip(ballast, problem.ballast_patterns, strict=True))
    result = []
    for i, f in enumerate(problem.frequencies):
        real = stiffness - (2 * math.pi * f) ** 2 * mass
        block = np.block([[real, -loss], [loss, real]])
        load = problem.loads[i] + 0j
        top, bottom = load.real.astype(x.dtype), load.imag.astype(x.dtype)
        for b, extra in zip(ballast, problem.ballast_loads, strict=True):
            top, bottom = top + b * extra[i].real, bottom + b * extra[i].imag
        q = np.linalg.solve(block, np.concatenate([top, bottom]))
        n = mass.shape[0]
        u, v = problem.rows @ q[:n], problem.rows @ q[n:]
        a = np.sqrt(u * u + v * v) / problem.limits[i]
        biggest = a.real.max()
        result.append(biggest * ((a / biggest) ** norm).sum() ** (1 / norm))
    return np.array(result)


@pytest.mark.parametrize("seed", range(3))
def test_adjoint_gradient_against_complex_step(seed):
    problem = skid(seed)
    rng = np.random.default_rng(seed)
    loaded = rng.normal(size=(1, 15, 6)) + 1j * rng.normal(size=(1, 15, 6))
    problem = SmoothProblem(**{**problem.__dict__, "ballast_loads": loaded})
    low, high = problem.join(problem.lower), problem.join(problem.upper)
    x = low + (high - low) * rng.random(low.size)
    value, slope = joined_ratios(problem, x, 30.0)
    assert value == pytest.approx(real_form_ratios(problem, x, 30.0), rel=1e-11)
    for i in range(x.size):
        step = x.astype(complex)
        step[i] += 1e-30j
        exact = real_form_ratios(problem, step, 30.0).imag / 1e-30
        assert np.abs(slope[:, i] - exact).max() <= 1e-8 * np.abs(slope).max()


def test_static_and_modal_gradients_against_central_differences():
    problem = skid(1)
    x = problem.join(
        np.sqrt(np.maximum(problem.lower, 1.0) * problem.upper)
        * np.append(np.ones(12), 5.0)[: problem.lower.size]
    )
    for function in (sag_ratios, natural_frequencies):
        _, slope = function(problem, x)
        for i in range(x.size):
            h = np.zeros(x.size)
            h[i] = 1e-5 * max(1.0, abs(x[i]))
            numeric = (function(problem, x + h)[0] - function(problem, x - h)[0]) / (2 * h[i])
            assert slope[:, i] == pytest.approx(numeric, rel=2e-5, abs=1e-7 * np.abs(slope).max())


def test_p_norm_is_never_below_the_largest_ratio():
    problem = skid(2)
    x = problem.join(0.5 * (problem.lower + problem.upper))
    joined, _ = joined_ratios(problem, x, 120.0)
    largest = ratios(problem, x).max(axis=1)
    assert np.all(joined >= largest * (1 - 1e-12))
    assert np.all(joined <= largest * 10 ** (1 / 120) * (1 + 1e-12))


def axis(limits: list[ResponseLimit], k_bounds, eta_bounds, mass: float, cost) -> SmoothProblem:
    f = np.array([x.lower_frequency for x in limits])
    return SmoothProblem(
        np.array([[mass]]), np.zeros((0, 1, 1)), np.array([[[1.0]]]), np.zeros((1, 1), complex), np.array([0]), f,
        np.array([[x.amplitude + 0j] for x in limits]), np.zeros((0, f.size, 1), complex), np.array([[1.0]]),
        np.array([[x.limit] for x in limits]), np.array([k_bounds[0], eta_bounds[0]]),
        np.array([k_bounds[1], eta_bounds[1]]), np.array(cost), np.zeros((0, 1)), np.zeros(0), np.zeros(1),
        np.zeros((0, 1)), np.ones(1), np.zeros((0, 2)), 0.0,
    )  # fmt: skip


def test_one_freedom_reaches_the_exact_global_answer():
    limits = [ResponseLimit(f"{f}", "displacement", 1e-4, f, f, "force", 300.0) for f in (9.0, 14.0, 30.0)]
    cost = (1e-6, 20.0)
    exact = solve_one_axis(
        OneAxisProblem(
            250.0, "loss factor", (2e4, 5e7), (0.02, 0.9),
            Objective("weighted sum", stiffness_weight=cost[0], damping_weight=cost[1]), tuple(limits),
        )
    )  # fmt: skip
    found = size_from_many_starts(
        axis(limits, (2e4, 5e7), (0.02, 0.9), 250.0, cost), "least cost", starts=16, seed=1
    )
    assert found.objective == pytest.approx(exact.best.objective, rel=1e-5)
    assert found.objective >= exact.best.objective * (1 - 1e-6)
    assert "not proven global" in found.worth


def test_least_worst_response_beats_random_search_and_repeats_with_its_seed():
    problem = skid(0, groups=2, ballast=False)
    one = size_from_many_starts(problem, "least worst response", starts=4, seed=3, iterations=80)
    two = size_from_many_starts(problem, "least worst response", starts=4, seed=3, iterations=80)
    assert one.physical is not None and two.physical is not None
    assert np.array_equal(one.physical, two.physical)
    assert np.all(one.physical >= problem.lower) and np.all(one.physical <= problem.upper)
    rng = np.random.default_rng(0)
    low, high = problem.join(problem.lower), problem.join(problem.upper)
    best = math.inf
    for x in low + (high - low) * rng.random((1500, low.size)):
        if np.abs(sag_ratios(problem, x)[0]).max() <= 1:
            best = min(best, float(ratios(problem, x).max()))
    assert one.objective <= best
    assert one.spread.met >= 1 and one.spread.best == one.objective


def test_greatest_separation_of_two_masses_by_hand():
    # Two separate 10 kg masses, intervals 8-10 and 20 Hz: bounds hold both modes between the
    # intervals, where both sit at 2/(1/10 + 1/20) = 13.333 Hz with separation 1/3.
    n2 = np.array([np.diag([1.0, 0.0]), np.diag([0.0, 1.0])])
    k = 10 * (2 * math.pi * np.array([10.5, 19.0])) ** 2
    problem = SmoothProblem(
        10 * np.eye(2), np.zeros((0, 2, 2)), n2, np.zeros((2, 2), complex), np.array([0, 0]), np.array([100.0]),
        np.zeros((1, 2), complex), np.zeros((0, 1, 2), complex), np.eye(2), np.full((1, 2), 1.0),
        np.array([k[0], k[0], 0.05]), np.array([k[1], k[1], 0.06]), np.zeros(3), np.zeros((0, 2)), np.zeros(0),
        np.zeros(2), np.zeros((0, 2)), np.ones(2), np.array([[8.0, 10.0], [20.0, 20.0]]), 0.0,
    )  # fmt: skip
    found = size_from_many_starts(problem, "greatest separation", starts=6, seed=0)
    assert found.separation == pytest.approx(1 / 3, rel=1e-5)


def test_bad_input():
    with pytest.raises(SizingError, match="excitation interval"):
        size_from_many_starts(skid(0), "greatest separation")
    good = skid(0).__dict__
    with pytest.raises(SizingError, match="crossed"):
        SmoothProblem(**{**good, "lower": good["upper"] * 2})


@pytest.mark.benchmark
def test_adjoint_against_finite_differences(tmp_path):
    figures = {}
    for groups in (2, 3, 4):
        problem = skid(0, groups)
        low, high = problem.join(problem.lower), problem.join(problem.upper)
        x = low + 0.4 * (high - low)
        start = time.perf_counter()
        for _ in range(200):
            joined_ratios(problem, x, 120.0)
        adjoint = (time.perf_counter() - start) / 200
        start = time.perf_counter()
        for _ in range(20):
            for i in range(x.size + 1):
                h = x.copy()
                h[min(i, x.size - 1)] += 1e-7
                responses(problem, h)
        differences = (time.perf_counter() - start) / 20
        runs = []
        for flag in (True, False):
            start = time.perf_counter()
            out = size_from_many_starts(problem, "least worst response", starts=4, seed=1, adjoint=flag)
            runs.append((time.perf_counter() - start, out.objective))
        figures[f"{x.size} unknowns"] = {
            "gradient ratio": differences / adjoint,
            "adjoint microseconds": adjoint * 1e6,
            "whole run ratio": runs[1][0] / runs[0][0],
            "objectives": [r[1] for r in runs],
        }
    (tmp_path / "many_start.json").write_text(json.dumps(figures))
    print(json.dumps(figures))
