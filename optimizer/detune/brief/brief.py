"""The brief: everything the user states, as one frozen object."""

from pathlib import Path

from pydantic import SerializeAsAny

from detune.brief.allowable import Allowable, LoadRange, MountDeflection, Uplift
from detune.brief.choice import Ballast, CatalogSource, Choice, Objectives
from detune.brief.condition import Condition
from detune.brief.floor import Floor
from detune.brief.forcing import Forcing
from detune.brief.machine import Body, Connection, Point, Station, SteadyLoad
from detune.brief.statement import Name, Statement, Text


class Brief(Statement):
    """A study's statements. `folder` is where relative catalog paths start."""

    title: Name
    notes: Text = ""
    bodies: tuple[Body, ...]
    points: tuple[Point, ...] = ()
    stations: tuple[Station, ...]
    connections: tuple[Connection, ...] = ()
    steady_loads: tuple[SteadyLoad, ...] = ()
    floor: Floor
    conditions: tuple[Condition, ...]
    forcing: tuple[SerializeAsAny[Forcing], ...]
    allowables: tuple[SerializeAsAny[Allowable], ...]
    catalogs: tuple[CatalogSource, ...]
    choices: tuple[Choice, ...]
    ballast: Ballast | None = None
    objectives: Objectives = Objectives()
    folder: Path = Path()
    file: Text = "brief from Python"

    @property
    def groups(self) -> tuple[str, ...]:
        """Groups of stations in the order of their first station."""
        return tuple(dict.fromkeys(station.group for station in self.stations))


def demanded(brief: Brief) -> tuple[tuple[Allowable, ...], tuple[str, ...]]:
    """Return all allowables that are judged, and a note for each one the brief did not state.

    A part's own load range, its own greatest deflection and no uplift are always demanded: a design
    that overloads a part cannot meet any brief.
    """
    stated = list(brief.allowables)
    notes = []
    if not any(isinstance(allowable, LoadRange) for allowable in stated):
        stated.append(LoadRange())
        notes.append("each part carries a static load within its own range (load_min to load_max)")
    if not any(isinstance(a, MountDeflection) and a.limit == "part" for a in stated):
        stated.append(MountDeflection(part="combined", limit="part"))
        notes.append("static plus dynamic deflection of each part stays below its own deflection_max, where stated")
    if not any(isinstance(allowable, Uplift) for allowable in stated):
        stated.append(Uplift())
        notes.append("a part that cannot pull stays compressed through the whole cycle")
    return tuple(stated), tuple(notes)


def body_of(brief: Brief, on: str | None) -> str:
    """Return the body a place stands on; a place that names none stands on the only body."""
    return on if on is not None else brief.bodies[0].name


def applies(conditions: tuple[str, ...] | None, name: str) -> bool:
    """Return whether a statement with these conditions applies in the condition `name`."""
    return conditions is None or name in conditions
