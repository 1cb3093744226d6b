"""Reference batch kernels in numpy: static solve, inertia count, complex symmetric solve.

They state what the compiled kernels must compute and are the path taken for small work. All of them are
LDL^T factorisations without pivoting, with a check after which the safe library routine takes over:
a nearly undamped system can have a zero leading minor although it is well conditioned.
"""

from __future__ import annotations

import numpy as np

from detune.proof.selection_data import Complexes, Floats, Integers

GROWTH_LIMIT = 1.0e6
"""Largest growth of an element update, relative to the matrix, that a factorisation may show and be trusted."""

RESIDUAL_LIMIT = 1.0e-11
"""Largest relative residual that a pivot-free complex solve may leave and be trusted."""


def packed_indices(n: int) -> list[tuple[int, int]]:
    """Row and column of each entry of the packed lower triangle: (0,0), (1,0), (1,1), (2,0), ..."""
    return [(row, column) for row in range(n) for column in range(row + 1)]


def pack(matrices: Floats) -> Floats:
    """Packed lower triangles (..., n(n+1)/2) of symmetric matrices (..., n, n)."""
    rows, columns = zip(*packed_indices(matrices.shape[-1]), strict=True)
    return np.ascontiguousarray(matrices[..., list(rows), list(columns)])


def unpack(packed: Floats, n: int) -> Floats:
    """Symmetric matrices (..., n, n) from packed lower triangles (..., n(n+1)/2)."""
    matrices = np.empty((*packed.shape[:-1], n, n), dtype=packed.dtype)
    for position, (row, column) in enumerate(packed_indices(n)):
        matrices[..., row, column] = packed[..., position]
        matrices[..., column, row] = packed[..., position]
    return matrices


def eigenvalues(packed: Floats, n: int) -> Floats:
    """Ascending eigenvalues (N, n) of packed symmetric matrices (N, n(n+1)/2)."""
    return np.asarray(np.linalg.eigvalsh(unpack(packed, n)), dtype=np.float64)


def ldl_factor(matrices: Floats) -> tuple[Floats, Floats, Floats]:
    """LDL^T without pivoting of symmetric matrices (N, n, n), real or complex symmetric.

    Returns L (N, n, n) unit lower, pivots (N, n), and the growth (N,): the largest |l^2 d| met, relative to the
    largest diagonal entry. A zero pivot gives growth +inf and factors of no use.
    """
    work = np.array(matrices)
    n = work.shape[-1]
    lower = np.zeros_like(work)
    pivots = np.zeros(work.shape[:-1], dtype=work.dtype)
    scale = np.abs(work).max(axis=(1, 2))
    scale = np.where(scale > 0.0, scale, 1.0)
    growth = np.zeros(work.shape[0])
    for k in range(n):
        pivot = work[:, k, k].copy()
        zero = np.abs(pivot) <= 1.0e-300
        growth = np.where(zero, np.inf, growth)
        pivot = np.where(zero, 1.0, pivot)
        pivots[:, k] = pivot
        column = work[:, k:, k] / pivot[:, None]
        column = np.where(zero[:, None], 0.0, column)
        lower[:, k:, k] = column
        lower[:, k, k] = 1.0
        if k + 1 < n:
            update = column[:, 1:, None] * work[:, None, k + 1 :, k]
            work[:, k + 1 :, k + 1 :] -= update
            largest = np.abs(np.diagonal(update, axis1=1, axis2=2)).max(axis=1)
            growth = np.maximum(growth, largest / scale)
    return lower, pivots, growth


def ldl_solve(lower: Floats, pivots: Floats, right: Floats) -> Floats:
    """Solve L D L^T x = right for right (N, n); returns x (N, n)."""
    x = np.array(right)
    n = x.shape[1]
    for k in range(n):
        x[:, k] -= np.einsum("bi,bi->b", lower[:, k, :k], x[:, :k])
    x /= pivots
    for k in range(n - 1, -1, -1):
        x[:, k] -= np.einsum("bi,bi->b", lower[:, k + 1 :, k], x[:, k + 1 :])
    return x


def static_solve(
    stiffness: Floats, load: Floats
) -> tuple[Floats, np.ndarray[tuple[int], np.dtype[np.bool_]]]:
    """Solve K q = load for K (N, n, n) symmetric, load (n,) or (N, n).

    Returns q (N, n) and a flag (N,) that K is positive definite; where it is not, q is NaN.
    """
    lower, pivots, growth = ldl_factor(stiffness)
    scale = np.abs(stiffness).max(axis=(1, 2))
    supported = (pivots > 1.0e-13 * scale[:, None]).all(axis=1) & np.isfinite(growth)
    right = np.broadcast_to(load, stiffness.shape[:2])
    safe = np.where(supported[:, None], pivots, 1.0)
    q = ldl_solve(lower, safe, right)
    q[~supported] = np.nan
    return q, supported


def inertia_count(
    stiffness: Floats, shift: Floats
) -> tuple[Integers, np.ndarray[tuple[int], np.dtype[np.bool_]]]:
    """Number of eigenvalues of K (N, n, n) below shift (N,) by counting negative pivots of K - shift I.

    Returns the counts and a flag (N,) marking those whose factorisation could not be trusted (small pivot,
    large growth); these were counted again by `numpy.linalg.eigvalsh`. K is the stiffness in coordinates in
    which the mass matrix is the unit matrix (Sylvester's law of inertia).
    """
    n = stiffness.shape[-1]
    shifted = stiffness - shift[:, None, None] * np.eye(n)
    _, pivots, growth = ldl_factor(shifted)
    scale = np.abs(shifted).max(axis=(1, 2))
    doubtful = (growth > GROWTH_LIMIT) | (np.abs(pivots).min(axis=1) < 1.0e-11 * scale)
    counts = (pivots < 0.0).sum(axis=1)
    if doubtful.any():
        values = np.linalg.eigvalsh(stiffness[doubtful])
        counts[doubtful] = (values < shift[doubtful, None]).sum(axis=1)
    return counts, doubtful


def complex_solve(
    matrices: Complexes, right: Complexes
) -> tuple[Complexes, np.ndarray[tuple[int], np.dtype[np.bool_]]]:
    """Solve complex symmetric systems D q = right, D (N, n, n), right (N, n).

    Returns q (N, n) and a flag (N,) marking those solved by `numpy.linalg.solve` because the pivot-free
    factorisation showed large growth or left a residual; raises numpy.linalg.LinAlgError for a singular D.
    """
    lower, pivots, growth = ldl_factor(matrices)  # type: ignore[arg-type]
    trusted = growth <= GROWTH_LIMIT
    safe = np.where(trusted[:, None], pivots, 1.0)
    q: Complexes = ldl_solve(lower, safe, right)  # type: ignore[arg-type,assignment]
    residual = np.abs(np.einsum("bij,bj->bi", matrices, q) - right).max(axis=1)
    # The backward error asks for the size of the terms that were added, not of the right side alone.
    size = np.einsum("bij,bj->bi", np.abs(matrices), np.abs(q)).max(axis=1) + np.abs(right).max(axis=1)
    doubtful = ~(trusted & (residual <= RESIDUAL_LIMIT * size))
    if doubtful.any():
        q[doubtful] = np.linalg.solve(matrices[doubtful], right[doubtful][:, :, None])[:, :, 0]
    return q, doubtful
