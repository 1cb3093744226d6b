"""Natural frequencies of one state with their slopes, each mode on its own side of each excitation interval.

d(w^2) = phi^T (dK - w^2 dM) phi with phi^T M phi = 1. Modes whose frequencies are one to rounding have no slopes of
their own; each then gets the slope of their mean, a symmetric function of the group that is smooth where they cross.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.physics.modes import modal_loss_factors, undamped_modes
from detune.sizing.part_slopes import FIGURES, STIFFNESS
from detune.solvers.gradient_state import StateAt
from detune.solvers.gradient_tone import by_groups

Floats = NDArray[np.float64]
# Squared frequencies closer than this share count as one.
REPEATED = 1e-6


@dataclass(frozen=True)
class Modes:
    """Natural frequencies (n,) Hz rising, their slopes (n, u), loss factors (n,), and shapes (n, n)."""

    frequency: Floats
    slopes: Floats
    loss_factor: Floats
    shapes: Floats


def modes(at: StateAt) -> Modes:
    """The undamped modes at the dynamic stiffness."""
    frequency, shapes = undamped_modes(at.mass, at.stiffness)
    omega2 = (2.0 * np.pi * frequency) ** 2
    by_square = _slopes(at, omega2, shapes)
    start = 0
    for end in range(1, len(omega2) + 1):
        if end == len(omega2) or omega2[end] - omega2[end - 1] > REPEATED * omega2[end]:
            by_square[start:end] = by_square[start:end].mean(axis=0)
            start = end
    safe = np.maximum(frequency, 1e-12)
    loss = modal_loss_factors(shapes, at.hysteretic, at.viscous, safe)
    return Modes(frequency, by_square / (8.0 * np.pi**2 * safe[:, None]), loss, shapes)


def _slopes(at: StateAt, omega2: Floats, shapes: Floats) -> Floats:
    """Slopes (n, u) of the squared angular frequencies."""
    sized = at.sized
    turned = np.moveaxis(at.rows @ shapes, 2, 0)
    figures = np.zeros((len(omega2), len(sized.group), FIGURES))
    figures[:, :, STIFFNESS] = sized.carry[None, :, None] * turned**2
    slopes = by_groups(at, figures)
    machine = sized.slopes
    if not machine.columns:
        return slopes
    by_column = -omega2[:, None] * np.sum(shapes * (machine.mass @ shapes), axis=1).T
    if at.sized.model.with_gravity_stiffness:
        by_column += np.sum(shapes * (at.geometric_slopes @ shapes), axis=1).T
    if machine.rows.any():
        spring = sized.carry[:, None] * at.station_parts()[:, STIFFNESS]
        pull = (spring[None] * turned).reshape(len(omega2), -1)
        back = (machine.rows @ shapes).reshape(len(machine.rows), -1, len(omega2))
        by_column += 2.0 * np.einsum("kcm,mc->mk", back, pull)
    slopes[:, list(machine.columns)] += by_column
    return slopes


def below(found: Modes, interval: tuple[float, float]) -> int:
    """How many modes lie nearer to the lower end of an interval than to the upper (physics.separation)."""
    low, high = interval
    return int(np.sum(found.frequency < 2.0 * low * high / (low + high)))


def distances(found: Modes, interval: tuple[float, float], count: int) -> tuple[Floats, Floats]:
    """Separation (n,) of each mode from an interval, the lowest `count` below it and the others above;
    slopes (n, u).
    """
    low, high = interval
    under = np.arange(len(found.frequency)) < count
    value = np.where(under, 1.0 - found.frequency / low, found.frequency / high - 1.0)
    slope = np.where(under, -1.0 / low, 1.0 / high)
    return value, slope[:, None] * found.slopes
