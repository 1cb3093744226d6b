"""The brief: everything the user states, as one frozen object."""

from pathlib import Path
from typing import TYPE_CHECKING

from pydantic import SerializeAsAny

from detune.brief.absorber import Absorber
from detune.brief.allowable.base import Allowable
from detune.brief.choice import Ballast, CatalogSource, Choice, Objectives
from detune.brief.condition import Condition
from detune.brief.floor import Floor
from detune.brief.forcing.base import Forcing
from detune.brief.machine import Body, Connection, Point, Station, SteadyLoad
from detune.brief.scatter import Scatter
from detune.brief.sizing import Sizing
from detune.brief.state import State
from detune.brief.statement import Name, Statement, Text
from detune.brief.structure import Structure

if TYPE_CHECKING:
    from detune.brief.allowable.load_range import LoadRange
    from detune.brief.allowable.mount_deflection import MountDeflection
    from detune.brief.allowable.uplift import Uplift


class Brief(Statement):
    """A study's statements. `folder` is where relative catalog paths start."""

    title: Name
    notes: Text = ""
    bodies: tuple[Body, ...]
    points: tuple[Point, ...] = ()
    stations: tuple[Station, ...]
    connections: tuple[Connection, ...] = ()
    steady_loads: tuple[SteadyLoad, ...] = ()
    gravity_stiffness: bool = True
    floor: Floor
    structure: Structure | None = None
    states: tuple[State, ...] = ()
    conditions: tuple[Condition, ...]
    forcing: tuple[SerializeAsAny[Forcing], ...]
    allowables: tuple[SerializeAsAny[Allowable], ...]
    catalogs: tuple[CatalogSource, ...]
    choices: tuple[Choice, ...]
    absorbers: tuple[Absorber, ...] = ()
    ballast: Ballast | None = None
    objectives: Objectives = Objectives()
    sizing: Sizing | None = None
    scatter: Scatter | None = None
    folder: Path = Path()
    file: Text = "brief from Python"

    @property
    def station_groups(self) -> tuple[str, ...]:
        """Groups of stations in the order of their first station."""
        return tuple(dict.fromkeys(station.group for station in self.stations))

    @property
    def groups(self) -> tuple[str, ...]:
        """Groups of stations in the order of their first station, then the absorbers, each a group of its own."""
        return (*self.station_groups, *(absorber.name for absorber in self.absorbers))

    @property
    def every_station(self) -> tuple[Station, ...]:
        """The stations, then the places of absorbers: from the moving mass to the body of their point."""
        return (*self.stations, *(self._place_of(absorber) for absorber in self.absorbers))

    def _place_of(self, absorber: Absorber) -> Station:
        point = next(point for point in self.points if point.name == absorber.at)
        body = body_of(self, point.on)
        return Station(
            name=absorber.name,
            group=absorber.name,
            on=body,
            to=body,
            position=point.position,
            axial=absorber.direction,
        )


def demanded(brief: Brief) -> tuple[tuple[Allowable, ...], tuple[str, ...]]:
    """Return all allowables that are judged, and a note for each one the brief did not state.

    A part's own load range, its own greatest deflection and no uplift are always demanded, at every
    station and in every condition: a design that overloads a part cannot meet any brief. A brief that
    states one of them for some stations or conditions does not free the others of it.
    """
    from detune.brief.allowable.load_range import LoadRange
    from detune.brief.allowable.mount_deflection import MountDeflection
    from detune.brief.allowable.stability import Stability
    from detune.brief.allowable.uplift import Uplift

    demands: tuple[tuple[LoadRange | MountDeflection | Uplift, str], ...] = (
        (LoadRange(), "each part carries a static load within its own range (load_min to load_max)"),
        (
            MountDeflection(part="combined", limit="part"),
            "static plus dynamic deflection of each part stays below its own deflection_max, where stated",
        ),
        (Uplift(), "a part that cannot pull stays compressed through the whole cycle"),
    )
    added: list[Allowable] = []
    notes = []
    for demand, note in demands:
        free = _stations_free_of(brief, demand)
        if not free:
            continue
        everywhere = len(free) == len(brief.stations)
        added.append(demand if everywhere else demand.model_copy(update={"stations": free}))
        notes.append(note if everywhere else f"{note} (also at {', '.join(free)})")
    if brief.absorbers:
        stroke = _stroke_demanded(brief)
        added += stroke
        notes += ["the mass of an absorber moves within the stroke its list states"] * len(stroke)
    if not any(isinstance(stated, Stability) for stated in brief.allowables):
        added.append(Stability())
        notes.append("the machine stands: it would not topple under its own weight")
    return (*brief.allowables, *added), tuple(notes)


def _stroke_demanded(brief: Brief) -> list[Allowable]:
    """Return the limit on the strokes of absorbers for which no allowable states it in every condition."""
    from detune.brief.allowable.stroke import Stroke

    names = [absorber.name for absorber in brief.absorbers]
    covered: set[str] = set()
    for stated in brief.allowables:
        if isinstance(stated, Stroke) and stated.limit == "part" and stated.conditions is None:
            covered.update(stated.absorbers or names)
    free = tuple(name for name in names if name not in covered)
    return [Stroke(absorbers=free)] if free else []


def _stations_free_of(brief: Brief, demand: "LoadRange | MountDeflection | Uplift") -> tuple[str, ...]:
    """Return the stations where no allowable of the brief states a demand for every condition."""
    covered: set[str] = set()
    for stated in brief.allowables:
        if type(stated) is not type(demand) or stated.conditions is not None:
            continue
        named = stated.stations_named()
        if stated == demand.model_copy(update={"stations": named or None}):
            covered.update(named or (station.name for station in brief.stations))
    return tuple(station.name for station in brief.stations if station.name not in covered)


def state_of(brief: Brief, name: str | None) -> State | None:
    """Return the state of this name; None is the machine as installed."""
    return next((state for state in brief.states if state.name == name), None)


def body_of(brief: Brief, on: str | None) -> str:
    """Return the body a place stands on; a place that names none stands on the only body."""
    return on if on is not None else brief.bodies[0].name


def applies(conditions: tuple[str, ...] | None, name: str) -> bool:
    """Return whether a statement with these conditions applies in the condition `name`."""
    return conditions is None or name in conditions
