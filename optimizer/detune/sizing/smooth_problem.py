"""Sizing n freedoms with smooth functions: response ratios, sag, separation, and their adjoint gradients.

Unknowns x = (ln k, ln eta, b): stiffness of every pattern (N/m), loss factor of every damping group, ballast (kg).

    D(w; x) = -w^2 (M0 + sum_j b_j N_j) + K0 + sum_i k_i (1 + j eta_g(i)) T_i,      D q = f + sum_j b_j f_j

Per frequency the ratios |row q| / limit are joined by a p-norm (never below the largest of them). One inverse
per frequency gives the responses and, D being symmetric, the adjoint as well:

    dR/dx = -Re(lambda^T (dD/dx) q) + Re(lambda^T df/dx),   lambda = D^-1 sum_r a_r conj(z_r)/|z_r| row_r
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.sizing.statement import SizingError

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]


@dataclass(frozen=True)
class SmoothProblem:
    """Arrays of a smooth sizing problem with n freedoms, p patterns, e damping groups, q ballasts, w frequencies.

    mass (n, n) kg; ballast_patterns (q, n, n) per kg; patterns (p, n, n); constant (n, n) complex; damping_group
    (p,) of 0..e-1; frequencies (w,) Hz; loads (w, n) complex; ballast_loads (q, w, n) complex per kg (base
    motion acts on ballast); rows (r, n); limits (w, r), infinite where none; lower, upper (p + e + q,) in
    N/m, -, kg; cost (p + e + q,) per N/m, per unit of loss factor, per kg; static_rows (s, n), sag_limits (s,)
    in m on |static_row q|, weight (n,) N, ballast_weights (q, n) N per kg, dynamic_to_static (p,);
    excitation_intervals (i, 2) Hz with the least `separation` asked for.
    """

    mass: Floats
    ballast_patterns: Floats
    patterns: Floats
    constant: Complexes
    damping_group: NDArray[np.intp]
    frequencies: Floats
    loads: Complexes
    ballast_loads: Complexes
    rows: Floats
    limits: Floats
    lower: Floats
    upper: Floats
    cost: Floats
    static_rows: Floats
    sag_limits: Floats
    weight: Floats
    ballast_weights: Floats
    dynamic_to_static: Floats
    excitation_intervals: Floats
    separation: float

    def __post_init__(self) -> None:
        p, q, n = self.patterns.shape[0], self.ballast_patterns.shape[0], self.mass.shape[0]
        groups = int(self.damping_group.max()) + 1 if self.damping_group.size else 0
        if self.lower.size != p + groups + q or self.upper.size != self.lower.size:
            raise SizingError("bounds must cover every stiffness, loss factor and ballast")
        if np.any(self.lower > self.upper):
            raise SizingError(f"bounds are crossed at unknown {int(np.argmax(self.lower > self.upper))}")
        if np.any(self.lower[: p + groups] <= 0) or not np.all(np.isfinite(self.upper)):
            raise SizingError(
                "stiffness and loss factor need bounds above zero, and every bound must be finite"
            )
        if self.loads.shape != (self.frequencies.size, n) or self.limits.shape != (
            self.frequencies.size,
            self.rows.shape[0],
        ):
            raise SizingError("loads, rows, limits and frequencies do not fit each other")
        if np.any(self.limits <= 0):
            raise SizingError("a response limit is zero or negative")

    @property
    def groups(self) -> int:
        """Number of damping groups."""
        return int(self.lower.size - self.patterns.shape[0] - self.ballast_patterns.shape[0])

    def split(self, x: Floats) -> tuple[Floats, Floats, Floats]:
        """(k, eta, b) in N/m, -, kg from the unknowns x = (ln k, ln eta, b)."""
        p = self.patterns.shape[0]
        e = p + self.groups
        return np.exp(x[:p]), np.exp(x[p:e]), x[e:]

    def join(self, physical: Floats) -> Floats:
        """Unknowns x from (k, eta, b)."""
        e = self.patterns.shape[0] + self.groups
        return np.concatenate([np.log(physical[:e]), physical[e:]])

    def mass_at(self, ballast: Floats) -> Floats:
        """Mass matrix with ballast, (n, n)."""
        return np.asarray(self.mass + np.tensordot(ballast, self.ballast_patterns, axes=1))


def responses(problem: SmoothProblem, x: Floats) -> tuple[Complexes, Complexes]:
    """(inverse of D (w, n, n), q (w, n)) at the unknowns x. Raises numpy.linalg.LinAlgError where D is singular."""
    k, eta, ballast = problem.split(x)
    omega2 = (2 * np.pi * problem.frequencies) ** 2
    complex_k = k * (1 + 1j * eta[problem.damping_group])
    stiffness = problem.constant + np.tensordot(complex_k, problem.patterns, axes=1)
    dynamic = stiffness[None] - omega2[:, None, None] * problem.mass_at(ballast)[None]
    inverse = np.asarray(np.linalg.inv(dynamic), dtype=complex)
    loads = problem.loads + np.tensordot(ballast, problem.ballast_loads, axes=1)
    return inverse, np.asarray(np.einsum("wij,wj->wi", inverse, loads), dtype=complex)


def ratios(problem: SmoothProblem, x: Floats) -> Floats:
    """|row q| / limit, shape (w, r); zero where there is no limit."""
    _, q = responses(problem, x)
    return np.abs(q @ problem.rows.T) / problem.limits


def joined_ratios(problem: SmoothProblem, x: Floats, norm: float) -> tuple[Floats, Floats]:
    """p-norm over the rows per frequency (w,), and its gradient in x (w, unknowns), by one adjoint each."""
    inverse, q = responses(problem, x)
    k, eta, _ = problem.split(x)
    z = q @ problem.rows.T
    a = np.abs(z) / problem.limits
    top = np.maximum(a.max(axis=1), 1e-300)
    relative = a / top[:, None]
    # A frequency without any load has no ratio and no gradient.
    total = np.maximum((relative**norm).sum(axis=1), 1e-30)
    value = top * total ** (1 / norm)
    share = relative ** (norm - 1) * (total ** (1 / norm - 1))[:, None]
    size = np.abs(z)
    phase = np.where(size > 0, np.conj(z) / np.where(size > 0, size, 1.0), 0.0)
    adjoint = np.einsum("wij,wj->wi", inverse, (share * phase / problem.limits) @ problem.rows)
    # One matrix product for all patterns: lambda^T T q is the inner product of T with the outer product.
    outer = (adjoint[:, :, None] * q[:, None, :]).reshape(value.size, -1)
    through = outer @ problem.patterns.reshape(-1, outer.shape[1]).T
    loss = eta[problem.damping_group]
    by_k = -np.real(through * (k * (1 + 1j * loss)))
    each = -np.real(1j * through * (k * loss))
    by_eta = each @ (problem.damping_group[:, None] == np.arange(problem.groups))
    omega2 = (2 * np.pi * problem.frequencies) ** 2
    inertia = outer @ problem.ballast_patterns.reshape(-1, outer.shape[1]).T
    pushed = np.einsum("wi,qwi->wq", adjoint, problem.ballast_loads)
    by_ballast = np.real(omega2[:, None] * inertia + pushed)
    return value, np.concatenate([by_k, by_eta, by_ballast], axis=1)


def sag_ratios(problem: SmoothProblem, x: Floats) -> tuple[Floats, Floats]:
    """Signed static deflection over its limit, shape (s,), and its gradient (s, unknowns)."""
    k, _, ballast = problem.split(x)
    static = k / problem.dynamic_to_static
    stiffness = np.real(problem.constant) + np.tensordot(static, problem.patterns, axes=1)
    load = problem.weight + ballast @ problem.ballast_weights
    inverse = np.linalg.inv(stiffness)
    q = inverse @ load
    adjoint = problem.static_rows @ inverse / problem.sag_limits[:, None]
    by_k = -np.einsum("si,pij,j->sp", adjoint, problem.patterns, q) * static
    by_ballast = adjoint @ problem.ballast_weights.T
    none = np.zeros((adjoint.shape[0], problem.groups))
    return problem.static_rows @ q / problem.sag_limits, np.concatenate([by_k, none, by_ballast], axis=1)


def natural_frequencies(problem: SmoothProblem, x: Floats) -> tuple[Floats, Floats]:
    """Undamped natural frequencies (n,) Hz at the dynamic stiffness, and their gradient (n, unknowns).

    d(w^2) = phi^T (dK - w^2 dM) phi with phi^T M phi = 1; for repeated frequencies this is one of several
    directional derivatives, as always.
    """
    from scipy.linalg import eigh

    k, _, ballast = problem.split(x)
    stiffness = np.real(problem.constant) + np.tensordot(k, problem.patterns, axes=1)
    values, shapes = eigh(stiffness, problem.mass_at(ballast))
    frequency = np.sqrt(np.maximum(values, 1e-300)) / (2 * np.pi)
    slope = 1.0 / (8 * np.pi**2 * frequency)
    by_k = np.einsum("in,pij,jn->np", shapes, problem.patterns, shapes, optimize=True) * k
    inertia = np.einsum("in,qij,jn->nq", shapes, problem.ballast_patterns, shapes, optimize=True)
    by_ballast = -values[:, None] * inertia
    none = np.zeros((values.size, problem.groups))
    return frequency, slope[:, None] * np.concatenate([by_k, none, by_ballast], axis=1)


def least_separation(problem: SmoothProblem, x: Floats) -> float:
    """Least separation of all modes from all excitation intervals (infinite when there are no intervals)."""
    frequency, _ = natural_frequencies(problem, x)
    result = np.inf
    for low, high in problem.excitation_intervals:
        result = min(result, float(np.maximum(frequency / high - 1, 1 - frequency / low).min()))
    return result
