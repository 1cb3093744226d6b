"""Matrix-ball bound: the greatest |y| over a box of stiffness, damping, mass and frequency.

Every varying term of D = D0 + E is a scalar disc times a positive semidefinite matrix, E = sum e_i P_i with
|e_i| <= rho_i, so |u^H E v| <= sqrt(u^H R u) sqrt(v^H R v) with R = sum rho_i P_i (Cauchy-Schwarz). With
R = L L^T and D~ = L^-1 D0 L^-T = U S V^H, and all singular values above 1,

    |c^T D^-1 f - centre| <= radius,   centre = c~^T V S (S^2 - 1)^-1 U^H f~,
    radius = ||(S^2 - 1)^-1/2 V^T c~|| ||(S^2 - 1)^-1/2 U^H f~||.

Loss-angle shift: after a rotation by an angle phi the e_i lie near the real axis, |Im e_i| <= s rho_i; then
||Gamma + (-j g) I|| <= r = sqrt(1 + 2 g s + g^2), so D~ + j g I with radius r takes the place of D~ with 1. The bound
is correct for every phi and g; the best of several is kept.
"""

from __future__ import annotations

import numpy as np

from detune.proof.robust_data import OutputLimit, RobustSystem
from detune.proof.selection_data import Complexes, Floats

SHIFTS = (0.0, 0.3, 1.0, 3.0, 10.0)
WIDENING = 1.0e-8
"""Relative widening of every bound for rounding."""


def _corner_points(low: Floats, high: Floats, columns: list[int]) -> list[Floats]:
    """Boxes' corner points over some variables, the others at the middle: list of (N, V+1)."""
    points = [0.5 * (low + high)]
    for column in columns:
        doubled = []
        for point in points:
            for edge in (low, high):
                copy = point.copy()
                copy[:, column] = edge[:, column]
                doubled.append(copy)
        points = doubled
    return points


def disc_cover(system: RobustSystem, low: Floats, high: Floats) -> tuple[Complexes, Complexes]:
    """Centre (N, T) of every varying scalar and its corner deviations (N, T, 8).

    The T scalars are kappa of each axis, -omega^2 times the variable of each mass term, -omega^2 itself, and
    omega (for a fixed viscous matrix). Each is multi-affine in at most three variables, hence inside the convex
    hull of its values at their corners; kappa is affine in omega, not in omega^2, so its corners are taken in omega.
    """
    count, last = low.shape[0], low.shape[1] - 1
    values = []
    for s_edge in (low, high):
        for t_edge in (low, high):
            for w_edge in (low, high):
                points = w_edge.copy()
                kappa = _mixed_stiffness(system, s_edge, t_edge, w_edge)
                masses = np.empty((count, len(system.mass_terms)))
                for i, variable in enumerate(system.mass_variable):
                    amount = s_edge[:, variable] if variable >= 0 else np.ones(count)
                    masses[:, i] = -w_edge[:, last] * amount
                plain = np.stack([-points[:, last], np.sqrt(points[:, last])], axis=1)
                values.append(np.concatenate([kappa, masses, plain], axis=1))
    corners = np.stack(values, axis=2)
    real, imag = corners.real, corners.imag
    centre = 0.5 * (real.max(axis=2) + real.min(axis=2)) + 0.5j * (imag.max(axis=2) + imag.min(axis=2))
    return centre, corners - centre[:, :, None]


def _mixed_stiffness(system: RobustSystem, s_edge: Floats, t_edge: Floats, w_edge: Floats) -> Complexes:
    """kappa (N, A) with stiffness factors, damping factors and frequency taken from three corner arrays."""
    ones = np.ones((s_edge.shape[0], 1))
    s = np.concatenate([s_edge[:, :-1], ones], axis=1)[:, system.stiffness_variable]
    t = np.concatenate([t_edge[:, :-1], ones], axis=1)[:, system.damping_variable]
    omega = np.sqrt(w_edge[:, -1])[:, None]
    kappa: Complexes = s * system.stiffness + 1j * t * (s * system.loss + omega * system.viscous)
    return kappa


def absolute_terms(system: RobustSystem) -> Floats:
    """Absolute values |P| (T, n, n) of the matrices that the scalars of `disc_cover` multiply.

    |P| has the absolute eigenvalues of P: then |u^H P v| <= sqrt(u^H |P| u) sqrt(v^H |P| v). The fixed viscous
    matrix enters as j P, which has the same absolute value.
    """
    outer = np.einsum("ai,aj->aij", system.axes, system.axes)
    terms = np.concatenate([outer, system.mass_terms, system.mass[None], system.fixed_viscous[None]])
    values, vectors = np.linalg.eigh(terms)
    return np.asarray(np.einsum("tik,tk,tjk->tij", vectors, np.abs(values), vectors))


def _centre_matrices(system: RobustSystem, centre: Complexes) -> Complexes:
    """D0 (N, n, n) from the centres (N, T) of all scalars; terms of the fixed matrices are certain."""
    axes, masses = len(system.axes), len(system.mass_terms)
    outer = np.einsum("ai,aj->aij", system.axes, system.axes)
    base = system.fixed_dynamic + 1j * system.fixed_hysteretic
    matrices = base + np.einsum("bt,tij->bij", centre[:, :axes], outer)
    matrices = matrices + np.einsum("bt,tij->bij", centre[:, axes : axes + masses], system.mass_terms)
    plain = centre[:, axes + masses :]
    matrices = matrices + plain[:, 0, None, None] * system.mass
    result: Complexes = matrices + 1j * plain[:, 1, None, None] * system.fixed_viscous
    return result


def _balls(
    matrix: Complexes, left: Complexes, right: Complexes, shift: float, spread: Floats
) -> tuple[Complexes, Floats]:
    """Centre (N, C, F) and radius (N, C, F) of left^T D^-1 right in scaled coordinates; radius inf if unbounded."""
    n = matrix.shape[-1]
    r = np.sqrt(1.0 + 2.0 * shift * spread + shift**2)
    u, sigma, vh = np.linalg.svd(matrix + 1j * shift * np.eye(n))
    sigma = sigma / r[:, None]
    bounded = sigma[:, -1] > 1.0 + 1e-9
    gap = np.where(bounded[:, None], sigma**2 - 1.0, 1.0)
    a = np.einsum("bcn,bkn->bck", left, vh.conj())
    f = np.einsum("bnk,bnf->bkf", u.conj(), right)
    middle = np.einsum("bck,bk,bkf->bcf", a, sigma / gap, f) / r[:, None, None]
    row = np.sqrt(np.einsum("bck,bk->bc", np.abs(a) ** 2, 1.0 / gap))
    column = np.sqrt(np.einsum("bkf,bk->bf", np.abs(f) ** 2, 1.0 / gap))
    radius = row[:, :, None] * column[:, None, :] / r[:, None, None]
    radius = np.where(bounded[:, None, None], radius, np.inf)
    return middle, radius


def output_bound(
    system: RobustSystem, output: OutputLimit, low: Floats, high: Floats
) -> tuple[Floats, Floats]:
    """Upper bound (N,) of |y| over boxes with corners low, high (N, V+1), and the weight (N, V+1) of each variable.

    The weight estimates how much a variable's width contributes; the widest weight is the one to bisect.
    """
    centre, deviation = disc_cover(system, low, high)
    absolute = absolute_terms(system)
    rho = np.abs(deviation).max(axis=2) * (1.0 + 1e-12)
    cover = np.einsum("bt,tij->bij", rho, absolute)
    # A little of the mass matrix keeps R invertible; a larger R is still a cover.
    trace = np.einsum("bii->b", cover) / np.trace(system.mass)
    floor = 1e-6 * np.maximum(trace, 1e-6 * high[:, -1])
    cover = cover + floor[:, None, None] * system.mass
    factor = np.linalg.cholesky(cover)
    inverse = np.linalg.inv(factor)
    d0 = _centre_matrices(system, centre)
    axes = len(system.axes)
    kappa = centre[:, :axes]
    moving = np.flatnonzero(output.base != 0.0)
    forced = np.flatnonzero(output.force != 0.0)
    load = output.load + (kappa * output.base) @ system.axes
    row = output.row + (kappa * output.force) @ system.axes
    right = np.concatenate([load[:, :, None], _spread(system.axes[moving].T, len(low))], axis=2)
    left = np.concatenate([row[:, None, :], _spread(system.axes[forced], len(low))], axis=1)
    right, left = inverse @ right, left @ np.swapaxes(inverse, 1, 2)
    scaled = inverse @ d0 @ np.swapaxes(inverse, 1, 2)
    start = (kappa * output.force * output.base).sum(axis=1)
    best = np.full(len(low), np.inf)
    for phi in _angles(kappa):
        turned = deviation * np.exp(-1j * phi)[:, None, None]
        turned[:, -1] *= 1j
        spread = (np.abs(turned.imag).max(axis=2) / np.maximum(rho, 1e-300)).max(axis=1)
        spread = np.minimum(spread * (1.0 + 1e-12), 1.0)
        for shift in SHIFTS:
            middle, radius = _balls(
                scaled * np.exp(-1j * phi)[:, None, None],
                left * np.exp(-1j * phi)[:, None, None],
                right,
                shift,
                spread,
            )
            total = _combine(system, output, middle, radius, rho, start, moving, forced, low, high)
            best = np.minimum(best, total)
    weight = _weights(system, output, low, high, d0, load[:, :], row, rho, absolute)
    return best * (1.0 + WIDENING), weight


def _spread(matrix: Floats, count: int) -> Floats:
    return np.broadcast_to(matrix, (count, *matrix.shape))


def _angles(kappa: Complexes) -> list[Floats]:
    """Angles (N,) to rotate by: none, and the mean loss angle of the springs."""
    zero = np.zeros(kappa.shape[0])
    total = kappa.sum(axis=1) if kappa.shape[1] else np.ones(kappa.shape[0])
    mean = np.angle(total)
    return [zero, mean] if bool((mean > 0.0).any()) else [zero]


def _combine(
    system: RobustSystem,
    output: OutputLimit,
    middle: Complexes,
    radius: Floats,
    rho: Floats,
    start: Complexes,
    moving: np.ndarray[tuple[int], np.dtype[np.int64]],
    forced: np.ndarray[tuple[int], np.dtype[np.int64]],
    low: Floats,
    high: Floats,
) -> Floats:
    """Upper bound (N,) of |y| from the balls of all rows and loads, the terms with varying kappa included."""
    sway = rho[:, moving] * np.abs(output.base[moving])
    extra = np.einsum("bcf,bf->bc", np.abs(middle[:, :, 1:]) + radius[:, :, 1:], sway)
    power = output.load_power + output.output_power
    edge = high[:, -1] if power >= 0.0 else low[:, -1]
    scale = np.sqrt(edge) ** power
    main = np.abs(middle[:, 0, 0] - start - output.offset) + radius[:, 0, 0] + extra[:, 0]
    for position, axis in enumerate(forced):
        own = np.abs(middle[:, 1 + position, 0] - output.base[axis]) + radius[:, 1 + position, 0]
        own = own + extra[:, 1 + position]
        main = main + np.abs(output.force[axis]) * rho[:, axis] * own
    total: Floats = main * scale
    return np.where(np.isnan(total), np.inf, total)


def _weights(
    system: RobustSystem,
    output: OutputLimit,
    low: Floats,
    high: Floats,
    d0: Complexes,
    load: Complexes,
    row: Complexes,
    rho: Floats,
    absolute: Floats,
) -> Floats:
    """First-order share of each variable in the radius: sum over its terms of rho sqrt(q^H P q) sqrt(p^H P p)."""
    q = np.linalg.solve(d0, load[:, :, None])[:, :, 0]
    p = np.linalg.solve(np.swapaxes(d0, 1, 2), row[:, :, None])[:, :, 0]
    q_part = np.einsum("bi,tij,bj->bt", q.conj(), absolute, q).real
    p_part = np.einsum("bi,tij,bj->bt", p.conj(), absolute, p).real
    share = rho * np.sqrt(np.maximum(q_part, 0.0) * np.maximum(p_part, 0.0))
    weight = np.zeros_like(low)
    axes, masses = len(system.axes), len(system.mass_terms)
    width = high - low
    relative = width / np.maximum(np.abs(high) + np.abs(low), 1e-300)
    for t in range(share.shape[1]):
        names = {low.shape[1] - 1}
        if t < axes:
            names = {int(system.stiffness_variable[t]), int(system.damping_variable[t])} - {-1}
            if system.viscous[t] > 0.0:
                names |= {low.shape[1] - 1}
        elif t < axes + masses:
            names |= {int(system.mass_variable[t - axes])} - {-1}
        total = sum((relative[:, v] for v in names), np.zeros(len(low)))
        for v in names:
            weight[:, v] += share[:, t] * relative[:, v] / np.maximum(total, 1e-300)
    weight += 1e-12 * relative
    return np.where(width > 0.0, weight, -1.0)
