"""Static requirements, stability and separation of one design over its scatter."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import Allowable, HarmonicAllowable
from detune.brief.allowable.gap import Gap
from detune.brief.allowable.level_difference import LevelDifference
from detune.brief.allowable.load_range import LoadRange
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.allowable.sag import Sag
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.tilt import Tilt
from detune.brief.allowable.uplift import Uplift
from detune.brief.brief import Brief
from detune.brief.mass_properties import mass_properties
from detune.brief.statement import unit_direction
from detune.problem.build import StateModel
from detune.problem.requirement import Requirement
from detune.proof.scatter_data import ScatterSystem, product_interval, products
from detune.proof.selection_data import ForbiddenBands
from detune.proof.separation_box import UncertainBody, body_mass, box_separation, interval_separation
from detune.proof.static_rows import StaticLimits
from detune.response.absorbers import geometric_of, spare_stiffness, weight_of
from detune.response.designs import Designs
from detune.response.gravity import weight_to_topple
from detune.response.model import Model, find_station
from detune.solvers.scatter_machine import NOTHING, ScatterMap, gravity_terms, weight_terms
from detune.solvers.scatter_rows import NotBounded

Floats = NDArray[np.float64]
Pair = tuple[int, int]


@dataclass(frozen=True, eq=False)
class StaticRow:
    """One static row: components (3, n), scale, factors of its stiffness, shift, whether a length counts, limits."""

    rows: Floats
    scale: float = 1.0
    factors: Pair = (NOTHING, NOTHING)
    shift: float = 0.0
    length: bool = False
    lower: float = -np.inf
    upper: float = np.inf


def _single(row: Floats) -> Floats:
    out = np.zeros((3, len(row)))
    out[0] = row
    return out


def _limit(value: float, otherwise: float) -> float:
    return otherwise if np.isnan(value) else float(value)


def _load_row(each: StateModel, part: NDArray[np.intp], found: ScatterMap, place: str) -> StaticRow:
    """Axial load of one part, compression positive."""
    model = each.model
    station = find_station(model, place)
    stiffness = model.groups[station.group].arrays.stiffness_static[part[station.group], 2]
    return StaticRow(
        rows=_single(-station.rows[2]),
        scale=float(station.factor * stiffness),
        factors=found.stiffness[model.stations.index(station)],
        shift=station.packing,
    )


def static_row(
    each: StateModel, part: NDArray[np.intp], found: ScatterMap, requirement: Requirement
) -> list[StaticRow]:
    """Return the rows of a static requirement, all of which have to keep their limits. Raises NotBounded."""
    allowable, model, place = requirement.allowable, each.model, requirement.place
    creep = 1.0 + model.creep
    if isinstance(allowable, LoadRange):
        arrays = model.groups[find_station(model, place).group].arrays
        index = part[find_station(model, place).group]
        base = _load_row(each, part, found, place)
        lower, upper = (
            _limit(float(arrays.load_min[index]), -np.inf),
            _limit(float(arrays.load_max[index]), np.inf),
        )
        return [StaticRow(base.rows, base.scale, base.factors, base.shift, False, lower, upper)]
    if isinstance(allowable, Sag):
        return [StaticRow(_single(-creep * model.points[place][2]), upper=allowable.limit)]
    if isinstance(allowable, Tilt):
        rows = np.zeros((3, model.frame.count))
        rows[:2] = creep * model.frame.rotation_rows(place)[:2]
        return [StaticRow(rows, length=True, upper=allowable.limit)]
    if isinstance(allowable, LevelDifference):
        heights = [creep * model.points[point][2] for point in allowable.points]
        pairs = [(a, b) for i, a in enumerate(heights) for b in heights[:i]]
        return [StaticRow(_single(a - b), length=True, upper=allowable.limit) for a, b in pairs]
    raise NotBounded("the bounds do not know this static quantity")


def offset_row(
    each: StateModel, part: NDArray[np.intp], found: ScatterMap, allowable: Allowable, place: str
) -> tuple[StaticRow | None, str]:
    """Return the static row a response limit depends on, and how: "" not at all, "adds" or "limits". Raises
    NotBounded.
    """
    model = each.model
    if isinstance(allowable, Uplift):
        return _load_row(each, part, found, place), "limits"
    if isinstance(allowable, MountDeflection):
        if allowable.part == "dynamic":
            return None, ""
        station = find_station(model, place)
        creep = 1.0 + model.creep
        return StaticRow(
            _single(creep * station.rows[2]), shift=-creep * station.packing, length=True
        ), "adds"
    if isinstance(allowable, Gap):
        if allowable.clearance_of == "installed":
            return None, ""
        other = np.zeros((3, model.frame.count))
        if allowable.stands_on != "floor":
            other = model.points[allowable.stands_on]
        elif model.frame.flexible_floor:
            other[2, -1] = 1.0
        along = np.asarray(unit_direction(allowable.direction))
        return StaticRow(_single((1.0 + model.creep) * along @ (model.points[place] - other))), "adds"
    if isinstance(allowable, HarmonicAllowable) and type(allowable).offset is not HarmonicAllowable.offset:
        raise NotBounded("the bounds do not know its static part")
    return None, ""


def static_limits(
    brief: Brief,
    each: StateModel,
    part: NDArray[np.intp],
    step: int,
    found: ScatterMap,
    rows: list[StaticRow],
) -> StaticLimits:
    """Return static rows of a design in a state as the arrays of the proof floor."""
    model = each.model
    axes, stiffness, factors = [], [], []
    one = Designs(np.array([part], dtype=np.intp), np.array([step], dtype=np.intp))
    loads = [weight_of(model, one)[0]]
    load_factors: list[tuple[int, int, int]] = [(NOTHING, NOTHING, NOTHING)]
    for number, station in enumerate(model.stations):
        own = model.groups[station.group].arrays.stiffness_static[part[station.group]]
        times = station.parallel * station.factor
        axes += list(station.rows)
        stiffness += list(times * own)
        factors += [found.stiffness[number]] * 3
        if station.packing != 0.0 and station.parallel > 0:
            loads.append(times * own[2] * station.packing * station.rows[2])
            load_factors.append((*found.stiffness[number], NOTHING))
    for vector, names in weight_terms(brief, model, found):
        loads.append(vector)
        load_factors.append(names)
    return StaticLimits(
        fixed=_fixed(model, one),
        axes=np.array(axes),
        stiffness=np.array(stiffness),
        factors=np.array(factors, dtype=np.int64),
        loads=np.array(loads),
        load_factors=np.array(load_factors, dtype=np.int64),
        rows=np.stack([row.rows for row in rows]),
        scale=np.array([row.scale for row in rows]),
        row_factors=np.array([row.factors for row in rows], dtype=np.int64),
        shift=np.array([row.shift for row in rows]),
        length=np.array([row.length for row in rows]),
        lower=np.array([row.lower for row in rows]),
        upper=np.array([row.upper for row in rows]),
        low=found.low,
        high=found.high,
    )


def _fixed(model: Model, one: Designs) -> Floats:
    """What no scatter changes in the static stiffness (n, n), made exactly symmetric."""
    whole = (model.fixed_static + spare_stiffness(model, one)).reshape(model.fixed_static.shape)
    return np.asarray(0.5 * (whole + whole.T))


def stability_worst(
    brief: Brief, each: StateModel, limits: StaticLimits, one: Designs, found: ScatterMap
) -> tuple[float, float]:
    """Weight to topple at the softest corner, and what it never falls below.

    It grows with the stiffness (Loewner order), so the two agree for stiffness factors alone; what mass and centre
    change in gravity's stiffness is taken at its full absolute value.
    """
    points = np.concatenate([limits.low, [0.0]])[None]
    weights = products(points, limits.factors)[0] * limits.stiffness
    stiffness = (limits.fixed + (limits.axes.T * weights) @ limits.axes)[None]
    geometric = geometric_of(each.model, one)
    worst = float(weight_to_topple(stiffness, geometric)[0])
    terms, names = gravity_terms(brief, each.model, found)
    if not terms:
        return worst, worst
    low, high = (np.append(edge, 0.0)[None] for edge in (found.low, found.high))
    least, most = product_interval(low, high, np.array(names, dtype=np.int64))
    values, vectors = np.linalg.eigh(np.array(terms))
    absolute = np.einsum("tik,tk,tjk->tij", vectors, np.abs(values), vectors)
    spread = np.einsum("t,tij->ij", np.maximum(np.abs(least), np.abs(most))[0], absolute)
    return worst, float(weight_to_topple(stiffness, geometric - spread)[0])


@dataclass(frozen=True)
class SeparationFound:
    """Worst separation evaluated and guaranteed, the mode's frequency (Hz) and the corner in words where it occurs."""

    worst: float
    guaranteed: float
    frequency: float
    where: str
    point: tuple[float, ...]


def separation_worst(
    brief: Brief, each: StateModel, system: ScatterSystem, allowable: Separation, found: ScatterMap
) -> SeparationFound:
    """Worst separation: exact from the softest and the stiffest corner, by boxes where mass or centre scatter.

    Raises NotBounded where modes are exempted.
    """
    if allowable.exempt_amplification is not None:
        raise NotBounded("modes are exempted by amplification")
    if not each.intervals:
        return SeparationFound(
            np.inf, np.inf, float("nan"), "nothing excites steadily", tuple(found.nominal.tolist())
        )
    intervals = np.array(each.intervals, dtype=float).reshape(-1, 2)
    bands = ForbiddenBands(intervals[:, 0], intervals[:, 1], np.full(len(intervals), allowable.limit))
    if not found.stiffness_only:
        return _by_boxes(brief, each, system, bands, found)
    corners = [modes_at(system, edge) for edge in (system.low, system.high)]
    worst = float(interval_separation(corners[0][None], corners[1][None], bands)[0].min())
    for frequency, edge, words in zip(
        corners, (system.low, system.high), ("softest", "stiffest"), strict=True
    ):
        least, mode = _least(frequency, bands)
        if least <= worst + 1e-12:
            return SeparationFound(worst, worst, mode, f"all parts at their {words}", tuple(edge.tolist()))
    words = "a mode passes through an excitation interval between all soft and all stiff"
    return SeparationFound(worst, worst, float("nan"), words, tuple(found.nominal.tolist()))


def _least(frequency: Floats, bands: ForbiddenBands) -> tuple[float, float]:
    """Least separation of modes (n,), and the frequency of the mode that has it."""
    each = np.maximum(frequency[:, None] / bands.high - 1.0, 1.0 - frequency[:, None] / bands.low)
    mode = int(each.min(axis=1).argmin())
    return float(each.min()), float(frequency[mode])


def _by_boxes(
    brief: Brief, each: StateModel, system: ScatterSystem, bands: ForbiddenBands, found: ScatterMap
) -> SeparationFound:
    """Guaranteed separation by boxes of the centres; the worst one attained is evaluated at those points again."""
    model, bodies, fixed = each.model, [], system.mass.copy()
    for number, body in enumerate(brief.bodies):
        known, m = mass_properties(body), found.mass[number]
        low, high = (1.0, 1.0) if m == NOTHING else (1.0 + found.low[m], 1.0 + found.high[m])
        reach = np.array([0.0 if d == NOTHING else found.high[d] for d in found.centre[number]])
        selector = np.vstack(
            [model.frame.motion_rows(body.name, known.centre), model.frame.rotation_rows(body.name)]
        )
        own = UncertainBody(
            (known.mass * low, known.mass * high), -reach, reach, known.inertia, (low, high), selector
        )
        bodies.append(own)
        fixed -= body_mass(own, known.mass, 1.0, np.zeros((1, 3)))[0]
    soft, stiff = (_stiffness_at(system, _with_factors(found, edge)) for edge in (system.low, system.high))
    least, most = product_interval(np.append(found.low, 0.0)[None], np.append(found.high, 0.0)[None],
                                   system.stiffness_term_factors)  # fmt: skip
    values, vectors = np.linalg.eigh(system.stiffness_terms)
    absolute = np.einsum("tik,tk,tjk->tij", vectors, np.abs(values), vectors)
    spread = np.einsum("t,tij->ij", np.maximum(np.abs(least), np.abs(most))[0], absolute)
    decision = box_separation(soft - spread, stiff + spread, fixed, tuple(bodies), bands, gap=0.002)
    worst, mode, where = np.inf, float("nan"), found.nominal
    for edge in (system.low, system.high):
        for heavy in (system.low, system.high):
            point = _with_factors(found, edge)
            for number, centre in enumerate(decision.centre):
                for axis, variable in enumerate(found.centre[number]):
                    if variable != NOTHING:
                        point[variable] = centre[axis]
                if found.mass[number] != NOTHING:
                    point[found.mass[number]] = heavy[found.mass[number]]
            attained, frequency = _least(modes_at(system, point), bands)
            if attained < worst:
                worst, mode, where = attained, frequency, point
    return SeparationFound(worst, min(decision.guaranteed, worst), mode, "", tuple(where.tolist()))


def _with_factors(found: ScatterMap, edge: Floats) -> Floats:
    """The nominal point with every factor of stiffness at an edge."""
    return np.array(
        [
            value if variable.kind.startswith("stiffness") else nominal
            for variable, value, nominal in zip(found.variables, edge, found.nominal, strict=True)
        ]
    )


def _stiffness_at(system: ScatterSystem, point: Floats) -> Floats:
    """Dynamic stiffness (n, n) at a point, gravity's changes included."""
    points = np.append(point, 0.0)[None]
    weights = products(points, system.stiffness_factors)[0] * system.stiffness
    total: Floats = system.fixed_dynamic + (system.axes.T * weights) @ system.axes
    own = np.einsum("t,tij->ij", products(points, system.stiffness_term_factors)[0], system.stiffness_terms)
    return np.asarray(total + own)


def modes_at(system: ScatterSystem, point: Floats) -> Floats:
    """Undamped natural frequencies (n,) in Hz at a point (V,) of the scatter."""
    points = np.append(point, 0.0)[None]
    mass = system.mass + np.einsum("t,tij->ij", products(points, system.mass_factors)[0], system.mass_terms)
    inverse = np.linalg.inv(np.linalg.cholesky(mass))
    values = np.linalg.eigvalsh(inverse @ _stiffness_at(system, point) @ inverse.T)
    frequency: Floats = np.sqrt(np.maximum(values, 0.0)) / (2.0 * np.pi)
    return frequency
