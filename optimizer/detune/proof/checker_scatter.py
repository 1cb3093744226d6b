"""The checker's own bound of response rows under scatter, with all rounding accounted for.

For any vectors p and q (approximate solutions serve), c^T D^-1 f = p^T f + c^T q - p^T D q + (c - D p)^T
D^-1 (f - D q).
The first part is enclosed to first order (`checker_lines.py`), the last by norms scaled with W, ||W R W^T|| <= gamma,
and nu >= ||(W D W^T)^-1|| from a verified least singular value, or from damping alone.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from detune.proof.checker_arithmetic import (
    OUTWARD,
    UNIT,
    Matrix,
    exact,
    fractions,
    frobenius,
    off_identity,
    positive_pivots,
    product,
    total,
)
from detune.proof.checker_boxes import array, cover
from detune.proof.checker_lines import (
    Line,
    joined,
    length_plane,
    major_axis_bound,
    plus,
    scaled,
    speed_power,
    times,
    variable_product,
)

SHIFTS = (0.0, 0.3, 1.0, 3.0, 10.0, 30.0)
FACTORS = ("stiffness_factors", "damping_factors", "mass_factors", "stiffness_term_factors")


def read_scatter(data: dict[str, Any]) -> dict[str, Matrix]:
    """Arrays of a recorded system; raises ValueError for unusable data."""
    system = {name: array(values) for name, values in data.items() if name != "names"}
    n = system["mass"].shape[0]
    system["axes"] = system["axes"].reshape(-1, n)
    variables = len(system["low"])
    for name in ("mass_terms", "stiffness_terms"):
        system[name] = system[name].reshape(-1, n, n)
    for name, width in zip(FACTORS, (2, 2, 3, 3), strict=True):
        system[name] = system[name].reshape(-1, width).astype(np.int64)
        if system[name].size and not ((system[name] >= -1) & (system[name] < variables)).all():
            raise ValueError(f"{name} names a variable that does not exist")
    for name in ("stiffness", "loss", "viscous"):
        if not (system[name] >= 0.0).all():
            raise ValueError(f"{name} is negative")
    for name in ("mass", "fixed_dynamic", "fixed_hysteretic", "fixed_viscous"):
        if not (system[name] == system[name].T).all():
            raise ValueError(f"{name} is not symmetric")
    terms = [*system["mass_terms"], *system["stiffness_terms"], system["mass"], system["fixed_viscous"]]
    if any(not (term == term.T).all() for term in terms):
        raise ValueError("a term is not symmetric")
    if positive_pivots(fractions(system["mass"].tolist()))[2] != n:
        raise ValueError("mass is not positive definite")
    if not (system["high"] >= system["low"]).all():
        raise ValueError("an interval is crossed")
    system["terms"] = np.stack(terms)
    system["covers"] = np.stack([cover(term) for term in terms])
    return system


def read_rows(data: dict[str, Any]) -> dict[str, Any]:
    """Arrays of recorded rows."""
    rows = {name: array(data[name]) for name in ("rows", "forces", "rate", "factor", "limit")}
    rows["ellipse"] = np.array(data["ellipse"], dtype=bool)
    rows["squares"] = np.array(data["squares"], dtype=bool)
    if not (rows["factor"] >= 0.0).all():
        raise ValueError("a factor is negative")
    rows["sets"] = [read_set(each) for each in data["sets"]]
    return rows


def read_set(each: dict[str, Any]) -> dict[str, Any]:
    """Arrays of one recorded coherent set."""
    return {
        "order": float(each["order"]),
        "powers": array(each["powers"]),
        "loads": array(each["loads"]),
        "bases": array(each["bases"]),
        "direct": array(each["direct"]),
    }


def scalar_lines(system: dict[str, Matrix], low: Matrix, high: Matrix, order: float) -> tuple[Line, Line]:
    """kappa of all axes, and the scalars of `terms`, as lines."""
    s = variable_product(low, high, system["stiffness_factors"])
    t = variable_product(low, high, system["damping_factors"])
    omega = speed_power(low, high, order, np.ones(1))
    square = scaled(speed_power(low, high, order, 2.0 * np.ones(1)), -np.ones(1))
    kappa = plus(
        scaled(s, system["stiffness"] + 0j),
        scaled(times(t, s), 1j * system["loss"]),
        scaled(times(t, _spread(omega, t.centre.shape[1])), 1j * system["viscous"]),
    )
    masses = variable_product(low, high, system["mass_factors"])
    masses = times(masses, _spread(square, masses.centre.shape[1]))
    own = variable_product(low, high, system["stiffness_term_factors"])
    return kappa, joined(masses, own, square, scaled(omega, np.array([1j])))


def _spread(line: Line, count: int) -> Line:
    """One quantity repeated."""
    return Line(
        np.repeat(line.centre, count, axis=1),
        np.repeat(line.parts, count, axis=1),
        np.repeat(line.rest, count, axis=1),
    )


class Machine:
    """The machine at one order over boxes: scalars, D at the centre, W and nu."""

    def __init__(self, system: dict[str, Matrix], low: Matrix, high: Matrix, order: float) -> None:
        self.system, self.low, self.high = system, low, high
        self.kappa, self.other = scalar_lines(system, low, high, order)
        self.rho = (self.kappa.reach() + self.kappa.rest) * OUTWARD
        self.other_rho = (self.other.reach() + self.other.rest) * OUTWARD
        n = len(system["mass"])
        outer = np.einsum("ai,aj->aij", system["axes"], system["axes"]).reshape(-1, n * n)
        terms, covers = system["terms"].reshape(-1, n * n), system["covers"].reshape(-1, n * n)
        shape = (len(low), n, n)
        fixed = system["fixed_dynamic"] + 1j * system["fixed_hysteretic"]
        d0 = (self.kappa.centre @ outer + self.other.centre @ terms).reshape(shape) + fixed
        size = (
            np.abs(self.kappa.centre) @ np.abs(outer) + np.abs(self.other.centre) @ np.abs(terms)
        ).reshape(shape)
        self.d0 = (d0, 1e-14 * (size + np.abs(fixed)))
        spread = (self.rho @ outer + self.other_rho @ covers).reshape(shape)
        rounding = 1e-14 * (self.rho @ np.abs(outer) + self.other_rho @ np.abs(covers)).reshape(shape)
        pad = 1e-5 * np.maximum(np.einsum("bii->b", spread) / np.trace(system["mass"]), 1e-6 * high[:, -1])
        padded = spread + pad[:, None, None] * system["mass"]
        weight = np.linalg.inv(np.linalg.cholesky(padded))
        self.w, self.wt = exact(weight), exact(np.swapaxes(weight, 1, 2))
        rounding = rounding + 1e-15 * np.abs(padded)
        gram = product(product(self.w, (padded, rounding)), self.wt)
        off = frobenius(total(gram, exact(-np.broadcast_to(np.eye(n), shape))))
        self.gamma = (1.0 + off) * OUTWARD
        self.nu = np.minimum(self._by_shift(), self._by_damping(outer, covers, shape))

    def _by_shift(self) -> Matrix:
        n = self.d0[0].shape[-1]
        matrix = product(product(self.w, self.d0), self.wt)
        every = joined(self.kappa, self.other)
        rho = np.concatenate([self.rho, self.other_rho], axis=1)
        mean = np.where(every.centre.imag > 0.0, every.centre, 0.0).sum(axis=1).conj() + 1e-300
        best = np.full(len(self.low), np.inf)
        for turn in (np.ones(len(self.low), dtype=complex), mean / np.abs(mean)):
            lean = np.abs((every.parts * turn[:, None, None]).imag).sum(axis=2) + every.rest + SLACK * rho
            sine = np.minimum((lean / np.maximum(rho, 1e-300)).max(axis=1) * OUTWARD, 1.0)
            for shift in SHIFTS:
                radius = np.sqrt(self.gamma**2 + 2.0 * shift * sine * self.gamma + shift**2) * OUTWARD
                tilted = (matrix[0] * turn[:, None, None] + 1j * shift * np.eye(n), matrix[1] * OUTWARD)
                tilted = (tilted[0], tilted[1] + 1e-15 * np.abs(tilted[0]))
                gap = least_singular(tilted) - radius
                # The turn is a unit number but for rounding.
                best = np.minimum(best, np.where(gap > 0.0, (1.0 + 1e-12) / np.maximum(gap, 1e-300), np.inf))
        return best

    def _by_damping(self, outer: Matrix, covers: Matrix, shape: tuple[int, ...]) -> Matrix:
        lean = np.abs(self.kappa.parts.imag).sum(axis=2) + self.kappa.rest
        other = np.abs(self.other.parts.imag).sum(axis=2) + self.other.rest
        spread = ((lean @ outer + other @ covers) * OUTWARD).reshape(shape)
        rounding = 1e-14 * (lean @ np.abs(outer) + other @ np.abs(covers)).reshape(shape)
        damped = (self.d0[0].imag - spread, self.d0[1] + rounding + 1e-15 * np.abs(spread))
        matrix = product(product(self.w, damped), self.wt)
        least = least_eigenvalue(matrix)
        return np.where(least > 0.0, (1.0 + 1e-12) / np.maximum(least, 1e-300), np.inf)


SLACK = 64.0 * UNIT


def least_singular(matrix: tuple[Matrix, Matrix]) -> Matrix:
    """Lower bound (N,) of the least singular value of enclosed matrices, from a verified decomposition."""
    u, sigma, vh = np.linalg.svd(matrix[0])
    v = np.swapaxes(vh.conj(), 1, 2)
    slack = off_identity(u) + off_identity(v)
    rebuilt = product(product(exact(u), exact(sigma[:, :, None] * np.eye(sigma.shape[1]))), exact(vh))
    rest = frobenius(total(matrix, (-rebuilt[0], rebuilt[1])))
    return sigma[:, -1] * (1.0 - 2.0 * slack) - rest * OUTWARD


def least_eigenvalue(matrix: tuple[Matrix, Matrix]) -> Matrix:
    """Lower bound (N,) of the least eigenvalue of enclosed symmetric matrices, from a verified decomposition."""
    even = 0.5 * (matrix[0] + np.swapaxes(matrix[0], 1, 2))
    radius = matrix[1] + np.abs(matrix[0] - even) + 1e-15 * np.abs(even)
    values, vectors = np.linalg.eigh(even)
    slack = off_identity(vectors)
    diagonal = exact(values[:, :, None] * np.eye(values.shape[1]))
    rebuilt = product(product(exact(vectors), diagonal), exact(np.swapaxes(vectors, 1, 2)))
    rest = frobenius(total((even, radius), (-rebuilt[0], rebuilt[1])))
    return values[:, 0] - 2.0 * slack * np.abs(values).max(axis=1) - rest * OUTWARD


def row_bounds(system: dict[str, Matrix], rows: dict[str, Any], low: Matrix, high: Matrix) -> Matrix:
    """Rigorous upper bounds (N, R) of all rows over boxes low, high (N, V+1)."""
    with np.errstate(invalid="ignore", over="ignore"):
        return _row_bounds(system, rows, low, high)


def _row_bounds(system: dict[str, Matrix], rows: dict[str, Any], low: Matrix, high: Matrix) -> Matrix:
    machines: dict[float, Machine] = {}
    planes: dict[float, list[Line]] = {}
    for each in rows["sets"]:
        order = each["order"]
        if order not in machines:
            machines[order] = Machine(system, low, high, order)
        planes.setdefault(order, []).append(set_plane(rows, each, machines[order]))
    orders = [plus(*each) for each in planes.values()]
    with np.errstate(invalid="ignore"):
        bound = plus(*orders).size()
        root = length_plane(
            np.stack([plane.centre for plane in orders], axis=2),
            np.stack([plane.parts for plane in orders], axis=2),
            np.stack([plane.rest for plane in orders], axis=2),
        ).size()
    root = np.where(np.isnan(root), np.inf, root)
    bound = np.where(rows["squares"], np.minimum(root, bound), bound)
    bound = bound * rows["factor"] * (1.0 + 1e-12)
    return np.where(np.isnan(bound), np.inf, bound)


def set_plane(rows: dict[str, Any], each: dict[str, Any], machine: Machine) -> Line:
    """Upper plane (N, R) of the sizes of all rows under one coherent set."""
    out, count, number = set_lines(rows, each, machine), len(machine.low), len(rows["rate"])
    shape = (count, number, 3)
    centre, parts = out.centre.reshape(shape), out.parts.reshape(*shape, -1)
    rest = out.rest.reshape(shape)
    bounded = np.isfinite(rest).all(axis=2)
    rest = np.where(np.isfinite(rest), rest, 0.0)
    zeros = np.zeros_like(rest)
    plain = length_plane(
        np.concatenate([centre.real, centre.imag], axis=2),
        np.concatenate([parts.real, parts.imag], axis=2),
        np.concatenate([rest, zeros], axis=2),
    )
    major = major_axis_bound(centre, parts, rest)
    use = rows["ellipse"]
    return Line(
        np.where(use, major.centre, plain.centre),
        np.where(use[:, None], major.parts, plain.parts),
        np.where(bounded, np.where(use, major.rest, plain.rest), np.inf),
    )


def set_lines(rows: dict[str, Any], each: dict[str, Any], machine: Machine) -> Line:
    """The components (N, 3 R) of all rows under one coherent set, times omega^rate."""
    system = machine.system
    n, number = len(system["mass"]), len(rows["rate"])
    row, force = rows["rows"].reshape(3 * number, n), rows["forces"].reshape(3 * number, -1)
    axes, kappa = system["axes"], machine.kappa.centre
    c0 = row + (force * kappa[:, None, :]) @ axes
    p = np.swapaxes(np.linalg.solve(np.swapaxes(machine.d0[0], 1, 2), np.swapaxes(c0, 1, 2)), 1, 2)
    p_size, p_axes = deviation(machine, p, row, force)
    out: Line | None = None
    for index, power in enumerate(each["powers"]):
        load, base = each["loads"][index], each["bases"][index]
        f0 = load + (base * kappa) @ axes
        q = np.linalg.solve(machine.d0[0], f0[:, :, None])[:, :, 0]
        q_size, q_axes = deviation(machine, q[:, None, :], load[None], base[None])
        line = main_part(machine, row, load, p, q, p_axes, q_axes[:, 0], each["direct"][index].reshape(-1))
        with np.errstate(invalid="ignore"):
            rest = line.rest + machine.nu[:, None] * p_size * q_size * OUTWARD
        line = Line(line.centre, line.parts, np.where(np.isnan(rest), np.inf, rest))
        scale = speed_power(machine.low, machine.high, each["order"], power + np.repeat(rows["rate"], 3))
        with np.errstate(invalid="ignore"):
            line = times(line, scale)
        out = line if out is None else plus(out, line)
    assert out is not None
    return out


def deviation(machine: Machine, x: Matrix, given: Matrix, moved: Matrix) -> tuple[Matrix, Matrix]:
    """||W (given + sum kappa moved b - D x)|| over the box (N, C), and the deflections b x - moved (N, C, A)."""
    system, axes = machine.system, machine.system["axes"]
    bent = x @ axes.T - moved
    fuzz = 1e-14 * (np.abs(x) @ np.abs(axes).T + np.abs(moved))
    size = np.abs(bent) + fuzz
    fixed = system["fixed_dynamic"] + 1j * system["fixed_hysteretic"]
    centre = given - x @ fixed - (bent * machine.kappa.centre[:, None, :]) @ axes
    rough = np.abs(given) + np.abs(x) @ np.abs(fixed)
    rough = rough + (
        size * np.abs(machine.kappa.centre)[:, None, :]
        + 1e3 * fuzz * np.abs(machine.kappa.centre)[:, None, :]
    ) @ np.abs(axes)
    varied = np.einsum("ba,bca->bc", machine.rho, size**2)
    for t, (term, own) in enumerate(zip(system["terms"], system["covers"], strict=True)):
        centre = centre - machine.other.centre[:, t, None, None] * (x @ term)
        rough = rough + np.abs(machine.other.centre[:, t, None, None]) * (np.abs(x) @ np.abs(term))
        quadratic = ((x.conj() @ own) * x).real.sum(axis=2)
        slack = 1e-13 * ((np.abs(x) @ np.abs(own)) * np.abs(x)).sum(axis=2)
        varied = varied + machine.other_rho[:, t, None] * (np.maximum(quadratic, 0.0) + slack)
    left = np.sqrt(((np.abs(centre) + 1e-13 * rough) ** 2).sum(axis=2)) * frobenius(machine.w)[:, None]
    return (left + np.sqrt(varied * machine.gamma[:, None])) * OUTWARD, bent


def main_part(
    machine: Machine,
    row: Matrix,
    load: Matrix,
    p: Matrix,
    q: Matrix,
    p_axes: Matrix,
    q_axes: Matrix,
    direct: Matrix,
) -> Line:
    """p^T f + c^T q - p^T D q - sum force kappa base + direct, as lines (N, C) with all rounding in the rest."""
    system = machine.system
    fixed = system["fixed_dynamic"] + 1j * system["fixed_hysteretic"]
    base = p @ load + q @ row.T - ((p @ fixed) * q[:, None, :]).sum(axis=2) + direct
    rough = np.abs(p) @ np.abs(load) + np.abs(q) @ np.abs(row).T + np.abs(direct)
    rough = rough + ((np.abs(p) @ np.abs(fixed)) * np.abs(q)[:, None, :]).sum(axis=2)
    pairs = p_axes * q_axes[:, None, :]
    reach = np.abs(p) @ np.abs(system["axes"]).T + np.abs(p_axes)
    other_reach = np.abs(q) @ np.abs(system["axes"]).T + np.abs(q_axes)
    pairs_rough = reach * other_reach[:, None, :]
    others, others_rough = [], []
    for term in system["terms"]:
        others.append(((p @ term) * q[:, None, :]).sum(axis=2))
        others_rough.append(((np.abs(p) @ np.abs(term)) * np.abs(q)[:, None, :]).sum(axis=2))
    weights = np.concatenate([pairs, np.stack(others, axis=2)], axis=2)
    weight_size = np.abs(weights) + 1e-13 * np.concatenate(
        [pairs_rough, np.stack(others_rough, axis=2)], axis=2
    )
    every = joined(machine.kappa, machine.other)
    sizes = every.size()
    centre = base - (weights * every.centre[:, None, :]).sum(axis=2)
    parts = -weights @ every.parts
    rest = (weight_size * every.rest[:, None, :]).sum(axis=2)
    fuzz = 1e-13 * np.concatenate([pairs_rough, np.stack(others_rough, axis=2)], axis=2)
    rest = (
        rest
        + (fuzz * sizes[:, None, :]).sum(axis=2)
        + 1e-13 * (rough + (weight_size * sizes[:, None, :]).sum(axis=2))
    )
    return Line(centre, parts, rest * OUTWARD)
