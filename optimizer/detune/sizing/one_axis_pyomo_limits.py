"""Limits of the second statement of one-axis sizing: polynomials in u = w^2 that may not be negative.

Written apart from `envelope` and `worst_frequency`, of which the exact method is made, and sharing only the
input types. A limit says  scale^2 |D(u)|^2 >= (amplitude/limit)^2 top(u)  at every u of its range; `scale`
loosens it (by a number of parts that share a force, or by a level that is itself sought).
"""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import numpy as np
from numpy.polynomial import polynomial

from detune.sizing.statement import OneAxisProblem, ResponseLimit

_ORDER = {"displacement": 0, "velocity": 1, "acceleration": 2, "deflection": 0}


def limit_sides(
    limit: ResponseLimit, k: Any, m: Any, modulus: tuple[Any, Any], scale: Any = 1
) -> tuple[list[Any], list[Any]]:
    """Coefficients in u of both sides, scale |D|^2 and numerator / limit^2, of equal length.

    |K|^2 = modulus[0] + modulus[1] u. Both are multiplied through by a power of u where one divides.
    """
    zero, one = modulus
    dynamic = [zero, one - 2 * k * m, m * m]
    ratio = (limit.amplitude / limit.limit) ** 2
    base = limit.source.startswith("base")
    order = ("displacement", "velocity", "acceleration").index(limit.source.split()[1]) if base else 0
    if limit.quantity == "transmissibility":
        power, top = 0, [ratio * zero, ratio * one]
    elif limit.quantity == "transmitted force":
        power, top = (2 if limit.source == "unbalance" else 0), [ratio * zero, ratio * one]
    elif base and limit.quantity == "deflection":
        power, top = 2 - order, [ratio * m * m]
    elif base:
        power, top = _ORDER[limit.quantity] - order, [ratio * zero, ratio * one]
    else:
        power = _ORDER[limit.quantity] + (2 if limit.source == "unbalance" else 0)
        top = [ratio]
    left = [0] * max(0, -power) + [scale * each for each in dynamic]
    right = [0] * max(0, power) + top
    size = max(len(left), len(right))
    return left + [0] * (size - len(left)), right + [0] * (size - len(right))


def degree(coefficients: list[Any]) -> int:
    """Degree of a polynomial whose coefficients are numbers or expressions."""
    return max(i for i, x in enumerate(coefficients) if not (isinstance(x, int | float) and x == 0))


def range_of(limit: ResponseLimit) -> tuple[float, float]:
    """The range of u of a limit."""
    return (2 * math.pi * limit.lower_frequency) ** 2, (2 * math.pi * limit.upper_frequency) ** 2


def worst_place(
    limit: ResponseLimit, k: float, m: float, modulus: tuple[float, float]
) -> tuple[float, float]:
    """Largest (response/limit)^2 over the range of a limit at one design, and the u where it stands.

    Candidates are the ends and the roots of the derivative of the quotient.
    """
    left, right = (np.array(side, dtype=float) for side in limit_sides(limit, k, m, modulus))
    low, high = range_of(limit)
    # In u/high the coefficients do not run over many orders of magnitude.
    powers = high ** np.arange(left.size)
    left, right = left * powers, right * powers
    slope = polynomial.polysub(
        polynomial.polymul(polynomial.polyder(right), left),
        polynomial.polymul(right, polynomial.polyder(left)),
    )
    roots = polynomial.polyroots(np.trim_zeros(slope, "b")) if np.any(slope) else np.zeros(0)
    inner = roots.real[np.abs(roots.imag) < 1e-6 * np.maximum(np.abs(roots), 1e-12)]
    places = np.concatenate([[low / high, 1.0], inner[(inner > low / high) & (inner < 1.0)]])
    with np.errstate(divide="ignore", invalid="ignore"):
        values = polynomial.polyval(places, right) / polynomial.polyval(places, left)
    values = np.where(np.isfinite(values), values, np.inf)
    best = int(np.argmax(values))
    return float(values[best]), float(places[best] * high)


class Scaled:
    """Units in which k, m and u are of order one: kg of the bare mass, and the geometric middle stiffness."""

    def __init__(self, problem: OneAxisProblem) -> None:
        low, high = problem.stiffness_bounds
        self.mass = problem.mass
        self.stiffness = math.sqrt(low * high)
        self.omega2 = self.stiffness / self.mass
        self.damping = self.stiffness / math.sqrt(self.omega2)

    def limit(self, limit: ResponseLimit) -> ResponseLimit:
        """A limit in these units."""
        # Length 1 m, time 1/omega, mass m: a force unit is k * 1 m.
        w = math.sqrt(self.omega2)
        unit = {"displacement": 1.0, "deflection": 1.0, "velocity": w, "acceleration": w**2}
        unit |= {"transmitted force": self.stiffness, "transmissibility": 1.0}
        source = {"force": self.stiffness, "unbalance": self.mass, "unit": 1.0}
        source |= {"base displacement": 1.0, "base velocity": w, "base acceleration": w**2}
        return replace(
            limit,
            limit=limit.limit / unit[limit.quantity],
            amplitude=limit.amplitude / source[limit.source],
            lower_frequency=limit.lower_frequency / w,
            upper_frequency=limit.upper_frequency / w,
        )
