"""The machine in matrices: freedoms, masses, given stiffness, station rows and static loads.

Everything a design does not change is computed once here; `assemble.py` adds the chosen parts.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief, body_of
from detune.brief.floor import FloorFreedom, floor_freedom
from detune.brief.floor_files import FloorTable
from detune.brief.floor_matrix import FloorStructure, elastic_of, foot_of
from detune.brief.machine import Connection, Station
from detune.brief.mass_properties import MassProperties, mass_properties
from detune.brief.state import State, apparent_gravity
from detune.brief.statement import unit_direction
from detune.brief.structure import Structure
from detune.parts.kinds.mount import Mount, MountArrays, mount_arrays
from detune.parts.laws import ROOM_TEMPERATURE
from detune.physics.orientation import axes_from_direction
from detune.response.absorbers import (
    AbsorberPlace,
    AbsorberRows,
    absorber_freedoms,
    absorber_places,
    absorber_rows,
)
from detune.response.ballast import NOTHING, BallastStep, ladder
from detune.response.damping_readings import read_as
from detune.response.frame import FLOOR, STRUCTURE, ConnectionRows, Frame, StationRows
from detune.response.model_gravity import equal_springs, geometric_stiffness_of, unit_geometric
from detune.response.model_masses import absorber_station, top_of, with_ballast
from detune.response.part_laws import GroupLaws, group_laws

__all__ = [
    "FLOOR",
    "STRUCTURE",
    "ConnectionRows",
    "Frame",
    "Group",
    "Model",
    "StationRows",
    "build_model",
    "find_station",
    "stiffness_factor",
]

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]


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
    ballast: tuple[BallastStep, ...] = (NOTHING,)
    absorbers: tuple[AbsorberRows, ...] = ()
    floor_table: FloorTable | None = None
    ground: Complexes | None = None

    @property
    def station_names(self) -> tuple[str, ...]:
        return tuple(station.name for station in self.stations)


def build_model(
    brief: Brief,
    candidates: tuple[tuple[Mount, ...], ...],
    state: State | None = None,
    reading: str | None = None,
    ballast: tuple[BallastStep, ...] | None = None,
) -> Model:
    """Return the model of a brief, in a state, whose group g may take the mounts `candidates[g]`.

    `reading` says how damping of unknown kind is read (damping_readings); None takes it as listed. `ballast`: the
    steps it may take; None those that the brief states itself.
    """
    properties = {body.name: mass_properties(body) for body in brief.bodies}
    floor, structure = floor_freedom(brief.floor), elastic_of(brief)
    frame = _frame(brief, properties, floor, structure)
    stations = tuple(_station(brief, frame, station, state) for station in brief.stations)
    connections = tuple(_connection(brief, frame, connection) for connection in brief.connections)
    base_mass, fixed = _given(brief, frame, properties, connections, floor, structure)
    steps = ladder(brief) if ballast is None else ballast
    gravity = np.array(apparent_gravity(state))
    mass, weight = with_ballast(brief, frame, base_mass, properties, steps, gravity)
    springs = equal_springs(frame, stations, connections)
    geometric = geometric_stiffness_of(brief, springs, properties, steps, weight, gravity)
    places = absorber_places(brief, frame)
    stations += _absorber_stations(brief, places, state)
    groups = _groups(brief, stations, candidates, reading, state, frame.count)
    absorbers: tuple[AbsorberRows, ...] = ()
    if places:
        units = [unit_geometric(brief, springs, place.body, place.position, gravity) for place in places]
        top = top_of(frame, base_mass, fixed["dynamic"], groups, places)
        absorbers = absorber_rows(brief, frame, places, candidates, units, top, gravity)
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
        ballast_mass=np.array([step.mass for step in steps]),
        ballast_cost=np.array([step.cost for step in steps]),
        creep=0.0 if state is None else state.creep,
        geometric=geometric,
        with_gravity_stiffness=brief.gravity_stiffness,
        assumed=_assumed(brief, properties, floor, structure),
        ballast=steps,
        absorbers=absorbers,
        floor_table=None if floor is None else floor.table,
        ground=_ground_rows(frame, structure),
    )


def _frame(
    brief: Brief,
    properties: dict[str, MassProperties],
    floor: FloorFreedom | None,
    structure: Structure | FloorStructure | None,
) -> Frame:
    """Return the freedoms: of the bodies, the absorbers, a structure and the floor, in this order."""
    names: list[tuple[str, str]] = [(body.name, freedom) for body in brief.bodies for freedom in body.free]
    names += absorber_freedoms(brief)
    nodes = (
        {} if structure is None else {node.name: structure.shape_rows(node.name) for node in structure.nodes}
    )
    if structure is not None:
        names += [(STRUCTURE, f"mode {i + 1}") for i in range(len(structure.modes.frequency))]
    if floor is not None:
        names.append((FLOOR, "z"))
    references = {name: p.centre for name, p in properties.items()}
    return Frame(tuple(names), references, floor is not None, nodes)


def _given(
    brief: Brief,
    frame: Frame,
    properties: dict[str, MassProperties],
    connections: tuple[ConnectionRows, ...],
    floor: FloorFreedom | None,
    structure: Structure | FloorStructure | None,
) -> tuple[Floats, dict[str, Floats]]:
    """Return what no design changes: the mass (n, n), and static, dynamic, hysteretic and viscous stiffness."""
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
    return base_mass, fixed


def _assumed(
    brief: Brief,
    properties: dict[str, MassProperties],
    floor: FloorFreedom | None,
    structure: Structure | FloorStructure | None,
) -> tuple[str, ...]:
    notes = [note for p in properties.values() for note in p.assumed]
    notes += list(floor.assumed) if floor is not None else []
    notes += list(structure.assumed) if isinstance(structure, FloorStructure) else []
    notes += [
        f"{c.name}: static stiffness taken equal to the dynamic one"
        for c in brief.connections
        if c.stiffness_static is None
    ]
    return tuple(notes)


def _add_structure(
    frame: Frame, structure: Structure | FloorStructure, mass: Floats, fixed: dict[str, Floats]
) -> None:
    """Put the modes on the diagonals: unit mass, omega^2, 2 z omega of viscous damping, eta omega^2 of another."""
    columns = [column for column, (name, _) in enumerate(frame.names) if name == STRUCTURE]
    omega = 2.0 * np.pi * structure.modes.frequency
    mass[columns, columns] += 1.0
    fixed["static"][columns, columns] += omega**2
    fixed["dynamic"][columns, columns] += omega**2
    fixed["viscous"][columns, columns] += 2.0 * structure.modes.damping_ratio * omega
    if structure.modes.loss_factor is not None:
        fixed["hysteretic"][columns, columns] += structure.modes.loss_factor * omega**2


def _ground_rows(frame: Frame, structure: Structure | FloorStructure | None) -> Complexes | None:
    """Return rows (3, n) of the force a floor known between stations passes on, None for any other."""
    if not isinstance(structure, FloorStructure):
        return None
    columns = [column for column, (name, _) in enumerate(frame.names) if name == STRUCTURE]
    rows = np.zeros((3, frame.count), dtype=complex)
    spring = structure.stiffness * (1.0 + 1j * structure.loss_factor)
    rows[:, columns] = structure.total_rows @ spring @ structure.modes.shapes
    return rows


def _station(brief: Brief, frame: Frame, station: Station, state: State | None) -> StationRows:
    radial = None if station.radial is None else np.array(unit_direction(station.radial))
    axes = axes_from_direction(np.array(unit_direction(station.axial)), radial)
    position = np.array(station.position)
    foot = foot_of(brief, station)
    rows = frame.motion_rows(body_of(brief, station.on), position, axes) - frame.motion_rows(
        foot, position, axes
    )
    return StationRows(
        name=station.name,
        on=body_of(brief, station.on),
        to=station.to,
        group=brief.groups.index(station.group),
        parallel=0 if state is not None and station.name in state.lost else station.parallel,
        bought=station.parallel,
        factor=stiffness_factor(state, station.group),
        packing=0.0 if state is None else state.packing.get(station.name, 0.0),
        rows=rows,
        axes=axes,
        on_floor=station.to == FLOOR,
        position=position,
        foot=frame.motion_rows(foot, position) * (foot not in frame.references),
    )


def _absorber_stations(
    brief: Brief, places: tuple[AbsorberPlace, ...], state: State | None
) -> tuple[StationRows, ...]:
    return tuple(
        absorber_station(brief, absorber, place, stiffness_factor(state, absorber.name))
        for absorber, place in zip(brief.absorbers, places, strict=True)
    )


def stiffness_factor(state: State | None, group: str) -> float:
    """Return what a state makes of the stiffness of the parts of a group."""
    if state is None or (state.groups is not None and group not in state.groups):
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


def _groups(
    brief: Brief,
    stations: tuple[StationRows, ...],
    candidates: tuple[tuple[Mount, ...], ...],
    reading: str | None,
    state: State | None,
    n: int,
) -> tuple[Group, ...]:
    temperature = ROOM_TEMPERATURE if state is None else state.temperature
    return tuple(
        _group(name, mounts, reading, _spread(stations, index, n), temperature)
        for index, (name, mounts) in enumerate(zip(brief.groups, candidates, strict=True))
    )


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
