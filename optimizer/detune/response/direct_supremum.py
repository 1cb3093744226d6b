"""The assessor's supremum of a response over continuous speed ranges."""

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import HarmonicAllowable, SumOfOrders, combine, tone_amplitude
from detune.brief.brief import Brief, applies
from detune.brief.condition import Condition
from detune.brief.dwell import chosen_in
from detune.brief.forcing.base import Tone
from detune.response.direct import DirectMachine
from detune.response.direct_coincidence import added, sharing
from detune.response.direct_floor import beside_reference
from detune.response.direct_modes import DirectModes
from detune.response.direct_motion import direct_passage_values, direct_transient_values
from detune.response.direct_random import RandomPart, direct_noise
from detune.response.direct_views import DirectTone

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
TWO_PI = 2.0 * np.pi
# Samples round a pole in half-widths: close enough that every local maximum is bracketed.
AROUND_POLE = np.concatenate([-np.geomspace(64.0, 0.05, 24), [0.0], np.geomspace(0.05, 64.0, 24)])
BACKGROUND = 160
FINER = 9
ROUNDS = 6
Pairs = tuple[tuple[HarmonicAllowable, str], ...]


def tones_of(brief: Brief, condition: Condition) -> list[Tone]:
    """Return the tones of every forcing that acts in a condition."""
    return [
        tone
        for forcing in brief.forcing
        if applies(forcing.conditions, condition.name)
        for tone in forcing.tones(condition.shafts)
    ]


def moved_shaft(brief: Brief, condition: Condition) -> str | None:
    """Return the shaft whose speeds not to dwell at are found for each design in a condition, or None."""
    chosen = chosen_in(brief, condition)
    return None if chosen is None else chosen.shaft


def steady_intervals(brief: Brief, state: str | None = None) -> list[tuple[float, float]]:
    """Return the excitation intervals (Hz) of the steady conditions in a state, each order its own.

    Orders of a shaft whose speeds not to dwell at are found for each design are left out; `direct_dwell` adds them.
    """
    if brief.floor.kind == "dynamic-stiffness":
        return []
    return sorted(
        {
            (tone.order * tone.low, tone.order * tone.high)
            for condition in brief.conditions
            if condition.steady and condition.state == state
            for tone in tones_of(brief, condition)
            if not tone.broadband and tone.speed != moved_shaft(brief, condition)
        }
    )


@dataclass(frozen=True)
class Supremum:
    """Amplitude of each row over the whole range, and the speed (Hz) of its largest part; both (R,).

    `noise`: what random forcing has in it, None where there is none. `several`: at some speed more than one
    amplitude reproduces itself, and the worst counts.
    """

    value: Floats
    speed: Floats
    noise: RandomPart | None = None
    several: bool = False


def forced_suprema(
    machine: DirectMachine,
    found: DirectModes,
    condition: Condition,
    pairs: Pairs,
    without: str | None = None,
) -> Supremum:
    """Return the values of all rows under the forcing of a condition: tones, noise, records and passages.

    Speeds are independent of each other: peaks add linearly, rms values as squares, but linearly too where two can
    come to one frequency. `without`: a speed left out.
    """
    by_speed: dict[str, list[Tone]] = {}
    for tone in (tone for tone in tones_of(machine.brief, condition) if tone.speed != without):
        by_speed.setdefault(tone.speed, []).append(tone)
    acting = [f for f in machine.brief.forcing if applies(f.conditions, condition.name)]
    parts = []
    steady: list[list[Tone]] = []
    values: list[Floats] = []
    largest = np.full(len(pairs), -np.inf)
    at = np.full(len(pairs), np.nan)
    for speed, tones in by_speed.items():
        low, high = tones[0].low, tones[0].high
        ways = [(low, high, condition.run_up[speed])] if speed in condition.run_up else []
        ways += [(high, low, condition.coast_down[speed])] if speed in condition.coast_down else []
        if ways:
            each = [direct_passage_values(machine, found, coherent_sets(tones), way, pairs) for way in ways]
            parts.append(np.max(each, axis=0))
            continue
        part = _supremum(machine, found, pairs, coherent_sets(tones), (low, high))
        steady.append(tones)
        values.append(part.value)
        at = np.where(part.value > largest, part.speed, at)
        largest = np.maximum(largest, part.value)
    parts += added(sharing(steady), values)
    noises = tuple(noise for forcing in acting for noise in forcing.noises())
    transients = tuple(transient for forcing in acting for transient in forcing.transients())
    random = direct_noise(machine, found, noises, pairs) if noises else None
    if random is not None:
        parts.append(random.value)
    if transients:
        parts.append(direct_transient_values(machine, found, transients, pairs))
    total = np.zeros(len(pairs))
    for part_values in parts:
        for index, (allowable, _) in enumerate(pairs):
            total[index] = combine(total[[index]], part_values[[index]], allowable.statistic())[0]
    return Supremum(total, at, random)


def coherent_sets(tones: Iterable[Tone]) -> list[tuple[Tone, ...]]:
    """Return tones of one speed in sets that add as phasors: same order and stated phase."""
    sets: list[tuple[Tone, ...]] = []
    known: dict[float, int] = {}
    for tone in tones:
        if tone.phase_known and tone.order in known:
            sets[known[tone.order]] = (*sets[known[tone.order]], tone)
            continue
        if tone.phase_known:
            known[tone.order] = len(sets)
        sets.append((tone,))
    return sets


def unit_tones(machine: DirectMachine, condition: Condition, allowable: HarmonicAllowable) -> Iterator[Tone]:
    """Yield the allowable's unit load over each excitation interval, as far as the allowable looks at it."""
    unit = allowable.unit_load()
    assert unit is not None
    body = machine.brief.bodies[0].name
    centre = machine.centres[body]
    along = (complex(unit[1][0]), complex(unit[1][1]), complex(unit[1][2]))
    bands = {(tone.order * tone.low, tone.order * tone.high) for tone in tones_of(machine.brief, condition)}
    for low, high in sorted(bands):
        low = max(low, allowable.lowest_frequency())
        if high < low:
            continue
        yield Tone(
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


def unit_load_suprema(
    machine: DirectMachine,
    found: DirectModes,
    condition: Condition,
    allowable: HarmonicAllowable,
    pairs: Pairs,
) -> Supremum | None:
    """Return the suprema under the allowable's unit load over the excitation intervals, None if none remains."""
    best: Supremum | None = None
    found = beside_reference(machine, found, allowable, tones_of(machine.brief, condition))
    for tone in unit_tones(machine, condition, allowable):
        part = _supremum(machine, found, pairs, [(tone,)], (tone.low, tone.high))
        if best is None:
            best = part
            continue
        larger = part.value > best.value
        best = Supremum(np.where(larger, part.value, best.value), np.where(larger, part.speed, best.speed))
    return best


def amplitudes_at(
    machine: DirectMachine, pairs: Pairs, sets: list[tuple[Tone, ...]], speed: Floats
) -> Floats:
    """Return the amplitude (R, F) of every row at speeds (F,) in Hz, all coherent sets together."""
    sums = [SumOfOrders(allowable.statistic()) for allowable, _ in pairs]
    for tones in sets:
        view = DirectTone(machine, tones, (TWO_PI * tones[0].order * speed)[None])
        for index, (allowable, place) in enumerate(pairs):
            observed = allowable.weighted(allowable.observed(view, place), view.omega / TWO_PI)
            tone = tone_amplitude(observed, allowable.along(), allowable.statistic())[0]
            sums[index].add(tones[0].order, tone)
    return np.stack([each.total() for each in sums])


def _supremum(
    machine: DirectMachine,
    found: DirectModes,
    pairs: Pairs,
    sets: list[tuple[Tone, ...]],
    interval: tuple[float, float],
) -> Supremum:
    orders = sorted({tones[0].order for tones in sets})
    return supremum(lambda speed: amplitudes_at(machine, pairs, sets, speed), interval, found.poles, orders)


def supremum(
    amplitudes: Callable[[Floats], Floats],
    interval: tuple[float, float],
    poles: Complexes,
    orders: list[float],
) -> Supremum:
    """Return the largest amplitude of each row over the interval (Hz) and where it is.

    Samples are laid on a background and round every pole; then each row's sampled local maxima within
    20 % of its largest are closed in on by ever finer samples between their neighbours. Only evaluated
    values count.
    """
    low, high = interval
    if high <= low:
        value = amplitudes(np.array([low]))[:, 0]
        return Supremum(value, np.full(len(value), low))
    samples = [np.linspace(low, high, BACKGROUND)]
    for pole in poles:
        centre, width = pole.imag, max(-pole.real, 1e-6 * abs(pole))
        samples += [(centre + AROUND_POLE * width) / (TWO_PI * order) for order in orders]
    speed = np.unique(np.concatenate(samples))
    speed = speed[(speed >= low) & (speed <= high)]
    value = amplitudes(speed)
    best = value.max(axis=1)
    at = speed[value.argmax(axis=1)]
    row, left, right = _brackets(speed, value, best)
    for _ in range(ROUNDS):
        inside = left[:, None] + (right - left)[:, None] * np.linspace(0.0, 1.0, FINER)
        values = amplitudes(inside.ravel()).reshape(len(value), *inside.shape)[row, np.arange(len(row))]
        peak = values.argmax(axis=1)
        top = values[np.arange(len(row)), peak]
        where = inside[np.arange(len(row)), peak]
        for index in np.flatnonzero(top > best[row]):
            if top[index] > best[row[index]]:
                best[row[index]], at[row[index]] = top[index], where[index]
        step = (right - left) / (FINER - 1)
        left, right = np.maximum(where - step, left), np.minimum(where + step, right)
    return Supremum(best, at)


def _brackets(speed: Floats, value: Floats, best: Floats) -> tuple[NDArray[np.intp], Floats, Floats]:
    """Return row, left and right neighbour of every sampled local maximum near its row's largest."""
    edge = np.full((len(value), 1), -np.inf)
    padded = np.concatenate([edge, value, edge], axis=1)
    peak = (
        (value >= padded[:, :-2]) & (value >= padded[:, 2:]) & (value >= 0.8 * best[:, None]) & (value > 0.0)
    )
    row, column = np.nonzero(peak)
    return row, speed[np.maximum(column - 1, 0)], speed[np.minimum(column + 1, len(speed) - 1)]
