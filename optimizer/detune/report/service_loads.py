"""Forces into the floor and movement of the named points, limited or not, for who builds round the machine."""

from dataclasses import dataclass

import numpy as np

from detune.brief.allowable import Displacement, HarmonicAllowable, TransmittedForce
from detune.brief.brief import Brief, state_of
from detune.response.assess import states_of
from detune.response.assessment import Assessment
from detune.response.direct import DirectMachine
from detune.response.direct_modes import direct_modes
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

    Phasor sums over all parts and connections; suprema over the continuous range as in the assessment.
    """
    wanted: list[tuple[HarmonicAllowable, str, str, str]] = []
    for axis in AXES:
        # The limit is needed to build the statement and plays no part here.
        force = TransmittedForce.model_validate(
            {
                "kind": "transmitted-force",
                "through": "floor",
                "direction": axis,
                "measure": "peak",
                "limit": 1.0,
            }
        )
        wanted.append((force, "floor", "dynamic force into the floor", axis))
    for point in brief.points:
        for axis in AXES:
            moved = Displacement.model_validate(
                {"kind": "displacement", "at": point.name, "direction": axis, "measure": "peak", "limit": 1.0}
            )
            wanted.append((moved, point.name, "displacement", axis))
    pairs = tuple((allowable, place) for allowable, place, _, _ in wanted)
    loads = []
    for state in states_of(brief):
        machine = DirectMachine(brief, assessment.design, state_of(brief, state))
        found = direct_modes(machine, steady_intervals(brief, state))
        for condition in brief.conditions:
            if condition.state != state:
                continue
            tones = tones_of(brief, condition)
            is_shaft = bool(tones) and all(tone.speed in condition.shafts for tone in tones)
            result = forced_suprema(machine, found, condition, pairs)
            for (allowable, place, what, axis), value, speed in zip(
                wanted, result.value, result.speed, strict=True
            ):
                at = None if np.isnan(speed) else float(speed)
                loads.append(
                    ServiceLoad(condition.name, what, place, axis, allowable.unit, float(value), at, is_shaft)
                )
    return tuple(loads)
