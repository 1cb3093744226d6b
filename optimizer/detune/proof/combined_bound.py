"""Matrix-ball bound of all limited rows of one family at once, over boxes of scatter and speed.

The bound is that of `ball.py` (ALGORITHMS: matrix ball with the loss-angle shift), in the form
    Y0 = G^-1 D^H,  |c^T (D^-1 - Y0) f| <= sqrt(c^T G^-1 c*) sqrt(f^H H^-1 f),   G = D^H D - I,  H = D D^H - I,
for D scaled by the cover of everything that varies. One matrix and its two inverses serve all rows and loads.
The size of a vector of phasors (ellipse or root of squares) is a norm, so that it is at most the size of the centres
plus the root of the summed squared radii.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from detune.proof.scatter_data import LimitedRows, LoadSet, ScatterSystem, combine_sets, vector_size
from detune.proof.selection_data import Complexes, Floats, Integers

WIDENING = 1.0e-6
"""Relative widening for rounding: see LOST."""
LOST = 1.0e-9
"""Least distance from singular, over the greatest eigenvalue, so that inverses keep six digits."""
TRIALS: tuple[tuple[bool, float], ...] = tuple(
    (turned, shift) for turned in (False, True) for shift in (0.0, 0.3, 1.0, 3.0, 10.0)
)
"""Whether to rotate by the mean loss angle, and the shift g; every one gives a correct bound, the best is kept."""


@dataclass(frozen=True, eq=False)
class Frame:
    """What does not change from box to box: matrices of the varying scalars, their absolute values, axis rows."""

    terms: Floats
    absolute: Floats
    forced: Integers


def frame_of(system: ScatterSystem, limits: LimitedRows) -> Frame:
    """Terms in the order axes, mass terms, stiffness terms, mass, fixed viscous."""
    outer = np.einsum("ai,aj->aij", system.axes, system.axes)
    plain = np.stack([system.mass, system.fixed_viscous])
    terms = np.concatenate([outer, system.mass_terms, system.stiffness_terms, plain])
    values, vectors = np.linalg.eigh(terms)
    absolute = np.einsum("tik,tk,tjk->tij", vectors, np.abs(values), vectors)
    return Frame(terms, absolute, np.flatnonzero((limits.forces != 0.0).any(axis=(0, 1))))


@dataclass(frozen=True, eq=False)
class Discs:
    """Centres (N, T) of all varying scalars, the deviations of their corners (N, T, 8), and greatest ones (N, T)."""

    centre: Complexes
    deviation: Complexes
    rho: Floats


def product_interval(low: Floats, high: Floats, factors: Integers) -> tuple[Floats, Floats]:
    """Least and greatest product (N, K) of independent variables in boxes low, high (N, V+1); factors (K, m)."""
    ones = np.ones((len(low), 1))
    below, above = (np.concatenate([edge[:, :-1], ones], axis=1) for edge in (low, high))
    least, most = np.ones((len(low), len(factors))), np.ones((len(low), len(factors)))
    for column in range(factors.shape[1]):
        a, b = below[:, factors[:, column]], above[:, factors[:, column]]
        corners = np.stack([least * a, least * b, most * a, most * b])
        least, most = corners.min(axis=0), corners.max(axis=0)
    return least, most


def discs(system: ScatterSystem, low: Floats, high: Floats, order: float) -> Discs:
    """Cover the scalars of D over boxes (N, V+1): kappa of each axis by its eight corners, the others by intervals."""
    count, axes = len(low), len(system.axes)
    squares = order**2 * low[:, -1], order**2 * high[:, -1]
    omegas = np.sqrt(squares[0]), np.sqrt(squares[1])
    s_edges = product_interval(low, high, system.stiffness_factors)
    t_edges = product_interval(low, high, system.damping_factors)
    kappa = np.stack(
        [
            s * system.stiffness + 1j * t * (s * system.loss + omega[:, None] * system.viscous)
            for s in s_edges
            for t in t_edges
            for omega in omegas
        ],
        axis=2,
    )
    least, most = product_interval(low, high, system.mass_factors)
    each = np.stack([-square[:, None] * edge for square in squares for edge in (least, most)])
    own_least, own_most = product_interval(low, high, system.stiffness_term_factors)
    below = np.concatenate([each.min(axis=0), own_least, -squares[1][:, None], omegas[0][:, None]], axis=1)
    above = np.concatenate([each.max(axis=0), own_most, -squares[0][:, None], omegas[1][:, None]], axis=1)
    corners = np.empty((count, axes + below.shape[1], 8), dtype=np.complex128)
    corners[:, :axes] = kappa
    corners[:, axes:, :4], corners[:, axes:, 4:] = below[:, :, None], above[:, :, None]
    corners[:, -1] *= 1j
    real, imag = corners.real, corners.imag
    centre = 0.5 * (real.max(axis=2) + real.min(axis=2)) + 0.5j * (imag.max(axis=2) + imag.min(axis=2))
    deviation = corners - centre[:, :, None]
    return Discs(centre, deviation, np.abs(deviation).max(axis=2) * (1.0 + 1e-12))


@dataclass(frozen=True, eq=False)
class Scaled:
    """D at the centre of every box, scaled by the cover: D~ = W D W^T."""

    plain: Complexes
    matrix: Complexes
    weight: Floats
    discs: Discs


def scaled_matrices(system: ScatterSystem, frame: Frame, high: Floats, found: Discs) -> Scaled:
    """Assemble D0 and its cover R = L L^T, W = L^-1."""
    size, shape = system.mass.size, (len(high), *system.mass.shape)
    flat = frame.terms.reshape(-1, size)
    d0 = (found.centre @ flat).reshape(shape) + system.fixed_dynamic + 1j * system.fixed_hysteretic
    cover = (found.rho @ frame.absolute.reshape(-1, size)).reshape(shape)
    # A little of the mass matrix keeps R invertible; a larger R is still a cover.
    trace = np.einsum("bii->b", cover) / np.trace(system.mass)
    floor = 1e-4 * np.maximum(trace, 1e-6 * high[:, -1])
    cover = cover + floor[:, None, None] * system.mass
    weight = np.linalg.inv(np.linalg.cholesky(cover))
    return Scaled(d0, weight @ d0 @ np.swapaxes(weight, 1, 2), weight, found)


@dataclass(frozen=True, eq=False)
class Bounds:
    """Upper bounds (N, R) of all rows, the variable's weights (N, V+1) for cutting, and how often each trial won."""

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
    sizes: list[Floats] = []
    parts: list[tuple[Scaled, LoadSet]] = []
    by_order: dict[float, Scaled] = {}
    wins = np.zeros(len(trials), dtype=np.int64)
    for loads in limits.sets:
        if loads.order not in by_order:
            by_order[loads.order] = scaled_matrices(system, frame, high, discs(system, low, high, loads.order))
        scaled = by_order[loads.order]
        tried = _set_sizes(system, limits, frame, loads, scaled, low, high, trials)
        share = tried / np.maximum(limits.limit, 1e-300)
        wins += np.bincount(np.argmin(share.max(axis=2), axis=0), minlength=len(trials))
        sizes.append(tried.min(axis=0))
        parts.append((scaled, loads))
    upper = combine_sets(limits, sizes) * (1.0 + WIDENING)
    upper = np.where(np.isnan(upper), np.inf, upper)
    return Bounds(upper, _weights(system, limits, frame, parts, upper, low, high), wins)


def _set_sizes(
    system: ScatterSystem,
    limits: LimitedRows,
    frame: Frame,
    loads: LoadSet,
    scaled: Scaled,
    low: Floats,
    high: Floats,
    trials: tuple[tuple[bool, float], ...],
) -> Floats:
    """Upper bounds (trials, N, R) of the rows' sizes under one coherent set, w^rate included, factors not."""
    count, n, axes = len(low), len(system.mass), len(system.axes)
    kappa, rho = scaled.discs.centre[:, :axes], scaled.discs.rho[:, :axes]
    forces = limits.forces.reshape(-1, axes)
    moving = np.flatnonzero((loads.bases != 0.0).any(axis=0))
    turned_axes = system.axes @ np.swapaxes(scaled.weight, 1, 2)
    left = (limits.rows.reshape(-1, n) + np.einsum("ca,ba,ai->bci", forces, kappa, system.axes, optimize=True)) @ (
        np.swapaxes(scaled.weight, 1, 2)
    )
    left = np.concatenate([left, turned_axes[:, frame.forced]], axis=1)
    right = loads.loads + np.einsum("la,ba,ai->bli", loads.bases, kappa, system.axes, optimize=True)
    right = np.concatenate([right @ np.swapaxes(scaled.weight, 1, 2), turned_axes[:, moving]], axis=1)
    shift_out = loads.direct.reshape(len(loads.powers), -1) - np.einsum(
        "ca,ba,la->blc", forces, kappa, loads.bases, optimize=True
    )
    mean = np.angle(kappa.sum(axis=1)) if axes else np.zeros(count)
    found = []
    for turned, shift in trials:
        phi = mean if turned else np.zeros(count)
        middle, radius = _ball(scaled, left, np.swapaxes(right, 1, 2), phi, shift)
        found.append(
            _sizes(limits, frame, loads, middle, radius, rho, shift_out, moving, low, high)
        )
    return np.stack(found)


def _ball(
    scaled: Scaled, left: Complexes, right: Complexes, phi: Floats, shift: float
) -> tuple[Complexes, Floats]:
    """Centre and radius (N, C, F) of left D^-1 right over the ball, inf where it is not bounded."""
    n = scaled.matrix.shape[-1]
    turn = np.exp(-1j * phi)
    rho = np.maximum(scaled.discs.rho, 1e-300)
    lean = np.abs((scaled.discs.deviation * turn[:, None, None]).imag).max(axis=2) / rho
    sine = np.minimum(lean.max(axis=1) * (1.0 + 1e-12), 1.0)
    r = np.sqrt(1.0 + 2.0 * shift * sine + shift**2)
    d = (scaled.matrix * turn[:, None, None] + 1j * shift * np.eye(n)) / r[:, None, None]
    adjoint = np.swapaxes(d.conj(), 1, 2)
    gram = adjoint @ d
    values = np.linalg.eigvalsh(gram)
    bounded = values[:, 0] - 1.0 > LOST * values[:, -1]
    # Where unbounded, any invertible stand-in serves: its result is replaced by infinity.
    lift = np.where(bounded, -1.0, 1.0)[:, None, None] * np.eye(n)
    g, h = np.linalg.inv(gram + lift), np.linalg.inv(d @ adjoint + lift)
    towards = left.conj()
    g_left = towards @ np.swapaxes(g, 1, 2)
    row = np.sqrt(np.maximum(np.einsum("bci,bci->bc", left, g_left, optimize=True).real, 0.0))
    column = np.sqrt(np.maximum(np.einsum("bif,bif->bf", right.conj(), h @ right, optimize=True).real, 0.0))
    middle = (left @ (g @ (adjoint @ right))) * (turn / r)[:, None, None]
    radius = row[:, :, None] * column[:, None, :] / r[:, None, None]
    return middle, np.where(bounded[:, None, None], radius, np.inf)


def _sizes(
    limits: LimitedRows,
    frame: Frame,
    loads: LoadSet,
    middle: Complexes,
    radius: Floats,
    rho: Floats,
    shift_out: Complexes,
    moving: Integers,
    low: Floats,
    high: Floats,
) -> Floats:
    """Sizes (N, R) from the balls of all components and forced axes under all loads and moved axes."""
    count, powers, components = len(low), len(loads.powers), 3 * limits.count
    sway = rho[:, None, moving] * np.abs(loads.bases[:, moving])
    more = np.einsum("bcf,blf->bcl", np.abs(middle[:, :, powers:]) + radius[:, :, powers:], sway)
    centre = middle[:, :components, :powers] + np.swapaxes(shift_out, 1, 2)
    spread = radius[:, :components, :powers] + more[:, :components]
    if len(frame.forced):
        bases = loads.bases[:, frame.forced].T
        own = np.abs(middle[:, components:, :powers] - bases) + radius[:, components:, :powers]
        own = (own + more[:, components:]) * rho[:, frame.forced, None]
        spread = spread + np.abs(limits.forces.reshape(components, -1)[:, frame.forced]) @ own
    exponent = loads.powers[:, None] + limits.rate
    edges = [(loads.order * np.sqrt(edge[:, -1]))[:, None, None] ** exponent for edge in (low, high)]
    least, most = np.minimum(*edges), np.maximum(*edges)
    shape = (count, limits.count, 3, powers)
    centre, spread = centre.reshape(shape), spread.reshape(shape)
    scale, half = (np.swapaxes(v, 1, 2)[:, :, None, :] for v in (0.5 * (most + least), 0.5 * (most - least)))
    total = (centre * scale).sum(axis=3)
    around = (spread * (scale + half) + np.abs(centre) * half).sum(axis=3)
    if powers == 1:
        # One power scales the whole vector: its greatest value counts, direction kept.
        total, around = centre[..., 0] * (scale + half)[..., 0], spread[..., 0] * (scale + half)[..., 0]
    size: Floats = vector_size(total, limits.ellipse) + np.sqrt((around**2).sum(axis=2))
    return size


def _weights(
    system: ScatterSystem,
    limits: LimitedRows,
    frame: Frame,
    parts: list[tuple[Scaled, LoadSet]],
    upper: Floats,
    low: Floats,
    high: Floats,
) -> Floats:
    """First-order share of each variable in the row that is worst against its limit: sum of rho |p^T P q|."""
    count, n, axes = len(low), len(system.mass), len(system.axes)
    worst = np.argmax(np.where(np.isfinite(upper), upper, 1e300) / np.maximum(limits.limit, 1e-300), axis=1)
    share = np.zeros((count, frame.terms.shape[0]))
    for scaled, loads in parts:
        kappa = scaled.discs.centre[:, :axes]
        omega = loads.order * np.sqrt(0.5 * (low[:, -1] + high[:, -1]))
        scale = omega[:, None] ** loads.powers
        load = scale @ loads.loads + ((scale @ loads.bases) * kappa) @ system.axes
        rows = limits.rows[worst] + np.einsum("bca,ba,ai->bci", limits.forces[worst], kappa, system.axes, optimize=True)
        q = np.linalg.solve(scaled.plain, load[:, :, None])[:, :, 0]
        p = np.linalg.solve(np.swapaxes(scaled.plain, 1, 2), np.swapaxes(rows, 1, 2).astype(complex))
        q_part = np.einsum("bi,tij,bj->bt", q.conj(), frame.absolute, q, optimize=True).real
        p_part = np.einsum("bic,tij,bjc->bt", p.conj(), frame.absolute, p, optimize=True).real
        own = scaled.discs.rho * np.sqrt(np.maximum(q_part, 0.0) * np.maximum(p_part, 0.0))
        share += own * (omega ** limits.rate[worst])[:, None]
    return _spread_out(system, share, low, high)


def _spread_out(system: ScatterSystem, share: Floats, low: Floats, high: Floats) -> Floats:
    """Distribute the shares (N, T) of all terms over their variables by relative width (N, V+1)."""
    axes, masses, own = len(system.axes), len(system.mass_terms), len(system.stiffness_terms)
    last = low.shape[1] - 1
    width = high - low
    relative = width / np.maximum(np.maximum(np.abs(high), np.abs(low)), 1e-300)
    weight = np.zeros_like(low)
    for t in range(share.shape[1]):
        names = {last}
        if t < axes:
            names = set(system.stiffness_factors[t].tolist()) | set(system.damping_factors[t].tolist())
            names |= {last} if system.viscous[t] > 0.0 else set()
        elif t < axes + masses:
            names |= set(system.mass_factors[t - axes].tolist())
        elif t < axes + masses + own:
            names = set(system.stiffness_term_factors[t - axes - masses].tolist())
        names -= {-1}
        if not names:
            continue
        total = np.maximum(sum((relative[:, v] for v in names), np.zeros(len(low))), 1e-300)
        for v in names:
            weight[:, v] += share[:, t] * relative[:, v] / total
    weight += 1e-12 * relative
    return np.where(width > 0.0, weight, -1.0)
