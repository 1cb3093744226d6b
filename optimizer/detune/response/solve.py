"""Solving for the response, an undamped machine exactly at its resonance included."""

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
# A loss factor of rounding size: what it leaves of an infinite response is so large that no limit is met.
LEAST_LOSS = 1e-14


def solve_or_resonate(dynamic: Complexes, stiffness: NDArray[np.generic], load: Complexes) -> Complexes:
    """Return q (..., n) of dynamic (..., n, n) q = load (..., n).

    `stiffness` (broadcast to `dynamic`) is the part of it without inertia. Where the matrix is exactly
    singular, an undamped machine is at resonance and its response has no bound; it is then solved with a
    loss factor of `LEAST_LOSS` on the diagonal, which gives a finite number far beyond any limit in the motion
    that resonates, and zero where the load does not drive it.
    """
    try:
        return np.asarray(np.linalg.solve(dynamic, load[..., None])[..., 0], dtype=complex)
    except np.linalg.LinAlgError:
        singular = np.linalg.slogdet(dynamic)[1] == -np.inf
    loss = np.abs(np.diagonal(np.broadcast_to(stiffness, dynamic.shape), axis1=-2, axis2=-1)).max(axis=-1)
    lossy = dynamic + (1j * LEAST_LOSS * np.where(singular, loss, 0.0))[..., None, None] * np.eye(
        dynamic.shape[-1]
    )
    return np.asarray(np.linalg.solve(lossy, load[..., None])[..., 0], dtype=complex)
