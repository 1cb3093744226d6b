"""Response curves of one design, by the assessor's direct machine, for plots and files."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable import HarmonicAllowable
from detune.brief.allowable.base import combine
from detune.brief.allowable.views import Places
from detune.brief.brief import Brief, applies, demanded
from detune.brief.condition import Condition
from detune.brief.forcing import Tone
from detune.response.assessment import Assessment, MarginRow
from detune.response.direct import DirectMachine
from detune.response.direct_modes import DirectModes, direct_modes
from detune.response.direct_supremum import (
    Pairs,
    amplitudes_at,
    coherent_sets,
    steady_intervals,
    supremum,
    tones_of,
)
from detune.response.direct_views import DirectStatic

Floats = NDArray[np.float64]
BACKGROUND = 240
# Distances from a pole in its half-widths: a drawn resonance keeps its height.
AROUND = np.array([0.0, 0.3, 0.7, 1.2, 2.0, 3.5, 6.0, 12.0])
AROUND_POLE = np.concatenate([-AROUND[:0:-1], AROUND])
TWO_PI = 2.0 * np.pi


@dataclass(frozen=True)
class ResponseCurve:
    """One harmonic requirement over the speed or frequency of one of its sources.

    `speed` (F,) is in Hz, `value` (F,) in SI; `low` to `high` is the excitation interval in which it is
    judged, and outside it the same forcing is continued to show where the resonances lie. Where other
    sources have speeds of their own, their largest amplitudes are added, so that the largest value
    inside is the one judged. `source` names the speed; `is_shaft` tells revolutions from frequency.
    """

    row: MarginRow
    source: str
    is_shaft: bool
    speed: Floats
    value: Floats
    low: float
    high: float
    limit: float

    @property
    def inside(self) -> NDArray[np.bool_]:
        """Mask (F,) of the speeds at which the requirement is judged."""
        return (self.speed >= self.low) & (self.speed <= self.high)


@dataclass(frozen=True)
class _Sweep:
    """One moving speed: its coherent sets of tones, its interval (Hz) and what it is called."""

    source: str
    is_shaft: bool
    sets: list[tuple[Tone, ...]]
    low: float
    high: float


def response_curves(brief: Brief, assessment: Assessment) -> tuple[ResponseCurve, ...]:
    """Return the curves of every harmonic requirement of an assessed design, in the order of its margins."""
    machine = DirectMachine(brief, assessment.design)
    found = direct_modes(machine, steady_intervals(brief))
    static = DirectStatic(machine)
    names = Places(
        tuple(p.name for p in brief.points),
        tuple(s.name for s in brief.stations),
        tuple(b.name for b in brief.bodies),
    )
    allowables = [a for a in demanded(brief)[0] if isinstance(a, HarmonicAllowable)]
    rows = {(r.kind, r.quantity, r.place, r.condition): r for r in assessment.margins}
    curves: list[ResponseCurve] = []
    for condition in brief.conditions:
        judged = [
            (a, place) for a in allowables if applies(a.conditions, condition.name) for place in a.places(names)
        ]
        known = [pair for pair in judged if _key(*pair, condition) in rows]
        forced = tuple(pair for pair in known if pair[0].unit_load() is None)
        groups = [(forced, _forced_sweeps(brief, condition))] if forced else []
        for pair in known:
            if pair[0].unit_load() is not None:
                groups.append(((pair,), _unit_sweeps(machine, condition, pair[0])))
        for pairs, sweeps in groups:
            added = pairs[0][0].unit_load() is None
            for sweep, speed, values in _values(machine, found, pairs, sweeps, added):
                for (allowable, place), value in zip(pairs, values, strict=True):
                    row = rows[_key(allowable, place, condition)]
                    assert row.upper is not None
                    total = value + allowable.offset(static, place)[0]
                    curves.append(
                        ResponseCurve(
                            row, sweep.source, sweep.is_shaft, speed, total, sweep.low, sweep.high, row.upper
                        )
                    )
    return tuple(curves)


def _key(allowable: HarmonicAllowable, place: str, condition: Condition) -> tuple[str, str, str, str]:
    return (allowable.kind, allowable.quantity(), place, condition.name)


def _forced_sweeps(brief: Brief, condition: Condition) -> list[_Sweep]:
    by_speed: dict[str, list[Tone]] = {}
    for tone in tones_of(brief, condition):
        by_speed.setdefault(tone.speed, []).append(tone)
    return [
        _Sweep(name, name in condition.shafts, coherent_sets(tones), tones[0].low, tones[0].high)
        for name, tones in by_speed.items()
    ]


def _unit_sweeps(machine: DirectMachine, condition: Condition, allowable: HarmonicAllowable) -> list[_Sweep]:
    unit = allowable.unit_load()
    assert unit is not None
    body = machine.brief.bodies[0].name
    centre = machine.centres[body]
    along = (complex(unit[1][0]), complex(unit[1][1]), complex(unit[1][2]))
    sweeps = []
    bands = {(tone.order * tone.low, tone.order * tone.high) for tone in tones_of(machine.brief, condition)}
    for low, high in sorted(bands):
        low = max(low, allowable.lowest_frequency())
        if high < low:
            continue
        tone = Tone(
            source="unit load",
            speed="unit load",
            order=1.0,
            low=low,
            high=high,
            on=body,
            position=(float(centre[0]), float(centre[1]), float(centre[2])),
            force=along if unit[0] == "force" else (0j, 0j, 0j),
            base=along if unit[0] == "base" else None,
        )
        sweeps.append(_Sweep("frequency", False, [(tone,)], low, high))
    return sweeps


def _values(
    machine: DirectMachine, found: DirectModes, pairs: Pairs, sweeps: list[_Sweep], added: bool
) -> list[tuple[_Sweep, Floats, Floats]]:
    """Return for each sweep its speeds (F,) and the amplitudes (R, F); `added` sources act together."""
    largest: list[Floats] = []
    several = added and len(sweeps) > 1
    for sweep in sweeps if several else []:
        orders = sorted({tones[0].order for tones in sweep.sets})

        def amplitudes(speed: Floats, sweep: _Sweep = sweep) -> Floats:
            return amplitudes_at(machine, pairs, sweep.sets, speed)

        largest.append(supremum(amplitudes, (sweep.low, sweep.high), found.poles, orders).value)
    result = []
    for index, sweep in enumerate(sweeps):
        speed = _speeds(sweep, found)
        value = amplitudes_at(machine, pairs, sweep.sets, speed)
        for other, peak in enumerate(largest):
            if other != index:
                for row, (allowable, _) in enumerate(pairs):
                    value[row] = combine(value[row], np.full(len(speed), peak[row]), allowable.statistic())
        result.append((sweep, speed, value))
    return result


def _speeds(sweep: _Sweep, found: DirectModes) -> Floats:
    """Return the speeds to draw: the interval, and beyond it as far as the nearest resonances reach."""
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
    speed = np.unique(np.concatenate(samples))
    return speed[(speed >= first) & (speed <= last)]
