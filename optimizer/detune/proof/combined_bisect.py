"""Bisection of scatter and speed until every limited row of a family is decided.

One tree of boxes serves all rows: a box is settled when the bounds of all rows keep their limits. A row is *violated*
only by a point that was evaluated exactly; it is *proven* when every box is settled; where boxes ran out it is
*undecided* and the bracket [lower, upper] says how far the proof came. Nothing is dropped for being undecided.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from detune.proof.bisect import DecisionStatus, sample_points
from detune.proof.combined_bound import TRIALS, frame_of, rows_bound
from detune.proof.loewner import Flags
from detune.proof.scatter_data import LimitedRows, ScatterSystem, first_corners, matrices_at, values_at
from detune.proof.selection_data import Floats

BATCH = 256
KEPT_TRIALS = 3
CHUNK = 4096
LEAST_DAMPING = 1e-6


@dataclass(frozen=True)
class RowsDecision:
    """What became of the R rows of a family.

    status (R,): of each row. lower (R,): greatest value evaluated exactly, at points worst (R, V) and speed (R,) in Hz.
    upper (R,): bound over the whole box, infinite where none was found. boxes: bounds computed. splits: tree of
    bisections in preorder (a variable's index for a cut, -1 for a settled box), complete only where all are proven.
    """

    status: tuple[DecisionStatus, ...]
    lower: tuple[float, ...]
    upper: tuple[float, ...]
    worst: tuple[tuple[float, ...], ...]
    speed: tuple[float, ...]
    boxes: int
    splits: tuple[int, ...] = field(repr=False, default=())

    @property
    def proven(self) -> bool:
        """Whether every row is proven."""
        return all(status == "proven" for status in self.status)


@dataclass
class _Node:
    low: Floats
    high: Floats
    upper: Floats
    variable: int = -1
    children: tuple[_Node, _Node] | None = None


class Sampler:
    """Exact values at points, and the greatest of each row met so far."""

    def __init__(self, system: ScatterSystem, limits: LimitedRows) -> None:
        self.system, self.limits = system, limits
        self.low, self.high = first_corners(system, limits)
        self.best = np.full(limits.count, -np.inf)
        self.where = np.tile(0.5 * (self.low + self.high), (limits.count, 1))

    def evaluate(self, points: Floats) -> None:
        """Evaluate points (N, V+1)."""
        for first in range(0, len(points), CHUNK):
            part = points[first : first + CHUNK]
            values = values_at(self.system, self.limits, part)
            # Resonance without damping: as large as can be.
            values = np.where(np.isnan(values), np.inf, values)
            top = values.argmax(axis=0)
            greatest = values[top, np.arange(len(top))]
            more = greatest > self.best
            self.best[more], self.where[more] = greatest[more], part[top[more]]

    @property
    def violated(self) -> bool:
        """Whether some row exceeds its limit at a point met so far."""
        return self.breaks(None)

    def breaks(self, rows: Flags | None) -> bool:
        """Whether one of some rows (R,), None for all, exceeds its limit at a point met so far."""
        broken = self.best > self.limits.limit
        return bool((broken if rows is None else broken & rows).any())

    def start(self) -> None:
        """Corners of the scatter over a grid of speeds, and at their natural frequencies."""
        points = sample_points(self.low, self.high)
        self.evaluate(points)
        self.evaluate(self.on_modes(points[points[:, -1] == points[0, -1]], nearest=False))

    def on_modes(self, points: Floats, *, nearest: bool) -> Floats:
        """The same scatter (K, V+1) at the undamped natural frequencies that an order excites within the range.

        A light resonance is narrower than any grid. nearest: for each order the one nearest to the point's speed alone.
        Modes without damping are left out: exactly there rounding alone would make a response of a load that is none.
        """
        if not len(points) or not self.high[-1] > self.low[-1]:
            return points[:0]
        rest, turning = points.copy(), points.copy()
        rest[:, -1], turning[:, -1] = 0.0, 1.0
        stiff, moving = matrices_at(self.system, rest, 1.0)[0].real, matrices_at(self.system, turning, 1.0)[0]
        inverse = np.linalg.inv(np.linalg.cholesky(stiff - moving.real))
        squares, modes = np.linalg.eigh(inverse @ stiff @ np.swapaxes(inverse, 1, 2))
        lost = inverse @ moving.imag @ np.swapaxes(inverse, 1, 2)
        damped = np.einsum("bik,bij,bjk->bk", modes, lost, modes) > LEAST_DAMPING * np.abs(squares)
        squares = np.where(damped, squares, -1.0)
        found = []
        for order in dict.fromkeys(each.order for each in self.limits.sets):
            at = squares / order**2
            if nearest:
                index = np.abs(at - points[:, -1:]).argmin(axis=1)
                at = at[np.arange(len(at)), index][:, None]
            row, column = np.nonzero((at >= self.low[-1]) & (at <= self.high[-1]))
            moved = points[row].copy()
            moved[:, -1] = at[row, column]
            found.append(moved)
        return np.concatenate(found)

    def climb(self, rounds: int = 14) -> None:
        """Pattern search from the best point of every row, halving the step."""
        moving = np.flatnonzero(self.high > self.low)
        if not len(moving):
            return
        step = np.full(self.limits.count, 0.25)
        for _ in range(rounds):
            before = self.best.copy()
            steps = step[:, None, None] * np.eye(len(self.low))[moving] * (self.high - self.low)
            points = np.concatenate([self.where[:, None] + steps, self.where[:, None] - steps], axis=1)
            points = np.clip(points.reshape(-1, len(self.low)), self.low, self.high)
            self.evaluate(points)
            self.evaluate(self.on_modes(points, nearest=True))
            step = np.where(self.best > before * (1.0 + 1e-9), step, 0.5 * step)


def sampled(system: ScatterSystem, limits: LimitedRows, *, stop_at_violation: bool = True) -> Sampler:
    """Corners, grid and pattern search: the greatest value of every row that was found, no bound."""
    found = Sampler(system, limits)
    found.start()
    if not (stop_at_violation and found.violated):
        found.climb()
    return found


def decide_rows(
    system: ScatterSystem,
    limits: LimitedRows,
    *,
    max_boxes: int = 20_000,
    interrupted: Callable[[], bool] | None = None,
    samples: Sampler | None = None,
    fatal: Flags | None = None,
) -> RowsDecision:
    """Decide whether every row keeps its limit over all variables and the whole speed interval.

    The work ends when a `fatal` (R,) row, None for any, is violated; else the other rows are decided all the same.
    """
    found = sampled(system, limits) if samples is None else samples
    frame = frame_of(system, limits)
    root = _Node(found.low, found.high, np.full(limits.count, np.inf))
    open_nodes, settled = [root], np.full(limits.count, -np.inf)
    boxes, trials = 0, TRIALS
    wins = np.zeros(len(TRIALS), dtype=np.int64)
    stuck: list[_Node] = []
    while open_nodes and not found.breaks(fatal):
        limit = np.where(found.best > limits.limit, np.inf, limits.limit)
        if boxes >= max_boxes or not np.isfinite(limit).any() or (interrupted is not None and interrupted()):
            break
        batch, open_nodes = _worst(open_nodes, limit)
        low, high = np.stack([node.low for node in batch]), np.stack([node.high for node in batch])
        bounds = rows_bound(system, limits, frame, low, high, trials)
        boxes += len(batch)
        if len(trials) == len(TRIALS):
            wins += bounds.wins
            if wins.sum() > 2 * BATCH:
                trials = tuple(TRIALS[i] for i in np.argsort(-wins, kind="stable")[:KEPT_TRIALS])
        left = []
        for node, upper, weight in zip(batch, bounds.upper, bounds.weight, strict=True):
            node.upper = np.minimum(node.upper, upper)
            if bool((node.upper <= limit).all()):
                settled = np.maximum(settled, node.upper)
                continue
            left.append(0.5 * (node.low + node.high))
            variable = _choose(node, weight)
            if variable < 0:
                stuck.append(node)
            else:
                open_nodes.extend(_cut(node, variable))
        if left:
            found.evaluate(np.stack(left))
    return _decision(found, root, [*open_nodes, *stuck], settled, boxes)


def _worst(nodes: list[_Node], limit: Floats) -> tuple[list[_Node], list[_Node]]:
    """The boxes whose bounds are furthest beyond the limits, so that the bracket is narrow where it stays
    open; the rest.
    """
    if len(nodes) <= BATCH:
        return nodes, []
    upper = np.stack([node.upper for node in nodes])
    ratio = (np.where(np.isfinite(upper), upper, 1e300) / np.maximum(limit, 1e-300)).max(axis=1)
    order = np.argpartition(-ratio, BATCH)
    return [nodes[i] for i in order[:BATCH]], [nodes[i] for i in order[BATCH:]]


def _choose(node: _Node, weight: Floats) -> int:
    """Variable to cut: the one of greatest weight that can still be halved; -1 if none can."""
    middle = 0.5 * (node.low + node.high)
    possible = (middle > node.low) & (middle < node.high)
    if not possible.any():
        return -1
    return int(np.argmax(np.where(possible, np.nan_to_num(weight), -np.inf)))


def _cut(node: _Node, variable: int) -> tuple[_Node, _Node]:
    middle = 0.5 * (node.low[variable] + node.high[variable])
    first_high, second_low = node.high.copy(), node.low.copy()
    first_high[variable] = middle
    second_low[variable] = middle
    node.variable = variable
    node.children = (_Node(node.low, first_high, node.upper), _Node(second_low, node.high, node.upper))
    return node.children


def _decision(
    found: Sampler, root: _Node, open_nodes: list[_Node], settled: Floats, boxes: int
) -> RowsDecision:
    upper = settled
    for node in open_nodes:
        upper = np.maximum(upper, node.upper)
    upper = np.maximum(upper, found.best)
    status: list[DecisionStatus] = []
    for value, bound, limit in zip(found.best, upper, found.limits.limit, strict=True):
        # A row is proven alone only if every box, also those left open for other rows, keeps its limit.
        status.append("violated" if value > limit else "proven" if bound <= limit else "undecided")
    return RowsDecision(
        status=tuple(status),
        lower=tuple(found.best.tolist()),
        upper=tuple(upper.tolist()),
        worst=tuple(tuple(point[:-1].tolist()) for point in found.where),
        speed=tuple((np.sqrt(found.where[:, -1]) / (2.0 * np.pi)).tolist()),
        boxes=boxes,
        splits=_preorder(root) if all(each == "proven" for each in status) else (),
    )


def _preorder(root: _Node) -> tuple[int, ...]:
    out: list[int] = []
    stack = [root]
    while stack:
        node = stack.pop()
        if node.children is None:
            out.append(-1)
            continue
        out.append(node.variable)
        stack.extend((node.children[1], node.children[0]))
    return tuple(out)
