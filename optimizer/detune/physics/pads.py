"""Rubber blocks and pads by hardness and shape: for plausibility and for first sizes, not for a proof.

E_c = E0 (1 + 2 k S^2), K = E_c A/h, with the shape factor S = loaded area over the area free to bulge. P. B.
Lindley, Engineering Design with Natural Rubber; table constants from memory. Hardness carries +-5 Shore, and
with it the stiffness +-20 %.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from detune.physics.array_types import ArrayLike, FloatArray
from detune.physics.tables import hermite, monotone_slopes, require_inside

# Hardness IRHD; Young's modulus E0 and shear modulus G in MPa; the numerical factor k.
HARDNESS = np.array([30.0, 35.0, 40.0, 45.0, 50.0, 55.0, 60.0, 65.0, 70.0, 75.0])
YOUNG_MODULUS = np.array([0.92, 1.18, 1.50, 1.80, 2.20, 3.25, 4.45, 5.85, 7.35, 9.40])
SHEAR_MODULUS = np.array([0.30, 0.37, 0.45, 0.54, 0.64, 0.81, 1.06, 1.37, 1.73, 2.22])
SHAPE_CONSTANT = np.array([0.93, 0.89, 0.85, 0.80, 0.73, 0.64, 0.57, 0.54, 0.53, 0.52])
HARDNESS_SCATTER = 5.0
STIFFNESS_SCATTER = 0.20


def disc_shape_factor(diameter: ArrayLike, height: ArrayLike) -> FloatArray:
    """Loaded over free area of a disc with bonded or gripped faces: D/(4 h). Lengths in one unit."""
    return np.asarray(np.asarray(diameter, dtype=float) / (4.0 * np.asarray(height, dtype=float)))


def rectangle_shape_factor(length: ArrayLike, width: ArrayLike, height: ArrayLike) -> FloatArray:
    """Loaded over free area of a rectangular block: a b/(2 h (a + b)). Lengths in one unit."""
    a, b, h = (np.asarray(value, dtype=float) for value in (length, width, height))
    return np.asarray(a * b / (2.0 * h * (a + b)))


def compression_modulus(hardness: ArrayLike, shape_factor: ArrayLike) -> FloatArray:
    """E_c in Pa of a block with both faces held, static, small strain. hardness in IRHD, 30 to 75;
    OutsideTable.
    """
    young, constant = _constant(YOUNG_MODULUS, hardness), _constant(SHAPE_CONSTANT, hardness)
    return np.asarray(1e6 * young * (1.0 + 2.0 * constant * np.asarray(shape_factor, dtype=float) ** 2))


def shear_modulus(hardness: ArrayLike) -> FloatArray:
    """G in Pa, static. hardness in IRHD, 30 to 75; OutsideTable."""
    return np.asarray(1e6 * _constant(SHEAR_MODULUS, hardness))


def pad_stiffness(
    hardness: ArrayLike, area: ArrayLike, height: ArrayLike, shape_factor: ArrayLike
) -> tuple[FloatArray, FloatArray]:
    """Static stiffness in N/m in compression and in shear: E_c A/h and G A/h. area in m2, height in m."""
    across = np.asarray(area, dtype=float) / np.asarray(height, dtype=float)
    return compression_modulus(hardness, shape_factor) * across, shear_modulus(hardness) * across


def _constant(column: FloatArray, hardness: ArrayLike) -> FloatArray:
    require_inside("hardness", "IRHD", hardness, float(HARDNESS[0]), float(HARDNESS[-1]))
    return hermite(HARDNESS, column, monotone_slopes(HARDNESS, column), hardness)[0]


@dataclass(frozen=True)
class PlausibleRange:
    """What is usual for a material; a figure outside it deserves a second look and is not wrong by itself."""

    low: float
    high: float
    source: str


_TRADE = "range of the trade, handbooks, from memory"

DYNAMIC_TO_STATIC: dict[str, PlausibleRange] = {
    "natural rubber 40 IRHD": PlausibleRange(1.1, 1.2, _TRADE),
    "natural rubber 50 IRHD": PlausibleRange(1.2, 1.4, _TRADE),
    "natural rubber 60 IRHD": PlausibleRange(1.4, 1.6, _TRADE),
    "natural rubber 70 IRHD": PlausibleRange(1.6, 2.0, _TRADE),
    "neoprene 40 IRHD": PlausibleRange(1.2, 1.45, _TRADE),
    "neoprene 50 IRHD": PlausibleRange(1.3, 1.7, _TRADE),
    "neoprene 60 IRHD": PlausibleRange(1.5, 1.9, _TRADE),
    "neoprene 70 IRHD": PlausibleRange(1.75, 2.4, _TRADE),
    "steel": PlausibleRange(1.0, 1.0, _TRADE),
}

LOSS_FACTOR: dict[str, PlausibleRange] = {
    "steel coil": PlausibleRange(0.005, 0.02, _TRADE),
    "natural rubber": PlausibleRange(0.05, 0.15, _TRADE),
    "neoprene": PlausibleRange(0.1, 0.25, _TRADE),
    "silicone": PlausibleRange(0.1, 0.25, _TRADE),
    "high-damping rubber": PlausibleRange(0.3, 1.0, _TRADE),
    "butyl": PlausibleRange(0.3, 1.0, _TRADE),
    "wire rope": PlausibleRange(0.2, 0.4, _TRADE),
    "air spring without orifice": PlausibleRange(0.02, 0.1, _TRADE),
}
