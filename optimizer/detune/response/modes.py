"""Undamped modes of a batch of designs."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.views import ModeView
from detune.physics import modes
from detune.response.assemble import Dynamic

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class ModeBatch:
    """Undamped natural frequencies (D, n) Hz, mass-normalised shapes (D, n, n), loss factors (D, n)."""

    frequency: Floats
    shapes: Floats
    loss_factor: Floats

    def view(self, intervals: Sequence[tuple[float, float]]) -> ModeView:
        """Return what a mode allowable looks at."""
        with np.errstate(divide="ignore"):
            amplification = 1.0 / self.loss_factor
        return ModeView(self.frequency, amplification, np.array(intervals, dtype=float).reshape(-1, 2))


def mode_batch(dynamic: Dynamic) -> ModeBatch:
    """Return the undamped modes at the dynamic stiffness, with each mode's equivalent loss factor."""
    frequency, shapes = modes.undamped_modes(dynamic.mass, dynamic.stiffness)
    loss = modes.modal_loss_factors(shapes, dynamic.hysteretic, dynamic.viscous, frequency)
    return ModeBatch(frequency, shapes, loss)
