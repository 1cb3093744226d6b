"""The assessor's responses in time: pulses and records by scipy's own simulation, passages by sampling.

In time a loss factor stands as the viscous damping of each mode's own loss factor (physics.causal).
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable import HarmonicAllowable
from detune.brief.allowable.base import combine, record_amplitude, tone_amplitude
from detune.brief.brief import body_of
from detune.brief.forcing import Tone, Transient
from detune.brief.machine import Station
from detune.physics.simulation import simulate
from detune.response.direct import FLOOR, DirectMachine
from detune.response.direct_modes import DirectModes
from detune.response.direct_views import station_named
from detune.response.transient import floor_motion, record_samples

Floats = NDArray[np.float64]
Pairs = tuple[tuple[HarmonicAllowable, str], ...]
TWO_PI = 2.0 * np.pi
SAMPLES_PER_CYCLE = 160.0


@dataclass(frozen=True, eq=False)
class DirectMotion:
    """One design over time (D = 1): rates (3, T, n) of the free freedoms relative to the floor's free motion.

    `lagged` (T, n): velocity of each mode over its own frequency. `floor` (3, T) along `base`. Complex
    for the envelope of a passage.
    """

    machine: DirectMachine
    rates: NDArray[np.generic]
    lagged: NDArray[np.generic]
    floor: Floats
    base: Floats

    def _rows(self, rows: Floats) -> Floats:
        return rows[:, self.machine.free]

    def motion(self, point: str, rate: int = 0) -> NDArray[np.generic]:
        stated = next(p for p in self.machine.brief.points if p.name == point)
        rows = self.machine.place(body_of(self.machine.brief, stated.on), np.array(stated.position))
        return (self.rates[rate] @ self._rows(rows).T + self.floor[rate][:, None] * self.base)[None]

    def station_deflection(self, station: str, rate: int = 0) -> NDArray[np.generic]:
        stated = station_named(self.machine, station)
        rows = self.machine.axes(stated).T @ self._rows(self.machine.across(stated))
        return (self.rates[rate] @ rows.T)[None]

    def station_force(self, station: str) -> NDArray[np.generic]:
        return self._force(station_named(self.machine, station))[None]

    def _count(self, station: Station) -> float:
        return self.machine.share(station) / self.machine.factor(station)

    def _force(self, station: Station) -> NDArray[np.generic]:
        mount = self.machine.mount(station)
        dynamic, eta, viscous = (
            np.array([value or 0.0 for value in column], dtype=float)
            for column in (mount.stiffness_dynamic, mount.loss_factor, mount.viscous)
        )
        rows = self.machine.axes(station).T @ self._rows(self.machine.across(station))
        moved, fast, lagged = (x @ rows.T for x in (self.rates[0], self.rates[1], self.lagged))
        return self.machine.factor(station) * (dynamic * moved + viscous * fast + dynamic * eta * lagged)

    def total_force(self, surface: str) -> NDArray[np.generic]:
        brief, floor = self.machine.brief, self.machine.floor
        total = np.zeros((len(self.lagged), 3), dtype=self.rates.dtype)
        for station in brief.stations:
            if station.to == FLOOR:
                total = total + self._count(station) * self._force(station) @ self.machine.axes(station).T
        for c in brief.connections:
            if c.to == FLOOR:
                position = np.array(c.position)
                rows = self.machine.place(body_of(brief, c.on), position) - self.machine.place(FLOOR, position)
                moved, fast, lagged = (x @ self._rows(rows).T for x in (self.rates[0], self.rates[1], self.lagged))
                stiffness = np.array(c.stiffness)
                total = total + stiffness * moved + stiffness * (c.loss_factor or 0.0) * lagged
                total = total + np.array(c.viscous or (0.0, 0.0, 0.0)) * fast
        if surface == "ground" and floor is not None:
            column = int(np.flatnonzero(np.flatnonzero(self.machine.free) == self.machine.floor_vertical)[0])
            total[:, 2] = floor.stiffness * self.rates[0][:, column] + floor.damping * self.rates[1][:, column]
        return total[None]


def modal_damping(found: DirectModes) -> Floats:
    """Return the viscous damping (n, n): the stated one, and each mode's stand-in for its loss factor."""
    omega = TWO_PI * found.frequency
    carried = found.mass @ found.shapes
    lost = np.diag(found.shapes.T @ found.hysteretic @ found.shapes)
    damping: Floats = found.viscous + (carried / omega * lost) @ carried.T
    return damping


def lagging(found: DirectModes) -> Floats:
    """Return the matrix (n, n) that turns velocities into modal velocities over their frequencies."""
    turned: Floats = (found.shapes / (TWO_PI * found.frequency)) @ found.shapes.T @ found.mass
    return turned


def direct_transient_values(
    machine: DirectMachine, found: DirectModes, transients: tuple[Transient, ...], pairs: Pairs
) -> Floats:
    """Return what the transients together count as in each row (R,); different ones add linearly."""
    total = np.zeros(len(pairs))
    for transient in transients:
        view = _transient_motion(machine, found, transient)
        for index, (allowable, place) in enumerate(pairs):
            statistic = allowable.statistic()
            observed = allowable.observed(view, place)
            part = record_amplitude(observed, allowable.along(), statistic)
            total[index] = combine(total[[index]], part, statistic)[0]
    return total


def _transient_motion(machine: DirectMachine, found: DirectModes, transient: Transient) -> DirectMotion:
    step, before, after = record_samples(transient, float(found.frequency[0]), float(found.frequency[-1]))
    lead = np.zeros(len(machine.free))
    pattern = np.zeros(len(machine.free))
    base = np.array(transient.base or (0.0, 0.0, 0.0))
    if transient.base is not None:
        for node in range(len(machine.brief.bodies)):
            lead[6 * node : 6 * node + 3] = transient.base
    else:
        body = body_of(machine.brief, transient.on)
        place = machine.place(body, np.array(transient.position))
        pattern = place.T @ np.array(transient.force) + machine.turn(body).T @ np.array(transient.moment)
    follow = lead[machine.free]
    load = pattern[machine.free] - found.mass @ follow
    start = np.zeros(len(load))
    if transient.weight_acts:
        start = -np.linalg.solve(found.stiffness, machine.dead_load[machine.free])
    rates = _simulated(found, load, before, after, step, start, -transient.velocity * follow)
    return DirectMotion(
        machine, rates, rates[1] @ lagging(found).T, floor_motion(transient, before, after, step), base
    )


def _simulated(
    found: DirectModes,
    load: Floats,
    before: Floats,
    after: Floats,
    step: float,
    displacement: Floats,
    velocity: Floats,
) -> Floats:
    """Return displacement, velocity and acceleration (3, T, n) by scipy.signal.lsim.

    What jumps is a staircase, held between samples; the rest is straight between them. Both are exact.
    """
    from scipy.signal import StateSpace, lsim

    n = len(load)
    damping = modal_damping(found)
    inverse = np.linalg.inv(found.mass)
    state = np.block(
        [[np.zeros((n, n)), np.eye(n)], [-inverse @ found.stiffness, -inverse @ damping]],
    )
    inputs = np.concatenate([np.zeros(n), inverse @ load])[:, None]
    system = StateSpace(state, inputs, np.eye(2 * n), np.zeros((2 * n, 1)))
    time = step * np.arange(len(before))
    staircase = np.cumsum(after - before)
    smooth = after - staircase
    _, _, ramped = lsim(system, smooth, time, X0=np.concatenate([displacement, velocity]), interp=True)
    total = np.asarray(ramped)
    if np.any(staircase):
        _, _, held = lsim(system, staircase, time, interp=False)
        total = total + np.asarray(held)
    moved, fast = total[:, :n], total[:, n:]
    acting = before[:, None] * load
    acceleration = (acting - moved @ found.stiffness.T - fast @ damping.T) @ inverse.T
    return np.stack([moved, fast, acceleration])


def direct_passage_values(
    machine: DirectMachine,
    found: DirectModes,
    sets: list[tuple[Tone, ...]],
    way: tuple[float, float, float],
    pairs: Pairs,
) -> Floats:
    """Return the largest envelope of each row (R,) while the speed goes from way[0] to way[1] (Hz) in way[2] s.

    The quadrature pair of the load is sampled finely and simulated; the two responses make the envelope.
    """
    total: list[Floats | None] = [None] * len(pairs)
    start, end, time = way
    fastest = max(tones[0].order for tones in sets) * max(start, end)
    count = int(np.ceil(time * SAMPLES_PER_CYCLE * max(fastest, float(found.frequency[-1])))) + 1
    moment = np.linspace(0.0, time, count)
    damping = modal_damping(found)
    for tones in sets:
        order = tones[0].order
        speed = TWO_PI * order * (start + (end - start) * moment / time)
        turned = np.exp(1j * TWO_PI * order * (start * moment + 0.5 * (end - start) * moment**2 / time))
        load = np.zeros((count, int(machine.free.sum())), dtype=complex)
        for tone in tones:
            load += turned[:, None] * machine.tone_load(tone, speed)[0][:, machine.free]
        parts = [
            simulate(found.mass, damping, found.stiffness, half, moment[1]) for half in (load.real, load.imag)
        ]
        rates = np.stack(
            [getattr(parts[0], name) + 1j * getattr(parts[1], name) for name in ("displacement", "velocity", "acceleration")]
        )
        lagged = rates[1] @ lagging(found).T
        view = DirectMotion(machine, rates, lagged, np.zeros((3, count)), np.zeros(3))
        for index, (allowable, place) in enumerate(pairs):
            statistic = allowable.statistic()
            observed = allowable.weighted(allowable.observed(view, place), speed[None] / TWO_PI)
            tone_part = tone_amplitude(observed, allowable.along(), statistic)[0]
            earlier = total[index]
            total[index] = tone_part if earlier is None else combine(earlier, tone_part, statistic)
    return np.array([part.max() for part in total if part is not None])
