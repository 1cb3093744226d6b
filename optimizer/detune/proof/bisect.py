"""Bisection of a box of stiffness, damping, mass and frequency until a limit is decided.

Each box is bounded by the matrix ball; a box whose bound is within the limit is settled, any other is sampled
and cut in half along the variable that contributes most. A limit is *proven* when every box is settled,
*violated* only when a point of the box was evaluated exactly and exceeds it, *undecided* when the boxes ran out:
then the bracket says how far the proof came. A design is never dropped for being undecided.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from detune.proof.ball import output_bound
from detune.proof.bisection import DecisionStatus, Node, choose, cut, preorder
from detune.proof.robust_data import OutputLimit, RobustSystem, first_box, output_at
from detune.proof.selection_data import Floats, Integers

BATCH = 256
LARGEST_CORNERS = 12


@dataclass(frozen=True)
class Decision:
    """Whether |y| stays within its limit over the whole box.

    lower: greatest |y| evaluated exactly; upper: bound of |y| over the whole box. worst: the point (V,) of the
    variables where `lower` occurs, frequency: its frequency in Hz. boxes: bounds computed. splits: the tree of
    bisections in preorder, a variable's index for a cut and -1 for a settled box; complete only when proven.
    """

    status: DecisionStatus
    limit: float
    lower: float
    upper: float
    worst: tuple[float, ...]
    frequency: float
    boxes: int
    splits: tuple[int, ...] = field(repr=False, default=())


def sample_points(low: Floats, high: Floats) -> Floats:
    """Points (S, V+1) worth evaluating in a first box: corners of up to 12 variables, and a grid of frequency."""
    varying = [v for v in range(len(low) - 1) if high[v] > low[v]]
    if len(varying) <= 6:
        signs = np.array(list(itertools.product((0.0, 1.0), repeat=len(varying))))
    else:
        generator = np.random.default_rng(len(varying))
        signs = generator.integers(0, 2, (64, len(varying))).astype(np.float64)
        signs[0], signs[1] = 0.0, 1.0
    signs = np.concatenate([signs, np.full((1, len(varying)), 0.5)])
    steps = 33 if high[-1] > low[-1] else 1
    frequency = np.sqrt(low[-1]) + (np.sqrt(high[-1]) - np.sqrt(low[-1])) * np.linspace(0.0, 1.0, steps)
    squares = np.clip(frequency**2, low[-1], high[-1])
    points = np.empty((len(signs), steps, len(low)))
    points[:] = 0.5 * (low + high)
    for column, v in enumerate(varying):
        points[:, :, v] = np.where(signs[:, column] > 0.75, high[v], points[0, 0, v])[:, None]
        points[:, :, v] = np.where(signs[:, column, None] < 0.25, low[v], points[:, :, v])
    points[:, :, -1] = squares
    return points.reshape(-1, len(low))


@dataclass
class _State:
    system: RobustSystem
    output: OutputLimit
    lower: float = -np.inf
    worst: Floats = field(default_factory=lambda: np.zeros(0))
    boxes: int = 0

    def sample(self, points: Floats) -> None:
        """Evaluate points exactly and keep the greatest."""
        values = output_at(self.system, self.output, points)
        best = int(np.argmax(values))
        if values[best] > self.lower:
            self.lower, self.worst = float(values[best]), points[best].copy()

    def bound(self, nodes: list[Node[float]]) -> Floats:
        """Bound boxes; sets their upper bounds and returns the weights."""
        low, high = np.stack([node.low for node in nodes]), np.stack([node.high for node in nodes])
        upper, weight = output_bound(self.system, self.output, low, high)
        for node, value in zip(nodes, upper.tolist(), strict=True):
            node.upper = min(node.upper, value)
        self.boxes += len(nodes)
        return weight


def decide(
    system: RobustSystem,
    output: OutputLimit,
    *,
    max_boxes: int = 20_000,
    interrupted: Callable[[], bool] | None = None,
) -> Decision:
    """Decide whether |y| <= limit over all variables and the whole frequency interval."""
    return _bisect(system, output, output.limit, None, max_boxes, interrupted)


def worst_case(
    system: RobustSystem,
    output: OutputLimit,
    *,
    gap: float = 0.02,
    max_boxes: int = 20_000,
    interrupted: Callable[[], bool] | None = None,
) -> Decision:
    """Bracket the greatest |y| until upper <= (1 + gap) lower; the status says what that means for the limit."""
    return _bisect(system, output, output.limit, gap, max_boxes, interrupted)


def _bisect(
    system: RobustSystem,
    output: OutputLimit,
    limit: float,
    gap: float | None,
    max_boxes: int,
    interrupted: Callable[[], bool] | None,
) -> Decision:
    low, high = first_box(system, output)
    state = _State(system, output)
    state.sample(sample_points(low, high))
    root = Node(low, high, np.inf)
    open_nodes = [root]
    settled = 0.0
    while open_nodes:
        target = limit if gap is None else state.lower * (1.0 + gap)
        if gap is None and state.lower > limit:
            break
        if state.boxes >= max_boxes or (interrupted is not None and interrupted()):
            break
        batch, open_nodes = open_nodes[-BATCH:], open_nodes[:-BATCH]
        weights = state.bound(batch)
        state.sample(np.stack([0.5 * (node.low + node.high) for node in batch]))
        target = target if gap is None else state.lower * (1.0 + gap)
        for node, weight in zip(batch, weights, strict=True):
            if node.upper <= target:
                settled = max(settled, node.upper)
                continue
            variable = choose(node, weight)
            if variable < 0:
                open_nodes.insert(0, node)
                return _decision(state, root, open_nodes, settled, limit, "undecided")
            open_nodes.extend(cut(node, variable))
    return _decision(state, root, open_nodes, settled, limit, None)


def _decision(
    state: _State,
    root: Node[float],
    open_nodes: list[Node[float]],
    settled: float,
    limit: float,
    forced: DecisionStatus | None,
) -> Decision:
    upper = max([settled, *(node.upper for node in open_nodes)], default=settled)
    upper = max(upper, state.lower)
    if state.lower > limit:
        status: DecisionStatus = "violated"
    elif forced is not None or not upper <= limit:
        status = "undecided"
    else:
        status = "proven"
    return Decision(
        status=status,
        limit=limit,
        lower=state.lower,
        upper=upper,
        worst=tuple(state.worst[:-1].tolist()),
        frequency=float(np.sqrt(state.worst[-1]) / (2.0 * np.pi)),
        boxes=state.boxes,
        splits=preorder(root) if status == "proven" else (),
    )


def lots(station_part: Integers, stations_axes: int = 3) -> Integers:
    """Variable of each axis (S*3,) when all parts of one number move together: parts numbered in order of value."""
    _, index = np.unique(station_part, return_inverse=True)
    return np.repeat(index.astype(np.int64), stations_axes)


def singles(stations: int, stations_axes: int = 3) -> Integers:
    """Variable of each axis (S*3,) when each station's part moves alone."""
    return np.repeat(np.arange(stations, dtype=np.int64), stations_axes)
