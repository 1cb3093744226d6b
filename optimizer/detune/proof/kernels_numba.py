"""Compiled kernels: generated text is written to a user cache folder, compiled once by numba, and kept there.

numba and the compiled code are loaded only inside `load_kernels` and what calls it. The plain wrappers at the end
have the signatures of `kernels_numpy.py` and take its routines wherever a factorisation is doubtful.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np

from detune.ground import compiled
from detune.proof import kernels_numpy
from detune.proof.kernel_source import BLOCK, kernel_source
from detune.proof.loewner import Flags
from detune.proof.selection_data import Complexes, Floats, Integers

LARGEST_FREEDOMS = 9
WORTH_WHEN_CACHED = 1_000_000
WORTH_WHEN_NEW = 20_000_000
DECORATOR = '@njit(cache=True, nogil=True, fastmath={"contract"}, error_model="numpy")'
HEADER = '''"""Generated kernels for {n} freedoms; safe to delete."""
from __future__ import annotations

import numpy as np
from numba import njit

from detune.proof.block_data import Ask, Bench, Domain, Frame, Node
'''


def module_text(n: int) -> str:
    """Text of the compiled module for n freedoms: block kernels, search nodes, response nodes."""
    here = Path(__file__).parent
    names = ("block_rules.py", "block_search.py", "block_response.py")
    texts = [kernel_source(n), *((here / name).read_text(encoding="utf-8") for name in names)]
    return HEADER.format(n=n) + compiled.decorated(texts, DECORATOR)


def kernel_file(n: int) -> tuple[Path, str]:
    """Path and text of the generated module; the name carries a hash of the text."""
    text = module_text(n)
    return compiled.module_file(f"detune_kernels_{n}", text), text


def is_cached(n: int) -> bool:
    """Whether kernels for n freedoms were compiled before, by this version of the program."""
    return compiled.is_ready(kernel_file(n)[0])


def worth_compiling(predicted_designs: float, n: int) -> bool:
    """Whether compiled kernels pay for this many designs: sooner when they are compiled already."""
    if n > LARGEST_FREEDOMS or predicted_designs < WORTH_WHEN_CACHED:
        return False
    return predicted_designs >= WORTH_WHEN_NEW or is_cached(n)


def load_kernels(n: int, announce: Callable[[str], None] | None = None) -> Any:
    """The compiled module for n freedoms; tells `announce` when it has to be compiled first.

    Raises ValueError for n outside 1 to 9.
    """
    path, text = kernel_file(n)
    if announce is not None and not compiled.is_ready(path):
        announce("Compiling the search kernels; this is done once and takes about a minute.")
    return compiled.load(path, text)


def mark_ready(n: int) -> None:
    """Note that the kernels for n freedoms have been compiled, so that nobody is told again."""
    compiled.mark_ready(kernel_file(n)[0])


def _blocks(matrices: Floats) -> tuple[Floats, int]:
    """Packed blocks (K, m*64) of matrices (N, n, n), the last block filled up with its last matrix."""
    packed = kernels_numpy.pack(matrices)
    count = -(-packed.shape[0] // BLOCK)
    index = np.minimum(np.arange(count * BLOCK), packed.shape[0] - 1)
    blocks = packed[index].reshape(count, BLOCK, -1).transpose(0, 2, 1)
    return np.ascontiguousarray(blocks).reshape(count, -1), count


def _vectors(values: Floats) -> Floats:
    count = -(-values.shape[0] // BLOCK)
    index = np.minimum(np.arange(count * BLOCK), values.shape[0] - 1)
    return np.ascontiguousarray(values[index].reshape(count, BLOCK, -1).transpose(0, 2, 1)).reshape(count, -1)


def static_projection(stiffness: Floats, load: Floats, rows: Floats) -> tuple[Floats, Flags]:
    """rows K^-1 load (N, R) for K (N, n, n), load (n,), rows (R, n), and whether each K is positive definite."""
    kernels = load_kernels(stiffness.shape[-1])
    blocks, count = _blocks(stiffness)
    n = load.shape[0]
    out = np.empty((count * BLOCK, rows.shape[0]))
    flags = np.empty(count * BLOCK)
    m = n * (n + 1) // 2
    space = np.empty((m + n + 4) * BLOCK)
    view = space.reshape(-1, BLOCK)
    for k in range(count):
        lanes = slice(k * BLOCK, (k + 1) * BLOCK)
        space[: m * BLOCK] = blocks[k]
        kernels.factor_block(space, load)
        flags[lanes] = view[m + n + 1]
        for r in range(rows.shape[0]):
            kernels.row_block(space, np.ascontiguousarray(rows[r]))
            out[lanes, r] = view[m + n + 2]
    total = stiffness.shape[0]
    supported = flags[:total] == 1.0
    doubtful = ~supported
    result = out[:total]
    if doubtful.any():
        q, positive = kernels_numpy.static_solve(stiffness[doubtful], load)
        result[doubtful] = q @ rows.T
        supported[doubtful] = positive
    return result, supported


def inertia_count(stiffness: Floats, shift: Floats) -> tuple[Integers, Flags]:
    """As `kernels_numpy.inertia_count`: eigenvalues of K (N, n, n) below shift (N,), and the doubtful ones."""
    kernels = load_kernels(stiffness.shape[-1])
    blocks, count = _blocks(stiffness)
    shifts = _vectors(shift[:, None])
    counts, good = np.empty(count * BLOCK), np.empty(count * BLOCK)
    for k in range(count):
        lanes = slice(k * BLOCK, (k + 1) * BLOCK)
        kernels.inertia_block(blocks[k], shifts[k], counts[lanes], good[lanes])
    total = stiffness.shape[0]
    doubtful = good[:total] != 1.0
    result = counts[:total].astype(np.int64)
    if doubtful.any():
        values = np.linalg.eigvalsh(stiffness[doubtful])
        result[doubtful] = (values < shift[doubtful, None]).sum(axis=1)
    return result, doubtful


def complex_solve(matrices: Complexes, right: Complexes) -> tuple[Complexes, Flags]:
    """As `kernels_numpy.complex_solve`: complex symmetric systems (N, n, n) with right sides (N, n)."""
    kernels = load_kernels(matrices.shape[-1])
    n, total = matrices.shape[-1], matrices.shape[0]
    real, count = _blocks(np.ascontiguousarray(matrices.real))
    imag, _ = _blocks(np.ascontiguousarray(matrices.imag))
    room = np.empty((count, (2 * n + 1) * BLOCK))
    space = np.concatenate([real, imag, _vectors(right.real), _vectors(right.imag), room], axis=1)
    for k in range(count):
        kernels.complex_block(space[k])
    found, good = space[:, -(2 * n + 1) * BLOCK : -BLOCK], space[:, -BLOCK:]

    parts = found.reshape(count, 2, n, BLOCK).transpose(1, 0, 3, 2).reshape(2, -1, n)[:, :total]
    q: Complexes = parts[0] + 1j * parts[1]
    doubtful = good.reshape(-1)[:total] != 1.0
    if doubtful.any():
        q[doubtful] = np.linalg.solve(matrices[doubtful], right[doubtful][:, :, None])[:, :, 0]
    return q, doubtful
