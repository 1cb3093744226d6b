"""Bounds from the Loewner order: what holds for every stiffness matrix between two others.

Written A <= B when B - A is positive semidefinite. For K_low <= K <= K_high every eigenvalue of K lies between
those of K_low and K_high, and K^-1 lies between K_high^-1 and K_low^-1 (Horn and Johnson, Matrix Analysis,
sections 4.3 and 7.7; from memory). All functions work on batches and widen their result by the rounding
error they may have made, so that a comparison with a limit errs on the safe side.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from detune.proof.selection_data import Floats

Flags = NDArray[np.bool_]

ROUNDING = 1.0e-9
"""Relative widening of every bound; the condition numbers met are below 1e6, the rounding unit is 1e-16."""

LOST = 1.0e-11
"""Relative size of a difference of two inverses that rounding may have swallowed."""


def eigenvalue_prune(low: Floats, high: Floats, band_low: Floats, band_high: Floats) -> Flags:
    """Whether some eigenvalue lies inside an open band for every matrix between two others.

    low, high (N, n): ascending eigenvalues of K_low and K_high. band_low, band_high (N, I) or (I,): band edges
    on the same scale (omega^2). True (N,) means that for each K with K_low <= K <= K_high some eigenvalue is
    strictly inside a band; this is N(band_high; K_high) > N(band_low; K_low).
    """
    lower = np.atleast_2d(band_low)
    upper = np.atleast_2d(band_high)
    slack_low = lower + ROUNDING * np.abs(lower)
    slack_high = upper - ROUNDING * np.abs(upper)
    inside = (low[:, None, :] > slack_low[:, :, None]) & (high[:, None, :] < slack_high[:, :, None])
    flags: Flags = np.asarray(inside.any(axis=(1, 2)))
    return flags


def _interval(a_low: Floats, a_high: Floats, rows: Floats, load: Floats) -> tuple[Floats, Floats]:
    """Interval of row^T X load for X between a_high^-1 and a_low^-1 (same inertia throughout)."""
    count, n = a_low.shape[0], a_low.shape[-1]
    right = np.broadcast_to(np.concatenate([rows.T, load[:, None]], axis=1), (count, n, rows.shape[0] + 1))
    x_low = np.linalg.solve(a_high, right)
    x_high = np.linalg.solve(a_low, right)
    middle = 0.5 * (np.einsum("rn,bn->br", rows, x_low[:, :, -1] + x_high[:, :, -1]))
    spread = x_high - x_low
    row_part = np.einsum("rn,bnr->br", rows, spread[:, :, :-1])
    load_part = np.einsum("n,bn->b", load, spread[:, :, -1])[:, None]
    # Differences of nearly equal inverses lose digits: each factor is widened by what may have been lost.
    row_size = np.einsum("rn,bnr->br", np.abs(rows), np.abs(x_high[:, :, :-1]) + np.abs(x_low[:, :, :-1]))
    load_size = np.einsum("n,bn->b", np.abs(load), np.abs(x_high[:, :, -1]) + np.abs(x_low[:, :, -1]))[
        :, None
    ]
    product = (np.maximum(row_part, 0.0) + LOST * row_size) * (np.maximum(load_part, 0.0) + LOST * load_size)
    half = 0.5 * np.sqrt(product) + ROUNDING * np.sqrt(row_size * load_size)
    return middle - half, middle + half


def static_interval(
    k_low: Floats, k_high: Floats, rows: Floats, load: Floats
) -> tuple[Floats, Floats, Flags]:
    """Interval of row^T K^-1 load over all K between k_low and k_high.

    k_low, k_high (N, n, n) with k_low <= k_high; rows (R, n); load (n,). Returns low, high (N, R) and valid
    (N,). Where k_low is not positive definite there is no bound: the interval is infinite and valid is False.
    With Delta = k_low^-1 - k_high^-1 and the mean of both inverses as centre, the half width is
    0.5 sqrt(row^T Delta row * load^T Delta load).
    """
    least = np.linalg.eigvalsh(k_low)
    valid: Flags = least[:, 0] > 1e-12 * np.abs(least[:, -1])
    low = np.full((k_low.shape[0], rows.shape[0]), -np.inf)
    high = np.full_like(low, np.inf)
    if valid.any():
        low[valid], high[valid] = _interval(k_low[valid], k_high[valid], rows, load)
    return low, high, valid


def undamped_response_interval(
    k_low: Floats, k_high: Floats, mass: Floats, frequency: float, rows: Floats, load: Floats
) -> tuple[Floats, Floats, Flags]:
    """Interval of row^T (K - omega^2 M)^-1 load, undamped, over all K between k_low and k_high.

    Shapes as in `static_interval`, mass (n, n), frequency in Hz, load real. Valid (N,) only where no natural
    frequency can cross the frequency: then the inverse is monotone in K as in the static case.
    """
    shift = (2.0 * np.pi * frequency) ** 2
    a_low, a_high = k_low - shift * mass, k_high - shift * mass
    below, above = np.linalg.eigvalsh(a_low), np.linalg.eigvalsh(a_high)
    same = (below < 0.0).sum(axis=1) == (above < 0.0).sum(axis=1)
    clear = np.minimum(np.abs(below).min(axis=1), np.abs(above).min(axis=1)) > 1e-9 * np.abs(above).max(
        axis=1
    )
    valid: Flags = same & clear
    low = np.full((k_low.shape[0], rows.shape[0]), -np.inf)
    high = np.full_like(low, np.inf)
    if valid.any():
        low[valid], high[valid] = _interval(a_low[valid], a_high[valid], rows, load)
    return low, high, valid
