"""Values of many response requirements for many designs: tones, noise, records and passages together."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import HarmonicAllowable, SumOfOrders, combine, tone_amplitude
from detune.physics import envelope
from detune.response.assemble import Dynamic
from detune.response.coincidence import meeting
from detune.response.designs import Designs
from detune.response.floor_ratio import reference_zeros
from detune.response.loads import Family
from detune.response.model import Model
from detune.response.modes import ModeBatch, sharp_poles
from detune.response.random import NoiseLoad, noise_values
from detune.response.swept import Passage, swept_values
from detune.response.transient import TransientLoad, transient_values
from detune.response.views import ToneBatch

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Integers = NDArray[np.int64]
TWO_PI = 2.0 * np.pi


@dataclass(frozen=True)
class Rows:
    """Response requirements judged under one set of loads: (allowable, place) pairs.

    Families have independent speeds. Where `largest`, families are alternatives and the largest
    counts. A family that is passed through stands in `passages` instead, once for each way.
    """

    pairs: tuple[tuple[HarmonicAllowable, str], ...]
    families: tuple[Family, ...]
    largest: bool = False
    noises: tuple[NoiseLoad, ...] = ()
    transients: tuple[TransientLoad, ...] = ()
    passages: tuple[tuple[Passage, ...], ...] = ()

    @property
    def has_slow_parts(self) -> bool:
        """Whether something is to be simulated in time, design by design."""
        return bool(self.transients or self.passages)


@dataclass(frozen=True)
class Amplitudes:
    """Amplitude (R, D) of each row, and the speed (R, D) in Hz at which its largest tone part occurs."""

    value: Floats
    frequency: Floats


def family_amplitude(
    model: Model, designs: Designs, dynamic: Dynamic, rows: Rows, family: Family, speed: Floats
) -> Floats:
    """Return the amplitude (R, D, F) of each row at speeds (D, F) in rad/s, all sets of the family together."""
    sums = [SumOfOrders(allowable.statistic()) for allowable, _ in rows.pairs]
    for loads in family.sets:
        view = ToneBatch(model, designs, dynamic, loads, speed * loads[0].order)
        for index, (allowable, place) in enumerate(rows.pairs):
            observed = allowable.weighted(allowable.observed(view, place), view.omega / TWO_PI)
            tone = tone_amplitude(observed, allowable.along(), allowable.statistic())
            sums[index].add(loads[0].order, tone)
    return np.stack([each.total() for each in sums])


def response_values(
    model: Model, designs: Designs, dynamic: Dynamic, modal: ModeBatch, rows: Rows, slow_parts: bool = True
) -> Amplitudes:
    """Return each row's value under all its loads together.

    Without `slow_parts`, records and passages are left out, which gives a lower bound.
    """
    tones = suprema(model, designs, dynamic, modal, rows)
    value = tones.value
    parts = []
    if rows.noises:
        parts.append(noise_values(model, designs, dynamic, modal, rows.pairs, rows.noises))
    if slow_parts and rows.transients:
        parts.append(transient_values(model, designs, dynamic, modal, rows.pairs, rows.transients))
    if slow_parts:
        parts += [swept_values(model, designs, dynamic, modal, rows.pairs, each) for each in rows.passages]
    for part in parts:
        value = combined(rows, value, part)
    return Amplitudes(value, tones.frequency)


def beside_reference(model: Model, designs: Designs, rows: Rows, poles: Complexes) -> Complexes:
    """Return the poles (D, m) with the places added at which a floor ratio may peak for want of a reference."""
    if not any(allowable.kind == "floor-ratio" for allowable, _ in rows.pairs):
        return poles
    (load,) = rows.families[0].sets[0]
    return np.concatenate([poles, reference_zeros(model, load.vector)[designs.step]], axis=1)


def suprema(model: Model, designs: Designs, dynamic: Dynamic, modal: ModeBatch, rows: Rows) -> Amplitudes:
    """Return each row's supremum over the continuous speed range of every family, put together.

    Families have independent speeds: peaks add linearly, rms values as squares, but linearly too where two can come
    to one frequency; where `rows.largest`, the families are alternatives and the largest counts.
    """
    value = np.zeros((len(rows.pairs), designs.count))
    together: dict[int, Floats] = {}
    frequency = np.full_like(value, np.nan)
    largest = np.full_like(value, -np.inf)
    poles = sharp_poles(dynamic, modal) if rows.families else np.zeros((designs.count, 0), dtype=complex)
    poles = beside_reference(model, designs, rows, poles)
    for family, number in zip(rows.families, meeting(rows.families), strict=True):
        centres, widths = envelope.centres_of_poles(poles, family.orders)

        def amplitude(speed: Floats, family: Family = family) -> Floats:
            return family_amplitude(model, designs, dynamic, rows, family, speed)

        def points(design: Integers, speed: Floats, family: Family = family) -> Floats:
            chosen = designs.take(design), dynamic.take(design)
            return family_amplitude(model, *chosen, rows, family, speed[:, None])[..., 0]

        found = envelope.supremum(
            amplitude, TWO_PI * family.low, TWO_PI * family.high, centres, widths, points=points
        )
        bigger = found.value > largest
        frequency = np.where(bigger, found.omega / TWO_PI, frequency)
        largest = np.maximum(largest, found.value)
        if rows.largest:
            value = np.maximum(value, found.value)
        else:
            together[number] = together.get(number, 0.0) + found.value
    for part in together.values():
        value = combined(rows, value, part)
    return Amplitudes(value, frequency)


def combined(rows: Rows, value: Floats, part: Floats) -> Floats:
    """Return the values (R, D) of rows and an independent part of them together."""
    statistics = [allowable.statistic() for allowable, _ in rows.pairs]
    each = zip(value, part, statistics, strict=True)
    return np.stack([combine(one, other, statistic) for one, other, statistic in each])
