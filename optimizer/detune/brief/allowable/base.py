"""What every allowable kind has in common, and the five forms an allowable can take."""

from collections.abc import Sequence
from typing import ClassVar, Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import field_validator

from detune.brief.allowable.views import (
    Complexes,
    DesignView,
    Floats,
    ModeView,
    Places,
    Responses,
    ResponseView,
    StaticView,
)
from detune.brief.statement import AxisName, Direction, Name, Statement, listed_once, refuse, unit_direction
from detune.physics.extremes import expected_extreme
from detune.physics.response import ellipse_major

Statistic = Literal["peak", "rms", "peak-to-peak", "3-sigma"]
TONE_FACTOR: dict[Statistic, float] = {"peak": 1.0, "rms": 0.5**0.5, "peak-to-peak": 2.0, "3-sigma": 1.0}
UnitLoad = tuple[Literal["force", "base"], Direction]
Side = tuple[Floats, Direction]


class Allowable(Statement):
    """Base of every allowable. `conditions` left out means every condition.

    `unit` is the kind of unit its values are shown in.
    """

    kind: str
    conditions: tuple[Name, ...] | None = None

    title: ClassVar[str]
    unit: ClassVar[str]

    @field_validator("conditions", "stations", check_fields=False)
    @classmethod
    def _some_names(cls, value: tuple[str, ...] | None) -> tuple[str, ...] | None:
        # An empty list would leave the limit without any place to judge, and so always met.
        return listed_once(value)

    def places(self, places: Places) -> tuple[str, ...]:
        """Return the places this allowable is judged at; each becomes one requirement."""
        return ("whole machine",)

    def quantity(self) -> str:
        """Return what is limited, in words, for tables."""
        return self.title

    def points_named(self) -> tuple[str, ...]:
        """Return the points this allowable refers to."""
        return ()

    def stations_named(self) -> tuple[str, ...]:
        """Return the stations this allowable refers to."""
        return ()

    def data_files(self) -> tuple[str, ...]:
        """Return the files this allowable was read from, as the study names them."""
        return ()

    def assumed(self) -> tuple[str, ...]:
        """Return what this allowable leaves open and the program fills in, in words."""
        return ()


class HarmonicAllowable(Allowable):
    """An upper limit on the amplitude of a response to the condition's tones.

    A new kind writes `observed` (and `places`); the supremum over speed, the sum over orders and the
    margins are the same for all.
    """

    def observed(self, view: ResponseView, place: str) -> Responses:
        """Return the limited quantity as a vector (D, F, 3): phasors of one tone, or values over time."""
        raise NotImplementedError(type(self).__name__)

    def statistic(self) -> Statistic:
        """Return how the amplitude is expressed."""
        return "peak"

    def along(self) -> Direction | None:
        """Return the unit direction, or None for the resultant of the three axes."""
        return None

    def offset(self, view: StaticView, place: str) -> Floats:
        """Return a static part (D,) that is added to the amplitude."""
        return np.zeros(view.count)

    def sides(self, view: StaticView, place: str) -> tuple[Side, ...]:
        """Return the sides that are judged one by one: static part (D,) of each and its unit direction.

        A response in time counts towards each side with what it reaches on that side, and the worst side is the
        value; `offset` is the largest of the static parts. Tones and noise reach as far to one side as to the other.
        No sides: a response in time counts with its magnitude.
        """
        return ()

    def bound(self, view: StaticView, place: str) -> Floats:
        """Return the upper limit (D,)."""
        raise NotImplementedError(type(self).__name__)

    def unit_load(self) -> UnitLoad | None:
        """Return a unit load to be used instead of the condition's forcing, or None."""
        return None

    def weighted(self, observed: Complexes, frequency: Floats) -> Complexes:
        """Return observed phasors (D, F, 3) times a frequency weighting at frequency (D, F) in Hz."""
        return observed

    def has_weighting(self) -> bool:
        """Return whether `weighted` changes anything; such a limit is for tones and noise alone."""
        return False

    def level_reference(self) -> float | None:
        """Return the reference (SI) of the decibels its limit is stated in, None for a limit in a unit."""
        return None

    def lowest_frequency(self) -> float:
        """Return the frequency (Hz) below which this allowable does not apply."""
        return 0.0


class BandAllowable(Allowable):
    """Upper limits on the rms of a response in one-third-octave bands (IEC 61260-1).

    Its value is the largest ratio of a band's rms to the band's limit, so that the limit is 1. In a band, tones at
    different frequencies and noise add as mean squares; tones of one frequency and unknown phase add linearly. A
    tone counts in the band that holds its frequency. Of a moving speed the steady state at its worst counts in each
    band by itself; different sources have independent speeds. For tones and noise alone.
    """

    def observed(self, view: ResponseView, place: str) -> Responses:
        """Return the limited quantity as phasors (D, F, 3) of one tone."""
        raise NotImplementedError(type(self).__name__)

    def along(self) -> Direction:
        """Return the unit direction."""
        raise NotImplementedError(type(self).__name__)

    def bands(self) -> tuple[NDArray[np.int64], Floats]:
        """Return the indices (B,) of the bands that are limited, rising, and their limits (B,) as rms values."""
        raise NotImplementedError(type(self).__name__)


class StaticAllowable(Allowable):
    """A limit on a static quantity; it does not depend on the condition."""

    @field_validator("conditions")
    @classmethod
    def _every_condition(cls, value: tuple[str, ...] | None) -> tuple[str, ...] | None:
        return no_conditions(value, "a static limit holds at rest, whatever runs")

    def value(self, view: StaticView, place: str) -> Floats:
        """Return the limited quantity (D,)."""
        raise NotImplementedError(type(self).__name__)

    def bounds(self, view: StaticView, place: str) -> tuple[Floats | None, Floats | None]:
        """Return the lower and the upper limit, each (D,) or None."""
        raise NotImplementedError(type(self).__name__)


class ModeAllowable(Allowable):
    """A limit on a quantity of the modes; a kind writes one of the two limits, or both."""

    def value(self, view: ModeView) -> Floats:
        """Return the limited quantity (D,)."""
        raise NotImplementedError(type(self).__name__)

    def lower_limit(self) -> float | None:
        """Return the lower limit, or None."""
        return None

    def upper_limit(self) -> float | None:
        """Return the upper limit, or None."""
        return None


class DesignAllowable(Allowable):
    """An upper limit on a total of the design."""

    @field_validator("conditions")
    @classmethod
    def _every_condition(cls, value: tuple[str, ...] | None) -> tuple[str, ...] | None:
        return no_conditions(value, "a total of the design does not depend on them")

    def value(self, view: DesignView) -> Floats:
        """Return the limited quantity (D,)."""
        raise NotImplementedError(type(self).__name__)

    def upper_limit(self) -> float:
        """Return the upper limit."""
        raise NotImplementedError(type(self).__name__)


def tone_amplitude(phasor: Complexes, along: Direction | None, statistic: Statistic) -> Floats:
    """Return the amplitude (D, F) of one tone of a phasor vector (D, F, 3).

    Resultants: the peak is the major semi-axis of the ellipse the vector traces; the rms is the
    root of the summed squares over two. A tone counts in a 3-sigma value with its peak.
    Source: physics.response.ellipse_major.
    """
    if along is not None:
        peak: Floats = np.abs(phasor @ np.asarray(along))
    elif statistic == "rms":
        peak = np.sqrt(np.sum(phasor.real**2 + phasor.imag**2, axis=-1))
    else:
        peak = ellipse_major(phasor)
    return TONE_FACTOR[statistic] * peak


def noise_amplitude(variance: Floats, rate_variance: Floats, duration: float, statistic: Statistic) -> Floats:
    """Return what a Gaussian response of this variance (of the resultant, if of several axes) counts as.

    rms; three times that; or the mean largest magnitude in the duration (both ways for peak-to-peak).
    Source: physics.extremes (Davenport 1964).
    """
    rms = np.sqrt(variance)
    if statistic == "rms":
        return rms
    if statistic == "3-sigma":
        return 3.0 * rms
    extreme = expected_extreme(variance, rate_variance, duration)
    return extreme if statistic == "peak" else 2.0 * extreme


def record_amplitude(
    stretches: Sequence[tuple[Floats, float]], along: Direction | None, statistic: Statistic, duration: float
) -> Floats:
    """Return what a response over time counts as: its largest magnitude, or its rms over the `duration` (s).

    stretches: smooth parts of it, one after the other, each (D, T, 3) with its time step in s. Between samples
    the largest magnitude is that of the parabola through the three highest neighbours. The rms takes the whole
    motion, that after the record's end included, and divides by the duration of the record alone.
    """
    signals = [
        (values @ np.asarray(along) if along is not None else np.sqrt(np.sum(values**2, axis=-1)), step)
        for values, step in stretches
    ]
    if statistic == "rms":
        energy = sum(np.trapezoid(signal**2, dx=step, axis=-1) for signal, step in signals)
        return np.asarray(np.sqrt(np.asarray(energy) / duration))
    highest = np.max([parabolic_maximum(signal) for signal, _ in signals], axis=0)
    lowest = np.max([parabolic_maximum(-signal) for signal, _ in signals], axis=0)
    if statistic == "peak-to-peak" and along is not None:
        return np.asarray(np.maximum(highest, 0.0) + np.maximum(lowest, 0.0))
    largest = np.asarray(np.maximum(highest, lowest))
    return 2.0 * largest if statistic == "peak-to-peak" else largest


def record_reach(stretches: Sequence[tuple[Floats, float]], towards: Direction) -> Floats:
    """Return how far (D,) a response over time comes to one side, not less than nothing: it starts or ends at rest.

    stretches: as in `record_amplitude`.
    """
    signals = [parabolic_maximum(values @ np.asarray(towards)) for values, _ in stretches]
    return np.asarray(np.maximum(np.max(signals, axis=0), 0.0))


def parabolic_maximum(signal: Floats) -> Floats:
    """Return the largest value (D,) of signals (D, T), each maximum by the parabola through three samples.

    The first and the last three also tell of a maximum beside the end.
    """
    top: Floats = signal.max(axis=-1)
    if signal.shape[-1] < 3:
        return top
    left, middle, right = signal[:, :-2], signal[:, 1:-1], signal[:, 2:]
    bend = left - 2.0 * middle + right
    # Distance of the vertex from the middle sample, in steps, is |rise|/(2 |bend|).
    reach = np.ones(middle.shape[-1])
    reach[[0, -1]] = 2.0
    curved = (bend < 0.0) & (np.abs(right - left) <= -reach * bend)
    rise = (right - left) ** 2 / (-8.0 * np.where(curved, bend, -1.0))
    return np.asarray(np.maximum(top, np.where(curved, middle + rise, -np.inf).max(axis=-1)))


def combine(first: Floats, second: Floats, statistic: Statistic) -> Floats:
    """Return two independent parts together: linear sum of peaks, root of summed squares of rms."""
    return np.hypot(first, second) if statistic == "rms" else first + second


class SumOfOrders:
    """The amplitudes of several coherent sets of tones, put together.

    Sets of one order have one frequency: where their phases are unknown the worst is the linear sum, of rms
    values too. Different orders are put together by `combine`.
    """

    def __init__(self, statistic: Statistic) -> None:
        self.statistic = statistic
        self.by_order: dict[float, Floats] = {}

    def add(self, order: float, amplitude: Floats) -> None:
        """Add the amplitude of one set."""
        earlier = self.by_order.get(order)
        self.by_order[order] = amplitude if earlier is None else earlier + amplitude

    def total(self) -> Floats:
        """Return all sets together."""
        first, *others = self.by_order.values()
        for other in others:
            first = combine(first, other, self.statistic)
        return first


def read_direction(direction: AxisName | Literal["resultant"] | Direction) -> Direction | None:
    """Return the unit direction, or None for "resultant"."""
    return None if direction == "resultant" else unit_direction(direction)


def direction_words(direction: AxisName | Literal["resultant"] | Direction) -> str:
    """Return a direction for tables: the name of an axis, with a minus sign where it points the other way."""
    if isinstance(direction, str):
        return direction
    unit = unit_direction(direction)
    for axis, value in zip("xyz", unit, strict=True):
        if abs(value) == 1.0:
            return axis if value > 0.0 else f"-{axis}"
    return f"along ({', '.join(f'{value:.3g}' for value in unit)})"


def above_zero(value: float, what: str, at: str | None = None) -> float:
    """Return a limit that is above zero, else refuse it."""
    if value <= 0.0:
        raise refuse(f"{value:g}", f"{what} above zero", at=at)
    return value


def no_conditions(value: tuple[str, ...] | None, why: str) -> tuple[str, ...] | None:
    """Refuse a list of conditions where it says nothing."""
    if value is not None:
        raise refuse(list(value), f'no "conditions": {why}')
    return value
