"""Checks between `[sizing]` and the rest of the brief."""

from collections.abc import Iterable, Set

from detune.brief.allowable.added_mass import AddedMass
from detune.brief.allowable.part_numbers import PartNumbers
from detune.brief.brief import Brief
from detune.brief.finding import Finding, Path
from detune.brief.machine import Station
from detune.brief.sizing import MadePart, Sizing, SizingUnknown
from detune.brief.statement import unit_direction
from detune.ground.errors import nearest_name
from detune.ground.units import show

# What a limit asks of every part.
WANTED = {"height": ("free_height",), "temperature-range": ("temperature_min", "temperature_max")}


def sizing_checked(brief: Brief) -> list[Finding]:
    """Return every fault of the sizing table against machine, stations and ballast."""
    sizing = brief.sizing
    if sizing is None:
        return []
    findings: list[Finding] = []
    for index, unknown in enumerate(sizing.unknown):
        findings += _names(brief, ("sizing", "unknown", index), unknown)
    findings += _moved_once(brief, sizing) + _stated_twice(sizing) + _ballast_allowed(brief, sizing)
    for index, made in enumerate(sizing.made):
        path: Path = ("sizing", "made", index, "group")
        if made.group not in brief.groups:
            findings.append(_unknown_name(path, made.group, brief.groups, "a group of stations"))
    for group in brief.groups:
        findings += _group(brief, sizing, group)
    if sizing.goal == "absorber-mass" and all(u.kind != "absorber-mass" for u in sizing.unknown):
        expected = 'an unknown of kind "absorber-mass", or another objective: as stated the mass is known'
        findings.append(Finding(("sizing", "minimise"), "absorber-mass", expected))
    findings += _asked_of_made(brief, sizing)
    if brief.ballast is None:
        wants = [f'"{name}"' for name in (sizing.goal, *sizing.trade) if name == "added-mass"]
        if wants:
            expected = "a [ballast] table and a ballast unknown, without which no mass is added"
            findings.append(Finding(("sizing",), "added-mass", expected))
    return findings


def _asked_of_made(brief: Brief, sizing: Sizing) -> list[Finding]:
    """Limits and scatter that ask of a made part what only its own table can say."""
    findings = []
    for number, allowable in enumerate(brief.allowables):
        wanted = WANTED.get(allowable.kind, ())
        missing = [key for key in wanted if any(getattr(made, key) is None for made in sizing.made)]
        if missing:
            keys = " and ".join(f'"{key}"' for key in missing)
            expected = (
                f"{keys} in every [[sizing.made]] table: without it no part made to order meets this limit"
            )
            findings.append(Finding(("allowable", number), allowable.kind, expected, depends=("sizing",)))
        if isinstance(allowable, PartNumbers) and allowable.limit < len(brief.groups):
            expected = (
                f"{len(brief.groups)} or more: parts made to order are of one part number for each group, and "
                "groups that are to carry the same part are one group"
            )
            path: Path = ("allowable", number, "limit")
            findings.append(Finding(path, str(allowable.limit), expected, depends=("sizing",)))
    stiffness = None if brief.scatter is None else brief.scatter.stiffness
    listed = stiffness is None or "listed" in (stiffness.lot, stiffness.part)
    if brief.scatter is not None and listed and any(made.tolerance is None for made in sizing.made):
        expected = (
            'stiffness = { lot = "10 %" } or the like, or "tolerance" in every [[sizing.made]] table: parts made to '
            "order have no listed tolerance"
        )
        found = "the listed tolerance" if stiffness is not None else "no stiffness"
        findings.append(Finding(("scatter",), found, expected, depends=("sizing",)))
    return findings


def _stated_twice(sizing: Sizing) -> list[Finding]:
    """An unknown, or what the parts of a group are like, that is stated a second time."""
    findings = []
    titles = [unknown.title for unknown in sizing.unknown]
    for index, title in enumerate(titles):
        if title in titles[:index]:
            expected = f"each unknown once: it is unknown {titles.index(title) + 1} already"
            findings.append(Finding(("sizing", "unknown", index), title, expected))
    groups = [made.group for made in sizing.made]
    for index, group in enumerate(groups):
        if group in groups[:index]:
            expected = "one [[sizing.made]] table for each group"
            findings.append(Finding(("sizing", "made", index, "group"), group, expected))
    return findings


def _ballast_allowed(brief: Brief, sizing: Sizing) -> list[Finding]:
    """The least ballast within the bounds against what may be added at all."""
    caps = [each.limit for each in brief.allowables if isinstance(each, AddedMass)]
    findings = []
    for index, unknown in enumerate(sizing.unknown):
        if unknown.kind == "ballast" and caps and unknown.bounds[0] > min(caps):
            expected = f"a lower bound within the limit on added mass, which is {show(min(caps), 'mass')}"
            findings.append(
                Finding(("sizing", "unknown", index, "lower"), show(unknown.bounds[0], "mass"), expected)
            )
    return findings


def _unknown_name(path: Path, name: str, known: Iterable[str], what: str) -> Finding:
    names = list(known)
    listed = ", ".join(f'"{each}"' for each in names) or "none is stated"
    return Finding(path, name, f"the name of {what} ({listed})", nearest_name(name, names))


def _names(brief: Brief, path: Path, unknown: SizingUnknown) -> list[Finding]:
    findings = []
    if unknown.group is not None and unknown.group not in brief.groups:
        findings.append(_unknown_name((*path, "group"), unknown.group, brief.groups, "a group of stations"))
    bodies = [body.name for body in brief.bodies]
    if unknown.body is not None and unknown.body not in bodies:
        findings.append(_unknown_name((*path, "body"), unknown.body, bodies, "a body"))
    stations = [station.name for station in brief.stations]
    for index, name in enumerate(unknown.stations):
        if name not in stations:
            findings.append(_unknown_name((*path, "stations", index), name, stations, "a station"))
    if unknown.kind == "position" and unknown.axis in ("x", "y") and unknown.bounds[0] >= 0.0:
        findings += _without_a_side(brief, path, unknown)
    absorber = unknown.kind in ("absorber-tuning", "absorber-damping") and unknown.body in bodies
    if absorber and not _stands_on(brief, str(unknown.body), str(unknown.group)):
        expected = f'the body that stands on the parts of group "{unknown.group}" alone and is tuned by them'
        findings.append(Finding((*path, "body"), str(unknown.body), expected))
    if unknown.kind == "ballast" and brief.ballast is None:
        expected = "a [ballast] table with its position, size and cost_per_kg"
        findings.append(Finding((*path, "kind"), "ballast", expected))
    if unknown.kind == "absorber-mass" and unknown.body in bodies:
        body = next(body for body in brief.bodies if body.name == unknown.body)
        if body.mass is None:
            expected = 'an absorber body that states its "mass", which is then varied'
            findings.append(Finding((*path, "body"), body.name, expected))
    return findings


def _without_a_side(brief: Brief, path: Path, unknown: SizingUnknown) -> list[Finding]:
    """Stations on the origin itself: a distance does not say to which side they move."""
    index = "xyz".index(str(unknown.axis))
    findings = []
    for number, name in enumerate(unknown.stations):
        place = next((s.position[index] for s in brief.stations if s.name == name), None)
        if place == 0.0:
            found = f'station "{name}" at {unknown.axis} = 0'
            expected = (
                f"a station with its {unknown.axis} above or below zero, which says to which side it moves, or a "
                "lower bound below zero, which lets it move to both"
            )
            findings.append(Finding((*path, "stations", number), found, expected))
    return findings


def _moved_once(brief: Brief, sizing: Sizing) -> list[Finding]:
    """A station whose place along one axis is two unknowns' at once."""
    seen: set[tuple[str, str | None]] = set()
    findings = []
    for index, unknown in enumerate(sizing.unknown):
        for number, name in enumerate(unknown.stations):
            if (name, unknown.axis) in seen:
                path: Path = ("sizing", "unknown", index, "stations", number)
                findings.append(Finding(path, name, f"each station once along {unknown.axis}"))
            seen.add((name, unknown.axis))
    return findings


def _stands_on(brief: Brief, body: str, group: str) -> bool:
    """Whether a body is the one of the two that a group joins which the group carries."""

    def ends(station: Station) -> tuple[str, str]:
        return station.on or brief.bodies[0].name, station.to

    own = [ends(station) for station in brief.stations if station.group == group]
    others = {end for station in brief.stations if station.group != group for end in ends(station)}
    if not all(body in pair for pair in own):
        return False
    partners = {end for pair in own for end in pair} - {body}
    return body not in others or any(end in others or end == "floor" for end in partners)


def _group(brief: Brief, sizing: Sizing, group: str) -> list[Finding]:
    """A group of parts needs its stiffness, its damping, and a lateral ratio where it can move sideways."""
    own = {unknown.kind for unknown in sizing.unknown if unknown.group == group}
    axes = {
        unknown.axis for unknown in sizing.unknown if unknown.group == group and unknown.kind == "stiffness"
    }
    index, made = next(
        ((i, m) for i, m in enumerate(sizing.made) if m.group == group), (len(sizing.made), None)
    )
    if made is None:
        expected = f'a [[sizing.made]] table for group "{group}", which says what its parts are like'
        return [Finding(("sizing",), "", expected)]
    path: Path = ("sizing", "made", index)
    findings = _stated_once(path, made, own, axes)
    vertical = all(freedom == "z" for body in brief.bodies for freedom in body.free)
    upright = all(abs(unit_direction(s.axial)[2]) == 1.0 for s in brief.stations if s.group == group)
    sideways = "lateral" in axes or {"x", "y"} <= axes
    if not (vertical and upright) and made.lateral_ratio is None and not sideways:
        expected = '"lateral_ratio", or lateral stiffness as an unknown: this machine moves sideways as well'
        findings.append(Finding(path, group, expected))
    return findings


def _stated_once(path: Path, made: MadePart, own: Set[str], axes: Set[str | None]) -> list[Finding]:
    findings = []
    sought = "axial" in axes or "absorber-tuning" in own
    if sought == (made.stiffness is not None):
        expected = f'the axial stiffness of group "{made.group}" once: as an unknown, or as "stiffness" here'
        findings.append(Finding((*path, "stiffness"), "both" if sought else "neither", expected))
    if "lateral" in axes and axes & {"x", "y"}:
        expected = f'lateral stiffness of group "{made.group}" once: as "lateral", or as "x" and "y"'
        findings.append(Finding(path, "lateral and one of x and y", expected))
    if made.lateral_ratio is not None and ("lateral" in axes or {"x", "y"} <= axes):
        expected = 'no "lateral_ratio" here: lateral stiffness is an unknown'
        findings.append(Finding((*path, "lateral_ratio"), f"{made.lateral_ratio:g}", expected))
    viscous = bool(own & {"viscous", "absorber-damping"})
    damped = "loss-factor" in own or viscous
    stated = made.loss_factor is not None or made.viscous is not None
    if not damped and not stated:
        expected = (
            f'the damping of group "{made.group}": an unknown, "loss_factor" or "viscous" (zero is an answer)'
        )
        findings.append(Finding(path, "no damping", expected))
    for key, sought in (("loss_factor", "loss-factor" in own), ("viscous", viscous)):
        if sought and getattr(made, key) is not None:
            findings.append(Finding((*path, key), key, f'no "{key}" here: it is an unknown'))
    return findings
