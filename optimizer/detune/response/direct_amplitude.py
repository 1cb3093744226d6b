"""The assessor's own search for the amplitude at which parts that follow it work, and the responses there.

Every station works at the peak of its own axial deflection under all that acts in the condition, at each speed of a
tone at that speed's. It is approached from several amplitudes by steps that are made shorter and shorter; where
they come to different ends, the largest response counts.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import HarmonicAllowable, combine
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.brief import applies
from detune.brief.condition import Condition
from detune.brief.forcing.base import Noise, Tone, Transient
from detune.response.direct import DirectMachine
from detune.response.direct_coincidence import added, sharing
from detune.response.direct_modes import direct_modes
from detune.response.direct_motion import direct_passage_values, direct_transient_values
from detune.response.direct_random import direct_noise_values
from detune.response.direct_supremum import Pairs, Supremum, amplitudes_at, coherent_sets, supremum, tones_of

Floats = NDArray[np.float64]
AXIAL = MountDeflection(part="dynamic", direction="axial", limit=1.0)
# Share of the way taken in each step, and how many such steps: shorter ones settle steeper maps.
SHARES = ((0.6, 60), (0.4, 200), (0.2, 400), (0.05, 1200), (0.015, 3000))
CLOSED = 1e-8
# Of several sources together, whose suprema over speed are known to about as much.
CLOSE = 2e-5
# Relative difference from which two ends are two answers.
APART = 1e-3
LEFT_OVER = 100.0
LOOKS = 3


@dataclass(frozen=True, eq=False)
class Source:
    """One thing that acts independently of the others: tones of one speed, passed through or not, noises or records."""

    tones: tuple[Tone, ...] = ()
    ways: tuple[tuple[float, float, float], ...] = ()
    noises: tuple[Noise, ...] = ()
    transients: tuple[Transient, ...] = ()


@dataclass(frozen=True, eq=False)
class WorkingAmplitude:
    """What J sources that act in a condition deflect the stations by. Found when it is first asked for."""

    machine: DirectMachine
    condition: Condition
    sources: tuple[Source, ...]

    @cached_property
    def _found(self) -> tuple[list[Floats], bool]:
        return _deflections(self.machine, self.condition, self.sources)

    @property
    def totals(self) -> tuple[Floats, ...]:
        """Amplitudes (S,) in m at which the parts work: several where the iteration has several ends."""
        return tuple(each.sum(axis=0) for each in self._found[0])

    @property
    def settled(self) -> bool:
        """Whether the amplitude reproduces itself."""
        return self._found[1]

    @property
    def alone(self) -> bool:
        """Whether one steady speed acts alone: parts then work at each speed's own amplitude."""
        return len(self.sources) == 1 and not _works_at_total(self.sources[0])

    @property
    def several(self) -> bool:
        """Whether the sources together come to other amplitudes from large ones than from none."""
        return not self.alone and len(self.totals) > 1

    def beside(self, end: int, number: int) -> Floats:
        """Amplitude (S,) in m of everything but one source, at one end."""
        if len(self.sources) == 1:
            return np.zeros(len(self.machine.stations))
        return np.asarray(np.maximum(self.totals[end] - self._found[0][end][number], 0.0))


def follows_amplitude(machine: DirectMachine) -> bool:
    """Return whether some part of the design has a stiffness that depends on amplitude."""
    return any(mount.amplitude_table is not None for mount in machine.design.mounts)


def working_amplitude(machine: DirectMachine, condition: Condition) -> WorkingAmplitude:
    """Return the amplitude at which the parts work under the forcing of a condition."""
    return WorkingAmplitude(machine, condition, _sources(machine, condition))


def _deflections(
    machine: DirectMachine, condition: Condition, sources: tuple[Source, ...]
) -> tuple[list[Floats], bool]:
    """Return the axial deflections (J, S) in m that each source gives the stations, and whether they settled.

    Started from none and from the greatest amplitude of any table; one where both come to the same end.
    """
    pairs = _watched(machine)
    held = [index for index, station in enumerate(machine.stations) if machine.share(station) > 0.0]
    shape = (len(sources), len(machine.stations))
    settled = True

    def step(deflection: Floats) -> Floats:
        nonlocal settled
        settled = True
        there = np.zeros(shape)
        here = deflection.reshape(shape)
        for number, source in enumerate(sources):
            beside = here.sum(axis=0) - here[number]
            part, found = _values(
                machine, condition, source, pairs, here.sum(axis=0), np.maximum(beside, 0.0)
            )
            there[number, held] = part.value
            settled = settled and found
        return there.reshape(-1, 1)

    start = np.zeros((shape[0] * shape[1], 1))
    if len(sources) == 1 and not _works_at_total(sources[0]):
        return [step(start).reshape(shape)], settled
    tables = [m.amplitude_table for m in machine.design.mounts if m.amplitude_table is not None]
    ends: list[Floats] = []
    every = True
    for level in (0.0, max(table.amplitude[-1] for table in tables)):
        deflection, closed = _approached(lambda a, _: step(a), start + level, 0.1, CLOSE)
        every = every and settled and bool(closed[0])
        end = deflection.reshape(shape)
        totals = [each.sum(axis=0) for each in (*ends[:1], end)]
        if len(totals) == 1 or np.abs(totals[1] - totals[0]).max() > APART * np.max(totals):
            ends.append(end)
    return ends, every


def suprema_at_amplitude(
    machine: DirectMachine, condition: Condition, pairs: Pairs, working: WorkingAmplitude
) -> Supremum:
    """Return the values of rows under the forcing of a condition; infinite where no amplitude reproduces itself."""
    alone = working.alone
    settled = alone or working.settled
    several = False
    worst, where = np.full(len(pairs), -np.inf), np.full(len(pairs), np.nan)
    for end in range(1 if alone else len(working.totals)):
        total, at = np.zeros(len(pairs)), np.full(len(pairs), np.nan)
        steady: list[tuple[Tone, ...]] = []
        of_steady: list[Floats] = []
        apart: list[Floats] = []
        largest = np.full(len(pairs), -np.inf)
        for number, source in enumerate(working.sources):
            beside = working.beside(end, number)
            amplitude = beside if alone else working.totals[end]
            part, found = _values(machine, condition, source, pairs, amplitude, beside)
            settled, several = settled and found, several or part.several
            if source.tones and not source.ways:
                steady.append(source.tones)
                of_steady.append(part.value)
            else:
                apart.append(part.value)
            bigger = np.isfinite(part.speed) & (part.value > largest)
            at, largest = np.where(bigger, part.speed, at), np.where(bigger, part.value, largest)
        for each in (*added(sharing(steady), of_steady), *apart):
            for index, (allowable, _) in enumerate(pairs):
                total[index] = combine(total[[index]], each[[index]], allowable.statistic())[0]
        where, worst = np.where(total > worst, at, where), np.maximum(worst, total)
    return Supremum(worst if settled else np.full(len(pairs), np.inf), where, several=several)


def _sources(machine: DirectMachine, condition: Condition) -> tuple[Source, ...]:
    by_speed: dict[str, list[Tone]] = {}
    for tone in tones_of(machine.brief, condition):
        by_speed.setdefault(tone.speed, []).append(tone)
    found = []
    for speed, tones in by_speed.items():
        low, high = tones[0].low, tones[0].high
        up = ((low, high, condition.run_up[speed]),) if speed in condition.run_up else ()
        down = ((high, low, condition.coast_down[speed]),) if speed in condition.coast_down else ()
        found.append(Source(tones=tuple(tones), ways=(*up, *down)))
    acting = [forcing for forcing in machine.brief.forcing if applies(forcing.conditions, condition.name)]
    noises = tuple(noise for forcing in acting for noise in forcing.noises())
    transients = tuple(transient for forcing in acting for transient in forcing.transients())
    found += [Source(noises=noises)] if noises else []
    return (*found, *([Source(transients=transients)] if transients else []))


def _works_at_total(source: Source) -> bool:
    """Return whether parts work at one amplitude under a source; under tones of a steady speed at each speed's own."""
    return not source.tones or bool(source.ways)


def _watched(machine: DirectMachine) -> tuple[tuple[HarmonicAllowable, str], ...]:
    return tuple((AXIAL, s.name) for s in machine.stations if machine.share(s) > 0.0)


def _values(
    machine: DirectMachine,
    condition: Condition,
    source: Source,
    pairs: Pairs,
    total: Floats,
    beside: Floats,
) -> tuple[Supremum, bool]:
    """Return the values of rows under one source, and whether an amplitude was found at every speed."""
    if not _works_at_total(source):
        return _over_speed(machine, source, pairs, beside)
    at = machine.at_amplitude(total)
    found = direct_modes(at, [])
    if source.tones:
        sets = coherent_sets(source.tones)
        value = np.max([direct_passage_values(at, found, sets, way, pairs) for way in source.ways], axis=0)
    elif source.noises:
        value = direct_noise_values(at, found, source.noises, pairs)
    else:
        value = direct_transient_values(at, found, source.transients, pairs)
    return Supremum(value, np.full(len(pairs), np.nan)), not at.topples


def _over_speed(
    machine: DirectMachine, source: Source, pairs: Pairs, beside: Floats
) -> tuple[Supremum, bool]:
    sets = coherent_sets(source.tones)
    orders = sorted({tones[0].order for tones in sets})
    low, high = source.tones[0].low, source.tones[0].high
    tables = [m.amplitude_table for m in machine.design.mounts if m.amplitude_table is not None]
    least, greatest = min(t.amplitude[0] for t in tables), max(t.amplitude[-1] for t in tables)
    shape = np.ones(len(beside))
    poles = [
        direct_modes(machine.at_amplitude(a * shape), []).poles for a in np.geomspace(least, greatest, LOOKS)
    ]
    settled, several = True, False

    def amplitudes(speed: Floats) -> Floats:
        nonlocal settled, several
        best = np.zeros((len(pairs), len(speed)))
        first: Floats | None = None

        def step(amplitude: Floats, index: NDArray[np.intp]) -> Floats:
            return _deflected(machine, sets, speed[index], beside, amplitude)

        # None, and about one a decade of the tables.
        for level in (0.0, *np.geomspace(least, greatest, int(np.log10(greatest / least)) + 2)):
            amplitude, closed = _approached(step, np.repeat(beside[:, None] + level, len(speed), axis=1))
            settled = settled and bool(np.all(closed))
            first = amplitude if first is None else first
            several = several or bool(
                np.any(np.abs(amplitude - first) > APART * np.maximum(amplitude, first))
            )
            best = np.maximum(best, amplitudes_at(machine.at_amplitude(amplitude), pairs, sets, speed))
        return best

    found = supremum(amplitudes, (low, high), np.concatenate(poles), orders)
    return replace(found, several=several), settled


def _deflected(
    machine: DirectMachine, sets: list[tuple[Tone, ...]], speed: Floats, beside: Floats, amplitude: Floats
) -> Floats:
    """Return the amplitude (S, F) that parts working at `amplitude` (S, F) give at speeds (F,) in Hz."""
    pairs = _watched(machine)
    found = np.repeat(beside[:, None], len(speed), axis=1)
    held = [index for index, station in enumerate(machine.stations) if machine.share(station) > 0.0]
    found[held] += amplitudes_at(machine.at_amplitude(amplitude), pairs, sets, speed)
    return found


def _approached(
    step: Callable[[Floats, NDArray[np.intp]], Floats],
    start: Floats,
    rounds: float = 1.0,
    close: float = CLOSED,
) -> tuple[Floats, NDArray[np.bool_]]:
    """Return columns (S, K) with a = step(a) to `close`, and which closed; `rounds` scales how long it is tried."""
    value = start.copy()
    missing = np.full(start.shape[1], np.inf)
    for share, count in SHARES:
        for _ in range(int(np.ceil(count * rounds))):
            active = np.flatnonzero(missing > close)
            if not len(active):
                return value, missing <= LEFT_OVER * close
            change = step(value[:, active], active) - value[:, active]
            size = np.maximum(
                np.abs(value[:, active]).max(axis=0), np.abs(value[:, active] + change).max(axis=0)
            )
            missing[active] = np.abs(change).max(axis=0) / np.where(size > 0.0, size, 1.0)
            value[:, active] += np.where(missing[active] > close, share, 0.0) * change
    return value, missing <= LEFT_OVER * close
