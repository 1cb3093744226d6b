"""From the values of the unknowns to a design: parts made to order, ballast, absorber mass, station positions."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import Allowable
from detune.brief.brief import Brief
from detune.brief.machine import Body, Station
from detune.brief.sizing import MadePart, Sizing, SizingUnknown
from detune.parts.kinds.mount import Mount
from detune.response.design import Design

Floats = NDArray[np.float64]
CATALOG = "made to order"
AXES = ("x", "y", "z")
# Unknowns that belong to the machine and not to its parts.
OF_MACHINE = ("absorber-mass", "position", "parallel")


@dataclass(frozen=True)
class Made:
    """A design of made-to-order parts and the brief it stands in (absorber mass and positions belong to the brief)."""

    brief: Brief
    design: Design


def sizing_of(brief: Brief) -> Sizing:
    """The sizing table of a brief that has one."""
    if brief.sizing is None:
        raise ValueError("the brief has no [sizing] table")
    return brief.sizing


def bounds(brief: Brief) -> tuple[Floats, Floats]:
    """Lower and upper bounds (u,) of the unknowns in SI."""
    pairs = np.array([unknown.bounds for unknown in sizing_of(brief).unknown])
    return pairs[:, 0], pairs[:, 1]


def logarithmic(unknown: SizingUnknown) -> bool:
    """Whether an unknown is searched for and drawn by its logarithm."""
    low, _ = unknown.bounds
    return unknown.kind not in ("ballast", "position", "parallel") and low > 0.0


def changes_brief(brief: Brief) -> bool:
    """Whether some unknown is a property of the machine and not of its parts or ballast."""
    return any(unknown.kind in OF_MACHINE for unknown in sizing_of(brief).unknown)


def values_by_unknown(brief: Brief, values: Floats) -> dict[SizingUnknown, float]:
    """The values (u,) with their unknowns."""
    return dict(zip(sizing_of(brief).unknown, values.tolist(), strict=True))


def made_design(brief: Brief, values: Floats) -> Made:
    """The brief and the design that the values (u,) of the unknowns (SI) describe."""
    given = values_by_unknown(brief, values)
    varied = varied_brief(brief, given)
    mounts = tuple(made_mount(varied, group, given) for group in brief.groups)
    ballast = next((value for unknown, value in given.items() if unknown.kind == "ballast"), 0.0)
    return Made(varied, Design(brief.groups, mounts, ballast))


def made_table(brief: Brief, group: str) -> MadePart:
    """What the brief says of the parts of one group."""
    return next(made for made in sizing_of(brief).made if made.group == group)


def asks_for_own_range(brief: Brief, allowable: Allowable) -> bool:
    """Whether a limit is on the load or deflection that the study states of its made parts."""
    made = sizing_of(brief).made
    if allowable.kind == "load-range":
        return any(part.load_min > 0.0 or part.load_max is not None for part in made)
    own = allowable.kind == "mount-deflection" and getattr(allowable, "limit", None) == "part"
    return own and any(part.deflection_max is not None for part in made)


def _value(given: Mapping[SizingUnknown, float], group: str, kind: str, *axes: str | None) -> float | None:
    for unknown, value in given.items():
        if unknown.group == group and unknown.kind == kind and (not axes or unknown.axis in axes):
            return value
    return None


def _pieces(brief: Brief, group: str) -> int:
    return sum(station.parallel for station in brief.stations if station.group == group)


def _absorber_mass(brief: Brief, given: Mapping[SizingUnknown, float], body: str | None) -> float:
    for unknown, value in given.items():
        if unknown.kind == "absorber-mass" and unknown.body == body:
            return value
    from detune.brief.mass_properties import mass_properties

    return mass_properties(next(each for each in brief.bodies if each.name == body)).mass


def made_mount(brief: Brief, group: str, given: Mapping[SizingUnknown, float]) -> Mount:
    """One part of a group at the given values of the unknowns."""
    made = made_table(brief, group)
    axial, damping = _axial(brief, made, given)
    lateral = _value(given, group, "stiffness", "lateral")
    ratio = made.lateral_ratio
    sides: list[float | None] = []
    for axis in ("x", "y"):
        own = _value(given, group, "stiffness", axis)
        if own is None:
            own = lateral if lateral is not None else None if ratio is None else ratio * axial
        sides.append(own)
    loss = _value(given, group, "loss-factor")
    eta = made.loss_factor or 0.0 if loss is None else loss
    dynamic = (sides[0], sides[1], axial)
    static = tuple(None if k is None else k / made.dynamic_to_static for k in dynamic)
    across = None if sides[0] is None else made.damping_lateral_ratio * damping
    cost = made.cost + made.cost_per_stiffness * axial / 1e3
    cost += made.cost_per_loss_factor * eta + made.cost_per_damping * damping
    return Mount(
        catalog=CATALOG,
        file=brief.file,
        line=0,
        part=f"part for {group}",
        family="made to order",
        stiffness_static=(static[0], static[1], axial / made.dynamic_to_static),
        stiffness_dynamic=dynamic,
        loss_factor=(eta, eta, eta),
        viscous=(across, across, damping),
        damping_from="sizing",
        damping_stated=damping or eta,
        load_min=made.load_min,
        load_max=float("inf") if made.load_max is None else made.load_max,
        load_rated=None,
        deflection_max=made.deflection_max,
        pulls=made.pulls,
        free_height=made.free_height,
        mass=None,
        cost=cost,
        tolerance=made.tolerance or 0.0,
        temperature_min=made.temperature_min,
        temperature_max=made.temperature_max,
        stock=None,
    )


def _axial(brief: Brief, made: MadePart, given: Mapping[SizingUnknown, float]) -> tuple[float, float]:
    """Axial dynamic stiffness N/m and viscous coefficient N s/m of one part of a group.

    Tuning f and damping ratio z of an absorber of mass m on n equal parts: n k = m (2 pi f)^2, n c = 2 z sqrt(m n k).
    """
    group, pieces = made.group, _pieces(brief, made.group)
    stiffness = made.stiffness if made.stiffness is not None else _value(given, group, "stiffness", "axial")
    damping = _value(given, group, "viscous")
    for unknown, value in given.items():
        if unknown.group == group and unknown.kind == "absorber-tuning":
            mass = _absorber_mass(brief, given, unknown.body)
            stiffness = mass * (2.0 * np.pi * value) ** 2 / pieces
    assert stiffness is not None  # the cross-check admits no group without
    for unknown, value in given.items():
        if unknown.group == group and unknown.kind == "absorber-damping":
            mass = _absorber_mass(brief, given, unknown.body)
            damping = 2.0 * value * float(np.sqrt(mass * stiffness * pieces)) / pieces
    if damping is None:
        damping = made.viscous or 0.0
    return stiffness, damping


def varied_brief(brief: Brief, given: Mapping[SizingUnknown, float]) -> Brief:
    """The brief with absorber masses, station positions and numbers of parts put in."""
    bodies, stations = brief.bodies, brief.stations
    for unknown, value in given.items():
        if unknown.kind == "absorber-mass":
            bodies = tuple(_heavier(body, value) if body.name == unknown.body else body for body in bodies)
        if unknown.kind == "position":
            stations = tuple(
                _moved(station, str(unknown.axis), value) if station.name in unknown.stations else station
                for station in stations
            )
        if unknown.kind == "parallel":
            stations = tuple(
                station.model_copy(update={"parallel": round(value)})
                if station.group == unknown.group
                else station
                for station in stations
            )
    if bodies is brief.bodies and stations is brief.stations:
        return brief
    return brief.model_copy(update={"bodies": bodies, "stations": stations})


def _heavier(body: Body, mass: float) -> Body:
    """The body with another mass, its inertia in proportion."""
    assert body.mass is not None
    change: dict[str, object] = {"mass": mass}
    if body.inertia is not None:
        scale = mass / body.mass
        named = {key: scale * getattr(body.inertia, key) for key in ("xx", "yy", "zz", "xy", "xz", "yz")}
        change["inertia"] = body.inertia.model_copy(update=named)
    return body.model_copy(update=change)


def _moved(station: Station, axis: str, distance: float) -> Station:
    place = list(station.position)
    index = AXES.index(axis)
    place[index] = -distance if place[index] < 0.0 else distance
    return station.model_copy(update={"position": tuple(place)})


def parallel_range(brief: Brief) -> tuple[int, int] | None:
    """Least and greatest number of parts side by side, None where that is no unknown."""
    for unknown in sizing_of(brief).unknown:
        if unknown.kind == "parallel":
            return round(unknown.bounds[0]), round(unknown.bounds[1])
    return None


def with_parallel(brief: Brief, count: int) -> Brief:
    """The brief with `count` parts side by side and the unknown held there; itself where that is no unknown."""
    sizing = sizing_of(brief)
    fixed = {u: float(count) for u in sizing.unknown if u.kind == "parallel"}
    if not fixed:
        return brief
    held = tuple(
        SizingUnknown.model_validate({**u.model_dump(exclude_unset=True), "lower": count, "upper": count})
        if u in fixed
        else u
        for u in sizing.unknown
    )
    return varied_brief(brief, fixed).model_copy(
        update={"sizing": sizing.model_copy(update={"unknown": held})}
    )
