"""A problem as the selection arrays of the bounded search: a relaxation, exact in statics and separation.

What the arrays cannot state (resultants, sums over orders, suprema between samples, states) is left
out there and decided by the final test, so a design the search discards is rightly discarded.
"""

import itertools
import math
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.at_point import PointAllowable
from detune.brief.allowable.load_range import LoadRange
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.allowable.sag import Sag
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.tilt import Tilt
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.problem.build import HarmonicRequirements, Problem
from detune.proof.selection_data import (
    BallastSteps,
    FixedStiffness,
    ForbiddenBands,
    GroupParts,
    HarmonicCases,
    Selection,
    StaticRows,
)
from detune.response.absorbers import geometric_of, mass_of, spare_damping, spare_stiffness, weight_of
from detune.response.designs import Designs
from detune.response.loads import Family, Load
from detune.response.model import Model
from detune.response.prices import bought_stations, has_breaks, least_costs, quantity_prices

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Integers = NDArray[np.int64]
TWO_PI = 2.0 * np.pi
SAMPLES = 4
RATES = {"displacement": 0, "velocity": 1, "acceleration": 2}


def why_not(problem: Problem) -> str | None:
    """Return why a problem has no selection arrays, None if it has."""
    if problem.model.floor_table is not None:
        return "the floor's stiffness follows frequency, for which the bounds do not hold"
    if any(group.laws is not None for group in problem.model.groups):
        return "some parts' stiffness follows load, frequency or amplitude, for which the bounds do not hold"
    if problem.exempt_amplification is not None:
        return "modes are exempted by amplification, which the eigenvalue bound does not know"
    return None


@dataclass(frozen=True)
class Case:
    """One ballast step and one part for every absorber, as (group, part): what decides the masses of a search."""

    step: int
    fixed: tuple[tuple[int, int], ...] = ()

    def parts(self, found: tuple[int, ...]) -> tuple[int, ...]:
        """Return the parts of a design found in this case, whose absorbers have one part alone."""
        known = dict(self.fixed)
        return tuple(known.get(group, part) for group, part in enumerate(found))


def cases_of(problem: Problem) -> tuple[Case, ...]:
    """Return every case of a problem."""
    model = problem.model
    groups = [absorber.group for absorber in model.absorbers]
    every = itertools.product(*(range(len(model.groups[group].mounts)) for group in groups))
    chosen = [tuple(zip(groups, parts, strict=True)) for parts in every]
    return tuple(Case(step, fixed) for step in range(len(model.ballast_mass)) for fixed in chosen)


def selection_of(problem: Problem, step: int, fixed: tuple[tuple[int, int], ...] = ()) -> Selection:
    """Return the arrays of a problem at one ballast step, as installed; `fixed` holds the part of each absorber.

    One step and one choice of absorbers at a time, because mass and gravity's geometric stiffness change with them.
    Stations with parts in parallel are written as that many stations.
    """
    model = problem.model
    one = Designs(np.zeros((1, len(model.groups)), dtype=np.intp), np.array([step], dtype=np.intp))
    for number, part in fixed:
        one.part[0, number] = part
    place = [number for number, station in enumerate(model.stations) for _ in range(station.parallel)]
    rows = np.array([model.stations[number].rows for number in place])
    group = np.array([model.stations[number].group for number in place])
    spare = np.zeros_like(model.fixed_dynamic) + spare_stiffness(model, one)
    spare = spare.reshape(model.fixed_dynamic.shape)
    own = spare + geometric_of(model, one)[0] if model.with_gravity_stiffness else spare
    lossy = (model.fixed_viscous + spare_damping(model, one)).reshape(spare.shape)
    return Selection(
        stations=rows,
        station_group=group,
        support_sign=-np.ones(len(place)),
        groups=tuple(
            _only(_parts(problem, index), dict(fixed).get(index)) for index in range(len(model.groups))
        ),
        ballast=BallastSteps(mass_of(model, one), weight_of(model, one), model.ballast_cost[[step]]),
        fixed=FixedStiffness(
            model.fixed_static + spare, model.fixed_dynamic + own, model.fixed_hysteretic, lossy
        ),
        bands=_bands(problem),
        static_rows=_static_rows(problem),
        harmonic=_harmonic(problem, rows),
        whole_cost=_whole_cost(problem, step, fixed),
    )


def _only(parts: GroupParts, chosen: int | None) -> GroupParts:
    """Return the parts of a group, or the one that is fixed."""
    if chosen is None:
        return parts
    arrays = {name: getattr(parts, name)[[chosen]] for name in vars(parts) if name != "count"}
    return replace(parts, **arrays)


def _whole_cost(
    problem: Problem, step: int, fixed: tuple[tuple[int, int], ...]
) -> Callable[[Integers], Floats] | None:
    """Return the cost of whole designs where prices fall with the quantity; what `total_cost` says of them."""
    prices, extra = quantity_prices(problem.model), float(problem.model.ballast_cost[step])
    if prices is None:
        return None

    def cost(numbers: Integers) -> Floats:
        part = np.array(numbers[:, :-1], dtype=np.intp)
        for group, chosen in fixed:
            part[:, group] = chosen
        return extra + prices.cost(part)

    return cost


def _parts(problem: Problem, index: int) -> GroupParts:
    model = problem.model
    arrays = model.groups[index].arrays
    named = {
        place
        for requirement in problem.statics
        if isinstance(requirement.allowable, LoadRange) and requirement.state is None
        for place in (requirement.place,)
    }
    own = [station.name for station in model.stations if station.group == index]
    limited = all(name in named for name in own)
    travels = all(name in _travel_limited(problem) for name in own)
    count = len(arrays.cost)
    return GroupParts(
        kappa_static=arrays.stiffness_static,
        kappa_dynamic=arrays.stiffness_dynamic,
        loss=arrays.stiffness_dynamic * arrays.loss_factor,
        viscous=arrays.viscous,
        cost=_least_costs(model, index),
        load_min=arrays.load_min if limited else np.full(count, -np.inf),
        load_max=arrays.load_max if limited else np.full(count, np.inf),
        deflection_max=arrays.deflection_max if travels else np.full(count, np.inf),
    )


def _least_costs(model: Model, index: int) -> Floats:
    """Return the cost of each part of a group (P,): exact, or at its lowest price where some price falls."""
    if any(has_breaks(group.mounts) for group in model.groups):
        return least_costs(model, index)
    return np.asarray(bought_stations(model, index) * model.groups[index].arrays.cost)


def _travel_limited(problem: Problem) -> set[str]:
    """Return the stations whose static deflection alone, as installed, is held to the part's own limit."""
    return {
        place
        for group in problem.harmonics
        if group.model is problem.model
        for allowable, place in group.rows.pairs
        if isinstance(allowable, MountDeflection)
        and allowable.part == "combined"
        and allowable.limit == "part"
    }


def _bands(problem: Problem) -> ForbiddenBands:
    """Excitation intervals as installed, and the separation the brief asks for (-1, below any, where it asks none)."""
    intervals = np.array(problem.states[0].intervals, dtype=float).reshape(-1, 2)
    asked = [
        r.allowable.limit for r in problem.modes if isinstance(r.allowable, Separation) and r.state is None
    ]
    required = np.full(len(intervals), max(asked, default=-1.0))
    if not asked and "separation" not in problem.brief.objectives.trade:
        intervals, required = intervals[:0], required[:0]
    return ForbiddenBands(intervals[:, 0], intervals[:, 1], required)


def _static_rows(problem: Problem) -> StaticRows:
    model = problem.model
    rows: list[Floats] = []
    lower: list[float] = []
    upper: list[float] = []
    for requirement in problem.statics:
        allowable = requirement.allowable
        if requirement.state is not None:
            continue
        if isinstance(allowable, Sag):
            rows.append(-model.points[requirement.place][2])
            lower.append(-np.inf)
            upper.append(allowable.limit)
        elif isinstance(allowable, Tilt):
            # The tilt is no smaller than the rotation about either level axis.
            rows += list(model.frame.rotation_rows(requirement.place)[:2])
            lower += [-allowable.limit] * 2
            upper += [allowable.limit] * 2
    n = model.frame.count
    return StaticRows(
        np.array(rows).reshape(-1, n), np.array(lower, dtype=float), np.array(upper, dtype=float)
    )


def _harmonic(problem: Problem, stations: Floats) -> HarmonicCases:
    """Each coherent set alone at a few speeds: no sum over sets, no resultant and no supremum lies below it."""
    model = problem.model
    point_rows = {(name, axis): row[axis] for name, row in model.points.items() for axis in range(3)}
    keys = list(point_rows)
    frequency: list[float] = []
    loads: list[Complexes] = []
    limits: list[Floats] = []
    forces: list[Floats] = []
    for group in problem.harmonics:
        if group.model is not model:
            continue
        for family in group.rows.families:
            for loads_of_set in family.sets:
                if any(load.base is not None for load in loads_of_set):
                    continue
                for omega in _sampled(family, loads_of_set):
                    frequency.append(float(omega / TWO_PI))
                    acting = [load.vector * omega**load.power for load in loads_of_set]
                    loads.append(np.sum(acting, axis=0, dtype=complex))
                    limits.append(np.array([_point_limit(group, key, omega) for key in keys]))
                    forces.append(_force_limits(group, model))
    count, s, n = len(frequency), len(stations), model.frame.count
    return HarmonicCases(
        frequency=np.array(frequency),
        load=np.array(loads, dtype=complex).reshape(count, n),
        base=np.zeros((count, s, 3), dtype=complex),
        rows=np.array([point_rows[key] for key in keys]).reshape(len(keys), n),
        row_limit=np.array(limits).reshape(count, len(keys)),
        deflection_limit=np.full((count, s, 3), np.inf),
        force_limit=np.array(forces).reshape(count, s, 3),
        total=np.zeros((0, s, 3)),
        total_limit=np.zeros((count, 0)),
    )


def _sampled(family: Family, loads: tuple[Load, ...]) -> Floats:
    number = SAMPLES if family.high > family.low else 1
    return TWO_PI * loads[0].order * np.linspace(family.low, family.high, number)


def _factor(statistic: str) -> float:
    return {"peak": 1.0, "3-sigma": 1.0, "rms": math.sqrt(2.0), "peak-to-peak": 0.5}[statistic]


def _point_limit(group: HarmonicRequirements, key: tuple[str, int], omega: float) -> float:
    """Return the greatest peak displacement of a point along an axis that its limits could still allow."""
    least = np.inf
    for allowable, place in group.rows.pairs:
        if not isinstance(allowable, PointAllowable) or place != key[0] or allowable.kind not in RATES:
            continue
        along = allowable.along()
        # A resultant is no smaller than any of its components.
        if along is not None and abs(along[key[1]]) < 1.0:
            continue
        peak = allowable.limit * _factor(allowable.statistic())
        least = min(least, float(peak / omega ** RATES[allowable.kind]))
    return least


def _force_limits(group: HarmonicRequirements, model: Model) -> Floats:
    limits = []
    for station in model.stations:
        own = np.full(3, np.inf)
        for allowable, place in group.rows.pairs:
            if not isinstance(allowable, TransmittedForce) or place != station.name:
                continue
            peak = allowable.limit * _factor(allowable.statistic())
            axes = {"axial": [2], "lateral": [0, 1], "resultant": [0, 1, 2]}[str(allowable.direction)]
            own[axes] = np.minimum(own[axes], peak)
        limits += [own] * station.parallel
    return np.array(limits)
