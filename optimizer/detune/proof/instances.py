"""Seeded synthetic selection problems with rare feasible designs, for tests and benchmarks.

A machine of 700 to 1500 kg with its centre off the middle stands on 4 stations (6 with three groups). The parts
span 11 to 1 in rating, 8 to 1 in rated deflection, 0.08 to 1.4 in lateral stiffness ratio, 0.05 to 0.25 in loss
factor. Three orders (half, one, two) of a speed known within 4 % are each sampled at five frequencies; the limits on
12 point displacements, on travel, station forces and total force are scaled so that a stated share of the designs
that pass the static and modal rules also pass by response. All data are invented.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from detune.proof.exact_test import natural_frequencies, separation_met, static_margin
from detune.proof.response_rows import case_margin
from detune.proof.selection_data import (
    BallastSteps,
    Complexes,
    Floats,
    ForbiddenBands,
    GroupParts,
    HarmonicCases,
    Integers,
    Selection,
    StaticRows,
    no_fixed_stiffness,
)

GRAVITY = 9.80665


@dataclass(frozen=True)
class InstanceSettings:
    """Shape of a synthetic instance.

    parts: candidates per group. groups: 1 to 6. ballast_steps: at least 1. empty: group 0 may stay empty.
    tight: narrow static windows (rare designs) or wide ones (small tests). response_share: share of the designs
    passing the static and modal rules that shall pass by response. separation: required of every interval.
    base_motion: some of the load comes through the stations.
    """

    parts: int
    groups: int
    seed: int
    ballast_steps: int = 1
    empty: bool = False
    tight: bool = True
    response_share: float = 0.05
    separation: float = 0.10
    base_motion: bool = False


def make_instance(settings: InstanceSettings) -> Selection:
    """The selection problem of the given shape and seed."""
    rng = np.random.default_rng([settings.seed, settings.parts, settings.groups])
    mass = rng.uniform(700.0, 1500.0)
    size = np.array([rng.uniform(1.2, 2.0), rng.uniform(0.8, 1.2), rng.uniform(0.6, 1.0)])
    centre = rng.uniform(-0.08, 0.08, 2) * size[:2]
    points, groups = _stations(settings.groups, size)
    # Coordinates are taken at the mass centre; the mounts stand below it.
    offsets = np.column_stack([points - centre, np.full(len(points), -0.45 * size[2])])
    rows = np.stack([attachment(offset) for offset in offsets])
    ballast = _ballast(settings.ballast_steps, mass, size)
    speed = rng.uniform(560.0, 900.0) / 60.0
    bands = ForbiddenBands(
        low=speed * np.array([0.5, 1.0, 2.0]) * 0.96,
        high=speed * np.array([0.5, 1.0, 2.0]) * 1.04,
        separation=np.full(3, settings.separation),
    )
    load_per_station = mass * GRAVITY / len(points)
    stations_per_group = np.bincount(groups)
    parts = tuple(
        _parts(settings, rng, load_per_station, int(count), number == 0 and settings.empty)
        for number, count in enumerate(stations_per_group)
    )
    tilt = 2.5e-3 if settings.tight else 8.0e-3
    tilt_rows = np.zeros((2, 6))
    tilt_rows[0, 3] = tilt_rows[1, 4] = 1.0
    draft = Selection(
        stations=rows,
        station_group=groups,
        support_sign=-np.ones(len(points)),
        groups=parts,
        ballast=ballast,
        fixed=no_fixed_stiffness(6),
        bands=bands,
        static_rows=StaticRows(rows=tilt_rows, lower=np.full(2, -tilt), upper=np.full(2, tilt)),
        harmonic=_cases(rng, speed, mass, size, len(points), settings.base_motion),
    )
    return _scale_limits(draft, settings, rng)


def attachment(offset: Floats) -> Floats:
    """Attachment matrix (3, 6) of a point at an offset (3,) from the reference: [I, -skew(offset)]."""
    x, y, z = offset
    return np.array(
        [[1.0, 0, 0, 0, z, -y], [0, 1.0, 0, -z, 0, x], [0, 0, 1.0, y, -x, 0]],
    )


def _stations(groups: int, size: Floats) -> tuple[Floats, Integers]:
    half = 0.5 * size[:2]
    corners = np.array([[-1.0, -1.0], [-1.0, 1.0], [1.0, -1.0], [1.0, 1.0]]) * half
    if groups == 1:
        return corners, np.zeros(4, dtype=np.int64)
    if groups == 2:
        return corners, np.array([0, 0, 1, 1])
    if groups == 4:
        return corners, np.arange(4)
    if groups == 3:
        middle = np.array([[0.1, -1.0], [0.1, 1.0]]) * half
        return np.concatenate([corners, middle]), np.array([0, 0, 1, 1, 2, 2])
    if groups in (5, 6):
        middle = np.array([[0.1, -1.0], [0.1, 1.0]])[: groups - 4] * half
        return np.concatenate([corners, middle]), np.arange(groups)
    raise ValueError("groups must be 1 to 6")


def _mass_matrix(mass: float, size: Floats) -> Floats:
    inertia = (
        mass
        / 12.0
        * np.array([size[1] ** 2 + size[2] ** 2, size[0] ** 2 + size[2] ** 2, size[0] ** 2 + size[1] ** 2])
    )
    return np.diag(np.concatenate([np.full(3, mass), inertia]))


def _ballast(steps: int, mass: float, size: Floats) -> BallastSteps:
    """Ballast of 0, 12, 24 ... % of the mass, a point below the machine and off its centre; about 1 per kg."""
    masses, loads, costs = [], [], []
    for step in range(steps):
        extra = 0.12 * step * mass
        row = attachment(np.array([0.15 * size[0], 0.05 * size[1], -0.4 * size[2]]))
        masses.append(_mass_matrix(mass, size) + extra * row.T @ row)
        weight = np.zeros(6)
        weight[2] = -mass * GRAVITY
        loads.append(weight + row.T @ np.array([0.0, 0.0, -extra * GRAVITY]))
        costs.append(0.6 * extra)
    return BallastSteps(mass=np.array(masses), load=np.array(loads), cost=np.array(costs))


def _parts(
    settings: InstanceSettings, rng: np.random.Generator, load: float, stations: int, empty: bool
) -> GroupParts:
    count = settings.parts
    rating = load * np.exp(rng.uniform(np.log(0.5), np.log(5.5), count))
    deflection = np.exp(rng.uniform(np.log(2.0e-3), np.log(16.0e-3), count))
    lateral = np.exp(rng.uniform(np.log(0.08), np.log(1.4), count))
    stiffness = rating / deflection
    static = stiffness[:, None] * np.stack(
        [lateral, lateral * rng.uniform(0.8, 1.25, count), np.ones(count)], axis=1
    )
    dynamic = static * rng.uniform(1.1, 1.4, count)[:, None]
    loss = dynamic * rng.uniform(0.05, 0.25, count)[:, None]
    price = (8.0 + 0.9 * rating**0.5 + 400.0 * deflection) * np.exp(rng.normal(0.0, 0.25, count))
    low, high = (0.45, 0.95) if settings.tight else (0.1, 1.6)
    load_min, load_max, travel = low * rating, high * rating, 1.3 * deflection
    cost = np.round(stations * price, 2)
    if empty:
        for array in (static, dynamic, loss):
            array[0] = 0.0
        load_min[0], load_max[0], travel[0], cost[0] = -np.inf, np.inf, np.inf, 0.0
    return GroupParts(
        kappa_static=static,
        kappa_dynamic=dynamic,
        loss=loss,
        viscous=np.zeros((count, 3)),
        cost=cost,
        load_min=load_min,
        load_max=load_max,
        deflection_max=travel,
    )


def _cases(
    rng: np.random.Generator, speed: float, mass: float, size: Floats, stations: int, base_motion: bool
) -> HarmonicCases:
    orders = np.array([0.5, 1.0, 2.0])
    spread = np.linspace(0.96, 1.04, 5)
    frequency = (speed * orders[:, None] * spread).ravel()
    strength = np.repeat(np.array([0.15, 1.0, 0.35]), 5)
    omega = 2.0 * np.pi * frequency
    unbalance = 2.0e-5 * mass * omega**2 * strength
    direction: Complexes = np.zeros(6, dtype=np.complex128)
    direction[1], direction[2] = 1.0, -1.0j
    direction[3:] = rng.uniform(0.1, 0.3, 3) * np.exp(2j * np.pi * rng.uniform(0, 1, 3)) * size[0]
    points = np.array([[1, 1, 1], [-1, 1, 1], [1, -1, -1], [-1, -1, 1]]) * 0.5 * size
    base = np.zeros((15, stations, 3), dtype=np.complex128)
    if base_motion:
        base[:, :, 2] = 2.0e-6 * strength[:, None]
    return HarmonicCases(
        frequency=frequency,
        load=unbalance[:, None] * direction,
        base=base,
        rows=np.concatenate([attachment(point) for point in points]),
        row_limit=np.ones((15, 12)),
        deflection_limit=np.ones((15, stations, 3)),
        force_limit=np.full((15, stations, 3), 1.0e6),
        total=np.stack([np.broadcast_to(np.eye(3)[a], (stations, 3)) for a in range(3)]),
        total_limit=np.full((15, 3), 2.5e6),
    )


def random_designs(selection: Selection, count: int, rng: np.random.Generator) -> Integers:
    """Designs (count, G+1) drawn evenly."""
    steps = int(selection.ballast.cost.shape[0])
    columns = [rng.integers(0, size, count) for size in (*selection.sizes, steps)]
    return np.stack(columns, axis=1).astype(np.int64)


def _scale_limits(draft: Selection, settings: InstanceSettings, rng: np.random.Generator) -> Selection:
    """Scale all response limits by one factor so that the stated share of otherwise good designs passes."""
    good: list[Integers] = []
    found = 0
    for _ in range(12):
        designs = random_designs(draft, 8192, rng)
        designs = designs[static_margin(draft, designs) >= 0.0]
        designs = designs[separation_met(natural_frequencies(draft, designs), draft.bands)]
        good.append(designs)
        found += len(designs)
        if found >= 600:
            break
    chosen = np.concatenate(good)[:600]
    if len(chosen) < 5:
        chosen = random_designs(draft, 300, rng)
    margins = np.min(
        [case_margin(draft, chosen, case) for case in range(draft.harmonic.frequency.shape[0])], axis=0
    )
    # The quantile is a sampled design's own margin: a hair more keeps that design off its limit.
    scale = 1.00001 / (1.0 + float(np.quantile(margins, 1.0 - settings.response_share)))
    cases = draft.harmonic
    limits = {
        name: getattr(cases, name) * scale
        for name in ("row_limit", "deflection_limit", "force_limit", "total_limit")
    }
    return replace(draft, harmonic=replace(cases, **limits))
