"""Convex companions of selection and of one-axis sizing: a lower bound on cost, and the transmissibility cone."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detune.sizing.lmi import convex_library, solve_cones
from detune.sizing.statement import SizingError

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class SelectionBound:
    """Lower bound on the cost of any choice of one part per group, with the weights (group by group).

    `status` is "solved", "infeasible" (then no choice exists at all, proved) or "failed" (no bound).
    """

    status: str
    cost: float
    weights: tuple[Floats, ...]


def selection_bound(
    mass: Floats,
    constant: Floats,
    group_matrices: tuple[Floats, ...],
    costs: tuple[Floats, ...],
    modes_below: float | None,
    modes_above: float | None,
) -> SelectionBound:
    """Least cost over weights in [0, 1] summing to one in each group: a lower bound on real selections.

    `group_matrices[g]` has shape (parts, n, n): what each part adds to K; `costs[g]` (parts,). Every real
    choice is a 0/1 point of this set, so its cost is never below the bound. Frequencies in Hz.
    """
    cp = convex_library()

    reference = modes_below or modes_above
    if reference is None:
        raise SizingError("a selection bound needs a side: modes below or above a frequency")
    omega2 = (2 * math.pi * reference) ** 2
    factor = np.linalg.inv(np.linalg.cholesky(mass))
    n = mass.shape[0]

    def scaled(a: Floats) -> Floats:
        b = factor @ a @ factor.T / omega2
        return np.asarray(0.5 * (b + b.T))

    weights = [cp.Variable(c.size, nonneg=True) for c in costs]
    stiffness: Any = scaled(constant)
    for w, stack in zip(weights, group_matrices, strict=True):
        flat = np.stack([scaled(a).ravel() for a in stack], axis=1)
        stiffness = stiffness + cp.reshape(flat @ w, (n, n), order="C")
    stiffness = 0.5 * (stiffness + stiffness.T)
    rows: list[Any] = [cp.sum(w) == 1 for w in weights]
    if modes_below is not None:
        rows.append(stiffness << (modes_below / reference) ** 2 * np.eye(n))
    if modes_above is not None:
        rows.append(stiffness >> (modes_above / reference) ** 2 * np.eye(n))
    size = float(max(np.abs(c).max() for c in costs))
    goal = cp.Minimize(sum((c / size) @ w for c, w in zip(costs, weights, strict=True)))
    problem = cp.Problem(goal, rows)
    try:
        solve_cones(problem)
    except cp.SolverError:
        return SelectionBound("failed", math.nan, ())
    if problem.status == cp.INFEASIBLE:
        return SelectionBound("infeasible", math.inf, ())
    if problem.status != cp.OPTIMAL:
        return SelectionBound("failed", math.nan, ())
    found = tuple(np.asarray(w.value, dtype=float) for w in weights)
    # The solver stops within a relative 1e-8 of the optimum; the bound gives that away.
    value = float(problem.value) * size
    return SelectionBound("solved", value - 1e-7 * abs(value), found)


@dataclass(frozen=True)
class SoftSideAnswer:
    """k (N/m), damping and m (kg) on the soft side with the cost reached; damping as c (N s/m) or as h = eta k (N/m).

    `worth` is "global" for transmissibility and affine rows alone and "safe restriction" once a displacement
    limit stands in it (its affine form is exact at c = 0 and conservative otherwise).
    """

    status: str
    worth: str
    cost: float
    stiffness: float
    damping: float
    mass: float


def soft_side_one_axis(
    weights: tuple[float, float, float],
    stiffness_bounds: tuple[float, float],
    damping_bounds: tuple[float, float],
    mass_bounds: tuple[float, float],
    transmissibilities: tuple[tuple[float, float], ...],
    displacements: tuple[tuple[float, float, float], ...] = (),
    loss_factor: bool = False,
    stiffness_per_mass: tuple[float, float] = (0.0, math.inf),
) -> SoftSideAnswer:
    """Least weights . (k, c, m) for one axis with the natural frequency below every frequency given.

    `transmissibilities` are (frequency Hz, T < 1), each the cone ||(k, sqrt(1-T^2) w c)|| <= T (m w^2 - k),
    with h = eta k in the place of w c where `loss_factor` (damping_bounds are then those of eta);
    `displacements` are (frequency Hz, force N, limit m), each k <= m w^2 - F/X; k/m lies within
    `stiffness_per_mass` in s^-2. Raises SizingError for T >= 1, and where no frequency is given.
    """
    cp = convex_library()

    if any(not 0 < limit < 1 for _, limit in transmissibilities):
        raise SizingError("the soft-side cone needs a transmissibility limit between 0 and 1")
    unit_m = mass_bounds[1]
    first = [f for f, _ in transmissibilities] + [f for f, _, _ in displacements]
    if not first:
        raise SizingError("the soft side needs at least one frequency")
    omega = 2 * math.pi * min(first)
    unit_k, unit_c = unit_m * omega**2, unit_m * omega * (omega if loss_factor else 1.0)
    k, c, m = cp.Variable(), cp.Variable(), cp.Variable()
    rows: list[Any] = [
        k >= stiffness_bounds[0] / unit_k,
        k <= stiffness_bounds[1] / unit_k,
        c >= (damping_bounds[0] * k if loss_factor else damping_bounds[0] / unit_c),
        c <= (damping_bounds[1] * k if loss_factor else damping_bounds[1] / unit_c),
        m >= mass_bounds[0] / unit_m,
        m <= 1,
        k >= stiffness_per_mass[0] / omega**2 * m,
    ]
    if stiffness_per_mass[1] < math.inf:
        rows.append(k <= stiffness_per_mass[1] / omega**2 * m)
    for frequency, limit in transmissibilities:
        r = 2 * math.pi * frequency / omega
        turn = 1.0 if loss_factor else r
        rows.append(cp.SOC(limit * (m * r**2 - k), cp.hstack([k, math.sqrt(1 - limit**2) * turn * c])))
    for frequency, force, stroke in displacements:
        r = 2 * math.pi * frequency / omega
        rows.append(k <= m * r**2 - force / stroke / unit_k)
    scaled = np.array(weights) * np.array([unit_k, unit_c, unit_m])
    size = float(np.abs(scaled).max()) or 1.0
    problem = cp.Problem(cp.Minimize((scaled / size) @ cp.hstack([k, c, m])), rows)
    worth = "safe restriction" if displacements else "global"
    nothing = (math.nan,) * 4
    try:
        solve_cones(problem)
    except cp.SolverError:
        return SoftSideAnswer("failed", worth, *nothing)
    if problem.status != cp.OPTIMAL:
        status = "infeasible" if problem.status == cp.INFEASIBLE else "failed"
        return SoftSideAnswer(status, worth, *nothing)
    found = float(k.value) * unit_k, float(c.value) * unit_c, float(m.value) * unit_m
    return SoftSideAnswer("solved", worth, float(problem.value) * size, *found)
