"""The assessor's responses in time: pulses, records and passages, stepped by the matrix exponential.

In time a loss factor stands as the viscous damping of each mode's own loss factor (physics.causal).
"""

from dataclasses import dataclass
from functools import cached_property
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import (
    HarmonicAllowable,
    SumOfOrders,
    combine,
    parabolic_maximum,
    record_amplitude,
    tone_amplitude,
)
from detune.brief.brief import body_of
from detune.brief.forcing.base import Tone, Transient
from detune.brief.machine import Station
from detune.physics.pulses import pulse_value
from detune.response.direct import FLOOR, DirectMachine
from detune.response.direct_modes import DirectModes
from detune.response.direct_progressive import curved_parts, simulated_on_curves, unloaded
from detune.response.direct_stepping import Stepping, straight_states, swept_states
from detune.response.direct_views import DirectStatic, station_named
from detune.response.transient import rest_time

Floats = NDArray[np.float64]
Responses = NDArray[Any]
Pairs = tuple[tuple[HarmonicAllowable, str], ...]
TWO_PI = 2.0 * np.pi
# Per cycle of the fastest mode, where a parabola through three samples errs by 1e-6 of a cosine.
SAMPLES_PER_CYCLE = 80.0
# Per cycle of the fastest mode and of the fastest tone: their beat then has 20, where the parabola errs by 1e-4.
PASSAGE_SAMPLES = 40.0
STEPS_PER_PIECE = 400
SHORTEST = 1e-9


@dataclass(frozen=True, eq=False)
class DirectMotion:
    """One design over time (D = 1): rates (3, T, n) of the free freedoms relative to the floor's free motion.

    `lagged` (T, n): velocity of each mode over its own frequency. `floor` (3, T) along `base`. Complex
    for the envelope of a passage. On load-deflection curves, `more` (S, T) is one part's axial force beyond its
    tangent, and `beyond` tells that a part has left its curve.
    """

    machine: DirectMachine
    found: DirectModes
    rates: Responses
    lagged: Responses
    floor: Floats
    base: Floats
    more: Floats | None = None
    beyond: bool = False

    def _rows(self, rows: Floats) -> Floats:
        return rows[:, self.machine.free]

    def motion(self, point: str, rate: int = 0) -> Responses:
        stated = next(p for p in self.machine.brief.points if p.name == point)
        rows = self.machine.place(body_of(self.machine.brief, stated.on), np.array(stated.position))
        return np.asarray(self.rates[rate] @ self._rows(rows).T + self.floor[rate][:, None] * self.base)[None]

    def floor_motion(self, rate: int = 0) -> Responses:
        rows = np.zeros((3, self.machine.size))
        rows[:, self.machine.floor_axes] = np.eye(3)
        return np.asarray(self.rates[rate] @ self._rows(rows).T + self.floor[rate][:, None] * self.base)[None]

    def foot_motion(self, station: str, rate: int = 0) -> Responses:
        rows = self._rows(self.machine.foot(station_named(self.machine, station)))
        return np.asarray(self.rates[rate] @ rows.T)[None]

    def station_deflection(self, station: str, rate: int = 0) -> Responses:
        stated = station_named(self.machine, station)
        rows = self._rows(self.machine.deflection_rows(stated))
        return np.asarray(self.rates[rate] @ rows.T)[None]

    def station_force(self, station: str) -> Responses:
        return self._force(station_named(self.machine, station))[None]

    @cached_property
    def _modal(self) -> Responses:
        """Displacements of the modes, and their velocities over their frequencies, side by side (T, 2n)."""
        carried = self.found.mass @ self.found.shapes
        fast = self.rates[1] @ (carried / (TWO_PI * self.found.frequency))
        return np.concatenate([self.rates[0] @ carried, fast], axis=1)

    def _count(self, station: Station) -> float:
        return self.machine.share(station) / self.machine.factor(station)

    def _force(self, station: Station) -> Responses:
        # Each mode moves the part at the stiffness of the mode's own frequency; for constant stiffness and a
        # dashpot the sum over modes is k times the deflection and c times its rate.
        omega = TWO_PI * self.found.frequency
        stiffness = self.machine.factor(station) * self.machine.part(station, omega)
        across = (self._rows(self.machine.deflection_rows(station)) @ self.found.shapes).T
        by_modes = np.concatenate([across * stiffness.real, across * stiffness.imag])
        force: Responses = self._modal @ by_modes
        if self.more is not None:
            force[:, 2] += self.more[self.machine.stations.index(station)]
        return force

    def total_force(self, surface: str) -> Responses:
        brief, floor = self.machine.brief, self.machine.floor
        total = np.zeros((len(self.lagged), 3), dtype=self.rates.dtype)
        for station in brief.stations:
            if station.to == FLOOR:
                total = total + self._count(station) * self._force(station) @ self.machine.axes(station).T
        for c in brief.connections:
            if c.to == FLOOR:
                position = np.array(c.position)
                rows = self.machine.place(body_of(brief, c.on), position) - self.machine.place(
                    FLOOR, position
                )
                moved, fast, lagged = (
                    x @ self._rows(rows).T for x in (self.rates[0], self.rates[1], self.lagged)
                )
                stiffness = np.array(c.stiffness)
                total = total + stiffness * moved + stiffness * (c.loss_factor or 0.0) * lagged
                total = total + np.array(c.viscous or (0.0, 0.0, 0.0)) * fast
        if surface == "ground" and floor is not None:
            column = int(np.flatnonzero(np.flatnonzero(self.machine.free) == self.machine.floor_vertical)[0])
            total[:, 2] = (
                floor.stiffness * self.rates[0][:, column] + floor.damping * self.rates[1][:, column]
            )
        return total[None]


def lagging(found: DirectModes) -> Floats:
    """Return the matrix (n, n) that turns velocities into modal velocities over their frequencies."""
    turned: Floats = (found.shapes / (TWO_PI * found.frequency)) @ found.shapes.T @ found.mass
    return turned


def direct_transient_values(
    machine: DirectMachine, found: DirectModes, transients: tuple[Transient, ...], pairs: Pairs
) -> Floats:
    """Return what the transients together count as in each row (R,); different ones add linearly.

    Of a row with sides it is by how much the farthest travel exceeds the farthest static part.
    """
    total = np.zeros(len(pairs))
    static = DirectStatic(machine)
    sides = [allowable.sides(static, place) for allowable, place in pairs]
    travel = [[float(at_rest[0]) for at_rest, _ in side] for side in sides]
    for transient in transients:
        views = transient_motion(machine, found, transient)
        if any(view.beyond for view, _ in views):
            # A part off its curve has met its stop: nothing is known of what it does there.
            total[:] = np.inf
            continue
        duration = sum(step * (len(view.lagged) - 1) for view, step in views)
        if transient.record is not None:
            duration = transient.step * (len(transient.record) - 1)
        for index, (allowable, place) in enumerate(pairs):
            statistic = allowable.statistic()
            seen = [(np.asarray(allowable.observed(view, place)), step) for view, step in views]
            if sides[index]:
                for number, (_, towards) in enumerate(sides[index]):
                    peaks = [float(parabolic_maximum(x @ np.asarray(towards))[0]) for x, _ in seen]
                    travel[index][number] += max(0.0, *peaks)
                continue
            part = record_amplitude(seen, allowable.along(), statistic, duration)
            total[index] = combine(total[[index]], part, statistic)[0]
    for index, travelled in enumerate(travel):
        if travelled:
            total[index] += max(travelled) - max(float(at_rest[0]) for at_rest, _ in sides[index])
    return total


def pattern_of(machine: DirectMachine, found: DirectModes, transient: Transient) -> tuple[Floats, Floats]:
    """Return the load (n,) per unit of a transient, and the motion (n,) of all that follows the floor by one unit."""
    lead = np.zeros(len(machine.free))
    pattern = np.zeros(len(machine.free))
    base = np.array(transient.base or (0.0, 0.0, 0.0))
    if transient.base is not None:
        for node in range(len(machine.brief.bodies)):
            lead[6 * node : 6 * node + 3] = transient.base
        for absorber in machine.absorbers:
            lead += (absorber.along @ base) * absorber.own(machine)
    else:
        body = body_of(machine.brief, transient.on)
        place = machine.place(body, np.array(transient.position))
        pattern = place.T @ np.array(transient.force) + machine.turn(body).T @ np.array(transient.moment)
    follow = lead[machine.free]
    return pattern[machine.free] - found.mass @ follow, follow


def transient_motion(
    machine: DirectMachine, found: DirectModes, transient: Transient
) -> list[tuple[DirectMotion, float]]:
    """Return the motion and its time step (s) on each stretch between jumps of the load."""
    base = np.array(transient.base or (0.0, 0.0, 0.0))
    load, follow = pattern_of(machine, found, transient)
    state = np.zeros(2 * len(load))
    resting = machine.rest is None or bool(np.all(np.isfinite(machine.rest.q)))
    curved = curved_parts(machine) if resting else ()
    if transient.weight_acts:
        weight = machine.dead_load[machine.free]
        state[: len(load)] = (
            unloaded(found, curved, weight) if curved else -np.linalg.solve(found.stiffness, weight)
        )
    state[len(load) :] = -transient.velocity * follow
    floor = np.array([0.0, 0.0 if transient.weight_acts else transient.velocity])
    if transient.record is not None:
        # The floor's velocity at the start is unknown; over the record its mean is taken as zero.
        floor[1] = -float(np.mean(_integrated(transient.record, transient.step, np.zeros(2))[1]))
    views = []
    stepping = Stepping(found)
    more, beyond = None, not resting
    for step, values in _sampled(transient, found):
        if curved and not beyond:
            rates, more, beyond = simulated_on_curves(
                found, curved, stepping.damping, load, values, step, state, len(machine.stations)
            )
            lagged = rates[1] @ lagging(found).T
        else:
            rates, lagged = _simulated(stepping, load, values, step, state)
        state = np.concatenate([rates[0, -1], rates[1, -1]])
        free = np.zeros((3, len(values)))
        if transient.base is not None:
            free = _integrated(values, step, floor)
            floor = free[:2, -1]
        own = None if beyond else more
        views.append((DirectMotion(machine, found, rates, lagged, free, base, own, beyond), step))
    return views


def _sampled(transient: Transient, found: DirectModes) -> list[tuple[float, Floats]]:
    """Return step (s) and samples (T,) of the load between its jumps, and of the rest after it."""
    longest = 1.0 / (SAMPLES_PER_CYCLE * float(found.frequency[-1]))
    pieces: list[tuple[float, Floats]] = []
    if transient.pulse is not None:
        for start, end in pairwise(transient.pulse.edge.tolist()):
            count = max(STEPS_PER_PIECE, int(np.ceil((end - start) / longest)))
            if end - start > SHORTEST * transient.pulse.edge[-1]:
                time = np.linspace(start, end, count + 1)
                # A hair before its end the piece still has its own value.
                time[-1] -= SHORTEST * (end - start)
                pieces.append(((end - start) / count, pulse_value(transient.pulse, time)))
    elif transient.record is not None:
        finer = max(1, int(np.ceil(transient.step / longest)))
        time = np.arange((len(transient.record) - 1) * finer + 1) / finer
        pieces.append(
            (transient.step / finer, np.interp(time, np.arange(len(transient.record)), transient.record))
        )
    rest = rest_time(found.frequency, found.loss_factor)
    return [*pieces, (longest, np.zeros(int(np.ceil(rest / longest)) + 1))]


def _integrated(values: Floats, step: float, start: Floats) -> Floats:
    """Return displacement, velocity and acceleration (3, T); the acceleration is straight between samples."""
    from scipy.integrate import cumulative_trapezoid

    velocity = start[1] + cumulative_trapezoid(values, dx=step, initial=0.0)
    # The trapezoidal rule misses the third of each step's bend.
    bend = np.append(0.0, np.cumsum(np.diff(values))) * step**2 / 12.0
    return np.stack(
        [start[0] + cumulative_trapezoid(velocity, dx=step, initial=0.0) - bend, velocity, values]
    )


def _simulated(
    stepping: Stepping, load: Floats, values: Floats, step: float, state: Floats
) -> tuple[Floats, Floats]:
    """Return displacement, velocity and acceleration (3, T, n) from a state (2n,) on, and `lagged` (T, n)."""
    n = len(load)
    pattern = stepping.loaded(load)
    states = straight_states(stepping, pattern, values, step, stepping.state(state[:n], state[n:]))
    return stepping.rates(states, values[:, None] * pattern[n:])


def direct_passage_values(
    machine: DirectMachine,
    found: DirectModes,
    sets: list[tuple[Tone, ...]],
    way: tuple[float, float, float],
    pairs: Pairs,
) -> Floats:
    """Return the largest envelope of each row (R,) while the speed goes from way[0] to way[1] (Hz) in way[2] s.

    The load turns as a phasor, whose response is the envelope with its phase; between samples the largest is that of
    the parabola through the three highest neighbours.
    """
    sums = [SumOfOrders(allowable.statistic()) for allowable, _ in pairs]
    start, end, time = way
    stepping = Stepping(found)
    fastest = max(tones[0].order for tones in sets) * max(start, end)
    count = int(np.ceil(time * PASSAGE_SAMPLES * max(fastest, float(found.frequency[-1])))) + 2
    for tones in sets:
        order = tones[0].order
        loads = [(machine.tone_load(t, np.ones(1))[0][0, machine.free], t.power) for t in tones]
        turning = (TWO_PI * order * start, TWO_PI * order * end, time)
        states, acting = swept_states(stepping, loads, turning, count)
        rates, lagged = stepping.rates(states, acting)
        view = DirectMotion(machine, found, rates, lagged, np.zeros((3, count)), np.zeros(3))
        speed = np.linspace(turning[0], turning[1], count)
        for index, (allowable, place) in enumerate(pairs):
            observed = allowable.weighted(allowable.observed(view, place), speed[None] / TWO_PI)
            tone_part = tone_amplitude(observed, allowable.along(), allowable.statistic())[0]
            sums[index].add(order, tone_part)
    return np.array([parabolic_maximum(each.total()[None])[0] for each in sums])
