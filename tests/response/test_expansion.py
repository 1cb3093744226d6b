"""Responses by poles against numpy's own solution of the same matrices, and where they are left alone."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from detune.problem.build import build
from detune.response.assemble import Dynamic, dynamic_matrices
from detune.response.designs import all_designs
from detune.response.expansion import expansion_of
from response import machines


def batch(seed: int, viscous: bool) -> Dynamic:
    brief, mounts = machines.random_machine(seed, viscous=viscous)
    problem = build(brief, {"list": machines.catalog(*mounts)})
    return dynamic_matrices(problem.model, all_designs(problem.model, 0, 4))


def solved(dynamic: Dynamic, omega: np.ndarray, load: np.ndarray) -> np.ndarray:
    """K + j H + j w C - w^2 M, solved by numpy."""
    w = omega[..., None, None]
    matrix = (dynamic.stiffness + 1j * dynamic.hysteretic)[:, None] - w**2 * dynamic.mass[:, None]
    return np.linalg.solve(matrix + 1j * w * dynamic.viscous[:, None], load[..., None])[..., 0]


@pytest.mark.parametrize("viscous", [False, True])
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_the_solution_of_the_matrices(seed: int, viscous: bool) -> None:
    dynamic = batch(seed, viscous)
    n = dynamic.mass.shape[-1]
    random = np.random.default_rng(seed)
    omega = np.sort(random.uniform(5.0, 2000.0, (4, 50)), axis=1)
    load = random.normal(size=(4, 50, n)) + 1j * random.normal(size=(4, 50, n))
    found, holds = expansion_of(dynamic)
    assert np.all(holds)
    expected = solved(dynamic, omega, load)
    size = np.abs(expected).max(axis=-1, keepdims=True)
    assert np.max(np.abs(found.response(omega, load) - expected) / size) < 1e-9
    half = found.take(np.array([1, 3]))
    assert np.allclose(half.response(omega[1::2], load[1::2]), found.response(omega, load)[1::2], rtol=1e-12)


def plain(stiffness: list[float], viscous: list[float], hysteretic: list[float]) -> Dynamic:
    """One design of unit masses, springs and dashpots to the ground."""
    dynamic = batch(1, True).take(np.array([0]))
    matrices = [np.diag(values)[None] for values in (stiffness, viscous, hysteretic)]
    k, c, h = (np.asarray(matrix, dtype=float) for matrix in matrices)
    return replace(dynamic, mass=np.eye(len(stiffness))[None], stiffness=k, viscous=c, hysteretic=h)


def test_equal_poles_of_a_symmetric_machine() -> None:
    omega, load = np.array([[7.0, 10.0, 12.0]]), np.ones((1, 3, 3), dtype=complex)
    for c, h in (([0.5, 0.5, 0.1], [0.0] * 3), ([0.0] * 3, [5.0, 5.0, 3.0])):
        dynamic = plain([100.0, 100.0, 144.0], c, h)
        found, holds = expansion_of(dynamic)
        assert holds.tolist() == [True]
        assert np.allclose(found.response(omega, load), solved(dynamic, omega, load), rtol=1e-10)


def test_what_no_expansion_holds_for() -> None:
    # An undamped pole can be met by a frequency.
    assert expansion_of(plain([100.0, 400.0], [0.0, 0.0], [0.0, 4.0]))[1].tolist() == [False]
    assert expansion_of(plain([100.0, 400.0], [0.0, 1.0], [0.0, 0.0]))[1].tolist() == [False]


@pytest.mark.parametrize("near", [0.0, 1e-12, 1e-6])
def test_critical_damping_is_right_or_left_alone(near: float) -> None:
    # It has one vector for two poles: what the residual lets through is as good as a solution.
    dynamic = plain([100.0, 400.0], [20.0 * (1.0 + near), 1.0], [0.0, 0.0])
    omega, load = np.array([[1.0, 10.0, 21.0]]), np.ones((1, 3, 2), dtype=complex)
    found, holds = expansion_of(dynamic)
    if holds[0]:
        assert np.allclose(found.response(omega, load), solved(dynamic, omega, load), rtol=1e-6)
