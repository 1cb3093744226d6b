"""First-order enclosures of the checker: centre + parts . xi + rest, every xi in [-1, 1], with rounding in the rest.

Every operation adds a generous multiple of the rounding unit times the sizes it worked with, so that the rest errs
outward. Nothing of the search or its bounds is used.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from detune.proof.checker_arithmetic import OUTWARD, UNIT, Matrix

SLACK = 64.0 * UNIT


@dataclass(frozen=True, eq=False)
class Line:
    """K quantities over N boxes: centre (N, K), parts (N, K, V) per half width, rest (N, K)."""

    centre: Matrix
    parts: Matrix
    rest: Matrix

    def reach(self) -> Matrix:
        """Greatest deviation of the parts (N, K)."""
        return np.abs(self.parts).sum(axis=-1) * OUTWARD

    def size(self) -> Matrix:
        """Greatest magnitude (N, K)."""
        return (np.abs(self.centre) + self.reach() + self.rest) * OUTWARD


def times(first: Line, second: Line) -> Line:
    """Product, element by element."""
    a, b = first.reach(), second.reach()
    rest = (
        np.abs(first.centre) * second.rest
        + np.abs(second.centre) * first.rest
        + (a + first.rest) * (b + second.rest)
        + SLACK * first.size() * second.size()
    ) * OUTWARD
    parts = first.centre[..., None] * second.parts + second.centre[..., None] * first.parts
    return Line(first.centre * second.centre, parts, rest)


def scaled(line: Line, factor: Matrix) -> Line:
    """Product with exact numbers (K,), real or complex."""
    size = np.abs(factor)
    return Line(
        line.centre * factor,
        line.parts * np.asarray(factor)[..., None],
        (line.rest * size + SLACK * size * line.size()) * OUTWARD,
    )


def plus(*lines: Line) -> Line:
    """Sum of lines of the same shape."""
    return Line(
        sum(line.centre for line in lines),
        sum(line.parts for line in lines),
        (sum(line.rest for line in lines) + SLACK * sum(line.size() for line in lines)) * OUTWARD,
    )


def joined(*lines: Line) -> Line:
    """Quantities of several lines side by side."""
    return Line(
        np.concatenate([line.centre for line in lines], axis=1),
        np.concatenate([line.parts for line in lines], axis=1),
        np.concatenate([line.rest for line in lines], axis=1),
    )


def middle_and_half(low: Matrix, high: Matrix) -> tuple[Matrix, Matrix]:
    """Middles and half widths that reach both ends whatever the rounding."""
    middle = 0.5 * (low + high)
    half = np.maximum(high - middle, middle - low)
    return middle, np.where(half > 0.0, half * OUTWARD, 0.0)


def variable_product(low: Matrix, high: Matrix, names: Matrix) -> Line:
    """Product of the variables in each row of names (K, m), -1 for none; low, high (N, V+1)."""
    middle, half = middle_and_half(low, high)
    count, variables = middle.shape
    shape = (count, len(names))
    total = Line(np.ones(shape), np.zeros((*shape, variables)), np.zeros(shape))
    for column in range(names.shape[1]):
        own = names[:, column]
        centre, parts = np.ones(shape), np.zeros((*shape, variables))
        for k, variable in enumerate(own):
            if variable >= 0:
                centre[:, k] = middle[:, variable]
                parts[:, k, variable] = half[:, variable]
        total = times(total, Line(centre, parts, np.zeros(shape)))
    return total


def speed_power(low: Matrix, high: Matrix, order: float, exponents: Matrix) -> Line:
    """(order sqrt(z))^e for exponents (K,), z the last variable; the rest by the greatest second derivative."""
    middle, half = middle_and_half(low, high)
    z, h = middle[:, -1:], half[:, -1:]
    p = 0.5 * exponents
    scale = order**exponents
    centre = scale * z**p
    parts = np.zeros((*centre.shape, middle.shape[1]))
    parts[:, :, -1] = scale * p * z ** (p - 1.0) * h
    # The box a hair wider than its ends.
    below, above = (z - h) * (1.0 - 1e-12), (z + h) * (1.0 + 1e-12)
    bend = np.maximum(below ** (p - 2.0), above ** (p - 2.0))
    rest = 0.5 * h**2 * np.abs(scale * p * (p - 1.0)) * bend + 1e-13 * (
        np.abs(centre) + np.abs(parts[:, :, -1])
    )
    return Line(centre, parts, rest * OUTWARD)


def length_plane(centre: Matrix, parts: Matrix, rest: Matrix) -> Line:
    """Upper plane of the length of real vectors: centre (N, R, m), parts (N, R, m, V), rest (N, R, m)."""
    size = np.sqrt((centre**2).sum(axis=2))
    unit = centre / np.maximum(size, 1e-300)[:, :, None]
    along = (unit[..., None] * parts).sum(axis=2)
    # Exact for any vector "unit" close to a unit vector: what is left over counts as across.
    across = np.sqrt(((parts - unit[..., None] * along[:, :, None, :]) ** 2).sum(axis=2)).sum(axis=2)
    reach = np.abs(along).sum(axis=2)
    least = size - reach
    loose = np.sqrt((size + reach) ** 2 + across**2) - size
    bent = np.where(least > 0.25 * size, 0.5 * across**2 / np.maximum(least, 1e-300), loose)
    steep = np.where((least > 0.25 * size)[:, :, None], along, 0.0)
    total = bent + np.sqrt((rest**2).sum(axis=2)) + 1e-12 * (size + reach + across)
    return Line(size, steep, total * OUTWARD)


def major_axis_bound(centre: Matrix, parts: Matrix, rest: Matrix) -> Line:
    """Upper plane of the major semi-axis of complex vectors (N, R, 3): 2 a^2 = |y|^2 + |y . y|."""
    zeros = np.zeros_like(rest)
    length = length_plane(
        np.concatenate([centre.real, centre.imag], axis=2),
        np.concatenate([parts.real, parts.imag], axis=2),
        np.concatenate([rest, zeros], axis=2),
    )
    moved = np.sqrt(((np.abs(parts).sum(axis=3) + rest) ** 2).sum(axis=2))
    plain = np.sqrt((np.abs(centre) ** 2).sum(axis=2))
    dot, dot_parts = (centre**2).sum(axis=2), 2.0 * (centre[..., None] * parts).sum(axis=2)
    second = moved**2 + 2.0 * plain * np.sqrt((rest**2).sum(axis=2)) + 1e-12 * plain**2
    both = length_plane(
        np.stack([dot.real, dot.imag], axis=2),
        np.stack([dot_parts.real, dot_parts.imag], axis=2),
        np.stack([second, np.zeros_like(second)], axis=2),
    )
    # sqrt(n^2 + x) <= n + x / (2 n), for any n > 0.
    n = np.sqrt(np.maximum(0.5 * (length.centre**2 + both.centre), 1e-280))
    steep = (2.0 * length.centre[..., None] * length.parts + both.parts) / (4.0 * n)[..., None]
    more = (length.reach() + length.rest) ** 2 + 2.0 * length.centre * length.rest + both.rest
    total = 0.25 * more / n + 1e-12 * (n + np.abs(steep).sum(axis=2))
    use = n + np.abs(steep).sum(axis=2) + total < length.size()
    return Line(
        np.where(use, n, length.centre),
        np.where(use[..., None], steep, length.parts),
        np.where(use, total, length.rest) * OUTWARD,
    )
