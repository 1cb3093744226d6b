"""Nodes of the bounded search over blocks of 64: the text that is compiled, and its plain reference.

The functions below the mark are compiled by `kernels_numba.load_kernels`, which puts the generated block kernels in
place of the imported ones; uncompiled they run with the numpy reference kernels. They use only arrays, scalars and
each other. Rules and slacks are those of `search_bounds.py`: a doubtful factorisation never removes a design.

Arrays of a group's domain: cost (P,), static and dynamic (3, P), lower and upper (S_g, P), all P lanes in the
same order. `bands` (3, I): low, high, separation. `steps`, `values`: the archive's staircase. `flags`: whether a
required value acts on the bands, and on the static windows. `counts`: designs removed by cost, static box,
eigenvalue box, static pair, static, eigenvalue. Window buffers hold row r of lane b at [r * 64 + b].
"""

from __future__ import annotations

import numpy as np

from detune.proof.block_reference import factor_block, inertia_block, row_block
from detune.proof.selection_data import Floats, Integers

# --- compiled below ---

CHUNK = 8


def required(cost: float, steps: Floats, values: Floats) -> float:
    """Value that a design of at least this cost must reach; -inf if any will do."""
    limit = cost - 1.0e-12 * abs(cost)
    for i in range(steps.shape[0] - 1, -1, -1):
        if steps[i] <= limit:
            return values[i] - 1.0e-9
    return -np.inf


def lane_demand(cost: Floats, steps: Floats, values: Floats, need: Floats) -> None:
    """Required value of each of 64 lanes."""
    for b in range(64):
        need[b] = required(cost[b], steps, values) if steps.shape[0] > 0 else -np.inf


def mark_bands(
    low: Floats, high: Floats, need: Floats, bands: Floats, flags: Integers, fails: Floats, scratch: Floats
) -> None:
    """Mark in fails the lanes in which some eigenvalue stays in a band for all K between low and high (packed)."""
    below, above, shift, count_low, count_high = scratch[0], scratch[1], scratch[2], scratch[3], scratch[4]
    good_low, good_high = scratch[5], scratch[6]
    for i in range(bands.shape[1]):
        for b in range(64):
            separation = bands[2, i]
            if flags[0] == 1 and need[b] > separation:
                separation = need[b]
            first = 6.283185307179586 * bands[0, i] * (1.0 - separation)
            last = 6.283185307179586 * bands[1, i] * (1.0 + separation)
            below[b] = first * abs(first) + 1.0e-6 * first * first
            above[b] = last * abs(last) - 1.0e-6 * last * last
            if above[b] > 1.0e300 or below[b] < -1.0e300:
                below[b] = -1.0
                above[b] = -1.0
        inertia_block(low, below, count_low, good_low)
        for b in range(64):
            shift[b] = max(above[b], below[b])
        inertia_block(high, shift, count_high, good_high)
        for b in range(64):
            if (
                above[b] > below[b]
                and count_high[b] > count_low[b]
                and good_low[b] == 1.0
                and good_high[b] == 1.0
            ):
                fails[b] = 1.0


def mark_static_box(
    low: Floats,
    high: Floats,
    rows: Floats,
    load: Floats,
    lower: Floats,
    upper: Floats,
    need: Floats,
    flags: Integers,
    fails: Floats,
    scratch: Floats,
    solved: Floats,
) -> None:
    """Mark in fails the lanes in which every K between low and high (packed, overwritten) breaks a window."""
    load_soft, load_stiff, good_soft, good_stiff = scratch[0], scratch[1], scratch[2], scratch[3]
    value_soft, value_stiff, row_soft, row_stiff = scratch[4], scratch[5], scratch[6], scratch[7]
    factor_block(low, load, solved[0], load_soft, good_soft)
    factor_block(high, load, solved[1], load_stiff, good_stiff)
    for r in range(rows.shape[0]):
        row_block(low, solved[0], rows[r], value_soft, row_soft)
        row_block(high, solved[1], rows[r], value_stiff, row_stiff)
        window_low = lower[r * 64 : r * 64 + 64]
        window_high = upper[r * 64 : r * 64 + 64]
        for b in range(64):
            row_part = max(row_soft[b] - row_stiff[b], 0.0) + 1.0e-10 * (row_soft[b] + row_stiff[b])
            load_part = max(load_soft[b] - load_stiff[b], 0.0) + 1.0e-10 * (load_soft[b] + load_stiff[b])
            size = np.sqrt(row_soft[b] * load_soft[b])
            half = 0.5 * np.sqrt(row_part * load_part) + 1.0e-8 * size
            middle = 0.5 * (value_soft[b] + value_stiff[b])
            limit_low, limit_high = window_low[b], window_high[b]
            if flags[1] == 1 and need[b] > 0.0:
                if limit_low > 0.0:
                    limit_low = limit_low * (1.0 + need[b])
                if limit_high > 0.0:
                    limit_high = limit_high / (1.0 + need[b])
            broken = middle + half < limit_low or middle - half > limit_high or limit_low > limit_high
            if broken and good_soft[b] == 1.0 and good_stiff[b] == 1.0:
                fails[b] = 1.0


def mark_static_point(
    stiffness: Floats,
    rows: Floats,
    load: Floats,
    lower: Floats,
    upper: Floats,
    need: Floats,
    flags: Integers,
    fails: Floats,
    scratch: Floats,
    solved: Floats,
) -> None:
    """Mark in fails the lanes whose static compression breaks a window; the packed block is overwritten."""
    load_size, good, value, row_size = scratch[0], scratch[1], scratch[2], scratch[3]
    factor_block(stiffness, load, solved[0], load_size, good)
    for r in range(rows.shape[0]):
        row_block(stiffness, solved[0], rows[r], value, row_size)
        window_low = lower[r * 64 : r * 64 + 64]
        window_high = upper[r * 64 : r * 64 + 64]
        for b in range(64):
            slack = 1.0e-8 * np.sqrt(row_size[b] * load_size[b])
            limit_low, limit_high = window_low[b], window_high[b]
            if flags[1] == 1 and need[b] > 0.0:
                if limit_low > 0.0:
                    limit_low = limit_low * (1.0 + need[b])
                if limit_high > 0.0:
                    limit_high = limit_high / (1.0 + need[b])
            broken = value[b] + slack < limit_low or value[b] - slack > limit_high
            if broken and good[b] == 1.0:
                fails[b] = 1.0


def filter_group(
    static_low: Floats,
    static_high: Floats,
    dynamic_low: Floats,
    dynamic_high: Floats,
    matrix_map: Floats,
    static: Floats,
    dynamic: Floats,
    cost: Floats,
    lower: Floats,
    upper: Floats,
    first_row: int,
    row_low: Floats,
    row_high: Floats,
    rows: Floats,
    load: Floats,
    bands: Floats,
    steps: Floats,
    values: Floats,
    flags: Integers,
    verdict: Integers,
) -> None:
    """Test each part of a domain against the box of the others; verdict 0 keep, 1 static, 2 eigenvalue.

    static_low ... dynamic_high (m,): box of everything else. cost (P,): cost bound of each part's completions.
    """
    size, m, row_count = cost.shape[0], static_low.shape[0], rows.shape[0]
    soft, stiff = np.empty(m * 64), np.empty(m * 64)
    window_low, window_high = np.empty(row_count * 64), np.empty(row_count * 64)
    lane, need = np.empty(64), np.empty(64)
    scratch, solved = np.empty((8, 64)), np.empty((2, load.shape[0] * 64))
    static_fails, eigen_fails = np.empty(64), np.empty(64)
    for r in range(row_count):
        window_low[r * 64 : r * 64 + 64] = row_low[r]
        window_high[r * 64 : r * 64 + 64] = row_high[r]
    axis = np.zeros((3, 64))
    for start in range(0, size, 64):
        width = min(64, size - start)
        for b in range(64):
            p = start + min(b, width - 1)
            lane[b] = cost[p]
            for s in range(lower.shape[0]):
                window_low[(first_row + s) * 64 + b] = lower[s, p]
                window_high[(first_row + s) * 64 + b] = upper[s, p]
            for a in range(3):
                axis[a, b] = static[a, p]
        lane_demand(lane, steps, values, need)
        static_fails[:] = 0.0
        eigen_fails[:] = 0.0
        fill_parts(matrix_map, axis, static_low, static_high, soft, stiff)
        mark_static_box(
            soft, stiff, rows, load, window_low, window_high, need, flags, static_fails, scratch, solved
        )
        alive = 0
        for b in range(width):
            alive += 1 if static_fails[b] == 0.0 else 0
        if alive > 0 and bands.shape[1] > 0:
            for b in range(64):
                p = start + min(b, width - 1)
                for a in range(3):
                    axis[a, b] = dynamic[a, p]
            fill_parts(matrix_map, axis, dynamic_low, dynamic_high, soft, stiff)
            mark_bands(soft, stiff, need, bands, flags, eigen_fails, scratch)
        for b in range(width):
            verdict[start + b] = 1 if static_fails[b] == 1.0 else (2 if eigen_fails[b] == 1.0 else 0)


def fill_parts(
    matrix_map: Floats, axis: Floats, low: Floats, high: Floats, soft: Floats, stiff: Floats
) -> None:
    """soft, stiff: packed blocks low and high plus the matrix of each lane's axis stiffness (3, 64)."""
    x, y, z = axis[0], axis[1], axis[2]
    for k in range(low.shape[0]):
        m0, m1, m2 = matrix_map[k, 0], matrix_map[k, 1], matrix_map[k, 2]
        base_low, base_high = low[k], high[k]
        out_low = soft[k * 64 : k * 64 + 64]
        out_high = stiff[k * 64 : k * 64 + 64]
        for b in range(64):
            part = m0 * x[b] + m1 * y[b] + m2 * z[b]
            out_low[b] = base_low + part
            out_high[b] = base_high + part


def part_matrices(matrix_map: Floats, axis: Floats) -> Floats:
    """Packed matrices (m, P) of axis stiffness (3, P)."""
    out = np.empty((matrix_map.shape[0], axis.shape[1]))
    for k in range(matrix_map.shape[0]):
        for p in range(axis.shape[1]):
            out[k, p] = (
                matrix_map[k, 0] * axis[0, p] + matrix_map[k, 1] * axis[1, p] + matrix_map[k, 2] * axis[2, p]
            )
    return out


def chunk_boxes(axis: Floats) -> tuple[Floats, Floats]:
    """Least and greatest axis stiffness (3, C) over chunks of parts (3, P)."""
    chunks = (axis.shape[1] + CHUNK - 1) // CHUNK
    low, high = np.empty((3, chunks)), np.empty((3, chunks))
    for a in range(3):
        for c in range(chunks):
            least, most = axis[a, c * CHUNK], axis[a, c * CHUNK]
            for p in range(c * CHUNK, min((c + 1) * CHUNK, axis.shape[1])):
                least = min(least, axis[a, p])
                most = max(most, axis[a, p])
            low[a, c], high[a, c] = least, most
    return low, high


def chunk_least(values: Floats) -> Floats:
    """Least value (S, C) over chunks of (S, P)."""
    chunks = (values.shape[1] + CHUNK - 1) // CHUNK
    out = np.empty((values.shape[0], chunks))
    for s in range(values.shape[0]):
        for c in range(chunks):
            least = values[s, c * CHUNK]
            for p in range(c * CHUNK, min((c + 1) * CHUNK, values.shape[1])):
                least = min(least, values[s, p])
            out[s, c] = least
    return out


def pair_survivors(
    base: Floats,
    prefix_cost: float,
    rows: Floats,
    load: Floats,
    row_low: Floats,
    row_high: Floats,
    u_map: Floats,
    u_static: Floats,
    u_cost: Floats,
    u_lower: Floats,
    u_upper: Floats,
    u_row: int,
    v_map: Floats,
    v_static: Floats,
    v_cost: Floats,
    v_lower: Floats,
    v_upper: Floats,
    v_row: int,
    cap: float,
    steps: Floats,
    values: Floats,
    flags: Integers,
    counts: Integers,
) -> Integers:
    """Pairs of chunks (K, 2) of the last two domains that the cost and the static interval do not exclude."""
    m, row_count = base.shape[0], rows.shape[0]
    u_axis_low, u_axis_high = chunk_boxes(u_static)
    v_axis_low, v_axis_high = chunk_boxes(v_static)
    u_low, u_high = part_matrices(u_map, u_axis_low), part_matrices(u_map, u_axis_high)
    v_low, v_high = part_matrices(v_map, v_axis_low), part_matrices(v_map, v_axis_high)
    u_least, v_least = chunk_least(u_cost.reshape(1, -1)), chunk_least(v_cost.reshape(1, -1))
    uw_low, uw_high = chunk_least(u_lower), -chunk_least(-u_upper)
    vw_low, vw_high = chunk_least(v_lower), -chunk_least(-v_upper)
    u_chunks, v_chunks = u_low.shape[1], v_low.shape[1]
    soft, stiff = np.empty(m * 64), np.empty(m * 64)
    window_low, window_high = np.empty(row_count * 64), np.empty(row_count * 64)
    for r in range(row_count):
        window_low[r * 64 : r * 64 + 64] = row_low[r]
        window_high[r * 64 : r * 64 + 64] = row_high[r]
    lane, need, fails = np.empty(64), np.empty(64), np.empty(64)
    scratch, solved = np.empty((8, 64)), np.empty((2, load.shape[0] * 64))
    kept = np.empty((u_chunks * v_chunks, 2), dtype=np.int64)
    found = 0
    pair_u, pair_v = np.empty(64, dtype=np.int64), np.empty(64, dtype=np.int64)
    width = 0
    for pair in range(u_chunks * v_chunks + 1):
        if pair < u_chunks * v_chunks:
            cu, cv = pair // v_chunks, pair % v_chunks
            bound = prefix_cost + u_least[0, cu] + v_least[0, cv]
            if bound > cap:
                counts[0] += chunk_size(cu, u_cost.shape[0]) * chunk_size(cv, v_cost.shape[0])
                continue
            pair_u[width], pair_v[width], lane[width] = cu, cv, bound
            width += 1
        if width == 0 or (width < 64 and pair < u_chunks * v_chunks):
            continue
        for b in range(width, 64):
            pair_u[b], pair_v[b], lane[b] = pair_u[width - 1], pair_v[width - 1], lane[width - 1]
        fill_pairs(base, u_low, v_low, pair_u, pair_v, soft)
        fill_pairs(base, u_high, v_high, pair_u, pair_v, stiff)
        fill_windows(uw_low, uw_high, pair_u, u_row, window_low, window_high)
        fill_windows(vw_low, vw_high, pair_v, v_row, window_low, window_high)
        lane_demand(lane, steps, values, need)
        fails[:] = 0.0
        mark_static_box(soft, stiff, rows, load, window_low, window_high, need, flags, fails, scratch, solved)
        for b in range(width):
            if fails[b] == 1.0:
                size = chunk_size(pair_u[b], u_cost.shape[0]) * chunk_size(pair_v[b], v_cost.shape[0])
                counts[3] += size
            else:
                kept[found, 0], kept[found, 1] = pair_u[b], pair_v[b]
                found += 1
        width = 0
    return kept[:found]


def chunk_size(chunk: int, size: int) -> int:
    """Number of parts in a chunk of a domain of the given size."""
    return min(CHUNK, size - chunk * CHUNK)


def fill_pairs(base: Floats, u: Floats, v: Floats, pair_u: Integers, pair_v: Integers, out: Floats) -> None:
    """Packed block base + u[:, pair_u] + v[:, pair_v]."""
    for k in range(base.shape[0]):
        start, row_u, row_v = base[k], u[k], v[k]
        block = out[k * 64 : k * 64 + 64]
        for b in range(64):
            block[b] = start + row_u[pair_u[b]] + row_v[pair_v[b]]


def fill_windows(
    lower: Floats, upper: Floats, index: Integers, first_row: int, window_low: Floats, window_high: Floats
) -> None:
    """Windows of one group's stations for the part or chunk of each lane."""
    for s in range(lower.shape[0]):
        low_row, high_row = lower[s], upper[s]
        low_block = window_low[(first_row + s) * 64 : (first_row + s) * 64 + 64]
        high_block = window_high[(first_row + s) * 64 : (first_row + s) * 64 + 64]
        for b in range(64):
            low_block[b] = low_row[index[b]]
            high_block[b] = high_row[index[b]]


def last_two(
    static_base: Floats,
    dynamic_base: Floats,
    prefix_cost: float,
    rows: Floats,
    load: Floats,
    row_low: Floats,
    row_high: Floats,
    u_map: Floats,
    u_static: Floats,
    u_dynamic: Floats,
    u_cost: Floats,
    u_lower: Floats,
    u_upper: Floats,
    u_row: int,
    v_map: Floats,
    v_static: Floats,
    v_dynamic: Floats,
    v_cost: Floats,
    v_lower: Floats,
    v_upper: Floats,
    v_row: int,
    bands: Floats,
    cap: float,
    steps: Floats,
    values: Floats,
    flags: Integers,
    counts: Integers,
) -> Integers:
    """Pairs (K, 2) of lanes of the last two domains that pass cost, static windows and bands."""
    pairs = pair_survivors(
        static_base, prefix_cost, rows, load, row_low, row_high,
        u_map, u_static, u_cost, u_lower, u_upper, u_row,
        v_map, v_static, v_cost, v_lower, v_upper, v_row,
        cap, steps, values, flags, counts,
    )  # fmt: skip
    found = np.empty((64, 2), dtype=np.int64)
    if pairs.shape[0] == 0:
        return found[:0]
    m, row_count = static_base.shape[0], rows.shape[0]
    u_matrices, v_matrices = part_matrices(u_map, u_static), part_matrices(v_map, v_static)
    block = np.empty(m * 64)
    window_low, window_high = np.empty(row_count * 64), np.empty(row_count * 64)
    for r in range(row_count):
        window_low[r * 64 : r * 64 + 64] = row_low[r]
        window_high[r * 64 : r * 64 + 64] = row_high[r]
    lane, need, fails = np.empty(64), np.empty(64), np.empty(64)
    scratch, solved = np.empty((8, 64)), np.empty((2, load.shape[0] * 64))
    lane_u, lane_v = np.empty(64, dtype=np.int64), np.empty(64, dtype=np.int64)
    number, width = 0, 0
    for t in range(pairs.shape[0]):
        for i in range(chunk_size(pairs[t, 0], u_cost.shape[0])):
            for j in range(chunk_size(pairs[t, 1], v_cost.shape[0])):
                u, v = pairs[t, 0] * CHUNK + i, pairs[t, 1] * CHUNK + j
                cost = prefix_cost + u_cost[u] + v_cost[v]
                if cost > cap:
                    counts[0] += 1
                    continue
                lane_u[width], lane_v[width], lane[width] = u, v, cost
                width += 1
                if width < 64:
                    continue
                fill_pairs(static_base, u_matrices, v_matrices, lane_u, lane_v, block)
                fill_windows(u_lower, u_upper, lane_u, u_row, window_low, window_high)
                fill_windows(v_lower, v_upper, lane_v, v_row, window_low, window_high)
                lane_demand(lane, steps, values, need)
                fails[:] = 0.0
                mark_static_point(
                    block, rows, load, window_low, window_high, need, flags, fails, scratch, solved
                )
                found, number = keep_lanes(found, number, lane_u, lane_v, fails, 64, counts, 4)
                width = 0
    if width > 0:
        for b in range(width, 64):
            lane_u[b], lane_v[b], lane[b] = lane_u[width - 1], lane_v[width - 1], lane[width - 1]
        fill_pairs(static_base, u_matrices, v_matrices, lane_u, lane_v, block)
        fill_windows(u_lower, u_upper, lane_u, u_row, window_low, window_high)
        fill_windows(v_lower, v_upper, lane_v, v_row, window_low, window_high)
        lane_demand(lane, steps, values, need)
        fails[:] = 0.0
        mark_static_point(block, rows, load, window_low, window_high, need, flags, fails, scratch, solved)
        found, number = keep_lanes(found, number, lane_u, lane_v, fails, width, counts, 4)
    return band_survivors(
        dynamic_base, prefix_cost, u_map, u_dynamic, u_cost, v_map, v_dynamic, v_cost,
        bands, steps, values, flags, counts, found[:number],
    )  # fmt: skip


def keep_lanes(
    found: Integers,
    number: int,
    lane_u: Integers,
    lane_v: Integers,
    fails: Floats,
    width: int,
    counts: Integers,
    rule: int,
) -> tuple[Integers, int]:
    """Append the lanes that did not fail to found, growing it; the others are counted under the rule."""
    if number + 64 > found.shape[0]:
        larger = np.empty((2 * found.shape[0] + 64, 2), dtype=np.int64)
        larger[:number] = found[:number]
        found = larger
    for b in range(width):
        if fails[b] == 1.0:
            counts[rule] += 1
        else:
            found[number, 0], found[number, 1] = lane_u[b], lane_v[b]
            number += 1
    return found, number


def band_survivors(
    dynamic_base: Floats,
    prefix_cost: float,
    u_map: Floats,
    u_dynamic: Floats,
    u_cost: Floats,
    v_map: Floats,
    v_dynamic: Floats,
    v_cost: Floats,
    bands: Floats,
    steps: Floats,
    values: Floats,
    flags: Integers,
    counts: Integers,
    pairs: Integers,
) -> Integers:
    """The pairs (K, 2) whose natural frequencies stay out of the bands."""
    if bands.shape[1] == 0 or pairs.shape[0] == 0:
        return pairs
    block = np.empty(dynamic_base.shape[0] * 64)
    lane, need, fails, scratch = np.empty(64), np.empty(64), np.empty(64), np.empty((8, 64))
    lane_u, lane_v = np.empty(64, dtype=np.int64), np.empty(64, dtype=np.int64)
    u_matrices, v_matrices = part_matrices(u_map, u_dynamic), part_matrices(v_map, v_dynamic)
    found, number = np.empty((64, 2), dtype=np.int64), 0
    for start in range(0, pairs.shape[0], 64):
        width = min(64, pairs.shape[0] - start)
        for b in range(64):
            t = start + min(b, width - 1)
            lane_u[b], lane_v[b] = pairs[t, 0], pairs[t, 1]
            lane[b] = prefix_cost + u_cost[lane_u[b]] + v_cost[lane_v[b]]
        fill_pairs(dynamic_base, u_matrices, v_matrices, lane_u, lane_v, block)
        lane_demand(lane, steps, values, need)
        fails[:] = 0.0
        mark_bands(block, block, need, bands, flags, fails, scratch)
        found, number = keep_lanes(found, number, lane_u, lane_v, fails, width, counts, 5)
    return found[:number]


def columns(values: Floats, index: Integers) -> Floats:
    """values[:, index] as a contiguous array."""
    out = np.empty((values.shape[0], index.shape[0]))
    for a in range(values.shape[0]):
        for p in range(index.shape[0]):
            out[a, p] = values[a, index[p]]
    return out


def box_of(axis: Floats, matrix_map: Floats) -> tuple[Floats, Floats]:
    """Packed least and greatest matrix (m,) over the parts (3, P)."""
    low, high = np.empty(3), np.empty(3)
    for a in range(3):
        low[a], high[a] = axis[a].min(), axis[a].max()
    return times(matrix_map, low), times(matrix_map, high)


def times(matrix_map: Floats, axis: Floats) -> Floats:
    """Packed matrix (m,) of one axis stiffness (3,)."""
    out = np.empty(matrix_map.shape[0])
    for k in range(matrix_map.shape[0]):
        out[k] = matrix_map[k, 0] * axis[0] + matrix_map[k, 1] * axis[1] + matrix_map[k, 2] * axis[2]
    return out


def union_windows(row_low: Floats, row_high: Floats, lower: Floats, upper: Floats, first_row: int) -> None:
    """Set the windows of one group's stations to the union over its parts."""
    for s in range(lower.shape[0]):
        row_low[first_row + s] = lower[s].min()
        row_high[first_row + s] = upper[s].max()


def last_three(
    static_base: Floats,
    dynamic_base: Floats,
    prefix_cost: float,
    rows: Floats,
    load: Floats,
    row_low: Floats,
    row_high: Floats,
    t_map: Floats,
    t_static: Floats,
    t_dynamic: Floats,
    t_cost: Floats,
    t_lower: Floats,
    t_upper: Floats,
    t_row: int,
    u_map: Floats,
    u_static: Floats,
    u_dynamic: Floats,
    u_cost: Floats,
    u_lower: Floats,
    u_upper: Floats,
    u_row: int,
    v_map: Floats,
    v_static: Floats,
    v_dynamic: Floats,
    v_cost: Floats,
    v_lower: Floats,
    v_upper: Floats,
    v_row: int,
    bands: Floats,
    cap: float,
    steps: Floats,
    values: Floats,
    flags: Integers,
    counts: Integers,
    start: int,
    enough: int,
    most_nodes: int,
) -> tuple[Integers, int]:
    """Settle the nodes from part `start` of the third last domain (in cost order) on.

    Returns the surviving triples (K, 3) and the next part to take; returns after a node once `enough` designs
    survived or `most_nodes` were settled, so that the caller can renew the cap and the staircase.
    """
    found, number = np.empty((256, 3), dtype=np.int64), 0
    low_u, high_u = box_of(u_static, u_map)
    low_ud, high_ud = box_of(u_dynamic, u_map)
    low_v, high_v = box_of(v_static, v_map)
    low_vd, high_vd = box_of(v_dynamic, v_map)
    u_least, v_least = u_cost.min(), v_cost.min()
    verdict_u = np.empty(u_cost.shape[0], dtype=np.int64)
    verdict_v = np.empty(v_cost.shape[0], dtype=np.int64)
    for t in range(start, t_cost.shape[0]):
        if number >= enough or t - start >= most_nodes:
            return found[:number], t
        cost = prefix_cost + t_cost[t]
        if cost + u_least + v_least > cap:
            counts[0] += (t_cost.shape[0] - t) * u_cost.shape[0] * v_cost.shape[0]
            return found[:number], t_cost.shape[0]
        base_s = static_base + times(t_map, t_static[:, t])
        base_d = dynamic_base + times(t_map, t_dynamic[:, t])
        for s in range(t_lower.shape[0]):
            row_low[t_row + s], row_high[t_row + s] = t_lower[s, t], t_upper[s, t]
        union_windows(row_low, row_high, v_lower, v_upper, v_row)
        keep_u = domain_by_cost(u_cost, cost + v_least, cap)
        counts[0] += (u_cost.shape[0] - keep_u.shape[0]) * v_cost.shape[0]
        if keep_u.shape[0] == 0:
            continue
        filter_group(
            base_s + low_v, base_s + high_v, base_d + low_vd, base_d + high_vd,
            u_map, columns(u_static, keep_u), columns(u_dynamic, keep_u), cost + v_least + u_cost[keep_u],
            columns(u_lower, keep_u), columns(u_upper, keep_u), u_row,
            row_low, row_high, rows, load, bands, steps, values, flags, verdict_u,
        )  # fmt: skip
        keep_u = domain_by_verdict(keep_u, verdict_u, counts, v_cost.shape[0])
        if keep_u.shape[0] == 0:
            continue
        us, ud = columns(u_static, keep_u), columns(u_dynamic, keep_u)
        ul, uh, uc = columns(u_lower, keep_u), columns(u_upper, keep_u), u_cost[keep_u]
        union_windows(row_low, row_high, ul, uh, u_row)
        low_s, high_s = box_of(us, u_map)
        low_d, high_d = box_of(ud, u_map)
        keep_v = domain_by_cost(v_cost, cost + uc.min(), cap)
        counts[0] += (v_cost.shape[0] - keep_v.shape[0]) * keep_u.shape[0]
        if keep_v.shape[0] == 0:
            continue
        filter_group(
            base_s + low_s, base_s + high_s, base_d + low_d, base_d + high_d,
            v_map, columns(v_static, keep_v), columns(v_dynamic, keep_v), cost + uc.min() + v_cost[keep_v],
            columns(v_lower, keep_v), columns(v_upper, keep_v), v_row,
            row_low, row_high, rows, load, bands, steps, values, flags, verdict_v,
        )  # fmt: skip
        keep_v = domain_by_verdict(keep_v, verdict_v, counts, keep_u.shape[0])
        if keep_v.shape[0] == 0:
            continue
        pairs = last_two(
            base_s, base_d, cost, rows, load, row_low, row_high,
            u_map, us, ud, uc, ul, uh, u_row,
            v_map, columns(v_static, keep_v), columns(v_dynamic, keep_v), v_cost[keep_v],
            columns(v_lower, keep_v), columns(v_upper, keep_v), v_row,
            bands, cap, steps, values, flags, counts,
        )  # fmt: skip
        if number + pairs.shape[0] > found.shape[0]:
            larger = np.empty((2 * found.shape[0] + pairs.shape[0], 3), dtype=np.int64)
            larger[:number] = found[:number]
            found = larger
        for k in range(pairs.shape[0]):
            found[number, 0] = t
            found[number, 1], found[number, 2] = keep_u[pairs[k, 0]], keep_v[pairs[k, 1]]
            number += 1
    return found[:number], t_cost.shape[0]


def domain_by_cost(cost: Floats, rest: float, cap: float) -> Integers:
    """Lanes whose cost with the rest stays within the cap."""
    out, number = np.empty(cost.shape[0], dtype=np.int64), 0
    for p in range(cost.shape[0]):
        if cost[p] + rest <= cap:
            out[number] = p
            number += 1
    return out[:number]


def domain_by_verdict(lanes: Integers, verdict: Integers, counts: Integers, others: int) -> Integers:
    """Lanes with verdict 0; the others are counted under their rule, times the size of the other domains."""
    out, number = np.empty(lanes.shape[0], dtype=np.int64), 0
    for p in range(lanes.shape[0]):
        if verdict[p] == 0:
            out[number] = lanes[p]
            number += 1
        else:
            counts[verdict[p]] += others
    return out[:number]
