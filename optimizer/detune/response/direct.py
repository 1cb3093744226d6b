"""One design in full matrices, built from the brief alone, for the assessor.

It shares no assembly with `model.py`: every body and the floor are nodes of six freedoms, the
stiffness of each part is turned into global axes, and freedoms that cannot move are prescribed and
partitioned off, so forces into the floor come out as reactions. Two ways to the same numbers guard
each other.
"""

from copy import copy
from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief, body_of
from detune.brief.floor import FloorFreedom, floor_freedom
from detune.brief.floor_matrix import FloorStructure, elastic_of, foot_of
from detune.brief.forcing.base import Tone
from detune.brief.machine import Station
from detune.brief.mass_properties import mass_properties
from detune.brief.state import State, apparent_gravity
from detune.brief.statement import FREEDOMS, unit_direction
from detune.brief.structure import Structure
from detune.parts.kinds.mount import Mount
from detune.parts.laws import ROOM_TEMPERATURE
from detune.physics.orientation import axes_from_direction
from detune.physics.rigid_body import box_inertia, skew
from detune.physics.static import solve_static
from detune.response.damping_readings import read_as
from detune.response.design import Design, ballast_of
from detune.response.direct_absorbers import DirectAbsorber, absorber_mass, absorber_weight, absorbers_of
from detune.response.direct_gravity import gravity_stiffness
from detune.response.direct_laws import DirectRest, follows_curve, part_stiffness, rest_on_laws
from detune.response.direct_stiffness import assembled_stiffness, straight_stiffness

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
FLOOR = "floor"
# Frequencies up to which the stiffness is put together part by part.
FEW = 2


@dataclass(frozen=True)
class DirectMachine:
    """A brief with one design put in, in a state, damping of unknown kind read as `reading` (damping_readings).

    `amplitude` (m), one for each station or also (S, F) over the frequencies asked for, is the peak axial deflection
    at which parts work that follow it; None takes them as listed.
    N = 6 (bodies + 1) + m freedoms: the bodies', the floor's six, and the m modes of a structure.
    """

    brief: Brief
    design: Design
    state: State | None = None
    reading: str | None = None
    amplitude: Floats | None = None
    floor: FloorFreedom | None = field(init=False)
    centres: dict[str, Floats] = field(init=False)

    def __post_init__(self) -> None:
        object.__setattr__(self, "floor", floor_freedom(self.brief.floor))
        centres = {body.name: mass_properties(body).centre for body in self.brief.bodies}
        object.__setattr__(self, "centres", centres)

    @property
    def nodes(self) -> tuple[str, ...]:
        return (*(body.name for body in self.brief.bodies), FLOOR)

    @property
    def with_frequency_laws(self) -> bool:
        """Whether some part's stiffness changes with frequency other than by a dashpot."""
        mounts = self.design.mounts
        return any(mount.relaxation is not None or mount.law_table is not None for mount in mounts)

    @property
    def without_table(self) -> "DirectMachine":
        """The same machine with the spring and mass near a tabulated floor in its place."""
        if self.floor is None or self.floor.table is None:
            return self
        other = copy(self)
        object.__setattr__(other, "floor", replace(self.floor, table=None))
        return other

    @cached_property
    def elastic(self) -> Structure | FloorStructure | None:
        """What is elastic under the machine with modes of its own."""
        return elastic_of(self.brief)

    @property
    def floor_axes(self) -> slice:
        """The floor's three translations among the N freedoms."""
        first = 6 * len(self.brief.bodies)
        return slice(first, first + 3)

    @property
    def floor_vertical(self) -> int:
        """The floor's vertical freedom."""
        return 6 * len(self.brief.bodies) + 2

    @property
    def size(self) -> int:
        """Number of freedoms N."""
        return int(self.modal.stop) + len(self.absorbers)

    @property
    def modal(self) -> slice:
        """The modes of the structure among the N freedoms."""
        modes = 0 if self.elastic is None else len(self.elastic.modes.frequency)
        return slice(6 * len(self.nodes), 6 * len(self.nodes) + modes)

    @cached_property
    def absorbers(self) -> tuple[DirectAbsorber, ...]:
        """The absorbers that are fitted; their freedoms are the last ones."""
        return absorbers_of(self.brief, self.design)

    @cached_property
    def stations(self) -> tuple[Station, ...]:
        """The stations, then the places of the absorbers that are fitted."""
        return (*self.brief.stations, *(absorber.station for absorber in self.absorbers))

    @cached_property
    def free(self) -> NDArray[np.bool_]:
        """Mask (N,) of the freedoms that can move."""
        mask = [freedom in body.free for body in self.brief.bodies for freedom in FREEDOMS]
        mask += [self.floor is not None and freedom == "z" for freedom in FREEDOMS]
        return np.array(mask + [True] * (self.size - len(mask)))

    @cached_property
    def names(self) -> tuple[tuple[str, str], ...]:
        """Node and freedom of each freedom that can move."""
        every: list[tuple[str, str]] = [(node, freedom) for node in self.nodes for freedom in FREEDOMS]
        node = FLOOR if isinstance(self.elastic, FloorStructure) else "structure"
        every += [(node, f"mode {i + 1}") for i in range(self.modal.stop - len(every))]
        every += [(absorber.station.name, "along") for absorber in self.absorbers]
        return tuple(name for name, moves in zip(every, self.free, strict=True) if moves)

    def place(self, node: str, position: Floats) -> Floats:
        """Rows (3, N): global displacement of a place on a node."""
        rows = np.zeros((3, self.size))
        if node not in self.nodes:
            assert self.elastic is not None  # the cross-check admits no other place
            rows[:, self.modal] = self.elastic.shape_rows(node)
            if isinstance(self.elastic, FloorStructure):
                # Held directions go by the floor's node, so that their reaction is seen there.
                rows[:, self.floor_axes] += np.diag(~np.any(self.elastic.total_rows != 0.0, axis=1))
            return rows
        first = 6 * self.nodes.index(node)
        rows[:, first : first + 3] = np.eye(3)
        if node != FLOOR:
            rows[:, first + 3 : first + 6] = -skew(position - self.centres[node])
        return rows

    def turn(self, node: str) -> Floats:
        """Rows (3, N): rotation of a node."""
        rows = np.zeros((3, self.size))
        first = 6 * self.nodes.index(node)
        rows[:, first + 3 : first + 6] = np.eye(3)
        return rows

    def at_amplitude(self, amplitude: Floats) -> "DirectMachine":
        """Return the same machine, at rest as it is, with its parts at another amplitude (S,) or (S, F) in m."""
        moved = copy(self)
        object.__setattr__(moved, "amplitude", amplitude)
        moved.__dict__.pop("straight", None)
        if amplitude.ndim == 1:
            for asked in ("topples", "dynamic_gravity"):
                moved.__dict__.pop(asked, None)
        return moved

    def mount(self, station: Station) -> Mount:
        """Return the part that stands at a station."""
        return read_as(self.design.mounts[self.design.groups.index(station.group)], self.reading)

    @cached_property
    def _geometry(self) -> dict[str, tuple[Floats, Floats]]:
        found = {}
        for station in self.brief.stations:
            radial = None if station.radial is None else np.array(unit_direction(station.radial))
            axes = axes_from_direction(np.array(unit_direction(station.axial)), radial)
            position = np.array(station.position)
            foot = foot_of(self.brief, station)
            across = self.place(body_of(self.brief, station.on), position) - self.place(foot, position)
            found[station.name] = (axes, across)
        for absorber in self.absorbers:
            found[absorber.station.name] = axes_from_direction(absorber.along), absorber.across(self)
        return found

    def axes(self, station: Station) -> Floats:
        """Local axes (3, 3) of a station as columns."""
        return self._geometry[station.name][0]

    def factor(self, station: Station) -> float:
        """What the state makes of the stiffness of the part at a station."""
        state = self.state
        if state is None or (state.groups is not None and station.group not in state.groups):
            return 1.0
        return state.stiffness_factor

    def share(self, station: Station) -> float:
        """How many times one part's listed stiffness stands at a station in this state."""
        if self.state is not None and station.name in self.state.lost:
            return 0.0
        return station.parallel * self.factor(station)

    def packing(self, station: Station) -> float:
        """How far the foot of a station is lifted, m."""
        return 0.0 if self.state is None else self.state.packing.get(station.name, 0.0)

    @property
    def creep(self) -> float:
        """Share of the static deflection that is added by creep."""
        return 0.0 if self.state is None else self.state.creep

    def across(self, station: Station) -> Floats:
        """Rows (3, N): global displacement of the body at a station relative to what it stands on."""
        return self._geometry[station.name][1]

    def deflection_rows(self, station: Station) -> Floats:
        """Rows (3, N): the same along the station's own axes."""
        return self.axes(station).T @ self.across(station)

    def foot(self, station: Station) -> Floats:
        """Rows (3, N): global motion of the floor or structure under a station, zero where it stands on a body."""
        rows = self.place(foot_of(self.brief, station), np.array(station.position))
        return rows * (station.to not in self.centres)

    @cached_property
    def mass(self) -> Floats:
        """Mass matrix (N, N), the ballast included."""
        total = np.zeros((len(self.free), len(self.free)))
        pieces = [
            (b.name, p.mass, p.centre, p.inertia) for b in self.brief.bodies for p in (mass_properties(b),)
        ]
        if self.brief.ballast is not None and self.design.ballast > 0.0:
            box = ballast_of(self.brief, self.design)
            inertia = box_inertia(box.mass, np.array(box.size))
            pieces.append(
                (body_of(self.brief, self.brief.ballast.on), box.mass, np.array(box.centre), inertia)
            )
        for node, mass, centre, inertia in pieces:
            move, turn = self.place(node, centre), self.turn(node)
            total += mass * move.T @ move + turn.T @ inertia @ turn
        if self.floor is not None:
            total[self.floor_vertical, self.floor_vertical] += self.floor.mass
        modal = range(self.modal.start, self.modal.stop)
        total[modal, modal] += 1.0
        return total + absorber_mass(self)

    def stiffness(self, omega: Floats | None, with_gravity: bool = True) -> Complexes:
        """Static stiffness (N, N) where omega is None, else complex dynamic stiffness (F, N, N)."""
        straight = self.straight if omega is not None and with_gravity and len(omega) > FEW else None
        if straight is None or omega is None:
            return assembled_stiffness(self, omega, with_gravity)
        return np.asarray(straight[0] + 1j * omega[:, None, None] * straight[1])

    @cached_property
    def straight(self) -> tuple[Complexes, Floats] | None:
        """Matrices (N, N) of which the dynamic stiffness is K + j omega C, None where it has a law of its own."""
        return straight_stiffness(self)

    def part(self, station: Station, omega: Floats | None) -> Complexes:
        """One part's listed stiffness at a station: static (3,), or complex dynamic (F, 3) at its working load."""
        mount = self.mount(station)
        ratio = 1.0
        if omega is not None and follows_curve(mount) and self.rest is not None:
            tangent = float(self.rest.tangent[self.stations.index(station)])
            ratio = tangent / mount.stiffness_static[2] if np.isfinite(tangent) else 1.0
        temperature = ROOM_TEMPERATURE if self.state is None else self.state.temperature
        number = self.stations.index(station)
        amplitude = None if self.amplitude is None else self.amplitude[number]
        return part_stiffness(mount, omega, ratio, temperature, amplitude)

    @cached_property
    def rest(self) -> DirectRest | None:
        """Where the machine rests if some part has no straight load-deflection line, else None."""
        if not any(follows_curve(self.mount(station)) for station in self.stations):
            return None
        stations, free = self.stations, self.free
        springs = sum(
            self.across(s).T
            @ self.axes(s)
            @ np.diag(self.share(s) * self.part(s, None).real)
            @ self.axes(s).T
            @ self.across(s)
            for s in stations
        )
        mesh = np.ix_(free, free)
        other = (self.stiffness(None).real - springs)[mesh]
        load = self._weight_alone[free]
        rows = [(self.axes(s).T @ self.across(s))[:, free] for s in stations]
        mounts = [self.mount(s) for s in stations]
        return rest_on_laws(
            rows, mounts, [self.share(s) for s in stations], [self.packing(s) for s in stations], other, load
        )

    @cached_property
    def dead_load(self) -> Floats:
        """Static load (N,) on straight springs: weight, steady loads, and what packing puts on the springs."""
        load = self._weight_alone.copy()
        for station in self.stations:
            lift = self.share(station) * self.packing(station) * self.part(station, None)[2].real
            load += lift * (self.axes(station).T @ self.across(station))[2]
        return load

    @cached_property
    def _weight_alone(self) -> Floats:
        """Static load (N,): gravity on bodies and ballast, and the steady loads; not the floor's own weight."""
        load = np.zeros(len(self.free))
        down = np.array(apparent_gravity(self.state))
        for body in self.brief.bodies:
            properties = mass_properties(body)
            load += self.place(body.name, properties.centre).T @ (properties.mass * down)
        if self.brief.ballast is not None:
            on = body_of(self.brief, self.brief.ballast.on)
            box = ballast_of(self.brief, self.design)
            load += self.place(on, np.array(box.centre)).T @ (box.mass * down)
        for steady in self.brief.steady_loads:
            node = body_of(self.brief, steady.on)
            load += self.place(node, np.array(steady.position)).T @ np.array(steady.force)
            load += self.turn(node).T @ np.array(steady.moment)
        return load + absorber_weight(self)

    def gravity_stiffness(self) -> Floats:
        """Geometric stiffness (N, N) of all static forces on each body (direct_gravity)."""
        return gravity_stiffness(self)

    @property
    def weight_alone(self) -> Floats:
        """Static load (N,) of weight and steady loads, without what packing adds."""
        return self._weight_alone

    @cached_property
    def static_q(self) -> Floats:
        """Static displacements (N,), zero where a freedom cannot move. nan where the machine finds no rest."""
        q = np.zeros(self.size)
        if self.rest is not None:
            q[self.free] = self.rest.q
            return q
        stiffness = self.stiffness(None).real
        q[self.free] = solve_static(stiffness[np.ix_(self.free, self.free)], self.dead_load[self.free])
        return q

    @cached_property
    def dynamic_gravity(self) -> Floats:
        """Gravity's geometric stiffness as it stands in the dynamic stiffness (N, N).

        Zero where the brief says so, and for a machine that topples, whose responses count for nothing.
        """
        if not self.brief.gravity_stiffness or self.topples:
            return np.zeros((self.size, self.size))
        return self.gravity_stiffness()

    @cached_property
    def topples(self) -> bool:
        """Whether the machine would not stand on its dynamic stiffness, or finds no rest on its curves."""
        if self.rest is not None and not np.all(np.isfinite(self.rest.q)):
            return True
        mesh = np.ix_(self.free, self.free)
        own = self.stiffness(np.array([1e-3]), with_gravity=False)[0].real[mesh]
        if self.brief.gravity_stiffness:
            own = own + self.gravity_stiffness()[mesh]
        return bool(np.linalg.eigvalsh(own)[0] <= 0.0)

    def tone_load(self, tone: Tone, omega: Floats) -> tuple[Complexes, Complexes]:
        """Load (F, N) of a tone and the floor motion (F, N) it prescribes or would make freely."""
        growth = omega[:, None] ** float(tone.power)
        size = len(self.free)
        if tone.base is not None:
            motion = np.zeros((len(omega), size), dtype=complex)
            motion[:, self.floor_axes] = growth * np.array(tone.base)
            return np.zeros((len(omega), size), dtype=complex), motion
        node = body_of(self.brief, tone.on)
        vector = self.place(node, np.array(tone.position)).T @ np.array(tone.force)
        vector = vector + self.turn(node).T @ np.array(tone.moment)
        return growth * vector, np.zeros((len(omega), size), dtype=complex)
