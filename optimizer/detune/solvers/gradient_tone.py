"""The response to one coherent set of tones at single frequencies, and the adjoint of anything linear in it.

What a limit may look at is gathered in one vector of features for each frequency: the freedoms q, the prescribed floor
motion, every station's deflection (each with its first two rates), every station's force, the force of given
connections on the floor, and what the floor passes on to the ground. A limit is linear in them. For a cotangent psi of
the features, dA = Re(psi . dphi), one adjoint gives the slopes by all unknowns:

    lambda = D^-T (psi dphi/dq),   dA/dx = Re(lambda . (df/dx - dD/dx q) + psi . dphi/dx)
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.response.loads import Load
from detune.response.model import Model
from detune.response.solve import solve_or_resonate
from detune.sizing.part_slopes import FIGURES, LOSS, STIFFNESS, VISCOUS
from detune.solvers.gradient_state import StateAt

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
LEVEL = np.array([1.0, 1.0, 0.0])


@dataclass(frozen=True)
class Layout:
    """Where each feature of n freedoms and S stations stands in the vector of features."""

    freedoms: int
    stations: int

    @property
    def size(self) -> int:
        return 3 * self.freedoms + 9 + 12 * self.stations + 4

    def motion(self, rate: int) -> slice:
        return slice(rate * self.freedoms, (rate + 1) * self.freedoms)

    def floor(self, rate: int) -> slice:
        start = 3 * self.freedoms + 3 * rate
        return slice(start, start + 3)

    def deflection(self, rate: int) -> slice:
        start = 3 * self.freedoms + 9 + 3 * self.stations * rate
        return slice(start, start + 3 * self.stations)

    @property
    def force(self) -> slice:
        return self.deflection(3)

    @property
    def connections(self) -> slice:
        start = 3 * self.freedoms + 9 + 12 * self.stations
        return slice(start, start + 3)

    @property
    def ground(self) -> int:
        return self.size - 1


@dataclass(frozen=True)
class Tones:
    """Responses at N frequencies `omega` (N,) rad/s of the tone: q (N, n), features (N, layout.size).

    `stiffness` (N, S, 3) complex, `deflection` (N, S, 3), `dynamic` (N, n, n).
    """

    at: StateAt
    layout: Layout
    omega: Floats
    q: Complexes
    stiffness: Complexes
    deflection: Complexes
    features: Complexes
    dynamic: Complexes


def tones(at: StateAt, loads: tuple[Load, ...], omega: Floats) -> Tones:
    """The responses to one coherent set of loads at `omega` (N,), each frequency by itself."""
    model = at.sized.model
    layout = Layout(model.frame.count, len(model.stations))
    base = _base(loads, omega)
    moved = base * LEVEL if model.frame.flexible_floor else base
    stiffness = at.complex_stiffness(omega)
    local = _local(model, moved)
    dynamic = at.dynamic(omega)
    load = _load(at, loads, omega, base, moved, stiffness, local)
    q = solve_or_resonate(dynamic, at.stiffness, load)
    deflection = (q @ at.flat.T).reshape(local.shape) - local
    features = np.zeros((len(omega), layout.size), dtype=complex)
    for rate in range(3):
        turned = (1j * omega[:, None]) ** rate
        features[:, layout.motion(rate)] = turned * q
        features[:, layout.floor(rate)] = turned * moved
        features[:, layout.deflection(rate)] = turned * deflection.reshape(len(omega), -1)
    features[:, layout.force] = (stiffness * deflection).reshape(len(omega), -1)
    for c in model.connections:
        if c.on_floor:
            held = c.stiffness + 1j * c.hysteretic + 1j * omega[:, None] * c.viscous
            features[:, layout.connections] += held * (q @ c.rows.T - moved)
    if model.frame.flexible_floor:
        features[:, layout.ground] = (model.floor_stiffness + 1j * omega * model.floor_damping) * q[:, -1]
    return Tones(at, layout, omega, q, stiffness, deflection, features, dynamic)


def _base(loads: tuple[Load, ...], omega: Floats) -> Complexes:
    total = np.zeros((len(omega), 3), dtype=complex)
    for load in loads:
        if load.base is not None:
            total += omega[:, None] ** float(load.power) * np.asarray(load.base)
    return total


def _local(model: Model, moved: Complexes) -> Complexes:
    """Prescribed floor motion (N, S, 3) in the axes of the stations that stand on it."""
    local = np.zeros((len(moved), len(model.stations), 3), dtype=complex)
    if not moved.any():
        return local
    for number, station in enumerate(model.stations):
        if station.on_floor:
            local[:, number] = moved @ station.axes
    return local


def _load(
    at: StateAt,
    loads: tuple[Load, ...],
    omega: Floats,
    base: Complexes,
    moved: Complexes,
    stiffness: Complexes,
    local: Complexes,
) -> Complexes:
    model = at.sized.model
    total = np.zeros((len(omega), model.frame.count), dtype=complex)
    for load in loads:
        if load.base is None:
            total += omega[:, None] ** float(load.power) * load.vector
    if not base.any():
        return total
    total += (_parallel(model)[None, :, None] * stiffness * local).reshape(len(omega), -1) @ at.flat
    for c in model.connections:
        if c.on_floor:
            total += ((c.stiffness + 1j * c.hysteretic + 1j * omega[:, None] * c.viscous) * moved) @ c.rows
    if model.frame.flexible_floor:
        own = model.floor_stiffness - omega**2 * model.floor_mass + 1j * omega * model.floor_damping
        total[:, -1] += own * base[:, 2]
    return total


def _parallel(model: Model) -> Floats:
    return np.array([float(station.parallel) for station in model.stations])


def pulled_back(found: Tones, cotangent: Complexes) -> Floats:
    """Slopes (N, u) of what has these cotangents (N, layout.size) of the features."""
    at, layout, omega = found.at, found.layout, found.omega
    model = at.sized.model
    count, stations = len(omega), layout.stations
    by_force = cotangent[:, layout.force].reshape(count, stations, 3)
    by_deflection = found.stiffness * by_force
    by_q = np.zeros((count, layout.freedoms), dtype=complex)
    for rate in range(3):
        turned = (1j * omega) ** rate
        each = cotangent[:, layout.deflection(rate)].reshape(count, stations, 3)
        by_deflection = by_deflection + turned[:, None, None] * each
        by_q += turned[:, None] * cotangent[:, layout.motion(rate)]
    by_q += by_deflection.reshape(count, -1) @ at.flat
    for c in model.connections:
        if c.on_floor:
            held = c.stiffness + 1j * c.hysteretic + 1j * omega[:, None] * c.viscous
            by_q += (cotangent[:, layout.connections] * held) @ c.rows
    if model.frame.flexible_floor:
        own = model.floor_stiffness + 1j * omega * model.floor_damping
        by_q[:, -1] += cotangent[:, layout.ground] * own
    adjoint = solve_or_resonate(np.swapaxes(found.dynamic, 1, 2), at.stiffness, by_q)
    along = (adjoint @ at.flat.T).reshape(by_deflection.shape)
    parallel = _parallel(model)[None, :, None]
    by_stiffness = (by_force - parallel * along) * found.deflection
    slopes = _by_parts(at, by_stiffness, omega)
    return _by_machine(found, slopes, adjoint, along * parallel, by_deflection)


def _by_parts(at: StateAt, by_stiffness: Complexes, omega: Floats) -> Floats:
    """Slopes (N, u) through the parts, from cotangents (N, S, 3) of the complex stiffness at every station."""
    part = at.station_parts()
    each = at.sized.each[None, :, None] * by_stiffness
    figures = np.zeros((len(omega), *part.shape))
    figures[:, :, STIFFNESS] = np.real(each * (1.0 + 1j * part[None, :, LOSS, None]))
    figures[:, :, VISCOUS] = np.real(1j * omega[:, None, None] * each)
    figures[:, :, LOSS] = np.real(1j * np.sum(each * part[None, :, STIFFNESS], axis=2))
    return by_groups(at, figures)


def by_groups(at: StateAt, figures: Floats) -> Floats:
    """Slopes (N, u) from cotangents (N, S, 8) of the figures of the part at every station."""
    groups = np.zeros((len(figures), len(at.parts), FIGURES))
    for group in range(len(at.parts)):
        groups[:, group] = figures[:, at.sized.group == group].sum(axis=1)
    return np.asarray(groups.reshape(len(figures), -1) @ at.part_slopes.reshape(-1, at.part_slopes.shape[2]))


def _by_machine(
    found: Tones, slopes: Floats, adjoint: Complexes, carried: Complexes, by_deflection: Complexes
) -> Floats:
    """Add what ballast, absorber masses and positions change in the masses, gravity's stiffness and the rows."""
    at, q = found.at, found.q
    machine = at.sized.slopes
    if not machine.columns:
        return slopes
    omega2 = found.omega**2
    by_column = omega2 * np.sum(adjoint.T * (machine.mass @ q.T), axis=1).real
    if at.sized.model.with_gravity_stiffness and at.geometric_slopes.any():
        by_column -= np.sum(adjoint.T * (at.geometric_slopes @ q.T), axis=1).real
    if machine.rows.any():
        count = len(q)
        parallel = _parallel(at.sized.model)[None, :, None]
        flat = machine.rows.reshape(len(machine.columns), -1, q.shape[1])
        force = (by_deflection - found.stiffness * carried).reshape(count, -1)
        back = (parallel * found.stiffness * found.deflection).reshape(count, -1)
        by_column += np.sum(force.T * (flat @ q.T) - back.T * (flat @ adjoint.T), axis=1).real
    slopes[:, list(machine.columns)] += by_column.T
    return slopes
