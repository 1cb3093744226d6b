"""No uplift: a part that cannot pull stays compressed through the whole cycle."""

from typing import ClassVar, Literal

import numpy as np

from detune.brief.allowable.at_station import chosen_stations
from detune.brief.allowable.base import HarmonicAllowable
from detune.brief.allowable.views import Floats, Places, Responses, ResponseView, StaticView
from detune.brief.statement import Direction, Name


class Uplift(HarmonicAllowable):
    """Dynamic axial force of each part at most its static compression; parts that may pull are free.

    Always demanded: a brief that leaves it out gets it, printed as assumed.
    """

    title: ClassVar[str] = "axial dynamic force against uplift"
    unit: ClassVar[str] = "force"
    kind: Literal["uplift"] = "uplift"
    stations: tuple[Name, ...] | None = None

    def places(self, places: Places) -> tuple[str, ...]:
        return chosen_stations(self.stations, places)

    def stations_named(self) -> tuple[str, ...]:
        return self.stations or ()

    def along(self) -> Direction | None:
        return (0.0, 0.0, 1.0)

    def observed(self, view: ResponseView, place: str) -> Responses:
        return view.station_force(place)

    def bound(self, view: StaticView, place: str) -> Floats:
        compression = np.maximum(-view.station_load(place)[:, 2], 0.0)
        return np.where(view.part_value(place, "pulls") > 0.5, np.inf, compression)
