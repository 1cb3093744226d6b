"""Requirements as smooth rows with their slopes: not negative where met.

A limit on a response is -ln(value/limit), which near zero is its margin, for each of its peaks; below 1/e of the limit
it goes on as a straight line (`smooth`). Levels of dynamic against static force (uplift) are differences over a
reference force, so that nothing breaks where the static force changes sign.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import HarmonicAllowable, StaticAllowable
from detune.brief.allowable.level_difference import LevelDifference
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.allowable.tilt import Tilt
from detune.brief.allowable.uplift import Uplift
from detune.problem.build import HarmonicRequirements
from detune.problem.requirement import Requirement
from detune.response.model import Model, find_station
from detune.solvers.gradient_mixture import ResponsePlan, mixed_slopes, mixture
from detune.solvers.gradient_noise import noise_rows
from detune.solvers.gradient_peaks import observed, peaks
from detune.solvers.gradient_probe import NoMap, StaticProbe, linear, static_map, static_size
from detune.solvers.gradient_state import StateAt
from detune.solvers.gradient_static import Rest, static_slopes

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
# What a row without anything to limit is worth.
NOTHING = 2.0
# A response below this share of its limit (and of the largest response over its limit) is left without slopes.
FAR = 0.15
# Below this share of its limit a response is followed at sampled speeds.
NEAR = 0.1
LEAST_LOG = -20.0


@dataclass(frozen=True)
class Rows:
    """Rows (m,) with slopes (m, u), the requirement of each, and the log of response over limit where it is one.

    A row without a requirement forbids toppling on the dynamic stiffness. `log` (m,) and `log_slopes` (m,
    u) are nan for
    rows that limit no response to forcing. `omega` (m,): where the peak stands, rad/s, nan where there is none.
    """

    value: Floats
    slopes: Floats
    requirement: tuple[Requirement | None, ...]
    log: Floats
    log_slopes: Floats
    omega: Floats


def smooth(ratio: Floats, slopes: Floats) -> tuple[Floats, Floats]:
    """-ln(ratio) (m,), as a straight line below 1/e, and its slopes (m, u) from those of the ratio."""
    ratio = np.minimum(ratio, 1e12)
    high = ratio >= 1.0 / np.e
    safe = np.where(high, ratio, 1.0)
    value = np.where(high, -np.log(safe), 2.0 - np.e * ratio)
    return value, np.where(high, -1.0 / safe, -np.e)[:, None] * slopes


def logged(ratio: Floats, slopes: Floats) -> tuple[Floats, Floats]:
    """ln(ratio) and its slopes, flat where next to nothing responds."""
    counts = ratio > np.exp(LEAST_LOG)
    safe = np.where(counts, np.minimum(ratio, 1e12), 1.0)
    return np.where(counts, np.log(safe), LEAST_LOG), np.where(counts, 1.0 / safe, 0.0)[:, None] * slopes


def together(parts: list[Rows], unknowns: int) -> Rows:
    """All rows, in order."""
    return Rows(
        np.concatenate([np.zeros(0), *(p.value for p in parts)]),
        np.concatenate([np.zeros((0, unknowns)), *(p.slopes for p in parts)]),
        tuple(r for p in parts for r in p.requirement),
        np.concatenate([np.zeros(0), *(p.log for p in parts)]),
        np.concatenate([np.zeros((0, unknowns)), *(p.log_slopes for p in parts)]),
        np.concatenate([np.zeros(0), *(p.omega for p in parts)]),
    )


def plain(value: Floats, slopes: Floats, requirement: tuple[Requirement | None, ...]) -> Rows:
    """Rows that limit no response to forcing."""
    none = np.full(len(value), np.nan)
    return Rows(value, slopes, requirement, none, np.full_like(slopes, np.nan), none)


# --- static requirements -------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class StaticPlan:
    """A static requirement as maps (V, static_size) of the features, judged by their value, or length for a tilt."""

    requirement: Requirement
    maps: Floats
    is_length: bool


def static_plan(requirement: Requirement, model: Model) -> StaticPlan:
    """How a static requirement is followed. Raises NoMap where it can only be differenced."""
    allowable, place = requirement.allowable, requirement.place
    assert isinstance(allowable, StaticAllowable)
    if isinstance(allowable, Tilt):
        pair = [linear(lambda view, k=k: view.rotation(place)[:, k], model) for k in (0, 1)]
        return StaticPlan(requirement, np.array(pair), True)
    if isinstance(allowable, LevelDifference):
        heights = [linear(lambda view, p=p: view.motion(p)[:, 2], model) for p in allowable.points]
        pairs = [a - b for a in heights for b in heights if a is not b]
        return StaticPlan(requirement, np.array(pairs), False)
    return StaticPlan(requirement, static_map(allowable, place, model)[None], False)


def static_rows(plans: tuple[StaticPlan, ...], found: Rest, reference: float) -> Rows:
    """Rows of static requirements; a bound of zero is judged by the `reference` force (N) or length."""
    if not plans:
        return plain(np.zeros(0), np.zeros((0, found.at.part_slopes.shape[2])), ())
    maps = np.concatenate([plan.maps for plan in plans])
    values = maps @ found.features
    slopes = static_slopes(found, maps)
    rows: list[tuple[float, Floats]] = []
    told: list[Requirement] = []
    start = 0
    for plan in plans:
        end = start + len(plan.maps)
        v, s = values[start:end], slopes[start:end]
        if plan.is_length:
            size = float(np.hypot(*v))
            v, s = np.array([size]), (v @ s / max(size, 1e-300))[None]
        start = end
        for one, by in zip(v.tolist(), s, strict=True):
            each = _bounded(plan.requirement, found.view, one, by, reference)
            rows += each
            told += [plan.requirement] * len(each)
    return plain(np.array([value for value, _ in rows]), np.array([slope for _, slope in rows]), tuple(told))


def _bounded(
    requirement: Requirement, view: StaticProbe, value: float, slopes: Floats, reference: float
) -> list[tuple[float, Floats]]:
    allowable = requirement.allowable
    assert isinstance(allowable, StaticAllowable)
    rows: list[tuple[float, Floats]] = []
    lower, upper = allowable.bounds(view, requirement.place)
    if lower is not None and np.isfinite(lower[0]):
        bound = float(lower[0])
        scale = abs(bound) if bound else reference
        rows.append(((value - bound) / scale, slopes / scale))
    if upper is not None and np.isfinite(upper[0]):
        bound = float(upper[0])
        if bound > 0.0:
            g, by = smooth(np.array([value / bound]), slopes[None] / bound)
            rows.append((float(g[0]), by[0]))
        else:
            rows.append(((bound - value) / reference, -slopes / reference))
    return rows


# --- responses to forcing ------------------------------------------------------------------------------------------


def response_plan(
    group: HarmonicRequirements, model: Model
) -> tuple[ResponsePlan | None, tuple[Requirement, ...]]:
    """The limits of a group that have slopes, and the requirements that can only be differenced."""
    rows = group.rows
    bind = [not _never_binds(allowable, place, model) for allowable, place in rows.pairs]
    every = tuple(r for r, binds in zip(group.requirements, bind, strict=True) if binds)
    pairs = tuple(pair for pair, binds in zip(rows.pairs, bind, strict=True) if binds)
    if group.driving is not None or rows.has_slow_parts or not (rows.families or rows.noises):
        return None, every
    kept: list[tuple[Requirement, tuple[HarmonicAllowable, str], Floats, bool, Floats]] = []
    left: list[Requirement] = []
    for requirement, (allowable, place) in zip(every, pairs, strict=True):
        try:
            observed(((allowable, place),), model)
            offset, is_size, compression = _static_parts(allowable, place, model)
        except NoMap:
            left.append(requirement)
            continue
        kept.append((requirement, (allowable, place), offset, is_size, compression))
    if not kept:
        return None, tuple(left)
    plan = ResponsePlan(
        tuple(each[0] for each in kept),
        observed(tuple(each[1] for each in kept), model),
        rows.families,
        rows.largest,
        rows.noises,
        np.array([each[2] for each in kept]),
        np.array([each[3] for each in kept]),
        np.array([each[4] for each in kept]),
    )
    return plan, tuple(left)


def without(plan: ResponsePlan, requirements: list[Requirement]) -> ResponsePlan | None:
    """The plan without some of its limits, None where none is left."""
    kept = [i for i, r in enumerate(plan.requirements) if r not in requirements]
    if not kept:
        return None
    limits = plan.limits
    pairs = tuple(limits.pairs[i] for i in kept)
    flat = limits.maps[kept].transpose(1, 0, 2).reshape(limits.maps.shape[1], -1).astype(complex)
    return replace(
        plan,
        requirements=tuple(plan.requirements[i] for i in kept),
        limits=replace(
            limits, pairs=pairs, maps=limits.maps[kept], along=limits.along[kept], flat=flat,
            factor=limits.factor[kept], energy=limits.energy[kept],
        ),
        offset=plan.offset[kept],
        offset_is_size=plan.offset_is_size[kept],
        compression=plan.compression[kept],
    )  # fmt: skip


def _never_binds(allowable: HarmonicAllowable, place: str, model: Model) -> bool:
    """Whether the part itself makes a limit none: it may pull, or states no deflection of its own."""
    if isinstance(allowable, Uplift):
        return bool(model.groups[find_station(model, place).group].mounts[0].pulls)
    if isinstance(allowable, MountDeflection) and allowable.limit == "part":
        own = model.groups[find_station(model, place).group].mounts[0].deflection_max
        return own is None or not np.isfinite(own)
    return False


def _static_parts(allowable: HarmonicAllowable, place: str, model: Model) -> tuple[Floats, bool, Floats]:
    size = static_size(model)
    none = np.zeros(size)
    if isinstance(allowable, Uplift):
        return none, False, linear(lambda view: -view.station_load(place)[:, 2], model)
    if isinstance(allowable, MountDeflection):
        if allowable.part == "dynamic":
            return none, False, none
        return linear(lambda view: view.station_deflection(place)[:, 2], model), True, none
    return linear(lambda view: allowable.offset(view, place), model), False, none


def response_rows(
    plan: ResponsePlan, at: StateAt, found: Rest, poles: Complexes, reference: float, whole: bool = False
) -> Rows:
    """Rows of limits on responses, one for each peak kept.

    Limits that are far from being reached get no slopes (`FAR`), which saves most of the work, unless `whole`.
    """
    limits, unknowns = plan.limits, at.part_slopes.shape[2]
    maps = np.concatenate([plan.offset, plan.compression])
    static, by_static = maps @ found.features, static_slopes(found, maps)
    count = limits.count
    shift = np.where(plan.offset_is_size, np.abs(static[:count]), static[:count])
    by_shift = np.where(plan.offset_is_size, np.sign(static[:count]), 1.0)[:, None] * by_static[:count]
    bounds = _bounds(plan, found, static[count:], reference)
    low = np.zeros(count) if whole else np.maximum(NEAR * bounds / max(len(plan.families), 1) - shift, 0.0)
    each = [peaks(limits, at, family, poles, low) for family in plan.families]
    noise = noise_rows(limits, at, plan.noises, poles) if plan.noises else None
    mixed = mixture(plan, each, noise)
    ratio = (mixed.value + shift[:, None]) / bounds[:, None]
    largest = ratio.max(axis=1)
    wanted = largest >= (0.0 if whole else FAR * min(1.0, float(largest.max(initial=0.0))))
    slopes = mixed_slopes(plan, mixed, at, each, noise, wanted, unknowns)
    size, by = mixed.value + shift[:, None], slopes + by_shift[:, None]
    seen = mixed.value > 0.0
    seen[:, 0] = True
    g, dg, log, dlog = _smoothed(plan, size, by, bounds, static[count:], by_static[count:], reference)
    followed = seen & wanted[:, None]
    slots = size.shape[1]
    return Rows(
        np.where(seen, g, NOTHING).ravel(),
        np.where(followed[..., None], dg, 0.0).reshape(-1, unknowns),
        tuple(requirement for requirement in plan.requirements for _ in range(slots)),
        np.where(seen, log, LEAST_LOG).ravel(),
        np.where(followed[..., None], dlog, 0.0).reshape(-1, unknowns),
        mixed.omega.ravel(),
    )


def _smoothed(
    plan: ResponsePlan,
    size: Floats,
    by: Floats,
    bounds: Floats,
    held: Floats,
    by_held: Floats,
    reference: float,
) -> tuple[Floats, Floats, Floats, Floats]:
    """Rows and logs (R, slots) with their slopes (R, slots, u); of uplift against the static force `held` (R,) in N."""
    shape, unknowns = size.shape, by.shape[2]
    lifts = np.array([isinstance(r.allowable, Uplift) for r in plan.requirements])
    ratio, by_ratio = size / bounds[:, None], by / bounds[:, None, None]
    carried = lifts & (held > 1e-3 * reference)
    moving = (size / bounds[:, None] ** 2)[..., None] * by_held[:, None]
    by_ratio = by_ratio - np.where(carried[:, None, None], moving, 0.0)
    log, dlog = logged(np.maximum(ratio, 0.0).ravel(), by_ratio.reshape(-1, unknowns))
    g, dg = smooth(ratio.ravel(), by_ratio.reshape(-1, unknowns))
    g, dg = g.reshape(shape), dg.reshape(by.shape)
    g = np.where(lifts[:, None], (held[:, None] - size) / reference, g)
    dg = np.where(lifts[:, None, None], (by_held[:, None] - by) / reference, dg)
    return g, dg, log.reshape(shape), dlog.reshape(by.shape)


def _bounds(plan: ResponsePlan, found: Rest, held: Floats, reference: float) -> Floats:
    """Upper limit (R,) of each response; of uplift the static force, not below a thousandth of the reference."""
    bounds = np.maximum(held, 1e-3 * reference)
    for index, requirement in enumerate(plan.requirements):
        allowable = requirement.allowable
        if not isinstance(allowable, Uplift):
            assert isinstance(allowable, HarmonicAllowable)
            bounds[index] = float(allowable.bound(found.view, requirement.place)[0])
    return bounds
