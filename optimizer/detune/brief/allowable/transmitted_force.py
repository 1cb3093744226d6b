"""Limit on the force transmitted through each part, into the floor, or into the ground."""

from typing import ClassVar, Literal

import numpy as np
from pydantic import model_validator

from detune.brief.allowable.at_station import LocalDirection, chosen_stations, local_along, local_part
from detune.brief.allowable.base import HarmonicAllowable, Statistic, above_zero, read_direction
from detune.brief.allowable.views import Floats, Places, Responses, ResponseView, StaticView
from detune.brief.levels import ForceOrLevel, Level, level_note, refuse_unless_rms
from detune.brief.statement import AxisName, Direction, Name, describe, refuse

LOCAL = ("axial", "lateral", "resultant")


class TransmittedForce(HarmonicAllowable):
    """Amplitude of a transmitted dynamic force, upper limit.

    `through = "each-station"`: the force through one part at each station (or the `stations`
    named), `direction` "axial", "lateral" or "resultant". `through = "floor"`: the phasor sum of
    all forces the machine's parts and connections put on the floor; `through = "ground"`: what
    the floor passes on. Then `direction` is a global axis, a vector or "resultant". The `limit` may be a level in
    decibels of the rms value, "80 dB", re 1 µN (ISO 1683) or another reference that is stated with it.
    """

    title: ClassVar[str] = "transmitted force"
    unit: ClassVar[str] = "force"
    kind: Literal["transmitted-force"] = "transmitted-force"
    through: Literal["each-station", "floor", "ground"]
    stations: tuple[Name, ...] | None = None
    direction: AxisName | LocalDirection | Direction
    measure: Statistic
    limit: ForceOrLevel

    @model_validator(mode="after")
    def _values(self) -> "TransmittedForce":
        above_zero(self.limit, "a limit", at="limit")
        refuse_unless_rms(self.limit, self.measure)
        if self.through == "each-station":
            if self.direction not in LOCAL:
                raise refuse(
                    describe(self.direction),
                    'a part\'s own direction, through each station: "axial", "lateral" or "resultant"',
                    at="direction",
                )
        else:
            if self.stations is not None:
                raise refuse(
                    "stations", f'no "stations" for the force through the {self.through}', at="stations"
                )
            if self.direction in ("axial", "lateral"):
                raise refuse(
                    self.direction,
                    f'a global direction for the force through the {self.through}: "x", "y", "z", "resultant"'
                    " or a vector of three numbers",
                    at="direction",
                )
            read_direction(self.direction)  # type: ignore[arg-type]
        return self

    def places(self, places: Places) -> tuple[str, ...]:
        if self.through == "each-station":
            return chosen_stations(self.stations, places)
        return (self.through,)

    def stations_named(self) -> tuple[str, ...]:
        return self.stations or ()

    def statistic(self) -> Statistic:
        return self.measure

    def level_reference(self) -> float | None:
        return self.limit.reference if isinstance(self.limit, Level) else None

    def assumed(self) -> tuple[str, ...]:
        return level_note("limit on transmitted force", self.limit, self.unit)

    def along(self) -> Direction | None:
        if self.direction in ("axial", "lateral", "resultant"):
            return local_along("axial") if self.direction == "axial" else None
        return read_direction(self.direction)  # type: ignore[arg-type]

    def observed(self, view: ResponseView, place: str) -> Responses:
        if self.through == "each-station":
            return local_part(
                view.station_force(place), "lateral" if self.direction == "lateral" else "resultant"
            )
        return view.total_force(self.through)

    def bound(self, view: StaticView, place: str) -> Floats:
        return np.full(view.count, self.limit)

    def quantity(self) -> str:
        where = {
            "each-station": "through one part",
            "floor": "total into the floor",
            "ground": "total into the ground",
        }
        return f"transmitted force {where[self.through]}, {self.direction}, {self.measure}"
