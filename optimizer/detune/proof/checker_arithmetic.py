"""Arithmetic of the checker: matrices with rigorous error radii, and exact linear algebra on fractions.

A pair (middle, radius) encloses every matrix whose entries differ from the middle by at most the radius. Products
of floating-point numbers are off by at most the well-known bound n u / (1 - n u) times the product of absolute
values, whatever the order of summation (Higham, Accuracy and Stability of Numerical Algorithms, section 3.1; from
memory); radii are inflated so that their own rounding errs outward. This module imports nothing of the package.
"""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import numpy as np

UNIT = 2.0**-53
OUTWARD = 1.0 + 1.0e-12
TINY = 1.0e-290

Matrix = Any
Ball = tuple[Matrix, Matrix]


def exact(middle: Matrix) -> Ball:
    """A matrix of floating-point numbers taken as exact."""
    return middle, np.zeros(middle.shape)


def total(*terms: Ball) -> Ball:
    """Enclosure of a sum."""
    middle, radius = terms[0]
    for other, more in terms[1:]:
        middle = middle + other
        radius = (radius + more + 4.0 * UNIT * np.abs(middle)) * OUTWARD
    return middle, radius


def scaled(ball: Ball, factor: Matrix, factor_radius: Matrix | float = 0.0) -> Ball:
    """Enclosure of a product with scalars (broadcast), real or complex."""
    middle, radius = ball
    size = np.abs(factor)
    out = middle * factor
    spread = radius * (size + factor_radius) + np.abs(middle) * factor_radius
    return out, (spread + 16.0 * UNIT * np.abs(middle) * size + TINY) * OUTWARD


def product(first: Ball, second: Ball) -> Ball:
    """Enclosure of matrix products (..., i, j) (..., j, k), real or complex."""
    a, a_radius = first
    b, b_radius = second
    size = a.shape[-1]
    a_size, b_size = np.abs(a), np.abs(b)
    spread = a_size @ b_radius + a_radius @ (b_size + b_radius)
    rounding = 8.0 * (size + 4) * UNIT * (a_size @ b_size)
    return a @ b, (spread + rounding + TINY) * OUTWARD


def frobenius(ball: Ball) -> Matrix:
    """Upper bound of the Frobenius norm of matrices (..., i, j)."""
    middle, radius = ball
    size = np.abs(middle) + radius
    return np.sqrt((size**2).sum(axis=(-2, -1))) * OUTWARD


def off_identity(matrix: Matrix) -> Matrix:
    """Upper bound of the norm of X^H X - I for matrices (..., n, n) of floating-point numbers."""
    n = matrix.shape[-1]
    gram = product(exact(np.swapaxes(matrix.conj(), -1, -2)), exact(matrix))
    return frobenius(total(gram, exact(np.broadcast_to(-np.eye(n), gram[0].shape))))


def fractions(values: Any) -> Any:
    """Nested lists of floating-point numbers as exact fractions."""
    if isinstance(values, (list, tuple)):
        return [fractions(item) for item in values]
    return Fraction(values)


def positive_pivots(matrix: list[list[Fraction]]) -> tuple[int, int, int]:
    """Numbers of negative, zero and positive eigenvalues of an exact symmetric matrix (Sylvester's law).

    Symmetric elimination with pivoting; where all diagonal entries vanish a 2 by 2 pivot [[0, a], [a, 0]] counts one
    negative and one positive eigenvalue.
    """
    work = [row[:] for row in matrix]
    left = list(range(len(work)))
    negative = zero = positive = 0
    while left:
        pivot = next((i for i in left if work[i][i] != 0), None)
        if pivot is None:
            pair = next(((i, j) for i in left for j in left if i < j and work[i][j] != 0), None)
            if pair is None:
                return negative, zero + len(left), positive
            i, j = pair
            # Adding row j to row i (and column to column) is a congruence and makes the diagonal 2 a.
            for k in left:
                work[i][k] += work[j][k]
            for k in left:
                work[k][i] += work[k][j]
            continue
        value = work[pivot][pivot]
        negative, positive = negative + (value < 0), positive + (value > 0)
        left.remove(pivot)
        for i in left:
            factor = work[i][pivot] / value
            if factor:
                for k in left:
                    work[i][k] -= factor * work[pivot][k]
    return negative, zero, positive


def solve_exactly(
    real: list[list[Fraction]], imag: list[list[Fraction]], right: list[tuple[Fraction, Fraction]]
) -> list[tuple[Fraction, Fraction]]:
    """Solve (real + j imag) q = right exactly by Gaussian elimination; raises ZeroDivisionError if singular."""
    n = len(real)
    rows = [[(real[i][k], imag[i][k]) for k in range(n)] + [right[i]] for i in range(n)]
    for column in range(n):
        best = max(range(column, n), key=lambda i: abs(rows[i][column][0]) + abs(rows[i][column][1]))
        rows[column], rows[best] = rows[best], rows[column]
        x, y = rows[column][column]
        size = x * x + y * y
        inverse = (x / size, -y / size)
        rows[column] = [multiply(item, inverse) for item in rows[column]]
        for i in range(n):
            factor = rows[i][column]
            if i != column and any(factor):
                rows[i] = [
                    (item[0] - part[0], item[1] - part[1])
                    for item, part in (
                        (item, multiply(factor, own)) for item, own in zip(rows[i], rows[column], strict=True)
                    )
                ]
    return [row[-1] for row in rows]


def multiply(a: tuple[Fraction, Fraction], b: tuple[Fraction, Fraction]) -> tuple[Fraction, Fraction]:
    """Product of two complex fractions."""
    return a[0] * b[0] - a[1] * b[1], a[0] * b[1] + a[1] * b[0]
