"""Geometric stiffness of gravity: what a machine's weight takes from its rocking stiffness.

The potential energy of a rigid body about its mass centre, with mounts that pull as their ends move apart: to
second order in the rotation t a point at arm r moves by u + t x r + t x (t x r)/2. A constant force F on the
body at r then has the second-order energy -F.(t x (t x r))/2, so that the sum over all forces but gravity
gives

    K_g = sum (F.r) I - (r F^T + F r^T)/2      on the rotations, about the mass centre.

Gravity acts at the mass centre and adds nothing itself; the mounts' static forces carry it. (About another
reference point the weight joins the sum, and as all forces balance the sum is the same: the matrix goes on
the rotations whatever point the six freedoms are taken at.) With vertical forces only, at a depth h below the
mass centre, this is -m g h on roll and pitch and nothing on yaw: the weight topples.

The mounts' stiffness matrix is the second derivative of their energy over the displacement of their upper
end, in axes that do not turn with the body. A mount's own loss of lateral stiffness under load is not in it.
"""

from __future__ import annotations

import numpy as np

from detune.physics.array_types import ArrayLike, FloatArray


def geometric_stiffness(arms: ArrayLike, forces: ArrayLike) -> FloatArray:
    """Rotational geometric stiffness (..., 3, 3) in N m/rad of one body, about its mass centre.

    arms (..., S, 3) in m from the mass centre to where static forces (..., S, 3) in N act on the body: every
    mount, tether and steady force, not the weight. Forces keep their direction when the body turns. At rest
    their moments about the mass centre balance, and only then is the result independent of how rotations are
    measured.
    """
    r, f = np.broadcast_arrays(np.asarray(arms, dtype=float), np.asarray(forces, dtype=float))
    outer = np.einsum("...si,...sj->...ij", r, f)
    trace = np.einsum("...ii->...", outer)
    return np.asarray(trace[..., None, None] * np.eye(3) - 0.5 * (outer + np.swapaxes(outer, -1, -2)))


def moment_out_of_balance(arms: ArrayLike, forces: ArrayLike) -> FloatArray:
    """Moment (..., 3) in N m of the static forces about the mass centre, which is zero at rest."""
    return np.asarray(np.cross(np.asarray(arms, dtype=float), np.asarray(forces, dtype=float)).sum(axis=-2))


def pendulum_stiffness(weight: ArrayLike, height: ArrayLike) -> FloatArray:
    """Geometric stiffness (..., 3, 3) of a machine whose mounts all stand in one plane, at height of its mass
    centre.

    -weight height on roll and pitch, 0 on yaw; weight in N, height in m above the plane (below: negative, a
    hanging machine, which gravity stiffens).
    """
    toppling = np.asarray(weight, dtype=float) * np.asarray(height, dtype=float)
    return np.asarray(-toppling[..., None, None] * np.diag([1.0, 1.0, 0.0]))


def critical_height(stiffness: ArrayLike, weight: ArrayLike) -> FloatArray:
    """Height (...) in m of the mass centre above the reference point at which the machine topples.

    stiffness (..., 6, 6): the mounts' (and the geometric stiffness of forces that do not act at the height of
    the reference point) about a reference point on the vertical through the mass centre, freedoms x, y, z and
    the three rotations; weight in N. K - h weight diag(0, 0, 0, 1, 1, 0) becomes singular at h = 1/(weight
    times the greatest eigenvalue of the roll and pitch block of K^-1). For mounts in one plane: the rocking
    stiffness over the weight. Raises numpy.linalg.LinAlgError for a machine that is not supported.
    """
    k = np.asarray(stiffness, dtype=float)
    flexibility = np.linalg.inv(k)[..., 3:5, 3:5]
    softest = np.linalg.eigvalsh(0.5 * (flexibility + np.swapaxes(flexibility, -1, -2)))[..., -1]
    return np.asarray(1.0 / (np.asarray(weight, dtype=float) * softest))
