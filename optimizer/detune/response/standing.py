"""A machine that does not stand on its parts, told in a sentence with what it could carry and how high it could be."""

import numpy as np
from numpy.typing import NDArray

from detune.brief.mass_properties import mass_properties
from detune.ground.units import STANDARD_GRAVITY, show
from detune.physics.gravity import critical_height
from detune.physics.rigid_body import attachment
from detune.response.design import ballast_of
from detune.response.direct import FLOOR, DirectMachine
from detune.response.direct_views import DirectStatic

Floats = NDArray[np.float64]
IN_PLANE = 1e-9


def toppling(static: DirectStatic) -> str | None:
    """Return the sentence for a machine that would topple under its own weight, None for one that stands."""
    machine = static.machine
    times = float(static.weight_to_topple()[0])
    if not times < 1.0:
        return None
    state = "" if machine.state is None else f" in the state {machine.state.name}"
    weight = _total(machine)[0] * STANDARD_GRAVITY
    sentence = (
        f"The machine does not stand{state}: on these parts it topples at {show(times * weight, 'force')}, and it"
        f" weighs {show(weight, 'force')}."
    )
    heights = standing_height(machine)
    if heights is None:
        return sentence
    height, critical = heights
    return (
        f"{sentence} Its mass centre lies {show(height, 'length')} above its mounts and may lie no higher than"
        f" {show(critical, 'length')} there."
    )


def standing_height(machine: DirectMachine) -> tuple[float, float] | None:
    """Return height and critical height (m) of the mass centre above the mounts (physics.gravity.critical_height).

    None where they do not say it all: several bodies, mounts at different heights, a flexible floor, curves, given
    connections or steady loads, or directions that are held.
    """
    brief = machine.brief
    plain = len(brief.bodies) == 1 and not brief.connections and not brief.steady_loads
    plain = plain and machine.floor is None and machine.elastic is None and machine.rest is None
    carrying = [station for station in brief.stations if machine.share(station) > 0.0]
    if not plain or int(machine.free.sum()) != 6 or any(station.to != FLOOR for station in carrying):
        return None
    levels = [station.position[2] for station in carrying]
    if max(levels) - min(levels) > IN_PLANE:
        return None
    mass, centre = _total(machine)
    foot = np.array([centre[0], centre[1], levels[0]])
    own = machine.stiffness(None).real[:6, :6]
    # The body's freedoms at its own reference point, moved by a unit motion of the foot.
    arm = machine.centres[brief.bodies[0].name] - foot
    moved = np.vstack([attachment(arm), np.hstack([np.zeros((3, 3)), np.eye(3)])])
    critical = float(critical_height(moved.T @ own @ moved, mass * STANDARD_GRAVITY))
    return float(centre[2] - levels[0]), critical


def _total(machine: DirectMachine) -> tuple[float, Floats]:
    """Return mass (kg) and centre (3,) of everything that is carried, the ballast included."""
    brief = machine.brief
    pieces = [(p.mass, p.centre) for p in (mass_properties(body) for body in brief.bodies)]
    if brief.ballast is not None and machine.design.ballast > 0.0:
        box = ballast_of(brief, machine.design)
        pieces.append((box.mass, np.array(box.centre)))
    for absorber in machine.absorbers:
        pieces.append((absorber.mount.riding_mass + absorber.mount.moving_mass, absorber.position))
    mass = sum(each for each, _ in pieces)
    return mass, np.sum([each * centre for each, centre in pieces], axis=0) / mass
