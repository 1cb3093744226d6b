"""How fast the compiled 6 x 6 kernels solve, against batched numpy, a plain loop, and matrix multiplication."""

from __future__ import annotations

import importlib.util
import re
import statistics
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from detune.proof.instances import InstanceSettings, make_instance, random_designs
from detune.proof.kernel_source import BLOCK, complex_source, factor_source, inertia_source
from detune.proof.kernels_numba import load_kernels
from detune.proof.kernels_numpy import pack
from detune.proof.response_rows import response_margin
from detune.proof.search_compiled import response_screen

_spec = importlib.util.spec_from_file_location(
    "brute_force", Path(__file__).parents[1] / "proof" / "brute_force.py"
)
assert _spec is not None and _spec.loader is not None
brute: Any = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(brute)

pytestmark = pytest.mark.benchmark
# Eight blocks lie in the second-level cache, as those of a search do.
BLOCKS, FREEDOMS = 8, 6


def median_seconds(work: Callable[[], object], repeats: int = 9) -> float:
    """The median processor time of one call, after a call that is not counted: others may share the machine."""
    work()
    times = []
    for _ in range(repeats):
        started = time.process_time()
        work()
        times.append(time.process_time() - started)
    return statistics.median(times)


def operations(source: str) -> int:
    """Additions, multiplications and divisions for one lane, counted in the generated text."""
    count = 0
    for line in source.splitlines():
        if "=" in line and not line.startswith("def"):
            bare = re.sub(r"\[[^]]*\]", "", line.split("=", 1)[1])
            count += len(re.findall(r" [-+*/] ", bare))
    return count


def systems() -> tuple[np.ndarray, np.ndarray]:
    """Well-posed damped systems (N, 6, 6) and right sides (N, 6)."""
    random = np.random.default_rng(1)
    count = BLOCKS * BLOCK
    a = random.normal(size=(count, FREEDOMS, FREEDOMS))
    stiffness = a @ a.transpose(0, 2, 1)
    matrices = stiffness * (1.0 + 0.1j) - 0.7 * np.eye(FREEDOMS)
    return matrices, random.normal(size=(count, FREEDOMS)) + 1j * random.normal(size=(count, FREEDOMS))


def dgemm_rate() -> float:
    """Multiply-adds of a 900 x 900 product as operations a second, on one thread if BLAS has one."""
    a = np.random.default_rng(2).normal(size=(900, 900))
    return 2.0 * 900**3 / median_seconds(lambda: a @ a)


def test_complex_response_solves(figures: dict[str, Any]) -> None:
    from numba import njit

    kernels = load_kernels(FREEDOMS)
    matrices, right = systems()
    m, n = FREEDOMS * (FREEDOMS + 1) // 2, FREEDOMS

    def lanes(values: np.ndarray) -> np.ndarray:
        return values.reshape(BLOCKS, BLOCK, -1).transpose(0, 2, 1).reshape(BLOCKS, -1)

    parts = [pack(matrices.real), pack(matrices.imag), right.real, right.imag]
    blocks = np.ascontiguousarray(np.concatenate([lanes(np.ascontiguousarray(p)) for p in parts], axis=1))
    complex_block = kernels.complex_block

    # The kernel leaves the systems as they are and writes the solution behind them.
    space = np.concatenate([blocks, np.zeros((BLOCKS, (2 * n + 1) * BLOCK))], axis=1)

    @njit
    def all_blocks(space, times):
        for _ in range(times):
            for k in range(space.shape[0]):
                complex_block(space[k])

    count, times = BLOCKS * BLOCK, 100
    kernel = median_seconds(lambda: all_blocks(space, times), 25) / (times * count)
    batched = median_seconds(lambda: np.linalg.solve(matrices, right[:, :, None]), 25) / count
    loop = (
        median_seconds(lambda: [np.linalg.solve(a, b) for a, b in zip(matrices, right, strict=True)], 3)
        / count
    )
    out = space[:, (2 * m + 2 * n) * BLOCK : -BLOCK]
    got = out.reshape(BLOCKS, 2, n, BLOCK).transpose(1, 0, 3, 2).reshape(2, count, n)
    expected = np.linalg.solve(matrices, right[:, :, None])[:, :, 0]
    assert np.allclose(got[0] + 1j * got[1], expected, rtol=1e-8, atol=1e-8)
    work, rate = operations(complex_source(FREEDOMS)), dgemm_rate()
    figures["complex 6x6 solve"] = {
        "kernel_ns": 1e9 * kernel,
        "batched_numpy_ns": 1e9 * batched,
        "plain_loop_ns": 1e9 * loop,
        "times_batched_numpy": batched / kernel,
        "times_plain_loop": loop / kernel,
        "operations": work,
        "gflops": work / kernel / 1e9,
        "dgemm_gflops": rate / 1e9,
        "share_of_dgemm": work / kernel / rate,
    }


def test_static_and_eigenvalue_kernels(figures: dict[str, Any]) -> None:
    from numba import njit

    kernels = load_kernels(FREEDOMS)
    matrices, _ = systems()
    stiffness = np.ascontiguousarray(matrices.real + 0.7 * np.eye(FREEDOMS))
    packed = pack(stiffness).reshape(BLOCKS, BLOCK, -1).transpose(0, 2, 1)
    blocks = np.ascontiguousarray(packed).reshape(BLOCKS, -1)
    m, n = FREEDOMS * (FREEDOMS + 1) // 2, FREEDOMS
    factor_block, inertia_block = kernels.factor_block, kernels.inertia_block

    @njit
    def factor_all(blocks, space, load, times):
        for _ in range(times):
            for k in range(blocks.shape[0]):
                for i in range(blocks.shape[1]):
                    space[i] = blocks[k, i]
                factor_block(space, load)

    @njit
    def count_all(blocks, shift, count, good, times):
        for _ in range(times):
            for k in range(blocks.shape[0]):
                inertia_block(blocks[k], shift, count, good)

    load, space = np.ones(n), np.empty((m + n + 4) * BLOCK)
    shift, count, good = np.full(BLOCK, 2.0), np.empty(BLOCK), np.empty(BLOCK)
    total = BLOCKS * BLOCK
    times = 300
    static = median_seconds(lambda: factor_all(blocks, space, load, times), 25) / (times * total)
    inertia = median_seconds(lambda: count_all(blocks, shift, count, good, times), 25) / (times * total)
    rate = dgemm_rate()
    solve = median_seconds(lambda: np.linalg.solve(stiffness, np.ones((total, n, 1)))) / total
    eigen = median_seconds(lambda: np.linalg.eigvalsh(stiffness)) / total
    figures["static 6x6 solve"] = {
        "kernel_ns": 1e9 * static,
        "batched_numpy_ns": 1e9 * solve,
        "times_batched_numpy": solve / static,
        "share_of_dgemm": operations(factor_source(n)) / static / rate,
    }
    figures["eigenvalue count"] = {
        "kernel_ns": 1e9 * inertia,
        "batched_eigvalsh_ns": 1e9 * eigen,
        "times_batched_eigvalsh": eigen / inertia,
        "share_of_dgemm": operations(inertia_source(n)) / inertia / rate,
    }


def test_response_of_designs_with_all_limits(figures: dict[str, Any]) -> None:
    """Assemble, solve and judge 15 frequencies of a design: compiled, batched numpy, and the tests' plain loop."""
    selection = make_instance(InstanceSettings(parts=200, groups=4, seed=1))
    designs = random_designs(selection, 4096, np.random.default_rng(3))
    screen = response_screen(selection, load_kernels(FREEDOMS))
    cases = len(selection.harmonic.frequency)
    expected = response_margin(selection, designs)
    assert np.allclose(screen(selection, designs), expected, rtol=1e-8, atol=1e-8)
    compiled = median_seconds(lambda: screen(selection, designs), 15) / (4096 * cases)
    batched = median_seconds(lambda: response_margin(selection, designs), 7) / (4096 * cases)
    few = designs[:40].tolist()

    def loop() -> None:
        for *parts, step in few:
            dynamic = selection.fixed.dynamic.copy()
            for s, g in enumerate(selection.station_group):
                for a in range(3):
                    b = selection.stations[s, a]
                    dynamic += selection.groups[g].kappa_dynamic[parts[g], a] * np.outer(b, b)
            brute.response_margin(selection, parts, selection.ballast.mass[step], dynamic, FREEDOMS)

    plain = median_seconds(loop, 3) / (len(few) * cases)
    figures["response of a design at a frequency, all limits"] = {
        "compiled_ns": 1e9 * compiled,
        "batched_numpy_ns": 1e9 * batched,
        "plain_loop_ns": 1e9 * plain,
        "times_batched_numpy": batched / compiled,
        "times_plain_loop": plain / compiled,
    }
