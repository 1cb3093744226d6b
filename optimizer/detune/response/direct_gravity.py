"""Gravity's geometric stiffness of one design, for the assessor: written out once more.

The static forces in it are those of equal springs at all stations; where those do not hold the machine alone,
the given connections count as springs too, along the axes on which they are stiff.
"""

from collections.abc import Iterator
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import body_of
from detune.brief.mass_properties import mass_properties
from detune.brief.state import apparent_gravity
from detune.response.design import ballast_of
from detune.response.direct_absorbers import carried_weight, sliding_gravity

if TYPE_CHECKING:
    from detune.response.direct import DirectMachine

Floats = NDArray[np.float64]
Spring = tuple[str, str, Floats, Floats]


def gravity_stiffness(machine: "DirectMachine") -> Floats:
    """Return sum (F.r) I - (r F^T + F r^T)/2 of all static forces on the turns of each body, (N, N).

    Source: physics.gravity.
    """
    total = np.zeros((machine.size, machine.size))
    springs, rest = _rest_on_equal_springs(machine)
    for body in machine.brief.bodies:
        matrix = np.zeros((3, 3))
        for arm, force in (
            *_dead_forces(machine, body.name),
            *_spring_forces(machine, body.name, springs, rest),
        ):
            matrix += (arm @ force) * np.eye(3) - 0.5 * (np.outer(arm, force) + np.outer(force, arm))
        total += machine.turn(body.name).T @ matrix @ machine.turn(body.name)
    return total + sliding_gravity(machine)


def _dead_forces(machine: "DirectMachine", body: str) -> Iterator[tuple[Floats, Floats]]:
    """Arm from the body's centre and force of its weight, its ballast and the steady loads on it."""
    down = np.array(apparent_gravity(machine.state))
    centre = machine.centres[body]
    own = next(b for b in machine.brief.bodies if b.name == body)
    yield np.zeros(3), mass_properties(own).mass * down
    ballast = machine.brief.ballast
    if ballast is not None and body_of(machine.brief, ballast.on) == body:
        box = ballast_of(machine.brief, machine.design)
        yield np.array(box.centre) - centre, box.mass * down
    for absorber in machine.absorbers:
        if absorber.body == body:
            whole = absorber.mount.riding_mass + absorber.mount.moving_mass
            yield absorber.position - centre, whole * down
    for steady in machine.brief.steady_loads:
        if body_of(machine.brief, steady.on) == body:
            yield np.array(steady.position) - centre, np.array(steady.force)


def _spring_forces(
    machine: "DirectMachine", body: str, springs: list[Spring], rest: Floats
) -> Iterator[tuple[Floats, Floats]]:
    for on, to, place, rows in springs:
        pushed = -rows @ rest
        if on == body:
            yield place - machine.centres[body], pushed
        if to == body:
            yield place - machine.centres[body], -pushed


def _rest_on_equal_springs(machine: "DirectMachine") -> tuple[list[Spring], Floats]:
    """Return the equal springs of 1 N/m and the displacements (N,) of the machine on them."""
    brief = machine.brief
    springs: list[Spring] = []
    for station in brief.stations:
        times = 0 if machine.share(station) == 0.0 else station.parallel
        on = body_of(brief, station.on)
        springs += [(on, station.to, np.array(station.position), machine.across(station))] * times
    bodies = machine.free & (np.arange(machine.size) < 6 * len(brief.bodies))
    rest = np.zeros(machine.size)
    if not _held(springs, bodies):
        for c in brief.connections:
            position, on = np.array(c.position), body_of(brief, c.on)
            stiff = np.array(c.stiffness_static or c.stiffness) > 0.0
            rows = machine.place(on, position) - machine.place(c.to, position)
            springs.append((on, c.to, position, stiff[:, None] * rows))
        if not _held(springs, bodies):
            return springs, rest
    mesh = np.ix_(bodies, bodies)
    rest[bodies] = np.linalg.solve(_sum(springs, machine.size)[mesh], carried_weight(machine)[bodies])
    return springs, rest


def _sum(springs: list[Spring], size: int) -> Floats:
    return np.asarray(sum((rows.T @ rows for *_, rows in springs), np.zeros((size, size))))


def _held(springs: list[Spring], bodies: NDArray[np.bool_]) -> bool:
    stiffness = _sum(springs, len(bodies))[np.ix_(bodies, bodies)]
    return int(np.linalg.matrix_rank(stiffness, hermitian=True)) == int(bodies.sum())
