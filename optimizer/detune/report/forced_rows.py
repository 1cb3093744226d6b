"""Judged requirements under noise, pulses, records and run-ups, each with the machine it was judged on."""

from dataclasses import dataclass

from detune.brief.allowable.base import HarmonicAllowable
from detune.brief.allowable.views import Places
from detune.brief.brief import Brief, applies, demanded, state_of
from detune.brief.condition import Condition
from detune.brief.forcing.base import Noise, Transient
from detune.response.assess import states_of
from detune.response.assessment import Assessment, MarginRow
from detune.response.damping_readings import readings_of
from detune.response.direct import DirectMachine
from detune.response.direct_amplitude import follows_amplitude
from detune.response.direct_modes import DirectModes, direct_modes


@dataclass(frozen=True, eq=False)
class ForcedRow:
    """One requirement under the forcing of its condition: what the assessor said, and on what it said it.

    `machine` is in the condition's state, with damping of unknown kind read as in the judged row.
    """

    row: MarginRow
    allowable: HarmonicAllowable
    place: str
    condition: Condition
    machine: DirectMachine
    found: DirectModes
    noises: tuple[Noise, ...]
    transients: tuple[Transient, ...]


def forced_rows(brief: Brief, assessment: Assessment, every: bool = False) -> tuple[ForcedRow, ...]:
    """Return the requirements of all conditions with noise, pulses, records or run-ups, in the brief's order.

    `every`: those of all other conditions too.
    Where parts follow the amplitude of their own vibration, the sources do not act one by one: a condition in
    which the design has such parts is left out.
    """
    # Two limits on one quantity stand in the same order in the brief and in the assessment.
    judged: dict[tuple[str, str, str, str], list[MarginRow]] = {}
    for row in assessment.margins:
        judged.setdefault((row.kind, row.quantity, row.place, row.condition), []).append(row)
    rows: list[ForcedRow] = []
    for state in states_of(brief):
        conditions = [c for c in brief.conditions if c.state == state and (every or _moves_in_time(brief, c))]
        if not conditions:
            continue
        machines = {
            reading: DirectMachine(brief, assessment.design, state_of(brief, state), reading)
            for reading in readings_of(assessment.design.mounts)
        }
        found = {reading: direct_modes(machine, []) for reading, machine in machines.items()}
        for condition in conditions:
            for allowable, place in _pairs(brief, next(iter(machines.values())), condition):
                waiting = judged.get((allowable.kind, allowable.quantity(), place, condition.name))
                if not waiting:
                    continue
                row = waiting.pop(0)
                reading = next((r for r in machines if r is not None and r in row.note), next(iter(machines)))
                if follows_amplitude(machines[reading]):
                    continue
                rows.append(
                    ForcedRow(
                        row=row,
                        allowable=allowable,
                        place=place,
                        condition=condition,
                        machine=machines[reading],
                        found=found[reading],
                        noises=noises_in(brief, condition),
                        transients=transients_in(brief, condition),
                    )
                )
    return tuple(rows)


def tightest_of_each(rows: tuple[ForcedRow, ...]) -> tuple[ForcedRow, ...]:
    """Return of each quantity in each condition the place with the least margin, the least margin first."""
    best: dict[tuple[str, str, str], ForcedRow] = {}
    for row in rows:
        key = (row.row.kind, row.row.quantity, row.row.condition)
        if key not in best or row.row.margin < best[key].row.margin:
            best[key] = row
    return tuple(sorted(best.values(), key=lambda each: each.row.margin))


def noises_in(brief: Brief, condition: Condition) -> tuple[Noise, ...]:
    """Return the random forcing of a condition."""
    return tuple(
        noise
        for forcing in brief.forcing
        if applies(forcing.conditions, condition.name)
        for noise in forcing.noises()
    )


def transients_in(brief: Brief, condition: Condition) -> tuple[Transient, ...]:
    """Return the pulses and records of a condition."""
    return tuple(
        transient
        for forcing in brief.forcing
        if applies(forcing.conditions, condition.name)
        for transient in forcing.transients()
    )


def _moves_in_time(brief: Brief, condition: Condition) -> bool:
    passes = bool(condition.run_up or condition.coast_down)
    return passes or bool(noises_in(brief, condition) or transients_in(brief, condition))


def _pairs(brief: Brief, machine: DirectMachine, condition: Condition) -> list[tuple[HarmonicAllowable, str]]:
    names = Places(
        tuple(point.name for point in brief.points),
        tuple(station.name for station in brief.stations if machine.share(station) > 0.0),
        tuple(body.name for body in brief.bodies),
        tuple(absorber.station.name for absorber in machine.absorbers),
    )
    return [
        (allowable, place)
        for allowable in demanded(brief)[0]
        if isinstance(allowable, HarmonicAllowable)
        and allowable.unit_load() is None
        and applies(allowable.conditions, condition.name)
        for place in allowable.places(names)
    ]
