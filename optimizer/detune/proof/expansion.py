"""First-order expansions with a rigorous remainder over boxes (Taylor models of first order).

A quantity over a box with middle m and half widths h is centre + slope . (x - m) + rest, |rest| <= remainder. Products,
powers of the speed and norms of vectors keep the first order exact, so that bounds err by the square of the width.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detune.proof.selection_data import Floats, Integers

TINY = 1.0e-300
Numbers = NDArray[Any]
"""Real or complex arrays."""


@dataclass(frozen=True, eq=False)
class Box:
    """Boxes (N, V+1): middle and half widths; the last variable is the squared speed."""

    low: Floats
    high: Floats

    @cached_property
    def middle(self) -> Floats:
        return 0.5 * (self.low + self.high)

    @cached_property
    def half(self) -> Floats:
        return 0.5 * (self.high - self.low)


@dataclass(frozen=True, eq=False)
class Expansion:
    """K quantities over N boxes: centre (N, K), slope (N, K, V+1), both real or complex, remainder (N, K) real."""

    centre: Numbers
    slope: Numbers
    remainder: Floats

    def reach(self, box: Box) -> Floats:
        """Greatest deviation (N, K) of the first-order part alone."""
        result: Floats = np.einsum("bkv,bv->bk", np.abs(self.slope), box.half)
        return result

    def times(self, other: Expansion, box: Box) -> Expansion:
        """Product, element by element."""
        own, others = self.reach(box), other.reach(box)
        size, other_size = np.abs(self.centre), np.abs(other.centre)
        remainder = (
            size * other.remainder
            + other_size * self.remainder
            + (own + self.remainder) * (others + other.remainder)
        )
        return Expansion(
            self.centre * other.centre,
            self.slope * other.centre[:, :, None] + other.slope * self.centre[:, :, None],
            remainder,
        )


def variable_products(box: Box, factors: Integers) -> Expansion:
    """Products of the variables named by factors (K, m); -1 counts as 1."""
    count, variables = box.middle.shape
    total = Expansion(
        np.ones((count, len(factors))),
        np.zeros((count, len(factors), variables)),
        np.zeros((count, len(factors))),
    )
    for column in range(factors.shape[1]):
        named = factors[:, column]
        there = named >= 0
        if not there.any():
            continue
        centre = np.where(there, box.middle[:, named], 1.0)
        slope = np.zeros((count, len(factors), variables))
        slope[:, np.flatnonzero(there), named[there]] = 1.0
        total = total.times(Expansion(centre, slope, np.zeros_like(centre)), box)
    return total


def speed_power(box: Box, order: float, exponent: Floats) -> Expansion:
    """(order sqrt(z))^exponent (K,) of the squared speed z; the remainder by the greatest second derivative."""
    half_power = 0.5 * exponent
    z, h = box.middle[:, -1:], box.half[:, -1:]
    scale = order**exponent
    centre = scale * z**half_power
    slope = np.zeros((*centre.shape, box.middle.shape[1]))
    slope[:, :, -1] = scale * half_power * z ** (half_power - 1.0)
    second = np.abs(half_power * (half_power - 1.0))
    bend = np.maximum(box.low[:, -1:] ** (half_power - 2.0), box.high[:, -1:] ** (half_power - 2.0))
    return Expansion(centre, slope, 0.5 * h**2 * scale * second * bend)


@dataclass(frozen=True, eq=False)
class UpperPlane:
    """An upper bound by a plane: value <= centre + slope . (x - m) + remainder over each box; centre (N, R)."""

    centre: Floats
    slope: Floats
    remainder: Floats

    def greatest(self, box: Box) -> Floats:
        """Greatest value (N, R) over the boxes."""
        result: Floats = self.centre + np.einsum("brv,bv->br", np.abs(self.slope), box.half) + self.remainder
        return result


def upper_length(centre: Numbers, slope: Numbers, remainder: Floats, box: Box) -> UpperPlane:
    """Upper plane of the Euclidean length of real vectors: centre (N, R, m), slope (N, R, m, V+1), remainder (N, R, m).

    With x = a + w, a the centre: |x| <= sqrt((|a| + par)^2 + perp^2) <= |a| + par + perp^2 / (2 (|a| + par)).
    """
    size = np.sqrt((centre**2).sum(axis=2))
    unit = centre / np.maximum(size, TINY)[:, :, None]
    along = np.einsum("brm,brmv->brv", unit, slope)
    across = slope - unit[..., None] * along[:, :, None, :]
    perp = np.einsum("brv,bv->br", np.sqrt((across**2).sum(axis=2)), box.half)
    par = np.einsum("brv,bv->br", np.abs(along), box.half)
    rest = np.sqrt((remainder**2).sum(axis=2))
    # Where the linear part may turn the vector round, its greatest length is taken all over the box.
    flat = size - par <= 0.3 * size
    bent = np.where(
        flat, np.sqrt((size + par) ** 2 + perp**2) - size, 0.5 * perp**2 / np.maximum(size - par, TINY)
    )
    return UpperPlane(size, np.where(flat[:, :, None], 0.0, along), bent + rest)


def upper_major_axis(centre: Numbers, slope: Numbers, remainder: Floats, box: Box) -> UpperPlane:
    """Upper plane of the major semi-axis of ellipses: complex centre (N, R, 3), slope (N, R, 3, V+1),
    remainder (N, R, 3).

    2 a^2 = |y|^2 + |y . y|; the square root lies below its tangent. Never above the bound of the plain length.
    """
    real = np.concatenate([centre.real, centre.imag], axis=2)
    slopes = np.concatenate([slope.real, slope.imag], axis=2)
    rests = np.concatenate([remainder, np.zeros_like(remainder)], axis=2)
    length = upper_length(real, slopes, rests, box)
    moved = np.sqrt(((np.einsum("brcv,bv->brc", np.abs(slope), box.half) + remainder) ** 2).sum(axis=2))
    rest = np.sqrt((remainder**2).sum(axis=2))
    size = np.sqrt((np.abs(centre) ** 2).sum(axis=2))
    dot = (centre * centre).sum(axis=2)
    dot_slope = 2.0 * np.einsum("brc,brcv->brv", centre, slope)
    pair = np.stack([dot.real, dot.imag], axis=2)
    pair_slope = np.stack([dot_slope.real, dot_slope.imag], axis=2)
    second = moved**2 + 2.0 * size * rest
    both = upper_length(pair, pair_slope, np.stack([second, np.zeros_like(second)], axis=2), box)
    along = np.einsum("brv,bv->br", np.abs(length.slope), box.half)
    major = np.sqrt(np.maximum(0.5 * (length.centre**2 + both.centre), TINY))
    steep = (length.centre[:, :, None] * length.slope + 0.5 * both.slope) / (2.0 * major)[:, :, None]
    bent = (along + length.remainder) ** 2 + 2.0 * length.centre * length.remainder + both.remainder
    plane = UpperPlane(major, steep, 0.25 * bent / major)
    better = plane.greatest(box) < length.greatest(box)
    return UpperPlane(
        np.where(better, plane.centre, length.centre),
        np.where(better[:, :, None], plane.slope, length.slope),
        np.where(better, plane.remainder, length.remainder),
    )


def add_planes(planes: list[UpperPlane]) -> UpperPlane:
    """Sum of upper planes."""
    return UpperPlane(
        np.sum([plane.centre for plane in planes], axis=0),
        np.sum([plane.slope for plane in planes], axis=0),
        np.sum([plane.remainder for plane in planes], axis=0),
    )
