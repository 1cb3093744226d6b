"""Purchase specification: the largest proven box of stiffness, loss factor and load around one design.

The oracle is given: `proven(lower, upper)` says that every point of the box meets the brief, by proof. Proof
shrinks with the box (any box inside a proven box holds too), so each face can be pushed out by bisection. The
result cannot be grown by any single face: it is maximal by inclusion. Of such boxes there are many; several are grown,
in different shapes, and the one of the greatest volume is kept, each quantity counted by its ratio. Where a quick
exact test of many boxes is at hand (`possible`), the shapes are many and the proof is asked of the largest alone.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.sizing.statement import SizingError

Floats = NDArray[np.float64]
Oracle = Callable[[Floats, Floats], bool]
# Whether boxes lower, upper (N, d) may be proven: no where a point of a box is known to fail.
Possible = Callable[[Floats, Floats], NDArray[np.bool_]]
# Shapes that a guide tries, and sections of a range in one go.
SHAPES, SECTIONS = 24, 8
# How far a box that may be proven is drawn in before a proof is asked for, as shares of its half widths.
DRAWN_IN = (1e-3, 4e-3, 0.015, 0.05, 0.15, 0.4, 0.7)


@dataclass(frozen=True)
class Face:
    """One face: the quantity, which end, its value, and what stopped it.

    `stopped_by` is "limit of the search" or "no proof beyond"; `first_unproven` is the nearest value beyond the
    face at which the proof failed (equal to `value` for a face stopped by the limit of the search).
    """

    quantity: str
    upper_end: bool
    value: float
    stopped_by: str
    first_unproven: float


@dataclass(frozen=True)
class Specification:
    """A box in which any part meets the brief: `lower`, `upper` (d,), its faces, and how often the oracle was asked.

    `shapes`: how many boxes were grown in different shapes, of which this is the largest.
    """

    names: tuple[str, ...]
    lower: Floats
    upper: Floats
    faces: tuple[Face, ...]
    questions: int
    shapes: int = 1


class _Scale:
    """Coordinates in which quantities are compared: their logarithm, or themselves over the range of the search."""

    def __init__(self, center: Floats, low: Floats, high: Floats, logarithmic: NDArray[np.bool_]) -> None:
        self.logarithmic, self.center = logarithmic, center
        self.span = np.where(logarithmic, 1.0, np.maximum(high - low, 1e-300))
        self.low, self.high, self.middle = self.inward(low), self.inward(high), self.inward(center)

    def inward(self, values: Floats) -> Floats:
        logs = np.log(np.where(self.logarithmic, values, 1.0))
        return np.where(self.logarithmic, logs, values / self.span)

    def outward(self, values: Floats) -> Floats:
        return np.where(self.logarithmic, np.exp(np.where(self.logarithmic, values, 0.0)), values * self.span)

    def physical(self, low: Floats, high: Floats) -> tuple[Floats, Floats]:
        """Corners of boxes; exp(log(center)) may miss the center by a rounding, and the box must hold it."""
        return np.minimum(self.outward(low), self.center), np.maximum(self.outward(high), self.center)


class _Asked:
    """The oracle in the coordinates of a scale, with the count of questions."""

    def __init__(self, proven: Oracle, scale: _Scale) -> None:
        self.proven, self.scale, self.questions = proven, scale, 0

    def __call__(self, low: Floats, high: Floats) -> bool:
        self.questions += 1
        return bool(self.proven(*self.scale.physical(low, high)))


def _shaped(scale: _Scale, weights: Floats, size: Floats) -> tuple[Floats, Floats]:
    """Boxes (..., d) that reach `size` times the weights (..., 2 d) from the middle, within the limits."""
    count = len(scale.middle)
    low = np.maximum(scale.middle - size * weights[..., :count], scale.low)
    return low, np.minimum(scale.middle + size * weights[..., count:], scale.high)


def _volume(low: Floats, high: Floats) -> Floats:
    """Logarithm of the volume of boxes (..., d)."""
    return np.asarray(np.log(np.maximum(high - low, 1e-9)).sum(axis=-1))


def _with_face(
    low: Floats, high: Floats, axis: int, up: bool, value: Floats | float
) -> tuple[Floats, Floats]:
    low, high = low.copy(), high.copy()
    (high if up else low)[..., axis] = value
    return low, high


def _grown(ask: _Asked, weights: Floats, steps: int) -> tuple[Floats, Floats]:
    """The largest box of one shape that is proven, by bisection of its size."""
    scale = ask.scale
    most = float(np.maximum(scale.middle - scale.low, scale.high - scale.middle).max() / weights.min())
    box = _shaped(scale, weights, np.array(most))
    if ask(*box):
        return box
    inside, outside = 0.0, most
    for _ in range(steps):
        # Sizes are far apart in ratio, so the ratio is halved once something is proven.
        middle = (inside * outside) ** 0.5 if inside > 0.0 else outside * 0.25
        if ask(*_shaped(scale, weights, np.array(middle))):
            inside = middle
        else:
            outside = middle
    return _shaped(scale, weights, np.array(inside))


def _shapes(count: int, number: int) -> Floats:
    """Weights (M, 2 d) of shapes: all alike, one end or one quantity before the others, and random ones."""
    weights = [np.ones(2 * count)]
    for axis in range(count if count > 1 else 0):
        first = np.full(2 * count, 0.3)
        first[[axis, count + axis]] = 1.0
        weights.append(first)
    rng = np.random.default_rng(1)
    while len(weights) < number:
        weights.append(np.exp(rng.uniform(np.log(0.03), 0.0, 2 * count)))
    return np.array(weights[:number])


def _farthest(
    possible: Possible, at: Callable[[Floats], tuple[Floats, Floats]], near: Floats, far: Floats
) -> Floats:
    """For each of N boxes the farthest place between near and far (N,) that is possible, by sections."""
    inside, outside = near.copy(), far.copy()
    for number in range(5):
        share = (
            np.linspace(0.0, 1.0, SECTIONS + 1)[1:]
            if number == 0
            else np.linspace(0.0, 1.0, SECTIONS + 1)[1:-1]
        )
        places = inside + share[:, None] * (outside - inside)
        good = np.stack([possible(*at(place)) for place in places])
        # The first that fails ends the row: what lies beyond it is not counted.
        first = np.where(good.all(axis=0), len(share), np.argmin(good, axis=0))
        steps = np.concatenate([inside[None], places, outside[None]])
        columns = np.arange(len(inside))
        inside, outside = steps[first, columns], steps[np.minimum(first + 1, len(steps) - 1), columns]
    return inside


def _guide(scale: _Scale, possible: Possible, number: int) -> tuple[Floats, Floats]:
    """The largest of many boxes whose every point that is looked at holds."""
    weights = _shapes(len(scale.middle), number)
    most = np.maximum(scale.middle - scale.low, scale.high - scale.middle).max() / weights.min(axis=1)

    def sized(size: Floats) -> tuple[Floats, Floats]:
        return scale.physical(*_shaped(scale, weights, size[:, None]))

    # The size counts by its ratio: from far below anything of interest.
    size = np.exp(
        _farthest(possible, lambda u: sized(np.exp(u)), np.full(number, np.log(1e-6)), np.log(most))
    )
    low, high = _shaped(scale, weights, size[:, None])
    for axis in [*range(len(scale.middle))] * 2:
        for up in (False, True):

            def moved(
                place: Floats, axis: int = axis, up: bool = up, low: Floats = low, high: Floats = high
            ) -> tuple[Floats, Floats]:
                return scale.physical(*_with_face(low, high, axis, up, place))

            edge = np.full(number, (scale.high if up else scale.low)[axis])
            (high if up else low)[:, axis] = _farthest(possible, moved, (high if up else low)[:, axis], edge)
    best = int(np.argmax(_volume(low, high)))
    return low[best], high[best]


def _guided(ask: _Asked, possible: Possible, number: int) -> tuple[Floats, Floats]:
    """The guide drawn in until it is proven; the middle alone where no part of it is."""
    scale = ask.scale
    low, high = _guide(scale, possible, number)
    for share in DRAWN_IN:
        drawn = low + share * (scale.middle - low), high + share * (scale.middle - high)
        if ask(*drawn):
            return drawn
    return scale.middle.copy(), scale.middle.copy()


def _push(
    ask: _Asked, box: tuple[Floats, Floats], axis: int, up: bool, limit: float, tolerance: float
) -> tuple[tuple[Floats, Floats], float]:
    """Push one face towards `limit`; returns the box and the nearest place at which the proof failed."""
    low, high = box
    inside = float((high if up else low)[axis])
    outside: float | None = None
    step = tolerance
    while inside != limit and (outside is None or abs(outside - inside) > tolerance):
        # Ever larger steps until one fails, then halves: most faces hardly move.
        if outside is None:
            place = min(inside + step, limit) if up else max(inside - step, limit)
        else:
            place = 0.5 * (inside + outside)
        if place in (inside, outside):
            break
        if ask(*_with_face(low, high, axis, up, place)):
            inside, step = place, 4.0 * step
        else:
            outside = place
    return _with_face(low, high, axis, up, inside), limit if outside is None else outside


def largest_proven_box(
    names: tuple[str, ...],
    center: Floats,
    lower_limits: Floats,
    upper_limits: Floats,
    proven: Oracle,
    logarithmic: tuple[bool, ...],
    tolerance: float = 1e-3,
    joint_steps: int = 8,
    shapes: int = 1,
    possible: Possible | None = None,
) -> Specification:
    """Largest box around `center` (d,) within the limits (d,) in which `proven` holds: see the head of the file.

    `tolerance` is relative for logarithmic quantities, and a share of the search range for the others. `shapes` boxes
    are grown with the proof, or, with `possible`, SHAPES ones without it. Raises SizingError when the limits do not
    hold the center or the center itself is unproven.
    """
    if not (len(names) == center.size == lower_limits.size == upper_limits.size == len(logarithmic)):
        raise SizingError("names, center, limits and scales must be of one length")
    if np.any(lower_limits > center) or np.any(upper_limits < center):
        raise SizingError("the limits of the search do not hold the design")
    logs = np.array(logarithmic, dtype=bool)
    if np.any(logs & (lower_limits <= 0)):
        raise SizingError("a logarithmic quantity needs a lower limit above zero")
    scale = _Scale(center, lower_limits, upper_limits, logs)
    ask = _Asked(proven, scale)
    if not ask(scale.middle, scale.middle):
        raise SizingError("the design itself is not proven to meet the brief; there is no box around it")
    count = shapes if possible is None else SHAPES
    if possible is None:
        grown = [_grown(ask, weights, joint_steps) for weights in _shapes(center.size, count)]
        box = max(grown, key=lambda each: float(_volume(*each)))
    else:
        box = _guided(ask, possible, count)
    beyond: dict[tuple[int, bool], float] = {}
    for _ in range(20):
        before = box
        for axis in range(center.size):
            for up in (False, True):
                limit = float((scale.high if up else scale.low)[axis])
                box, beyond[axis, up] = _push(ask, box, axis, up, limit, tolerance)
        if all(np.array_equal(a, b) for a, b in zip(before, box, strict=True)):
            break
    a, b = scale.physical(*box)
    return Specification(names, a, b, tuple(_faces(names, scale, box, beyond)), ask.questions, count)


def _faces(
    names: tuple[str, ...], scale: _Scale, box: tuple[Floats, Floats], beyond: dict[tuple[int, bool], float]
) -> list[Face]:
    faces = []
    low, high = scale.physical(*box)
    for axis, name in enumerate(names):
        for up in (False, True):
            at_limit = (box[1] if up else box[0])[axis] == (scale.high if up else scale.low)[axis]
            value = float((high if up else low)[axis])
            places = scale.middle.copy()
            places[axis] = beyond[axis, up]
            failed = value if at_limit else float(scale.outward(places)[axis])
            faces.append(
                Face(name, up, value, "limit of the search" if at_limit else "no proof beyond", failed)
            )
    return faces
