"""The assessor's one-third-octave band values of one design."""

from functools import partial
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import BandAllowable
from detune.brief.brief import applies
from detune.brief.condition import Condition
from detune.brief.forcing.base import Noise, Tone
from detune.physics.octaves import band_edges, band_index, nominal_centre
from detune.physics.spectra import density_at
from detune.response.direct import DirectMachine
from detune.response.direct_coincidence import added, sharing
from detune.response.direct_modes import DirectModes
from detune.response.direct_random import mesh, unit_tone
from detune.response.direct_supremum import coherent_sets, supremum, tones_of
from detune.response.direct_views import DirectTone

Floats = NDArray[np.float64]
TWO_PI = 2.0 * np.pi


def direct_band_ratio(
    machine: DirectMachine, found: DirectModes, condition: Condition, allowable: BandAllowable, place: str
) -> tuple[float, float]:
    """Return the largest ratio of a band's rms to its limit, and the nominal centre (Hz) of that band."""
    by_speed: dict[str, list[Tone]] = {}
    for tone in tones_of(machine.brief, condition):
        by_speed.setdefault(tone.speed, []).append(tone)
    acting = [f for f in machine.brief.forcing if applies(f.conditions, condition.name)]
    noises = [noise for forcing in acting for noise in forcing.noises()]
    linked = sharing(tuple(by_speed.values()))
    worst, at = 0.0, float("nan")
    for band, limit in zip(*allowable.bands(), strict=True):
        each = [
            np.array([_tone_rms(machine, found, tones, allowable, place, int(band))])
            for tones in by_speed.values()
        ]
        square = sum(float(part[0]) ** 2 for part in added(linked, each))
        square += sum(_noise_square(machine, found, noise, allowable, place, int(band)) for noise in noises)
        ratio = float(np.sqrt(square) / limit)
        if ratio > worst:
            worst, at = ratio, float(nominal_centre(band))
    return worst, at


def _tone_rms(
    machine: DirectMachine,
    found: DirectModes,
    tones: list[Tone],
    allowable: BandAllowable,
    place: str,
    band: int,
) -> float:
    """Return the largest rms that tones of one speed put into a band at any of their speeds."""
    low, high = tones[0].low, tones[0].high
    edges = [float(edge) for edge in band_edges(band)]
    sets = coherent_sets(tones)
    orders = sorted({each[0].order for each in sets})
    if high <= low:
        inside = [each for each in sets if int(band_index(each[0].order * low)) == band]
        return float(_rms(machine, inside, allowable, place, np.array([low]))[0]) if inside else 0.0
    cuts = sorted(
        {low, high, *(edge / order for edge in edges for order in orders if low < edge / order < high)}
    )
    largest = 0.0
    for start, end in pairwise(cuts):
        middle = 0.5 * (start + end)
        inside = [each for each in sets if edges[0] <= each[0].order * middle <= edges[1]]
        if inside:
            found_orders = sorted({each[0].order for each in inside})
            amplitude = partial(_rows, machine, inside, allowable, place)
            part = supremum(amplitude, (start, end), found.poles, found_orders)
            largest = max(largest, float(part.value[0]))
    return largest


def _rows(
    machine: DirectMachine, sets: list[tuple[Tone, ...]], allowable: BandAllowable, place: str, speed: Floats
) -> Floats:
    return _rms(machine, sets, allowable, place, speed)[None]


def _rms(
    machine: DirectMachine, sets: list[tuple[Tone, ...]], allowable: BandAllowable, place: str, speed: Floats
) -> Floats:
    """Return the rms (F,) of all sets at speeds (F,) in Hz: linear at one order, mean squares across orders."""
    by_order: dict[float, Floats] = {}
    for tones in sets:
        order = tones[0].order
        view = DirectTone(machine, tones, (TWO_PI * order * speed)[None])
        peak = np.abs(allowable.observed(view, place)[0] @ np.asarray(allowable.along()))
        by_order[order] = by_order.get(order, np.zeros(len(speed))) + peak / np.sqrt(2.0)
    return np.sqrt(sum((rms**2 for rms in by_order.values()), np.zeros(len(speed))))


def _noise_square(
    machine: DirectMachine,
    found: DirectModes,
    noise: Noise,
    allowable: BandAllowable,
    place: str,
    band: int,
) -> float:
    """Return the mean square of a noise's response in a band, by the trapezoidal rule on each segment."""
    edges = [float(edge) for edge in band_edges(band)]
    points = noise.spectrum.frequency
    tone = unit_tone(noise)
    total = 0.0
    for start, end in pairwise(points.tolist()):
        low, high = max(start, edges[0]), min(end, edges[1])
        if high <= low:
            continue
        frequency = np.union1d(mesh(found, low, high), [low, high])
        inner = np.clip(frequency, start * (1.0 + 1e-12), end * (1.0 - 1e-12))
        view = DirectTone(machine, (tone,), TWO_PI * frequency[None])
        moved = np.abs(allowable.observed(view, place)[0] @ np.asarray(allowable.along())) ** 2
        total += float(np.trapezoid(moved * density_at(noise.spectrum, inner), frequency))
    return total
