"""What a limit looks at, as numbers: an allowable asked about unit features tells its linear map.

A limit that asks for something the features do not hold, or that is not linear in them, has no map; it is then
differenced.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import HarmonicAllowable, StaticAllowable
from detune.response.model import Model, find_station
from detune.solvers.gradient_tone import LEVEL, Layout

Floats = NDArray[np.float64]


class NoMap(Exception):
    """The limit looks at something that is not in the features, or not linearly."""


@dataclass(frozen=True)
class ToneProbe:
    """A response view of unit features: design number k has feature k alone, at one frequency."""

    model: Model
    layout: Layout

    def __getattr__(self, name: str) -> Any:
        raise NoMap(name)

    def _unit(self, start: int, count: int) -> Floats:
        unit = np.zeros((self.layout.size, 1, count))
        unit[start : start + count, 0] = np.eye(count)
        return unit

    def motion(self, point: str, rate: int = 0) -> Floats:
        at = self.layout.motion(rate)
        return np.asarray(self._unit(at.start, self.layout.freedoms) @ self.model.points[point].T)

    def floor_motion(self, rate: int = 0) -> Floats:
        total = self._unit(self.layout.floor(rate).start, 3)
        if self.model.frame.flexible_floor:
            total = total * LEVEL
            total[self.layout.motion(rate).stop - 1, 0, 2] = 1.0
        return total

    def _number(self, station: str) -> int:
        return self.model.stations.index(find_station(self.model, station))

    def station_deflection(self, station: str, rate: int = 0) -> Floats:
        return self._unit(self.layout.deflection(rate).start + 3 * self._number(station), 3)

    def station_force(self, station: str) -> Floats:
        return self._unit(self.layout.force.start + 3 * self._number(station), 3)

    def total_force(self, surface: str) -> Floats:
        total = self._unit(self.layout.connections.start, 3)
        for station in self.model.stations:
            if station.on_floor:
                total = total + station.parallel * self.station_force(station.name) @ station.axes.T
        if surface == "ground" and self.model.frame.flexible_floor:
            total = total * LEVEL
            total[self.layout.ground, 0, 2] = 1.0
        return total


def tone_map(allowable: HarmonicAllowable, place: str, model: Model) -> Floats:
    """Map (layout.size, 3) from features to what the limit observes. Raises NoMap."""
    layout = Layout(model.frame.count, len(model.stations))
    observed = np.asarray(allowable.observed(ToneProbe(model, layout), place))
    if observed.shape != (layout.size, 1, 3) or np.iscomplexobj(observed):
        raise NoMap(allowable.kind)
    return np.asarray(observed[:, 0], dtype=float)


def static_size(model: Model) -> int:
    """Number of static features: the freedoms, then every station's deflection and force."""
    return model.frame.count + 6 * len(model.stations)


@dataclass(frozen=True)
class StaticProbe:
    """A static view of any vectors of features (D, static_size)."""

    model: Model
    features: Floats

    def __getattr__(self, name: str) -> Any:
        raise NoMap(name)

    @property
    def count(self) -> int:
        return len(self.features)

    def _freedoms(self) -> Floats:
        return (1.0 + self.model.creep) * self.features[:, : self.model.frame.count]

    def motion(self, point: str) -> Floats:
        return np.asarray(self._freedoms() @ self.model.points[point].T)

    def rotation(self, body: str) -> Floats:
        return np.asarray(self._freedoms() @ self.model.frame.rotation_rows(body).T)

    def floor_motion(self) -> Floats:
        total = np.zeros((self.count, 3))
        if self.model.frame.flexible_floor:
            total[:, 2] = self._freedoms()[:, -1]
        return total

    def _station(self, station: str, block: int) -> Floats:
        number = self.model.stations.index(find_station(self.model, station))
        start = self.model.frame.count + 3 * (block * len(self.model.stations) + number)
        return self.features[:, start : start + 3]

    def station_deflection(self, station: str) -> Floats:
        return (1.0 + self.model.creep) * self._station(station, 0)

    def station_load(self, station: str) -> Floats:
        return self._station(station, 1)

    def part_value(self, station: str, column: str) -> Floats:
        group = find_station(self.model, station).group
        value = np.asarray(getattr(self.model.groups[group].arrays, column), dtype=float)[0]
        return np.full(self.count, float(value))


def static_map(allowable: StaticAllowable, place: str, model: Model) -> Floats:
    """Map (static_size,) from static features to the limited quantity. Raises NoMap where it is not linear."""
    return linear(lambda view: allowable.value(view, place), model)


def linear(value: object, model: Model) -> Floats:
    """Map (static_size,) of a function of a static view. Raises NoMap where it is not linear."""
    size = static_size(model)
    # Two vectors of features with all signs, that no linear map confuses.
    tried = np.stack([np.cos(1.0 + 3.0 * np.arange(size)), np.sin(2.0 + 5.0 * np.arange(size))])
    assert callable(value)
    found = np.asarray(value(StaticProbe(model, np.eye(size))), dtype=float)
    if found.shape != (size,) or not np.isfinite(found).all():
        raise NoMap("not linear")
    told = np.asarray(value(StaticProbe(model, np.vstack([tried, -tried]))), dtype=float)
    if not np.allclose(told, np.vstack([tried, -tried]) @ found, rtol=1e-9, atol=1e-9 * np.abs(found).max()):
        raise NoMap("not linear")
    return found
