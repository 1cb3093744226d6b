"""Nodes of the bounded search on blocks of 64: pairs of the last two groups, and nodes of the third last.

Compiled like `block_rules.py`, whose functions it uses. The last two domains come sorted by supporting stiffness, so
that chunks of eight neighbours make small boxes; pairs of chunks are tested first, then the pairs of parts.
counts: designs removed by cost, static box, eigenvalue box, static pair, static, eigenvalue.
"""

from __future__ import annotations

import numpy as np

from detune.proof.block_data import Ask, Bench, Domain, Frame, Node
from detune.proof.block_rules import (
    fill_windows,
    filter_group,
    lane_demand,
    mark_bands,
    mark_static_box,
    mark_static_point,
    new_bench,
)
from detune.proof.selection_data import Floats, Integers

# --- compiled below ---

CHUNK = 8


def times(matrix_map: Floats, axis: Floats) -> Floats:
    """Packed matrices (m, P) of axis stiffness (3, P)."""
    out = np.empty((matrix_map.shape[0], axis.shape[1]))
    for k in range(matrix_map.shape[0]):
        m0, m1, m2 = matrix_map[k, 0], matrix_map[k, 1], matrix_map[k, 2]
        for p in range(axis.shape[1]):
            out[k, p] = m0 * axis[0, p] + m1 * axis[1, p] + m2 * axis[2, p]
    return out


def chunk_least(values: Floats, chunk: int) -> Floats:
    """Least value (S, C) over chunks of (S, P)."""
    chunks = (values.shape[1] + chunk - 1) // chunk
    out = np.empty((values.shape[0], chunks))
    for s in range(values.shape[0]):
        for c in range(chunks):
            least = values[s, c * chunk]
            for p in range(c * chunk, min((c + 1) * chunk, values.shape[1])):
                least = min(least, values[s, p])
            out[s, c] = least
    return out


def chunk_size(chunk: int, size: int) -> int:
    """Number of parts in a chunk of a domain of the given size."""
    return min(CHUNK, size - chunk * CHUNK)


def fill_pairs(base: Floats, u: Floats, v: Floats, bench: Bench, out: Floats) -> None:
    """Packed block base + u[:, lane_u] + v[:, lane_v]."""
    lane_u, lane_v = bench.lane_u, bench.lane_v
    for k in range(base.shape[0]):
        start, row_u, row_v = base[k], u[k], v[k]
        block = out[k * 64 : k * 64 + 64]
        for b in range(64):
            block[b] = start + row_u[lane_u[b]] + row_v[lane_v[b]]


def fill_up(bench: Bench, width: int) -> None:
    """Fill the lanes from width on with the last one."""
    for b in range(width, 64):
        bench.lane_u[b], bench.lane_v[b] = bench.lane_u[width - 1], bench.lane_v[width - 1]
        bench.cost[b] = bench.cost[width - 1]


def chunked(group: Domain) -> Domain:
    """One lane per chunk: window unions and least costs; static holds the softest, dynamic the stiffest statics."""
    return Domain(
        group.matrix_map,
        chunk_least(group.static, CHUNK),
        -chunk_least(-group.static, CHUNK),
        chunk_least(group.cost.reshape(1, -1), CHUNK)[0],
        chunk_least(group.lower, CHUNK),
        -chunk_least(-group.upper, CHUNK),
        group.first_row,
    )


def pair_survivors(frame: Frame, node: Node, u: Domain, v: Domain, ask: Ask, counts: Integers) -> Integers:
    """Pairs of chunks (K, 2) of the last two domains that the cost and the static interval do not exclude."""
    cu, cv = chunked(u), chunked(v)
    u_low, u_high = times(u.matrix_map, cu.static), times(u.matrix_map, cu.dynamic)
    v_low, v_high = times(v.matrix_map, cv.static), times(v.matrix_map, cv.dynamic)
    bench = new_bench(frame, node)
    total = u_low.shape[1] * v_low.shape[1]
    kept, found, width = np.empty((total, 2), dtype=np.int64), 0, 0
    for pair in range(total):
        i, j = pair // v_low.shape[1], pair % v_low.shape[1]
        bound = node.cost + cu.cost[i] + cv.cost[j]
        if bound > ask.cap:
            counts[0] += chunk_size(i, u.cost.shape[0]) * chunk_size(j, v.cost.shape[0])
        else:
            bench.lane_u[width], bench.lane_v[width], bench.cost[width] = i, j, bound
            width += 1
        if width == 0 or (width < 64 and pair < total - 1):
            continue
        fill_up(bench, width)
        fill_pairs(node.static, u_low, v_low, bench, bench.soft)
        fill_pairs(node.static, u_high, v_high, bench, bench.stiff)
        fill_windows(cu, bench.lane_u, bench)
        fill_windows(cv, bench.lane_v, bench)
        lane_demand(ask, bench)
        bench.fails[:] = 0.0
        mark_static_box(frame, ask, bench)
        for b in range(width):
            i, j = bench.lane_u[b], bench.lane_v[b]
            if bench.fails[b] == 1.0:
                counts[3] += chunk_size(i, u.cost.shape[0]) * chunk_size(j, v.cost.shape[0])
            else:
                kept[found, 0], kept[found, 1] = i, j
                found += 1
        width = 0
    return kept[:found]


def static_lanes(
    frame: Frame, node: Node, u: Domain, v: Domain, ask: Ask, bench: Bench, mats_u: Floats, mats_v: Floats
) -> None:
    """Mark the pairs of parts in the bench's lanes that break a static window."""
    fill_pairs(node.static, mats_u, mats_v, bench, bench.soft)
    fill_windows(u, bench.lane_u, bench)
    fill_windows(v, bench.lane_v, bench)
    lane_demand(ask, bench)
    bench.fails[:] = 0.0
    mark_static_point(frame, ask, bench)


def keep_lanes(
    found: Integers, number: int, bench: Bench, width: int, counts: Integers, rule: int
) -> tuple[Integers, int]:
    """Append the lanes that did not fail to found, growing it; the others are counted under the rule."""
    if number + 64 > found.shape[0]:
        larger = np.empty((2 * found.shape[0] + 64, 2), dtype=np.int64)
        larger[:number] = found[:number]
        found = larger
    for b in range(width):
        if bench.fails[b] == 1.0:
            counts[rule] += 1
        else:
            found[number, 0], found[number, 1] = bench.lane_u[b], bench.lane_v[b]
            number += 1
    return found, number


def last_two(frame: Frame, node: Node, u: Domain, v: Domain, ask: Ask, counts: Integers) -> Integers:
    """Pairs (K, 2) of lanes of the last two domains that pass cost, static windows and bands."""
    pairs = pair_survivors(frame, node, u, v, ask, counts)
    found, number, width = np.empty((64, 2), dtype=np.int64), 0, 0
    if pairs.shape[0] == 0:
        return found[:0]
    mats_u, mats_v = times(u.matrix_map, u.static), times(v.matrix_map, v.static)
    bench = new_bench(frame, node)
    for t in range(pairs.shape[0]):
        for i in range(chunk_size(pairs[t, 0], u.cost.shape[0])):
            for j in range(chunk_size(pairs[t, 1], v.cost.shape[0])):
                p, q = pairs[t, 0] * CHUNK + i, pairs[t, 1] * CHUNK + j
                cost = node.cost + u.cost[p] + v.cost[q]
                if cost > ask.cap:
                    counts[0] += 1
                    continue
                bench.lane_u[width], bench.lane_v[width], bench.cost[width] = p, q, cost
                width += 1
                if width == 64:
                    static_lanes(frame, node, u, v, ask, bench, mats_u, mats_v)
                    found, number = keep_lanes(found, number, bench, width, counts, 4)
                    width = 0
    if width > 0:
        fill_up(bench, width)
        static_lanes(frame, node, u, v, ask, bench, mats_u, mats_v)
        found, number = keep_lanes(found, number, bench, width, counts, 4)
    return band_survivors(node, u, v, ask, counts, bench, found[:number])


def band_survivors(
    node: Node, u: Domain, v: Domain, ask: Ask, counts: Integers, bench: Bench, pairs: Integers
) -> Integers:
    """The pairs (K, 2) whose natural frequencies stay out of the bands."""
    if ask.bands.shape[1] == 0 or pairs.shape[0] == 0:
        return pairs
    mats_u, mats_v = times(u.matrix_map, u.dynamic), times(v.matrix_map, v.dynamic)
    found, number = np.empty((64, 2), dtype=np.int64), 0
    for start in range(0, pairs.shape[0], 64):
        width = min(64, pairs.shape[0] - start)
        for b in range(width):
            p, q = pairs[start + b, 0], pairs[start + b, 1]
            bench.lane_u[b], bench.lane_v[b] = p, q
            bench.cost[b] = node.cost + u.cost[p] + v.cost[q]
        fill_up(bench, width)
        fill_pairs(node.dynamic, mats_u, mats_v, bench, bench.soft)
        lane_demand(ask, bench)
        bench.fails[:] = 0.0
        block = bench.soft[: node.dynamic.shape[0] * 64]
        mark_bands(block, block, ask, bench, bench.fails)
        found, number = keep_lanes(found, number, bench, width, counts, 5)
    return found[:number]


def columns(values: Floats, index: Integers) -> Floats:
    """values[:, index] as a contiguous array."""
    out = np.empty((values.shape[0], index.shape[0]))
    for a in range(values.shape[0]):
        for p in range(index.shape[0]):
            out[a, p] = values[a, index[p]]
    return out


def subset(group: Domain, lanes: Integers) -> Domain:
    """The domain with some of its lanes only."""
    return Domain(
        group.matrix_map,
        columns(group.static, lanes),
        columns(group.dynamic, lanes),
        group.cost[lanes],
        columns(group.lower, lanes),
        columns(group.upper, lanes),
        group.first_row,
    )


def boxed(node: Node, group: Domain) -> tuple[Node, Node]:
    """The node with the softest and the stiffest of a domain added; the windows become the domain's union."""
    edges = np.empty((3, 4))
    for a in range(3):
        edges[a, 0], edges[a, 1] = group.static[a].min(), group.static[a].max()
        edges[a, 2], edges[a, 3] = group.dynamic[a].min(), group.dynamic[a].max()
    mats = times(group.matrix_map, edges)
    for s in range(group.lower.shape[0]):
        node.row_low[group.first_row + s] = group.lower[s].min()
        node.row_high[group.first_row + s] = group.upper[s].max()
    low = Node(node.static + mats[:, 0], node.dynamic + mats[:, 2], node.cost, node.row_low, node.row_high)
    high = Node(node.static + mats[:, 1], node.dynamic + mats[:, 3], node.cost, node.row_low, node.row_high)
    return low, high


def filtered(frame: Frame, node: Node, group: Domain, other: Domain, ask: Ask, counts: Integers) -> Integers:
    """Lanes of a domain that cost, static interval and bands do not exclude against the box of the other domain."""
    rest, others = node.cost + other.cost.min(), other.cost.shape[0]
    lanes, number = np.empty(group.cost.shape[0], dtype=np.int64), 0
    for p in range(group.cost.shape[0]):
        if rest + group.cost[p] <= ask.cap:
            lanes[number] = p
            number += 1
    counts[0] += (group.cost.shape[0] - number) * others
    lanes = lanes[:number]
    if number == 0:
        return lanes
    verdict = np.empty(number, dtype=np.int64)
    low, high = boxed(node, other)
    filter_group(frame, low, high, subset(group, lanes), rest, ask, verdict)
    kept = 0
    for p in range(number):
        if verdict[p] == 0:
            lanes[kept] = lanes[p]
            kept += 1
        else:
            counts[verdict[p]] += others
    return lanes[:kept]


def child_of(node: Node, group: Domain, part: int) -> Node:
    """The node with one part of a group added."""
    for s in range(group.lower.shape[0]):
        node.row_low[group.first_row + s] = group.lower[s, part]
        node.row_high[group.first_row + s] = group.upper[s, part]
    static = times(group.matrix_map, group.static[:, part : part + 1])
    dynamic = times(group.matrix_map, group.dynamic[:, part : part + 1])
    return Node(
        node.static + static[:, 0],
        node.dynamic + dynamic[:, 0],
        node.cost + group.cost[part],
        node.row_low,
        node.row_high,
    )


def last_three(
    frame: Frame,
    node: Node,
    t: Domain,
    u: Domain,
    v: Domain,
    ask: Ask,
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
    rest = u.cost.min() + v.cost.min()
    for part in range(start, t.cost.shape[0]):
        if number >= enough or part - start >= most_nodes:
            return found[:number], part
        child = child_of(node, t, part)
        if child.cost + rest > ask.cap:
            counts[0] += (t.cost.shape[0] - part) * u.cost.shape[0] * v.cost.shape[0]
            return found[:number], t.cost.shape[0]
        keep_u = filtered(frame, child, u, v, ask, counts)
        if keep_u.shape[0] == 0:
            continue
        small_u = subset(u, keep_u)
        keep_v = filtered(frame, child, v, small_u, ask, counts)
        if keep_v.shape[0] == 0:
            continue
        pairs = last_two(frame, child, small_u, subset(v, keep_v), ask, counts)
        if number + pairs.shape[0] > found.shape[0]:
            larger = np.empty((2 * found.shape[0] + pairs.shape[0], 3), dtype=np.int64)
            larger[:number] = found[:number]
            found = larger
        for k in range(pairs.shape[0]):
            found[number, 0] = part
            found[number, 1], found[number, 2] = keep_u[pairs[k, 0]], keep_v[pairs[k, 1]]
            number += 1
    return found[:number], t.cost.shape[0]
