"""Responses of a batch of designs to a run-up or coast-down at a constant rate of speed.

The complex envelope of each coherent set is exact (physics.sweep); loss-factor damping stands as the
viscous damping of each mode's own loss factor. Sets of different order add by their envelopes.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable import HarmonicAllowable
from detune.brief.allowable.base import combine, tone_amplitude
from detune.physics.simulation import StateModes, state_modes
from detune.physics.sweep import sweep_envelope
from detune.response.assemble import Dynamic, part_dynamic_stiffness
from detune.response.designs import Designs
from detune.response.loads import Family, Load
from detune.response.model import Model
from detune.response.modes import ModeBatch
from detune.response.views import find_station

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Pairs = tuple[tuple[HarmonicAllowable, str], ...]
TWO_PI = 2.0 * np.pi
EVENLY = 1200
ROUND_PASSAGE = np.concatenate(
    [np.linspace(-8.0, -3.0, 60, endpoint=False), np.linspace(-3.0, 6.0, 240), np.linspace(6.0, 20.0, 100)]
)


@dataclass(frozen=True)
class Passage:
    """A family passed through once: time (s) from its speed `start` to `end` (Hz)."""

    family: Family
    time: float
    start: float
    end: float


@dataclass(frozen=True, eq=False)
class SweptView:
    """The complex envelope of one design (D = 1) over the moments of a passage.

    `rates` (3, T, n): displacement, velocity, acceleration. `speed` (T,) rad/s of the tone.
    """

    model: Model
    designs: Designs
    rates: Complexes
    speed: Floats

    def motion(self, point: str, rate: int = 0) -> Complexes:
        return (self.rates[rate] @ self.model.points[point].T)[None]

    def station_deflection(self, station: str, rate: int = 0) -> Complexes:
        return (self.rates[rate] @ find_station(self.model, station).rows.T)[None]

    def station_force(self, station: str) -> Complexes:
        group = find_station(self.model, station).group
        stiffness = part_dynamic_stiffness(
            self.model.groups[group], self.designs.part[:, group], self.speed[None]
        )
        return find_station(self.model, station).factor * stiffness * self.station_deflection(station)

    def total_force(self, surface: str) -> Complexes:
        total = np.zeros((1, len(self.speed), 3), dtype=complex)
        for station in self.model.stations:
            if station.on_floor:
                total += station.parallel * self.station_force(station.name) @ station.axes.T
        for c in self.model.connections:
            if c.on_floor:
                stiffness = c.stiffness + 1j * c.hysteretic + 1j * self.speed[:, None] * c.viscous
                total += stiffness * (self.rates[0] @ c.rows.T)
        if surface == "ground" and self.model.frame.flexible_floor:
            own = self.model.floor_stiffness + 1j * self.speed * self.model.floor_damping
            total[0, :, 2] = own * self.rates[0][:, -1]
        return total


def swept_values(
    model: Model,
    designs: Designs,
    dynamic: Dynamic,
    modal: ModeBatch,
    pairs: Pairs,
    passages: tuple[Passage, ...],
) -> Floats:
    """Return the largest envelope of each row (R, D) over the passages, which are alternatives."""
    value = np.zeros((len(pairs), designs.count))
    for index in range(designs.count):
        one = np.array([index])
        modes, damping = causal_modes(dynamic, modal, index)
        for passage in passages:
            found = _passage(model, designs.take(one), dynamic.take(one), modes, damping, pairs, passage)
            value[:, index] = np.maximum(value[:, index], found)
    return value


def causal_modes(dynamic: Dynamic, modal: ModeBatch, index: int) -> tuple[StateModes, Floats]:
    """Return the complex modes and the damping (n, n) of one design with viscous stand-ins for loss factors."""
    shapes, omega = modal.shapes[index], TWO_PI * modal.frequency[index]
    lost = np.sum(shapes * (dynamic.hysteretic[index] @ shapes), axis=0)
    carried = dynamic.mass[index] @ shapes
    damping = dynamic.viscous[index] + (carried * (lost / omega)) @ carried.T
    return state_modes(dynamic.mass[index], damping, dynamic.stiffness[index]), damping


def _passage(
    model: Model,
    designs: Designs,
    dynamic: Dynamic,
    modes: StateModes,
    damping: Floats,
    pairs: Pairs,
    passage: Passage,
) -> Floats:
    times = moments(modes, passage)
    total: list[Floats | None] = [None] * len(pairs)
    for loads in passage.family.sets:
        view = _swept_view(model, designs, dynamic, modes, damping, passage, loads, times)
        for row, (allowable, place) in enumerate(pairs):
            statistic = allowable.statistic()
            observed = allowable.weighted(allowable.observed(view, place), view.speed[None] / TWO_PI)
            tone = tone_amplitude(observed, allowable.along(), statistic)[0]
            earlier = total[row]
            total[row] = tone if earlier is None else combine(earlier, tone, statistic)
    return np.array([part.max() for part in total if part is not None])


def _swept_view(
    model: Model,
    designs: Designs,
    dynamic: Dynamic,
    modes: StateModes,
    damping: Floats,
    passage: Passage,
    loads: tuple[Load, ...],
    times: Floats,
) -> SweptView:
    order = loads[0].order
    start, end = TWO_PI * order * passage.start, TWO_PI * order * passage.end
    at, speeds = np.array([0.0, passage.time]), np.array([start, end])
    moved = np.zeros((2, len(times), model.frame.count), dtype=complex)
    acting = np.zeros((len(times), model.frame.count), dtype=complex)
    speed = start + (end - start) * times / passage.time
    turned = np.exp(1j * (start * times + 0.5 * (end - start) / passage.time * times**2))
    for load in loads:
        moved += np.stack(sweep_envelope(modes, load.vector, at, speeds, load.power, times))
        acting += (turned * speed**load.power)[:, None] * load.vector
    held = moved[0] @ dynamic.stiffness[0].T + moved[1] @ damping.T
    acceleration = np.linalg.solve(dynamic.mass[0], (acting - held).T).T
    return SweptView(model, designs, np.stack([moved[0], moved[1], acceleration]), speed)


def moments(modes: StateModes, passage: Passage) -> Floats:
    """Times (T,) close enough together that no maximum of an envelope falls between: round each passage, and evenly."""
    rate = TWO_PI * (passage.end - passage.start) / passage.time
    looks = [np.linspace(0.0, passage.time, EVENLY)]
    for order in passage.family.orders:
        grain = 1.0 / np.sqrt(abs(rate * order))
        for pole in modes.poles[modes.poles.imag > 0.0]:
            centre = (pole.imag / order - TWO_PI * passage.start) / rate
            width = grain - pole.real / abs(rate * order)
            looks += [centre + ROUND_PASSAGE * grain, centre + ROUND_PASSAGE * width]
    times = np.unique(np.concatenate(looks))
    return times[(times >= 0.0) & (times <= passage.time)]
