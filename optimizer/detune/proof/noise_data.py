"""Rows under noise as arrays: what a Gaussian response of a machine under scatter counts as, and the areas of
densities.

The variance of a row is the sum over noises and components of the integral of |y|^2 S df, y its response to a
unit of the noise at one frequency. A row counts as its rms times a factor (3 for 3-sigma), or as the expected
extreme of the duration, which grows with the variance of the row and with that of its rate (Davenport 1964).
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from detune.physics.extremes import expected_extreme
from detune.physics.spectra import PowerSpectralDensity, segment_exponents
from detune.proof.loewner import Flags
from detune.proof.robust_data import RobustError
from detune.proof.scatter_data import LimitedRows, LoadSet
from detune.proof.selection_data import Floats

TWO_PI = 2.0 * np.pi


@dataclass(frozen=True, eq=False)
class NoiseSet:
    """One noise: its response loads (order 1), and its one-sided density (P,) over frequency (P,) in Hz."""

    loads: LoadSet
    frequency: Floats
    density: Floats

    def __post_init__(self) -> None:
        if self.loads.order != 1.0:
            raise RobustError("the loads of a noise are of order 1")
        # Refuses what is no density.
        PowerSpectralDensity(self.frequency, self.density)


@dataclass(frozen=True, eq=False)
class NoiseRows:
    """R rows with upper limits under independent noises.

    rows (R, 3, n), forces (R, 3, A), rate (R,): components and power of omega, as in `LimitedRows`. factor
    (R,): multiplies the rms or the expected extreme. extreme (R,): the row counts as its expected extreme in
    `duration` (s). limit (R,).
    """

    rows: Floats
    forces: Floats
    rate: Floats
    factor: Floats
    extreme: Flags
    duration: float
    limit: Floats
    sets: tuple[NoiseSet, ...]

    def __post_init__(self) -> None:
        if not self.sets:
            raise RobustError("no noise")
        if not (self.duration > 0.0 and bool((self.limit >= 0.0).all())):
            raise RobustError("the duration lies above zero, and limits are numbers that are not negative")

    @property
    def count(self) -> int:
        """Number R of rows."""
        return int(self.rows.shape[0])

    @cached_property
    def plain(self) -> LimitedRows:
        """The rows as those of a family, for the bounds of one frequency."""
        edges = break_points(self)
        none = np.zeros(self.count, dtype=bool)
        return LimitedRows(
            rows=self.rows,
            forces=self.forces,
            rate=self.rate,
            ellipse=none,
            factor=np.ones(self.count),
            squares=none,
            limit=self.limit,
            sets=tuple(each.loads for each in self.sets),
            speed=(float(edges[0]), float(edges[-1])),
        )


def break_points(noise: NoiseRows) -> Floats:
    """Frequencies (Hz) between which every density is one power law or zero, rising."""
    return np.unique(np.concatenate([each.frequency for each in noise.sets]))


def counted(noise: NoiseRows, variance: Floats, rate_variance: Floats) -> Floats:
    """What variances (N, R) of rows and their rates count as. Grows with both, so that bounds give bounds.

    With u^2 = 2 ln(2 f T) >= 2 ln 20, sigma u has d(sigma u)^2 / d sigma^2 = u^2 - 1 > 0 at a fixed rate
    variance, and sigma / u grows as well; with fewer than ten cycles the factor is fixed.
    """
    value = np.sqrt(variance)
    if noise.extreme.any():
        # A variance without a bound has no crossing rate.
        known = np.isfinite(variance) & np.isfinite(rate_variance)
        still, moving = np.where(known, variance, 1.0), np.where(known, rate_variance, 1.0)
        extreme = np.where(known, expected_extreme(still, moving, noise.duration), np.inf)
        value = np.where(noise.extreme, extreme, value)
    result: Floats = value * noise.factor
    return result


@dataclass(frozen=True, eq=False)
class Areas:
    """Of one density over N intervals of the squared speed z: area (N,) of S df, mean and rms of z - middle
    under it.

    lean (N,): mean of z - middle over the interval, weighted with S; spread (N,): root of the mean of its
    square.
    """

    area: Floats
    lean: Floats
    spread: Floats


def areas(each: NoiseSet, low: Floats, high: Floats) -> Areas:
    """Areas of a density over intervals of the squared speed, none of which crosses a break point.

    S = S_a (f/a)^n from a to b gives the integral of f^p S df as S_a a^(p+1) expm1(k L)/k, k = n + p + 1, L =
    ln(b/a).
    """
    a, b = np.sqrt(low) / TWO_PI, np.sqrt(high) / TWO_PI
    centre = np.sqrt(a * b)
    points = each.frequency
    piece = np.clip(np.searchsorted(points, centre, side="right") - 1, 0, len(points) - 2)
    steep = segment_exponents(PowerSpectralDensity(points, each.density))[piece]
    inside = (centre > points[0]) & (centre < points[-1])
    start = np.where(inside, each.density[piece] * (a / points[piece]) ** steep, 0.0)
    octave = np.log(b / a)

    def moment(power: float) -> Floats:
        k = steep + power + 1.0
        flat = np.abs(k * octave) < 1e-9
        grown = np.where(
            flat, octave * (1.0 + 0.5 * k * octave), np.expm1(k * octave) / np.where(flat, 1.0, k)
        )
        return np.asarray(start * a ** (power + 1.0) * grown)

    area, first, second = moment(0.0), TWO_PI**2 * moment(2.0), TWO_PI**4 * moment(4.0)
    middle, half = 0.5 * (low + high), 0.5 * (high - low)
    safe = np.where(area > 0.0, area, 1.0)
    lean = np.where(area > 0.0, first / safe - middle, 0.0)
    square = np.where(area > 0.0, second / safe - 2.0 * middle * first / safe + middle**2, 0.0)
    # What rounding takes off differences of large numbers is given back.
    spread = np.sqrt(np.clip(square + 1e-12 * middle**2, 0.0, half**2))
    return Areas(area * (1.0 + 1e-12), np.clip(lean, -half, half), spread)


def segments(noise: NoiseRows, count: int) -> Floats:
    """First edges (E,) of intervals of the squared speed: break points, and about `count` intervals in all."""
    points = break_points(noise)
    total = np.log(points[-1] / points[0])
    edges = [points[:1]]
    for low, high in itertools.pairwise(points):
        number = max(1, int(np.ceil(count * np.log(high / low) / total)))
        edges.append(np.geomspace(low, high, number + 1)[1:])
    found: Floats = (TWO_PI * np.unique(np.concatenate(edges))) ** 2
    return found
