"""Static displacement under steady loads, with a check that every direction is supported."""

from __future__ import annotations

import numpy as np

from detune.physics.array_types import ArrayLike, BoolArray, FloatArray
from detune.physics.unsupported import UnsupportedMachine

# Smallest eigenvalue of the stiffness scaled to a unit diagonal below which a direction counts as
# unsupported. Real mounts come down to about 1e-5 (a machine on very close stations); rounding reaches about
# 1e-14.
SMALLEST_SUPPORT = 1e-9


def is_supported(stiffness: ArrayLike) -> BoolArray:
    """Whether a stiffness holds every direction of motion.

    Shapes: stiffness (..., n, n), symmetric, N/m and N m/rad mixed -> (...) bool. Scaled to a unit diagonal
    (so that metres and radians do not matter) its smallest eigenvalue must exceed ``SMALLEST_SUPPORT``.
    """
    k = np.asarray(stiffness, dtype=float)
    diagonal = np.diagonal(k, axis1=-2, axis2=-1)
    held = np.all(diagonal > 0.0, axis=-1) & np.isfinite(k).all(axis=(-2, -1))
    scale = 1.0 / np.sqrt(np.where(diagonal > 0.0, diagonal, 1.0))
    scaled = k * scale[..., :, None] * scale[..., None, :]
    # Eigenvalues of a matrix with infinities would stop the whole batch.
    scaled = np.where(held[..., None, None], scaled, np.eye(k.shape[-1]))
    smallest = np.linalg.eigvalsh(scaled)[..., 0]
    return np.asarray(held & (smallest > SMALLEST_SUPPORT), dtype=bool)


def solve_static(stiffness: ArrayLike, load: ArrayLike) -> FloatArray:
    """Static displacement K q = load.

    Shapes: stiffness (..., n, n), load (..., n), leading axes broadcast -> (..., n). UnsupportedMachine if
    any machine of the batch has a direction without stiffness or with negative stiffness; use
    ``solve_static_where_supported`` to go on with the rest.
    """
    k = np.asarray(stiffness, dtype=float)
    supported = is_supported(k)
    if not np.all(supported):
        where = "" if supported.ndim == 0 else f" ({int(np.sum(~supported))} of {supported.size} machines)"
        raise UnsupportedMachine(f"the static stiffness leaves a direction of motion without support{where}")
    return _solve(k, load)


def solve_static_where_supported(stiffness: ArrayLike, load: ArrayLike) -> tuple[FloatArray, BoolArray]:
    """Static displacement, and the mask of the machines that have one.

    Shapes as ``solve_static`` -> (displacement (..., n), supported (...)). Displacements of unsupported
    machines are NaN, so that none can pass a limit unseen.
    """
    k = np.asarray(stiffness, dtype=float)
    supported = is_supported(k)
    q = _solve(np.where(supported[..., None, None], k, np.eye(k.shape[-1])), load)
    mask = np.broadcast_to(supported, q.shape[:-1])
    return np.where(mask[..., None], q, np.nan), np.array(mask)


def _solve(k: FloatArray, load: ArrayLike) -> FloatArray:
    q: FloatArray = np.linalg.solve(k, np.asarray(load, dtype=float)[..., None])[..., 0]
    return q
