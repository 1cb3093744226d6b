"""The static load each part carries, within the part's own range."""

from typing import ClassVar, Literal

from detune.brief.allowable.at_station import chosen_stations
from detune.brief.allowable.base import StaticAllowable
from detune.brief.allowable.views import Floats, Places, StaticView
from detune.brief.statement import Name


class LoadRange(StaticAllowable):
    """Static axial load of each part between its `load_min` and `load_max`.

    Always demanded: a brief that leaves it out gets it, printed as assumed.
    """

    title: ClassVar[str] = "static load of the part, axial"
    unit: ClassVar[str] = "force"
    kind: Literal["load-range"] = "load-range"
    stations: tuple[Name, ...] | None = None

    def places(self, places: Places) -> tuple[str, ...]:
        return chosen_stations(self.stations, places)

    def stations_named(self) -> tuple[str, ...]:
        return self.stations or ()

    def value(self, view: StaticView, place: str) -> Floats:
        return -view.station_load(place)[:, 2]

    def bounds(self, view: StaticView, place: str) -> tuple[Floats | None, Floats | None]:
        return view.part_value(place, "load_min"), view.part_value(place, "load_max")
