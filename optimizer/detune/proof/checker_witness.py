"""The checker's own evaluation of response rows at one point of the scatter, in exact fractions."""

from __future__ import annotations

import math
from fractions import Fraction
from typing import Any

import numpy as np

from detune.proof.checker_arithmetic import fractions, multiply, solve_exactly


def exact_rows(system: dict[str, Any], rows: dict[str, Any], point: list[float], speed: float) -> list[float]:
    """Values of all rows at one point, from exact fractions (roots, powers and sums of sizes are rounded)."""
    values = [Fraction(v) for v in point] + [Fraction(1)]
    n, number = len(system["mass"]), len(rows["rate"])
    by_order: dict[float, list[float]] = {}
    for each in rows["sets"]:
        omega = Fraction(2.0 * math.pi * speed * float(each["order"]))
        sizes = _exact_sizes(system, rows, each, values, omega, n, number)
        earlier = by_order.get(float(each["order"]), [0.0] * number)
        by_order[float(each["order"])] = [a + b for a, b in zip(earlier, sizes, strict=True)]
    out = []
    for r in range(number):
        each_order = [sizes[r] for sizes in by_order.values()]
        value = math.hypot(*each_order) if rows["squares"][r] else sum(each_order)
        out.append(value * float(rows["factor"][r]))
    return out


Exact = list[list[Fraction]]


def _exact_sizes(
    system: dict[str, Any], rows: dict[str, Any], each: dict[str, Any], values: list[Fraction], omega: Fraction,
    n: int, number: int,
) -> list[float]:  # fmt: skip
    kappa, axes, real, imag = _exact_system(system, values, omega, n)
    vectors = [[complex(0.0)] * 3 for _ in range(number)]
    for index, power in enumerate(each["powers"]):
        right, base = (
            [
                (Fraction(float(v.real)), Fraction(float(v.imag)))
                for v in np.asarray(each[key][index], complex)
            ]
            for key in ("loads", "bases")
        )
        for b, own, u in zip(axes, kappa, base, strict=True):
            if any(u):
                x, y = multiply(own, u)
                right = [(a + b[i] * x, c + b[i] * y) for i, (a, c) in enumerate(right)]
        q = solve_exactly(real, imag, right)
        bent = []
        for b, u in zip(axes, base, strict=True):
            x = sum((v * w[0] for v, w in zip(b, q, strict=True)), Fraction(0)) - u[0]
            y = sum((v * w[1] for v, w in zip(b, q, strict=True)), Fraction(0)) - u[1]
            bent.append((x, y))
        force = [multiply(own, d) for own, d in zip(kappa, bent, strict=True)]
        for r in range(number):
            scale = float(omega) ** (float(power) + float(rows["rate"][r]))
            for component in range(3):
                seen = _observed(rows["rows"][r][component], q)
                felt = _observed(rows["forces"][r][component], force)
                moved = complex(each["direct"][index][r][component])
                whole = complex(float(seen[0] + felt[0]), float(seen[1] + felt[1]))
                vectors[r][component] += (whole + moved) * scale
    out = []
    for r, vector in enumerate(vectors):
        squares = sum(abs(v) ** 2 for v in vector)
        dot = abs(sum(v * v for v in vector))
        out.append(math.sqrt(0.5 * (squares + dot) if rows["ellipse"][r] else squares))
    return out


def _observed(weights: Any, values: list[tuple[Fraction, Fraction]]) -> tuple[Fraction, Fraction]:
    """The exact sum of weights times complex values."""
    x, y = Fraction(0), Fraction(0)
    for weight, value in zip(weights, values, strict=True):
        if weight:
            x, y = x + Fraction(float(weight)) * value[0], y + Fraction(float(weight)) * value[1]
    return x, y


def _exact_system(
    system: dict[str, Any], values: list[Fraction], omega: Fraction, n: int
) -> tuple[list[tuple[Fraction, Fraction]], Exact, Exact, Exact]:
    """Exact stiffness of each spring, its axis, and the real and imaginary part of the dynamic stiffness."""

    def times_all(names: Any) -> Fraction:
        out = Fraction(1)
        for name in names:
            out *= values[int(name)] if int(name) >= 0 else 1
        return out

    kappa = []
    for k, h, c, s, t in zip(
        system["stiffness"], system["loss"], system["viscous"], system["stiffness_factors"], system["damping_factors"],
        strict=True,
    ):  # fmt: skip
        factor, damping = times_all(s), times_all(t)
        kappa.append((factor * Fraction(k), damping * (factor * Fraction(h) + omega * Fraction(c))))
    size = range(n)
    mass = fractions(system["mass"].tolist())
    real = fractions(system["fixed_dynamic"].tolist())
    for terms, names, target in (
        (system["mass_terms"], system["mass_factors"], mass),
        (system["stiffness_terms"], system["stiffness_term_factors"], real),
    ):
        for term, own in zip(terms, names, strict=True):
            factor = times_all(own)
            for i in size:
                for j in size:
                    target[i][j] += factor * Fraction(float(term[i][j]))
    imag = [
        [
            Fraction(float(system["fixed_hysteretic"][i][j]))
            + omega * Fraction(float(system["fixed_viscous"][i][j]))
            for j in size
        ]
        for i in size
    ]
    axes = [fractions([float(v) for v in row]) for row in system["axes"]]
    for b, (x, y) in zip(axes, kappa, strict=True):
        for i in size:
            for j in size:
                real[i][j] += x * b[i] * b[j]
                imag[i][j] += y * b[i] * b[j]
    for i in size:
        for j in size:
            real[i][j] -= omega * omega * mass[i][j]
    return kappa, axes, real, imag
