"""Static equilibrium of a batch of designs, as allowables look at it."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.physics.static import solve_static_where_supported
from detune.response.absorbers import geometric_of, weight_of
from detune.response.designs import Designs
from detune.response.gravity import weight_to_topple
from detune.response.model import Model, StationRows, find_station
from detune.response.static_stiffness import static_stiffness
from detune.response.working_point import WorkingPoint, working_point

Floats = NDArray[np.float64]
AXIAL = np.array([0.0, 0.0, 1.0])


@dataclass(frozen=True)
class StaticBatch:
    """Static equilibrium of D designs: `q` (D, n)."""

    model: Model
    designs: Designs
    q: Floats
    working: WorkingPoint | None = None

    @property
    def count(self) -> int:
        return self.designs.count

    def motion(self, point: str) -> Floats:
        return (1.0 + self.model.creep) * (self.q @ self.model.points[point].T)

    def floor_motion(self) -> Floats:
        total = np.zeros((self.count, 3))
        if self.model.frame.flexible_floor:
            total[:, 2] = (1.0 + self.model.creep) * self.q[:, -1]
        return total

    def rotation(self, body: str) -> Floats:
        return (1.0 + self.model.creep) * (self.q @ self.model.frame.rotation_rows(body).T)

    def station_deflection(self, station: str) -> Floats:
        return (1.0 + self.model.creep) * self._elastic(find_station(self.model, station))

    def _elastic(self, station: StationRows) -> Floats:
        lifted: Floats = self.q @ station.rows.T - station.packing * AXIAL
        return lifted

    def station_load(self, station: str) -> Floats:
        found = find_station(self.model, station)
        stiffness = self.model.groups[found.group].arrays.stiffness_static[self.designs.part[:, found.group]]
        load: Floats = found.factor * stiffness * self._elastic(found)
        if self.working is not None:
            load[:, 2] = -self.working.force[self.model.stations.index(found)]
        return load

    def weight_to_topple(self) -> Floats:
        return weight_to_topple(self._tangent(), geometric_of(self.model, self.designs))

    def _tangent(self) -> Floats:
        """Static stiffness (D, n, n) at the working load."""
        stiffness = static_stiffness(self.model, self.designs)
        if self.working is None:
            return stiffness
        for number, station in enumerate(self.model.stations):
            arrays = self.model.groups[station.group].arrays
            listed = station.factor * arrays.stiffness_static[self.designs.part[:, station.group], 2]
            more = station.parallel * (self.working.tangent[number] - listed)
            stiffness += more[:, None, None] * np.outer(station.rows[2], station.rows[2])
        return stiffness

    def part_value(self, station: str, column: str) -> Floats:
        group = find_station(self.model, station).group
        values = getattr(self.model.groups[group].arrays, column)
        return np.asarray(values, dtype=float)[self.designs.part[:, group]]


def static_batch(model: Model, designs: Designs) -> StaticBatch:
    """Return the static equilibrium of a batch under gravity and the steady loads."""
    working = working_point(model, designs)
    if working is not None:
        return StaticBatch(model, designs, working.q, working)
    stiffness = static_stiffness(model, designs)
    load = weight_of(model, designs)
    for station in model.stations:
        if station.packing != 0.0 and station.parallel > 0:
            part = model.groups[station.group].arrays.stiffness_static[designs.part[:, station.group], 2]
            lift = station.parallel * station.factor * station.packing * part
            load = load + lift[:, None] * station.rows[2]
    if any(mount.pieces == 0 for group in model.groups for mount in group.mounts):
        # Empty stations can leave a design without support, which fails every static limit.
        q, supported = solve_static_where_supported(stiffness, load)
        return StaticBatch(model, designs, np.where(supported[:, None], q, np.nan))
    return StaticBatch(model, designs, np.asarray(np.linalg.solve(stiffness, load[..., None])[..., 0], float))
