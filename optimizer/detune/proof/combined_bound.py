"""Bound of all limited rows of a family at once over boxes of scatter and speed: expansion plus matrix ball.

For any p and q, and D = D0 + sum e_t P_t symmetric, c^T D^-1 f = p^T f + c^T q - p^T D q + (c - D p)^T D^-1 (f - D q).
With D0 q = f0 and D0 p = c0 the first part is exact to first order in all e_t; with R = sum rho_t |P_t| = L L^T and
|e_t| <= rho_t the last term is at most nu sqrt(sum rho_t p_t^2) sqrt(sum rho_t q_t^2), where p_t and q_t are the
"deflections" of the terms and nu bounds ||(L^-1 D L^-T)^-1|| over the whole ball, by the loss-angle shift:
nu = 1 / (sigma_min(D~ e^-j phi + j g) - r), r^2 = 1 + 2 g s + g^2 (ALGORITHMS: matrix ball). So bounds err by the
square of a box's width, and one factorisation serves all rows and loads.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from detune.proof.expansion import (
    Box,
    Expansion,
    Numbers,
    UpperPlane,
    add_planes,
    speed_power,
    upper_length,
    upper_major_axis,
    variable_products,
)
from detune.proof.scatter_data import LimitedRows, LoadSet, ScatterSystem
from detune.proof.selection_data import Complexes, Floats, Integers

WIDENING = 1.0e-7
"""Relative widening of every bound for rounding."""
CLEAR = 1.0e-6
TRIALS: tuple[tuple[bool, float], ...] = tuple(
    (turned, shift) for turned in (False, True) for shift in (0.0, 0.3, 1.0, 3.0, 10.0, 30.0)
)
"""Whether to rotate by the mean loss angle, and the shift g; every one gives a correct bound, the best is kept."""


@dataclass(frozen=True, eq=False)
class Frame:
    """What does not change from box to box.

    terms and absolute (T, n, n): matrices of the varying scalars beyond the axes, and their absolute values.
    used: components of rows that are not zero, as indices into R * 3.
    """

    outer: Floats
    terms: Floats
    absolute: Floats
    used: Integers
    rows: Floats
    forces: Floats


def frame_of(system: ScatterSystem, limits: LimitedRows) -> Frame:
    """Terms in the order mass terms, stiffness terms, mass, fixed viscous."""
    outer = np.einsum("ai,aj->aij", system.axes, system.axes)
    plain = np.stack([system.mass, system.fixed_viscous])
    terms = np.concatenate([system.mass_terms, system.stiffness_terms, plain])
    values, vectors = np.linalg.eigh(terms)
    absolute = np.einsum("tik,tk,tjk->tij", vectors, np.abs(values), vectors)
    rows = limits.rows.reshape(3 * limits.count, -1)
    forces = limits.forces.reshape(3 * limits.count, -1)
    direct = sum(
        (np.abs(each.direct).sum(axis=0).ravel() for each in limits.sets), np.zeros(3 * limits.count)
    )
    used = np.flatnonzero((rows != 0.0).any(axis=1) | (forces != 0.0).any(axis=1) | (direct > 0.0))
    return Frame(outer, terms, absolute, used, rows[used], forces[used])


def scalars(system: ScatterSystem, box: Box, order: float) -> Expansion:
    """All varying scalars of D: kappa (A), -omega^2 p of mass terms, p of stiffness terms, -omega^2, j omega."""
    s = variable_products(box, system.stiffness_factors)
    t = variable_products(box, system.damping_factors)
    ones = np.ones(1)
    omega, square = speed_power(box, order, ones), speed_power(box, order, 2.0 * ones)
    square = Expansion(-square.centre, -square.slope, square.remainder)
    ts = t.times(s, box)
    tw = t.times(omega, box)
    k, h, c = system.stiffness, system.loss, system.viscous
    masses = variable_products(box, system.mass_factors).times(square, box)
    own = variable_products(box, system.stiffness_term_factors)
    return Expansion(
        np.concatenate(
            [
                k * s.centre + 1j * (h * ts.centre + c * tw.centre),
                masses.centre,
                own.centre,
                square.centre,
                1j * omega.centre,
            ],
            axis=1,
        ),
        np.concatenate(
            [
                k[:, None] * s.slope + 1j * (h[:, None] * ts.slope + c[:, None] * tw.slope),
                masses.slope,
                own.slope,
                square.slope,
                1j * omega.slope,
            ],
            axis=1,
        ),
        np.concatenate(
            [
                k * s.remainder + h * ts.remainder + c * tw.remainder,
                masses.remainder,
                own.remainder,
                square.remainder,
                omega.remainder,
            ],
            axis=1,
        ),
    )


@dataclass(frozen=True, eq=False)
class Solved:
    """The machine at one order over N boxes: its scalars, D0, deflections of the terms, and nu.

    rho (N, T). p (N, C, n), with axis deflections p_axes (N, C, A). nu (N,), infinite where not bounded.
    """

    each: Expansion
    rho: Floats
    matrix: Complexes
    p: Numbers
    p_axes: Numbers
    p_size: Floats
    nu: Floats


def solved(
    system: ScatterSystem,
    frame: Frame,
    box: Box,
    order: float,
    trials: tuple[tuple[bool, float], ...],
    wins: Integers,
) -> Solved:
    """Factor D0, solve it for all rows, and bound the inverse over the ball."""
    each = scalars(system, box, order)
    axes, n, count = len(system.axes), len(system.mass), len(box.low)
    rho = (each.reach(box) + each.remainder) * (1.0 + 1e-12)
    shape, size = (count, n, n), n * n
    every = np.concatenate([frame.outer, frame.terms]).reshape(-1, size)
    d0 = (each.centre @ every).reshape(shape) + system.fixed_dynamic + 1j * system.fixed_hysteretic
    cover = (rho @ np.concatenate([frame.outer, frame.absolute]).reshape(-1, size)).reshape(shape)
    # A little of the mass matrix keeps R invertible; a larger R is still a cover.
    trace = np.einsum("bii->b", cover) / np.trace(system.mass)
    cover = cover + (1e-5 * np.maximum(trace, 1e-6 * box.high[:, -1]))[:, None, None] * system.mass
    c0 = frame.rows + (frame.forces * each.centre[:, None, :axes]) @ system.axes
    p = np.swapaxes(np.linalg.solve(np.swapaxes(d0, 1, 2), np.swapaxes(c0, 1, 2)), 1, 2)
    p_axes = p @ system.axes.T - frame.forces
    nu = np.minimum(_nu(each, rho, d0, cover, box, trials, wins), _dissipation(frame, each, d0, cover, box))
    return Solved(each, rho, d0, p, p_axes, _reach_size(frame, rho, p, p_axes), nu)


def _reach_size(frame: Frame, rho: Floats, vectors: Numbers, deflections: Numbers) -> Floats:
    """sqrt(sum rho_t x_t^2) (N, C) for vectors (N, C, n) with axis deflections (N, C, A)."""
    axes = deflections.shape[2]
    total = np.einsum("ba,bca->bc", rho[:, :axes], deflections.real**2 + deflections.imag**2)
    inner = np.tensordot(rho[:, axes:], frame.absolute, axes=1)
    total = total + ((vectors.conj() @ inner) * vectors).real.sum(axis=2)
    return np.asarray(np.sqrt(np.maximum(total, 0.0)))


def _dissipation(frame: Frame, each: Expansion, d0: Complexes, cover: Floats, box: Box) -> Floats:
    """Bound (N,) of the scaled inverse from damping alone: Im D >= H > 0 gives |u^T D^-1 v| <= sqrt(u H^-1
    u v H^-1 v).
    """
    lean = np.einsum("btv,bv->bt", np.abs(each.slope.imag), box.half) + each.remainder
    size = d0.shape[-1] ** 2
    spread = (lean @ np.concatenate([frame.outer, frame.absolute]).reshape(-1, size)).reshape(d0.shape)
    weight = np.linalg.inv(np.linalg.cholesky(cover))
    values = np.linalg.eigvalsh(weight @ (d0.imag - spread) @ np.swapaxes(weight, 1, 2))
    least = values[:, 0] - 1e-12 * np.abs(values[:, -1])
    return np.where(least > CLEAR, 1.0 / np.maximum(least, 1e-300), np.inf)


def _nu(
    each: Expansion,
    rho: Floats,
    d0: Complexes,
    cover: Floats,
    box: Box,
    trials: tuple[tuple[bool, float], ...],
    wins: Integers,
) -> Floats:
    """Bound (N,) of the scaled inverse over the ball, the least of all trials."""
    n = d0.shape[-1]
    weight = np.linalg.inv(np.linalg.cholesky(cover))
    matrix = weight @ d0 @ np.swapaxes(weight, 1, 2)
    mean = np.angle(np.where(each.centre.imag > 0.0, each.centre, 0.0).sum(axis=1) + 1e-300)
    found = []
    for turned, shift in trials:
        turn = np.exp(-1j * mean) if turned else np.ones(len(d0), dtype=np.complex128)
        lean = (
            np.einsum("btv,bv->bt", np.abs((each.slope * turn[:, None, None]).imag), box.half)
            + each.remainder
        )
        sine = np.minimum((lean / np.maximum(rho, 1e-300)).max(axis=1) * (1.0 + 1e-12), 1.0)
        r = np.sqrt(1.0 + 2.0 * shift * sine + shift**2)
        d = matrix * turn[:, None, None] + 1j * shift * np.eye(n)
        values = np.linalg.eigvalsh(np.swapaxes(d.conj(), 1, 2) @ d)
        # Eigenvalues of the square are off by rounding of the greatest one.
        least = np.sqrt(np.maximum(values[:, 0] - 1e-14 * values[:, -1], 0.0))
        gap = least - r
        found.append(np.where(gap > CLEAR * r, 1.0 / np.maximum(gap, 1e-300), np.inf))
    every = np.stack(found)
    wins += np.bincount(np.argmin(every, axis=0), minlength=len(trials))
    return np.asarray(every.min(axis=0))


@dataclass(frozen=True, eq=False)
class Bounds:
    """Upper bounds (N, R) of all rows, the variables' weights (N, V+1) for cutting, how often each trial won."""

    upper: Floats
    weight: Floats
    wins: Integers


def rows_bound(
    system: ScatterSystem,
    limits: LimitedRows,
    frame: Frame,
    low: Floats,
    high: Floats,
    trials: tuple[tuple[bool, float], ...] = TRIALS,
) -> Bounds:
    """Bound every row over boxes with corners low, high (N, V+1)."""
    # A box without a bound has an infinite remainder; what that makes of products ends as infinity below.
    with np.errstate(invalid="ignore", over="ignore"):
        return _bounds(system, limits, frame, Box(low, high), trials)


def _bounds(
    system: ScatterSystem,
    limits: LimitedRows,
    frame: Frame,
    box: Box,
    trials: tuple[tuple[bool, float], ...],
) -> Bounds:
    wins = np.zeros(len(trials), dtype=np.int64)
    by_order: dict[float, Solved] = {}
    planes: dict[float, list[UpperPlane]] = {}
    shares: list[tuple[Solved, Floats]] = []
    for loads in limits.sets:
        if loads.order not in by_order:
            by_order[loads.order] = solved(system, frame, box, loads.order, trials, wins)
        plane, share = _set_plane(system, limits, frame, loads, by_order[loads.order], box)
        planes.setdefault(loads.order, []).append(plane)
        shares.append((by_order[loads.order], share))
    orders = [add_planes(each) for each in planes.values()]
    upper = _combined(limits, orders, box) * limits.factor * (1.0 + WIDENING)
    upper = np.where(np.isnan(upper), np.inf, upper)
    return Bounds(upper, _weights(limits, shares, upper, box), wins)


def _combined(limits: LimitedRows, orders: list[UpperPlane], box: Box) -> Floats:
    """Greatest values (N, R) of all orders together: summed, or the root of summed squares."""
    total = add_planes(orders).greatest(box)
    if not limits.squares.any():
        return total
    with np.errstate(invalid="ignore"):
        root = upper_length(
            np.stack([plane.centre for plane in orders], axis=2),
            np.stack([plane.slope for plane in orders], axis=2),
            np.stack([plane.remainder for plane in orders], axis=2),
            box,
        ).greatest(box)
    return np.where(limits.squares, np.minimum(np.where(np.isnan(root), np.inf, root), total), total)


def _set_plane(
    system: ScatterSystem, limits: LimitedRows, frame: Frame, loads: LoadSet, state: Solved, box: Box
) -> tuple[UpperPlane, Floats]:
    """Upper plane of the rows' sizes under one coherent set, and the shares (N, R, T) of the terms in the error."""
    count, components, variables = len(box.low), 3 * limits.count, box.low.shape[1]
    total, parts = set_expansion(system, limits, frame, loads, state, box)
    centre = np.zeros((count, components), dtype=np.complex128)
    slopes = np.zeros((count, components, variables), dtype=np.complex128)
    remainder = np.zeros((count, components))
    centre[:, frame.used], slopes[:, frame.used], remainder[:, frame.used] = (
        total.centre,
        total.slope,
        total.remainder,
    )
    share = np.zeros((count, components, parts.shape[2]))
    share[:, frame.used] = parts
    shape = (count, limits.count, 3)
    plane = _size_plane(
        limits, frame, centre.reshape(shape), slopes.reshape(*shape, variables), remainder.reshape(shape), box
    )
    return plane, share.reshape(*shape, -1).sum(axis=2)


def set_expansion(
    system: ScatterSystem, limits: LimitedRows, frame: Frame, loads: LoadSet, state: Solved, box: Box
) -> tuple[Expansion, Floats]:
    """The used components (N, C) of all rows under one coherent set, and the terms' shares (N, C, T) in the error."""
    count, axes, variables = len(box.low), len(system.axes), box.low.shape[1]
    kappa = state.each.centre[:, :axes]
    f0 = loads.loads + (loads.bases * kappa[:, None, :]) @ system.axes
    q = np.swapaxes(np.linalg.solve(state.matrix, np.swapaxes(f0, 1, 2)), 1, 2)
    q_axes = q @ system.axes.T - loads.bases
    q_size = _reach_size(frame, state.rho, q, q_axes)
    c0 = frame.rows + (frame.forces * kappa[:, None, :]) @ system.axes
    zero = c0 @ np.swapaxes(q, 1, 2) - np.einsum(
        "ca,ba,la->bcl", frame.forces, kappa, loads.bases, optimize=True
    )
    zero = zero + loads.direct.reshape(len(loads.powers), -1)[:, frame.used].T
    other = np.einsum("bci,tij,blj->bclt", state.p, frame.terms, q, optimize=True)
    pairs = np.concatenate([state.p_axes[:, :, None, :] * q_axes[:, None, :, :], other], axis=3)
    slope = -(pairs.reshape(count, -1, pairs.shape[3]) @ state.each.slope).reshape(
        *pairs.shape[:3], variables
    )
    second = state.p_size[:, :, None] * q_size[:, None, :]
    with np.errstate(invalid="ignore"):
        rest = (
            np.einsum("bclt,bt->bcl", np.abs(pairs), state.each.remainder) + state.nu[:, None, None] * second
        )
    rate = limits.rate[frame.used // 3]
    total = _scaled_sum(box, loads, rate, zero, slope, np.where(np.isnan(rest), np.inf, rest))
    scale = np.abs(speed_power(box, loads.order, loads.powers).centre)
    share: Floats = np.einsum("bclt,bt,bl->bct", np.abs(pairs), state.rho, scale, optimize=True)
    return total, share


def _scaled_sum(
    box: Box, loads: LoadSet, rate: Floats, zero: Numbers, slope: Numbers, rest: Floats
) -> Expansion:
    """Sum over the powers of omega^(power + rate) times the expansions (N, C, L) of each power's share."""
    total: Expansion | None = None
    for number, power in enumerate(loads.powers):
        scale = speed_power(box, loads.order, power + rate)
        own = Expansion(zero[:, :, number], slope[:, :, number], rest[:, :, number]).times(scale, box)
        total = (
            own
            if total is None
            else Expansion(
                total.centre + own.centre, total.slope + own.slope, total.remainder + own.remainder
            )
        )
    assert total is not None
    return total


def _size_plane(
    limits: LimitedRows, frame: Frame, centre: Numbers, slope: Numbers, remainder: Floats, box: Box
) -> UpperPlane:
    """Upper plane of what vectors of phasors count as: major semi-axis or root of squares."""
    finite = np.isfinite(remainder).all(axis=2)
    remainder = np.where(np.isfinite(remainder), remainder, 0.0)
    length = upper_length(
        np.concatenate([centre.real, centre.imag], axis=2),
        np.concatenate([slope.real, slope.imag], axis=2),
        np.concatenate([remainder, np.zeros_like(remainder)], axis=2),
        box,
    )
    plane = length
    several = np.isin(np.arange(limits.count), frame.used[frame.used % 3 > 0] // 3)
    vector = limits.ellipse & several
    if vector.any():
        major = upper_major_axis(centre[:, vector], slope[:, vector], remainder[:, vector], box)
        plane.centre[:, vector], plane.slope[:, vector] = major.centre, major.slope
        plane.remainder[:, vector] = major.remainder
    return UpperPlane(plane.centre, plane.slope, np.where(finite, plane.remainder, np.inf))


def _weights(limits: LimitedRows, shares: list[tuple[Solved, Floats]], upper: Floats, box: Box) -> Floats:
    """Share of each variable in the error of the row that is worst against its limit (N, V+1); -1 for no width."""
    ratio = np.where(np.isfinite(upper), upper, 1e300) / np.maximum(limits.limit, 1e-300)
    worst = np.argmax(ratio, axis=1)
    index = np.arange(len(worst))
    weight = np.zeros_like(box.low)
    for state, share in shares:
        moved = np.abs(state.each.slope) * box.half[:, None, :]
        part = moved / np.maximum(moved.sum(axis=2), 1e-300)[:, :, None]
        size = np.abs(share[index, worst])
        # Without a bound the terms that keep it from being one count, whatever the row.
        weight += np.einsum("bt,btv->bv", size, part)
    weight += 1e-12 * box.half / np.maximum(np.abs(box.middle), 1e-300)
    return np.where(box.half > 0.0, weight, -1.0)
