"""The masses of a model that a design decides: ballast, and the place of an absorber."""

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from detune.brief.absorber import Absorber
from detune.brief.brief import Brief, body_of
from detune.brief.mass_properties import MassProperties
from detune.physics.orientation import axes_from_direction
from detune.response.absorbers import AbsorberPlace, top_frequency
from detune.response.ballast import BallastStep
from detune.response.frame import Frame, StationRows

if TYPE_CHECKING:
    from detune.response.model import Group

Floats = NDArray[np.float64]


def with_ballast(
    brief: Brief,
    frame: Frame,
    base_mass: Floats,
    properties: dict[str, MassProperties],
    steps: tuple[BallastStep, ...],
    gravity: Floats,
) -> tuple[Floats, Floats]:
    """Return mass (B, n, n) and static load (B, n) with every step of ballast, without absorbers.

    gravity: force (3,) in N on each kilogram.
    """
    load = np.zeros(frame.count)
    for name, p in properties.items():
        load += frame.motion_rows(name, p.centre).T @ (p.mass * gravity)
    for steady in brief.steady_loads:
        body = body_of(brief, steady.on)
        load += frame.motion_rows(body, np.array(steady.position)).T @ np.array(steady.force)
        load += frame.rotation_rows(body).T @ np.array(steady.moment)
    if brief.ballast is None:
        return base_mass[None], load[None]
    body = body_of(brief, brief.ballast.on)
    turn = frame.rotation_rows(body)
    masses, loads = [], []
    for step in steps:
        move = frame.motion_rows(body, np.array(step.centre))
        masses.append(base_mass + step.mass * move.T @ move + turn.T @ step.inertia @ turn)
        loads.append(load + move.T @ (step.mass * gravity))
    return np.array(masses), np.array(loads)


def absorber_station(brief: Brief, absorber: Absorber, place: AbsorberPlace, factor: float) -> StationRows:
    """Return an absorber's spring and dashpot, times a state's factor, as a station that acts along its axis alone."""
    axes = axes_from_direction(place.along, None)
    rows = np.zeros((3, len(place.own)))
    rows[2] = place.relative
    return StationRows(
        name=absorber.name,
        on=place.body,
        to=place.body,
        group=brief.groups.index(absorber.name),
        parallel=1,
        bought=1,
        factor=factor,
        packing=0.0,
        rows=rows,
        axes=axes,
        on_floor=False,
        position=place.position,
        foot=np.zeros_like(rows),
    )


def top_of(
    frame: Frame, mass: Floats, fixed: Floats, groups: "tuple[Group, ...]", places: tuple[AbsorberPlace, ...]
) -> float:
    """Return a frequency (Hz) above every mode of every design at the listed stiffness.

    mass, fixed (n, n): the lightest machine and what no design changes.
    """
    springs = []
    for group, place in zip(groups[len(groups) - len(places) :], places, strict=True):
        moving = [mount for mount in group.mounts if mount.moving_mass > 0.0]
        row = place.along @ place.rows
        springs.append([(mount.stiffness_dynamic[2], mount.moving_mass, row) for mount in moving])
    stiffest = fixed + sum(
        np.einsum("a,aij->ij", group.arrays.stiffness_dynamic.max(axis=0), group.spread)
        for group in groups[: len(groups) - len(places)]
    )
    columns = [column for column, (_, freedom) in enumerate(frame.names) if freedom != "along"]
    return top_frequency(mass, stiffest, columns, springs)
