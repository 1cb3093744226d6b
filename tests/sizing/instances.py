"""Random one-axis problems (seeded) and a brute-force judge that shares no code with the program."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from detune.sizing.statement import (
    Ballast,
    Objective,
    OneAxisProblem,
    ResponseLimit,
    SagLimit,
)


def response(limit: ResponseLimit, kind: str, k, d, m, f):
    """Plain complex arithmetic, arrays broadcast."""
    w = 2 * np.pi * f
    mount = k + 1j * w * d if kind == "viscous" else k * (1 + 1j * d)
    dynamic = mount - m * w**2
    derivative = {"displacement": 1.0, "velocity": w, "acceleration": w**2}.get(limit.quantity)
    if limit.quantity == "transmissibility":
        return np.abs(mount / dynamic)
    if limit.source.startswith("base"):
        order = ("displacement", "velocity", "acceleration").index(limit.source.split()[1])
        ground = limit.amplitude / w**order
        if limit.quantity == "deflection":
            return np.abs(m * w**2 * ground / dynamic)
        return np.abs(mount / dynamic) * ground * derivative
    force = limit.amplitude * (w**2 if limit.source == "unbalance" else 1.0)
    if limit.quantity == "transmitted force":
        return np.abs(force * mount / dynamic)
    return np.abs(force / dynamic) * (1.0 if limit.quantity == "deflection" else derivative)


def meets(problem: OneAxisProblem, k, d, m, points: int = 400, slack: float = 1e-9):
    """Boolean array: every limit met at `points` frequencies of each range, sag and separation met."""
    good = np.ones(np.broadcast(k, d, m).shape, dtype=bool)
    for limit in problem.limits:
        lines = (
            [limit.lower_frequency]
            if limit.lower_frequency == limit.upper_frequency
            else np.geomspace(limit.lower_frequency, limit.upper_frequency, points)
        )
        for f in lines:
            with np.errstate(divide="ignore"):
                good &= response(limit, problem.damping_kind, k, d, m, f) <= limit.limit * (1 + slack)
    if problem.sag is not None:
        sag = m * 9.80665 * problem.sag.dynamic_to_static / k
        good &= (sag <= problem.sag.most * (1 + slack)) & (sag >= problem.sag.least * (1 - slack))
    if problem.separation is not None:
        natural = np.sqrt(k / m) / (2 * np.pi)
        for a, b in problem.excitation_intervals:
            good &= (natural <= a * (1 - problem.separation) * (1 + slack)) | (
                natural >= b * (1 + problem.separation) * (1 - slack)
            )
    return good


def random_problem(seed: int, ranges: bool = True, ballast: str = "none") -> OneAxisProblem:
    """A problem around a reference design so that many, not all, have an answer, often in several branches."""
    rng = np.random.default_rng(seed)
    mass = float(rng.uniform(20, 2000))
    kind = "viscous" if rng.random() < 0.6 else "loss factor"
    centre = (2 * math.pi * float(rng.uniform(5, 30))) ** 2 * mass
    critical = 2 * math.sqrt(centre * mass)
    light = rng.random() < 0.5
    damping = (0.002, 0.04) if light else (0.02, 0.8)
    bounds = tuple(x * critical for x in damping) if kind == "viscous" else tuple(2 * x for x in damping)
    stiffness = (centre / 40, centre * 40)
    reference = float(np.exp(rng.uniform(*np.log(stiffness))))
    d_ref = float(np.exp(rng.uniform(*np.log(bounds))))
    limits = []
    for i in range(int(rng.integers(2, 6))):
        low = float(rng.uniform(3, 60))
        wide = ranges and rng.random() < 0.5
        high = low * float(rng.uniform(1.02, 1.5)) if wide else low
        quantity = str(
            rng.choice(
                [
                    "displacement",
                    "velocity",
                    "acceleration",
                    "transmitted force",
                    "transmissibility",
                    "deflection",
                ]
            )
        )
        if quantity == "transmissibility":
            source, amplitude = "unit", 1.0
        elif quantity == "transmitted force":
            source, amplitude = str(rng.choice(["force", "unbalance"])), 1.0
        else:
            source = str(
                rng.choice(["force", "unbalance", "base displacement", "base velocity", "base acceleration"])
            )
            amplitude = 1.0
        raw = ResponseLimit(f"limit {i}", quantity, 1.0, low, high, source, amplitude)
        level = max(float(response(raw, kind, reference, d_ref, mass, f)) for f in np.linspace(low, high, 15))
        limits.append(replace(raw, limit=level * float(rng.uniform(0.9, 2.5))))
    goals = [
        Objective(
            "weighted sum",
            stiffness_weight=1.0 / centre,
            damping_weight=float(rng.uniform(0.1, 3)) / bounds[1],
        ),
        Objective(
            "weighted sum", stiffness_weight=-1.0 / centre, damping_squared_weight=1.0 / bounds[1] ** 2
        ),
        Objective("softest"),
        Objective("stiffest"),
        Objective("least damping"),
        Objective("least transmissibility", frequency=float(rng.uniform(5, 60))),
    ]
    problem = OneAxisProblem(
        mass,
        kind,
        stiffness,
        bounds,
        goals[int(rng.integers(len(goals)))],
        tuple(limits),
        sag=SagLimit(0.0, float(rng.uniform(2, 30)) * mass * 9.80665 / reference, 1.2)
        if rng.random() < 0.3
        else None,
    )
    if ballast == "continuous":
        problem = replace(problem, ballast=Ballast(0.0, 0.6 * mass))
    if ballast == "steps":
        problem = replace(problem, ballast=Ballast(0.0, 0.6 * mass, 0.2 * mass))
    return problem
