"""Harmonic response of a batch of designs at the given frequencies, as a least margin over all its limits.

    D(w) q = load(w) + sum_s count b^T kappa_s(w) u_s(w),   D(w) = -w^2 M + K + j (H + w C)

The margin of an upper limit is limit / response - 1. Frequencies between the given ones are not looked at:
inside a search this is a relaxation, and a design that fails it is rightly discarded.
"""

from __future__ import annotations

import numpy as np

from detune.proof.kernels_numpy import complex_solve
from detune.proof.selection_data import Complexes, Floats, Integers, Selection


def station_stiffness(selection: Selection, designs: Integers, omega: float) -> Complexes:
    """Complex dynamic stiffness (D, S, 3) of one part at each station for designs (D, G+1) at omega, N/m."""
    stiffness = np.empty((designs.shape[0], len(selection.station_group), 3), dtype=np.complex128)
    for station, number in enumerate(selection.station_group):
        group, part = selection.groups[number], designs[:, number]
        loss = group.loss[part] + omega * group.viscous[part]
        stiffness[:, station] = group.kappa_dynamic[part] + 1j * loss
    return stiffness


def station_counts(selection: Selection) -> Floats:
    """Number of parallel parts (S,) at each station."""
    return np.array([selection.groups[g].count for g in selection.station_group], dtype=np.float64)


def dynamic_matrices(selection: Selection, designs: Integers, omega: float, kappa: Complexes) -> Complexes:
    """Dynamic stiffness matrices (D, n, n) for station stiffness (D, S, 3) of single parts, at omega."""
    fixed = selection.fixed
    base = fixed.dynamic + 1j * (fixed.hysteretic + omega * fixed.viscous)
    b = selection.stations
    total = kappa * station_counts(selection)[None, :, None]
    products = np.einsum("sai,saj->saij", b, b).reshape(-1, b.shape[2] ** 2)
    sums = total.reshape(len(designs), -1) @ products
    matrices: Complexes = (
        base - omega**2 * selection.ballast.mass[designs[:, -1]] + sums.reshape(len(designs), *base.shape)
    )
    return matrices


def case_margin(selection: Selection, designs: Integers, case: int) -> Floats:
    """Least margin (D,) of one load case over its rows, station deflections, station forces and total forces."""
    cases, b = selection.harmonic, selection.stations
    omega = 2.0 * np.pi * float(cases.frequency[case])
    kappa = station_stiffness(selection, designs, omega)
    matrices = dynamic_matrices(selection, designs, omega, kappa)
    count = station_counts(selection)
    drive = kappa * cases.base[case] * count[None, :, None]
    load = cases.load[case] + np.einsum("sai,dsa->di", b, drive)
    q, _ = complex_solve(matrices, load)
    deflection = np.einsum("sai,di->dsa", b, q) - cases.base[case]
    force = kappa * deflection
    total = np.einsum("qsa,dsa->dq", cases.total, force * count[None, :, None])
    ratios = [
        _ratio(cases.row_limit[case], q @ cases.rows.T),
        _ratio(cases.deflection_limit[case], deflection),
        _ratio(cases.force_limit[case], force),
        _ratio(cases.total_limit[case], total),
    ]
    margin: Floats = np.min(np.concatenate(ratios, axis=1), axis=1, initial=np.inf) - 1.0
    return margin


def _ratio(limit: Floats, response: Complexes) -> Floats:
    """limit / response flattened to (D, rows); +inf where there is no response or no limit."""
    size = np.abs(response).reshape(response.shape[0], -1)
    flat = np.broadcast_to(limit.reshape(-1), size.shape)
    some = (size > 0.0) & np.isfinite(flat)
    return np.where(some, flat / np.where(some, size, 1.0), np.inf)


def response_margin(selection: Selection, designs: Integers, need: Floats | float = -np.inf) -> Floats:
    """Least margin (D,) over all harmonic cases for designs (D, G+1).

    Designs whose margin falls below `need` (scalar or (D,)) are not followed further: their value is then only
    an upper bound of the margin, below `need`.
    """
    margin = np.full(designs.shape[0], np.inf)
    wanted = np.broadcast_to(np.asarray(need, dtype=np.float64), margin.shape)
    alive = np.arange(designs.shape[0])
    for case in range(selection.harmonic.frequency.shape[0]):
        if not alive.size:
            break
        margin[alive] = np.minimum(margin[alive], case_margin(selection, designs[alive], case))
        alive = alive[margin[alive] >= wanted[alive]]
    return margin
