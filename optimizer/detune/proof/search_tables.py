"""Search tables: one ballast step of a selection in coordinates in which the mass matrix is the unit matrix.

With M = L L^T and q = L^-T p the mass becomes I, so that counting eigenvalues below a shift is counting the
negative pivots of K - shift I, and all freedoms have one scale. Groups are ordered for the search, those with
the fewest parts first; within a group the parts are ordered by cost.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from detune.proof.kernels_numpy import pack
from detune.proof.selection_data import Floats, Integers, Selection, deflection_window


@dataclass(frozen=True, eq=False)
class GroupTable:
    """One group in search order; arrays are sorted by cost.

    number: group in the selection; part (P,): part in the selection; cost (P,).
    matrix_map (m, 3): packed stiffness matrix per unit of axis stiffness, parallel count included.
    static, dynamic (P, 3): axis stiffness. rows: first and last+1 of its stations in the table's rows.
    lower, upper (S_g, P): window of the static compression at its stations, m.
    """

    number: int
    part: Integers
    cost: Floats
    matrix_map: Floats
    static: Floats
    dynamic: Floats
    rows: tuple[int, int]
    lower: Floats
    upper: Floats


@dataclass(frozen=True, eq=False)
class SearchTable:
    """One ballast step, whitened by its mass matrix.

    base_static, base_dynamic (m,): packed fixed stiffness. load (n,): static load. cost: of the ballast step.
    rows (R, n): supporting rows of all stations in group order, then the static rows of the selection.
    row_lower, row_upper (T,): limits of those last rows.
    """

    step: int
    cost: float
    freedoms: int
    base_static: Floats
    base_dynamic: Floats
    load: Floats
    rows: Floats
    row_lower: Floats
    row_upper: Floats
    groups: tuple[GroupTable, ...]


def group_order(selection: Selection) -> tuple[int, ...]:
    """Order in which the groups are searched: fewest parts first, then by number."""
    return tuple(sorted(range(len(selection.groups)), key=lambda g: (selection.groups[g].size, g)))


def build_tables(selection: Selection) -> tuple[SearchTable, ...]:
    """Search tables of all ballast steps, in order of ballast cost."""
    steps = np.argsort(selection.ballast.cost, kind="stable")
    return tuple(build_table(selection, int(step)) for step in steps)


def build_table(selection: Selection, step: int) -> SearchTable:
    """Search table of one ballast step."""
    n = selection.freedoms
    factor = np.linalg.cholesky(selection.ballast.mass[step])
    whiten = np.linalg.inv(factor).T
    stations = selection.stations @ whiten
    groups: list[GroupTable] = []
    rows: list[Floats] = []
    first = 0
    for number in group_order(selection):
        members = np.flatnonzero(selection.station_group == number)
        parts = selection.groups[number]
        order = np.argsort(parts.cost, kind="stable")
        outer = np.einsum("sai,saj->aij", stations[members], stations[members])
        lower, upper = deflection_window(selection, number)
        rows.append(selection.support_sign[members, None] * stations[members, 2])
        groups.append(
            GroupTable(
                number=number,
                part=order.astype(np.int64),
                cost=parts.cost[order],
                matrix_map=np.ascontiguousarray(parts.count * pack(outer).T),
                static=parts.kappa_static[order],
                dynamic=parts.kappa_dynamic[order],
                rows=(first, first + len(members)),
                lower=np.ascontiguousarray(lower[:, order]),
                upper=np.ascontiguousarray(upper[:, order]),
            )
        )
        first += len(members)
    rows.append(selection.static_rows.rows @ whiten)
    return SearchTable(
        step=step,
        cost=float(selection.ballast.cost[step]),
        freedoms=n,
        base_static=pack(whiten.T @ selection.fixed.static @ whiten),
        base_dynamic=pack(whiten.T @ selection.fixed.dynamic @ whiten),
        load=whiten.T @ selection.ballast.load[step],
        rows=np.ascontiguousarray(np.concatenate(rows)),
        row_lower=selection.static_rows.lower,
        row_upper=selection.static_rows.upper,
        groups=tuple(groups),
    )


def design_cost(selection: Selection, designs: Integers) -> Floats:
    """Cost (D,) of designs (D, G+1): part of each group, then ballast step; summed in this order always."""
    if selection.whole_cost is not None:
        return selection.whole_cost(designs)
    cost = selection.ballast.cost[designs[:, -1]].astype(np.float64)
    for number, group in enumerate(selection.groups):
        cost = cost + group.cost[designs[:, number]]
    return cost
