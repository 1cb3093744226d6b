"""Bound of rows under noise over a box of scatter, and bisection of scatter and frequency until decided.

Over a box of scatter and an interval of the squared speed z, y = c + s (x - m) + e (z - z_m) + rest, |rest|
<= rho (`combined_bound`). So |y|^2 <= |c|^2 + 2 Re c* s (x - m) + 2 Re c* e (z - z_m) + (reach + rho)^2 + 2
|c| rho, and its integral with S df needs the area of S, its mean of z - z_m and its mean square alone. The
planes of all intervals are summed before their greatest value over the box is taken: what a resonance loses
below and gains above as a stiffness grows cancels, and the bound errs by the square of the widths of
frequency and scatter. Densities are zero outside their break points, so that nothing is left over.
"""

from __future__ import annotations

import heapq
from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from detune.proof.bisection import Node, RowsDecision, cut, rows_decision
from detune.proof.combined_bound import TRIALS, WIDENING, frame_of, set_expansion, solved
from detune.proof.expansion import Box
from detune.proof.loewner import Flags
from detune.proof.noise_data import NoiseRows, areas, counted, segments
from detune.proof.noise_values import NoiseSampler, noise_sampled
from detune.proof.scatter_data import ScatterSystem
from detune.proof.selection_data import Floats, Integers

FIRST_INTERVALS = 48
BATCH = 512
KEPT_TRIALS = 3
FREQUENCY_FIRST = 0.5
"""Frequency is cut while its share of the error is at least this part of the greatest share of a variable."""
CUT_AT_ONCE = 0.6
"""The intervals that are cut at once carry this share of what frequency contributes."""


@dataclass(frozen=True, eq=False)
class Strips:
    """What N intervals of frequency contribute to the variances of R rows over one box of scatter.

    low, high (N,): the intervals of z. centre, bent (N, R): value at the box's middle, and the greatest of
    what is not linear. slope (N, R, V). weight (N, V+1): what the width of each variable has to do with
    `bent`, frequency last.
    """

    low: Floats
    high: Floats
    centre: Floats
    slope: Floats
    bent: Floats
    weight: Floats

    def chosen(self, mask: np.ndarray[tuple[int], np.dtype[np.bool_]]) -> Strips:
        """Some of the intervals."""
        return Strips(*(getattr(self, name)[mask] for name in self.__dataclass_fields__))

    def joined(self, other: Strips) -> Strips:
        """Intervals of both."""
        names = self.__dataclass_fields__
        return Strips(*(np.concatenate([getattr(self, n), getattr(other, n)]) for n in names))

    def greatest(self, half: Floats) -> tuple[Floats, Floats]:
        """Bounds (R,) of the variances of rows and of their rates over the box of half widths (V,)."""
        out = []
        for scale in (np.ones(len(self.high)), self.high):
            value = scale @ (self.centre + self.bent)
            out.append(value + np.abs(np.einsum("n,nrv->rv", scale, self.slope)) @ half)
        moved, rates = (np.maximum(np.where(np.isnan(v), np.inf, v), 0.0) * (1.0 + WIDENING) for v in out)
        return moved, rates


class Bounder:
    """Bounds strips, and counts how often each trial of the inverse's bound was best."""

    def __init__(self, system: ScatterSystem, noise: NoiseRows) -> None:
        self.system, self.noise, self.frame = system, noise, frame_of(system, noise.plain)
        self.trials, self.wins, self.boxes = TRIALS, np.zeros(len(TRIALS), dtype=np.int64), 0

    def strips(self, low: Floats, high: Floats, z_low: Floats, z_high: Floats) -> Strips:
        """Strips of one box of scatter low, high (V,) for intervals z_low, z_high (N,)."""
        parts = []
        for first in range(0, len(z_low), BATCH):
            some = slice(first, first + BATCH)
            edge = [
                np.concatenate([np.broadcast_to(x, (len(z[some]), len(x))), z[some, None]], axis=1)
                for x, z in ((low, z_low), (high, z_high))
            ]
            with np.errstate(invalid="ignore", over="ignore"):
                parts.append(self._strips(Box(edge[0], edge[1])))
        self.boxes += len(z_low)
        if len(self.trials) == len(TRIALS) and self.wins.sum() > 2 * BATCH:
            best = np.argsort(-self.wins, kind="stable")[:KEPT_TRIALS]
            self.trials = tuple(TRIALS[i] for i in best)
        found = parts[0]
        for part in parts[1:]:
            found = found.joined(part)
        return found

    def _strips(self, box: Box) -> Strips:
        system, noise, frame = self.system, self.noise, self.frame
        wins = self.wins if len(self.trials) == len(TRIALS) else np.zeros(len(self.trials), dtype=np.int64)
        state = solved(system, frame, box, 1.0, self.trials, wins)
        count, variables = box.low.shape
        owner: Integers = frame.used // 3
        centre, bent = np.zeros((count, noise.count)), np.zeros((count, noise.count))
        slope, weight = np.zeros((count, noise.count, variables - 1)), np.zeros((count, variables))
        part = np.abs(state.each.slope) * box.half[:, None, :]
        part = part / np.maximum(part.sum(axis=2), 1e-300)[:, :, None]
        half = box.half[:, :-1]
        for each in noise.sets:
            under = areas(each, box.low[:, -1], box.high[:, -1])
            if not (under.area > 0.0).any():
                continue
            y, share = set_expansion(system, noise.plain, frame, each.loads, state, box)
            size = np.abs(y.centre)
            turned = 2.0 * (y.centre.conj()[:, :, None] * y.slope).real
            moved = np.einsum("bcv,bv->bc", np.abs(y.slope[:, :, :-1]), half)
            moved = moved + np.abs(y.slope[:, :, -1]) * under.spread[:, None]
            middle = size**2 + turned[:, :, -1] * under.lean[:, None]
            more = moved**2 + 2.0 * (size + moved) * y.remainder + y.remainder**2
            # Nothing is excited where there is no density, whether the bound exists or not.
            there = under.area > 0.0
            more, area = np.where(there[:, None], more, 0.0), under.area[:, None]
            for target, value in ((centre, middle * area), (bent, more * area)):
                np.add.at(target.T, owner, value.T)
            np.add.at(
                np.swapaxes(slope, 0, 1), owner, np.swapaxes(turned[:, :, :-1] * area[:, :, None], 0, 1)
            )
            weight += np.einsum("bct,btv,bc->bv", share, part, size * np.sqrt(area), optimize=True)
        weight += 1e-9 * box.half / np.maximum(np.abs(box.middle), 1e-300) * weight.sum(axis=1, keepdims=True)
        weight = weight / np.maximum(weight.sum(axis=1), 1e-300)[:, None]
        return Strips(box.low[:, -1], box.high[:, -1], centre, slope, bent, weight)


@dataclass
class _Node(Node[Floats]):
    """A box of scatter with the edges of the intervals of frequency it was bounded by."""

    edges: tuple[Floats, Floats] = field(kw_only=True)

    @property
    def half(self) -> Floats:
        return 0.5 * (self.high - self.low)


def decide_noise(
    system: ScatterSystem,
    noise: NoiseRows,
    *,
    max_boxes: int = 200_000,
    interrupted: Callable[[], bool] | None = None,
    samples: NoiseSampler | None = None,
    fatal: Flags | None = None,
) -> RowsDecision:
    """Decide whether every row keeps its limit over all variables. `boxes` counts boxes of scatter and frequency.

    A row is violated only by a point whose value, less the tolerance of its quadrature, exceeds the limit.
    The work ends when a `fatal` (R,) row, None for any, is violated; else the other rows are decided all the
    same.
    """
    found = noise_sampled(system, noise) if samples is None else samples
    bounder, settled = Bounder(system, noise), np.full(noise.count, -np.inf)
    first = segments(noise, FIRST_INTERVALS)
    root = _Node(found.low, found.high, np.full(noise.count, np.inf), edges=(first[:-1], first[1:]))
    # The worst box first, so that the bracket is as narrow as the work allows where it ends undecided.
    queue: list[tuple[float, int, _Node]] = [(0.0, 0, root)]
    number, stuck = 0, []
    while queue and not found.breaks(fatal):
        if bounder.boxes >= max_boxes or (interrupted is not None and interrupted()):
            break
        node = heapq.heappop(queue)[2]
        limit = np.where(found.best > noise.limit, np.inf, noise.limit)
        if not np.isfinite(limit).any():
            queue.append((0.0, number, node))
            break
        variable = _work(node, bounder, noise, limit, max_boxes)
        if bool((node.upper <= limit).all()):
            settled = np.maximum(settled, node.upper)
        elif variable < 0:
            stuck.append(node)
        else:
            found.evaluate(0.5 * (node.low + node.high)[None])
            for child in cut(node, variable):
                number += 1
                heapq.heappush(queue, (-float(_ratio(child.upper, noise.limit).max()), number, child))
    left = [node for *_, node in queue]
    no_speed = np.full(noise.count, np.nan)
    return rows_decision(found, root, [*left, *stuck], settled, found.where, no_speed, bounder.boxes)


def _ratio(upper: Floats, limit: Floats) -> Floats:
    """Bounds (R,) over limits, a bound that does not exist as a very large one."""
    return np.where(np.isfinite(upper), upper, 1e300) / np.maximum(limit, 1e-300)


def _work(node: _Node, bounder: Bounder, noise: NoiseRows, limit: Floats, max_boxes: int) -> int:
    """Bound a node, cutting frequency while that pays; the variable to cut next, -1 where nothing can be cut."""
    strips = bounder.strips(node.low, node.high, *node.edges)
    while True:
        upper = counted(noise, *(v[None] for v in strips.greatest(node.half)))[0]
        node.upper = np.minimum(node.upper, upper)
        node.edges = strips.low, strips.high
        if bool((node.upper <= limit).all()):
            return -1
        late, variable = _what_to_cut(strips, node, _ratio(upper, limit))
        if late is None or bounder.boxes >= max_boxes:
            return variable
        chosen = strips.chosen(late)
        middle = 0.5 * (chosen.low + chosen.high)
        fine = bounder.strips(
            node.low, node.high, np.concatenate([chosen.low, middle]), np.concatenate([middle, chosen.high])
        )
        strips = strips.chosen(~late).joined(fine)


def _what_to_cut(
    strips: Strips, node: _Node, ratio: Floats
) -> tuple[np.ndarray[tuple[int], np.dtype[np.bool_]] | None, int]:
    """Intervals (N,) to cut, or None and the variable to cut: whichever has more to do with the worst row's
    error."""
    error = strips.bent[:, int(np.argmax(ratio))]
    without = ~np.isfinite(error)
    # Where intervals are without a bound, they come first.
    error = np.where(without, 1.0, 0.0) if without.any() else error
    share = error[:, None] * strips.weight
    middle = 0.5 * (node.low + node.high)
    possible = (middle > node.low) & (middle < node.high)
    by_variable = np.where(possible, share[:, :-1].sum(axis=0), -1.0)
    best = int(np.argmax(by_variable)) if possible.any() else -1
    own = share[:, -1]
    halves = 0.5 * (strips.low + strips.high)
    narrow = ~((halves > strips.low) & (halves < strips.high))
    own = np.where(narrow, 0.0, own)
    enough = best < 0 or own.sum() >= FREQUENCY_FIRST * by_variable[best]
    if not enough or not own.sum() > 0.0:
        return None, best
    order = np.argsort(-own, kind="stable")
    number = int(np.searchsorted(np.cumsum(own[order]), CUT_AT_ONCE * own.sum())) + 1
    late = np.zeros(len(own), dtype=bool)
    late[order[:number]] = True
    return late, best
