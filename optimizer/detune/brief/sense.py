"""Statements that are sound each by itself and yet say nothing: limits and forcing that nothing could ever move.

Such a limit would be met by every design, which a reader would take for a proof.
"""

from typing import TYPE_CHECKING, cast

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.at_point import PointAllowable
from detune.brief.allowable.base import HarmonicAllowable
from detune.brief.brief import Brief, applies
from detune.brief.finding import Finding, Path
from detune.brief.forcing.base import Noise, Tone, Transient
from detune.brief.machine import Body
from detune.brief.mass_properties import mass_properties
from detune.brief.statement import FREEDOMS, Direction
from detune.ground.units import show
from detune.physics.rigid_body import attachment

if TYPE_CHECKING:
    from detune.brief.allowable.band_limit import BandLimit
    from detune.brief.allowable.machine_velocity import MachineVelocity
    from detune.brief.allowable.transmissibility import Transmissibility
    from detune.brief.allowable.transmitted_force import TransmittedForce
    from detune.brief.allowable.weighted_acceleration import WeightedAcceleration

# Kinds that watch a point of a body along a direction, beside the motions of a point.
AT_A_POINT = ("weighted-acceleration", "machine-velocity", "band-limit")

# Components below this share of the whole are rounding of the digits people write.
NOTHING = 1e-9


def without_sense(brief: Brief) -> list[Finding]:
    """Return the limits that nothing can reach and the forcing that moves nothing."""
    findings = []
    for index, allowable in enumerate(brief.allowables):
        path: Path = ("allowable", index)
        if isinstance(allowable, PointAllowable) or allowable.kind in AT_A_POINT:
            findings += _point_cannot_move(brief, path, cast("BandLimit", allowable))
        elif allowable.kind in ("transmissibility", "floor-ratio"):
            findings += _transmissibility(brief, path, cast("Transmissibility", allowable))
        elif allowable.kind == "transmitted-force":
            force = cast("TransmittedForce", allowable)
            if force.through == "ground":
                findings += _ground_under_base_motion(brief, path, force)
    if len(brief.bodies) == 1:
        for index, forcing in enumerate(brief.forcing):
            if forcing.floor_direction() is None and _moves_nothing(brief, index):
                free = _list_free(brief.bodies[0])
                expected = f"a forcing that can move the body, which is free in {free} only"
                findings.append(
                    Finding(("forcing", index), forcing.name, expected, depends=("body", "condition"))
                )
    return findings


def _body(brief: Brief, on: str | None) -> Body | None:
    if on is None:
        return brief.bodies[0] if len(brief.bodies) == 1 else None
    return next((body for body in brief.bodies if body.name == on), None)


def _list_free(body: Body) -> str:
    return ", ".join(body.free)


def _rows(body: Body, position: tuple[float, float, float]) -> NDArray[np.float64]:
    """Rows (3, free) of the motion of a place on a body per unit of each of its freedoms."""
    full = attachment(np.array(position) - mass_properties(body).centre)
    return full[:, [FREEDOMS.index(name) for name in body.free]]


def _cannot_move(body: Body, position: tuple[float, float, float], along: Direction) -> bool:
    return bool(np.all(np.abs(np.array(along) @ _rows(body, position)) < NOTHING))


def _point_cannot_move(
    brief: Brief,
    path: Path,
    allowable: "PointAllowable | WeightedAcceleration | MachineVelocity | BandLimit",
) -> list[Finding]:
    along = allowable.along()
    point = next((point for point in brief.points if point.name == allowable.at), None)
    body = None if point is None else _body(brief, point.on)
    if along is None or point is None or body is None or not _cannot_move(body, point.position, along):
        return []
    found = str(allowable.direction)
    expected = f"a direction in which the point can move: its body is free in {_list_free(body)} only"
    return [Finding((*path, "direction"), found, expected, depends=("body", "point"))]


def _transmissibility(brief: Brief, path: Path, allowable: "Transmissibility") -> list[Finding]:
    findings = []
    along = allowable.along()
    if along is not None and getattr(allowable, "of", "force") == "force" and brief.bodies:
        body = brief.bodies[0]
        centre = mass_properties(body).centre
        if _cannot_move(body, (float(centre[0]), float(centre[1]), float(centre[2])), along):
            expected = (
                f"a direction in which the mass centre can move: its body is free in {_list_free(body)} only"
            )
            findings.append(
                Finding((*path, "direction"), str(allowable.direction), expected, depends=("body",))
            )
    reached = [
        tone.order * tone.high
        for condition in brief.conditions
        if applies(allowable.conditions, condition.name)
        for tone in _tones(brief, condition.name)
    ]
    if reached and allowable.lowest_frequency() > max(reached):
        expected = (
            f"a frequency that the excitation reaches: its highest is {show(max(reached), 'frequency')},"
            " and above it nothing would be judged"
        )
        found = show(allowable.lowest_frequency(), "frequency")
        findings.append(Finding((*path, "from_frequency"), found, expected, depends=("condition", "forcing")))
    return findings


def _ground_under_base_motion(brief: Brief, path: Path, allowable: HarmonicAllowable) -> list[Finding]:
    moved = [
        forcing.name
        for forcing in brief.forcing
        if forcing.ground_moves()
        and any(
            applies(allowable.conditions, c.name) and applies(forcing.conditions, c.name)
            for c in brief.conditions
        )
    ]
    if not moved or brief.floor.kind == "rigid":
        return []
    expected = (
        f'the force through the "floor", or conditions without the base motion "{moved[0]}": the free motion of a'
        " flexible floor does not say how the ground under it moves"
    )
    return [Finding((*path, "through"), "ground", expected, depends=("condition", "floor"))]


def _tones(brief: Brief, condition: str) -> list[Tone]:
    """Tones of a condition; a forcing whose shaft is not stated has none (that is a finding of its own)."""
    shafts = next(c.shafts for c in brief.conditions if c.name == condition)
    return [
        tone
        for forcing in brief.forcing
        if applies(forcing.conditions, condition) and forcing.shaft_needed() in (None, *shafts)
        for tone in forcing.tones(shafts)
    ]


def _moves_nothing(brief: Brief, index: int) -> bool:
    """Whether no tone of a forcing has a load on any freedom of the body it acts on."""
    forcing = brief.forcing[index]
    shaft = forcing.shaft_needed()
    if shaft is None:
        tones = forcing.tones({})
    else:
        speeds = next((c.shafts for c in brief.conditions if shaft in c.shafts), None)
        if speeds is None:
            return False
        tones = forcing.tones(speeds)
    body = brief.bodies[0]
    turning = [FREEDOMS.index(name) - 3 for name in body.free if name.startswith("r")]
    acting: list[Tone | Noise | Transient] = [*tones, *forcing.noises(), *forcing.transients()]
    for tone in acting:
        rows = _rows(body, tone.position)
        force, moment = np.array(tone.force), np.array(tone.moment)
        load = force @ rows
        turned = np.zeros(len(body.free), dtype=complex)
        turned[len(body.free) - len(turning) :] = moment[turning]
        scale = np.abs(force).max() * max(1.0, float(np.abs(rows).max())) + np.abs(moment).max()
        if np.any(np.abs(load + turned) > NOTHING * scale):
            return False
    return bool(acting)
