"""The response limits of a problem as rows for the bounds: each allowable is asked what it observes, once per freedom.

An allowable's `observed` is linear in the response. So it is shown a view in which the axis of frequencies runs over
unit displacements, unit forces of all axes and unit motions of the floor; what it returns are its rows.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import TONE_FACTOR, HarmonicAllowable, Statistic
from detune.problem.build import HarmonicRequirements
from detune.proof.noise_data import NoiseRows, NoiseSet
from detune.proof.scatter_data import LimitedRows, LoadSet
from detune.response.coincidence import any_meet
from detune.response.evaluate import Rows
from detune.response.loads import Family, Load
from detune.response.model import Model, find_station
from detune.response.random import NoiseLoad

Floats = NDArray[np.float64]


class NotBounded(Exception):
    """A requirement of a kind the bounds do not know; the text says why."""


@dataclass
class UnitView:
    """A response view whose frequency axis counts unit freedoms (n), unit axis forces (A), unit floor motion (3)."""

    model: Model
    rates: set[int]
    ground: bool = False

    @property
    def axes(self) -> int:
        """Number A of axes, in the order of `scatter_system`."""
        return 3 * (len(self.model.stations) + len(self.model.connections)) + int(
            self.model.frame.flexible_floor
        )

    def _empty(self, rate: int) -> Floats:
        self.rates.add(rate)
        return np.zeros((1, self.model.frame.count + self.axes + 3, 3))

    @property
    def _prescribed(self) -> Floats:
        """Which floor motion is prescribed (3, 3): all of it, or the level part over a flexible floor."""
        return np.diag([1.0, 1.0, 0.0 if self.model.frame.flexible_floor else 1.0])

    def motion(self, point: str, rate: int = 0) -> Floats:
        out = self._empty(rate)
        out[0, : self.model.frame.count] = self.model.points[point].T
        return out

    def floor_motion(self, rate: int = 0) -> Floats:
        out = self._empty(rate)
        out[0, -3:] = self._prescribed
        if self.model.frame.flexible_floor:
            out[0, self.model.frame.count - 1, 2] = 1.0
        return out

    def foot_motion(self, station: str, rate: int = 0) -> Floats:
        out = self._empty(rate)
        out[0, : self.model.frame.count] = find_station(self.model, station).foot.T
        return out

    def station_deflection(self, station: str, rate: int = 0) -> Floats:
        out, found = self._empty(rate), find_station(self.model, station)
        out[0, : self.model.frame.count] = found.rows.T
        if found.on_floor:
            out[0, -3:] = -self._prescribed @ found.axes
        return out

    def __getattr__(self, name: str) -> object:
        if name.startswith("_"):
            raise AttributeError(name)
        raise NotBounded(f"the bounds do not know its {name.replace('_', ' ')}")

    def station_force(self, station: str) -> Floats:
        out, found = self._empty(0), find_station(self.model, station)
        first = self.model.frame.count + 3 * self.model.stations.index(found)
        out[0, first : first + 3] = np.eye(3) / max(found.parallel, 1)
        return out

    def total_force(self, surface: str) -> Floats:
        out, n = self._empty(0), self.model.frame.count
        for number, station in enumerate(self.model.stations):
            if station.on_floor:
                out[0, n + 3 * number : n + 3 * number + 3] = station.axes.T
        for number, connection in enumerate(self.model.connections):
            first = n + 3 * (len(self.model.stations) + number)
            if connection.on_floor:
                out[0, first : first + 3] = np.eye(3)
        if surface == "ground" and self.model.ground is not None:
            raise NotBounded("it is the force that a floor between stations passes on")
        if surface == "ground" and self.model.frame.flexible_floor:
            self.ground = True
            out[..., 2] = 0.0
            out[0, n + self.axes - 1, 2] = 1.0
        return out


@dataclass(frozen=True, eq=False)
class ObservedRow:
    """One requirement's components: on freedoms (3, n), axis forces (3, A) and floor motion (3, 3), and its rate."""

    rows: Floats
    forces: Floats
    base: Floats
    rate: int
    ellipse: bool
    statistic: Statistic
    meets: bool = False

    @property
    def factor(self) -> float:
        """What a tone's peak counts as."""
        return TONE_FACTOR[self.statistic]

    @property
    def squares(self) -> bool:
        """Whether different orders and speeds add as squares; linearly where speeds can come to one frequency."""
        return self.statistic == "rms" and not self.meets


def observed_row(model: Model, allowable: HarmonicAllowable, place: str, rows: Rows) -> ObservedRow:
    """Return the components of a requirement under the loads of `rows`. Raises NotBounded."""
    if allowable.has_weighting():
        raise NotBounded("it is weighted by frequency")
    view = UnitView(model, set())
    seen = np.asarray(allowable.observed(view, place))[0]
    if len(view.rates) != 1:
        raise NotBounded("it mixes displacement with its derivatives")
    loads = [load for family in rows.families for loads in family.sets for load in loads]
    loads += [each.load for each in rows.noises]
    if view.ground and any(load.base is not None for load in loads):
        raise NotBounded("it is the force into the ground under a moved flexible floor")
    along = allowable.along()
    if along is not None:
        seen = (seen @ np.asarray(along))[:, None] * np.array([1.0, 0.0, 0.0])
    n, statistic = model.frame.count, allowable.statistic()
    return ObservedRow(
        rows=np.ascontiguousarray(seen[:n].T),
        forces=np.ascontiguousarray(seen[n:-3].T),
        base=np.ascontiguousarray(seen[-3:].T),
        rate=view.rates.pop(),
        ellipse=statistic != "rms",
        statistic=statistic,
        meets=any_meet(rows.families),
    )


def limited_rows(
    group: HarmonicRequirements, rows: list[ObservedRow], limits: Floats, family: Family, forcing: float
) -> LimitedRows:
    """Return the rows of a family with limits (R,); forcing: factor of the greatest amplitude."""
    return LimitedRows(
        rows=np.stack([row.rows for row in rows]),
        forces=np.stack([row.forces for row in rows]),
        rate=np.array([row.rate for row in rows], dtype=np.float64),
        ellipse=np.array([row.ellipse for row in rows]),
        factor=forcing * np.array([row.factor for row in rows]),
        squares=np.array([row.squares for row in rows]),
        limit=limits,
        sets=tuple(load_set(group.model, loads, rows) for loads in family.sets),
        speed=(family.low, family.high),
    )


def noise_rows(
    model: Model, noises: tuple[NoiseLoad, ...], rows: list[ObservedRow], limits: Floats, forcing: float
) -> NoiseRows:
    """Return the rows under noise with limits (R,); forcing: factor of the greatest amplitude."""
    counted: dict[Statistic, float] = {"rms": 1.0, "3-sigma": 3.0, "peak": 1.0, "peak-to-peak": 2.0}
    return NoiseRows(
        rows=np.stack([row.rows for row in rows]),
        forces=np.stack([row.forces for row in rows]),
        rate=np.array([row.rate for row in rows], dtype=np.float64),
        factor=forcing * np.array([counted[row.statistic] for row in rows]),
        extreme=np.array([row.statistic in ("peak", "peak-to-peak") for row in rows]),
        duration=max(each.noise.duration for each in noises),
        limit=limits,
        sets=tuple(
            NoiseSet(
                load_set(model, (each.load,), rows),
                each.noise.spectrum.frequency,
                each.noise.spectrum.density,
            )
            for each in noises
        ),
    )


def load_set(model: Model, loads: tuple[Load, ...], rows: list[ObservedRow]) -> LoadSet:
    """One coherent set of loads as the arrays of the proof floor, for rows observed at one model."""
    n = model.frame.count
    by_power: dict[float, list[NDArray[np.complex128]]] = {}
    axes = rows[0].forces.shape[1]

    def at(power: float) -> list[NDArray[np.complex128]]:
        return by_power.setdefault(
            power,
            [np.zeros(n, complex), np.zeros(axes, complex), np.zeros((len(rows), 3), complex)],
        )

    flexible = model.frame.flexible_floor
    for load in loads:
        here = at(float(load.power))
        if load.base is None:
            here[0] += load.vector
            continue
        prescribed = load.base * np.array([1.0, 1.0, 0.0 if flexible else 1.0])
        for number, station in enumerate(model.stations):
            if station.on_floor:
                here[1][3 * number : 3 * number + 3] += prescribed @ station.axes
        for number, connection in enumerate(model.connections):
            first = 3 * (len(model.stations) + number)
            if connection.on_floor:
                here[1][first : first + 3] += prescribed
        here[2] += np.einsum("rck,k->rc", np.stack([row.base for row in rows]), load.base)
        if flexible:
            # What the bare floor does freely needs D_floor u: its spring is an axis, its inertia a load.
            here[1][-1] += load.base[2]
            at(float(load.power) + 2.0)[0][-1] -= model.floor_mass * load.base[2]
    powers = sorted(by_power)
    return LoadSet(
        order=loads[0].order,
        powers=np.array(powers),
        loads=np.stack([by_power[p][0] for p in powers]),
        bases=np.stack([by_power[p][1] for p in powers]),
        direct=np.stack([by_power[p][2] for p in powers]),
    )
