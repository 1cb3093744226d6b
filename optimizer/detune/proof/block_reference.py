"""The block kernels in numpy: what `kernel_source.py` generates must compute the same.

A block is a flat buffer of 64 systems, entry k of system b at [k * 64 + b]. The functions write into their
arguments, as the compiled ones do; they are used by tests and when `block_search` runs uncompiled.
"""

from __future__ import annotations

import math

import numpy as np

from detune.proof.kernels_numpy import GROWTH_LIMIT, complex_solve, ldl_factor, unpack
from detune.proof.selection_data import Floats

BLOCK = 64


def _matrices(block: Floats, n: int) -> Floats:
    return unpack(np.ascontiguousarray(block.reshape(-1, BLOCK).T), n)


def factor_block(A: Floats, load: Floats, Y: Floats, size: Floats, good: Floats) -> None:
    """Overwrite A by L (below) and 1/d (on the diagonal) of LDL^T; Y = D^-1 L^-1 load; size = load^T X load.

    good is 1 where all pivots exceed 1e-10 of the largest diagonal entry, else 0.
    """
    n = load.shape[0]
    matrices = _matrices(A, n)
    scale = np.einsum("bii->bi", matrices).max(axis=1)
    lower, pivots, growth = ldl_factor(matrices)
    good[:] = (pivots.min(axis=1) > 1e-10 * scale) & np.isfinite(growth)
    y = np.linalg.solve(lower, np.broadcast_to(load[:, None], (BLOCK, n, 1)))[:, :, 0]
    view, out = A.reshape(-1, BLOCK), Y.reshape(n, BLOCK)
    position = 0
    for i in range(n):
        for j in range(i + 1):
            view[position] = 1.0 / pivots[:, i] if i == j else lower[:, i, j]
            position += 1
        out[i] = y[:, i] / pivots[:, i]
    size[:] = (y * y / pivots).sum(axis=1)


def row_block(A: Floats, Y: Floats, row: Floats, value: Floats, size: Floats) -> None:
    """value = row^T X load and size = row^T X row from a block factored by `factor_block`."""
    n = row.shape[0]
    factors = _matrices(A, n)
    lower = np.tril(factors, -1) + np.eye(n)
    inverse = np.einsum("bii->bi", factors)
    y = np.linalg.solve(lower, np.broadcast_to(row[:, None], (BLOCK, n, 1)))[:, :, 0]
    value[:] = (y * Y.reshape(n, BLOCK).T).sum(axis=1)
    size[:] = (y * y * inverse).sum(axis=1)


def inertia_block(A: Floats, shift: Floats, count: Floats, good: Floats) -> None:
    """count = negative pivots of A - shift I; good is 1 where growth and pivots let the count be trusted."""
    n = round((math.sqrt(8 * (A.shape[0] // BLOCK) + 1) - 1) / 2)
    shifted = _matrices(A, n) - shift[:, None, None] * np.eye(n)
    _, pivots, growth = ldl_factor(shifted)
    scale = np.maximum(np.abs(shift), np.abs(np.einsum("bii->bi", shifted)).max(axis=1))
    count[:] = (pivots < 0.0).sum(axis=1)
    good[:] = (growth <= 0.1 * GROWTH_LIMIT) & (np.abs(pivots).min(axis=1) > 1e-12 * scale)


def complex_block(D: Floats, F: Floats, Q: Floats, good: Floats) -> None:
    """Solve complex symmetric systems D Q = F, real parts first, then imaginary; good is 1 where it can be trusted."""
    n, half = F.shape[0] // (2 * BLOCK), D.shape[0] // 2
    matrices = _matrices(D[:half], n) + 1j * _matrices(D[half:], n)
    parts = F.reshape(2, n, BLOCK)
    q, doubtful = complex_solve(matrices, parts[0].T + 1j * parts[1].T)
    Q.reshape(2, n, BLOCK)[0] = q.real.T
    Q.reshape(2, n, BLOCK)[1] = q.imag.T
    good[:] = ~doubtful
