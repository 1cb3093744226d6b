"""The views that allowables look at, for a batch of designs."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from detune.response.assemble import Dynamic
from detune.response.designs import Designs
from detune.response.expansion import Expansion
from detune.response.floor_ratio import floor_ratio
from detune.response.floor_table import beyond_spring
from detune.response.loads import Load
from detune.response.model import Model, find_station
from detune.response.solve import solve_or_resonate

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]


@dataclass(frozen=True)
class ToneBatch:
    """Response of D designs to one coherent set of loads at `omega` (D, F) rad/s of the tone.

    With an `expansion` by poles no matrix is solved.
    """

    model: Model
    designs: Designs
    dynamic: Dynamic
    loads: tuple[Load, ...]
    omega: Floats
    expansion: Expansion | None = None

    @cached_property
    def base(self) -> Complexes | None:
        """Free floor motion (D, F, 3), or None where the floor is not moved."""
        moving = [load for load in self.loads if load.base is not None]
        if not moving:
            return None
        total = np.zeros((*self.omega.shape, 3), dtype=complex)
        for load in moving:
            total = total + self.omega[..., None] ** float(load.power) * np.asarray(load.base)
        return total

    @cached_property
    def q(self) -> Complexes:
        """Response of the freedoms (D, F, n)."""
        if self.expansion is not None:
            return self.expansion.response(self.omega, self._load_vector())
        return solve_or_resonate(
            self.dynamic.at(self.omega), self.dynamic.stiffness[:, None], self._load_vector()
        )

    def _load_vector(self) -> Complexes:
        total = np.zeros((*self.omega.shape, self.model.frame.count), dtype=complex)
        for load in self.loads:
            if load.base is None:
                total += self.omega[..., None] ** float(load.power) * load.vector
        prescribed = self._prescribed
        if self.base is None or prescribed is None:
            return total
        # K(w) u at every station and connection that stands on the floor, moved to the right-hand side.
        for station in self.model.stations:
            if station.on_floor:
                force = station.parallel * self._stiffness(station.name) * (prescribed @ station.axes)
                total += force @ station.rows
        for c in self.model.connections:
            if c.on_floor:
                stiffness = c.stiffness + 1j * c.hysteretic + 1j * self.omega[..., None] * c.viscous
                total += (stiffness * prescribed) @ c.rows
        if self.model.frame.flexible_floor:
            m, k, c_floor = self.model.floor_mass, self.model.floor_stiffness, self.model.floor_damping
            own = k - self.omega**2 * m + 1j * self.omega * c_floor
            if self.model.floor_table is not None:
                own = own + beyond_spring(self.model.floor_table, m, k, self.omega)
            total[..., -1] += own * self.base[..., 2]
        return total

    @cached_property
    def _prescribed(self) -> Complexes | None:
        """Floor motion that is prescribed (D, F, 3): all of it, or only the level part over a flexible floor."""
        if self.base is None or not self.model.frame.flexible_floor:
            return self.base
        return np.asarray(self.base * np.array([1.0, 1.0, 0.0]))

    def _stiffness(self, station: str) -> Complexes:
        return self.dynamic.parts.stiffness(find_station(self.model, station), self.omega)

    def _rate(self, rate: int) -> Complexes:
        return np.asarray((1j * self.omega[..., None]) ** rate, dtype=complex)

    def motion(self, point: str, rate: int = 0) -> Complexes:
        return self._rate(rate) * (self.q @ self.model.points[point].T)

    def floor_motion(self, rate: int = 0) -> Complexes:
        total = np.zeros((*self.omega.shape, 3), dtype=complex)
        if self._prescribed is not None:
            total = total + self._prescribed
        if self.model.frame.flexible_floor:
            total[..., 2] += self.q[..., -1]
        return self._rate(rate) * total

    def foot_motion(self, station: str, rate: int = 0) -> Complexes:
        return self._rate(rate) * (self.q @ find_station(self.model, station).foot.T)

    def station_deflection(self, station: str, rate: int = 0) -> Complexes:
        found = find_station(self.model, station)
        deflection: Complexes = self.q @ found.rows.T
        if found.on_floor and self._prescribed is not None:
            deflection = deflection - self._prescribed @ found.axes
        return self._rate(rate) * deflection

    def station_force(self, station: str) -> Complexes:
        return self._stiffness(station) * self.station_deflection(station)

    def total_force(self, surface: str) -> Complexes:
        if surface == "ground" and self.model.frame.flexible_floor:
            return self._ground_force()
        if surface == "ground" and self.model.ground is not None:
            held = ~np.any(self.model.ground != 0.0, axis=1)
            return np.asarray(self.total_force("floor") * held + self.q @ self.model.ground.T)
        total = np.zeros((*self.omega.shape, 3), dtype=complex)
        for station in self.model.stations:
            if station.on_floor:
                total += station.parallel * self.station_force(station.name) @ station.axes.T
        for c in self.model.connections:
            if c.on_floor:
                stiffness = c.stiffness + 1j * c.hysteretic + 1j * self.omega[..., None] * c.viscous
                deflection = self.q @ c.rows.T
                if self._prescribed is not None:
                    deflection = deflection - self._prescribed
                total += stiffness * deflection
        return total

    def floor_ratio(self) -> Complexes:
        return floor_ratio(self.model, self.designs.step, self.omega, self._load_vector(), self.q)

    def _ground_force(self) -> Complexes:
        level = self.total_force("floor") * np.array([1.0, 1.0, 0.0])
        own = self.model.floor_stiffness + 1j * self.omega * self.model.floor_damping
        vertical = own * self.q[..., -1]
        return np.asarray(level + vertical[..., None] * np.array([0.0, 0.0, 1.0]))
