"""Rates of decay of the damped poles with their slopes, for limits on settling time.

A pole p with (p^2 M + p C + K + j H) phi = 0 changes by
dp = -phi^T (p^2 dM + p dC + dK + j dH) phi / (phi^T (2 p M + C) phi); all matrices are symmetric
(Tisseur and Meerbergen, SIAM Rev. 43 (2001) 235).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from detune.physics.modes import damped_poles
from detune.sizing.part_slopes import FIGURES, LOSS, STIFFNESS, VISCOUS
from detune.solvers.gradient_state import StateAt
from detune.solvers.gradient_tone import by_groups

Floats = NDArray[np.float64]


def decay_rates(at: StateAt) -> tuple[Floats, Floats]:
    """Rates of decay (n,) in 1/s and their slopes (n, u)."""
    poles = damped_poles(at.mass, at.viscous, at.hysteretic, at.stiffness)
    p = poles[:, None, None]
    matrices = p**2 * at.mass + p * at.viscous + at.stiffness + 1j * at.hysteretic
    shapes = np.conj(np.linalg.svd(matrices)[2][:, -1])
    scale = np.sum(shapes * ((2.0 * p * at.mass + at.viscous) @ shapes[:, :, None])[:, :, 0], axis=1)
    turned = (shapes @ at.flat.T).reshape(len(poles), -1, 3)
    part = at.station_parts()
    squared = at.sized.carry[None, :, None] * turned**2 / scale[:, None, None]
    figures = np.zeros((len(poles), len(part), FIGURES))
    figures[:, :, STIFFNESS] = np.real(squared * (1.0 + 1j * part[None, :, LOSS, None]))
    figures[:, :, VISCOUS] = np.real(poles[:, None, None] * squared)
    figures[:, :, LOSS] = np.real(1j * np.sum(squared * part[None, :, STIFFNESS], axis=2))
    slopes = by_groups(at, figures)
    machine = at.sized.slopes
    if machine.columns:
        by_column = np.sum(shapes.T * (machine.mass @ shapes.T), axis=1) * poles**2
        if at.sized.model.with_gravity_stiffness:
            by_column = by_column + np.sum(shapes.T * (at.geometric_slopes @ shapes.T), axis=1)
        if machine.rows.any():
            spring = part[:, STIFFNESS] * (1.0 + 1j * part[:, LOSS, None])
            whole = at.sized.carry[None, :, None] * (spring + poles[:, None, None] * part[:, VISCOUS])
            flat = machine.rows.reshape(len(machine.columns), -1, shapes.shape[1])
            pull = (whole * turned).reshape(len(poles), -1)
            by_column = by_column + 2.0 * np.sum(pull.T * (flat @ shapes.T), axis=1)
        slopes[:, list(machine.columns)] += np.real(by_column / scale).T
    return -poles.real, slopes
