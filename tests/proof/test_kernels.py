"""Kernels: numpy reference against numpy.linalg, compiled against the reference, pitfalls of pivot-free LDL^T."""

import types
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.proof import block_response, block_rules, block_search, kernels_numpy, search_compiled
from detune.proof.instances import InstanceSettings, make_instance, random_designs
from detune.proof.kernels_numba import module_text, worth_compiling
from detune.proof.kernels_numpy import complex_solve, inertia_count, pack, static_solve, unpack
from detune.proof.response_rows import response_margin
from detune.proof.search import SearchSettings
from detune.proof.search_front import search_front, search_least_cost

SEEDS = st.integers(0, 2**32 - 1)


def random_spd(rng, count, n, spread=3.0):
    """SPD matrices with condition numbers up to 10^(2 spread)."""
    q = np.linalg.qr(rng.normal(size=(count, n, n)))[0]
    values = 10.0 ** rng.uniform(-spread, spread, (count, n))
    return np.einsum("bij,bj,bkj->bik", q, values, q)


def random_dynamic(rng, count, n, loss):
    """-omega^2 M + K (1 + j loss) with omega among the natural frequencies; undamped for loss 0."""
    stiffness = random_spd(rng, count, n, 1.0)
    omega2 = 10.0 ** rng.uniform(-1, 1, count)
    return stiffness * (1 + 1j * loss) - omega2[:, None, None] * np.eye(n)


@settings(max_examples=40, deadline=None)
@given(SEEDS, st.integers(1, 7))
def test_static_solve_against_numpy(seed, n):
    rng = np.random.default_rng(seed)
    k, load = random_spd(rng, 50, n), rng.normal(size=n)
    q, supported = static_solve(k, load)
    assert supported.all()
    residual = np.abs(np.einsum("bij,bj->bi", k, q) - load).max(axis=1)
    size = np.abs(k).max(axis=(1, 2)) * np.abs(q).max(axis=1)
    assert (residual <= 1e-12 * size).all()


def test_unsupported_machine_is_told():
    k = np.diag([1.0, 1.0, 0.0])[None]
    q, supported = static_solve(k, np.ones(3))
    assert not supported[0] and np.isnan(q).all()
    _, supported = static_solve(-np.eye(3)[None], np.ones(3))
    assert not supported[0]


@settings(max_examples=40, deadline=None)
@given(SEEDS, st.integers(1, 7))
def test_inertia_count_against_eigenvalues(seed, n):
    rng = np.random.default_rng(seed)
    k = random_spd(rng, 60, n, 1.5)
    values = np.linalg.eigvalsh(k)
    shift = 10.0 ** rng.uniform(-2, 2, 60)
    # Shifts within rounding of an eigenvalue have no right answer.
    clear = np.abs(values - shift[:, None]).min(axis=1) > 1e-9 * values[:, -1]
    counts, _ = inertia_count(k, shift)
    assert (counts[clear] == (values < shift[:, None]).sum(axis=1)[clear]).all()


def test_tiny_pivot_of_a_well_conditioned_system_is_caught():
    """K = [[1, 1], [1, 1.55]] at shift 1: [[0, 1], [1, 0.55]] has a zero first pivot and condition number 1.7.

    Its eigenvalues are 0.275 -+ sqrt(0.275^2 + 1) = -0.762 and 1.312: one below the shift. Also with a pivot
    of 1e-14 instead of zero (ALGORITHMS 1 and DESIGN 6, pitfalls).
    """
    for tiny in (0.0, 1e-14, -1e-14):
        k = np.array([[[1.0 + tiny, 1.0], [1.0, 1.55]]])
        counts, doubtful = inertia_count(k, np.array([1.0]))
        assert counts[0] == 1 and doubtful[0]
        d = (k - np.eye(2)).astype(complex)
        right = np.array([[1.0 + 0j, 2.0]])
        q, doubtful = complex_solve(d, right)
        assert doubtful[0]
        assert q[0] == pytest.approx(np.linalg.solve(d[0], right[0]), rel=1e-12)


@settings(max_examples=40, deadline=None)
@given(SEEDS, st.integers(1, 7), st.sampled_from([0.0, 1e-6, 1e-3, 0.1, 1.0]))
def test_complex_solve_against_numpy(seed, n, loss):
    rng = np.random.default_rng(seed)
    d = random_dynamic(rng, 60, n, loss)
    right = rng.normal(size=(60, n)) + 1j * rng.normal(size=(60, n))
    q, _ = complex_solve(d, right)
    check_solutions(d, right, q, 1e-10)


def check_solutions(d, right, q, tolerance):
    """Equal to numpy.linalg.solve to the tolerance, times the condition number where that is above 1e3."""
    expected = np.linalg.solve(d, right[:, :, None])[:, :, 0]
    condition = np.linalg.cond(d)
    error = np.abs(q - expected).max(axis=1) / np.abs(expected).max(axis=1)
    assert (error <= tolerance * np.maximum(1.0, condition / 1e3)).all()


def test_pack_and_unpack():
    matrix = np.array([[[1.0, 2.0, 4.0], [2.0, 3.0, 5.0], [4.0, 5.0, 6.0]]])
    assert pack(matrix).tolist() == [[1.0, 2.0, 3.0, 4.0, 5.0, 6.0]]
    assert (unpack(pack(matrix), 3) == matrix).all()


def test_small_work_is_not_compiled():
    assert not worth_compiling(1000, 6)
    assert worth_compiling(1e9, 6)
    assert not worth_compiling(1e9, 10)


def test_generated_text_compiles_as_python():
    for n in range(1, 8):
        compile(module_text(n), f"kernels_{n}", "exec")


def interpreted():
    """The search and response nodes uncompiled, on the numpy block kernels: slow, but the same text."""
    names = {**vars(block_rules), **vars(block_search), **vars(block_response)}
    return types.SimpleNamespace(**{k: v for k, v in names.items() if not k.startswith("__")})


@pytest.mark.parametrize("groups", [2, *(pytest.param(g, marks=pytest.mark.nightly) for g in (3, 4))])
def test_block_search_text_finds_what_the_reference_finds(monkeypatch, tmp_path, groups):
    """The text that is compiled, run as plain Python, against the numpy rules: optimum, front, counts."""
    monkeypatch.setenv("DETUNE_CACHE", str(tmp_path))
    monkeypatch.setattr(search_compiled, "load_kernels", lambda n, announce=None: interpreted())
    selection = make_instance(
        InstanceSettings(
            parts=4, groups=groups, seed=2, ballast_steps=1, tight=False, response_share=0.5, separation=0.02
        )
    )
    for search in (search_least_cost, search_front):
        block = search(selection, settings=SearchSettings(kernels="compiled"))
        plain = search(selection, settings=SearchSettings(kernels="numpy"))
        assert block.designs == plain.designs
        assert block.kernels == "compiled" and sum(block.counts.values()) == selection.design_count


COMPILED_SIZES = [pytest.param(2), *(pytest.param(n, marks=pytest.mark.nightly) for n in (1, 3, 4, 5, 6, 7))]


@pytest.mark.parametrize("n", COMPILED_SIZES)
def test_compiled_kernels_equal_the_reference(n):
    """1e-10 on random systems, ill-conditioned and undamped ones included; doubtful ones are flagged."""
    from detune.proof import kernels_numba

    rng = np.random.default_rng(n)
    k, load, rows = random_spd(rng, 150, n, 2.0), rng.normal(size=n), rng.normal(size=(5, n))
    z, supported = kernels_numba.static_projection(k, load, rows)
    q, _ = static_solve(k, load)
    assert supported.all()
    scale = np.abs(q).max(axis=1, keepdims=True) * np.abs(rows).sum(axis=1)
    condition = np.linalg.cond(k)[:, None]
    assert (np.abs(z - q @ rows.T) <= 1e-10 * scale * np.maximum(1.0, condition / 1e3)).all()
    values = np.linalg.eigvalsh(k)
    shift = values[:, n // 2] * rng.choice([0.9, 1.1, 1.0 + 1e-6], 150)
    counts, _ = kernels_numba.inertia_count(k, shift)
    assert (counts == kernels_numpy.inertia_count(k, shift)[0]).all()
    for loss in (0.0, 1e-6, 1e-2, 0.3):
        d = random_dynamic(rng, 150, n, loss)
        right = rng.normal(size=(150, n)) + 1j * rng.normal(size=(150, n))
        q, _ = kernels_numba.complex_solve(d, right)
        check_solutions(d, right, q, 1e-10)
    if n >= 2:
        zero_pivot = np.eye(n)[None] * 1.0
        zero_pivot[0, 0, 1] = zero_pivot[0, 1, 0] = 2.0
        zero_pivot[0, 0, 0] = 0.0
        q, doubtful = kernels_numba.complex_solve(zero_pivot.astype(complex), np.ones((1, n), dtype=complex))
        assert doubtful[0] and np.allclose(zero_pivot[0] @ q[0], 1.0)
        counts, doubtful = kernels_numba.inertia_count(zero_pivot + np.eye(n), np.array([1.0]))
        assert doubtful[0] and counts[0] == 1


@pytest.mark.nightly
@pytest.mark.parametrize("number", range(12))
def test_compiled_search_equals_the_reference(number):
    """Optimum, front and the sum of the counts, compiled against numpy, one worker and two."""
    shapes = [(30, 2), (14, 3), (9, 4), (5, 5)]
    parts, groups = shapes[number % 4]
    selection = make_instance(
        InstanceSettings(
            parts=parts, groups=groups, seed=number, ballast_steps=1 + number % 2, empty=number % 3 == 0,
            tight=False, response_share=0.2, separation=0.05, base_motion=number % 2 == 1,
        )
    )  # fmt: skip
    for search in (search_least_cost, search_front):
        plain = search(selection, settings=SearchSettings(kernels="numpy"))
        for workers in (1, 2):
            fast = search(selection, settings=SearchSettings(kernels="compiled", workers=workers))
            assert fast.designs == plain.designs
            assert sum(fast.counts.values()) == selection.design_count


@pytest.mark.nightly
def test_compiled_response_equals_the_reference():
    from detune.proof.kernels_numba import load_kernels
    from detune.proof.search_compiled import response_screen

    selection = make_instance(InstanceSettings(parts=20, groups=3, seed=4, ballast_steps=3, base_motion=True))
    rng = np.random.default_rng(0)
    group = selection.groups[0]
    viscous = replace(group, viscous=1e-3 * group.kappa_dynamic, count=2)
    selection = replace(selection, groups=(viscous, *selection.groups[1:]))
    designs = random_designs(selection, 1000, rng)
    screen = response_screen(selection, load_kernels(6))
    assert screen(selection, designs) == pytest.approx(
        response_margin(selection, designs), rel=1e-10, abs=1e-10
    )
