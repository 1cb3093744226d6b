"""What of a brief does not go with its floor, told before any design is looked at."""

from detune.brief.allowable.base import Allowable, HarmonicAllowable
from detune.brief.brief import Brief
from detune.brief.finding import Finding, Path
from detune.brief.floor_limits import between_stations_checked, tabulated_checked
from detune.brief.statement import describe
from detune.ground.errors import nearest_name

# Components below this share of the whole are rounding of the digits people write.
NOTHING = 1e-9


def floor_checked(brief: Brief) -> list[Finding]:
    """Return what of a brief its floor leaves without meaning, or cannot say."""
    findings = []
    for index, allowable in enumerate(brief.allowables):
        path: Path = ("allowable", index)
        if allowable.kind == "floor-velocity":
            findings += _under_stations(brief, path, allowable)
        if allowable.kind == "floor-ratio" and isinstance(allowable, HarmonicAllowable):
            findings += _floor_ratio(brief, path, allowable)
            if brief.absorbers:
                expected = (
                    "a study without [[absorber]]: bolted down is the machine alone, and an absorber would count as "
                    "part of what is compared"
                )
                findings.append(Finding(path, allowable.kind, expected, depends=("absorber",)))
    if brief.floor.kind == "stiffness-matrix":
        findings += between_stations_checked(brief)
    if brief.floor.kind == "dynamic-stiffness":
        findings += tabulated_checked(brief)
    return findings


def _floor_ratio(brief: Brief, path: Path, allowable: HarmonicAllowable) -> list[Finding]:
    """A floor ratio needs a floor that moves with the machine bolted down, by a force along its direction."""
    if brief.structure is not None:
        return []
    if brief.floor.kind == "rigid":
        expected = (
            "a floor that is not rigid ([floor] with mass and stiffness, or a [structure]): a rigid floor stands still "
            'with and without mounts; on it the force ratio says what mounts are worth (kind = "transmissibility")'
        )
        return [Finding(path, allowable.kind, expected, depends=("floor",))]
    unit = allowable.unit_load()
    if unit is None or not brief.bodies or brief.floor.kind == "stiffness-matrix":
        return []
    if abs(unit[1][2]) > NOTHING and "z" in brief.bodies[0].free:
        return []
    direction = getattr(allowable, "direction", unit[1])
    found = direction if isinstance(direction, str) else describe(list(direction))
    expected = (
        "a direction with a vertical part, along which the first body can move: this floor moves up and down alone, "
        "and bolted down the machine would leave it at rest"
    )
    return [Finding((*path, "direction"), found, expected, depends=("body", "floor"))]


def _under_stations(brief: Brief, path: Path, allowable: Allowable) -> list[Finding]:
    """The floor's velocity under named stations, where the floor is known there and moves up and down."""
    named, floor = allowable.stations_named(), brief.floor
    if not named or floor.kind == "rigid":
        return []
    if floor.kind != "stiffness-matrix":
        expected = 'no "stations": this floor has one motion'
        return [Finding((*path, "stations"), describe(list(named)), expected, depends=("floor",))]
    if "z" not in (floor.directions or ("z",)):
        expected = "a floor that moves along z"
        return [Finding(path, allowable.kind, expected, depends=("floor",))]
    known = floor.stations or ()
    return [
        Finding(
            (*path, "stations", index),
            name,
            f"a station of the floor ({', '.join(known)})",
            nearest_name(name, known),
            ("floor",),
        )
        for index, name in enumerate(named)
        if name not in known and any(station.name == name for station in brief.stations)
    ]
