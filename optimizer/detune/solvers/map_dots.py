"""Every part of the lists at its place on a map, dampers beside mounts included."""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass

import numpy as np

from detune.brief.brief import Brief
from detune.ground.units import STANDARD_GRAVITY
from detune.parts.kinds.mount import Mount
from detune.solvers.map_axes import MapAxis, MapPlane

ALONG = {"axial": 2, "x": 0, "y": 1, "lateral": 0}
# Pairs of parts of two groups beyond this are too many to be read.
MOST = 6000


@dataclass(frozen=True)
class PartDot:
    """One part (or several of equal figures) at its place on the map."""

    name: str
    x: float
    y: float


@dataclass(frozen=True)
class Dots:
    """The dots of a map, and how many parts have no such figure and are none."""

    dots: tuple[PartDot, ...]
    without: int


def part_dots(
    plane: MapPlane, brief: Brief, parts: dict[str, tuple[Mount, ...]], loads: dict[str, float]
) -> Dots:
    """Every part of `parts` (by group) where it stands on the plane; every step where an axis is the ballast.

    Axes of two groups show every pair of their parts. `loads`: static load (N) of one part of each group in the design.
    """
    first, second = plane.first, plane.second
    groups = list(dict.fromkeys(own.group for own in (first, second) if own.group is not None))
    known = [parts.get(group, ()) for group in groups]
    if not groups or not all(known) or math.prod(len(each) for each in known) > MOST:
        return Dots((), 0)
    steps = () if brief.ballast is None else brief.ballast.steps
    dots: dict[tuple[float, float], list[str]] = {}
    without: set[str] = set()
    for chosen in itertools.product(*known):
        mounts = dict(zip(groups, chosen, strict=True))
        name = " and ".join(dict.fromkeys(mount.part for mount in chosen))
        places = _places(plane, mounts, steps, loads)
        if not places:
            without.add(name)
        for place in places:
            dots.setdefault(place, []).append(name)
    told = tuple(PartDot(", ".join(dict.fromkeys(names)), x, y) for (x, y), names in dots.items())
    return Dots(told, len(without))


def _places(
    plane: MapPlane, mounts: dict[str, Mount], steps: tuple[float, ...], loads: dict[str, float]
) -> list[tuple[float, float]]:
    """Where one part (or pair) stands, at every step where an axis is the ballast; nowhere without such a figure."""
    ballast = [number for number, own in enumerate((plane.first, plane.second)) if own.kind == "ballast"]
    found = []
    for step in steps if ballast else (None,):
        point = plane.values.copy()
        if step is not None:
            point[(plane.first, plane.second)[ballast[0]].column] = step
        place = []
        for own in (plane.first, plane.second):
            if own.kind == "ballast":
                place.append(float(step or 0.0))
                continue
            figure = None if own.group is None else _figure(plane, own, mounts[own.group], point, loads)
            if figure is None:
                return []
            place.append(figure)
        found.append((place[0], place[1]))
    return found


def _figure(
    plane: MapPlane,
    own: MapAxis,
    mount: Mount,
    point: np.ndarray[tuple[int], np.dtype[np.float64]],
    loads: dict[str, float],
) -> float | None:
    """The figure of a real part that an axis stands for, None where it has none.

    Loss factor and viscous coefficient are read into each other at the natural frequency that the part gives the
    machine on one axis, and elsewhere at that of the load it carries in the design on it.
    """
    stiffness = mount.stiffness_dynamic[2]
    if stiffness <= 0.0:
        return None
    if plane.axis is not None:
        mass = float(plane.mass(point[None])[0])
        omega = math.sqrt(plane.pieces * stiffness / mass)
    else:
        load = loads.get(str(own.group), 0.0) or mount.load_rated or 0.0
        omega = math.sqrt(stiffness * STANDARD_GRAVITY / load) if load > 0.0 else 0.0
    if own.derived and own.kind == "stiffness":
        return omega / (2.0 * math.pi)
    if own.kind == "stiffness":
        axis = next(u.axis for u in _unknowns(plane) if u.title == own.title)
        return mount.stiffness_dynamic[ALONG[str(axis)]]
    loss, viscous = mount.loss_factor[2], mount.viscous[2]
    if own.kind not in ("viscous", "loss-factor") or (loss and viscous and not omega):
        return None
    if own.kind == "viscous":
        value = viscous + (loss * stiffness / omega if loss and omega else 0.0)
        if own.derived:
            return value * omega / (2.0 * stiffness)
        return value if value or not loss else None
    value = loss + (viscous * omega / stiffness if viscous and omega else 0.0)
    return value if value or not viscous else None


def _unknowns(plane: MapPlane) -> tuple:  # type: ignore[type-arg]
    from detune.sizing.made_parts import sizing_of

    return sizing_of(plane.brief).unknown
