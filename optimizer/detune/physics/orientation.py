"""Rotation matrices whose columns are the local unit vectors of a component, for inclined mounts."""

from __future__ import annotations

import numpy as np

from detune.physics.array_types import ArrayLike, FloatArray


def axes_from_direction(axial: ArrayLike, radial: ArrayLike | None = None) -> FloatArray:
    """Local axes of a component: columns are (radial, axial x radial, axial), a right-handed orthonormal set.

    The component's third axis lies along ``axial``; its first lies along the part of ``radial`` square to
    ``axial``. Without ``radial`` the first axis is the part of the global x direction square to ``axial``
    (the global y direction if ``axial`` is within about 8 degrees of x), so a vertical component has the
    identity.

    Shapes: axial (3), radial (3) of any length -> (3, 3). ValueError if a vector is not finite, has no
    length, or the two are parallel.
    """
    third = _unit(axial, "axial")
    if radial is None:
        start = np.array([1.0, 0.0, 0.0]) if abs(third[0]) < 0.99 else np.array([0.0, 1.0, 0.0])
    else:
        start = _unit(radial, "radial")
    square = start - (start @ third) * third
    # Two directions closer than 1e-6 rad leave the radial one undetermined by the digits people write.
    if float(np.linalg.norm(square)) < 1e-6:
        raise ValueError("the radial direction of a component must not be parallel to its axial direction")
    first = square / np.linalg.norm(square)
    return np.stack([first, np.cross(third, first), third], axis=1)


def rotation_about(axis: ArrayLike, angle: float) -> FloatArray:
    """Rotation by ``angle`` rad about ``axis``, right-handed (Rodrigues). Shapes: (3) -> (3, 3)."""
    x, y, z = _unit(axis, "axis")
    cross = np.array([[0.0, -z, y], [z, 0.0, -x], [-y, x, 0.0]])
    return np.asarray(np.eye(3) + np.sin(angle) * cross + (1.0 - np.cos(angle)) * (cross @ cross))


def six_axis_rotation(axes: ArrayLike) -> FloatArray:
    """Rotation of the six coordinates of a body: diag(axes, axes). Shapes: (..., 3, 3) -> (..., 6, 6)."""
    axes = np.asarray(axes, dtype=float)
    out = np.zeros((*axes.shape[:-2], 6, 6))
    out[..., :3, :3] = axes
    out[..., 3:, 3:] = axes
    return out


def _unit(vector: ArrayLike, name: str) -> FloatArray:
    v = np.asarray(vector, dtype=float)
    if v.shape != (3,) or not np.isfinite(v).all() or not np.any(v):
        raise ValueError(f"the {name} direction must be three finite numbers, not all zero")
    # Scaling first keeps very short and very long vectors from under- or overflowing when squared.
    v = v / np.abs(v).max()
    return np.asarray(v / np.linalg.norm(v))
