"""The limits of a brief as outputs that the box bound can prove over ranges of stiffness, damping and frequency."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.band_limit import BandLimit
from detune.brief.allowable.base import BandAllowable, HarmonicAllowable
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.allowable.transmissibility import Transmissibility
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.allowable.uplift import Uplift
from detune.brief.allowable.velocity import Velocity
from detune.brief.brief import Brief, applies, demanded
from detune.brief.condition import Condition
from detune.brief.statement import unit_direction
from detune.physics.octaves import band_edges
from detune.proof.robust_data import OutputLimit
from detune.response.loads import Load, condition_families, excitation_intervals
from detune.response.model import Model

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Sets = list[tuple[float, float, tuple[Load, ...]]]
RATE: dict[type[HarmonicAllowable], int] = {Displacement: 0, Velocity: 1, Acceleration: 2}
FACTOR = {"peak": 1.0, "3-sigma": 1.0, "rms": 2.0**0.5, "peak-to-peak": 0.5}
EDGE = 1e-9


@dataclass(frozen=True)
class Outputs:
    """Named outputs, and the limits that have no such form, in words."""

    proven: tuple[tuple[str, OutputLimit], ...]
    left_out: tuple[str, ...]


def outputs_of(brief: Brief, model: Model, station_load: dict[str, float]) -> Outputs:
    """Every limit of the brief at a machine as installed; `station_load` is the static axial load (N) of one part."""
    return _Gather(brief, model, station_load).all()


class _Gather:
    def __init__(self, brief: Brief, model: Model, station_load: dict[str, float]) -> None:
        self.brief, self.model, self.load = brief, model, station_load
        self.found: list[tuple[str, OutputLimit]] = []
        self.left: list[str] = []
        self.axes = np.concatenate([station.rows for station in model.stations])

    def all(self) -> Outputs:
        for allowable in demanded(self.brief)[0]:
            if not isinstance(allowable, (HarmonicAllowable, BandAllowable)):
                continue
            for condition in self.brief.conditions:
                if applies(allowable.conditions, condition.name):
                    self._in(condition, allowable)
        return Outputs(tuple(self.found), tuple(dict.fromkeys(self.left)))

    def _leave(self, allowable: HarmonicAllowable | BandAllowable, why: str) -> None:
        self.left.append(f"{allowable.quantity()}: {why}")

    def _in(self, condition: Condition, allowable: HarmonicAllowable | BandAllowable) -> None:
        if isinstance(allowable, MountDeflection) and allowable.limit == "part":
            return
        if isinstance(allowable, Uplift) and all(m.pulls for g in self.model.groups for m in g.mounts):
            return
        acting = [f for f in self.brief.forcing if applies(f.conditions, condition.name)]
        forced = not isinstance(allowable, Transmissibility)
        if condition.state is not None or (forced and any(f.noises() or f.transients() for f in acting)):
            self._leave(allowable, f"noise, records and other states of {condition.name}")
            return
        if condition.run_up or condition.coast_down:
            self._leave(allowable, f"the passage of {condition.name}")
            return
        if isinstance(allowable, Transmissibility):
            self._transmissibility(condition, allowable)
            return
        sets: Sets = [
            (family.low, family.high, loads)
            for family in condition_families(self.brief, self.model, condition)
            for loads in family.sets
        ]
        if isinstance(allowable, BandAllowable):
            self._bands(condition, allowable, sets)
            return
        rows = self._rows(allowable)
        if rows is None:
            self._leave(allowable, "a kind that has no provable form")
            return
        for place, row, force, rate, limit in rows:
            name = f"{allowable.quantity()} at {place} ({condition.name})"
            self._add(name, allowable, row, force, rate, limit / len(sets), sets)

    def _rows(
        self, allowable: HarmonicAllowable
    ) -> list[tuple[str, Complexes, Complexes, int, float]] | None:
        """(place, row, force, rate, peak limit): a resultant becomes its three axes, each at limit / sqrt 3 (safe)."""
        n, count = self.model.frame.count, len(self.axes)
        none_row, none_force = np.zeros(n, complex), np.zeros(count, complex)
        if type(allowable) in RATE:
            place = allowable.points_named()[0]
            limit = getattr(allowable, "limit") * FACTOR[allowable.statistic()]  # noqa: B009
            along = allowable.along()
            directions = np.eye(3) if along is None else np.array([along])
            share = np.sqrt(len(directions))
            rate = RATE[type(allowable)]
            point = self.model.points[place]
            return [(place, (d @ point).astype(complex), none_force, rate, limit / share) for d in directions]
        if isinstance(allowable, TransmittedForce) and allowable.through != "each-station":
            if self.model.frame.flexible_floor and allowable.through == "ground":
                return None
            along = allowable.along()
            directions = np.eye(3) if along is None else np.array([along])
            limit = allowable.limit * FACTOR[allowable.measure] / np.sqrt(len(directions))
            return [(allowable.through, none_row, self._total(d), 0, limit) for d in directions]
        if isinstance(allowable, (TransmittedForce, Uplift)):
            return self._each(allowable, none_row)
        return None

    def _total(self, direction: Floats) -> Complexes:
        parts = [
            (direction @ station.axes if station.on_floor else np.zeros(3)) for station in self.model.stations
        ]
        return np.concatenate(parts).astype(complex)

    def _each(
        self, allowable: TransmittedForce | Uplift, none: Complexes
    ) -> list[tuple[str, Complexes, Complexes, int, float]]:
        found = []
        named = allowable.stations_named() or self.model.station_names
        for number, station in enumerate(self.model.stations):
            if station.name not in named or station.parallel == 0:
                continue
            if isinstance(allowable, Uplift):
                local, limit = [2], self.load[station.name]
                if limit <= 0.0:
                    continue
            else:
                local = {"axial": [2], "lateral": [0, 1], "resultant": [0, 1, 2]}[str(allowable.direction)]
                limit = allowable.limit * FACTOR[allowable.measure] / np.sqrt(len(local))
            for axis in local:
                force = np.zeros(len(self.axes), complex)
                force[3 * number + axis] = 1.0 / station.parallel
                found.append((station.name, none, force, 0, float(limit)))
        return found

    def _loads(self, loads: tuple[Load, ...]) -> tuple[Complexes, Complexes, int] | None:
        """Load (n,), base (A,) along the axes and power of one coherent set; None where powers differ."""
        powers = {load.power for load in loads}
        if len(powers) > 1:
            return None
        vector = sum((load.vector for load in loads), np.zeros(self.model.frame.count, complex))
        floor = sum((load.base for load in loads if load.base is not None), np.zeros(3, complex))
        if np.any(floor) and (self.model.frame.flexible_floor or self.model.connections):
            return None
        parts = [floor @ s.axes if s.on_floor else np.zeros(3, complex) for s in self.model.stations]
        return vector, np.concatenate(parts), powers.pop()

    def _add(
        self,
        name: str,
        allowable: HarmonicAllowable | BandAllowable,
        row: Complexes,
        force: Complexes,
        rate: int,
        limit: float,
        sets: Sets,
    ) -> None:
        for low, high, loads in sets:
            acting = self._loads(loads)
            if acting is None:
                self._leave(allowable, "a source that is no power of the frequency, or a floor that moves")
                continue
            vector, base, power = acting
            order = loads[0].order
            if not (np.any(vector) or np.any(base)):
                continue
            full = f"{name}, {order * low:.4g} to {order * high:.4g} Hz"
            self.found.append(
                (full, OutputLimit(row, force, vector, base, limit, (order * low, order * high), power, rate))
            )

    def _transmissibility(self, condition: Condition, allowable: Transmissibility) -> None:
        along = np.array(unit_direction(allowable.direction))
        n = self.model.frame.count
        intervals = excitation_intervals(self.brief, (condition,))
        least = allowable.lowest_frequency()
        sets: Sets = []
        for low, high in intervals:
            if high < least:
                continue
            vector, base = np.zeros(n, complex), None
            if allowable.of == "force":
                body = self.brief.bodies[0].name
                vector = self.model.frame.motion_rows(
                    body, self.model.frame.references[body]
                ).T @ along.astype(complex)
            else:
                base = along.astype(complex)
            sets.append((max(low, least), high, (Load("unit", 1.0, vector, base, 0),)))
        row, force = np.zeros(n, complex), np.zeros(len(self.axes), complex)
        if allowable.of == "force":
            force = self._total(along)
        else:
            row = (along @ self.model.points[str(allowable.at)]).astype(complex)
        self._add(
            f"{allowable.quantity()} ({condition.name})", allowable, row, force, 0, allowable.limit, sets
        )

    def _bands(self, condition: Condition, allowable: BandAllowable, sets: Sets) -> None:
        if not isinstance(allowable, BandLimit) or allowable.at == "floor":
            self._leave(allowable, "a kind that has no provable form")
            return
        row = (np.array(allowable.along()) @ self.model.points[allowable.at]).astype(complex)
        force = np.zeros(len(self.axes), complex)
        for band, limit in zip(*allowable.bands(), strict=True):
            edges = band_edges(np.array([band]))
            first, last = float(edges[0][0]), float(edges[1][0])
            here: Sets = []
            for low, high, loads in sets:
                order = loads[0].order
                a, b = max(order * low, first), min(order * high, last)
                if b >= a and not (high > low and b <= a * (1.0 + EDGE)):
                    here.append((a / order, b / order, loads))
            # Mean squares of several sources in one band: each within its share.
            share = float(limit) * 2.0**0.5 / np.sqrt(max(len(here), 1))
            self._add(f"{allowable.quantity()} ({condition.name})", allowable, row, force, 1, share, here)
