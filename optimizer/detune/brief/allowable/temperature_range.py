"""Parts listed for the temperatures they will meet."""

from typing import ClassVar, Literal

import numpy as np
from pydantic import model_validator

from detune.brief.allowable.at_station import chosen_stations
from detune.brief.allowable.base import StaticAllowable
from detune.brief.allowable.views import Floats, Places, StaticView
from detune.brief.statement import Name, Temperature, refuse


class TemperatureRange(StaticAllowable):
    """Every part's own `temperature_min` and `temperature_max` take in everything from `lowest` to `highest`.

    Its value is the reserve in kelvin, the lesser of both ends, at least zero. A part whose list states no range has
    none that is known: its reserve reads as minus infinity, and it does not meet this.
    """

    title: ClassVar[str] = "reserve of the part's temperature range"
    unit: ClassVar[str] = "temperature_difference"
    kind: Literal["temperature-range"] = "temperature-range"
    stations: tuple[Name, ...] | None = None
    lowest: Temperature
    highest: Temperature

    @model_validator(mode="after")
    def _values(self) -> "TemperatureRange":
        if self.highest < self.lowest:
            raise refuse(f"{self.highest:g} degC", "a temperature not below the lowest", at="highest")
        return self

    def places(self, places: Places) -> tuple[str, ...]:
        return chosen_stations(self.stations, places)

    def stations_named(self) -> tuple[str, ...]:
        return self.stations or ()

    def value(self, view: StaticView, place: str) -> Floats:
        below = self.lowest - view.part_value(place, "temperature_min")
        above = view.part_value(place, "temperature_max") - self.highest
        reserve = np.minimum(below, above)
        return np.where(np.isnan(reserve), -np.inf, reserve)

    def bounds(self, view: StaticView, place: str) -> tuple[Floats | None, Floats | None]:
        return np.zeros(view.count), None

    def quantity(self) -> str:
        return f"{self.title} at {self.lowest:g} to {self.highest:g} degC"
