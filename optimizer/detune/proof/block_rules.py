"""Rules of the bounded search on blocks of 64: static windows, bands, and the domain filter.

The text below the mark is compiled by `kernels_numba.load_kernels`, which puts the generated block kernels in
place of the imported ones; uncompiled it runs on the numpy reference kernels. Rules and slacks are those of
`search_bounds.py`: a doubtful factorisation never removes a design. Packed blocks hold entry k of lane b at
[k * 64 + b], window buffers hold row r of lane b at [r * 64 + b].
"""

from __future__ import annotations

import numpy as np

from detune.proof.block_data import Ask, Bench, Domain, Frame, Node
from detune.proof.block_reference import factor_block, inertia_block, row_block
from detune.proof.selection_data import Floats, Integers

# --- compiled below ---


def new_bench(frame: Frame, node: Node) -> Bench:
    """Work space for the nodes of a frame; the windows are those of the node in every lane."""
    m, n, rows = node.static.shape[0], frame.load.shape[0], frame.rows.shape[0]
    bench = Bench(
        np.empty((m + n + 4) * 64),
        np.empty((m + n + 4) * 64),
        np.empty(rows * 64),
        np.empty(rows * 64),
        np.empty(64),
        np.empty(64),
        np.empty(64),
        np.empty(64),
        np.empty((3, 64)),
        np.empty((8, 64)),
        np.empty(64, dtype=np.int64),
        np.empty(64, dtype=np.int64),
    )
    for r in range(rows):
        bench.window_low[r * 64 : r * 64 + 64] = node.row_low[r]
        bench.window_high[r * 64 : r * 64 + 64] = node.row_high[r]
    return bench


def lane_demand(ask: Ask, bench: Bench) -> None:
    """Value that a design of at least each lane's cost must reach; -inf where any will do."""
    steps = ask.steps.shape[0]
    for b in range(64):
        bench.need[b] = -np.inf
        if steps > 0:
            limit = bench.cost[b] - 1.0e-12 * abs(bench.cost[b])
            for i in range(steps - 1, -1, -1):
                if ask.steps[i] <= limit:
                    bench.need[b] = ask.values[i] - 1.0e-9
                    break


def mark_bands(low: Floats, high: Floats, ask: Ask, bench: Bench, fails: Floats) -> None:
    """Mark in fails the lanes in which some eigenvalue stays in a band for all K between low and high (packed)."""
    scratch, need = bench.scratch, bench.need
    below, above, shift, count_low, count_high = scratch[0], scratch[1], scratch[2], scratch[3], scratch[4]
    good_low, good_high = scratch[5], scratch[6]
    for i in range(ask.bands.shape[1]):
        for b in range(64):
            separation = ask.bands[2, i]
            if ask.flags[0] == 1 and need[b] > separation:
                separation = need[b]
            first = 6.283185307179586 * ask.bands[0, i] * (1.0 - separation)
            last = 6.283185307179586 * ask.bands[1, i] * (1.0 + separation)
            below[b] = first * abs(first) + 1.0e-6 * first * first
            above[b] = last * abs(last) - 1.0e-6 * last * last
            if not (above[b] < 1.0e300 and below[b] > -1.0e300):
                below[b] = -1.0
                above[b] = -1.0
        inertia_block(low, below, count_low, good_low)
        for b in range(64):
            shift[b] = max(above[b], below[b])
        inertia_block(high, shift, count_high, good_high)
        for b in range(64):
            trusted = good_low[b] == 1.0 and good_high[b] == 1.0
            if trusted and above[b] > below[b] and count_high[b] > count_low[b]:
                fails[b] = 1.0


def results(block: Floats) -> tuple[Floats, Floats, Floats, Floats]:
    """Views of the last four entries of a factored block: load^T X load, trust, row^T X load, row^T X row."""
    end = block.shape[0]
    return (
        block[end - 256 : end - 192],
        block[end - 192 : end - 128],
        block[end - 128 : end - 64],
        block[end - 64 :],
    )


def mark_static_box(frame: Frame, ask: Ask, bench: Bench) -> None:
    """Mark in bench.fails the lanes in which every K between soft and stiff (overwritten) breaks a window."""
    need, fails = bench.need, bench.fails
    load_soft, good_soft, value_soft, row_soft = results(bench.soft)
    load_stiff, good_stiff, value_stiff, row_stiff = results(bench.stiff)
    factor_block(bench.soft, frame.load)
    factor_block(bench.stiff, frame.load)
    for r in range(frame.rows.shape[0]):
        row_block(bench.soft, frame.rows[r])
        row_block(bench.stiff, frame.rows[r])
        window_low = bench.window_low[r * 64 : r * 64 + 64]
        window_high = bench.window_high[r * 64 : r * 64 + 64]
        for b in range(64):
            row_part = max(row_soft[b] - row_stiff[b], 0.0) + 1.0e-10 * (row_soft[b] + row_stiff[b])
            load_part = max(load_soft[b] - load_stiff[b], 0.0) + 1.0e-10 * (load_soft[b] + load_stiff[b])
            size = np.sqrt(row_soft[b] * load_soft[b])
            half = 0.5 * np.sqrt(row_part * load_part) + 1.0e-8 * size
            middle = 0.5 * (value_soft[b] + value_stiff[b])
            limit_low, limit_high = window_low[b], window_high[b]
            if ask.flags[1] == 1 and need[b] > 0.0:
                if limit_low > 0.0:
                    limit_low = limit_low * (1.0 + need[b])
                if limit_high > 0.0:
                    limit_high = limit_high / (1.0 + need[b])
            broken = middle + half < limit_low or middle - half > limit_high or limit_low > limit_high
            if broken and good_soft[b] == 1.0 and good_stiff[b] == 1.0:
                fails[b] = 1.0


def mark_static_point(frame: Frame, ask: Ask, bench: Bench) -> None:
    """Mark in bench.fails the lanes whose static compression breaks a window; bench.soft is overwritten."""
    need, fails = bench.need, bench.fails
    load_size, good, value, row_size = results(bench.soft)
    factor_block(bench.soft, frame.load)
    for r in range(frame.rows.shape[0]):
        row_block(bench.soft, frame.rows[r])
        window_low = bench.window_low[r * 64 : r * 64 + 64]
        window_high = bench.window_high[r * 64 : r * 64 + 64]
        for b in range(64):
            slack = 1.0e-8 * np.sqrt(row_size[b] * load_size[b])
            limit_low, limit_high = window_low[b], window_high[b]
            if ask.flags[1] == 1 and need[b] > 0.0:
                if limit_low > 0.0:
                    limit_low = limit_low * (1.0 + need[b])
                if limit_high > 0.0:
                    limit_high = limit_high / (1.0 + need[b])
            broken = value[b] + slack < limit_low or value[b] - slack > limit_high
            if broken and good[b] == 1.0:
                fails[b] = 1.0


def fill_parts(matrix_map: Floats, axis: Floats, low: Floats, high: Floats, bench: Bench) -> None:
    """bench.soft, bench.stiff: packed low and high plus the matrix of each lane's axis stiffness (3, 64)."""
    x, y, z = axis[0], axis[1], axis[2]
    for k in range(low.shape[0]):
        m0, m1, m2 = matrix_map[k, 0], matrix_map[k, 1], matrix_map[k, 2]
        base_low, base_high = low[k], high[k]
        out_low = bench.soft[k * 64 : k * 64 + 64]
        out_high = bench.stiff[k * 64 : k * 64 + 64]
        for b in range(64):
            part = m0 * x[b] + m1 * y[b] + m2 * z[b]
            out_low[b] = base_low + part
            out_high[b] = base_high + part


def fill_windows(group: Domain, index: Integers, bench: Bench) -> None:
    """Windows of one group's stations for the part of each lane."""
    for s in range(group.lower.shape[0]):
        low_row, high_row = group.lower[s], group.upper[s]
        start = (group.first_row + s) * 64
        low_block, high_block = bench.window_low[start : start + 64], bench.window_high[start : start + 64]
        for b in range(64):
            low_block[b] = low_row[index[b]]
            high_block[b] = high_row[index[b]]


def filter_group(
    frame: Frame, low: Node, high: Node, group: Domain, rest: float, ask: Ask, verdict: Integers
) -> None:
    """Test each part of a domain against the box of everything else; verdict 0 keep, 1 static, 2 eigenvalue.

    low, high: least and greatest stiffness of the prefix and the other groups. rest: cost of the prefix and of the
    cheapest parts of the other groups.
    """
    count = group.cost.shape[0]
    bench = new_bench(frame, low)
    for start in range(0, count, 64):
        width = min(64, count - start)
        for b in range(64):
            p = start + min(b, width - 1)
            bench.lane_u[b] = p
            bench.cost[b] = rest + group.cost[p]
            for a in range(3):
                bench.axis[a, b] = group.static[a, p]
        fill_windows(group, bench.lane_u, bench)
        lane_demand(ask, bench)
        bench.fails[:] = 0.0
        bench.eigen_fails[:] = 0.0
        fill_parts(group.matrix_map, bench.axis, low.static, high.static, bench)
        mark_static_box(frame, ask, bench)
        alive = 0
        for b in range(width):
            alive += 1 if bench.fails[b] == 0.0 else 0
        if alive > 0 and ask.bands.shape[1] > 0:
            for b in range(64):
                for a in range(3):
                    bench.axis[a, b] = group.dynamic[a, bench.lane_u[b]]
            fill_parts(group.matrix_map, bench.axis, low.dynamic, high.dynamic, bench)
            size = low.dynamic.shape[0] * 64
            mark_bands(bench.soft[:size], bench.stiff[:size], ask, bench, bench.eigen_fails)
        for b in range(width):
            verdict[start + b] = 1 if bench.fails[b] == 1.0 else (2 if bench.eigen_fails[b] == 1.0 else 0)
