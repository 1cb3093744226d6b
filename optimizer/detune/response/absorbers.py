"""Absorbers in the matrices of a batch: what the mass of each part adds, and the place of one left out.

An absorber's mass m at a point P of a body moves along the unit direction d by the freedom s of its own, and
with the body across it: x = (1 - d d^T) u_P + d s, with u_P = B q. Its frame, of mass r, moves with P. So

    M += m L^T L + m e e^T + r B^T B,    L = (1 - d d^T) B,    e picks s,

and its spring and dashpot act on s - d^T u_P as a station. A direction out of the vertical lets gravity work
on the motion s - d^T u_P when the body turns by t: to second order its energy is m g (s - d^T u_P) (t x d)_z.

A design without an absorber keeps the freedom s, by itself and far above every other mode: one kilogram,
damped, on a spring to the ground. Nothing moves it, and no result shows it.
"""

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.separation import Separation
from detune.brief.brief import Brief, applies, body_of
from detune.brief.statement import unit_direction
from detune.parts.kinds.mount import Mount
from detune.physics.rigid_body import skew

if TYPE_CHECKING:
    from detune.response.designs import Designs
    from detune.response.model import Frame, Model

Floats = NDArray[np.float64]
# How far above every other mode and excitation the freedom of an absorber that is left out lies.
FAR = 4.0
SPARE_MASS = 1.0
SPARE_DAMPING_RATIO = 0.7


@dataclass(frozen=True, eq=False)
class AbsorberRows:
    """One absorber: its group, the column of its freedom, its direction (3,), and what each of its P parts
    adds.

    mass, geometric, stiffness, viscous (P, n, n): the last two hold the spare freedom alone. weight (P, n)
    static load. added (P,): its whole mass, kg.
    """

    group: int
    column: int
    along: Floats
    mass: Floats
    weight: Floats
    geometric: Floats
    stiffness: Floats
    viscous: Floats
    added: Floats


def absorber_freedoms(brief: Brief) -> list[tuple[str, str]]:
    """Return the freedoms that absorbers add, by name and direction."""
    return [(absorber.name, "along") for absorber in brief.absorbers]


@dataclass(frozen=True, eq=False)
class AbsorberPlace:
    """Where an absorber acts: body, position (3,), direction d (3,), B (3, n) of its point, e (n,) of its freedom."""

    body: str
    position: Floats
    along: Floats
    rows: Floats
    own: Floats

    @property
    def relative(self) -> Floats:
        """Row (n,) of the motion of its mass against the body, along its direction."""
        return np.asarray(self.own - self.along @ self.rows)


def absorber_places(brief: Brief, frame: "Frame") -> tuple[AbsorberPlace, ...]:
    """Return the places of all absorbers."""
    found = []
    for absorber in brief.absorbers:
        point = next(point for point in brief.points if point.name == absorber.at)
        body, position = body_of(brief, point.on), np.array(point.position)
        own = np.zeros(frame.count)
        own[frame.names.index((absorber.name, "along"))] = 1.0
        along = np.array(unit_direction(absorber.direction))
        found.append(AbsorberPlace(body, position, along, frame.motion_rows(body, position), own))
    return tuple(found)


def absorber_rows(
    brief: Brief,
    frame: "Frame",
    places: tuple[AbsorberPlace, ...],
    candidates: tuple[tuple[Mount, ...], ...],
    unit_geometric: Sequence[Floats],
    top: float,
    gravity: Floats,
) -> tuple[AbsorberRows, ...]:
    """Return what the absorbers of a brief add.

    unit_geometric: gravity's geometric stiffness (n, n) of one kilogram at the point of each. top: a
    frequency, Hz, above which no mode lies.
    """
    found = []
    spare = 2.0 * math.pi * FAR * max(top, _highest_excitation(brief))
    for number, (place, geometric) in enumerate(zip(places, unit_geometric, strict=True)):
        group = len(brief.station_groups) + number
        parts = candidates[group]
        across = place.rows - np.outer(place.along, place.along @ place.rows)
        corner = np.outer(place.own, place.own)
        m = np.array([part.moving_mass for part in parts])
        r = np.array([part.riding_mass for part in parts])
        empty = SPARE_MASS * np.array([float(part.pieces == 0) for part in parts])
        turned = gravity @ -skew(place.along) @ frame.rotation_rows(place.body)
        sliding = np.outer(place.relative, turned)
        found.append(
            AbsorberRows(
                group=group,
                column=int(place.own.argmax()),
                along=place.along,
                mass=_each(m, across.T @ across + corner)
                + _each(r, place.rows.T @ place.rows)
                + _each(empty, corner),
                weight=np.outer(m, across.T @ gravity + place.own * (place.along @ gravity))
                + np.outer(r, place.rows.T @ gravity),
                geometric=_each(m + r, geometric) + _each(-m, sliding + sliding.T),
                stiffness=_each(empty * spare**2, corner),
                viscous=_each(2.0 * SPARE_DAMPING_RATIO * empty * spare, corner),
                added=m + r,
            )
        )
    return tuple(found)


def _each(values: Floats, matrix: Floats) -> Floats:
    return np.asarray(values[:, None, None] * matrix)


def _highest_excitation(brief: Brief) -> float:
    """The highest frequency (Hz) of any tone, with the separation the brief asks for above it."""
    asked = [a.limit for a in brief.allowables if isinstance(a, Separation)]
    highest = [
        tone.order * tone.high
        for condition in brief.conditions
        for forcing in brief.forcing
        if applies(forcing.conditions, condition.name)
        for tone in forcing.tones(condition.shafts)
    ]
    return (1.0 + max([0.0, *asked])) * max(highest, default=0.0)


def top_frequency(
    mass: Floats,
    stiffness: Floats,
    columns: list[int],
    springs: Sequence[Sequence[tuple[float, float, Floats]]],
) -> float:
    """Return a frequency (Hz) that no mode exceeds.

    mass, stiffness (n, n): the machine without absorbers, at the stiffest parts; columns: its freedoms.
    springs: for each absorber, of every part it may be the stiffness k, the mass m and the row b (n,) of its
    point along it. By the Loewner order the greatest eigenvalue of M^-1 (K + sum k a a^T) is at most that of
    M^-1 K plus the sum of k a^T M^-1 a, and a^T M^-1 a is at most 1/m + b^T M^-1 b.
    """
    mesh = np.ix_(columns, columns)
    root = np.linalg.inv(np.linalg.cholesky(mass[mesh]))
    greatest = float(np.linalg.eigvalsh(root @ stiffness[mesh] @ root.T)[-1])
    for parts in springs:
        each = (k * (1.0 / m + float(np.sum((root @ row[columns]) ** 2))) for k, m, row in parts)
        greatest += max(each, default=0.0)
    return math.sqrt(max(greatest, 0.0)) / (2.0 * math.pi)


def mass_of(model: "Model", designs: "Designs") -> Floats:
    """Return the mass matrices (D, n, n) of a batch."""
    total = model.mass[designs.step]
    for absorber in model.absorbers:
        total = total + absorber.mass[designs.part[:, absorber.group]]
    return total


def weight_of(model: "Model", designs: "Designs") -> Floats:
    """Return the static loads (D, n) of a batch."""
    total = model.weight[designs.step]
    for absorber in model.absorbers:
        total = total + absorber.weight[designs.part[:, absorber.group]]
    return total


def geometric_of(model: "Model", designs: "Designs") -> Floats:
    """Return gravity's geometric stiffness (D, n, n) of a batch."""
    total = model.geometric[designs.step]
    for absorber in model.absorbers:
        total = total + absorber.geometric[designs.part[:, absorber.group]]
    return total


def spare_stiffness(model: "Model", designs: "Designs") -> Floats | float:
    """Return what holds the freedoms of absorbers that are left out (D, n, n), 0 where there is no absorber."""
    total: Floats | float = 0.0
    for absorber in model.absorbers:
        total = total + absorber.stiffness[designs.part[:, absorber.group]]
    return total


def spare_damping(model: "Model", designs: "Designs") -> Floats | float:
    """Return the damping of the freedoms of absorbers that are left out (D, n, n), 0 where there is no absorber."""
    total: Floats | float = 0.0
    for absorber in model.absorbers:
        total = total + absorber.viscous[designs.part[:, absorber.group]]
    return total


def added_mass(model: "Model", designs: "Designs") -> Floats:
    """Return the mass (D,) in kg that ballast and absorbers add."""
    total = model.ballast_mass[designs.step]
    for absorber in model.absorbers:
        total = total + absorber.added[designs.part[:, absorber.group]]
    return total
