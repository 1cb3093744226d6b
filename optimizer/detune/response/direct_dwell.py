"""The assessor's speeds not to dwell at: for one design, where any limit of a condition is exceeded.

Found apart from `dwell.py`: the range is halved until the response is straight between neighbours, edges are
roots by Brent's method, and the limits are judged once more, by the assessor's own supremum, over what is
left.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import Allowable, HarmonicAllowable
from detune.brief.allowable.dwell_bands import DwellBands
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.views import Places
from detune.brief.brief import Brief, applies
from detune.brief.condition import Condition, Interval
from detune.brief.dwell import chosen_in, joined, left_of
from detune.brief.forcing.base import Tone
from detune.response.assessment import BarredBand, MarginRow
from detune.response.direct import DirectMachine
from detune.response.direct_amplitude import follows_amplitude
from detune.response.direct_coincidence import speeds_meet
from detune.response.direct_modes import DirectModes
from detune.response.direct_supremum import (
    AROUND_POLE,
    Pairs,
    amplitudes_at,
    coherent_sets,
    forced_suprema,
    tones_of,
)
from detune.response.direct_views import DirectStatic

Floats = NDArray[np.float64]
TWO_PI = 2.0 * np.pi
BACKGROUND = 129
# Between two samples nothing is looked for where both and the middle stay below this share of the limit, or
# the middle lies on the chord to this share of it.
FAR_BELOW, STRAIGHT = 0.5, 0.02
FINEST = 1e-9
# Edges move out by this share of the speed until the limits hold there.
OUTWARD = 1e-9
LEFT = "over the speeds that are left"


@dataclass(frozen=True)
class Judged:
    """One machine (a state in one reading) in which a condition is judged."""

    machine: DirectMachine
    static: DirectStatic
    modes: DirectModes
    places: Places


@dataclass(frozen=True)
class DwellFound:
    """What is barred in one condition: `bands` (Hz), their `width`, the `left` intervals, and why each is barred.

    The width is infinite where a limit is exceeded at every speed.
    """

    condition: Condition
    limit: DwellBands
    allowance: float
    bands: tuple[BarredBand, ...]
    width: float
    left: tuple[Interval, ...]
    orders: tuple[float, ...]


def forced_pairs(condition: Condition, allowables: Sequence[Allowable], places: Places) -> Pairs:
    """Return the limits on the response that a condition is judged by, each at each of its places."""
    return tuple(
        (a, place)
        for a in allowables
        if isinstance(a, HarmonicAllowable)
        and a.unit_load() is None
        and applies(a.conditions, condition.name)
        for place in a.places(places)
    )


def dwell_found(
    brief: Brief, condition: Condition, machines: Sequence[Judged], allowables: Sequence[Allowable]
) -> DwellFound | None:
    """Return the smallest bands to bar in a condition, over all readings; None where the brief does not ask."""
    limit = chosen_in(brief, condition)
    if limit is None:
        return None
    low, high = condition.shafts[limit.shaft]
    tones = [tone for tone in tones_of(brief, condition) if tone.speed == limit.shaft]
    orders = tuple(sorted({tone.order for tone in tones}))
    separation = next((a for a in allowables if isinstance(a, Separation)), None)
    bands: list[Interval] = []
    everywhere = False
    for each in machines:
        rows = _Rows(each, condition, forced_pairs(condition, allowables, each.places), limit.shaft, tones)
        more = rows.bands(low, high)
        # The response of parts that follow the amplitude depends on where the machine came from.
        everywhere = everywhere or more is None or follows_amplitude(each.machine)
        bands += [*(more or []), *_too_close(each.modes, orders, separation, low, high)]
    if everywhere:
        bands = [(low, high)]
    union = joined(bands, limit.bands)
    first = _Rows(
        machines[0], condition, forced_pairs(condition, allowables, machines[0].places), limit.shaft, tones
    )
    told = tuple(
        BarredBand(condition.name, limit.shaft, float(a), float(b), first.why(a, b, separation is not None))
        for a, b in union
    )
    width = np.inf if everywhere else sum(b - a for a, b in union)
    allowance = limit.allowance(low, high)
    return DwellFound(condition, limit, allowance, told, float(width), left_of(low, high, union), orders)


def with_left(found: DirectModes, dwelling: Sequence[DwellFound]) -> DirectModes:
    """Return the modes held against the orders of each moved shaft too, over the speeds that are left."""
    more = [(order * a, order * b) for each in dwelling for a, b in each.left for order in each.orders]
    return replace(found, intervals=np.concatenate([found.intervals, np.array(more).reshape(-1, 2)]))


class _Rows:
    """The limits of a condition on one machine, as a function of the speed of one shaft."""

    def __init__(
        self, each: Judged, condition: Condition, pairs: Pairs, shaft: str, tones: list[Tone]
    ) -> None:
        self.each, self.sets = each, coherent_sets(tones)
        beside = forced_suprema(each.machine, each.modes, condition, pairs, without=shaft).value
        room, kept = [], []
        for index, (allowable, place) in enumerate(pairs):
            bound = float(allowable.bound(each.static, place)[0])
            if np.isnan(bound) or bound == np.inf:
                continue
            own = bound - float(allowable.offset(each.static, place)[0])
            if allowable.statistic() == "rms" and not speeds_meet(each.machine.brief, condition):
                own = np.sqrt(own**2 - beside[index] ** 2) if own >= beside[index] else -1.0
            else:
                own -= beside[index]
            room.append(-1.0 if np.isnan(own) else own)
            kept.append((allowable, place))
        self.pairs: Pairs = tuple(kept)
        self.room = np.array(room)

    def excess(self, speed: Floats) -> Floats:
        """Value over what is left for it, less one, of each row (R, F)."""
        value = amplitudes_at(self.each.machine, self.pairs, self.sets, speed)
        over = (value - self.room[:, None]) / np.maximum(self.room, np.finfo(float).tiny)[:, None]
        return np.where(np.isnan(over), np.inf, over)

    def worst(self, speed: Floats) -> Floats:
        """The greatest excess (F,) of all rows."""
        return np.asarray(self.excess(speed).max(axis=0))

    def bands(self, low: float, high: float) -> list[Interval] | None:
        """Return the bands (Hz) in which a row exceeds its limit; None where one does at every speed."""
        if self.each.machine.topples or np.any(self.room < 0.0):
            return None
        if not self.pairs:
            return []
        speed, over = self._resolved(low, high)
        beyond = over > 0.0
        bands: list[Interval] = []
        start = low if beyond[0] else None
        for index in range(1, len(speed)):
            if beyond[index] and not beyond[index - 1]:
                start = self._edge(speed[index - 1], speed[index])
            elif beyond[index - 1] and not beyond[index]:
                assert start is not None  # a band has begun
                bands.append((start, self._edge(speed[index], speed[index - 1])))
                start = None
        if start is not None:
            bands.append((start, high))
        return bands

    def _resolved(self, low: float, high: float) -> tuple[Floats, Floats]:
        """Samples close enough that the worst row is straight between neighbours wherever it is near its limit."""
        samples = [np.linspace(low, high, BACKGROUND)]
        for pole in self.each.modes.poles:
            centre, width = pole.imag, max(-pole.real, 1e-6 * abs(pole))
            samples += [(centre + AROUND_POLE * width) / (TWO_PI * tones[0].order) for tones in self.sets]
        speed = np.unique(np.concatenate(samples))
        speed = speed[(speed >= low) & (speed <= high)]
        over = self.worst(speed)
        halved = np.arange(len(speed) - 1)
        while halved.size:
            middle = 0.5 * (speed[halved] + speed[halved + 1])
            value = self.worst(middle)
            ends = np.stack([over[halved], over[halved + 1]])
            chord = np.abs(value - ends.mean(axis=0)) <= STRAIGHT
            below = np.maximum(ends.max(axis=0), value) <= FAR_BELOW - 1.0
            above = np.minimum(ends.min(axis=0), value) >= 1.0
            small = (speed[halved + 1] - speed[halved]) <= FINEST * speed[halved + 1]
            open_ = ~(chord | below | above | small)
            at = halved + 1
            speed, over = np.insert(speed, at, middle), np.insert(over, at, value)
            # Every halved interval before this one has shifted it by one place.
            left = halved + np.arange(len(halved))
            halved = np.sort(np.concatenate([left[open_], left[open_] + 1]))
        return speed, over

    def _edge(self, holds: float, exceeds: float) -> float:
        """The speed next to `exceeds` at which every row still holds, on the side of `holds`."""
        from scipy.optimize import brentq

        def worst(speed: float) -> float:
            return min(float(self.worst(np.array([speed]))[0]), 1e3)

        if worst(holds) == 0.0:
            return float(holds)
        root = float(brentq(worst, holds, exceeds, xtol=1e-12 * exceeds, rtol=1e-14))
        step = OUTWARD * exceeds * (1.0 if holds > exceeds else -1.0)
        while worst(root) > 0.0 and abs(root - exceeds) < abs(holds - exceeds):
            root += step
            step *= 2.0
        return root if worst(root) <= 0.0 else float(holds)

    def why(self, low: float, high: float, separated: bool) -> str:
        """Which limit a band is barred for, and by how much it would be exceeded there."""
        if self.pairs and not np.any(self.room < 0.0):
            speed = np.unique(
                np.concatenate(
                    [np.linspace(low, high, 401), self.each.modes.poles.imag / TWO_PI / self.sets[0][0].order]
                )
            )
            speed = speed[(speed >= low) & (speed <= high)]
            over = self.excess(speed)
            row, at = np.unravel_index(int(np.argmax(over)), over.shape)
            if over[row, at] > 0.0:
                allowable, place = self.pairs[row]
                factor, rpm = 1.0 + float(over[row, at]), 60.0 * float(speed[at])
                where = f" at {place}" if place != "whole machine" else ""
                return (
                    f"{allowable.quantity()}{where}: {factor:.3g} times what it may be, at {rpm:.4g} rev/min"
                )
        elif np.any(self.room < 0.0):
            allowable, place = self.pairs[int(np.argmin(self.room))]
            return f"{allowable.quantity()} at {place}: exceeded at every speed"
        return "separation from a natural frequency" if separated else "a gap between two bands"


def _too_close(
    found: DirectModes, orders: Sequence[float], separation: Separation | None, low: float, high: float
) -> list[Interval]:
    """Return the speeds at which an order comes closer to a mode than the separation asked for."""
    if separation is None:
        return []
    bands = []
    for frequency, amplification in zip(found.frequency, found.view.amplification[0], strict=True):
        least = separation.exempt_amplification
        if least is not None and amplification < least:
            continue
        for order in orders:
            first = frequency / (1.0 + separation.limit) / order
            last = frequency / (1.0 - separation.limit) / order if separation.limit < 1.0 else high
            first, last = max(low, first * (1.0 - OUTWARD)), min(high, last * (1.0 + OUTWARD))
            if last > first:
                bands.append((float(first), float(last)))
    return bands


def over_left(found: DwellFound, judge: Callable[[Condition], list[MarginRow]]) -> list[MarginRow]:
    """Return the rows of a condition judged over the speeds that are left, of each the worst of all intervals."""
    judged = [
        judge(found.condition.piece({found.limit.shaft: interval}, found.condition.name))
        for interval in found.left
    ]
    rows = [min(same, key=lambda row: row.margin) for same in zip(*judged, strict=True)]
    if not found.bands:
        return rows
    return [replace(row, note=f"{row.note}; {LEFT}" if row.note else LEFT) for row in rows]
