"""The objective of one-axis sizing on a slice of fixed mass (or on an interval of masses, as a lower bound).

On a slice the only free numbers are k and gamma (c^2, or (eta k)^2). Along one limit gamma is a parabola p(k),
so every objective has its stationary points along that limit at the roots of a polynomial:

    w_k k + w_c sqrt(p)        4 w_k^2 p = w_c^2 p'^2
    w_k k + w_g p              w_k + w_g p' = 0
    eta = sqrt(p)/k            p' k = 2 p
    w_k k + w_e sqrt(p)/k      w_k^2 k^4 p = w_e^2 (p' k/2 - p)^2
    w_k k + w_g p/k^2          w_k k^3 + w_g (p' k - 2 p) = 0
    T^2 = (k^2 + s p) / ((k - m u)^2 + s p)     a quadratic (the cubic terms cancel)

Everything is minimised; "stiffest" and "greatest separation" carry a minus sign.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.sizing.statement import OneAxisProblem

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Scales:
    """Reference stiffness (N/m) and squared frequency (rad2/s2) that make the algebra dimensionless."""

    stiffness: float
    squared_frequency: float

    def gamma(self, viscous: bool) -> float:
        """Reference value of gamma: c^2 for viscous damping, (eta k)^2 for a loss factor."""
        return self.stiffness**2 / (self.squared_frequency if viscous else 1.0)

    def mass(self) -> float:
        """Reference mass in kg."""
        return self.stiffness / self.squared_frequency


def separation(natural_frequency: Floats, intervals: tuple[tuple[float, float], ...]) -> Floats:
    """Least separation of f_n from all excitation intervals (any one unit for both).

    f_n/f_b - 1 above and 1 - f_n/f_a below an interval; inside it the larger of the two, which is negative,
    zero at both edges and least in the middle.
    """
    result = np.full_like(natural_frequency, np.inf)
    for low, high in intervals:
        result = np.minimum(result, np.maximum(natural_frequency / high - 1.0, 1.0 - natural_frequency / low))
    return result


def separation_peaks(intervals: tuple[tuple[float, float], ...]) -> tuple[float, ...]:
    """Frequencies where the least separation can have an inner maximum: 2 / (1/f_b + 1/f_a) of each pair."""
    return tuple(2.0 / (1.0 / b + 1.0 / a) for _, b in intervals for a, _ in intervals if a > b)


@dataclass(frozen=True)
class SliceObjective:
    """The objective of `problem` for scaled masses between `mass_low` and `mass_high` (equal: exact)."""

    problem: OneAxisProblem
    scales: Scales
    mass_low: float
    mass_high: float

    def _weights(self) -> tuple[float, float, float]:
        """(stiffness, damping, damping squared) weights on the scaled unknowns."""
        objective, viscous = self.problem.objective, self.problem.damping_kind == "viscous"
        if objective.goal == "softest":
            return self.scales.stiffness, 0.0, 0.0
        if objective.goal == "stiffest":
            return -self.scales.stiffness, 0.0, 0.0
        scale = math.sqrt(self.scales.gamma(True)) if viscous else 1.0
        if objective.goal == "least damping":
            return 0.0, scale, 0.0
        if objective.goal != "weighted sum":
            return 0.0, 0.0, 0.0
        return (
            objective.stiffness_weight * self.scales.stiffness,
            objective.damping_weight * scale,
            objective.damping_squared_weight * scale**2,
        )

    def _target_u(self) -> float:
        frequency = self.problem.objective.frequency
        assert frequency is not None
        return (2 * math.pi * frequency) ** 2 / self.scales.squared_frequency

    def _loss_weight(self, u: float) -> float:
        return u if self.problem.damping_kind == "viscous" else 1.0

    def breakpoints(self, parabolas: Floats) -> Floats:
        """Scaled stiffnesses where the objective can be stationary; `parabolas` has rows (p0, p1, p2)."""
        goal = self.problem.objective.goal
        found: list[Floats] = []
        if goal == "greatest separation":
            scale = (2 * math.pi) ** 2 / self.scales.squared_frequency
            peaks = np.array(separation_peaks(self.problem.excitation_intervals)) ** 2 * scale
            return np.concatenate([peaks * self.mass_low, peaks * self.mass_high])
        if goal == "least transmissibility":
            for mass in {self.mass_low, self.mass_high}:
                found.append(self._transmissibility_points(parabolas, mass))
            return np.concatenate(found) if found else np.zeros(0)
        stiffness, damping, squared = self._weights()
        if damping == 0.0 and squared == 0.0:
            return np.zeros(0)
        if self.problem.damping_kind == "viscous":
            return _viscous_points(parabolas, stiffness, damping, squared)
        return _loss_points(parabolas, stiffness, damping, squared)

    def _transmissibility_points(self, parabolas: Floats, mass: float) -> Floats:
        u = self._target_u()
        s = self._loss_weight(u)
        top = np.array([0.0, 0.0, 1.0])[None, :] + s * parabolas
        bottom = np.array([(mass * u) ** 2, -2.0 * mass * u, 1.0])[None, :] + s * parabolas
        # top' bottom - top bottom' for quadratics a0 + a1 k + a2 k^2.
        a, b = top.T, bottom.T
        second = a[2] * b[1] - a[1] * b[2]
        first = 2.0 * (a[2] * b[0] - a[0] * b[2])
        zeroth = a[1] * b[0] - a[0] * b[1]
        from detune.sizing.worst_frequency import quadratic_roots

        return quadratic_roots(second, first, zeroth).ravel()

    def value(self, k: Floats, low: Floats, high: Floats) -> tuple[Floats, Floats]:
        """Least objective over gamma in [low, high] and masses of the slice, and its gamma; shapes (n,)."""
        goal = self.problem.objective.goal
        if goal == "least transmissibility":
            return self._transmissibility(k, low, high)
        if goal == "greatest separation":
            return -self._separation(k), low
        if goal == "least added mass":
            return np.full_like(k, self.mass_low * self.scales.mass() - self.problem.mass), low
        stiffness, damping, squared = self._weights()
        unit = np.sqrt(np.maximum(low, 0.0))
        if self.problem.damping_kind == "loss factor":
            unit = unit / k
        weight = self.problem.objective.mass_weight if goal == "weighted sum" else 0.0
        mass = self.mass_low if weight >= 0 else self.mass_high
        added = weight * (mass * self.scales.mass() - self.problem.mass)
        return stiffness * k + damping * unit + squared * unit**2 + added, low

    def _transmissibility(self, k: Floats, low: Floats, high: Floats) -> tuple[Floats, Floats]:
        u = self._target_u()
        s = self._loss_weight(u)
        best, best_gamma = np.full_like(k, np.inf), low
        for mass in (self.mass_low, self.mass_high):
            for gamma in (low, high):
                with np.errstate(divide="ignore"):
                    squared = (k**2 + s * gamma) / ((k - mass * u) ** 2 + s * gamma)
                better = squared < best
                best, best_gamma = np.where(better, squared, best), np.where(better, gamma, best_gamma)
        return np.sqrt(best), best_gamma

    def _separation(self, k: Floats) -> Floats:
        to_hz = math.sqrt(self.scales.squared_frequency) / (2 * math.pi)
        intervals = self.problem.excitation_intervals
        low, high = np.sqrt(k / self.mass_high) * to_hz, np.sqrt(k / self.mass_low) * to_hz
        best = np.maximum(separation(low, intervals), separation(high, intervals))
        for peak in separation_peaks(intervals):
            at_peak = float(separation(np.array([peak]), intervals)[0])
            best = np.where((low < peak) & (peak < high), np.maximum(best, at_peak), best)
        return best


def _viscous_points(parabolas: Floats, stiffness: float, damping: float, squared: float) -> Floats:
    from detune.sizing.worst_frequency import quadratic_roots

    p0, p1, p2 = parabolas.T
    if squared:
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray((-stiffness / squared - p1) / (2.0 * p2), dtype=float)
    if stiffness == 0.0:
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(-p1 / (2.0 * p2), dtype=float)
    w = (damping / (2.0 * stiffness)) ** 2
    return quadratic_roots(p2 - 4.0 * w * p2**2, p1 - 4.0 * w * p2 * p1, p0 - w * p1**2).ravel()


def _loss_points(parabolas: Floats, stiffness: float, damping: float, squared: float) -> Floats:
    if stiffness == 0.0:
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(-2.0 * parabolas[:, 0] / parabolas[:, 1], dtype=float)
    p0, p1, p2 = parabolas.T
    none = np.zeros_like(p0)
    if squared:
        rows = np.column_stack([-2.0 * p0 * squared, -p1 * squared, none, none + stiffness])
    else:
        # stiffness^2 k^4 p = damping^2 (p' k/2 - p)^2 with p' k/2 - p = -p0 - p1 k/2.
        own = damping**2 * np.column_stack([p0 * p0, p0 * p1, 0.25 * p1 * p1])
        rows = np.column_stack([-own, none, stiffness**2 * np.column_stack([p0, p1, p2])])
    roots = _real_roots(rows)
    return roots[roots > 0.0]


def _real_roots(rows: Floats) -> Floats:
    """Real roots of polynomials (n, degree + 1), lowest power first, as the eigenvalues of companion matrices."""
    found = []
    degrees = np.where(rows != 0.0, np.arange(rows.shape[1]), 0).max(axis=1, initial=0)
    for degree in set(degrees.tolist()) - {0}:
        own = rows[degrees == degree]
        companion = np.zeros((len(own), degree, degree))
        companion[:, np.arange(1, degree), np.arange(degree - 1)] = 1.0
        with np.errstate(over="ignore"):
            companion[:, :, -1] = -own[:, :degree] / own[:, degree, None]
        companion = companion[np.isfinite(companion).all(axis=(1, 2))]
        roots = np.linalg.eigvals(companion).ravel()
        found.append(roots.real[np.abs(roots.imag) <= 1e-6 * np.abs(roots)])
    return np.concatenate(found) if found else np.zeros(0)
