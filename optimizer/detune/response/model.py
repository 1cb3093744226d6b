"""The machine in matrices: freedoms, masses, given stiffness, station rows and static loads.

Everything a design does not change is computed once here; `assemble.py` adds the chosen parts.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief, body_of
from detune.brief.floor import floor_freedom
from detune.brief.machine import Connection, Station
from detune.brief.mass_properties import MassProperties, mass_properties
from detune.brief.state import State
from detune.brief.statement import FREEDOMS, unit_direction
from detune.brief.structure import Structure
from detune.ground.units import STANDARD_GRAVITY
from detune.parts.kinds.mount import Mount, MountArrays, mount_arrays
from detune.parts.laws import ROOM_TEMPERATURE
from detune.physics import rigid_body
from detune.physics.orientation import axes_from_direction
from detune.response.damping_readings import read_as
from detune.response.model_gravity import geometric_stiffness_of
from detune.response.part_laws import GroupLaws, group_laws

Floats = NDArray[np.float64]
FLOOR = "floor"
STRUCTURE = "structure"


@dataclass(frozen=True)
class Frame:
    """Which column of the freedoms belongs to which direction of which body."""

    names: tuple[tuple[str, str], ...]
    references: dict[str, Floats]
    flexible_floor: bool
    nodes: dict[str, Floats]

    @property
    def count(self) -> int:
        """Number of freedoms n."""
        return len(self.names)

    def motion_rows(self, body: str, position: Floats, axes: Floats | None = None) -> Floats:
        """Rows (3, n) giving the displacement of a place on a body along the columns of `axes`."""
        turned = np.eye(3) if axes is None else axes
        if body == FLOOR:
            rows = np.zeros((3, self.count))
            if self.flexible_floor:
                rows[:, self.count - 1] = turned[2]
            return rows
        if body in self.nodes:
            return self._on_structure(body, turned)
        full = rigid_body.attachment(position - self.references[body], turned)
        return self._spread(body, full)

    def rotation_rows(self, body: str) -> Floats:
        """Rows (3, n) giving the rotation of a body about the global axes."""
        return self._spread(body, np.hstack([np.zeros((3, 3)), np.eye(3)]))

    def _on_structure(self, node: str, turned: Floats) -> Floats:
        """Rows (3, n) of a node of the structure: its shapes on the modal freedoms."""
        rows = np.zeros((3, self.count))
        columns = [column for column, (name, _) in enumerate(self.names) if name == STRUCTURE]
        rows[:, columns] = turned.T @ self.nodes[node]
        return rows

    def _spread(self, body: str, full: Floats) -> Floats:
        rows = np.zeros((3, self.count))
        for column, (name, freedom) in enumerate(self.names):
            if name == body:
                rows[:, column] = full[:, FREEDOMS.index(freedom)]
        return rows


@dataclass(frozen=True)
class StationRows:
    """One station: deflection rows (3, n) in local axes, its axes (3, 3) and how many parts share it.

    `foot` (3, n): global motion of the floor or structure under it, zero where it stands on a body.

    In a state, `factor` multiplies the part's stiffness and `packing` (m) lifts its foot; a lost
    station has no parts.
    """

    name: str
    on: str
    to: str
    group: int
    parallel: int
    bought: int
    factor: float
    packing: float
    rows: Floats
    axes: Floats
    on_floor: bool
    position: Floats
    foot: Floats


@dataclass(frozen=True)
class ConnectionRows:
    """One given connection: rows (3, n) along global axes, its stiffness and damping, each (3,)."""

    name: str
    on: str
    to: str
    position: Floats
    rows: Floats
    stiffness: Floats
    stiffness_static: Floats
    hysteretic: Floats
    viscous: Floats
    on_floor: bool


@dataclass(frozen=True)
class Group:
    """A group of stations and the parts it may take."""

    name: str
    mounts: tuple[Mount, ...]
    arrays: MountArrays
    spread: Floats
    laws: GroupLaws | None = None


@dataclass(frozen=True)
class Model:
    """A machine ready for designs. n freedoms, B ballast steps, S stations, G groups.

    `mass` (B, n, n); `weight` (B, n) static loads; `fixed_*` (n, n) of connections and floor; `geometric`
    (B, n, n) gravity's geometric stiffness.
    """

    frame: Frame
    mass: Floats
    weight: Floats
    fixed_static: Floats
    fixed_dynamic: Floats
    fixed_hysteretic: Floats
    fixed_viscous: Floats
    stations: tuple[StationRows, ...]
    connections: tuple[ConnectionRows, ...]
    groups: tuple[Group, ...]
    points: dict[str, Floats]
    floor_mass: float
    floor_stiffness: float
    floor_damping: float
    ballast_mass: Floats
    ballast_cost: Floats
    creep: float
    geometric: Floats
    with_gravity_stiffness: bool
    assumed: tuple[str, ...]

    @property
    def station_names(self) -> tuple[str, ...]:
        return tuple(station.name for station in self.stations)


def build_model(
    brief: Brief,
    candidates: tuple[tuple[Mount, ...], ...],
    state: State | None = None,
    reading: str | None = None,
) -> Model:
    """Return the model of a brief, in a state, whose group g may take the mounts `candidates[g]`.

    `reading` says how damping of unknown kind is read (damping_readings); None takes it as listed.
    """
    properties = {body.name: mass_properties(body) for body in brief.bodies}
    floor = floor_freedom(brief.floor)
    names: list[tuple[str, str]] = [(body.name, freedom) for body in brief.bodies for freedom in body.free]
    structure = brief.structure
    nodes = (
        {} if structure is None else {node.name: structure.shape_rows(node.name) for node in structure.nodes}
    )
    if structure is not None:
        names += [(STRUCTURE, f"mode {i + 1}") for i in range(len(structure.modes.frequency))]
    if floor is not None:
        names.append((FLOOR, "z"))
    references = {name: p.centre for name, p in properties.items()}
    frame = Frame(tuple(names), references, floor is not None, nodes)
    stations = tuple(_station(brief, frame, station, state) for station in brief.stations)
    connections = tuple(_connection(brief, frame, connection) for connection in brief.connections)
    n = frame.count
    fixed = {name: np.zeros((n, n)) for name in ("static", "dynamic", "hysteretic", "viscous")}
    for c in connections:
        fixed["static"] += c.rows.T @ (c.stiffness_static[:, None] * c.rows)
        fixed["dynamic"] += c.rows.T @ (c.stiffness[:, None] * c.rows)
        fixed["hysteretic"] += c.rows.T @ (c.hysteretic[:, None] * c.rows)
        fixed["viscous"] += c.rows.T @ (c.viscous[:, None] * c.rows)
    base_mass = np.zeros((n, n))
    for body in brief.bodies:
        base_mass += _body_mass(frame, body.name, properties[body.name])
    if floor is not None:
        base_mass[-1, -1] += floor.mass
        fixed["static"][-1, -1] += floor.stiffness
        fixed["dynamic"][-1, -1] += floor.stiffness
        fixed["viscous"][-1, -1] += floor.damping
    if structure is not None:
        _add_structure(frame, structure, base_mass, fixed)
    mass, weight, ballast_mass, ballast_cost = _with_ballast(brief, frame, base_mass, properties)
    temperature = ROOM_TEMPERATURE if state is None else state.temperature
    groups = tuple(
        _group(name, mounts, reading, _spread(stations, index, n), temperature)
        for index, (name, mounts) in enumerate(zip(brief.groups, candidates, strict=True))
    )
    notes = [note for p in properties.values() for note in p.assumed]
    notes += list(floor.assumed) if floor is not None else []
    notes += [
        f"{c.name}: static stiffness taken equal to the dynamic one"
        for c in brief.connections
        if c.stiffness_static is None
    ]
    return Model(
        frame=frame,
        mass=mass,
        weight=weight,
        fixed_static=fixed["static"],
        fixed_dynamic=fixed["dynamic"],
        fixed_hysteretic=fixed["hysteretic"],
        fixed_viscous=fixed["viscous"],
        stations=stations,
        connections=connections,
        groups=groups,
        points={p.name: frame.motion_rows(body_of(brief, p.on), np.array(p.position)) for p in brief.points},
        floor_mass=floor.mass if floor else 0.0,
        floor_stiffness=floor.stiffness if floor else 0.0,
        floor_damping=floor.damping if floor else 0.0,
        ballast_mass=ballast_mass,
        ballast_cost=ballast_cost,
        creep=0.0 if state is None else state.creep,
        geometric=geometric_stiffness_of(brief, frame, properties, stations, connections, weight),
        with_gravity_stiffness=brief.gravity_stiffness,
        assumed=tuple(notes),
    )


def _add_structure(frame: Frame, structure: Structure, mass: Floats, fixed: dict[str, Floats]) -> None:
    """Put the structure's modes on the diagonals: unit mass, omega^2, and 2 z omega of viscous damping."""
    columns = [column for column, (name, _) in enumerate(frame.names) if name == STRUCTURE]
    omega = 2.0 * np.pi * structure.modes.frequency
    mass[columns, columns] += 1.0
    fixed["static"][columns, columns] += omega**2
    fixed["dynamic"][columns, columns] += omega**2
    fixed["viscous"][columns, columns] += 2.0 * structure.modes.damping_ratio * omega


def _station(brief: Brief, frame: Frame, station: Station, state: State | None) -> StationRows:
    radial = None if station.radial is None else np.array(unit_direction(station.radial))
    axes = axes_from_direction(np.array(unit_direction(station.axial)), radial)
    position = np.array(station.position)
    rows = frame.motion_rows(body_of(brief, station.on), position, axes) - frame.motion_rows(
        station.to, position, axes
    )
    return StationRows(
        name=station.name,
        on=body_of(brief, station.on),
        to=station.to,
        group=brief.groups.index(station.group),
        parallel=0 if state is not None and station.name in state.lost else station.parallel,
        bought=station.parallel,
        factor=stiffness_factor(state, station),
        packing=0.0 if state is None else state.packing.get(station.name, 0.0),
        rows=rows,
        axes=axes,
        on_floor=station.to == FLOOR,
        position=position,
        foot=frame.motion_rows(station.to, position) * (station.to not in frame.references),
    )


def stiffness_factor(state: State | None, station: Station) -> float:
    """Return what a state makes of the stiffness of the part at a station."""
    if state is None or (state.groups is not None and station.group not in state.groups):
        return 1.0
    return state.stiffness_factor


def _connection(brief: Brief, frame: Frame, connection: Connection) -> ConnectionRows:
    position = np.array(connection.position)
    rows = frame.motion_rows(body_of(brief, connection.on), position) - frame.motion_rows(
        connection.to, position
    )
    stiffness = np.array(connection.stiffness)
    static = stiffness if connection.stiffness_static is None else np.array(connection.stiffness_static)
    return ConnectionRows(
        name=connection.name,
        on=body_of(brief, connection.on),
        to=connection.to,
        position=position,
        rows=rows,
        stiffness=stiffness,
        stiffness_static=static,
        hysteretic=stiffness * (connection.loss_factor or 0.0),
        viscous=np.array(connection.viscous or (0.0, 0.0, 0.0)),
        on_floor=connection.to == FLOOR,
    )


def _body_mass(frame: Frame, body: str, properties: MassProperties) -> Floats:
    move = frame.motion_rows(body, properties.centre)
    turn = frame.rotation_rows(body)
    return properties.mass * move.T @ move + turn.T @ properties.inertia @ turn


def _with_ballast(
    brief: Brief, frame: Frame, base_mass: Floats, properties: dict[str, MassProperties]
) -> tuple[Floats, Floats, Floats, Floats]:
    """Return mass (B, n, n), static load (B, n), added mass (B,) and its cost (B,)."""
    gravity = np.array([0.0, 0.0, -STANDARD_GRAVITY])
    load = np.zeros(frame.count)
    for name, p in properties.items():
        load += frame.motion_rows(name, p.centre).T @ (p.mass * gravity)
    for steady in brief.steady_loads:
        body = body_of(brief, steady.on)
        load += frame.motion_rows(body, np.array(steady.position)).T @ np.array(steady.force)
        load += frame.rotation_rows(body).T @ np.array(steady.moment)
    ballast = brief.ballast
    if ballast is None:
        return base_mass[None], load[None], np.zeros(1), np.zeros(1)
    body = body_of(brief, ballast.on)
    move = frame.motion_rows(body, np.array(ballast.position))
    turn = frame.rotation_rows(body)
    masses, loads = [], []
    for step in ballast.steps:
        inertia = rigid_body.box_inertia(step, np.array(ballast.size))
        masses.append(base_mass + step * move.T @ move + turn.T @ inertia @ turn)
        loads.append(load + move.T @ (step * gravity))
    steps = np.array(ballast.steps)
    return np.array(masses), np.array(loads), steps, steps * ballast.cost_per_kg


def _group(
    name: str, mounts: tuple[Mount, ...], reading: str | None, spread: Floats, temperature: float
) -> Group:
    read = tuple(read_as(mount, reading) for mount in mounts)
    laws, arrays = group_laws(read, _without_gaps(mount_arrays(read)), temperature)
    return Group(name, mounts, arrays, spread, laws)


def _without_gaps(arrays: MountArrays) -> MountArrays:
    """Put zero where a list states nothing lateral; `problem.candidates` admits that only where nothing moves so."""
    names = ("stiffness_static", "stiffness_dynamic", "loss_factor", "viscous")
    return replace(arrays, **{name: np.nan_to_num(getattr(arrays, name)) for name in names})


def _spread(stations: tuple[StationRows, ...], group: int, n: int) -> Floats:
    """Return T (3, n, n): what one unit of stiffness along each local axis adds, over a group's stations."""
    spread = np.zeros((3, n, n))
    for station in stations:
        if station.group == group:
            spread += station.parallel * station.factor * station.rows[:, :, None] * station.rows[:, None, :]
    return spread


def find_station(model: Model, name: str) -> StationRows:
    """Return the station of this name."""
    return next(station for station in model.stations if station.name == name)
