"""Purchase specification: the largest proven box of stiffness, loss factor and load around one design.

The oracle is given: `proven(lower, upper)` says that every point of the box meets the brief, by proof. Proof
shrinks with the box (any box inside a proven box holds too), so each face can be pushed out by bisection. The
result cannot be grown by any single face: it is maximal by inclusion, not the box of greatest volume.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.sizing.statement import SizingError

Floats = NDArray[np.float64]
Oracle = Callable[[Floats, Floats], bool]


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
    """A box in which any part meets the brief: `lower`, `upper` (d,), its faces, and how often the oracle was asked."""

    names: tuple[str, ...]
    lower: Floats
    upper: Floats
    faces: tuple[Face, ...]
    questions: int


def _to_unit(values: Floats, logarithmic: NDArray[np.bool_]) -> Floats:
    return np.where(logarithmic, np.log(np.where(logarithmic, values, 1.0)), values)


def _from_unit(values: Floats, logarithmic: NDArray[np.bool_]) -> Floats:
    return np.where(logarithmic, np.exp(np.where(logarithmic, values, 0.0)), values)


class _Box:
    """The growing box in unit coordinates, with the count of questions."""

    def __init__(self, proven: Oracle, center: Floats, logarithmic: NDArray[np.bool_]) -> None:
        self.proven, self.logarithmic = proven, logarithmic
        self.low = _to_unit(center, logarithmic)
        self.high = self.low.copy()
        self.center = center
        self.questions = 0

    def physical(self, low: Floats, high: Floats) -> tuple[Floats, Floats]:
        # exp(log(center)) may miss the center by a rounding; the box must hold it.
        a = np.minimum(_from_unit(low, self.logarithmic), self.center)
        b = np.maximum(_from_unit(high, self.logarithmic), self.center)
        return a, b

    def ask(self, low: Floats, high: Floats) -> bool:
        self.questions += 1
        return bool(self.proven(*self.physical(low, high)))


def _grow_all(box: _Box, low: Floats, high: Floats, steps: int) -> None:
    """Grow every face by one common share of its way to the limits of the search."""
    center = box.low.copy()
    inside, outside = 0.0, 1.0
    if box.ask(low, high):
        inside = 1.0
    else:
        for _ in range(steps):
            middle = 0.5 * (inside + outside)
            if box.ask(center + middle * (low - center), center + middle * (high - center)):
                inside = middle
            else:
                outside = middle
    box.low, box.high = center + inside * (low - center), center + inside * (high - center)


def _grow_face(box: _Box, axis: int, upper_end: bool, limit: float, tolerance: float) -> float:
    """Push one face towards `limit`; returns the nearest unit value at which the proof failed."""

    def at(value: float) -> tuple[Floats, Floats]:
        low, high = box.low.copy(), box.high.copy()
        (high if upper_end else low)[axis] = value
        return low, high

    here = float(box.high[axis] if upper_end else box.low[axis])
    if here == limit:
        return limit
    if box.ask(*at(limit)):
        (box.high if upper_end else box.low)[axis] = limit
        return limit
    inside, outside = here, limit
    while abs(outside - inside) > tolerance:
        middle = 0.5 * (inside + outside)
        if middle in (inside, outside):
            break
        if box.ask(*at(middle)):
            inside = middle
        else:
            outside = middle
    (box.high if upper_end else box.low)[axis] = inside
    return outside


def largest_proven_box(
    names: tuple[str, ...],
    center: Floats,
    lower_limits: Floats,
    upper_limits: Floats,
    proven: Oracle,
    logarithmic: tuple[bool, ...],
    tolerance: float = 1e-3,
    joint_steps: int = 8,
) -> Specification:
    """Largest (by inclusion) box around `center` (d,) within the limits (d,) in which `proven` holds.

    First all faces grow together, so that no quantity takes the whole room; then each face alone, until a whole
    round moves none. `tolerance` is relative for logarithmic quantities, and a share of the search range for
    the others. Raises SizingError when the limits do not hold the center or the center itself is unproven.
    """
    if not (len(names) == center.size == lower_limits.size == upper_limits.size == len(logarithmic)):
        raise SizingError("names, center, limits and scales must be of one length")
    if np.any(lower_limits > center) or np.any(upper_limits < center):
        raise SizingError("the limits of the search do not hold the design")
    scale = np.array(logarithmic, dtype=bool)
    if np.any(scale & (lower_limits <= 0)):
        raise SizingError("a logarithmic quantity needs a lower limit above zero")
    box = _Box(proven, center, scale)
    if not box.ask(box.low, box.high):
        raise SizingError("the design itself is not proven to meet the brief; there is no box around it")
    low, high = _to_unit(lower_limits, scale), _to_unit(upper_limits, scale)
    _grow_all(box, low, high, joint_steps)
    steps = np.where(scale, tolerance, tolerance * np.maximum(high - low, 0.0))
    beyond = {(i, up): float((high if up else low)[i]) for i in range(center.size) for up in (False, True)}
    for _ in range(20):
        before = np.concatenate([box.low, box.high])
        for i in range(center.size):
            for up in (False, True):
                beyond[i, up] = _grow_face(box, i, up, float((high if up else low)[i]), float(steps[i]))
        if np.array_equal(before, np.concatenate([box.low, box.high])):
            break
    a, b = box.physical(box.low, box.high)
    faces = []
    for i, name in enumerate(names):
        for up in (False, True):
            at_limit = float((box.high if up else box.low)[i]) == float((high if up else low)[i])
            value = float((b if up else a)[i])
            failed = value if at_limit else float(_from_unit(np.full(center.size, beyond[i, up]), scale)[i])
            faces.append(
                Face(name, up, value, "limit of the search" if at_limit else "no proof beyond", failed)
            )
    return Specification(names, a, b, tuple(faces), box.questions)
