"""A machine under scatter as arrays: factors by lot and by part together, mass and centre, and all limited rows.

    D(x, w) = -w^2 (M + sum_k p_k(x) M_k) + K + sum_k p_k(x) G_k + j (H + w C) + sum_a b_a^T kappa_a b_a
    kappa_a = s_a k_a + j t_a (s_a h_a + w c_a),     s_a, t_a, p_k: products of variables

A response row is a vector of three components y = rows q + sum_a force_a kappa_a (b_a q - u_a) + direct, times w^rate;
it counts as the major semi-axis of its ellipse, or as the root of its summed squares (rms). Sets of loads of one
shaft share its speed; those of one order add linearly, different orders linearly or as squares. The last variable
of a box is the square of the speed, (rad/s)^2.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from detune.proof.loewner import Flags
from detune.proof.robust_data import RobustError, VaryingSystem
from detune.proof.selection_data import Complexes, Floats, Integers
from detune.response.solve import solve_or_resonate


@dataclass(frozen=True, eq=False)
class ScatterSystem(VaryingSystem):
    """A linear machine with V uncertain variables, n freedoms and A spring axes.

    The mass is positive definite. stiffness_factors, damping_factors (A, 2): variables whose product is s and t, -1
    for none. mass_terms (P, n, n), mass_factors (P, 3) and stiffness_terms (Q, n, n), stiffness_term_factors (Q, 3):
    symmetric matrices times products of variables.
    low, high (V,): interval of each variable. names: what each is, in words.
    """

    stiffness_factors: Integers
    damping_factors: Integers
    mass_terms: Floats
    mass_factors: Integers
    stiffness_terms: Floats
    stiffness_term_factors: Integers
    low: Floats
    high: Floats
    names: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        n, count = self.mass.shape[0], self.axes.shape[0]
        of_axes, of_terms = (
            ("stiffness_factors", "damping_factors"),
            ("mass_factors", "stiffness_term_factors"),
        )
        shapes: dict[str, tuple[int, ...]] = dict.fromkeys(of_axes, (count, 2))
        for terms, factors in zip(("mass_terms", "stiffness_terms"), of_terms, strict=True):
            number = len(getattr(self, factors))
            shapes |= {terms: (number, n, n), factors: (number, 3)}
        self._check(self.low, self.high, shapes, of_axes, of_terms)

    @property
    def variables(self) -> int:
        """Number V of uncertain variables."""
        return int(self.low.shape[0])


@dataclass(frozen=True, eq=False)
class LoadSet:
    """One coherent set of loads of one order, by powers of omega (of the tone).

    powers (L,); loads (L, n) and base motion of the axes (L, A), both at omega = 1; direct (L, R, 3): what the rows
    contain besides q and forces, at omega = 1.
    """

    order: float
    powers: Floats
    loads: Complexes
    bases: Complexes
    direct: Complexes


@dataclass(frozen=True, eq=False)
class LimitedRows:
    """R rows of one family of loads (one shaft) with upper limits, over a speed interval (Hz).

    rows (R, 3, n), forces (R, 3, A): components, zeros where a row has fewer than three. rate (R,): power of omega.
    ellipse (R,): major semi-axis, else root of the summed squares. factor (R,): multiplies the value (peak to rms,
    greatest forcing). squares (R,): orders combine as squares. limit (R,).
    """

    rows: Floats
    forces: Floats
    rate: Floats
    ellipse: Flags
    factor: Floats
    squares: Flags
    limit: Floats
    sets: tuple[LoadSet, ...]
    speed: tuple[float, float]

    def __post_init__(self) -> None:
        low, high = self.speed
        if not 0.0 < low <= high:
            raise RobustError("the speed interval needs 0 < low <= high")
        if not bool((self.limit >= 0.0).all()):
            raise RobustError("limits must be numbers that are not negative")

    @property
    def count(self) -> int:
        """Number R of rows."""
        return int(self.rows.shape[0])


def first_corners(system: ScatterSystem, limits: LimitedRows) -> tuple[Floats, Floats]:
    """Lower and upper corner (V+1,) of the whole box; the last variable is the squared speed in (rad/s)^2."""
    low, high = limits.speed
    return (
        np.append(system.low, (2.0 * np.pi * low) ** 2),
        np.append(system.high, (2.0 * np.pi * high) ** 2),
    )


def products(points: Floats, factors: Integers) -> Floats:
    """Products (N, K) of the variables named by factors (K, m) at points (N, V+1); -1 counts as 1."""
    padded = np.concatenate([points[:, :-1], np.ones((len(points), 1))], axis=1)
    result: Floats = np.prod(padded[:, factors], axis=2)
    return result


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


def matrices_at(system: ScatterSystem, points: Floats, order: float) -> tuple[Complexes, Complexes]:
    """D (N, n, n) and kappa (N, A) at points (N, V+1) for an order of the speed."""
    squares = order**2 * points[:, -1]
    omega = np.sqrt(squares)
    s, t = products(points, system.stiffness_factors), products(points, system.damping_factors)
    kappa = s * system.stiffness + 1j * t * (s * system.loss + omega[:, None] * system.viscous)
    shape, size = (len(points), *system.mass.shape), system.mass.size
    outer = np.einsum("ai,aj->aij", system.axes, system.axes).reshape(-1, size)
    total = (kappa @ outer).reshape(shape) + system.fixed_dynamic
    total = total + 1j * (system.fixed_hysteretic + omega[:, None, None] * system.fixed_viscous)
    mass = (products(points, system.mass_factors) @ system.mass_terms.reshape(-1, size)).reshape(shape)
    total = total - squares[:, None, None] * (system.mass + mass)
    own = products(points, system.stiffness_term_factors) @ system.stiffness_terms.reshape(-1, size)
    return total + own.reshape(shape), kappa


def vector_size(vectors: Complexes, ellipse: Flags) -> Floats:
    """What vectors (..., R, 3) of phasors count as: major semi-axis where `ellipse` (R,), else root of squares.

    The major semi-axis a of the ellipse Re(y e^(j phi)) has 2 a^2 = |y|^2 + |y . y|.
    """
    squares = np.sum(vectors.real**2 + vectors.imag**2, axis=-1)
    dot = np.abs(np.sum(vectors * vectors, axis=-1))
    size: Floats = np.sqrt(np.where(ellipse, 0.5 * (squares + dot), squares))
    return size


def combine_sets(limits: LimitedRows, sizes: list[Floats]) -> Floats:
    """Values (N, R) of all sets together: one order linearly, different orders linearly or as squares."""
    by_order: dict[float, Floats] = {}
    for loads, size in zip(limits.sets, sizes, strict=True):
        earlier = by_order.get(loads.order)
        by_order[loads.order] = size if earlier is None else earlier + size
    every = np.stack(list(by_order.values()))
    total: Floats = np.where(limits.squares, np.sqrt((every**2).sum(axis=0)), every.sum(axis=0))
    return total * limits.factor


def _solved(system: ScatterSystem, points: Floats, matrices: Complexes, right: Complexes) -> Complexes:
    """q (N, n) of matrices q = right; a machine without damping exactly at a resonance is far beyond any
    limit there.
    """
    try:
        return np.asarray(np.linalg.solve(matrices, right[:, :, None])[:, :, 0])
    except np.linalg.LinAlgError:
        at_rest = np.concatenate([points[:, :-1], np.zeros((len(points), 1))], axis=1)
        return solve_or_resonate(matrices, matrices_at(system, at_rest, 1.0)[0], right)


def values_at(system: ScatterSystem, limits: LimitedRows, points: Floats) -> Floats:
    """Values (N, R) of all rows at points (N, V+1), by direct solves."""
    sizes = []
    factored: dict[float, tuple[Complexes, Complexes]] = {}
    for loads in limits.sets:
        if loads.order not in factored:
            factored[loads.order] = matrices_at(system, points, loads.order)
        matrices, kappa = factored[loads.order]
        omega = loads.order * np.sqrt(points[:, -1])
        scale = omega[:, None] ** loads.powers
        base = scale @ loads.bases
        right = scale @ loads.loads + (kappa * base) @ system.axes
        q = _solved(system, points, matrices, right)
        force = kappa * (q @ system.axes.T - base)
        n, axes = len(system.mass), len(system.axes)
        y = q @ limits.rows.reshape(-1, n).T + force @ limits.forces.reshape(-1, axes).T
        y = y.reshape(len(points), limits.count, 3) + np.einsum("bl,lrc->brc", scale, loads.direct)
        sizes.append(vector_size(y, limits.ellipse) * omega[:, None] ** limits.rate)
    return combine_sets(limits, sizes)
