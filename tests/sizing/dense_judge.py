"""A judge of one-axis designs by plain complex arithmetic on dense frequencies; it shares no code with the program.

Arrays of stiffness k (N/m), damping d (N s/m or loss factor) and mass m (kg) are one-dimensional and of one length. The
frequencies of a range are spread evenly and crowded round the natural frequency and the classical peaks, then the
highest is looked at three times more closely.
"""

from __future__ import annotations

import numpy as np

CROWD = np.concatenate([np.linspace(-30.0, 30.0, 121), np.linspace(-0.2, 0.2, 41)])
BASE = ("displacement", "velocity", "acceleration")


def response(limit, kind, k, d, m, f):
    """Amplitude of the limited response at frequencies f (Hz)."""
    w = 2.0 * np.pi * f
    spring = k + 1j * w * d if kind == "viscous" else k * (1.0 + 1j * d)
    with np.errstate(all="ignore"):
        compliance = 1.0 / (spring - m * w**2)
        rate = {"velocity": w, "acceleration": w**2}.get(limit.quantity, 1.0)
        if limit.quantity == "transmissibility":
            return np.abs(spring * compliance)
        if limit.source.startswith("base"):
            floor = limit.amplitude / w ** BASE.index(limit.source.split()[1])
            if limit.quantity == "deflection":
                return np.abs(m * w**2 * floor * compliance)
            return np.abs(spring * compliance) * floor * rate
        force = limit.amplitude * (w**2 if limit.source == "unbalance" else 1.0)
        if limit.quantity == "transmitted force":
            return np.abs(force * spring * compliance)
        return np.abs(force * compliance) * rate


def worst(limit, kind, k, d, m, spread=100):
    """Greatest response of a limit over its line or range."""
    low, high = limit.lower_frequency, limit.upper_frequency
    if low == high:
        return response(limit, kind, k, d, m, low)
    natural = np.sqrt(k / m) / (2.0 * np.pi)
    z = d / (2.0 * np.sqrt(k * m)) if kind == "viscous" else d / 2.0
    inner = np.sqrt(np.maximum(1.0 - 2.0 * z**2, 1e-12))
    own = natural[:, None] * (1.0 + np.maximum(z, 1e-7)[:, None] * CROWD)
    peaks = np.stack([natural, natural * inner, natural / inner], axis=1)
    even = np.broadcast_to(np.geomspace(low, high, spread), (len(k), spread))
    f = np.sort(np.concatenate([even, np.clip(own, low, high), np.clip(peaks, low, high)], axis=1), axis=1)
    rows, best = np.arange(len(k)), np.zeros(len(k))
    for _ in range(4):
        value = response(limit, kind, k[:, None], d[:, None], m[:, None], f)
        value = np.where(np.isnan(value), np.inf, value)
        top = value.argmax(axis=1)
        best = np.maximum(best, value[rows, top])
        left, right = f[rows, np.maximum(top - 1, 0)], f[rows, np.minimum(top + 1, f.shape[1] - 1)]
        f = left[:, None] + (right - left)[:, None] * np.linspace(0.0, 1.0, 21)
    return best


def meets(problem, k, d, m, slack=0.0):
    """Whether each design (D,) meets every limit, sag and separation, with this much slack (relative)."""
    k, d, m = np.broadcast_arrays(*(np.atleast_1d(np.asarray(x, dtype=float)) for x in (k, d, m)))
    good = np.ones(len(k), dtype=bool)
    if problem.sag is not None:
        sag = m * 9.80665 * problem.sag.dynamic_to_static / k
        good &= (sag <= problem.sag.most * (1.0 + slack)) & (sag >= problem.sag.least * (1.0 - slack))
    if problem.separation is not None:
        natural = np.sqrt(k / m) / (2.0 * np.pi)
        for low, high in problem.excitation_intervals:
            below = natural <= low * (1.0 - problem.separation) * (1.0 + slack)
            good &= below | (natural >= high * (1.0 + problem.separation) * (1.0 - slack))
    for limit in problem.limits:
        left = np.flatnonzero(good)
        if not len(left):
            break
        value = worst(limit, problem.damping_kind, k[left], d[left], m[left])
        good[left] = value <= limit.limit * (1.0 + slack)
    return good


def objective(problem, k, d, m):
    """What is minimised (with a minus sign where more is better), for the goals of stiffness, damping, mass and sum."""
    goal = problem.objective
    if goal.goal in ("softest", "stiffest"):
        return k if goal.goal == "softest" else -k
    if goal.goal == "least damping":
        return d
    if goal.goal == "least added mass":
        return m - problem.mass
    return (
        goal.stiffness_weight * k
        + goal.damping_weight * d
        + goal.damping_squared_weight * d**2
        + goal.mass_weight * (m - problem.mass)
    )
