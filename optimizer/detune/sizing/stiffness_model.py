"""Mass and stiffness that are linear in the unknowns of sizing: what every convex form is made of."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.sizing.statement import SizingError

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class StiffnessModel:
    """Arrays of a linear sizing model: `mass` (n, n), `patterns` (p, n, n), `constant` (n, n), bounds (p,) N/m.

    `ballast_patterns` (q, n, n) per kg with `ballast_most` (q,) kg; `ballast_stiffness` (q, n, n) is what a
    kg adds to K (gravity's stiffness, of either sign), zero where left out. Raises SizingError for shapes
    that do not fit, a pattern that is not positive semidefinite, or crossed bounds.
    """

    mass: Floats
    patterns: Floats
    constant: Floats
    lower: Floats
    upper: Floats
    ballast_patterns: Floats
    ballast_most: Floats
    ballast_stiffness: Floats | None = None

    def __post_init__(self) -> None:
        n = self.mass.shape[0]
        if self.patterns.shape[1:] != (n, n) or self.constant.shape != (n, n):
            raise SizingError("stiffness patterns and mass do not have the same freedoms")
        if self.ballast_patterns.shape != (self.ballast_most.size, n, n):
            raise SizingError("ballast patterns and ballast bounds do not fit the freedoms")
        if np.any(self.lower > self.upper) or self.lower.size != self.patterns.shape[0]:
            raise SizingError("stiffness bounds are crossed or do not fit the patterns")
        for name, stack in (("stiffness", self.patterns), ("ballast", self.ballast_patterns)):
            for i, pattern in enumerate(stack):
                lowest = float(np.linalg.eigvalsh(pattern)[0])
                if lowest < -1e-9 * float(np.abs(pattern).max()):
                    raise SizingError(f"{name} pattern {i} is not positive semidefinite")

    def stiffness_at(self, k: Floats, ballast: Floats | None = None) -> Floats:
        """K(k, b), shape (n, n); b zero where left out."""
        total = self.constant + np.tensordot(k, self.patterns, axes=1)
        if ballast is not None and self.ballast_stiffness is not None:
            total = total + np.tensordot(ballast, self.ballast_stiffness, axes=1)
        return np.asarray(total)

    def mass_at(self, ballast: Floats) -> Floats:
        """M(b), shape (n, n)."""
        return np.asarray(self.mass + np.tensordot(ballast, self.ballast_patterns, axes=1))

    def frequencies(self, k: Floats, ballast: Floats) -> Floats:
        """Undamped natural frequencies in Hz, rising, shape (n,), by the exact eigenvalues."""
        from scipy.linalg import eigh

        values = eigh(self.stiffness_at(k, ballast), self.mass_at(ballast), eigvals_only=True)
        return np.asarray(np.sqrt(np.maximum(values, 0.0)) / (2 * np.pi))
