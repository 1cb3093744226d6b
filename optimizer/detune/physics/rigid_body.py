"""Rigid bodies: attachment of points, mass matrices, inertia of plain shapes, mass and centre from weighing.

A body has six coordinates q = (x, y, z, rx, ry, rz): the displacement of a reference point and small
rotations about the global axes through it. Goldstein, Classical Mechanics, ch. 4-5 (small rotations, inertia
tensor, parallel axes).
"""

from __future__ import annotations

import numpy as np

from detune.physics.array_types import ArrayLike, FloatArray

STANDARD_GRAVITY = 9.80665  # m/s2, ISO 80000-3


def skew(r: ArrayLike) -> FloatArray:
    """Cross-product matrix: ``skew(r) @ v == cross(r, v)``.

    Shapes: r (..., 3) -> (..., 3, 3). Unit: that of r.
    """
    r = np.asarray(r, dtype=float)
    out = np.zeros((*r.shape, 3))
    x, y, z = r[..., 0], r[..., 1], r[..., 2]
    out[..., 0, 1], out[..., 0, 2] = -z, y
    out[..., 1, 0], out[..., 1, 2] = z, -x
    out[..., 2, 0], out[..., 2, 1] = -y, x
    return out


def attachment(r: ArrayLike, axes: ArrayLike | None = None) -> FloatArray:
    """Displacement of a point of a body, in local axes, per unit body coordinate: axes.T @ [I, -skew(r)].

    Shapes: r (..., 3) from the reference point to the point, in m; axes (..., 3, 3) with the local unit
    vectors as columns (identity if left out) -> (..., 3, 6). Displacement of the point is t + theta x r for
    small rotations.
    """
    r = np.asarray(r, dtype=float)
    rows = np.zeros((*r.shape, 6))
    rows[..., :, :3] = np.eye(3)
    rows[..., :, 3:] = -skew(r)
    if axes is None:
        return rows
    return np.swapaxes(np.asarray(axes, dtype=float), -1, -2) @ rows


def mass_matrix(mass: ArrayLike, offset: ArrayLike, inertia_about_centre: ArrayLike) -> FloatArray:
    """Mass matrix of a rigid body about its reference point.

    Shapes: mass (...) in kg, offset (..., 3) in m from the reference point to the mass centre,
    inertia_about_centre (..., 3, 3) in kg m2 in the global axes -> (..., 6, 6).
    M = [[m I, -m S], [m S, J + m S.T S]] with S = skew(offset): kinetic energy of a body whose centre moves
    with v + omega x offset.
    """
    mass = np.asarray(mass, dtype=float)[..., None, None]
    s = skew(offset)
    inertia = np.asarray(inertia_about_centre, dtype=float)
    shape = np.broadcast_shapes(mass.shape[:-2], s.shape[:-2], inertia.shape[:-2])
    out = np.zeros((*shape, 6, 6))
    out[..., :3, :3] = mass * np.eye(3)
    out[..., :3, 3:] = -mass * s
    out[..., 3:, :3] = mass * s
    out[..., 3:, 3:] = inertia + mass * (np.swapaxes(s, -1, -2) @ s)
    return out


def box_inertia(mass: ArrayLike, size: ArrayLike) -> FloatArray:
    """Inertia about the centre of a uniform box: m/12 (b^2 + c^2) about the axis along a.

    Shapes: mass (...) in kg, size (..., 3) full edge lengths along x, y, z in m -> (..., 3, 3) in kg m2.
    """
    mass, size = np.asarray(mass, dtype=float), np.asarray(size, dtype=float)
    square = size**2
    moments = mass[..., None] / 12.0 * (square.sum(axis=-1, keepdims=True) - square)
    return np.asarray(moments[..., :, None] * np.eye(3))


def cylinder_inertia(mass: ArrayLike, radius: ArrayLike, length: ArrayLike, axis: int) -> FloatArray:
    """Inertia about the centre of a uniform solid cylinder.

    m R^2/2 about its axis, m (3 R^2 + L^2)/12 across. Shapes: mass, radius, length (...) in kg, m, m;
    axis 0, 1 or 2 for a cylinder along x, y or z -> (..., 3, 3) in kg m2. ValueError for another axis.
    """
    if axis not in (0, 1, 2):
        raise ValueError(f"a cylinder lies along axis 0, 1 or 2, not {axis}")
    mass, radius, length = np.broadcast_arrays(*(np.asarray(a, dtype=float) for a in (mass, radius, length)))
    across = mass * (3.0 * radius**2 + length**2) / 12.0
    moments = np.stack([across] * 3, axis=-1)
    moments[..., axis] = mass * radius**2 / 2.0
    return np.asarray(moments[..., :, None] * np.eye(3))


def rotate_inertia(inertia: ArrayLike, axes: ArrayLike) -> FloatArray:
    """Inertia given in local axes, seen in global axes: axes @ J @ axes.T.

    Shapes: inertia (..., 3, 3) in kg m2, axes (..., 3, 3) with the local unit vectors as columns -> (..., 3, 3).
    """
    axes = np.asarray(axes, dtype=float)
    turned: FloatArray = axes @ np.asarray(inertia, dtype=float) @ np.swapaxes(axes, -1, -2)
    return turned


def combine(
    masses: ArrayLike, centres: ArrayLike, inertias: ArrayLike
) -> tuple[float, FloatArray, FloatArray]:
    """One rigid body from several, by the parallel-axis theorem.

    Shapes: masses (k) in kg, centres (k, 3) in m, inertias (k, 3, 3) about each own centre in kg m2 -> (mass,
    centre (3), inertia (3, 3) about the common centre). ValueError if the total mass is not positive.
    """
    masses = np.asarray(masses, dtype=float)
    centres = np.asarray(centres, dtype=float)
    inertias = np.asarray(inertias, dtype=float)
    mass = float(masses.sum())
    if not mass > 0.0:
        raise ValueError("the total mass must be positive")
    centre = masses @ centres / mass
    s = skew(centres - centre)
    steiner = masses[:, None, None] * (np.swapaxes(s, -1, -2) @ s)
    return mass, centre, (inertias + steiner).sum(axis=0)


def weighed_mass_and_centre(
    positions: ArrayLike, reactions: ArrayLike, gravity: float = STANDARD_GRAVITY
) -> tuple[float, float, float]:
    """Mass and plan position of the centre from the support forces of a weighing (moment equilibrium).

    Shapes: positions (k, 2) or (k, 3) in m (height is not used), reactions (k) upward in N -> (mass, x, y). A
    weighing on a level floor says nothing of the height of the centre. ValueError if the shapes do not match
    or the sum of the reactions is not positive.
    """
    positions = np.asarray(positions, dtype=float)
    reactions = np.asarray(reactions, dtype=float)
    if positions.ndim != 2 or positions.shape[1] not in (2, 3) or reactions.shape != positions.shape[:1]:
        raise ValueError(
            "a weighing needs one reaction for each position, positions with two or three coordinates"
        )
    total = float(reactions.sum())
    if not total > 0.0:
        raise ValueError("the support forces of a weighing must add up to a positive weight")
    x, y = reactions @ positions[:, :2] / total
    return total / gravity, float(x), float(y)


def principal_moments(inertia: ArrayLike) -> FloatArray:
    """Principal moments of inertia, ascending. Shapes: (..., 3, 3) -> (..., 3) in kg m2."""
    moments: FloatArray = np.linalg.eigvalsh(np.asarray(inertia, dtype=float))
    return moments


def inertia_is_possible(inertia: ArrayLike, relative_tolerance: float = 1e-9) -> bool:
    """Whether a real body can have this inertia tensor about its centre.

    Shape (3, 3) in kg m2. True if it is finite, symmetric, positive semidefinite, and no principal moment
    exceeds the sum of the other two (each moment is an integral of two squared distances), all to the
    relative tolerance.
    """
    inertia = np.asarray(inertia, dtype=float)
    if inertia.shape != (3, 3) or not np.isfinite(inertia).all():
        return False
    slack = relative_tolerance * float(np.abs(inertia).max())
    if float(np.abs(inertia - inertia.T).max()) > slack:
        return False
    low, middle, high = principal_moments(inertia)
    return bool(low >= -slack and low + middle - high >= -slack)
