"""Undamped modes of a batch of designs."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.views import ModeView
from detune.physics import modes
from detune.response.assemble import Dynamic
from detune.response.floor_resonances import table_places, table_resonances

Floats = NDArray[np.float64]
ITERATIONS = 400
UNDAMPED = 1e-9


@dataclass(frozen=True)
class ModeBatch:
    """Undamped natural frequencies (D, n) Hz, mass-normalised shapes (D, n, n), loss factors (D, n)."""

    frequency: Floats
    shapes: Floats
    loss_factor: Floats

    def take(self, index: NDArray[np.generic]) -> "ModeBatch":
        """Return the modes of the designs at these indices, or where this mask holds."""
        return ModeBatch(self.frequency[index], self.shapes[index], self.loss_factor[index])

    def view(self, dynamic: Dynamic, intervals: Sequence[tuple[float, float]]) -> ModeView:
        """Return what a mode allowable looks at. dynamic: the matrices of these designs."""
        with np.errstate(divide="ignore"):
            amplification = 1.0 / self.loss_factor
        between = np.array(intervals, dtype=float).reshape(-1, 2)
        return ModeView(self.frequency, amplification, between, lambda: self._decay(dynamic))

    def _decay(self, dynamic: Dynamic) -> Floats:
        """Rates of decay (D, n) in 1/s: of the damped poles, or by the loss factors of frequency laws."""
        if dynamic.parts.laws_with_frequency:
            return np.asarray(np.pi * self.loss_factor * self.frequency)
        matrices = dynamic.mass, dynamic.viscous, dynamic.hysteretic, dynamic.stiffness
        return np.asarray(-modes.damped_poles(*matrices).real)


def mode_batch(dynamic: Dynamic) -> ModeBatch:
    """Return the undamped modes at the dynamic stiffness, with each mode's equivalent loss factor."""
    # A floor of tabulated dynamic stiffness stands here as the spring and mass near it.
    frequency, shapes = modes.undamped_modes(dynamic.mass, dynamic.stiffness)
    if dynamic.parts.laws_with_frequency:
        return _iterated(dynamic, frequency, shapes)
    loss = modes.modal_loss_factors(shapes, dynamic.hysteretic, dynamic.viscous, frequency)
    return ModeBatch(frequency, shapes, loss)


def _iterated(dynamic: Dynamic, frequency: Floats, shapes: Floats) -> ModeBatch:
    """Modes where stiffness depends on frequency: each one at the stiffness of its own frequency.

    A fixed-point iteration, mode by mode; it closes wherever stiffness rises by less than the square of the
    frequency, which a relaxation always does. Shapes found at different stiffnesses are not quite orthogonal by
    the mass; the nearest set that is takes their place.
    """
    loss = np.zeros_like(frequency)
    for mode in range(frequency.shape[1]):
        for _ in range(ITERATIONS):
            omega = 2.0 * np.pi * frequency[:, [mode]]
            added = dynamic.parts.frequency_matrix(omega, with_floor=False)[:, 0]
            found, found_shapes = modes.undamped_modes(dynamic.mass, dynamic.stiffness + added.real)
            settled = np.allclose(found[:, mode], frequency[:, mode], rtol=1e-9)
            frequency[:, mode], shapes[:, :, mode] = found[:, mode], found_shapes[:, :, mode]
            if settled:
                break
        each = modes.modal_loss_factors(
            found_shapes, dynamic.hysteretic + added.imag, dynamic.viscous, np.maximum(found, 1e-12)
        )
        loss[:, mode] = each[:, mode]
    return ModeBatch(frequency, _orthogonal(dynamic.mass, shapes), loss)


def sharp_poles(dynamic: Dynamic, modal: ModeBatch) -> NDArray[np.complex128]:
    """Return damped poles (D, n or more) in rad/s round which responses peak, none without a width.

    Strong dashpots lock bodies together and move peaks far from every undamped frequency, so the poles are
    those of the damped system; where stiffness depends on frequency, each mode's own.
    """
    if dynamic.parts.laws_with_frequency or not dynamic.viscous.any():
        omega = 2.0 * np.pi * modal.frequency
        poles = omega * (1j - 0.5 * np.minimum(modal.loss_factor, 2.0))
    else:
        poles = modes.damped_poles(dynamic.mass, dynamic.viscous, dynamic.hysteretic, dynamic.stiffness)
    # An undamped mode has no width of its own; one of rounding size keeps the search going.
    width = np.maximum(-poles.real, 0.5 * UNDAMPED * np.maximum(np.abs(poles), 1e-9))
    sharp = np.asarray(1j * poles.imag - width)
    table = dynamic.parts.model.floor_table
    if table is None:
        return sharp
    # On a tabulated floor there may be more resonances than freedoms, and its rows are looked at as well.
    rows = np.repeat(table_places(table)[None], len(sharp), axis=0)
    return np.concatenate([sharp, table_resonances(dynamic, table), rows], axis=1)


def _orthogonal(mass: Floats, shapes: Floats) -> Floats:
    """Return the shapes (D, n, n) nearest to the given ones with shapes^T M shapes = 1."""
    values, vectors = np.linalg.eigh(np.swapaxes(shapes, -1, -2) @ mass @ shapes)
    nearest: Floats = shapes @ (vectors / np.sqrt(values)[:, None, :]) @ np.swapaxes(vectors, -1, -2)
    return nearest
