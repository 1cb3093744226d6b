"""What every allowable kind has in common, and the four forms an allowable can take."""

from typing import ClassVar, Literal

import numpy as np
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
from detune.physics.response import ellipse_major

Statistic = Literal["peak", "rms", "peak-to-peak"]
UnitLoad = tuple[Literal["force", "base"], Direction]


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

    def bound(self, view: StaticView, place: str) -> Floats:
        """Return the upper limit (D,)."""
        raise NotImplementedError(type(self).__name__)

    def unit_load(self) -> UnitLoad | None:
        """Return a unit load to be used instead of the condition's forcing, or None."""
        return None

    def lowest_frequency(self) -> float:
        """Return the frequency (Hz) below which this allowable does not apply."""
        return 0.0


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
    """A lower limit on a quantity of the undamped modes."""

    def value(self, view: ModeView) -> Floats:
        """Return the limited quantity (D,)."""
        raise NotImplementedError(type(self).__name__)

    def lower_limit(self) -> float:
        """Return the lower limit."""
        raise NotImplementedError(type(self).__name__)


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
    root of the summed squares over two. Source: physics.response.ellipse_major.
    """
    if along is not None:
        peak: Floats = np.abs(phasor @ np.asarray(along))
    elif statistic == "rms":
        peak = np.sqrt(np.sum(phasor.real**2 + phasor.imag**2, axis=-1))
    else:
        peak = ellipse_major(phasor)
    factor = {"peak": 1.0, "rms": 1.0 / np.sqrt(2.0), "peak-to-peak": 2.0}[statistic]
    return factor * peak


def combine(first: Floats, second: Floats, statistic: Statistic) -> Floats:
    """Return the amplitude of two tones together: linear sum of peaks, root of summed squares of rms."""
    return np.hypot(first, second) if statistic == "rms" else first + second


def read_direction(direction: AxisName | Literal["resultant"] | Direction) -> Direction | None:
    """Return the unit direction, or None for "resultant"."""
    return None if direction == "resultant" else unit_direction(direction)


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
