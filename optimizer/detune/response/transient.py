"""Responses of a batch of designs to pulses and records in time.

Loss-factor damping is not causal; in time each mode gets the viscous damping of its own loss factor
(physics.causal), and the force through a part uses the same modal velocities, so that what the parts
carry and what the machine does agree. Motion is relative to the floor's own free motion.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable import HarmonicAllowable
from detune.brief.allowable.base import combine, record_amplitude
from detune.brief.brief import Brief, body_of
from detune.brief.forcing import Transient
from detune.physics.pulses import pulse_step, sampled_pulse
from detune.physics.simulation import Motion, simulate
from detune.response.assemble import Dynamic
from detune.response.designs import Designs
from detune.response.model import Model, StationRows
from detune.response.modes import ModeBatch
from detune.response.views import find_station

Floats = NDArray[np.float64]
Pairs = tuple[tuple[HarmonicAllowable, str], ...]
TWO_PI = 2.0 * np.pi
# Samples per cycle of the fastest mode, and cycles of the slowest one after the load has ended: the
# parabola through three samples then errs by less than 1e-4, and beats between modes are seen.
PER_CYCLE = 40.0
CYCLES_AFTER = 10.0


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
    """Return what the transients together count as in each row (R, D); different ones add linearly."""
    total = np.zeros((len(pairs), designs.count))
    for index in range(designs.count):
        one = np.array([index])
        for load in loads:
            view = motion_view(
                model, designs.take(one), dynamic.take(one), _one_mode_batch(modal, index), load
            )
            for row, (allowable, place) in enumerate(pairs):
                statistic = allowable.statistic()
                part = record_amplitude(allowable.observed(view, place), allowable.along(), statistic)
                total[row, index] = combine(total[row, index], part[0], statistic)
    return total


def _one_mode_batch(modal: ModeBatch, index: int) -> ModeBatch:
    return ModeBatch(modal.frequency[[index]], modal.shapes[[index]], modal.loss_factor[[index]])


@dataclass(frozen=True, eq=False)
class MotionView:
    """The response of one design over time (D = 1), as allowables look at it.

    `motion_of` relative to the floor's free motion; `lagged` (T, n) is the velocity of each mode over its
    own frequency, on which loss-factor forces stand; `floor` (3 rates, T) is the free motion along `base`.
    """

    model: Model
    designs: Designs
    relative: Motion
    lagged: Floats
    floor: Floats
    base: Floats

    def _rates(self, rate: int) -> Floats:
        return (self.relative.displacement, self.relative.velocity, self.relative.acceleration)[rate]

    def motion(self, point: str, rate: int = 0) -> Floats:
        moved = self._rates(rate) @ self.model.points[point].T
        return (moved + self.floor[rate][:, None] * self.base)[None]

    def station_deflection(self, station: str, rate: int = 0) -> Floats:
        return (self._rates(rate) @ find_station(self.model, station).rows.T)[None]

    def station_force(self, station: str) -> Floats:
        return self._force(find_station(self.model, station))[None]

    def _force(self, station: StationRows) -> Floats:
        arrays = self.model.groups[station.group].arrays
        part = self.designs.part[0, station.group]
        k, eta, c = arrays.stiffness_dynamic[part], arrays.loss_factor[part], arrays.viscous[part]
        moved, fast, lagged = (x @ station.rows.T for x in (self._rates(0), self._rates(1), self.lagged))
        force: Floats = station.factor * (k * moved + c * fast + k * eta * lagged)
        return force

    def total_force(self, surface: str) -> Floats:
        total = np.zeros((len(self.lagged), 3))
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
    model: Model, designs: Designs, dynamic: Dynamic, modal: ModeBatch, load: TransientLoad
) -> MotionView:
    """Simulate one design (D = 1) under a transient; exact between samples (physics.simulation)."""
    mass, stiffness = dynamic.mass[0], dynamic.stiffness[0]
    frequency, shapes = modal.frequency[0], modal.shapes[0]
    omega = TWO_PI * frequency
    lost = np.sum(shapes * (dynamic.hysteretic[0] @ shapes), axis=0)
    carried = mass @ shapes
    damping = dynamic.viscous[0] + (carried * (lost / omega)) @ carried.T
    step, before, after = record_samples(load.transient, float(frequency[0]), float(frequency[-1]))
    pattern = load.vector - mass @ load.lead
    start = np.zeros(model.frame.count)
    if load.transient.weight_acts:
        start = -np.linalg.solve(stiffness, model.weight[designs.step[0]])
    moved = simulate(
        mass,
        damping,
        stiffness,
        before[:, None],
        step,
        shapes=pattern[:, None],
        record_after=after[:, None],
        displacement=start,
        velocity=-load.transient.velocity * load.lead,
    )
    lagged = moved.velocity @ carried @ (shapes / omega).T
    base = np.array(load.transient.base or (0.0, 0.0, 0.0))
    return MotionView(model, designs, moved, lagged, floor_motion(load.transient, before, after, step), base)


def record_samples(transient: Transient, slowest: float, fastest: float) -> tuple[float, Floats, Floats]:
    """Return step (s) and values just before and after each sample, long enough for the slowest mode (Hz)."""
    rest = CYCLES_AFTER / slowest
    longest = 1.0 / (PER_CYCLE * fastest)
    if transient.pulse is not None:
        step = pulse_step(transient.pulse, longest)
        count = int(np.ceil((transient.pulse.edge[-1] + rest) / step)) + 1
        before, after = sampled_pulse(transient.pulse, step, count)
        return step, before, after
    if transient.record is None:
        zero = np.zeros(int(np.ceil(rest / longest)) + 1)
        return longest, zero, zero
    # A record that is straight between its samples may be sampled more finely without changing it.
    finer = max(1, int(np.ceil(transient.step / longest)))
    step = transient.step / finer
    count = (len(transient.record) - 1) * finer + 1
    values = np.interp(np.arange(count) / finer, np.arange(len(transient.record)), transient.record)
    padded = np.concatenate([values, np.zeros(int(np.ceil(rest / step)))])
    return step, padded, padded


def floor_motion(transient: Transient, before: Floats, after: Floats, step: float) -> Floats:
    """Return displacement, velocity and acceleration (3, T) of the floor's free motion along its direction.

    Acceleration is straight between samples, so velocity and displacement are its exact integrals.
    """
    if transient.base is None:
        return np.zeros((3, len(before)))
    first, last = after[:-1], before[1:]
    gained = 0.5 * step * (first + last)
    velocity = transient.velocity + np.concatenate([[0.0], np.cumsum(gained)])
    moved = step * velocity[:-1] + step**2 * (first / 3.0 + last / 6.0)
    return np.stack([np.concatenate([[0.0], np.cumsum(moved)]), velocity, before])
