"""A floor known by its stiffness between the stations, as modes beside the freedoms of the bodies."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief, applies
from detune.brief.floor import COMMON_DAMPING_RATIO, Floor
from detune.brief.floor_files import FloorMatrices
from detune.brief.machine import Station
from detune.brief.structure import Structure, StructureModes
from detune.ground.units import show

Floats = NDArray[np.float64]
# A floor without mass gets so little that its own frequencies lie so many times above the highest excitation:
# what that changes in its dynamic stiffness is one over the square of it.
ABOVE = 300.0


@dataclass(frozen=True)
class FloorNode:
    """A place of the floor under a station."""

    name: str


@dataclass(frozen=True, eq=False)
class FloorStructure:
    """The floor as modes of its own, in the same form as a `Structure`; every mode is kept.

    `stiffness` and `mass` (k, k) of the freedoms under the stations, station by station. Modes above
    `real_up_to` (Hz) are those of a mass that was put in.
    """

    name: str
    modes: StructureModes
    stations: tuple[str, ...]
    directions: tuple[str, ...]
    stiffness: Floats
    mass: Floats
    loss_factor: float
    assumed: tuple[str, ...]
    real_up_to: float = np.inf

    @property
    def nodes(self) -> tuple[FloorNode, ...]:
        """The places under the stations."""
        return tuple(FloorNode(node_name(name)) for name in self.stations)

    def shape_rows(self, node: str) -> Floats:
        """Rows (3, m): displacement of a node along x, y, z for unit modal coordinates."""
        return self.foot_rows(node) @ self.modes.shapes

    def foot_rows(self, node: str) -> Floats:
        """Rows (3, k): which freedom of the matrices is which direction of a node; zero where the floor is held."""
        first = [node_name(name) for name in self.stations].index(node) * len(self.directions)
        rows = np.zeros((3, len(self.stiffness)))
        for place, axis in enumerate(self.directions):
            rows["xyz".index(axis), first + place] = 1.0
        return rows

    @property
    def total_rows(self) -> Floats:
        """Rows (3, k): the sum over all stations, direction by direction."""
        return np.asarray(np.sum([self.foot_rows(node.name) for node in self.nodes], axis=0))


def node_name(station: str) -> str:
    """Return the name of the floor's place under a station."""
    return f"floor under {station}"


def foot_of(brief: Brief, station: Station) -> str:
    """Return the node a station stands on: of a floor known between stations, the place under this one."""
    return node_name(station.name) if station.to == "floor" and brief.floor.matrices else station.to


def elastic_of(brief: Brief) -> Structure | FloorStructure | None:
    """Return what is elastic under the machine with modes of its own: a structure or a floor between stations."""
    if brief.floor.matrices is None:
        return brief.structure
    return _as_modes(brief, brief.floor, brief.floor.matrices)


def highest_excitation(brief: Brief) -> float:
    """Return the highest frequency (Hz) that a tone or noise of the brief has, zero without any."""
    ends = [0.0]
    for condition in brief.conditions:
        for forcing in brief.forcing:
            if applies(forcing.conditions, condition.name) and forcing.shaft_needed() in (
                None,
                *condition.shafts,
            ):
                ends += [tone.order * tone.high for tone in forcing.tones(condition.shafts)]
                ends += [float(noise.spectrum.frequency[-1]) for noise in forcing.noises()]
    return max(ends)


def _as_modes(brief: Brief, floor: Floor, found: FloorMatrices) -> FloorStructure:
    from scipy.linalg import eigh

    assumed = ["floor: static stiffness between the stations taken equal to the dynamic one"]
    loss = floor.loss_factor
    if loss is None:
        loss = 2.0 * COMMON_DAMPING_RATIO
        assumed.append(f"floor loss factor {loss:.0%} (common practice: damping ratio 1-3 %)")
    mass, real = found.mass, np.inf
    if mass is None:
        own = ABOVE * max(highest_excitation(brief), 1.0)
        mass = found.stiffness / (2.0 * np.pi * own) ** 2
        real = 0.5 * own
        assumed.append(
            "floor without mass: so little is put in that its own frequencies all are "
            f"{show(own, 'frequency')}, which changes its dynamic stiffness by less than {1.0 / ABOVE**2:.0e} "
            "at any excitation; they are no frequencies of the real floor"
        )
    values, shapes = eigh(found.stiffness, mass)
    frequency = np.sqrt(np.maximum(values, 0.0)) / (2.0 * np.pi)
    modes = StructureModes(
        frequency, np.zeros(len(values)), shapes, loss_factor=np.full(len(values), float(loss))
    )
    assert floor.stations is not None  # the statement asks for them
    return FloorStructure(
        name="floor",
        modes=modes,
        stations=floor.stations,
        directions=floor.directions or ("z",),
        stiffness=found.stiffness,
        mass=mass,
        loss_factor=float(loss),
        assumed=tuple(assumed),
        real_up_to=real,
    )
