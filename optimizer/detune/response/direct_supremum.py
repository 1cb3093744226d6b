"""The assessor's supremum of a response over continuous speed ranges."""

from collections.abc import Callable, Iterable

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable import HarmonicAllowable
from detune.brief.allowable.base import combine, tone_amplitude
from detune.brief.brief import Brief, applies
from detune.brief.condition import Condition
from detune.brief.forcing import Tone
from detune.response.direct import DirectMachine
from detune.response.direct_modes import DirectModes
from detune.response.direct_views import DirectTone

Floats = NDArray[np.float64]
TWO_PI = 2.0 * np.pi
# Samples round a pole in half-widths: close enough that every local maximum is bracketed.
AROUND_POLE = np.concatenate([-np.geomspace(64.0, 0.05, 24), [0.0], np.geomspace(0.05, 64.0, 24)])
BACKGROUND = 160


def tones_of(brief: Brief, condition: Condition) -> list[Tone]:
    """Return the tones of every forcing that acts in a condition."""
    return [
        tone
        for forcing in brief.forcing
        if applies(forcing.conditions, condition.name)
        for tone in forcing.tones(condition.shafts)
    ]


def steady_intervals(brief: Brief) -> list[tuple[float, float]]:
    """Return the excitation intervals (Hz) of the steady conditions, each order its own."""
    return sorted(
        {
            (tone.order * tone.low, tone.order * tone.high)
            for condition in brief.conditions
            if condition.steady
            for tone in tones_of(brief, condition)
        }
    )


def harmonic_value(
    machine: DirectMachine, found: DirectModes, condition: Condition, allowable: HarmonicAllowable, place: str
) -> tuple[float, float | None]:
    """Return the amplitude of a limited response in a condition, and the speed (Hz) of its largest part."""
    if allowable.unit_load() is not None:
        return _largest_under_unit_load(machine, found, condition, allowable, place)
    by_speed: dict[str, list[Tone]] = {}
    for tone in tones_of(machine.brief, condition):
        by_speed.setdefault(tone.speed, []).append(tone)
    total = np.zeros(1)
    at: float | None = None
    largest = -1.0
    for tones in by_speed.values():
        value, speed = _supremum(machine, found, allowable, place, coherent_sets(tones), (tones[0].low, tones[0].high))
        total = combine(total, np.array([value]), allowable.statistic())
        if value > largest:
            largest, at = value, speed
    return float(total[0]), at


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


def _largest_under_unit_load(
    machine: DirectMachine, found: DirectModes, condition: Condition, allowable: HarmonicAllowable, place: str
) -> tuple[float, float | None]:
    unit = allowable.unit_load()
    assert unit is not None
    body = machine.brief.bodies[0].name
    centre = machine.centres[body]
    along = (complex(unit[1][0]), complex(unit[1][1]), complex(unit[1][2]))
    best: tuple[float, float | None] = (0.0, None)
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
        value, speed = _supremum(machine, found, allowable, place, [(tone,)], (low, high))
        if value > best[0]:
            best = (value, speed)
    return best


def amplitude_at(
    machine: DirectMachine, allowable: HarmonicAllowable, place: str, sets: list[tuple[Tone, ...]], speed: Floats
) -> Floats:
    """Return the amplitude (F,) of a limited response at speeds (F,) in Hz, all sets together."""
    total: Floats | None = None
    for tones in sets:
        view = DirectTone(machine, tones, (TWO_PI * tones[0].order * speed)[None])
        tone = tone_amplitude(allowable.phasor(view, place), allowable.along(), allowable.statistic())[0]
        total = tone if total is None else combine(total, tone, allowable.statistic())
    assert total is not None
    return total


def _supremum(
    machine: DirectMachine,
    found: DirectModes,
    allowable: HarmonicAllowable,
    place: str,
    sets: list[tuple[Tone, ...]],
    interval: tuple[float, float],
) -> tuple[float, float]:
    def amplitude(speed: Floats) -> Floats:
        return amplitude_at(machine, allowable, place, sets, speed)

    orders = sorted({tones[0].order for tones in sets})
    return supremum(amplitude, interval, found.poles, orders)


def supremum(
    amplitude: Callable[[Floats], Floats], interval: tuple[float, float], poles: NDArray[np.complex128], orders: list[float]
) -> tuple[float, float]:
    """Return the largest amplitude over the interval (Hz) and where it is.

    Samples are laid on a background and round every pole; each sampled local maximum within 20 % of the
    largest is then refined by a bounded search between its neighbours, and only evaluated values count.
    """
    low, high = interval
    if high <= low:
        return float(amplitude(np.array([low]))[0]), low
    samples = [np.linspace(low, high, BACKGROUND)]
    for pole in poles:
        centre, width = pole.imag, max(-pole.real, 1e-6 * abs(pole))
        for order in orders:
            samples.append((centre + AROUND_POLE * width) / (TWO_PI * order))
    speed = np.unique(np.concatenate(samples))
    speed = speed[(speed >= low) & (speed <= high)]
    value = amplitude(speed)
    best = int(np.argmax(value))
    largest, at = float(value[best]), float(speed[best])
    padded = np.concatenate([[-np.inf], value, [-np.inf]])
    peaks = np.flatnonzero((value >= padded[:-2]) & (value >= padded[2:]) & (value >= 0.8 * largest))
    for peak in peaks:
        ends = float(speed[max(peak - 1, 0)]), float(speed[min(peak + 1, len(speed) - 1)])
        refined, where = _refine(amplitude, *ends)
        if refined > largest:
            largest, at = refined, where
    return largest, at


def _refine(amplitude: Callable[[Floats], Floats], low: float, high: float) -> tuple[float, float]:
    from scipy.optimize import minimize_scalar

    found = minimize_scalar(
        lambda speed: -float(amplitude(np.array([speed]))[0]),
        bounds=(low, high),
        method="bounded",
        options={"xatol": 1e-7 * high},
    )
    return -float(found.fun), float(found.x)
