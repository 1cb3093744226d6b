"""Variances of rows under noise at points of the scatter, by quadrature to 1e-4, and the search for the
greatest."""

from __future__ import annotations

import itertools

import numpy as np

from detune.physics.random_response import QuadratureNotConverged, variance
from detune.physics.spectra import PowerSpectralDensity
from detune.proof.bisection import RowSamples
from detune.proof.noise_data import NoiseRows, NoiseSet, counted
from detune.proof.scatter_data import ScatterSystem, matrices_at
from detune.proof.selection_data import Complexes, Floats

TOLERANCE = 1.0e-4
"""Relative error of a variance by quadrature; a value found is lowered by so much before it counts as a
witness."""
CHUNK = 16
ALL_CORNERS = 6
SOME_CORNERS = 64
INSIDE = 16


def variances_at(system: ScatterSystem, noise: NoiseRows, points: Floats) -> tuple[Floats, Floats]:
    """Variances of all rows and of their rates, both (N, R), at points (N, V); infinite where nothing damps a
    mode."""
    moved, rates = np.zeros((len(points), noise.count)), np.zeros((len(points), noise.count))
    for first in range(0, len(points), CHUNK):
        part = points[first : first + CHUNK]
        centre, width = _poles(system, part)
        for each in noise.sets:
            found = _one_noise(system, noise, each, part, centre, width)
            moved[first : first + CHUNK] += found[: noise.count].T
            rates[first : first + CHUNK] += found[noise.count :].T
    return moved, rates


def noise_values_at(system: ScatterSystem, noise: NoiseRows, points: Floats) -> Floats:
    """What the rows count as, (N, R), at points (N, V)."""
    return counted(noise, *variances_at(system, noise, points))


def _poles(system: ScatterSystem, points: Floats) -> tuple[Floats, Floats]:
    """Imaginary parts and decay rates (N, m) of the poles, the hysteretic part frozen as j H: where the
    needles are."""
    n, count = len(system.mass), len(points)
    at = np.concatenate([points, np.ones((count, 1))], axis=1)
    one = matrices_at(system, at, 1.0)[0]
    two = matrices_at(system, np.concatenate([points, np.full((count, 1), 4.0)], axis=1), 1.0)[0]
    # D(w) = K + j H + j w C - w^2 M at w = 1 and 2, with M and K known from the real parts.
    mass = (one.real - two.real) / 3.0
    viscous = two.imag - one.imag
    stiff = one + mass - 1j * viscous
    top = np.concatenate([np.zeros((count, n, n)), np.broadcast_to(np.eye(n), (count, n, n))], axis=2)
    low = np.linalg.solve(mass.astype(complex), np.concatenate([-stiff, -viscous.astype(complex)], axis=2))
    poles = np.linalg.eigvals(np.concatenate([top.astype(complex), low], axis=1))
    size = np.maximum(np.abs(poles), 1e-9)
    return np.abs(poles.imag), np.maximum(np.abs(poles.real), 1e-9 * size)


def _one_noise(
    system: ScatterSystem, noise: NoiseRows, each: NoiseSet, points: Floats, centre: Floats, width: Floats
) -> Floats:
    """Variances of rows and of rates under one noise (2R, N); infinite where the quadrature does not converge."""
    spectrum = PowerSpectralDensity(each.frequency, each.density)
    try:
        return _quadrature(system, noise, each, points, spectrum, centre, width)
    except (QuadratureNotConverged, np.linalg.LinAlgError):
        # An undamped mode: no variance.
        if len(points) == 1:
            return np.full((2 * noise.count, 1), np.inf)
    parts = [
        _one_noise(system, noise, each, points[i : i + 1], centre[i : i + 1], width[i : i + 1])
        for i in range(len(points))
    ]
    return np.concatenate(parts, axis=1)


def _quadrature(
    system: ScatterSystem,
    noise: NoiseRows,
    each: NoiseSet,
    points: Floats,
    spectrum: PowerSpectralDensity,
    centre: Floats,
    width: Floats,
) -> Floats:
    n, axes = len(system.mass), len(system.axes)
    rows, forces = noise.rows.reshape(-1, n), noise.forces.reshape(-1, axes)
    used = np.flatnonzero(rows.any(axis=1) | forces.any(axis=1) | (np.abs(_direct(each)) > 0.0))
    loads = each.loads

    def transfer(omega: Floats) -> Complexes:
        shape = omega.shape
        flat = np.concatenate([np.repeat(points, shape[1], axis=0), omega.reshape(-1, 1) ** 2], axis=1)
        matrices, kappa = matrices_at(system, flat, 1.0)
        scale = omega.reshape(-1, 1) ** loads.powers
        base = scale @ loads.bases
        right = scale @ loads.loads + (kappa * base) @ system.axes
        q = np.linalg.solve(matrices, right[:, :, None])[:, :, 0]
        force = kappa * (q @ system.axes.T - base)
        y = q @ rows[used].T + force @ forces[used].T
        y = y + scale @ loads.direct.reshape(len(loads.powers), -1)[:, used]
        y = y * omega.reshape(-1, 1) ** noise.rate[used // 3]
        found = y.T.reshape(len(used), *shape)
        return np.concatenate([found, 1j * omega * found])

    parts = variance(transfer, spectrum, centre, width, TOLERANCE)
    out = np.zeros((2 * noise.count, len(points)))
    np.add.at(out, used // 3, parts[: len(used)])
    np.add.at(out, noise.count + used // 3, parts[len(used) :])
    return out


def _direct(each: NoiseSet) -> Floats:
    return np.asarray(np.abs(each.loads.direct).sum(axis=0).ravel())


class NoiseSampler(RowSamples):
    """Values at points of the scatter (N, V), lowered by the quadrature's tolerance, and the greatest of each row."""

    ROUNDS, GAIN = 8, 1e-6

    def __init__(self, system: ScatterSystem, limits: NoiseRows) -> None:
        self.system, self.limits = system, limits
        super().__init__(system.low, system.high, limits.limit)

    def evaluate(self, points: Floats) -> None:
        """Evaluate points (N, V)."""
        self.keep(points, noise_values_at(self.system, self.limits, points) * (1.0 - TOLERANCE))

    def around(self, points: Floats) -> None:
        """Evaluate points, each once: a quadrature takes time."""
        self.evaluate(np.unique(points, axis=0))

    def start(self) -> None:
        """Corners of the scatter, all of them or some, its middle, and points inside."""
        moving = np.flatnonzero(self.high > self.low)
        random = np.random.default_rng(20_011)
        if len(moving) <= ALL_CORNERS:
            signs = np.array(list(itertools.product((0, 1), repeat=len(moving)))).reshape(-1, len(moving))
        else:
            signs = random.integers(0, 2, (SOME_CORNERS, len(moving)))
            signs[:2] = [[0], [1]]
        corners = np.tile(0.5 * (self.low + self.high), (len(signs) + 1, 1))
        corners[1:, moving] = np.where(signs > 0, self.high[moving], self.low[moving])
        inside = self.low + (self.high - self.low) * random.uniform(size=(INSIDE, len(self.low)))
        self.evaluate(np.concatenate([corners, inside if len(moving) else inside[:0]]))


def noise_sampled(system: ScatterSystem, noise: NoiseRows, *, stop_at_violation: bool = True) -> NoiseSampler:
    """Corners and pattern search: the greatest value of every row that was found, no bound."""
    found = NoiseSampler(system, noise)
    found.search(stop_at_violation)
    return found
