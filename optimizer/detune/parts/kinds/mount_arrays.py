"""Many mounts as arrays."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from detune.parts.laws import Axes
from detune.parts.prices import CostBreaks, cost_breaks

if TYPE_CHECKING:
    from detune.parts.kinds.mount import Mount


@dataclass(frozen=True, slots=True, eq=False)
class MountArrays:
    """P mounts as read-only arrays, SI. Columns of the (P, 3) arrays are the local axes x, y, z.

    Where a part states none, lateral figures, free_height, mass and temperatures are nan, deflection_max and stroke
    inf. cost: of one piece; cost_breaks: of several. plain: whether these figures say all of its stiffness and damping;
    a mount that is not plain has a law, to be read from the mount itself.
    """

    stiffness_static: NDArray[np.float64]
    stiffness_dynamic: NDArray[np.float64]
    loss_factor: NDArray[np.float64]
    viscous: NDArray[np.float64]
    load_min: NDArray[np.float64]
    load_max: NDArray[np.float64]
    deflection_max: NDArray[np.float64]
    free_height: NDArray[np.float64]
    mass: NDArray[np.float64]
    cost: NDArray[np.float64]
    pulls: NDArray[np.bool_]
    tolerance: NDArray[np.float64]
    cost_breaks: CostBreaks
    plain: NDArray[np.bool_]
    stroke: NDArray[np.float64]
    temperature_min: NDArray[np.float64]
    temperature_max: NDArray[np.float64]

    def __len__(self) -> int:
        return len(self.cost)


def is_plain(mount: Mount) -> bool:
    """Say whether a constant stiffness, loss factor and viscous coefficient are all there is to the mount."""
    laws = (
        mount.relaxation,
        mount.law_table,
        mount.load_curve,
        mount.amplitude_table,
        mount.damping_unknown,
    )
    return not mount.follows_load and all(law is None for law in laws)


def mount_arrays(mounts: Iterable[Mount]) -> MountArrays:
    """Gather mounts into arrays, in the order given."""
    parts = tuple(mounts)

    def frozen(values: NDArray[np.float64]) -> NDArray[np.float64]:
        values.setflags(write=False)
        return values

    def axes(figures: Sequence[Axes]) -> NDArray[np.float64]:
        return frozen(np.array(figures, dtype=np.float64).reshape(len(parts), 3))

    def column(figures: Sequence[float | None], absent: float = math.nan) -> NDArray[np.float64]:
        return frozen(
            np.array([absent if figure is None else figure for figure in figures], dtype=np.float64)
        )

    def flags(figures: Sequence[bool]) -> NDArray[np.bool_]:
        values = np.array(figures, dtype=np.bool_)
        values.setflags(write=False)
        return values

    return MountArrays(
        stiffness_static=axes([part.stiffness_static for part in parts]),
        stiffness_dynamic=axes([part.stiffness_dynamic for part in parts]),
        loss_factor=axes([part.loss_factor for part in parts]),
        viscous=axes([part.viscous for part in parts]),
        load_min=column([part.load_min for part in parts]),
        load_max=column([part.load_max for part in parts]),
        deflection_max=column([part.deflection_max for part in parts], math.inf),
        free_height=column([part.free_height for part in parts]),
        mass=column([part.mass for part in parts]),
        cost=column([part.cost for part in parts]),
        pulls=flags([part.pulls for part in parts]),
        tolerance=column([part.tolerance for part in parts]),
        cost_breaks=cost_breaks(parts),
        plain=flags([is_plain(part) for part in parts]),
        stroke=column([part.stroke for part in parts], math.inf),
        temperature_min=column([part.temperature_min for part in parts]),
        temperature_max=column([part.temperature_max for part in parts]),
    )
