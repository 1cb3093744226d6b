"""What every bisection here shares: the tree of boxes, the greatest values met so far, what became of each row.

A box is settled when the bounds of all rows keep their limits; any other is cut in half. Values found at points are
exact (or lowered by what their quadrature may err), so that they alone can say *violated*.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from typing import Any, Generic, Literal, TypeVar

import numpy as np

from detune.proof.loewner import Flags
from detune.proof.selection_data import Floats

DecisionStatus = Literal["proven", "violated", "undecided"]
Upper = TypeVar("Upper")
Cut = TypeVar("Cut", bound="Node[Any]")


@dataclass
class Node(Generic[Upper]):
    """A box low, high (V,) in the tree, with the least bound known of it; children appear when it is cut."""

    low: Floats
    high: Floats
    upper: Upper
    variable: int = -1
    children: tuple[Node[Upper], Node[Upper]] | None = None


def choose(node: Node[Any], weight: Floats) -> int:
    """Variable to cut: the one of greatest weight (V,) that can still be halved; -1 if none can."""
    middle = 0.5 * (node.low + node.high)
    possible = (middle > node.low) & (middle < node.high)
    if not possible.any():
        return -1
    return int(np.argmax(np.where(possible, np.nan_to_num(weight), -np.inf)))


def cut(node: Cut, variable: int) -> tuple[Cut, Cut]:
    """Cut a box in half; its children keep its bound, and whatever else it holds, until they have their own."""
    middle = 0.5 * (node.low[variable] + node.high[variable])
    first_high, second_low = node.high.copy(), node.low.copy()
    first_high[variable] = middle
    second_low[variable] = middle
    halves = replace(node, high=first_high), replace(node, low=second_low)
    node.variable, node.children = variable, halves
    return halves


def preorder(root: Node[Any]) -> tuple[int, ...]:
    """The tree in preorder: a variable's index for a cut, -1 for a box that was not cut."""
    out: list[int] = []
    stack = [root]
    while stack:
        node = stack.pop()
        out.append(node.variable)
        stack.extend(reversed(node.children or ()))
    return tuple(out)


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


class RowSamples(ABC):
    """The greatest value of each of R rows met so far, best (R,), and where (R, V) it was met within low, high (V,)."""

    ROUNDS: int
    GAIN: float
    """Rounds of a pattern search, and the share by which a value must grow for its step to stay as long as it is."""

    def __init__(self, low: Floats, high: Floats, limit: Floats) -> None:
        self.low, self.high, self.limit = low, high, limit
        self.best = np.full(len(limit), -np.inf)
        self.where = np.tile(0.5 * (low + high), (len(limit), 1))

    @abstractmethod
    def evaluate(self, points: Floats) -> None:
        """Evaluate points (N, V) and keep what is greater than before."""

    @abstractmethod
    def start(self) -> None:
        """Evaluate where the greatest values are to be expected."""

    def around(self, points: Floats) -> None:
        """Evaluate the points (N, V) of a pattern search."""
        self.evaluate(points)

    def keep(self, points: Floats, values: Floats) -> None:
        """Keep of the values (N, R) at points (N, V) what is greater than before."""
        top = values.argmax(axis=0)
        greatest = values[top, np.arange(len(top))]
        more = greatest > self.best
        self.best[more], self.where[more] = greatest[more], points[top[more]]

    @property
    def violated(self) -> bool:
        """Whether some row exceeds its limit at a point met so far."""
        return self.breaks(None)

    def breaks(self, rows: Flags | None) -> bool:
        """Whether one of some rows (R,), None for all, exceeds its limit at a point met so far."""
        broken = self.best > self.limit
        return bool((broken if rows is None else broken & rows).any())

    def climb(self) -> None:
        """Pattern search from the best point of every row, halving the step."""
        moving = np.flatnonzero(self.high > self.low)
        if not len(moving):
            return
        step = np.full(len(self.limit), 0.25)
        for _ in range(self.ROUNDS):
            before = self.best.copy()
            steps = step[:, None, None] * np.eye(len(self.low))[moving] * (self.high - self.low)
            points = np.concatenate([self.where[:, None] + steps, self.where[:, None] - steps], axis=1)
            self.around(np.clip(points.reshape(-1, len(self.low)), self.low, self.high))
            step = np.where(self.best > before * (1.0 + self.GAIN), step, 0.5 * step)

    def search(self, stop_at_violation: bool) -> None:
        """Start, and climb unless a violation was met that is to stop it."""
        self.start()
        if not (stop_at_violation and self.violated):
            self.climb()


def rows_decision(
    found: RowSamples,
    root: Node[Floats],
    not_settled: Sequence[Node[Floats]],
    settled: Floats,
    worst: Floats,
    speed: Floats,
    boxes: int,
) -> RowsDecision:
    """What became of the rows. `settled` (R,): greatest bound of the boxes that were settled; worst (R, V), speed (R,).

    A row is proven alone only if every box, also those left open for other rows, keeps its limit.
    """
    upper = settled
    for node in not_settled:
        upper = np.maximum(upper, node.upper)
    upper = np.maximum(upper, found.best)
    status: list[DecisionStatus] = []
    for value, bound, limit in zip(found.best, upper, found.limit, strict=True):
        status.append("violated" if value > limit else "proven" if bound <= limit else "undecided")
    return RowsDecision(
        status=tuple(status),
        lower=tuple(found.best.tolist()),
        upper=tuple(upper.tolist()),
        worst=tuple(tuple(point.tolist()) for point in worst),
        speed=tuple(speed.tolist()),
        boxes=boxes,
        splits=preorder(root) if all(each == "proven" for each in status) else (),
    )
