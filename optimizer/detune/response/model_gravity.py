"""Gravity's geometric stiffness of a whole machine in a model, at every ballast step."""

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief, body_of
from detune.brief.mass_properties import MassProperties
from detune.response.ballast import BallastStep
from detune.response.gravity import gravity_stiffness

if TYPE_CHECKING:
    from detune.response.model import ConnectionRows, Frame, StationRows

Floats = NDArray[np.float64]


Dead = dict[str, list[tuple[Floats, Floats]]]
"""Forces besides the stations', by body: arm from its centre, (3,) or (B, 3), and force (B, 3)."""


@dataclass(frozen=True, eq=False)
class EqualSprings:
    """The springs that carry the static forces: on, to, position, axes, how many, rows over the bodies' freedoms.

    `stiffness` is their sum, None where they do not hold the machine.
    """

    frame: "Frame"
    own: list[int]
    holding: tuple[tuple[str, str, Floats, Floats, int, Floats], ...]
    stiffness: Floats | None

    def geometric(self, bodies: tuple[str, ...], weight: Floats, dead: Dead) -> Floats:
        """Return the geometric stiffness (B, n, n) under static loads (B, n) and the dead forces they stand for."""
        total = np.zeros((len(weight), self.frame.count, self.frame.count))
        if self.stiffness is None:
            return total
        rest = np.linalg.solve(self.stiffness, weight[:, self.own].T).T
        for body in bodies:
            centre = self.frame.references[body]
            arms = [arm for arm, _ in dead.get(body, [])]
            forces = [force for _, force in dead.get(body, [])]
            for on, to, position, axes, times, row in self.holding:
                pushed = -times * (rest @ row.T) @ axes.T
                for end, sign in ((on, 1.0), (to, -1.0)):
                    if end == body:
                        arms.append(position - centre)
                        forces.append(sign * pushed)
            if arms:
                total += gravity_stiffness(self.frame.rotation_rows(body), arms, forces)
        return total


def equal_springs(
    frame: "Frame", stations: "tuple[StationRows, ...]", connections: "tuple[ConnectionRows, ...]"
) -> EqualSprings:
    """Return the equal springs at all stations, with the given connections where those do not hold the machine."""
    own = [column for column, (name, _) in enumerate(frame.names) if name in frame.references]
    rows = [station.rows[:, own] for station in stations]
    equal = sum(s.parallel * row.T @ row for s, row in zip(stations, rows, strict=True))
    holding = tuple(
        (s.on, s.to, s.position, s.axes, s.parallel, row) for s, row in zip(stations, rows, strict=True)
    )
    if np.linalg.matrix_rank(equal, hermitian=True) < len(own):
        # What the stations do not hold the given connections do, along the axes on which they are stiff.
        for c in connections:
            row = np.where(c.stiffness_static > 0.0, 1.0, 0.0)[:, None] * c.rows[:, own]
            equal = equal + row.T @ row
            holding += ((c.on, c.to, c.position, np.eye(3), 1, row),)
        if np.linalg.matrix_rank(equal, hermitian=True) < len(own):
            return EqualSprings(frame, own, holding, None)
    return EqualSprings(frame, own, holding, np.asarray(equal))


def geometric_stiffness_of(
    brief: Brief,
    springs: EqualSprings,
    properties: dict[str, MassProperties],
    ballast: tuple[BallastStep, ...],
    weight: Floats,
    down: Floats,
) -> Floats:
    """Return gravity's geometric stiffness (B, n, n), from the forces that equal springs would carry.

    down: force (3,) in N on each kilogram.
    """
    steps = np.array([step.mass for step in ballast])
    places = np.array([step.centre for step in ballast])
    dead: Dead = {}
    for body in brief.bodies:
        centre = springs.frame.references[body.name]
        forces = [
            (np.zeros(3), np.repeat(properties[body.name].mass * down[None], len(steps), axis=0)),
        ]
        if brief.ballast is not None and body_of(brief, brief.ballast.on) == body.name:
            forces.append((places - centre, steps[:, None] * down))
        for steady in brief.steady_loads:
            if body_of(brief, steady.on) == body.name:
                force = np.repeat(np.array(steady.force)[None], len(steps), axis=0)
                forces.append((np.array(steady.position) - centre, force))
        dead[body.name] = forces
    return springs.geometric(tuple(body.name for body in brief.bodies), weight, dead)


def unit_geometric(
    brief: Brief, springs: EqualSprings, body: str, position: Floats, gravity: Floats
) -> Floats:
    """Return the geometric stiffness (n, n) of one kilogram at a place on a body, gravity (3,) in m/s^2."""
    down = gravity[None]
    weight = down @ springs.frame.motion_rows(body, position)
    dead: Dead = {body: [(position - springs.frame.references[body], down)]}
    return np.asarray(springs.geometric(tuple(each.name for each in brief.bodies), weight, dead)[0])
