"""Limit on the deflection of the parts: dynamic alone, or static and dynamic together."""

from typing import ClassVar, Literal

import numpy as np
from pydantic import model_validator

from detune.brief.allowable.at_station import LocalDirection, chosen_stations, local_along, local_part
from detune.brief.allowable.base import HarmonicAllowable, Side, above_zero
from detune.brief.allowable.views import Floats, Places, Responses, ResponseView, StaticView
from detune.brief.statement import Direction, Length, Name, refuse


class MountDeflection(HarmonicAllowable):
    """Upper limit on the deflection of each part.

    `part = "dynamic"` counts the vibration amplitude along `direction`. `part = "combined"` is the
    axial travel from the free height, compression and extension each by itself and the larger of both: static
    deflection with its sign, plus the amplitudes of tones and noise, plus of each shock and record the farthest it
    comes to that side, summed linearly. `limit = "part"` takes each part's own `deflection_max`; a part that states
    none is not limited by it.
    """

    title: ClassVar[str] = "mount deflection"
    unit: ClassVar[str] = "length"
    kind: Literal["mount-deflection"] = "mount-deflection"
    part: Literal["dynamic", "combined"]
    direction: LocalDirection = "axial"
    stations: tuple[Name, ...] | None = None
    limit: Literal["part"] | Length

    @model_validator(mode="after")
    def _values(self) -> "MountDeflection":
        if not isinstance(self.limit, str):
            above_zero(self.limit, "a limit", at="limit")
        if self.part == "combined" and self.direction != "axial":
            raise refuse(
                self.direction,
                'the axial direction for "combined", which adds the static deflection',
                at="direction",
            )
        return self

    def places(self, places: Places) -> tuple[str, ...]:
        return chosen_stations(self.stations, places)

    def stations_named(self) -> tuple[str, ...]:
        return self.stations or ()

    def along(self) -> Direction | None:
        return local_along(self.direction)

    def observed(self, view: ResponseView, place: str) -> Responses:
        return local_part(view.station_deflection(place), self.direction)

    def offset(self, view: StaticView, place: str) -> Floats:
        if self.part == "dynamic":
            return np.zeros(view.count)
        return np.abs(view.station_deflection(place)[:, 2])

    def sides(self, view: StaticView, place: str) -> tuple[Side, ...]:
        if self.part == "dynamic":
            return ()
        at_rest = view.station_deflection(place)[:, 2]
        return ((-at_rest, (0.0, 0.0, -1.0)), (at_rest, (0.0, 0.0, 1.0)))

    def bound(self, view: StaticView, place: str) -> Floats:
        if self.limit == "part":
            own = view.part_value(place, "deflection_max")
            return np.where(np.isnan(own), np.inf, own)
        return np.full(view.count, float(self.limit))

    def quantity(self) -> str:
        text = "static plus dynamic" if self.part == "combined" else "dynamic"
        return f"mount deflection, {text}, {self.direction}"
