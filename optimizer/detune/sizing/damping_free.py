"""Response limits that hold whatever the damping: |c^T q| <= sqrt(c^T A^-1 c  f^H A^-1 f) on either side
(see `lmi`).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from detune.sizing.stiffness_model import StiffnessModel

Floats = NDArray[np.float64]
Side = Literal["below", "above"]


@dataclass(frozen=True)
class DampingFreeLimit:
    """|row^T q| <= limit under the constant `load`, whatever the damping, with every mode on one side of `frequency`.

    `row` (n,) or (r, n) real, of several the root of the summed squares; `load` (n,) real or complex. Below
    (all modes under the frequency in Hz) it then holds at every higher frequency, above at every lower one.
    Limits of one name bound parts of one sum: their responses together stay within `limit`, which they share.
    """

    name: str
    frequency: float
    row: Floats
    load: NDArray[np.complex128]
    limit: float
    side: Side = "below"


def load_rows(load: NDArray[np.complex128]) -> Floats:
    """Real and imaginary part (2, n) of a load: f^H A^-1 f is the sum over both."""
    return np.stack([np.real(load), np.imag(load)])


def balanced_split(model: StiffnessModel, limit: DampingFreeLimit, k: Floats, ballast: Floats) -> float:
    """The split at which both factors of a bound are as large; NaN where the design is not on the side."""
    row, load = _compliances(model, limit, k, ballast)
    return math.sqrt(row / load) if load < math.inf else math.nan


def _compliances(
    model: StiffnessModel, limit: DampingFreeLimit, k: Floats, ballast: Floats
) -> tuple[float, float]:
    """c^T A^-1 c and f^H A^-1 f, each summed over its rows; infinite where A is not positive definite."""
    a = (2 * math.pi * limit.frequency) ** 2 * model.mass_at(ballast) - model.stiffness_at(k, ballast)
    a = a if limit.side == "below" else -a
    if float(np.linalg.eigvalsh(a)[0]) <= 0:
        return math.inf, math.inf
    rows, loads = np.atleast_2d(limit.row), load_rows(limit.load)
    return float(np.sum(rows.T * np.linalg.solve(a, rows.T))), float(
        np.sum(loads.T * np.linalg.solve(a, loads.T))
    )


def damping_free_bound(model: StiffnessModel, limit: DampingFreeLimit, k: Floats, ballast: Floats) -> float:
    """sqrt(c^T A^-1 c f^H A^-1 f) at one design: never below the response at any damping; inf off its side."""
    row, load = _compliances(model, limit, k, ballast)
    return math.sqrt(row * load)


def shares_of(
    model: StiffnessModel, limits: tuple[DampingFreeLimit, ...], k: Floats, ballast: Floats
) -> list[float]:
    """Shares of the limits of one name in proportion to their bounds at a design; they sum to one."""
    bounds = [damping_free_bound(model, x, k, ballast) for x in limits]
    totals = [sum(b for b, y in zip(bounds, limits, strict=True) if y.name == x.name) for x in limits]
    equal = [1.0 / sum(x.name == y.name for y in limits) for x in limits]
    return [
        b / total if 0.0 < total < math.inf else each
        for b, total, each in zip(bounds, totals, equal, strict=True)
    ]
