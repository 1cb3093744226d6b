"""Bisection of scatter and speed until every limited row of a family is decided.

One tree of boxes serves all rows: a box is settled when the bounds of all rows keep their limits. A row is *violated*
only by a point that was evaluated exactly; it is *proven* when every box is settled; where boxes ran out it is
*undecided* and the bracket [lower, upper] says how far the proof came. Nothing is dropped for being undecided.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from detune.proof.bisect import sample_points
from detune.proof.bisection import Node, RowSamples, RowsDecision, choose, cut, rows_decision
from detune.proof.combined_bound import TRIALS, frame_of, rows_bound
from detune.proof.loewner import Flags
from detune.proof.scatter_data import LimitedRows, ScatterSystem, first_corners, matrices_at, values_at
from detune.proof.selection_data import Floats

BATCH = 256
KEPT_TRIALS = 3
CHUNK = 4096
LEAST_DAMPING = 1e-6
Nodes = list[Node[Floats]]


class Sampler(RowSamples):
    """Exact values at points of scatter and squared speed (N, V+1), and the greatest of each row met so far."""

    ROUNDS, GAIN = 14, 1e-9

    def __init__(self, system: ScatterSystem, limits: LimitedRows) -> None:
        self.system, self.limits = system, limits
        super().__init__(*first_corners(system, limits), limits.limit)

    def evaluate(self, points: Floats) -> None:
        """Evaluate points (N, V+1)."""
        for first in range(0, len(points), CHUNK):
            part = points[first : first + CHUNK]
            values = values_at(self.system, self.limits, part)
            # Resonance without damping: as large as can be.
            self.keep(part, np.where(np.isnan(values), np.inf, values))

    def around(self, points: Floats) -> None:
        """Evaluate points, and the natural frequencies next to them."""
        self.evaluate(points)
        self.evaluate(self.on_modes(points, nearest=True))

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


def sampled(system: ScatterSystem, limits: LimitedRows, *, stop_at_violation: bool = True) -> Sampler:
    """Corners, grid and pattern search: the greatest value of every row that was found, no bound."""
    found = Sampler(system, limits)
    found.search(stop_at_violation)
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
    root = Node(found.low, found.high, np.full(limits.count, np.inf))
    open_nodes, settled = [root], np.full(limits.count, -np.inf)
    boxes, trials = 0, TRIALS
    wins = np.zeros(len(TRIALS), dtype=np.int64)
    stuck: Nodes = []
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
            variable = choose(node, weight)
            if variable < 0:
                stuck.append(node)
            else:
                open_nodes.extend(cut(node, variable))
        if left:
            found.evaluate(np.stack(left))
    worst, speed = found.where[:, :-1], np.sqrt(found.where[:, -1]) / (2.0 * np.pi)
    return rows_decision(found, root, [*open_nodes, *stuck], settled, worst, speed, boxes)


def _worst(nodes: Nodes, limit: Floats) -> tuple[Nodes, Nodes]:
    """The boxes whose bounds are furthest beyond the limits, so that the bracket is narrow where it stays
    open; the rest.
    """
    if len(nodes) <= BATCH:
        return nodes, []
    upper = np.stack([node.upper for node in nodes])
    ratio = (np.where(np.isfinite(upper), upper, 1e300) / np.maximum(limit, 1e-300)).max(axis=1)
    order = np.argpartition(-ratio, BATCH)
    return [nodes[i] for i in order[:BATCH]], [nodes[i] for i in order[BATCH:]]
