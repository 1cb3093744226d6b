"""Plain-loop reference for the selection tests: every design, one at a time, from the textbook equations.

Shares no code with the package but the data classes: dense matrices in the given coordinates,
`scipy.linalg.eigh` for the modes, `numpy.linalg.solve` for static and response.
"""

import itertools

import numpy as np
import scipy.linalg


def assess(selection, design):
    """(feasible, separation, least margin of response rows) of one design (parts..., ballast step)."""
    *parts, step = design
    n = selection.stations.shape[2]
    mass, load = selection.ballast.mass[step], selection.ballast.load[step]
    static, dynamic = selection.fixed.static.copy(), selection.fixed.dynamic.copy()
    for s, g in enumerate(selection.station_group):
        group = selection.groups[g]
        for a in range(3):
            b = selection.stations[s, a]
            static += group.count * group.kappa_static[parts[g], a] * np.outer(b, b)
            dynamic += group.count * group.kappa_dynamic[parts[g], a] * np.outer(b, b)
    frequency = np.sqrt(np.maximum(scipy.linalg.eigh(dynamic, mass, eigvals_only=True), 0)) / (2 * np.pi)
    separation = np.inf
    met = True
    bands = selection.bands
    for low, high, required in zip(bands.low, bands.high, bands.separation, strict=True):
        for f in frequency:
            one = max(f / high - 1, 1 - f / low)
            separation = min(separation, one)
            met = met and one >= required
    if not met:
        return False, separation, np.nan
    if np.linalg.eigvalsh(static)[0] <= 1e-13 * np.abs(static).max():
        return False, separation, -np.inf
    q = np.linalg.solve(static, load)
    seen = {}
    for s, g in enumerate(selection.station_group):
        group, p = selection.groups[g], parts[g]
        z = selection.support_sign[s] * selection.stations[s, 2] @ q
        force = group.kappa_static[p, 2] * z
        index = seen.setdefault(g, 0)
        seen[g] += 1

        def pick(limits, index=index, p=p):
            return limits[p] if limits.ndim == 1 else limits[index, p]

        met = (
            met and pick(group.load_min) <= force <= pick(group.load_max) and z <= pick(group.deflection_max)
        )
    rows = selection.static_rows
    met = met and all(lo <= r @ q <= hi for r, lo, hi in zip(rows.rows, rows.lower, rows.upper, strict=True))
    if not met:
        return False, separation, np.nan
    margin = response_margin(selection, parts, mass, dynamic, n)
    return bool(met and margin >= 0), separation, margin


def response_margin(selection, parts, mass, dynamic, n):
    cases = selection.harmonic
    least = np.inf
    for case, f in enumerate(cases.frequency):
        w = 2 * np.pi * f
        d = dynamic - w**2 * mass + 1j * (selection.fixed.hysteretic + w * selection.fixed.viscous)
        load = cases.load[case].copy()
        kappa = np.zeros((len(selection.station_group), 3), dtype=complex)
        counts = []
        for s, g in enumerate(selection.station_group):
            group, p = selection.groups[g], parts[g]
            counts.append(group.count)
            for a in range(3):
                b = selection.stations[s, a]
                loss = group.loss[p, a] + w * group.viscous[p, a]
                kappa[s, a] = group.kappa_dynamic[p, a] + 1j * loss
                d = d + 1j * group.count * loss * np.outer(b, b)
                load += group.count * kappa[s, a] * cases.base[case, s, a] * b
        q = np.linalg.solve(d, load)
        pairs = [(cases.row_limit[case, r], abs(cases.rows[r] @ q)) for r in range(len(cases.rows))]
        total = np.zeros(len(cases.total), dtype=complex)
        for s in range(len(counts)):
            for a in range(3):
                deflection = selection.stations[s, a] @ q - cases.base[case, s, a]
                force = kappa[s, a] * deflection
                pairs.append((cases.deflection_limit[case, s, a], abs(deflection)))
                pairs.append((cases.force_limit[case, s, a], abs(force)))
                total += counts[s] * cases.total[:, s, a] * force
        pairs += [(cases.total_limit[case, t], abs(total[t])) for t in range(len(total))]
        least = min([least, *(limit / size - 1 for limit, size in pairs if size > 0)])
    return least


def all_designs(selection):
    ranges = [range(size) for size in selection.sizes] + [range(len(selection.ballast.cost))]
    return list(itertools.product(*ranges))


def cost_of(selection, design):
    cost = float(selection.ballast.cost[design[-1]])
    for g, group in enumerate(selection.groups):
        cost += float(group.cost[design[g]])
    return cost


def front_of(points):
    """Nondominated (cost, value) pairs of (cost, value, design) triples, in order of cost."""
    front = []
    for cost, value, design in sorted(points, key=lambda t: (t[0], -t[1], t[2])):
        if not front or value > front[-1][1]:
            front.append((cost, value, design))
    return front
