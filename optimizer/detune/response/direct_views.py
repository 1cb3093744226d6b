"""The views of one design that allowables look at, from the direct matrices."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import body_of
from detune.brief.forcing.base import Tone
from detune.brief.machine import Station
from detune.response.direct import FLOOR, DirectMachine
from detune.response.direct_floor import between_stations, direct_floor_ratio
from detune.response.direct_stiffness import connection_stiffness, moving_stiffness, restoring
from detune.response.floor_table import floor_spring
from detune.response.gravity import NEVER
from detune.response.solve import solve_or_resonate

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]


def station_named(machine: DirectMachine, name: str) -> Station:
    """Return the station of this name."""
    return next(station for station in machine.stations if station.name == name)


@dataclass(frozen=True)
class DirectStatic:
    """Static equilibrium of one design (D = 1)."""

    machine: DirectMachine
    count: int = 1

    @property
    def q(self) -> Floats:
        """Displacements (N,), zero where a freedom cannot move."""
        return self.machine.static_q

    def weight_to_topple(self) -> Floats:
        """The smallest positive x at which K + x K_g has no stiffness in some direction, by scipy's own solver."""
        from scipy.linalg import eigh

        free = self.machine.free
        mesh = np.ix_(free, free)
        stiffness = self.machine.stiffness(None).real[mesh]
        if self.machine.rest is not None:
            for number, station in enumerate(self.machine.stations):
                row = (self.machine.axes(station).T @ self.machine.across(station))[2, free]
                listed = self.machine.part(station, None)[2].real
                more = self.machine.share(station) * (self.machine.rest.tangent[number] - listed)
                stiffness = stiffness + more * np.outer(row, row)
        geometric = self.machine.gravity_stiffness()[mesh]
        if not np.all(np.isfinite(stiffness)):
            return np.array([np.nan])
        largest = float(eigh(-geometric, stiffness, eigvals_only=True)[-1])
        return np.array([1.0 / largest if largest > NEVER else np.inf])

    def motion(self, point: str) -> Floats:
        stated = next(p for p in self.machine.brief.points if p.name == point)
        rows = self.machine.place(body_of(self.machine.brief, stated.on), np.array(stated.position))
        return (1.0 + self.machine.creep) * (rows @ self.q)[None]

    def floor_motion(self) -> Floats:
        return (1.0 + self.machine.creep) * self.q[None, self.machine.floor_axes]

    def rotation(self, body: str) -> Floats:
        return (1.0 + self.machine.creep) * (self.machine.turn(body) @ self.q)[None]

    def station_deflection(self, station: str) -> Floats:
        return (1.0 + self.machine.creep) * self._elastic(station_named(self.machine, station))

    def _elastic(self, station: Station) -> Floats:
        """Deflection (1, 3) without creep: the body's motion less what its foot is lifted by."""
        lifted = self.machine.axes(station).T @ self.machine.across(station) @ self.q
        lifted[2] -= self.machine.packing(station)
        return lifted[None]

    def station_load(self, station: str) -> Floats:
        stated = station_named(self.machine, station)
        own = self.machine.factor(stated) * self.machine.part(stated, None).real
        load: Floats = own * self._elastic(stated)
        if self.machine.rest is not None and self.machine.share(stated) > 0.0:
            number = self.machine.stations.index(stated)
            load[0, 2] = -self.machine.factor(stated) * self.machine.rest.force[number]
        return load

    def part_value(self, station: str, column: str) -> Floats:
        value = getattr(self.machine.mount(station_named(self.machine, station)), column)
        return np.array([np.nan if value is None else float(value)])


@dataclass(frozen=True)
class DirectTone:
    """The response of one design to a coherent set of tones at omega (1, F) rad/s of the tone."""

    machine: DirectMachine
    tones: tuple[Tone, ...]
    omega: Floats

    @cached_property
    def _solved(self) -> tuple[Complexes, Complexes]:
        """Displacements (F, N) and load (F, N)."""
        machine, omega, free = self.machine, self.omega[0], self.machine.free
        load = np.zeros((len(omega), len(free)), dtype=complex)
        q = np.zeros_like(load)
        for tone in self.tones:
            part, motion = machine.tone_load(tone, omega)
            load += part
            if machine.floor is not None:
                # What the bare floor does freely needs this load on it: D_floor u_free.
                f = machine.floor
                own = floor_spring(f, omega) - omega**2 * f.mass
                load[:, machine.floor_vertical] += own * motion[:, machine.floor_vertical]
                motion[:, machine.floor_vertical] = 0.0
            q += motion
        right = load
        if np.any(q):
            # Prescribed motion moves the rest through the stiffness and the mass that they share.
            held = restoring(machine, omega, q, slice(None)) - omega[:, None] ** 2 * (q @ machine.mass.T)
            right = load - held
        own = moving_stiffness(machine, omega)
        inertia = omega[:, None, None] ** 2 * machine.mass[np.ix_(free, free)]
        q[:, free] = solve_or_resonate(own - inertia, own, right[:, free])
        return q, load

    @property
    def q(self) -> Complexes:
        return self._solved[0]

    @property
    def load(self) -> Complexes:
        return self._solved[1]

    def _rate(self, rate: int) -> Complexes:
        return np.asarray((1j * self.omega[..., None]) ** rate, dtype=complex)

    def motion(self, point: str, rate: int = 0) -> Complexes:
        stated = next(p for p in self.machine.brief.points if p.name == point)
        rows = self.machine.place(body_of(self.machine.brief, stated.on), np.array(stated.position))
        return self._rate(rate) * (self.q @ rows.T)[None]

    def floor_motion(self, rate: int = 0) -> Complexes:
        return self._rate(rate) * self.q[:, self.machine.floor_axes][None]

    def foot_motion(self, station: str, rate: int = 0) -> Complexes:
        rows = self.machine.foot(station_named(self.machine, station))
        return self._rate(rate) * (self.q @ rows.T)[None]

    def station_deflection(self, station: str, rate: int = 0) -> Complexes:
        stated = station_named(self.machine, station)
        local = (self.q @ self.machine.deflection_rows(stated).T)[None]
        return local if rate == 0 else self._rate(rate) * local

    def station_force(self, station: str) -> Complexes:
        stated = station_named(self.machine, station)
        own = self.machine.factor(stated) * self.machine.part(stated, self.omega[0])
        return own * self.station_deflection(station)

    def total_force(self, surface: str) -> Complexes:
        """The reaction of the floor node, turned round: what it receives."""
        q = self.q
        received = -restoring(self.machine, self.omega[0], q, self.machine.floor_axes)
        floor = self.machine.floor
        if floor is not None:
            # The node's own spring to the ground is part of the matrix; without it, what the machine puts on
            # the floor; with it alone, what the floor passes on.
            own = floor_spring(floor, self.omega[0]) * q[:, self.machine.floor_vertical]
            received[:, 2] = own if surface == "ground" else received[:, 2] + own
        received += between_stations(self.machine, self.omega[0], q, surface)
        return np.asarray(received[None], dtype=complex)

    def floor_ratio(self) -> Complexes:
        return direct_floor_ratio(self.machine, self.omega[0], self.load, self.q)

    def power(self) -> tuple[Floats, Floats]:
        """Mean power (F,) put in by the loads and by moved supports, and dissipated in the parts.

        Put in: Re(load . conj(velocity)) / 2 over all freedoms, prescribed ones with their reaction.
        Dissipated: the same sum over each part, connection and the floor from its own deflection.
        """
        q, load = self._solved
        omega = self.omega[0]
        velocity = 1j * omega[:, None] * q
        inertia = omega[:, None] ** 2 * (q @ self.machine.mass.T)
        acting = np.where(self.machine.free, load, restoring(self.machine, omega, q, slice(None)) - inertia)
        put_in = 0.5 * np.sum(acting * velocity.conj(), axis=1).real
        lost = np.zeros(len(omega))
        for station in self.machine.stations:
            deflection = self.station_deflection(station.name)[0]
            loss = self.machine.part(station, omega).imag
            lost += self.machine.share(station) * 0.5 * omega * np.sum(loss * np.abs(deflection) ** 2, axis=1)
        for connection in self.machine.brief.connections:
            position = np.array(connection.position)
            on = body_of(self.machine.brief, connection.on)
            rows = self.machine.place(on, position) - self.machine.place(connection.to, position)
            loss = connection_stiffness(connection, omega).imag
            lost += 0.5 * omega * np.sum(loss * np.abs(q @ rows.T) ** 2, axis=1)
        if self.machine.floor is not None:
            loss = floor_spring(self.machine.floor, omega).imag
            lost += 0.5 * omega * loss * np.abs(q[:, self.machine.floor_vertical]) ** 2
        if self.machine.elastic is not None:
            own_modes, first = self.machine.elastic.modes, 6 * len(self.machine.nodes)
            circular = 2.0 * np.pi * own_modes.frequency
            loss = 2.0 * own_modes.damping_ratio * circular * omega[:, None]
            loss = loss + (0.0 if own_modes.loss_factor is None else own_modes.loss_factor * circular**2)
            moved = np.abs(q[:, first : first + len(circular)]) ** 2
            lost += 0.5 * omega * np.sum(loss * moved, axis=1)
        return put_in, lost


__all__ = ["FLOOR", "DirectStatic", "DirectTone", "station_named"]
