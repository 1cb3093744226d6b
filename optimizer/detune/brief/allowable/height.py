"""Limit on the height that parts take up under the machine."""

from typing import ClassVar, Literal

import numpy as np
from pydantic import field_validator

from detune.brief.allowable.at_station import chosen_stations
from detune.brief.allowable.base import StaticAllowable, above_zero
from detune.brief.allowable.views import Floats, Places, StaticView
from detune.brief.statement import Length, Name


class Height(StaticAllowable):
    """Installed height of each part, upper limit: its `free_height` less its static compression, creep included.

    A part whose list states no height has none that is known: it reads as infinite and does not meet this.
    """

    title: ClassVar[str] = "installed height of the part"
    unit: ClassVar[str] = "length"
    kind: Literal["height"] = "height"
    stations: tuple[Name, ...] | None = None
    limit: Length

    @field_validator("limit")
    @classmethod
    def _limit_above_zero(cls, value: float) -> float:
        return above_zero(value, "a limit")

    def places(self, places: Places) -> tuple[str, ...]:
        return chosen_stations(self.stations, places)

    def stations_named(self) -> tuple[str, ...]:
        return self.stations or ()

    def value(self, view: StaticView, place: str) -> Floats:
        height = view.part_value(place, "free_height") + view.station_deflection(place)[:, 2]
        # A station that was left empty carries any load there is, and takes up no height.
        empty = np.isinf(view.part_value(place, "load_max")) & np.isinf(view.part_value(place, "load_min"))
        return np.where(empty, 0.0, np.where(np.isnan(height), np.inf, height))

    def bounds(self, view: StaticView, place: str) -> tuple[Floats | None, Floats | None]:
        return None, np.full(view.count, self.limit)
