"""Response curves of one design, by the assessor's direct machine, for plots and files."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import HarmonicAllowable, combine
from detune.brief.allowable.views import Places
from detune.brief.brief import Brief, applies, demanded, state_of
from detune.brief.condition import Condition
from detune.brief.dwell import left_of
from detune.brief.forcing.base import Tone
from detune.response.assess import states_of
from detune.response.assessment import Assessment, BarredBand, MarginRow
from detune.response.damping_readings import readings_of
from detune.response.direct import DirectMachine
from detune.response.direct_modes import DirectModes, direct_modes
from detune.response.direct_supremum import (
    Pairs,
    amplitudes_at,
    coherent_sets,
    steady_intervals,
    tones_of,
    unit_tones,
)
from detune.response.direct_views import DirectStatic

Floats = NDArray[np.float64]
BACKGROUND = 240
# Distances from a pole in its half-widths: a drawn resonance keeps its height.
AROUND = np.array([0.0, 0.3, 0.7, 1.2, 2.0, 3.5, 6.0, 12.0])
AROUND_POLE = np.concatenate([-AROUND[:0:-1], AROUND])
TWO_PI = 2.0 * np.pi
# A source within this of the judged value is the only one; a drawn maximum falls short by no more.
ALONE = 1e-3


@dataclass(frozen=True, eq=False)
class ResponseCurve:
    """One harmonic requirement over the speed or frequency of one of its sources.

    `speed` (F,) is in Hz, `value` (F,) in SI; `low` to `high` is the excitation interval in which it is
    judged, and outside it the same forcing is continued to show where the resonances lie. What the other
    sources of the condition add (other speeds, noise, records) is contained, so that the largest value
    inside is the one judged. `source` names the speed; `is_shaft` tells revolutions from frequency.
    `passage`: the source runs through its speeds in a stated time and is judged so; the curve is then
    its own steady state alone, for comparison. `pair`, `sets`, `state` and `rest` are what it was made of: the
    requirement, the tones, the state of the machine, and what the other sources add. `barred`: bands in which the
    machine may not dwell, found for the design.
    """

    row: MarginRow
    source: str
    is_shaft: bool
    speed: Floats
    value: Floats
    low: float
    high: float
    limit: float
    passage: bool
    pair: tuple[HarmonicAllowable, str]
    sets: tuple[tuple[Tone, ...], ...]
    state: str | None
    rest: float
    barred: tuple[tuple[float, float], ...] = ()

    @property
    def inside(self) -> NDArray[np.bool_]:
        """Mask (F,) of the speeds at which the requirement is judged: the interval without its barred bands."""
        return _judged(self.speed, self.low, self.high, self.barred)


@dataclass(frozen=True, eq=False)
class _Sweep:
    """One moving speed: its coherent sets of tones, its interval (Hz) and what it is called."""

    source: str
    is_shaft: bool
    sets: list[tuple[Tone, ...]]
    low: float
    high: float
    passage: bool
    added: bool


def response_curves(brief: Brief, assessment: Assessment) -> tuple[ResponseCurve, ...]:
    """Return the curves of every harmonic requirement of an assessed design, state by state.

    A requirement under noise, pulses or records alone has no curve over speed. Of damping of unknown kind the worse
    reading is drawn, speed by speed.
    """
    rows = {(r.kind, r.quantity, r.place, r.condition): r for r in assessment.margins}
    curves: list[ResponseCurve] = []
    for state in states_of(brief):
        looks = []
        for reading in readings_of(assessment.design.mounts):
            machine = DirectMachine(brief, assessment.design, state_of(brief, state), reading)
            looks.append((machine, direct_modes(machine, steady_intervals(brief, state))))
        for condition in brief.conditions:
            if condition.state == state:
                curves += _condition_curves(looks, condition, rows, assessment.barred)
    return tuple(curves)


def _condition_curves(
    looks: list[tuple[DirectMachine, DirectModes]],
    condition: Condition,
    rows: dict[tuple[str, str, str, str], MarginRow],
    barred: tuple[BarredBand, ...],
) -> list[ResponseCurve]:
    """Return the curves of a condition, at each speed the larger value of the readings of unknown damping."""
    static = DirectStatic(looks[0][0])
    curves = []
    for pairs, sweeps in _swept_together(looks[0][0], condition, rows):
        judged = [rows[_key(*pair, condition)] for pair in pairs]
        for sweep in sweeps:
            speed = np.unique(np.concatenate([_speeds(sweep, found, judged) for _, found in looks]))
            amplitude = np.max([amplitudes_at(each, pairs, sweep.sets, speed) for each, _ in looks], axis=0)
            bands = tuple(
                (b.low, b.high) for b in barred if (b.condition, b.shaft) == (condition.name, sweep.source)
            )
            inside = _judged(speed, sweep.low, sweep.high, bands)
            for (allowable, place), row, value in zip(pairs, judged, amplitude, strict=True):
                offset = float(allowable.offset(static, place)[0])
                rest = 0.0
                if sweep.added:
                    own = float(value[inside].max())
                    rest = _rest(row.value - offset, own, allowable.statistic() == "rms")
                    value = combine(value, np.full(len(speed), rest), allowable.statistic())
                assert row.upper is not None
                curves.append(
                    ResponseCurve(
                        row=row,
                        source=sweep.source,
                        is_shaft=sweep.is_shaft,
                        speed=speed,
                        value=value + offset,
                        low=sweep.low,
                        high=sweep.high,
                        limit=row.upper,
                        passage=sweep.passage,
                        pair=(allowable, place),
                        sets=tuple(sweep.sets),
                        state=condition.state,
                        rest=rest,
                        barred=bands,
                    )
                )
    return curves


def _swept_together(
    machine: DirectMachine, condition: Condition, rows: dict[tuple[str, str, str, str], MarginRow]
) -> list[tuple[Pairs, list[_Sweep]]]:
    """Return the limits of a condition, those under its forcing together and each one under a unit load, with their
    sweeps.
    """
    brief, names = machine.brief, _places(machine)
    known = [
        (a, place)
        for a in demanded(brief)[0]
        if isinstance(a, HarmonicAllowable) and applies(a.conditions, condition.name)
        for place in a.places(names)
        if _key(a, place, condition) in rows
    ]
    forced = tuple(pair for pair in known if pair[0].unit_load() is None)
    groups: list[tuple[Pairs, list[_Sweep]]] = [(forced, _forced_sweeps(brief, condition))] if forced else []
    for pair in known:
        if pair[0].unit_load() is not None:
            groups.append(((pair,), _unit_sweeps(machine, condition, pair[0])))
    return groups


def _places(machine: DirectMachine) -> Places:
    brief = machine.brief
    return Places(
        tuple(p.name for p in brief.points),
        tuple(s.name for s in brief.stations if machine.share(s) > 0.0),
        tuple(b.name for b in brief.bodies),
        tuple(absorber.station.name for absorber in machine.absorbers),
    )


def _judged(
    speed: Floats, low: float, high: float, barred: tuple[tuple[float, float], ...]
) -> NDArray[np.bool_]:
    if not barred:
        return (speed >= low) & (speed <= high)
    inside = np.zeros(len(speed), dtype=bool)
    for first, last in left_of(low, high, barred):
        inside |= (speed >= first) & (speed <= last)
    return inside


def _rest(judged: float, own: float, is_rms: bool) -> float:
    """Return what all other sources together add to one source, zero where it is the only one."""
    if own >= judged * (1.0 - ALONE):
        return 0.0
    return float(np.sqrt(judged**2 - own**2)) if is_rms else judged - own


def _key(allowable: HarmonicAllowable, place: str, condition: Condition) -> tuple[str, str, str, str]:
    return (allowable.kind, allowable.quantity(), place, condition.name)


def _forced_sweeps(brief: Brief, condition: Condition) -> list[_Sweep]:
    by_speed: dict[str, list[Tone]] = {}
    for tone in tones_of(brief, condition):
        by_speed.setdefault(tone.speed, []).append(tone)
    sweeps = []
    for name, tones in by_speed.items():
        passage = name in condition.run_up or name in condition.coast_down
        low, high = tones[0].low, tones[0].high
        sweeps.append(
            _Sweep(name, name in condition.shafts, coherent_sets(tones), low, high, passage, not passage)
        )
    return sweeps


def _unit_sweeps(machine: DirectMachine, condition: Condition, allowable: HarmonicAllowable) -> list[_Sweep]:
    return [
        _Sweep("frequency", False, [(tone,)], tone.low, tone.high, False, False)
        for tone in unit_tones(machine, condition, allowable)
    ]


def _speeds(sweep: _Sweep, found: DirectModes, judged: list[MarginRow]) -> Floats:
    """Return the speeds to draw: the interval, where the judged values are, and the resonances round about."""
    orders = sorted({tones[0].order for tones in sweep.sets})
    poles = np.abs(found.poles.imag)
    resonances = np.concatenate([poles / (TWO_PI * order) for order in orders])
    resonances = resonances[resonances > 0.0]
    below = 0.7 * resonances.min() if len(resonances) else sweep.low
    above = 1.2 * resonances.max() if len(resonances) else sweep.high
    # No further than a factor of ten below and three above: beyond that no drawing can be read.
    first = float(np.clip(below, 0.1 * sweep.low, 0.7 * sweep.low))
    last = float(np.clip(above, 1.3 * sweep.high, 3.0 * sweep.high))
    samples = [np.geomspace(first, last, BACKGROUND), np.linspace(sweep.low, sweep.high, 120)]
    for pole in found.poles:
        width = max(-pole.real, 1e-6 * abs(pole))
        samples += [(pole.imag + AROUND_POLE * width) / (TWO_PI * order) for order in orders]
    at = [row.frequency for row in judged if row.frequency is not None]
    samples.append(np.array([f for f in at if sweep.low <= f <= sweep.high]))
    speed = np.unique(np.concatenate(samples))
    return speed[(speed >= first) & (speed <= last)]
