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


def factor_block(S: Floats, load: Floats) -> None:
    """LDL^T of the packed block at the start of S, and the solution of one right side as far as it can be shared.

    S holds m + n + 4 entries: the packed matrix, overwritten by L (below) and 1/d (on the diagonal); D^-1 L^-1 load;
    load^T X load; and 1 where all pivots exceed 1e-10 of the largest diagonal entry, else 0; two for `row_block`.
    """
    n = load.shape[0]
    m = n * (n + 1) // 2
    matrices = _matrices(S[: m * BLOCK], n)
    scale = np.einsum("bii->bi", matrices).max(axis=1)
    lower, pivots, growth = ldl_factor(matrices)
    y = np.linalg.solve(lower, np.broadcast_to(load[:, None], (BLOCK, n, 1)))[:, :, 0]
    view = S.reshape(-1, BLOCK)
    position = 0
    for i in range(n):
        for j in range(i + 1):
            view[position] = 1.0 / pivots[:, i] if i == j else lower[:, i, j]
            position += 1
        view[m + i] = y[:, i] / pivots[:, i]
    view[m + n] = (y * y / pivots).sum(axis=1)
    view[m + n + 1] = (pivots.min(axis=1) > 1e-10 * scale) & np.isfinite(growth)


def row_block(S: Floats, row: Floats) -> None:
    """Entries m + n + 2 and m + n + 3 of S: row^T X load and row^T X row, from a block factored by `factor_block`."""
    n = row.shape[0]
    m = n * (n + 1) // 2
    view = S.reshape(-1, BLOCK)
    factors = _matrices(S[: m * BLOCK], n)
    lower = np.tril(factors, -1) + np.eye(n)
    inverse = np.einsum("bii->bi", factors)
    y = np.linalg.solve(lower, np.broadcast_to(row[:, None], (BLOCK, n, 1)))[:, :, 0]
    view[m + n + 2] = (y * view[m : m + n].T).sum(axis=1)
    view[m + n + 3] = (y * y * inverse).sum(axis=1)


def inertia_block(A: Floats, shift: Floats, count: Floats, good: Floats) -> None:
    """count = negative pivots of A - shift I; good is 1 where growth and pivots let the count be trusted."""
    n = round((math.sqrt(8 * (A.shape[0] // BLOCK) + 1) - 1) / 2)
    shifted = _matrices(A, n) - shift[:, None, None] * np.eye(n)
    _, pivots, growth = ldl_factor(shifted)
    scale = np.maximum(np.abs(shift), np.abs(np.einsum("bii->bi", shifted)).max(axis=1))
    count[:] = (pivots < 0.0).sum(axis=1)
    good[:] = (growth <= 0.1 * GROWTH_LIMIT) & (np.abs(pivots).min(axis=1) > 1e-12 * scale)


def complex_block(S: Floats) -> None:
    """Solve complex symmetric systems D q = f; S holds D (2m entries), f (2n), q (2n) and a flag, real parts first.

    The flag is 1 where the solution can be trusted.
    """
    entries = S.shape[0] // BLOCK
    # entries = n (n + 1) + 4 n + 1
    n = round((-5.0 + math.sqrt(25.0 + 4.0 * (entries - 1))) / 2.0)
    view, m = S.reshape(-1, BLOCK), n * (n + 1) // 2
    matrices = _matrices(S[: m * BLOCK], n) + 1j * _matrices(S[m * BLOCK : 2 * m * BLOCK], n)
    first = 2 * m
    q, doubtful = complex_solve(matrices, view[first : first + n].T + 1j * view[first + n : first + 2 * n].T)
    view[first + 2 * n : first + 3 * n] = q.real.T
    view[first + 3 * n : first + 4 * n] = q.imag.T
    view[first + 4 * n] = ~doubtful
