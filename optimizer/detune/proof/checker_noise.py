"""The checker's own bound of rows under noise over boxes of scatter, with all rounding accounted for.

Over a box of scatter and an interval of the squared speed z the components are enclosed by lines
(`checker_scatter`), y = c + L_x + L_z + rest. The mean of |y|^2 under the density is at most |c|^2 + 2 Re c*
(L_x + mean L_z) + (reach of L_x + rms of L_z)^2 + 2 (|c| + reach + rms) rest + rest^2. The checker cuts
frequency for itself: the record names the boxes of scatter alone.
"""

from __future__ import annotations

import itertools
import math
from typing import Any

import numpy as np

from detune.proof.checker_arithmetic import OUTWARD, Matrix
from detune.proof.checker_boxes import array
from detune.proof.checker_designs import number
from detune.proof.checker_lines import Line
from detune.proof.checker_scatter import Machine, read_scatter, read_set, set_lines

EULER = 0.5772156649015329
FEWEST_CYCLES = 10.0
FIRST_INTERVALS = 64
MOST_INTERVALS = 6000
BATCH = 512
DEEPEST = 3
MOST_IN_ONE = 12_000
ROUNDS = 24
STALLED = 0.985
CUT_AT_ONCE = 0.6
Cut = Any


def read_noise(data: dict[str, Any]) -> dict[str, Any]:
    """Arrays of recorded rows under noise; raises ValueError for unusable data."""
    rows = {name: array(data[name]) for name in ("rows", "forces", "rate", "factor", "limit")}
    rows["extreme"] = np.array(data["extreme"], dtype=bool)
    rows["duration"] = number(data["duration"])
    if not (rows["factor"] >= 0.0).all() or not rows["duration"] > 0.0:
        raise ValueError("a factor is negative, or the noise does not last")
    rows["sets"] = []
    for each in data["sets"]:
        loads = read_set(each["loads"])
        if loads["order"] != 1.0:
            raise ValueError("a noise is not of order 1")
        frequency, density = array(each["frequency"]), array(each["density"])
        wide = np.diff(frequency) > 0.0
        joins = wide & ((density[1:] > 0.0) != (density[:-1] > 0.0))
        if not (frequency > 0.0).all() or (np.diff(frequency) < 0.0).any() or not (density >= 0.0).all():
            raise ValueError("a density is not one")
        if joins.any() or len(frequency) < 2:
            raise ValueError("a density joins zero and a positive value")
        rows["sets"].append((loads, frequency, density))
    if not rows["sets"]:
        raise ValueError("there is no noise")
    return rows


def first_intervals(rows: dict[str, Any]) -> tuple[Matrix, Matrix]:
    """Intervals of z between all break points."""
    points = np.unique(np.concatenate([frequency for _, frequency, _ in rows["sets"]]))
    share = FIRST_INTERVALS / np.log(points[-1] / points[0])
    edges = [points[:1]]
    for a, b in itertools.pairwise(points):
        edges.append(np.geomspace(a, b, 2 + int(share * np.log(b / a)))[1:])
    z = (2.0 * np.pi * np.unique(np.concatenate(edges))) ** 2
    return z[:-1], z[1:]


def under_density(
    frequency: Matrix, density: Matrix, low: Matrix, high: Matrix
) -> tuple[Matrix, Matrix, Matrix, Matrix]:
    """Area (N,) of a density over intervals of z, mean of (z - middle)/half, and its mean square from below
    and above.

    By moments of S = A f^n: the integral of f^p S df from a to b is S(a) a^(p+1) (e^(k L) - 1)/k with k = n +
    p + 1.
    """
    a, b = np.sqrt(low) / (2.0 * np.pi), np.sqrt(high) / (2.0 * np.pi)
    at = np.sqrt(a) * np.sqrt(b)
    piece = np.clip(np.searchsorted(frequency, at, side="right") - 1, 0, len(frequency) - 2)
    first, last = density[piece], density[piece + 1]
    there = (at > frequency[0]) & (at < frequency[-1]) & (first > 0.0) & (last > 0.0)
    rise = np.log(np.where(there, last, 1.0) / np.where(there, first, 1.0))
    steep = rise / np.log(frequency[piece + 1] / frequency[piece])
    start = np.where(there, first * (a / frequency[piece]) ** steep, 0.0)
    octave = np.log1p((high - low) / low) * 0.5
    moments = []
    for power in (0, 2, 4):
        x = (steep + power + 1.0) * octave
        # (e^x - 1)/x by its series where x is small.
        grown = np.where(
            np.abs(x) > 1e-5, np.expm1(x) / np.where(x == 0.0, 1.0, x), 1.0 + x / 2.0 + x**2 / 6.0
        )
        moments.append((2.0 * np.pi) ** power * start * a ** (power + 1) * octave * grown)
    middle, half = 0.5 * (low + high), 0.5 * (high - low)
    safe = np.where(there, moments[0], 1.0)
    mean = np.where(there, moments[1] / safe - middle, 0.0) / half
    square = np.where(there, moments[2] / safe - 2.0 * middle * (moments[1] / safe) + middle**2, 0.0)
    slack = 1e-11 * middle**2
    return (
        moments[0],
        np.clip(mean, -1.0, 1.0),
        np.clip(square - slack, 0.0, None) / half**2,
        np.minimum((square + slack) / half**2, 1.0),
    )


class Strips:
    """What intervals of z contribute to the variances over one box: upper planes, and lower bounds at a point.

    centre, bent (N, R), parts (N, R, V) per half width; least (N, R), of the mean square from below.
    """

    def __init__(
        self,
        system: dict[str, Matrix],
        rows: dict[str, Any],
        box: tuple[Matrix, Matrix],
        z: tuple[Matrix, Matrix],
    ) -> None:
        count, variables, number_of = len(z[0]), len(box[0]), len(rows["rate"])
        self.low, self.high = z
        self.centre, self.bent = np.zeros((count, number_of)), np.zeros((count, number_of))
        self.least, self.parts = np.zeros((count, number_of)), np.zeros((count, number_of, variables))
        for first in range(0, count, BATCH):
            some = slice(first, first + BATCH)
            low, high = (
                np.concatenate([np.tile(x, (len(e[some]), 1)), e[some, None]], axis=1)
                for x, e in zip(box, z, strict=True)
            )
            with np.errstate(invalid="ignore", over="ignore"):
                machine = Machine(system, low, high, 1.0)
                for loads, frequency, density in rows["sets"]:
                    area = under_density(frequency, density, low[:, -1], high[:, -1])
                    self._add(some, set_lines(rows, loads, machine), area, low[:, -1:], high[:, -1:])

    def _add(
        self, some: slice, y: Line, under: tuple[Matrix, Matrix, Matrix, Matrix], low: Matrix, high: Matrix
    ) -> None:
        area, mean, square_low, square_high = (v[:, None] for v in under)
        shape = (len(area), -1, 3)
        size, own = np.abs(y.centre), np.abs(y.parts[:, :, -1])
        reach = np.abs(y.parts[:, :, :-1]).sum(axis=2) + own * np.sqrt(square_high)
        turned = 2.0 * (y.centre.conj()[:, :, None] * y.parts).real
        # The mean of z is a difference of close numbers.
        slack = 1e-11 * (low + high) / (high - low) * size * own + 1e-13 * (size + reach) ** 2
        middle = size**2 + turned[:, :, -1] * mean
        more = reach**2 + 2.0 * (size + reach) * y.rest + y.rest**2 + slack
        least = middle + own**2 * square_low - 2.0 * (size + reach) * y.rest - slack
        there = area > 0.0
        more, least = (np.where(there, v, 0.0) for v in (more, np.where(np.isnan(least), -np.inf, least)))
        more = np.where(np.isnan(more), np.inf, more)
        self.centre[some] += (middle * area).reshape(shape).sum(axis=2)
        self.bent[some] += (more * area * OUTWARD**2).reshape(shape).sum(axis=2)
        # Integrals of squares are not negative, whatever is known of them.
        self.least[some] += (np.maximum(least, 0.0) * area / OUTWARD**2).reshape(shape).sum(axis=2)
        parts = turned[:, :, :-1] * area[:, :, None]
        self.parts[some] += parts.reshape(*shape, parts.shape[2]).sum(axis=2)

    def replaced(self, late: Matrix, fine: Strips) -> None:
        """Put finer intervals in the place of some."""
        for name in ("low", "high", "centre", "bent", "least", "parts"):
            setattr(self, name, np.concatenate([getattr(self, name)[~late], getattr(fine, name)]))

    def linear(self, rows: dict[str, Any]) -> Matrix:
        """What the bound (R,) comes to when frequency is cut without end; no bound."""
        out = [
            scale @ self.centre + np.abs(np.einsum("n,nrv->rv", scale, self.parts)).sum(axis=1)
            for scale in (np.ones(len(self.high)), self.low)
        ]
        return counted(rows, np.maximum(out[0], 0.0), np.maximum(out[1], 0.0))

    def greatest(self, rows: dict[str, Any]) -> Matrix:
        """Bound (R,) of what the rows count as over the box."""
        out = []
        for scale in (np.ones(len(self.high)), self.high):
            total = scale @ (self.centre + self.bent) + np.abs(np.einsum("n,nrv->rv", scale, self.parts)).sum(
                axis=1
            )
            rounding = 1e-12 * (scale @ (np.abs(self.centre) + self.bent + np.abs(self.parts).sum(axis=2)))
            out.append(np.maximum(np.where(np.isnan(total), np.inf, total + rounding), 0.0))
        return counted(rows, out[0], out[1]) * OUTWARD**2

    def smallest(self, rows: dict[str, Any]) -> Matrix:
        """Bound (R,) from below of what the rows count as at a point."""
        return counted(rows, self.least.sum(axis=0), self.low @ self.least) / OUTWARD**2


def counted(rows: dict[str, Any], moved: Matrix, rates: Matrix) -> Matrix:
    """Rms, or expected extreme u + 0.5772/u with u^2 = 2 ln(2 f T) (Davenport 1964), times the factor; grows
    with both."""
    out = []
    for v, w, extreme in zip(moved, rates, rows["extreme"], strict=True):
        if not math.isfinite(v) or (extreme and not math.isfinite(w)):
            out.append(math.inf)
            continue
        cycles = math.sqrt(w / v) / (2.0 * math.pi) * rows["duration"] if v > 0.0 else 0.0
        u = math.sqrt(2.0 * math.log(2.0 * max(cycles, FEWEST_CYCLES)))
        out.append(math.sqrt(v) * (u + EULER / u) if extreme else math.sqrt(v))
    return np.array(out) * rows["factor"]


def refined(
    system: dict[str, Matrix],
    rows: dict[str, Any],
    box: tuple[Matrix, Matrix],
    decided: Any,
    error: Any,
    hopeless: Any = None,
) -> tuple[bool, int]:
    """Cut intervals of z until `decided(strips)`, or until it gets no nearer; and how many boxes that took.

    error(strips): (N,) what the intervals leave open. hopeless(strips): whether cutting frequency cannot
    help.
    """
    strips = Strips(system, rows, box, first_intervals(rows))
    count, before = len(strips.low), math.inf
    for turn in range(ROUNDS):
        if decided(strips):
            return True, count
        own = error(strips)
        endless = ~np.isfinite(own)
        total = math.inf if endless.any() else float(own.sum())
        stalled = turn > 3 and total > STALLED * before
        if stalled or len(own) > MOST_INTERVALS or (turn > 2 and hopeless is not None and hopeless(strips)):
            return False, count
        before = total
        own = np.where(endless, 1.0, 0.0) if endless.any() else own
        order = np.argsort(-own, kind="stable")
        late = np.zeros(len(own), dtype=bool)
        late[order[: int(np.searchsorted(np.cumsum(own[order]), CUT_AT_ONCE * own.sum())) + 1]] = True
        middle = 0.5 * (strips.low[late] + strips.high[late])
        z = (
            np.concatenate([strips.low[late], middle]),
            np.concatenate([middle, strips.high[late]]),
        )
        if not (z[1] > z[0]).all():
            return False, count
        strips.replaced(late, Strips(system, rows, box, z))
        count += len(z[0])
    return False, count


def check_noise(data: dict[str, Any], rebuild: Cut, halve: Cut) -> tuple[list[str], int]:
    """Faults of decided rows under noise, and the number of boxes bounded."""
    decision, rows, system = data["decision"], read_noise(data["limits"]), read_scatter(data["system"])
    statuses = decision["status"]
    if len(statuses) != len(rows["limit"]) or len(data["labels"]) != len(statuses):
        return ["statuses, labels and rows do not fit together"], 0
    if "violated" in statuses:
        return _witness(data, system, rows, statuses)
    if any(status != "proven" for status in statuses):
        return [], 0
    leaves = rebuild(system["low"], system["high"], decision["splits"])
    if leaves is None:
        return ["the tree of boxes is not complete"], 0

    def decided(strips: Strips) -> bool:
        return bool((strips.greatest(rows) <= rows["limit"]).all())

    def error(strips: Strips) -> Matrix:
        ratio = strips.greatest(rows) / np.maximum(rows["limit"], 1e-300)
        return strips.bent[:, int(np.argmax(np.where(np.isfinite(ratio), ratio, 1e300)))]

    def hopeless(strips: Strips) -> bool:
        return bool((strips.linear(rows) > rows["limit"]).any())

    count = failed = 0
    for low, high in zip(*leaves, strict=True):
        boxes, before = [(low, high, 0)], count
        while boxes:
            least, most, depth = boxes.pop()
            kept, more = refined(system, rows, (least, most), decided, error, hopeless)
            count += more
            if kept:
                continue
            if depth >= DEEPEST or not (most > least).any() or count - before > MOST_IN_ONE:
                failed += 1
                break
            lows, highs = halve(least[None], most[None])
            boxes += [(a, b, depth + 1) for a, b in zip(lows, highs, strict=True)]
        if failed:
            return ["a box of scatter under noise could not be confirmed within the limits"], count
    return [], count


def _witness(
    data: dict[str, Any], system: dict[str, Matrix], rows: dict[str, Any], statuses: list[str]
) -> tuple[list[str], int]:
    """Whether the points named break the limits of the rows called violated, by bounds from below at those
    points."""
    decision, faults, count = data["decision"], [], 0
    for row, status in enumerate(statuses):
        if status != "violated":
            continue
        point = np.array(decision["worst"][row], dtype=np.float64)
        if (point < system["low"]).any() or (point > system["high"]).any():
            faults.append(f"{data['labels'][row]}: the witness lies outside the scatter")
            continue

        def decided(strips: Strips, row: int = row) -> bool:
            return bool(strips.smallest(rows)[row] > rows["limit"][row])

        def error(strips: Strips, row: int = row) -> Matrix:
            return strips.centre[:, row] + strips.bent[:, row] - strips.least[:, row]

        broken, more = refined(system, rows, (point, point), decided, error)
        count += more
        if not broken:
            faults.append(f"{data['labels'][row]}: the witness does not exceed the limit")
    return faults, count
