"""Matrices of a batch of designs."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.response.designs import Designs
from detune.response.model import Group, Model

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]


@dataclass(frozen=True)
class Dynamic:
    """Matrices of D designs, each (D, n, n): mass, dynamic stiffness, hysteretic and viscous part.

    The dynamic stiffness is D(w) = K + j H + j w C - w^2 M.
    """

    mass: Floats
    stiffness: Floats
    hysteretic: Floats
    viscous: Floats

    def take(self, index: NDArray[np.generic]) -> "Dynamic":
        """Return the matrices of the designs at these indices, or where this mask holds."""
        return Dynamic(self.mass[index], self.stiffness[index], self.hysteretic[index], self.viscous[index])

    def at(self, omega: Floats) -> Complexes:
        """Return D(w) (D, F, n, n) at omega (D, F) in rad/s."""
        w = omega[:, :, None, None]
        constant = self.stiffness + 1j * self.hysteretic
        matrix: Complexes = constant[:, None] - (w**2) * self.mass[:, None]
        if self.viscous.any():
            matrix = matrix + 1j * w * self.viscous[:, None]
        return matrix


def dynamic_matrices(model: Model, designs: Designs) -> Dynamic:
    """Return the dynamic matrices of a batch, at the parts' dynamic stiffness."""
    return Dynamic(
        mass=model.mass[designs.step],
        stiffness=model.fixed_dynamic + _sum(model, designs, lambda group: group.arrays.stiffness_dynamic),
        hysteretic=model.fixed_hysteretic
        + _sum(model, designs, lambda group: group.arrays.stiffness_dynamic * group.arrays.loss_factor),
        viscous=model.fixed_viscous + _sum(model, designs, lambda group: group.arrays.viscous),
    )


def static_stiffness(model: Model, designs: Designs) -> Floats:
    """Return the static stiffness (D, n, n) of a batch."""
    return model.fixed_static + _sum(model, designs, lambda group: group.arrays.stiffness_static)


def part_dynamic_stiffness(group: Group, part: NDArray[np.intp], omega: Floats) -> Complexes:
    """Return one part's complex dynamic stiffness (D, F, 3) along its axes: k (1 + j eta) + j w c."""
    arrays = group.arrays
    constant = arrays.stiffness_dynamic * (1.0 + 1j * arrays.loss_factor)
    stiffness: Complexes = (
        constant[part][:, None, :] + 1j * omega[:, :, None] * arrays.viscous[part][:, None, :]
    )
    return stiffness


def _sum(model: Model, designs: Designs, values: Callable[[Group], Floats]) -> Floats:
    n = model.frame.count
    total = np.zeros((designs.count, n * n))
    for index, group in enumerate(model.groups):
        total += values(group)[designs.part[:, index]] @ group.spread.reshape(3, n * n)
    return total.reshape(designs.count, n, n)
