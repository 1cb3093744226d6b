"""Forces into the floor and movement of the named points, limited or not, for who builds round the machine."""

from dataclasses import dataclass

import numpy as np

from detune.brief.allowable.base import HarmonicAllowable
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.relative_motion import RelativeMotion
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.brief import Brief, applies, state_of
from detune.brief.condition import Condition
from detune.report.force_magnitudes import ForceMagnitudes
from detune.response.assess import states_of
from detune.response.assessment import Assessment
from detune.response.damping_readings import readings_of
from detune.response.direct import DirectMachine
from detune.response.direct_modes import DirectModes, direct_modes
from detune.response.direct_supremum import forced_suprema, steady_intervals, tones_of

AXES = ("x", "y", "z")


@dataclass(frozen=True)
class ServiceLoad:
    """One peak value over a condition: `unit` is a kind of unit, `frequency` (Hz) where it occurs, None under
    noise, records and passages."""

    condition: str
    what: str
    place: str
    direction: str
    unit: str
    value: float
    frequency: float | None
    is_shaft: bool


def service_loads(brief: Brief, assessment: Assessment) -> tuple[ServiceLoad, ...]:
    """Return the peak force into the floor along each axis and the peak movement of each named point.

    Phasor sums over all parts and connections, and beside them the sum of the magnitudes; suprema over the
    continuous range as in the assessment. Where the
    floor itself is moved, points are seen from the floor: with it the whole building or vehicle moves.
    """
    loads = []
    for state in states_of(brief):
        machines = [
            DirectMachine(brief, assessment.design, state_of(brief, state), reading)
            for reading in readings_of(assessment.design.mounts)
        ]
        found = [direct_modes(machine, steady_intervals(brief, state)) for machine in machines]
        for condition in brief.conditions:
            if condition.state == state:
                loads += _in_condition(machines, found, condition)
    return tuple(loads)


def _in_condition(
    machines: list[DirectMachine], found: list[DirectModes], condition: Condition
) -> list[ServiceLoad]:
    """Return the loads of a condition, of each the largest over the readings of unknown damping."""
    brief = machines[0].brief
    tones = tones_of(brief, condition)
    is_shaft = bool(tones) and all(tone.speed in condition.shafts for tone in tones)
    wanted = _wanted(machines[0], _moves_floor(brief, condition))
    pairs = tuple((allowable, place) for allowable, place, _, _ in wanted)
    results = [forced_suprema(*look, condition, pairs) for look in zip(machines, found, strict=True)]
    values, speeds = (np.stack(x) for x in zip(*((r.value, r.speed) for r in results), strict=True))
    loads = []
    for index, (allowable, place, what, axis) in enumerate(wanted):
        worst = int(np.argmax(values[:, index]))
        value, speed = float(values[worst, index]), float(speeds[worst, index])
        at = None if np.isnan(speed) else speed
        loads.append(ServiceLoad(condition.name, what, place, axis, allowable.unit, value, at, is_shaft))
    return loads


def _moves_floor(brief: Brief, condition: Condition) -> bool:
    return any(
        forcing.floor_direction() is not None
        for forcing in brief.forcing
        if applies(forcing.conditions, condition.name)
    )


def _wanted(machine: DirectMachine, from_floor: bool) -> list[tuple[HarmonicAllowable, str, str, str]]:
    """Return what is looked at: allowable, place, what it is, axis. The limits play no part here."""
    # Every kind of statement needs a measure and a limit to be built.
    common = {"measure": "peak", "limit": 1.0}
    wanted: list[tuple[HarmonicAllowable, str, str, str]] = []
    for axis in AXES:
        force = TransmittedForce.model_validate(
            {"kind": "transmitted-force", "through": "floor", "direction": axis, **common}
        )
        wanted.append((force, "floor", "dynamic force into the floor", axis))
    for axis in AXES:
        apart = ForceMagnitudes.of(machine, axis)
        wanted.append((apart, "floor", "sum of the magnitudes through all parts", axis))
    for point in machine.brief.points:
        for axis in AXES:
            stated = {"at": point.name, "direction": axis, **common}
            if from_floor:
                seen = RelativeMotion.model_validate({"kind": "relative-motion", "to": "floor", **stated})
                wanted.append((seen, point.name, "movement against the floor", axis))
            else:
                moved = Displacement.model_validate({"kind": "displacement", **stated})
                wanted.append((moved, point.name, "displacement", axis))
    return wanted
