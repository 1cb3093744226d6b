"""Sums of the parts' stiffness over a batch of designs."""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from detune.response.absorbers import spare_stiffness
from detune.response.designs import Designs
from detune.response.model import Group, Model

Floats = NDArray[np.float64]


def static_stiffness(model: Model, designs: Designs) -> Floats:
    """Return the static stiffness (D, n, n) of a batch of straight springs."""
    straight = group_sum(model, designs, lambda group: group.arrays.stiffness_static)
    return model.fixed_static + spare_stiffness(model, designs) + straight


def group_sum(model: Model, designs: Designs, values: Callable[[Group], Floats]) -> Floats:
    """Return what values (P, 3) of each group's parts add up to (D, n, n) over the stations."""
    n = model.frame.count
    total = np.zeros((designs.count, n * n))
    for index, group in enumerate(model.groups):
        total += values(group)[designs.part[:, index]] @ group.spread.reshape(3, n * n)
    return total.reshape(designs.count, n, n)
