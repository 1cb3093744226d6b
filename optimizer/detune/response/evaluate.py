"""Values of many requirements for many designs: statics, modes and suprema over speed."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable import HarmonicAllowable
from detune.brief.allowable.base import combine, tone_amplitude
from detune.brief.allowable.views import ModeView
from detune.physics import envelope, modes
from detune.response.assemble import Dynamic
from detune.response.designs import Designs
from detune.response.loads import Family
from detune.response.model import Model
from detune.response.views import ToneBatch

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
TWO_PI = 2.0 * np.pi


@dataclass(frozen=True)
class ModeBatch:
    """Undamped natural frequencies (D, n) Hz, mass-normalised shapes (D, n, n), loss factors (D, n)."""

    frequency: Floats
    shapes: Floats
    loss_factor: Floats

    def view(self, intervals: Sequence[tuple[float, float]]) -> ModeView:
        """Return what a mode allowable looks at."""
        with np.errstate(divide="ignore"):
            amplification = 1.0 / self.loss_factor
        return ModeView(self.frequency, amplification, np.array(intervals, dtype=float).reshape(-1, 2))


def mode_batch(dynamic: Dynamic) -> ModeBatch:
    """Return the undamped modes at the dynamic stiffness, with each mode's equivalent loss factor."""
    frequency, shapes = modes.undamped_modes(dynamic.mass, dynamic.stiffness)
    loss = modes.modal_loss_factors(shapes, dynamic.hysteretic, dynamic.viscous, frequency)
    return ModeBatch(frequency, shapes, loss)


@dataclass(frozen=True)
class Rows:
    """Harmonic requirements judged under one set of families: (allowable, place) pairs."""

    pairs: tuple[tuple[HarmonicAllowable, str], ...]
    families: tuple[Family, ...]
    largest: bool


@dataclass(frozen=True)
class Amplitudes:
    """Amplitude (R, D) of each row, and the speed (R, D) in Hz at which its largest part occurs."""

    value: Floats
    frequency: Floats


def family_amplitude(
    model: Model, designs: Designs, dynamic: Dynamic, rows: Rows, family: Family, speed: Floats
) -> Floats:
    """Return the amplitude (R, D, F) of each row at speeds (D, F) in rad/s, all sets of the family together."""
    total: list[Floats | None] = [None] * len(rows.pairs)
    for loads in family.sets:
        view = ToneBatch(model, designs, dynamic, loads, speed * loads[0].order)
        for index, (allowable, place) in enumerate(rows.pairs):
            statistic = allowable.statistic()
            tone = tone_amplitude(allowable.observed(view, place), allowable.along(), statistic)
            earlier = total[index]
            total[index] = tone if earlier is None else combine(earlier, tone, statistic)
    return np.stack([part for part in total if part is not None])


def suprema(model: Model, designs: Designs, dynamic: Dynamic, modal: ModeBatch, rows: Rows) -> Amplitudes:
    """Return each row's supremum over the continuous speed range of every family, put together.

    Families have independent speeds: peaks add linearly, rms values as squares; where
    `rows.largest`, the families are alternatives and the largest counts.
    """
    value = np.zeros((len(rows.pairs), designs.count))
    frequency = np.full_like(value, np.nan)
    largest = np.full_like(value, -np.inf)
    for family in rows.families:
        centres, widths = envelope.centres_of_orders(modal.frequency, modal.loss_factor, family.orders)

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
            continue
        for index, (allowable, _) in enumerate(rows.pairs):
            value[index] = combine(value[index], found.value[index], allowable.statistic())
    return Amplitudes(value, frequency)
