"""Matrices of a batch of designs, and the stiffness of each part in them."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.response.absorbers import geometric_of, mass_of, spare_damping, spare_stiffness
from detune.response.designs import Designs
from detune.response.floor_table import beyond_spring
from detune.response.model import Model, StationRows
from detune.response.part_laws import amplitude_part, frequency_part
from detune.response.static_stiffness import group_sum
from detune.response.working_point import WorkingPoint, working_point

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
# rad/s: the low end of what a frequency law says.
STANDING_STILL = 1e-3


@dataclass(frozen=True, eq=False)
class PartBatch:
    """The parts of D designs as they work: at their load, and at an amplitude (S, D) in m where that counts."""

    model: Model
    designs: Designs
    working: WorkingPoint | None = None
    amplitude: Floats | None = None

    def take(self, index: NDArray[np.generic]) -> "PartBatch":
        """Return the parts of the designs at these indices, or where this mask holds."""
        return PartBatch(
            self.model,
            self.designs.take(index),
            None if self.working is None else self.working.take(index),
            None if self.amplitude is None else self.amplitude[:, index],
        )

    @property
    def by_station(self) -> bool:
        """Whether parts of one number may differ from station to station."""
        return self.working is not None or self.amplitude is not None

    @property
    def with_frequency(self) -> bool:
        """Whether some part's stiffness, or the floor's, changes with frequency other than by a dashpot."""
        return self.model.floor_table is not None or self.laws_with_frequency

    @property
    def laws_with_frequency(self) -> bool:
        """Whether some part's stiffness changes with frequency other than by a dashpot."""
        return any(group.laws is not None and group.laws.with_frequency for group in self.model.groups)

    def constants(self, number: int) -> tuple[Floats, Floats, Floats]:
        """Dynamic stiffness, loss factor and viscous coefficient (D, 3) of one part at station `number`."""
        station = self.model.stations[number]
        group = self.model.groups[station.group]
        part = self.designs.part[:, station.group]
        stiffness, loss, viscous = (
            np.asarray(values)[part]
            for values in (group.arrays.stiffness_dynamic, group.arrays.loss_factor, group.arrays.viscous)
        )
        if self.working is not None and group.laws is not None and group.laws.with_load:
            static = group.arrays.stiffness_static[part, 2]
            curved = np.array([group.laws.curves[index] is not None for index in part])
            tangent = self.working.tangent[number] / (station.factor if station.factor > 0.0 else 1.0)
            # A design that finds no rest topples; the listed stiffness keeps its numbers finite.
            ratio = np.where(curved & np.isfinite(tangent), tangent / static, 1.0)
            stiffness = stiffness * np.stack([np.ones_like(ratio), np.ones_like(ratio), ratio], axis=1)
        if self.amplitude is not None and group.laws is not None and group.laws.with_amplitude:
            ratio, eta = amplitude_part(group.laws, part, self.amplitude[number])
            stiffness = stiffness * ratio[:, None]
            loss = np.where(np.isnan(eta)[:, None], loss, eta[:, None])
        return stiffness, loss, viscous

    def stiffness(self, station: StationRows, omega: Floats) -> Complexes:
        """One part's complex dynamic stiffness (D, F, 3) at a station, in its state: k (1 + j eta) + j w c and laws."""
        number = self.model.stations.index(station)
        constant, loss, viscous = self.constants(number)
        total: Complexes = (constant * (1.0 + 1j * loss))[:, None, :] + 1j * omega[:, :, None] * viscous[
            :, None, :
        ]
        group = self.model.groups[station.group]
        if group.laws is not None and group.laws.with_frequency:
            part = self.designs.part[:, station.group]
            total = total + frequency_part(group.laws, group.arrays, part, constant, omega)
        return station.factor * total

    def frequency_matrix(self, omega: Floats, with_floor: bool = True) -> Complexes:
        """What frequency laws and a tabulated floor add (D, F, n, n) to the dynamic stiffness matrix."""
        n = self.model.frame.count
        total = np.zeros((*omega.shape, n, n), dtype=complex)
        if self.model.floor_table is not None and with_floor:
            model = self.model
            spring = model.floor_mass, model.floor_stiffness
            total[..., -1, -1] = beyond_spring(self.model.floor_table, *spring, omega)
        for number, station in enumerate(self.model.stations):
            group = self.model.groups[station.group]
            if group.laws is None or not group.laws.with_frequency or station.parallel == 0:
                continue
            part = self.designs.part[:, station.group]
            added = frequency_part(group.laws, group.arrays, part, self.constants(number)[0], omega)
            added = station.parallel * station.factor * added
            total += np.einsum("dfa,ai,aj->dfij", added, station.rows, station.rows, optimize=True)
        return total


@dataclass(frozen=True, eq=False)
class Dynamic:
    """Matrices of D designs, each (D, n, n): mass, dynamic stiffness, hysteretic and viscous part.

    The dynamic stiffness is D(w) = K + j H + j w C - w^2 M, and what frequency laws of `parts` add. K contains
    gravity's geometric stiffness, which `geometric` holds alone. A design that would not stand on its dynamic
    stiffness, or finds no rest on its curves, `topples` (D,): K is then without gravity, and no response counts.
    """

    mass: Floats
    stiffness: Floats
    hysteretic: Floats
    viscous: Floats
    parts: PartBatch
    geometric: Floats | float
    topples: NDArray[np.bool_]

    def take(self, index: NDArray[np.generic]) -> "Dynamic":
        """Return the matrices of the designs at these indices, or where this mask holds."""
        geometric = self.geometric[index] if isinstance(self.geometric, np.ndarray) else self.geometric
        return Dynamic(
            mass=self.mass[index],
            stiffness=self.stiffness[index],
            hysteretic=self.hysteretic[index],
            viscous=self.viscous[index],
            parts=self.parts.take(index),
            geometric=geometric,
            topples=self.topples[index],
        )

    def at(self, omega: Floats) -> Complexes:
        """Return D(w) (D, F, n, n) at omega (D, F) in rad/s."""
        w = omega[:, :, None, None]
        constant = self.stiffness + 1j * self.hysteretic
        matrix: Complexes = np.asarray(constant[:, None] - (w**2) * self.mass[:, None], dtype=complex)
        if self.viscous.any():
            matrix = matrix + 1j * w * self.viscous[:, None]
        if self.parts.with_frequency:
            matrix = matrix + self.parts.frequency_matrix(omega)
        return matrix


def dynamic_matrices(model: Model, designs: Designs, amplitude: Floats | None = None) -> Dynamic:
    """Return the dynamic matrices of a batch, at the parts' dynamic stiffness at their load (and amplitude)."""
    parts = PartBatch(model, designs, working_point(model, designs), amplitude)
    geometric = geometric_of(model, designs) if model.with_gravity_stiffness else 0.0
    if parts.by_station:
        return _by_station(model, designs, parts, geometric)
    dynamic = Dynamic(
        mass=mass_of(model, designs),
        stiffness=model.fixed_dynamic
        + spare_stiffness(model, designs)
        + geometric
        + group_sum(model, designs, lambda group: group.arrays.stiffness_dynamic),
        hysteretic=model.fixed_hysteretic
        + group_sum(model, designs, lambda group: group.arrays.stiffness_dynamic * group.arrays.loss_factor),
        viscous=model.fixed_viscous
        + spare_damping(model, designs)
        + group_sum(model, designs, lambda group: group.arrays.viscous),
        parts=parts,
        geometric=geometric,
        topples=np.zeros(designs.count, dtype=bool),
    )
    return _standing(dynamic)


def _standing(dynamic: Dynamic) -> Dynamic:
    """Return the designs with gravity left out of those that would not stand, which are marked."""
    lowest = dynamic.stiffness
    if dynamic.parts.with_frequency:
        lowest = lowest + dynamic.parts.frequency_matrix(np.full((len(lowest), 1), STANDING_STILL))[:, 0].real
    try:
        np.linalg.cholesky(lowest)
    except np.linalg.LinAlgError:
        topples = np.linalg.eigvalsh(lowest)[:, 0] <= 0.0
        kept = dynamic.stiffness - np.where(topples[:, None, None], dynamic.geometric, 0.0)
        return replace(dynamic, stiffness=kept, topples=topples | dynamic.topples)
    return dynamic


def at_amplitude(dynamic: Dynamic, amplitude: Floats) -> Dynamic:
    """Return the same designs with their parts at other amplitudes (S, D) in m."""
    parts = replace(dynamic.parts, amplitude=amplitude)
    return _by_station(parts.model, parts.designs, parts, dynamic.geometric)


def _by_station(model: Model, designs: Designs, parts: PartBatch, geometric: Floats | float) -> Dynamic:
    stiffness = np.repeat(model.fixed_dynamic[None], designs.count, axis=0) + geometric
    stiffness = stiffness + spare_stiffness(model, designs)
    hysteretic = np.repeat(model.fixed_hysteretic[None], designs.count, axis=0)
    viscous = np.repeat(model.fixed_viscous[None], designs.count, axis=0) + spare_damping(model, designs)
    for number, station in enumerate(model.stations):
        k, eta, c = parts.constants(number)
        for matrix, values in ((stiffness, k), (hysteretic, k * eta), (viscous, c)):
            scaled = station.parallel * station.factor * values
            matrix += np.einsum("da,ai,aj->dij", scaled, station.rows, station.rows, optimize=True)
    working = parts.working
    still = np.zeros(designs.count, dtype=bool)
    if working is not None:
        still = np.asarray(~np.isfinite(working.q).all(axis=1))
    return _standing(
        Dynamic(mass_of(model, designs), stiffness, hysteretic, viscous, parts, geometric, still)
    )
