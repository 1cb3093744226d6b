"""Responses to random forcing with their slopes: the variance on a fixed rule of points, each with its adjoint.

v = integral of |z|^2 S df and dv = integral of 2 Re(conj(z) dz) S df. The points are laid by the poles as they are
(omega = c + h sinh(s) near a pole of frequency c and half width h, as in `physics.random_response`); that
they move with
the unknowns changes nothing, because the integral does not depend on them.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.physics.extremes import EULER_CONSTANT, FEWEST_CYCLES
from detune.physics.spectra import PowerSpectralDensity, segment_exponents
from detune.response.random import NoiseLoad
from detune.solvers.gradient_peaks import Observed, phasors
from detune.solvers.gradient_state import StateAt
from detune.solvers.gradient_tone import Tones, pulled_back, tones

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
TWO_PI = 2.0 * np.pi
PANEL = 2.0
POINTS = 10


def points(spectrum: PowerSpectralDensity, poles: Complexes) -> tuple[Floats, Floats]:
    """Frequencies (K,) rad/s and weights (K,), the density in them, of a rule for integrals over the spectrum."""
    corner = TWO_PI * np.unique(spectrum.frequency)
    centre = np.append(np.abs(poles.imag), 0.0)
    width = np.append(-poles.real, 0.5 * corner[0])
    ordered = np.sort(centre)
    between = 0.5 * (ordered[1:] + ordered[:-1])
    edges = np.unique(np.concatenate([corner, np.clip(between, corner[0], corner[-1])]))
    node, weight = np.polynomial.legendre.leggauss(POINTS)
    omega, share = [], []
    for start, end in itertools.pairwise(edges):
        middle = 0.5 * (start + end)
        owner = int(np.argmin((middle - centre) ** 2 + width**2))
        near, scale = centre[owner], width[owner]
        low, high = np.arcsinh((start - near) / scale), np.arcsinh((end - near) / scale)
        count = max(1, int(np.ceil((high - low) / PANEL)))
        ends = np.linspace(low, high, count + 1)
        half = 0.5 * np.diff(ends)[:, None]
        variable = (0.5 * (ends[1:] + ends[:-1])[:, None] + half * node).ravel()
        omega.append(near + scale * np.sinh(variable))
        share.append((half * weight).ravel() * scale * np.cosh(variable) / TWO_PI)
    every = np.concatenate(omega)
    return every, np.concatenate(share) * _density(spectrum, every / TWO_PI)


def _density(spectrum: PowerSpectralDensity, frequency: Floats) -> Floats:
    corners = spectrum.frequency
    piece = np.clip(np.searchsorted(corners, frequency, side="right") - 1, 0, corners.size - 2)
    rise = (frequency / corners[piece]) ** segment_exponents(spectrum)[piece]
    return np.asarray(spectrum.density[piece] * rise)


@dataclass(frozen=True)
class Noisy:
    """What the noises together count as in each limit `value` (R,), with what its slopes are made of.

    `moved` (2, R): variance and that of the rate. `found`: the tones of every noise at its points, with weights (K,).
    """

    value: Floats
    moved: Floats
    duration: float
    found: tuple[tuple[Tones, Floats], ...]


def noise_rows(limits: Observed, at: StateAt, noises: tuple[NoiseLoad, ...], poles: Complexes) -> Noisy:
    """What the noises together count as in each limit: variances of independent noises add."""
    moved = np.zeros((2, limits.count))
    found = []
    for each in noises:
        omega, weight = points(each.noise.spectrum, poles)
        response = tones(at, (each.load,), omega)
        found.append((response, weight))
        moved += np.stack([weight, weight * omega**2]) @ _powers(limits, response)
    duration = max(each.noise.duration for each in noises)
    value = np.array([
        _counted(moved[:, row], duration, allowable.statistic())[0]
        for row, (allowable, _) in enumerate(limits.pairs)
    ])  # fmt: skip
    return Noisy(value, moved, duration, tuple(found))


def noise_slopes(limits: Observed, found: Noisy, wanted: NDArray[np.bool_], unknowns: int) -> Floats:
    """Slopes (R, u) of the values of the `wanted` (R,) limits, zero for the others."""
    slopes = np.zeros((limits.count, unknowns))
    for row in np.flatnonzero(wanted).tolist():
        _, by = _counted(found.moved[:, row], found.duration, limits.pairs[row][0].statistic())
        for response, weight in found.found:
            _, cotangent = _power(limits, row, response)
            # One adjoint for variance and rate: both are the same power, weighted.
            weighted = weight * (by[0] + by[1] * response.omega**2)
            features = (cotangent * weighted[:, None]) @ limits.maps[row].T
            slopes[row] += pulled_back(response, features).sum(axis=0)
    return slopes


def _powers(limits: Observed, found: Tones) -> Floats:
    """Squared modulus (K, R) of what every limit looks at, summed over the axes of a resultant."""
    phasor = (found.features @ limits.flat).reshape(len(found.omega), limits.count, 3)
    frequency = found.omega[None] / TWO_PI
    for index, (allowable, _) in enumerate(limits.pairs):
        if allowable.has_weighting():
            phasor[:, index] = allowable.weighted(phasor[None, :, index], frequency)[0]
    single = np.isfinite(limits.along[:, 0])
    line = np.sum(phasor * np.where(single[:, None], limits.along, 0.0), axis=2)
    whole = np.sum(phasor.real**2 + phasor.imag**2, axis=2)
    return np.asarray(np.where(single, line.real**2 + line.imag**2, whole))


def _power(limits: Observed, row: int, found: Tones) -> tuple[Floats, Complexes]:
    """Squared modulus (K,) of what one limit looks at, summed over the axes of a resultant; its cotangent (K, 3)."""
    phasor, weighting = phasors(limits, np.full(len(found.omega), row), found)
    along = limits.along[row]
    if np.isfinite(along[0]):
        line = phasor @ along
        cotangent = 2.0 * np.conj(line)[:, None] * along * weighting
        return np.asarray(np.abs(line) ** 2), np.asarray(cotangent)
    power = np.sum(np.abs(phasor) ** 2, axis=1)
    return np.asarray(power), np.asarray(2.0 * np.conj(phasor) * weighting)


def _counted(variances: Floats, duration: float, statistic: str) -> tuple[float, Floats]:
    """What a variance and that of the rate (2,) count as, and the derivatives by both (brief.allowable.base)."""
    still, rate = float(variances[0]), float(variances[1])
    if still <= 0.0:
        return 0.0, np.zeros(2)
    sigma = float(np.sqrt(still))
    by_sigma = np.array([0.5 / sigma, 0.0])
    if statistic == "rms":
        return sigma, by_sigma
    if statistic == "3-sigma":
        return 3.0 * sigma, 3.0 * by_sigma
    crossing = float(np.sqrt(rate / still)) / TWO_PI
    cycles = max(crossing * duration, FEWEST_CYCLES)
    u = float(np.sqrt(2.0 * np.log(2.0 * cycles)))
    factor = u + EULER_CONSTANT / u
    by_cycles = (1.0 - EULER_CONSTANT / u**2) / (u * cycles)
    by_crossing = by_cycles * duration if crossing * duration > FEWEST_CYCLES else 0.0
    by = factor * by_sigma + sigma * by_crossing * crossing * np.array(
        [-0.5 / still, 0.5 / max(rate, 1e-300)]
    )
    times = 2.0 if statistic == "peak-to-peak" else 1.0
    return times * factor * sigma, times * by
