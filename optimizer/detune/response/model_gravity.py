"""Gravity's geometric stiffness of a whole machine in a model, at every ballast step."""

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief, body_of
from detune.brief.mass_properties import MassProperties
from detune.ground.units import STANDARD_GRAVITY
from detune.response.gravity import gravity_stiffness

if TYPE_CHECKING:
    from detune.response.model import ConnectionRows, Frame, StationRows

Floats = NDArray[np.float64]


def geometric_stiffness_of(
    brief: Brief,
    frame: "Frame",
    properties: dict[str, MassProperties],
    stations: "tuple[StationRows, ...]",
    connections: "tuple[ConnectionRows, ...]",
    weight: Floats,
) -> Floats:
    """Return gravity's geometric stiffness (B, n, n), from the forces that equal springs would carry."""
    total = np.zeros((len(weight), frame.count, frame.count))
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
            return total
    rest = np.linalg.solve(equal, weight[:, own].T).T
    steps = np.array([0.0] if brief.ballast is None else brief.ballast.steps)
    down = np.array([0.0, 0.0, -STANDARD_GRAVITY])
    for body in brief.bodies:
        centre = frame.references[body.name]
        arms = [np.zeros(3)]
        forces = [np.repeat(properties[body.name].mass * down[None], len(steps), axis=0)]
        if brief.ballast is not None and body_of(brief, brief.ballast.on) == body.name:
            arms.append(np.array(brief.ballast.position) - centre)
            forces.append(steps[:, None] * down)
        for steady in brief.steady_loads:
            if body_of(brief, steady.on) == body.name:
                arms.append(np.array(steady.position) - centre)
                forces.append(np.repeat(np.array(steady.force)[None], len(steps), axis=0))
        for on, to, position, axes, times, row in holding:
            pushed = -times * (rest @ row.T) @ axes.T
            for end, sign in ((on, 1.0), (to, -1.0)):
                if end == body.name:
                    arms.append(position - centre)
                    forces.append(sign * pushed)
        total += gravity_stiffness(frame.rotation_rows(body.name), arms, forces)
    return total
