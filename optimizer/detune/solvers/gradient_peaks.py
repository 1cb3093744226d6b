"""The peaks of limited responses over whole ranges of speed, and their slopes by the unknowns.

The largest response over a range is where it peaks, and its slope by an unknown is the slope of the response at that
frequency held fixed (Danskin's theorem): the peak moves, but there the response does not change with frequency. Every
local peak that is high enough to matter is kept as a row of its own, so that two equal peaks both push.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import TONE_FACTOR, HarmonicAllowable
from detune.physics import envelope
from detune.response.loads import Family
from detune.response.model import Model
from detune.solvers.gradient_probe import tone_map
from detune.solvers.gradient_state import StateAt
from detune.solvers.gradient_tone import Tones, pulled_back, tones

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
TWO_PI = 2.0 * np.pi
# Rows kept for each limit and speed; a lower peak than this share of the largest is left out.
PEAKS = 3
LOWEST = 0.3
BACKGROUND = 12
BESIDE = (0.05, 0.3)
NARROWED = 3
# Spacings, as shares of the frequency, at which a peak is polished.
POLISHED = (4e-3, 4e-4)


@dataclass(frozen=True)
class Observed:
    """R limits on responses as maps (R, size, 3) of the features, their directions (R, 3), nan for a resultant.

    `flat` (size, 3 R) is the same maps side by side; `factor` and `energy` (R,) are those of the limits' statistics.
    """

    pairs: tuple[tuple[HarmonicAllowable, str], ...]
    maps: Floats
    along: Floats
    flat: Complexes
    factor: Floats
    energy: NDArray[np.bool_]

    @property
    def count(self) -> int:
        return len(self.pairs)


def observed(pairs: tuple[tuple[HarmonicAllowable, str], ...], model: Model) -> Observed:
    """The limits as maps. Raises NoMap where one has none."""
    maps = np.array([tone_map(allowable, place, model) for allowable, place in pairs])
    directions = [allowable.along() for allowable, _ in pairs]
    along = np.array([(np.nan,) * 3 if each is None else each for each in directions])
    flat = maps.transpose(1, 0, 2).reshape(maps.shape[1], -1).astype(complex)
    factor = np.array([TONE_FACTOR[allowable.statistic()] for allowable, _ in pairs])
    energy = np.array([allowable.statistic() == "rms" for allowable, _ in pairs])
    return Observed(pairs, maps, along, flat, factor, energy)


def phasors(limits: Observed, row: NDArray[np.intp], found: Tones) -> tuple[Complexes, Complexes]:
    """Phasors (N, 3) of row `row[k]` at frequency k, and their weighting (N, 3)."""
    weight = np.ones((len(row), 3), dtype=complex)
    frequency = found.omega[None] / TWO_PI
    for index, (allowable, _) in enumerate(limits.pairs):
        if allowable.has_weighting():
            ones = np.ones((1, len(row), 3), dtype=complex)
            weight[row == index] = allowable.weighted(ones, frequency)[0][row == index]
    if len(row) and np.all(row == row[0]):
        seen = found.features @ limits.maps[row[0]]
    else:
        seen = (found.features[:, None, :] @ limits.maps[row])[:, 0]
    return np.asarray(seen * weight), weight


def _sizes(limits: Observed, row: NDArray[np.intp], phasor: Complexes) -> tuple[Floats, Complexes]:
    """Amplitude (N,) of phasors (N, 3) as each row counts it, and its cotangent (N, 3) of the phasor."""
    along = limits.along[row]
    factor, energy = limits.factor[row], limits.energy[row]
    single = np.isfinite(along[:, 0])
    straight = np.sum(phasor * np.where(single[:, None], along, 0.0), axis=1)
    whole = np.sum(np.abs(phasor) ** 2, axis=1)
    plain = np.sum(phasor * phasor, axis=1)
    major = np.sqrt(np.where(energy, whole, 0.5 * (whole + np.abs(plain))))
    size = np.where(single, np.abs(straight), major)
    safe = np.where(size > 0.0, size, 1.0)
    turned = np.where(
        np.abs(plain) > 0.0, np.conj(plain) / np.where(np.abs(plain) > 0.0, np.abs(plain), 1.0), 0.0
    )
    ellipse = np.where(energy[:, None], np.conj(phasor), 0.5 * (np.conj(phasor) + turned[:, None] * phasor))
    line = np.conj(straight)[:, None] * np.where(single[:, None], along, 0.0)
    cotangent = np.where(single[:, None], line, ellipse) / safe[:, None]
    return np.asarray(factor * size), np.asarray(factor[:, None] * cotangent)


def amplitudes(
    limits: Observed, at: StateAt, family: Family, speed: Floats, row: NDArray[np.intp], slopes: bool
) -> tuple[Floats, Floats]:
    """Amplitude (N,) of limit `row[k]` at `speed[k]` (rad/s), all tones of the family together; slopes (N, u).

    Sets of one order add by amplitude, and different orders as the limit says (peaks by amplitude, rms by energy).
    """
    by_order: dict[float, Floats] = {}
    kept: list[tuple[float, Tones, Floats, Complexes]] = []
    for loads in family.sets:
        order = loads[0].order
        found = tones(at, loads, speed * order)
        phasor, weight = phasors(limits, row, found)
        size, cotangent = _sizes(limits, row, phasor)
        by_order[order] = by_order.get(order, 0.0) + size
        if slopes:
            kept.append((order, found, size, cotangent * weight))
    energy = limits.energy[row]
    stacked = np.array(list(by_order.values()))
    total = np.where(energy, np.sqrt(np.sum(stacked**2, axis=0)), np.sum(stacked, axis=0))
    by_unknown = np.zeros((len(speed), at.part_slopes.shape[2] if slopes else 0))
    for order, found, _, cotangent in kept:
        share = np.where(energy, by_order[order] / np.where(total > 0.0, total, 1.0), 1.0)
        features = (limits.maps[row] @ cotangent[:, :, None])[:, :, 0]
        by_unknown += share[:, None] * pulled_back(found, features)
    return total, by_unknown


def _table(limits: Observed, at: StateAt, family: Family, speed: Floats) -> Floats:
    """Amplitude (R, F) of every limit at every speed."""
    count, every = len(speed), np.arange(limits.count)
    by_order: dict[float, Floats] = {}
    energy = limits.energy
    for loads in family.sets:
        order = loads[0].order
        found = tones(at, loads, speed * order)
        phasor = (found.features @ limits.flat).reshape(count, limits.count, 3)
        for index, (allowable, _) in enumerate(limits.pairs):
            if allowable.has_weighting():
                frequency = found.omega[None] / TWO_PI
                phasor[:, index] = allowable.weighted(phasor[None, :, index], frequency)[0]
        size, _ = _sizes(limits, np.tile(every, count), phasor.reshape(-1, 3))
        by_order[order] = by_order.get(order, 0.0) + size.reshape(count, -1).T
    stacked = np.array(list(by_order.values()))
    return np.asarray(np.where(energy[:, None], np.sqrt(np.sum(stacked**2, axis=0)), np.sum(stacked, axis=0)))


@dataclass(frozen=True)
class Peak:
    """Local peaks of R limits over one family: amplitude and speed (rad/s), each (R, PEAKS).

    The highest comes first; places without a peak have the amplitude zero.
    """

    value: Floats
    speed: Floats


def peaks(limits: Observed, at: StateAt, family: Family, poles: Complexes, low: Floats) -> Peak:
    """The highest local peaks of every limit over the family's range; `poles` (m,) rad/s say where to look.

    A limit whose largest sample stays below its `low` (R,) amplitude is left at its samples.
    """
    speed, value = _found(limits, at, family, poles, low)
    return Peak(value, speed)


def peak_slopes(
    limits: Observed, at: StateAt, family: Family, found: Peak, wanted: NDArray[np.bool_]
) -> Floats:
    """Slopes (R, PEAKS, u) of the peaks of the `wanted` (R,) limits, zero for the others."""
    row, place = np.nonzero((found.value > 0.0) & wanted[:, None])
    shaped = np.zeros((*found.value.shape, at.part_slopes.shape[2]))
    if row.size:
        _, shaped[row, place] = amplitudes(limits, at, family, found.speed[row, place], row, True)
    return shaped


def _found(
    limits: Observed, at: StateAt, family: Family, poles: Complexes, least: Floats
) -> tuple[Floats, Floats]:
    """Speeds and amplitudes (R, PEAKS) of the highest local peaks, highest first."""
    low, high = TWO_PI * family.low, TWO_PI * family.high
    value, where = np.zeros((limits.count, PEAKS)), np.full((limits.count, PEAKS), low)
    if high <= low:
        value[:, 0] = _table(limits, at, family, np.array([low]))[:, 0]
        return where, value
    centres, widths = envelope.centres_of_poles(poles[None], family.orders)
    spread = np.concatenate([centres, centres - widths, centres + widths], axis=1)
    samples = envelope.first_samples(np.array([low]), np.array([high]), np.abs(spread), BACKGROUND)[0]
    # A peak just inside an end would hide behind it.
    first, last = samples[1] - low, high - samples[-2]
    beside = [low + share * first for share in BESIDE] + [high - share * last for share in BESIDE]
    samples = np.unique(np.concatenate([samples, beside]))
    table = _table(limits, at, family, samples)
    padded = np.pad(table, ((0, 0), (1, 1)), constant_values=-np.inf)
    local = (table >= padded[:, :-2]) & (table > padded[:, 2:])
    row, middle = np.nonzero(local & (table >= LOWEST * table.max(axis=1, keepdims=True)))
    near = table.max(axis=1) >= least
    found, heights = _refined(limits, at, family, row, middle, samples, table, near)
    for index in range(limits.count):
        own = np.flatnonzero(row == index)
        best = own[np.argsort(-heights[own], kind="stable")][:PEAKS]
        value[index, : len(best)], where[index, : len(best)] = heights[best], found[best]
    return where, value


def _refined(
    limits: Observed,
    at: StateAt,
    family: Family,
    row: NDArray[np.intp],
    middle: NDArray[np.intp],
    samples: Floats,
    table: Floats,
    near: NDArray[np.bool_],
) -> tuple[Floats, Floats]:
    """Speed and amplitude (N,) of local peaks of `near` (R,) limits, from samples on, by parabolas of 1/amplitude^2."""
    last = len(samples) - 1
    inner = (middle > 0) & (middle < last)
    speed, height = samples[middle].copy(), table[row, middle].copy()
    left, right = np.maximum(middle - 1, 0), np.minimum(middle + 1, last)
    x = np.stack([samples[left], speed, samples[right]])
    y = np.stack([table[row, left], height, table[row, right]])
    # At an end of the range the peak is the end itself, unless the response turns before the next sample.
    active = np.flatnonzero(inner & (height > 0.0) & near[row])
    if not active.size:
        return speed, height
    for _ in range(NARROWED):
        vertex = _vertex(x[:, active], y[:, active])
        value, _ = amplitudes(limits, at, family, vertex, row[active], False)
        _narrow(x, y, active, vertex, value)
    chosen, top = x[1, active], y[1, active]
    for share in POLISHED:
        chosen, top = _polished(limits, at, family, row[active], chosen, top, share)
    speed[active], height[active] = chosen, top
    return speed, height


def _polished(
    limits: Observed,
    at: StateAt,
    family: Family,
    row: NDArray[np.intp],
    middle: Floats,
    top: Floats,
    share: float,
) -> tuple[Floats, Floats]:
    """Peaks (N,) by the parabola through two neighbours a small share of the frequency away, inside the range."""
    reach = share * middle
    reach = np.minimum(reach, np.minimum(middle - TWO_PI * family.low, TWO_PI * family.high - middle))
    reach = np.maximum(reach, 1e-9 * middle)
    both, _ = amplitudes(
        limits, at, family, np.concatenate([middle - reach, middle + reach]), np.tile(row, 2), False
    )
    left, right = both[: len(row)], both[len(row) :]
    x, y = np.stack([middle - reach, middle, middle + reach]), np.stack([left, top, right])
    vertex = _vertex(x, y)
    value, _ = amplitudes(limits, at, family, vertex, row, False)
    best = np.argmax(np.stack([value, top, left, right]), axis=0)
    places = np.stack([vertex, middle, x[0], x[2]])
    return places[best, np.arange(len(row))], np.max(np.stack([value, top, left, right]), axis=0)


def _vertex(x: Floats, y: Floats) -> Floats:
    """Where the parabola through three samples of 1/y^2 is least, inside them."""
    f = 1.0 / np.maximum(y, 1e-300 + 1e-9 * y[1]) ** 2
    f = f / f[1]
    # An undamped resonance draws the three together until two of them are one number.
    one, two = (np.maximum(step, np.spacing(x[1])) for step in (x[1] - x[0], x[2] - x[1]))
    rise, fall = (f[0] - 1.0) / one, (f[2] - 1.0) / two
    bend = rise + fall
    shift = np.where(bend > 0.0, 0.5 * (rise * two - fall * one) / np.where(bend > 0.0, bend, 1.0), 0.0)
    aim = x[1] + shift
    return np.asarray(np.clip(aim, x[0] + 1e-3 * one, x[2] - 1e-3 * two))


def _narrow(x: Floats, y: Floats, active: NDArray[np.intp], vertex: Floats, value: Floats) -> None:
    """Put the new sample into the bracket of every active peak."""
    for k, at, height in zip(active.tolist(), vertex.tolist(), value.tolist(), strict=True):
        if height > y[1, k]:
            end = 0 if at > x[1, k] else 2
            x[end, k], y[end, k] = x[1, k], y[1, k]
            x[1, k], y[1, k] = at, height
        else:
            end = 2 if at > x[1, k] else 0
            x[end, k], y[end, k] = at, height
