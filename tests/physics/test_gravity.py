"""Gravity's geometric stiffness against the exact potential energy and textbook critical heights."""

import mpmath
import numpy as np
import pytest
import sympy

from detune.physics.gravity import (
    critical_height,
    geometric_stiffness,
    moment_out_of_balance,
    pendulum_stiffness,
)


def rotation(t: list[mpmath.mpf]) -> mpmath.matrix:
    """Rodrigues' formula for a rotation vector, exact."""
    angle = mpmath.sqrt(sum(x * x for x in t))
    k = mpmath.matrix([[0, -t[2], t[1]], [t[2], 0, -t[0]], [-t[1], t[0], 0]])
    if angle == 0:
        return mpmath.eye(3)
    return mpmath.eye(3) + k * (mpmath.sin(angle) / angle) + k * k * ((1 - mpmath.cos(angle)) / angle**2)


def test_against_the_exact_energy_of_inclined_and_unequal_mounts() -> None:
    # Three springs with full stiffness matrices at three heights; the static forces are chosen, the free lengths
    # follow. Hessian of the exact energy of springs and weight over (u, t), by differences in 60 digits, against
    # the sum of B^T K B and the geometric term.
    arms = np.array([[0.6, -0.4, -0.5], [0.6, 0.5, -0.3], [-0.9, 0.1, -0.8]])
    rng = np.random.default_rng(4)
    roots = rng.normal(size=(3, 3, 3))
    stiffness = np.einsum("sij,skj->sik", roots, roots) + 2.0 * np.eye(3)
    # Static forces that balance a weight of 10: lateral parts cancel, moments about the mass centre vanish.
    basis = np.vstack([np.tile(np.eye(3), (1, 3)), np.hstack([_skew(r) for r in arms])])
    particular = np.linalg.lstsq(basis, np.array([0, 0, 10.0, 0, 0, 0]), rcond=None)[0]
    forces = (particular + np.linalg.svd(basis)[2][6:].T @ np.array([0.7, -1.1, 0.4])).reshape(3, 3)
    assert moment_out_of_balance(arms, forces) == pytest.approx(np.zeros(3), abs=1e-12)
    free = [mpmath.matrix(np.linalg.solve(k, f)) for k, f in zip(stiffness, forces, strict=True)]

    def energy(q: list[mpmath.mpf]) -> mpmath.mpf:
        turn = rotation(q[3:]) - mpmath.eye(3)
        total = 10 * q[2]
        for r, k, start in zip(arms, stiffness, free, strict=True):
            moved = mpmath.matrix(q[:3]) + turn * mpmath.matrix(r) - start
            total += (moved.T * mpmath.matrix(k) * moved)[0] / 2
        return total

    with mpmath.workdps(60):
        h = mpmath.mpf(10) ** -15
        unit = [[h if i == j else mpmath.mpf(0) for i in range(6)] for j in range(6)]

        def at(*steps: tuple[int, int]) -> mpmath.mpf:
            return energy([sum(sign * unit[j][i] for j, sign in steps) for i in range(6)])

        slope = [float((at((i, 1)) - at((i, -1))) / (2 * h)) for i in range(6)]
        hessian = np.zeros((6, 6))
        for i in range(6):
            for j in range(6):
                corners = (
                    at((i, 1), (j, 1)) - at((i, 1), (j, -1)) - at((i, -1), (j, 1)) + at((i, -1), (j, -1))
                )
                hessian[i, j] = float(corners / (4 * h * h))
    assert slope == pytest.approx([0.0] * 6, abs=1e-12)
    attach = [np.hstack([np.eye(3), -_skew(r)]) for r in arms]
    elastic = sum(b.T @ k @ b for b, k in zip(attach, stiffness, strict=True))
    assert not np.allclose(elastic, hessian, atol=0.1)
    elastic[3:, 3:] += geometric_stiffness(arms, forces)
    assert elastic == pytest.approx(hessian, abs=1e-9)


def _skew(r: np.ndarray) -> np.ndarray:
    return np.array([[0, -r[2], r[1]], [r[2], 0, -r[0]], [-r[1], r[0], 0]])


def test_inverted_pendulum_on_a_torsion_spring() -> None:
    # Exact energy 1/2 k t^2 + m g h cos t: stiffness k - m g h, critical height k/(m g) (any text on stability).
    k, weight, h, t = sympy.symbols("k W h t", positive=True)
    curvature = sympy.diff(k * t**2 / 2 + weight * h * sympy.cos(t), t, 2).subs(t, 0)
    assert sympy.simplify(curvature - (k - weight * h)) == 0
    assert pendulum_stiffness(100.0, 0.5)[0, 0] == pytest.approx(-50.0)
    assert pendulum_stiffness(100.0, -0.5)[1, 1] == pytest.approx(50.0)
    assert pendulum_stiffness(100.0, 0.5)[2, 2] == 0.0


def test_mounts_in_one_plane_are_a_pendulum() -> None:
    # Four mounts 0.8 m below the mass centre carry 1000 N: -800 N m/rad on roll and pitch, none on yaw.
    arms = np.array([[x, y, -0.8] for x in (-0.5, 0.7) for y in (-0.3, 0.3)])
    forces = np.zeros((4, 3))
    forces[:, 2] = np.array([7.0, 7.0, 5.0, 5.0]) * 1000.0 / 24.0
    assert moment_out_of_balance(arms, forces) == pytest.approx(np.zeros(3), abs=1e-10)
    assert geometric_stiffness(arms, forces) == pytest.approx(pendulum_stiffness(1000.0, 0.8), abs=1e-10)


def test_the_reference_point_does_not_matter_when_the_weight_joins() -> None:
    arms = np.array([[x, y, -0.8] for x in (-0.5, 0.7) for y in (-0.3, 0.3)])
    forces = np.zeros((4, 3))
    forces[:, 2] = np.array([7.0, 7.0, 5.0, 5.0]) * 1000.0 / 24.0
    shift = np.array([0.2, -0.1, 0.4])
    moved = np.vstack([arms + shift, shift])
    assert geometric_stiffness(moved, np.vstack([forces, [0, 0, -1000.0]])) == pytest.approx(
        geometric_stiffness(arms, forces), abs=1e-10
    )


def test_critical_height_of_a_machine_on_four_springs() -> None:
    # Rocking stiffness about the long axis sum k y^2 = 4 x 2e4 x 0.3^2 = 7200 N m/rad; weight 4000 N: 1.8 m.
    stiffness = np.diag([4e4, 4e4, 8e4, 4 * 2e4 * 0.09, 4 * 2e4 * 0.25, 4 * 1e4 * 0.34])
    height = critical_height(stiffness, 4000.0)
    assert height == pytest.approx(1.8)
    # At that height the stiffness is singular; below it positive.
    for share, sign in ((0.999, 1.0), (1.001, -1.0)):
        total = stiffness.copy()
        total[3:, 3:] += pendulum_stiffness(4000.0, share * height)
        assert np.sign(np.linalg.eigvalsh(total)[0]) == sign
    # In a batch: twice the weight, half the height.
    assert critical_height(np.stack([stiffness, stiffness]), [4000.0, 8000.0]) == pytest.approx([1.8, 0.9])
