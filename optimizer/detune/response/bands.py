"""One-third-octave band values of a batch of designs, held against the limits of their bands."""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import BandAllowable, tone_amplitude
from detune.brief.brief import Brief, applies
from detune.brief.condition import Condition
from detune.physics import envelope
from detune.physics.octaves import band_edges, band_index, nominal_centre
from detune.physics.random_response import QuadratureNotConverged, variance
from detune.physics.spectra import PowerSpectralDensity, between
from detune.response.assemble import Dynamic
from detune.response.coincidence import meeting
from detune.response.designs import Designs
from detune.response.loads import Family, condition_families
from detune.response.model import Model
from detune.response.modes import ModeBatch, sharp_poles
from detune.response.random import WITHOUT_BOUND, NoiseLoad, noise_load
from detune.response.views import ToneBatch

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Integers = NDArray[np.int64]
Pairs = tuple[tuple[BandAllowable, str], ...]
Entry = tuple[int, int]
TWO_PI = 2.0 * np.pi


@dataclass(frozen=True)
class BandRows:
    """Band limits judged under the forcing of one condition: (allowable, place) pairs, families, noises."""

    pairs: Pairs
    families: tuple[Family, ...]
    noises: tuple[NoiseLoad, ...]


@dataclass(frozen=True, eq=False)
class BandRatios:
    """Largest ratio (R, D) of a band's rms to its limit, and the nominal centre (R, D) in Hz of that band."""

    value: Floats
    frequency: Floats


def band_rows(brief: Brief, model: Model, condition: Condition, pairs: Pairs) -> BandRows:
    """Return the rows of a condition under its own forcing; a passage counts as the steady state at every speed."""
    acting = [forcing for forcing in brief.forcing if applies(forcing.conditions, condition.name)]
    noises = tuple(noise_load(brief, model, noise) for forcing in acting for noise in forcing.noises())
    return BandRows(pairs, condition_families(brief, model, condition), noises)


def band_ratios(
    model: Model, designs: Designs, dynamic: Dynamic, modal: ModeBatch, rows: BandRows
) -> BandRatios:
    """Return the largest ratio of each row."""
    square: dict[Entry, Floats] = {}
    # Families that can come to one frequency add linearly, within a band too.
    linked: dict[tuple[int, Entry], Floats] = {}
    for family, number in zip(rows.families, meeting(rows.families), strict=True):
        for entry, amplitude in _family_bands(model, designs, dynamic, modal, rows.pairs, family).items():
            linked[number, entry] = linked.get((number, entry), np.zeros(designs.count)) + amplitude
    for (_, entry), amplitude in linked.items():
        square[entry] = square.get(entry, np.zeros(designs.count)) + amplitude**2
    for noise in rows.noises:
        for entry, found in _noise_bands(model, designs, dynamic, modal, rows.pairs, noise).items():
            square[entry] = square.get(entry, np.zeros(designs.count)) + found
    ratio = np.zeros((len(rows.pairs), designs.count))
    frequency = np.full_like(ratio, np.nan)
    for row, (allowable, _) in enumerate(rows.pairs):
        for band, limit in zip(*allowable.bands(), strict=True):
            if (row, int(band)) in square:
                own = np.sqrt(square[row, int(band)]) / limit
                frequency[row] = np.where(own > ratio[row], float(nominal_centre(band)), frequency[row])
                ratio[row] = np.maximum(ratio[row], own)
    return BandRatios(ratio, frequency)


def limited_bands(pairs: Pairs) -> Integers:
    """Return the indices of all bands that some row limits, rising."""
    return np.unique(np.concatenate([allowable.bands()[0] for allowable, _ in pairs]))


def speed_pieces(
    low: float, high: float, orders: Iterable[float], bands: Integers
) -> list[tuple[float, float]]:
    """Return a range of speed (Hz) cut where an order passes from one band into the next."""
    if high <= low:
        return [(low, high)]
    edges = np.unique(np.concatenate(band_edges(bands)))
    cuts = np.unique(np.concatenate([edges / order for order in orders]))
    ends = np.concatenate([[low], cuts[(cuts > low) & (cuts < high)], [high]])
    return list(zip(ends[:-1].tolist(), ends[1:].tolist(), strict=True))


def _family_bands(
    model: Model, designs: Designs, dynamic: Dynamic, modal: ModeBatch, pairs: Pairs, family: Family
) -> dict[Entry, Floats]:
    """Return the largest rms (D,) of each row and band over the speeds of a family."""
    largest: dict[Entry, Floats] = {}
    centres, widths = envelope.centres_of_poles(sharp_poles(dynamic, modal), family.orders)
    for low, high in speed_pieces(family.low, family.high, family.orders, limited_bands(pairs)):
        middle = np.sqrt(low * high)
        band_of = {order: int(band_index(order * middle)) for order in family.orders}
        entries = _entries(pairs, band_of.values())
        if not entries:
            continue

        def amplitude(
            speed: Floats,
            chosen: Designs,
            matrices: Dynamic,
            band_of: Mapping[float, int] = band_of,
            entries: tuple[Entry, ...] = entries,
        ) -> Floats:
            return _amplitudes(model, chosen, matrices, pairs, family, speed, band_of, entries)

        def at(speed: Floats) -> Floats:
            return amplitude(speed, designs, dynamic)

        def points(design: Integers, speed: Floats) -> Floats:
            return amplitude(speed[:, None], designs.take(design), dynamic.take(design))[..., 0]

        found = envelope.supremum(at, TWO_PI * low, TWO_PI * high, centres, widths, points=points)
        for entry, value in zip(entries, found.value, strict=True):
            largest[entry] = np.maximum(largest.get(entry, np.zeros(designs.count)), value)
    return largest


def _entries(pairs: Pairs, bands: Iterable[int]) -> tuple[Entry, ...]:
    met = dict.fromkeys(bands)
    return tuple(
        (row, band)
        for row, (allowable, _) in enumerate(pairs)
        for band in met
        if band in allowable.bands()[0]
    )


def _amplitudes(
    model: Model,
    designs: Designs,
    dynamic: Dynamic,
    pairs: Pairs,
    family: Family,
    speed: Floats,
    band_of: Mapping[float, int],
    entries: tuple[Entry, ...],
) -> Floats:
    """Return the rms (E, D, F) of each entry at speeds (D, F) in rad/s."""
    by_order: dict[tuple[int, float], Floats] = {}
    for loads in family.sets:
        order = loads[0].order
        rows = [row for row, band in entries if band == band_of[order]]
        if not rows:
            continue
        view = ToneBatch(model, designs, dynamic, loads, speed * order)
        for row in rows:
            allowable, place = pairs[row]
            tone = tone_amplitude(allowable.observed(view, place), allowable.along(), "rms")
            # Sets of one order have one frequency and unknown phases.
            by_order[row, order] = by_order.get((row, order), np.zeros_like(tone)) + tone
    total = np.zeros((len(entries), *speed.shape))
    for number, (row, band) in enumerate(entries):
        parts = [tone for (own, order), tone in by_order.items() if own == row and band_of[order] == band]
        total[number] = np.sqrt(np.sum(np.square(parts), axis=0))
    return total


def _noise_bands(
    model: Model, designs: Designs, dynamic: Dynamic, modal: ModeBatch, pairs: Pairs, noise: NoiseLoad
) -> dict[Entry, Floats]:
    """Return the mean square (D,) of each row and band under a noise."""
    poles = sharp_poles(dynamic, modal)
    centre, width = poles.imag, -poles.real
    found: dict[Entry, Floats] = {}
    for band in limited_bands(pairs).tolist():
        low, high = (float(edge) for edge in band_edges(band))
        part: PowerSpectralDensity | None = between(noise.noise.spectrum, low, high)
        entries = _entries(pairs, [band])
        if part is None:
            continue

        def transfer(omega: Floats, entries: tuple[Entry, ...] = entries) -> Complexes:
            view = ToneBatch(model, designs, dynamic, (noise.load,), omega)
            rows = []
            for row, _ in entries:
                allowable, place = pairs[row]
                rows.append(allowable.observed(view, place) @ np.asarray(allowable.along()))
            return np.stack(rows)

        try:
            squares = variance(transfer, part, centre, width)
        except QuadratureNotConverged:
            if designs.count > 1:
                return _in_halves(model, designs, dynamic, modal, pairs, noise)
            squares = np.full((len(entries), 1), WITHOUT_BOUND)
        found.update(zip(entries, squares, strict=True))
    return found


def _in_halves(
    model: Model, designs: Designs, dynamic: Dynamic, modal: ModeBatch, pairs: Pairs, noise: NoiseLoad
) -> dict[Entry, Floats]:
    """Halve the batch until a design whose undamped mode the noise excites stands alone."""
    halves = np.array_split(np.arange(designs.count), 2)
    taken = ((designs.take(half), dynamic.take(half), modal.take(half)) for half in halves)
    first, second = (_noise_bands(model, *some, pairs, noise) for some in taken)
    return {entry: np.concatenate([first[entry], second[entry]]) for entry in first}
