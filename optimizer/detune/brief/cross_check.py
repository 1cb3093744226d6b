"""Checks across statements: names that refer to each other, and what would leave the brief without sense."""

from collections.abc import Iterable

from detune.brief.allowable.base import BandAllowable, HarmonicAllowable
from detune.brief.brief import Brief, applies
from detune.brief.dwell import barred_checked
from detune.brief.dwell_check import dwell_checked
from detune.brief.finding import Finding, Path
from detune.brief.floor_check import floor_checked
from detune.brief.forcing.base import Forcing
from detune.brief.listed_check import listed_checked
from detune.brief.machine import Connection, Station
from detune.brief.matching import not_matching
from detune.brief.sense import without_sense
from detune.brief.sizing_check import sizing_checked
from detune.ground.errors import nearest_name

__all__ = ["Finding", "Path", "cross_check"]


def cross_check(brief: Brief, not_read: Iterable[str] = ()) -> tuple[Finding, ...]:
    """Return every fault between the statements of a brief.

    `not_read` names tables of which a part is missing because it has faults of its own: what would
    look wrong only for that reason is left out.
    """
    unsure = set(not_read)
    if "sizing" in unsure and not brief.choices:
        # A study with a [sizing] table needs no lists, whether or not the table could be read.
        unsure |= {"catalog", "choice"}
    empty = [finding for finding in _empty_tables(brief) if finding.path[0] not in unsure]
    unsure |= {str(finding.path[0]) for finding in empty}
    found = [
        finding
        for check in (
            _unique_names,
            _bodies,
            _stations,
            _states,
            _structure,
            _forcing,
            _allowables,
            _choices,
            _ballast,
            listed_checked,
            without_sense,
            not_matching,
            sizing_checked,
            floor_checked,
            barred_checked,
            dwell_checked,
        )
        for finding in check(brief)
    ]
    return (*empty, *(finding for finding in found if unsure.isdisjoint(finding.depends)))


def _empty_tables(brief: Brief) -> list[Finding]:
    """Tables of which at least one is needed; the other checks stand on them."""
    needed: dict[str, tuple[object, ...]] = {
        "body": brief.bodies,
        "station": brief.stations,
        "condition": brief.conditions,
        "forcing": brief.forcing,
        "allowable": brief.allowables,
    }
    if brief.sizing is None:
        needed |= {"catalog": brief.catalogs, "choice": brief.choices}
    return [Finding((name,), "[]", f"at least one [[{name}]]") for name, items in needed.items() if not items]


def _unknown(path: Path, name: str, known: Iterable[str], what: str, table: str) -> Finding:
    names = list(dict.fromkeys(known))
    listed = ", ".join(f'"{n}"' for n in names[:12]) or "none is stated"
    return Finding(path, name, f"the name of {what} ({listed})", nearest_name(name, names), (table,))


def _unique_names(brief: Brief) -> list[Finding]:
    findings = []
    tables = {
        "body": [b.name for b in brief.bodies],
        "point": [p.name for p in brief.points],
        "station": [s.name for s in brief.stations],
        "connection": [c.name for c in brief.connections],
        "steady_load": [s.name for s in brief.steady_loads],
        "condition": [c.name for c in brief.conditions],
        "forcing": [f.name for f in brief.forcing],
        "catalog": [c.name for c in brief.catalogs],
        "state": [s.name for s in brief.states],
    }
    for table, names in tables.items():
        for index, name in enumerate(names):
            if name in names[:index]:
                findings.append(Finding((table, index, "name"), name, f"a name no other {table} has"))
    for index, body in enumerate(brief.bodies):
        if body.name in ("floor", "ground"):
            findings.append(
                Finding(("body", index, "name"), body.name, 'a name other than "floor" and "ground"')
            )
    return findings


def _structure(brief: Brief) -> list[Finding]:
    """Names of the structure's nodes, and ratios to a motion of the floor, which says nothing of its supports."""
    if brief.structure is None:
        return []
    findings = [
        Finding(
            ("body", index, "name"), body.name, 'a name other than "structure", which stands for its modes'
        )
        for index, body in enumerate(brief.bodies)
        if body.name == "structure"
    ]
    taken = ["floor", "ground", *(body.name for body in brief.bodies)]
    for index, node in enumerate(brief.structure.nodes):
        if node.name in taken:
            path: Path = ("structure", "nodes", index, "name")
            findings.append(
                Finding(path, node.name, "a name that no body and no other node has", depends=("body",))
            )
        taken.append(node.name)
    expected = "a ratio of forces beside a [structure]: how the supports that hold it move is not stated"
    for index, allowable in enumerate(brief.allowables):
        unit = allowable.unit_load() if isinstance(allowable, HarmonicAllowable) else None
        if unit is not None and unit[0] == "base":
            findings.append(Finding(("allowable", index), allowable.kind, expected))
    return findings


def _bodies(brief: Brief) -> list[Finding]:
    names = [body.name for body in brief.bodies]
    findings = []
    placed: list[tuple[Path, str | None]] = []
    placed += [(("point", i, "on"), p.on) for i, p in enumerate(brief.points)]
    placed += [(("station", i, "on"), s.on) for i, s in enumerate(brief.stations)]
    placed += [(("connection", i, "on"), c.on) for i, c in enumerate(brief.connections)]
    placed += [(("steady_load", i, "on"), s.on) for i, s in enumerate(brief.steady_loads)]
    placed += [(("forcing", i, "on"), getattr(f, "on", None)) for i, f in enumerate(brief.forcing)]
    if brief.ballast is not None:
        placed.append((("ballast", "on"), brief.ballast.on))
    for path, on in placed:
        if on is not None and on not in names:
            findings.append(_unknown(path, on, names, "a body", "body"))
        # A base motion acts on the floor and stands on no body.
        is_base = path[0] == "forcing" and brief.forcing[int(path[1])].floor_direction() is not None
        if on is None and len(names) > 1 and not is_base:
            listed = ", ".join(f'"{name}"' for name in names)
            expected = f'the body it stands on, since there are several ({listed}), as "on"'
            findings.append(Finding(path, "", expected))
    return findings


def _stations(brief: Brief) -> list[Finding]:
    findings = []
    bodies = [body.name for body in brief.bodies]
    tables: dict[str, tuple[Station | Connection, ...]] = {
        "station": brief.stations,
        "connection": brief.connections,
    }
    for table, places in tables.items():
        for index, place in enumerate(places):
            nodes = [node.name for node in brief.structure.nodes] if brief.structure else []
            known = ["floor", *bodies, *nodes]
            if place.to not in known:
                findings.append(_unknown((table, index, "to"), place.to, known, "what it stands on", "body"))
            elif place.to != "floor" and place.to == (place.on or (bodies[0] if bodies else None)):
                findings.append(Finding((table, index, "to"), place.to, "another body, or the floor"))
    return findings


def _states(brief: Brief) -> list[Finding]:
    findings = []
    names = [state.name for state in brief.states]
    stations = [station.name for station in brief.stations]
    for index, condition in enumerate(brief.conditions):
        if condition.state is not None and condition.state not in names:
            findings.append(
                _unknown(("condition", index, "state"), condition.state, names, "a state", "state")
            )
    for index, state in enumerate(brief.states):
        named = [("lost", name) for name in state.lost] + [("packing", name) for name in state.packing]
        for key, name in named:
            if name not in stations:
                findings.append(_unknown(("state", index, key), name, stations, "a station", "station"))
        for name in state.groups or ():
            if name not in brief.groups:
                findings.append(
                    _unknown(("state", index, "groups"), name, brief.groups, "a group", "station")
                )
        if any(state.sustained_acceleration):
            findings += _sustained(brief, ("state", index, "sustained_acceleration"))
        if not any(condition.state == state.name for condition in brief.conditions):
            expected = f'a condition judged in it, with state = "{state.name}"'
            findings.append(Finding(("state", index, "name"), state.name, expected, depends=("condition",)))
    return findings


def _sustained(brief: Brief, path: Path) -> list[Finding]:
    """What a sustained acceleration is not carried through to."""
    found = "a sustained acceleration"
    if brief.absorbers:
        expected = (
            "none beside absorbers, whose masses it would pull along their springs and out of their stroke"
        )
        return [Finding(path, found, expected, depends=("absorber",))]
    if brief.scatter is not None and (brief.scatter.mass is not None or brief.scatter.centre is not None):
        expected = "none under scatter of mass or centre: the pull would scatter with them"
        return [Finding(path, found, expected, depends=("scatter",))]
    if brief.structure is not None:
        expected = "none beside a [structure], whose own masses it would pull too"
        return [Finding(path, found, expected, depends=("structure",))]
    return []


def _conditions_named(path: Path, named: tuple[str, ...] | None, brief: Brief) -> list[Finding]:
    known = [condition.name for condition in brief.conditions]
    return [
        _unknown((*path, "conditions", i), name, known, "a condition", "condition")
        for i, name in enumerate(named or ())
        if name not in known
    ]


def _forcing(brief: Brief) -> list[Finding]:
    findings = []
    for index, forcing in enumerate(brief.forcing):
        findings += _conditions_named(("forcing", index), forcing.conditions, brief)
        findings += _shaft(("forcing", index), forcing, brief)
    for index, condition in enumerate(brief.conditions):
        acting = [f for f in brief.forcing if applies(f.conditions, condition.name)]
        used = {f.shaft_needed() for f in acting}
        for shaft in condition.shafts:
            if shaft not in used:
                findings.append(
                    Finding(
                        ("condition", index, "shafts", shaft),
                        shaft,
                        "a shaft that some forcing follows in this condition",
                        nearest_name(shaft, [name for name in used if name is not None]),
                        ("forcing",),
                    )
                )
        if not acting:
            findings.append(
                Finding(
                    ("condition", index),
                    condition.name,
                    "a condition in which at least one forcing acts",
                    depends=("forcing",),
                )
            )
    return findings


def _shaft(path: Path, forcing: Forcing, brief: Brief) -> list[Finding]:
    shaft = forcing.shaft_needed()
    if shaft is None:
        return []
    without = [c for c in brief.conditions if applies(forcing.conditions, c.name) and shaft not in c.shafts]
    if not without:
        return []
    listed = ", ".join(f'"{condition.name}"' for condition in without)
    expected = (
        f'a shaft whose speed is stated under "shafts" in every condition in which this forcing acts; {listed} '
        + ("states" if len(without) == 1 else "state")
        + ' none of this name (or list the conditions in which it acts, as "conditions")'
    )
    known = [name for condition in without for name in condition.shafts]
    return [Finding((*path, "shaft"), shaft, expected, nearest_name(shaft, known), ("condition",))]


def _allowables(brief: Brief) -> list[Finding]:
    findings = []
    points = [point.name for point in brief.points]
    stations = [station.name for station in brief.stations]
    for index, allowable in enumerate(brief.allowables):
        path: Path = ("allowable", index)
        findings += _conditions_named(path, allowable.conditions, brief)
        for name in allowable.points_named():
            if name not in points:
                findings.append(_unknown((*path, "at"), name, points, "a point", "point"))
        for i, name in enumerate(allowable.stations_named()):
            if name not in stations:
                findings.append(_unknown((*path, "stations", i), name, stations, "a station", "station"))
        if allowable.kind == "separation" and not any(c.steady for c in brief.conditions):
            expected = "at least one steady condition, since separation counts only those"
            findings.append(Finding(path, "separation", expected, depends=("condition",)))
    if not any(isinstance(a, (HarmonicAllowable, BandAllowable)) for a in brief.allowables):
        findings.append(
            Finding(
                ("allowable",),
                "no limit on any response",
                "at least one allowable on a response to the forcing (displacement, velocity, acceleration,"
                " transmitted-force, transmissibility or mount-deflection)",
                depends=("allowable",),
            )
        )
    return findings


def _choices(brief: Brief) -> list[Finding]:
    findings = []
    groups = brief.station_groups
    catalogs = [catalog.name for catalog in brief.catalogs]
    chosen = [choice.group for choice in brief.choices]
    for index, choice in enumerate(brief.choices):
        if choice.group not in groups:
            findings.append(
                _unknown(("choice", index, "group"), choice.group, groups, "a group of stations", "station")
            )
        if choice.group in chosen[:index]:
            findings.append(Finding(("choice", index, "group"), choice.group, "one choice for each group"))
        for i, name in enumerate(choice.catalogs):
            if name not in catalogs:
                findings.append(
                    _unknown(("choice", index, "catalogs", i), name, catalogs, "a catalog", "catalog")
                )
    for index, station in enumerate(brief.stations):
        if station.group not in chosen and (brief.choices or brief.sizing is None):
            findings.append(
                _unknown(
                    ("station", index, "group"), station.group, chosen, "a group with a [[choice]]", "choice"
                )
            )
    return findings


def _ballast(brief: Brief) -> list[Finding]:
    if brief.ballast is None and not brief.absorbers and "added-mass" in brief.objectives.trade:
        expected = "a [ballast] table or an [[absorber]], without which no mass is added"
        return [Finding(("objectives", "trade"), "added-mass", expected, depends=("absorber",))]
    return []
