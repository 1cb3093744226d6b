"""Responses of a batch of designs to pulses and records in time.

Loss-factor damping is not causal; in time each mode gets the viscous damping of its own loss factor
(physics.causal), and the force through a part uses the same modal velocities, so that what the parts
carry and what the machine does agree. Motion is relative to the floor's own free motion.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import HarmonicAllowable, combine, record_amplitude, record_reach
from detune.brief.brief import Brief, body_of
from detune.brief.forcing.base import Transient
from detune.physics.pulses import Pulse
from detune.physics.simulation import Motion, simulate
from detune.response.absorbers import weight_of
from detune.response.assemble import Dynamic
from detune.response.causal_design import causal_matrices
from detune.response.designs import Designs
from detune.response.model import Model, StationRows, find_station
from detune.response.modes import ModeBatch
from detune.response.progressive import finer, has_curves, progressive_system
from detune.response.views_static import static_batch

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Responses = NDArray[Any]
Pairs = tuple[tuple[HarmonicAllowable, str], ...]
TWO_PI = 2.0 * np.pi
# Samples per cycle of the fastest mode: the parabola through three samples then errs by about 1e-5.
PER_CYCLE = 64.0
# Fewest steps on a curved piece of a pulse, whose samples are raised so that its mean is kept.
FEWEST_STEPS = 24
# Share of a pulse below which a piece of it is none (a trapezoid whose sides meet).
SHORTEST = 1e-9
# Cycles of the slowest mode after the load has ended; longer where close modes beat against each other.
CYCLES_AFTER = 10.0
MOST_CYCLES_AFTER = 60.0


@dataclass(frozen=True, eq=False)
class TransientLoad:
    """A transient on the freedoms: `vector` (n,) per unit of the record, or `lead` (n,) that follows the floor.

    `lead` is the motion of the freedoms when everything follows one unit of floor motion; `weight` (B, n).
    """

    transient: Transient
    vector: Floats
    lead: Floats


def transient_load(brief: Brief, model: Model, transient: Transient) -> TransientLoad:
    """Return the load pattern of a transient."""
    n = model.frame.count
    if transient.base is not None:
        lead = np.zeros(n)
        for column, (body, freedom) in enumerate(model.frame.names):
            if body != "floor" and freedom in "xyz":
                lead[column] = transient.base["xyz".index(freedom)]
        for absorber in model.absorbers:
            lead[absorber.column] = absorber.along @ np.array(transient.base)
        return TransientLoad(transient, np.zeros(n), lead)
    body = body_of(brief, transient.on)
    vector = model.frame.motion_rows(body, np.array(transient.position)).T @ np.array(transient.force)
    vector = vector + model.frame.rotation_rows(body).T @ np.array(transient.moment)
    return TransientLoad(transient, vector, np.zeros(n))


def transient_values(
    model: Model,
    designs: Designs,
    dynamic: Dynamic,
    modal: ModeBatch,
    pairs: Pairs,
    loads: tuple[TransientLoad, ...],
) -> Floats:
    """Return what the transients together count as in each row (R, D); different ones add linearly.

    Where an allowable has sides, the larger of each side's static part and what is reached there, less the largest
    static part.
    """
    total = np.zeros((len(pairs), designs.count))
    static = static_batch(model, designs)
    sides = [allowable.sides(static, place) for allowable, place in pairs]
    reached = [np.zeros((len(side), designs.count)) for side in sides]
    for index in range(designs.count):
        one = np.array([index])
        for load in loads:
            views = motion_views(model, designs.take(one), dynamic.take(one), modal.take(one), load)
            if any(view.beyond for view in views):
                # A part off its curve has met its stop: nothing is known of what it does there.
                total[:, index] = np.inf
                continue
            for row, (allowable, place) in enumerate(pairs):
                statistic = allowable.statistic()
                seen = [(allowable.observed(view, place), view.step) for view in views]
                if sides[row]:
                    reached[row][:, index] += [record_reach(seen, towards)[0] for _, towards in sides[row]]
                    continue
                part = record_amplitude(
                    seen, allowable.along(), statistic, rms_duration(views, load.transient)
                )
                total[row, index] = combine(total[row, index], part[0], statistic)
    for row, side in enumerate(sides):
        if side:
            at_rest = np.stack([static_part for static_part, _ in side])
            total[row] += np.max(at_rest + reached[row], axis=0) - at_rest.max(axis=0)
    return total


def rms_duration(views: Sequence["MotionView"], transient: Transient) -> float:
    """Return the time (s) over which an rms is taken: the record's, or of a pulse all that is simulated."""
    if transient.record is not None:
        return (len(transient.record) - 1) * transient.step
    return sum(view.step * (len(view.lagged) - 1) for view in views)


@dataclass(frozen=True, eq=False)
class MotionView:
    """The response of one design (D = 1) over one stretch of time, samples `step` s apart.

    `relative` to the floor's free motion, complex where it is the envelope of a passage; `lagged` (T, n) is the
    velocity of each mode over its own frequency, on which loss-factor forces stand; `floor` (3 rates, T) is the
    free motion along `base`. On load-deflection curves, `more` (S, T) is one part's axial force beyond its tangent,
    and `beyond` tells that a part has left its curve.
    """

    model: Model
    dynamic: Dynamic
    modal: ModeBatch
    relative: Motion
    lagged: Responses
    floor: Floats
    base: Floats
    step: float
    more: Floats | None = None
    beyond: bool = False

    def _rates(self, rate: int) -> Responses:
        return (self.relative.displacement, self.relative.velocity, self.relative.acceleration)[rate]

    def motion(self, point: str, rate: int = 0) -> Responses:
        moved = self._rates(rate) @ self.model.points[point].T
        return np.asarray(moved + self.floor[rate][:, None] * self.base)[None]

    def floor_motion(self, rate: int = 0) -> Responses:
        total = self.floor[rate][:, None] * self.base + np.zeros_like(self._rates(rate)[:, :1])
        if self.model.frame.flexible_floor:
            total = total + self._rates(rate)[:, -1:] * np.array([0.0, 0.0, 1.0])
        return np.asarray(total)[None]

    def foot_motion(self, station: str, rate: int = 0) -> Responses:
        return np.asarray(self._rates(rate) @ find_station(self.model, station).foot.T)[None]

    def station_deflection(self, station: str, rate: int = 0) -> Responses:
        return np.asarray(self._rates(rate) @ find_station(self.model, station).rows.T)[None]

    def station_force(self, station: str) -> Responses:
        return self._force(find_station(self.model, station))[None]

    def _force(self, station: StationRows) -> Responses:
        k, eta, c = (each[0] for each in self.dynamic.parts.constants(self.model.stations.index(station)))
        moved, fast, lagged = (x @ station.rows.T for x in (self._rates(0), self._rates(1), self.lagged))
        force: Responses = station.factor * (k * moved + c * fast + k * eta * lagged)
        if self.dynamic.parts.with_frequency:
            force = force + self._frequency_force(station, station.factor * (k * (1.0 + 1j * eta)), c)
        if self.more is not None:
            force[:, 2] += self.more[self.model.stations.index(station)]
        return force

    def _frequency_force(self, station: StationRows, constant: Complexes, viscous: Floats) -> Responses:
        """What a frequency law adds: each mode moves the part at the stiffness of the mode's own frequency."""
        omega = TWO_PI * self.modal.frequency
        own = self.dynamic.parts.stiffness(station, omega)[0]
        added = own - constant - 1j * omega[0][:, None] * station.factor * viscous
        carried = self.dynamic.mass[0] @ self.modal.shapes[0]
        moved, fast = self._rates(0) @ carried, self._rates(1) @ carried / omega[0]
        across = (station.rows @ self.modal.shapes[0]).T
        return np.asarray(moved @ (across * added.real) + fast @ (across * added.imag))

    def total_force(self, surface: str) -> Responses:
        total = np.zeros((len(self.lagged), 3), dtype=self.lagged.dtype)
        for station in self.model.stations:
            if station.on_floor:
                total += station.parallel * self._force(station) @ station.axes.T
        for c in self.model.connections:
            if c.on_floor:
                moved, fast, lagged = (x @ c.rows.T for x in (self._rates(0), self._rates(1), self.lagged))
                total += c.stiffness * moved + c.viscous * fast + c.hysteretic * lagged
        if surface == "ground" and self.model.frame.flexible_floor:
            own = (
                self.model.floor_stiffness * self._rates(0)[:, -1]
                + self.model.floor_damping * self._rates(1)[:, -1]
            )
            total[:, 2] = own
        return total[None]


def motion_view(
    model: Model,
    dynamic: Dynamic,
    modal: ModeBatch,
    moved: Motion,
    floor: Floats | None = None,
    base: Floats | None = None,
) -> MotionView:
    """Return a motion of one design as allowables look at it; left out, the floor's free motion is none."""
    shapes, omega = modal.shapes[0], TWO_PI * modal.frequency[0]
    lagged = moved.velocity @ dynamic.mass[0] @ shapes @ (shapes / omega).T
    still = np.zeros((3, len(lagged))) if floor is None else floor
    return MotionView(
        model, dynamic, modal, moved, lagged, still, np.zeros(3) if base is None else base, moved.step
    )


def motion_views(
    model: Model, designs: Designs, dynamic: Dynamic, modal: ModeBatch, load: TransientLoad
) -> tuple[MotionView, ...]:
    """Simulate one design (D = 1) under a transient, a view for each stretch; exact between samples."""
    mass = dynamic.mass[0]
    stiffness, damping = causal_matrices(dynamic, modal, 0)
    pattern = load.vector - mass @ load.lead
    transient = load.transient
    displacement: Floats | None = np.zeros(model.frame.count)
    curved = has_curves(model, dynamic)
    system = progressive_system(model, dynamic, stiffness, damping) if curved else None
    if transient.weight_acts:
        weight = weight_of(model, designs)[0]
        displacement = -np.linalg.solve(stiffness, weight) if system is None else system.unloaded(weight)
    velocity = -transient.velocity * load.lead
    base = np.array(transient.base or (0.0, 0.0, 0.0))
    floor_state = (0.0, _first_velocity(transient))
    views = []
    more, beyond = None, curved and (system is None or displacement is None)
    if displacement is None:
        displacement = np.zeros(model.frame.count)
    for step, values in stretches(transient, finer(modal.frequency[0], system), modal.loss_factor[0]):
        if system is None or beyond:
            moved = simulate(
                mass,
                damping,
                stiffness,
                values[:, None],
                step,
                pattern[:, None],
                None,
                displacement,
                velocity,
            )
        else:
            moved, more, beyond = system.simulated(values, pattern, step, displacement, velocity)
        displacement, velocity = moved.displacement[-1], moved.velocity[-1]
        floor = floor_motion(values, step, floor_state) if transient.base else np.zeros((3, len(values)))
        floor_state = (float(floor[0, -1]), float(floor[1, -1]))
        view = motion_view(model, dynamic, modal, moved, floor, base)
        views.append(replace(view, more=None if beyond else more, beyond=beyond))
    return tuple(views)


def _first_velocity(transient: Transient) -> float:
    """Velocity (m/s) of the floor's free motion at the start.

    A record says nothing of it: the one is taken that makes the record's mean velocity zero. The machine moves
    along. After a fall the floor is at rest.
    """
    if transient.weight_acts:
        return 0.0
    if transient.record is None or transient.base is None:
        return transient.velocity
    return -float(np.mean(floor_motion(transient.record, transient.step, (0.0, 0.0))[1]))


def stretches(
    transient: Transient, frequency: Floats, loss_factor: Floats
) -> tuple[tuple[float, Floats], ...]:
    """Return step (s) and samples (T,) of each stretch over which the load is smooth, straight between samples.

    The last one is the rest after the load has ended. frequency (n,) Hz and loss_factor (n,) of the modes.
    """
    longest = 1.0 / (PER_CYCLE * float(frequency[-1]))
    found: list[tuple[float, Floats]] = []
    if transient.pulse is not None:
        length = np.diff(transient.pulse.edge)
        lasting = np.flatnonzero(length > SHORTEST * transient.pulse.edge[-1])
        found += [_piece(transient.pulse, int(index), longest) for index in lasting]
    elif transient.record is not None:
        # A record that is straight between its samples may be sampled more finely without changing it.
        finer = max(1, int(np.ceil(transient.step / longest)))
        count = (len(transient.record) - 1) * finer + 1
        values = np.interp(np.arange(count) / finer, np.arange(len(transient.record)), transient.record)
        found.append((transient.step / finer, values))
    rest = np.zeros(int(np.ceil(rest_time(frequency, loss_factor) / longest)) + 1)
    return (*found, (longest, rest))


def _piece(pulse: Pulse, index: int, longest: float) -> tuple[float, Floats]:
    length = float(pulse.edge[index + 1] - pulse.edge[index])
    omega = float(pulse.omega[index])
    count = max(FEWEST_STEPS if omega else 4, int(np.ceil(length / longest)))
    step = length / count
    time = step * np.arange(count + 1)
    # Straight lines between samples of a sine are that sine times (sin x/x)^2, x = omega step/2, and overtones
    # far above every mode.
    raised = 1.0 / np.sinc(0.5 * omega * step / np.pi) ** 2
    curved = pulse.cosine[index] * np.cos(omega * time) + pulse.sine[index] * np.sin(omega * time)
    return step, pulse.constant[index] + pulse.slope[index] * time + raised * curved


def rest_time(frequency: Floats, loss_factor: Floats) -> float:
    """Time (s) to look on after the load has ended: some cycles of the slowest mode, or until a beat is full."""
    slowest = float(frequency[0])
    apart = np.diff(frequency)
    beating = apart[(apart > 1e-6 * frequency[1:]) & (apart < 0.2 * frequency[1:])]
    beat = 0.5 / float(beating.min()) if beating.size else 0.0
    with np.errstate(divide="ignore"):
        decay = float(np.max(1.0 / (np.pi * loss_factor * frequency)))
    return max(CYCLES_AFTER / slowest, min(beat, decay, MOST_CYCLES_AFTER / slowest))


def floor_motion(values: Floats, step: float, start: tuple[float, float]) -> Floats:
    """Return displacement, velocity and acceleration (3, T) of the floor's free motion along its direction.

    start: displacement and velocity at the first sample. Acceleration is straight between samples, so velocity
    and displacement are its exact integrals.
    """
    first, last = values[:-1], values[1:]
    velocity = start[1] + np.concatenate([[0.0], np.cumsum(0.5 * step * (first + last))])
    moved = step * velocity[:-1] + step**2 * (first / 3.0 + last / 6.0)
    return np.stack([start[0] + np.concatenate([[0.0], np.cumsum(moved)]), velocity, values])
