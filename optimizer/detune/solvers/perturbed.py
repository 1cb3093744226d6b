"""A brief and a design at one point of their scatter, so that the assessor can judge it as any other."""

from dataclasses import replace

import numpy as np

from detune.brief.brief import Brief
from detune.brief.machine import Body, InertiaTensor
from detune.brief.mass_properties import mass_properties
from detune.parts.kinds.mount import Mount
from detune.response.design import Design
from detune.solvers.scatter_machine import NOTHING, ScatterMap


def perturbed(
    brief: Brief, design: Design, found: ScatterMap, point: tuple[float, ...]
) -> tuple[Brief, Design]:
    """Return brief and design with the parts, masses and centres of `point`; every station is then its own group.

    The scatter of the forcing is not in it.
    """
    stations = tuple(station.model_copy(update={"group": station.name}) for station in brief.stations)

    def factor(pair: tuple[int, int]) -> float:
        return float(np.prod([point[v] for v in pair if v != NOTHING]))

    mounts = tuple(
        scaled_mount(
            design.mounts[design.groups.index(station.group)],
            factor(found.stiffness[number]),
            factor(found.damping[number]),
        )
        for number, station in enumerate(brief.every_station)
    )
    bodies = tuple(
        _moved(body, point, found.mass[number], found.centre[number])
        for number, body in enumerate(brief.bodies)
    )
    groups = tuple(station.name for station in brief.every_station)
    changed = brief.model_copy(update={"stations": stations, "bodies": bodies, "states": _states(brief)})
    return changed, Design(groups, mounts, design.ballast, design.stack)


def _states(brief: Brief) -> tuple[object, ...]:
    """States that name groups, rewritten for groups of one station each."""
    return tuple(
        state
        if state.groups is None
        else state.model_copy(
            update={"groups": tuple(s.name for s in brief.every_station if s.group in state.groups)}
        )
        for state in brief.states
    )


def scaled_mount(mount: Mount, stiffness: float, damping: float) -> Mount:
    """Return a mount with both stiffnesses times one factor, loss factor and viscous coefficient times another."""

    def times(
        axes: tuple[float | None, float | None, float], factor: float
    ) -> tuple[float | None, float | None, float]:
        x, y, z = axes
        return (None if x is None else x * factor, None if y is None else y * factor, z * factor)

    return replace(
        mount,
        stiffness_static=times(mount.stiffness_static, stiffness),
        stiffness_dynamic=times(mount.stiffness_dynamic, stiffness),
        loss_factor=times(mount.loss_factor, damping),
        viscous=times(mount.viscous, damping),
    )


def _moved(body: Body, point: tuple[float, ...], mass: int, centre: tuple[int, int, int]) -> Body:
    if mass == NOTHING and all(c == NOTHING for c in centre):
        return body
    known = mass_properties(body)
    factor = 1.0 + (0.0 if mass == NOTHING else point[mass])
    moved = [
        float(c) + (0.0 if v == NOTHING else point[v]) for c, v in zip(known.centre, centre, strict=True)
    ]
    tensor = factor * known.inertia
    inertia = InertiaTensor(
        xx=float(tensor[0, 0]), yy=float(tensor[1, 1]), zz=float(tensor[2, 2]),
        xy=float(tensor[0, 1]), xz=float(tensor[0, 2]), yz=float(tensor[1, 2]),
    )  # fmt: skip
    return body.model_copy(
        update={
            "mass": factor * known.mass,
            "centre": (moved[0], moved[1], moved[2]),
            "inertia": inertia,
            "inertia_box": None,
            "shapes": (),
            "weighing": None,
        }
    )
