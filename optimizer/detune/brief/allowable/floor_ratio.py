"""Limit on the floor's motion with the machine on its mounts over that with the machine bolted down."""

from typing import ClassVar, Literal, cast

import numpy as np
from pydantic import model_validator

from detune.brief.allowable.base import HarmonicAllowable, UnitLoad, above_zero
from detune.brief.allowable.views import Floats, Places, Responses, ResponseView, StaticView, ToneView
from detune.brief.statement import AxisName, Direction, Frequency, Ratio, unit_direction


class FloorRatio(HarmonicAllowable):
    """Upper limit on the insertion ratio of the mounts, judged over every excitation interval of the condition.

    The floor's motion with the machine on its mounts, over the floor's motion with the machine bolted down,
    for one and the same unit harmonic force along `direction` at the first body's mass centre. Bolted down:
    at every station of the study the part is replaced by a rigid link, so that the three deflections there
    are zero; masses, ballast, given connections and floor stay as they are, whatever the design or the state.
    The floor's motion is that under its stations; where they move differently, the root of the sum of their
    squares. Needs a floor that is not rigid. `from_frequency` leaves out what lies below it.
    """

    title: ClassVar[str] = "floor ratio"
    unit: ClassVar[str] = "ratio"
    kind: Literal["floor-ratio"] = "floor-ratio"
    direction: AxisName | Direction
    from_frequency: Frequency | None = None
    limit: Ratio

    @model_validator(mode="after")
    def _values(self) -> "FloorRatio":
        above_zero(self.limit, "a limit", at="limit")
        unit_direction(self.direction, at="direction")
        return self

    def places(self, places: Places) -> tuple[str, ...]:
        return ("floor",)

    def along(self) -> Direction | None:
        return (0.0, 0.0, 1.0)

    def unit_load(self) -> UnitLoad | None:
        return ("force", unit_direction(self.direction))

    def lowest_frequency(self) -> float:
        return self.from_frequency or 0.0

    def has_weighting(self) -> bool:
        # The machine bolted down is a weighting by frequency, so nothing that is linear in the response
        # bounds it.
        return True

    def observed(self, view: ResponseView, place: str) -> Responses:
        # Under a unit load the view is one of tones.
        return cast(ToneView, view).floor_ratio()

    def bound(self, view: StaticView, place: str) -> Floats:
        return np.full(view.count, self.limit)

    def quantity(self) -> str:
        return f"floor ratio (insertion ratio of the mounts), force along {self.direction}"
