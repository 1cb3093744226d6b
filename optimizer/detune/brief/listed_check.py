"""Checks of absorbers and of ballast taken from a list, against the points, catalogs and names of a brief."""

from collections.abc import Iterable

from detune.brief.brief import Brief
from detune.brief.finding import Finding, Path
from detune.ground.errors import nearest_name

TAKEN = ("floor", "ground", "structure", "ballast")


def listed_checked(brief: Brief) -> list[Finding]:
    """Return every fault of the absorbers and of a ballast table that names catalogs."""
    findings: list[Finding] = []
    for index, absorber in enumerate(brief.absorbers):
        path: Path = ("absorber", index)
        findings += _name(brief, (*path, "name"), index)
        findings += _point(brief, (*path, "at"), absorber.at)
        findings += _catalogs(brief, path, absorber.catalogs)
    names = [absorber.name for absorber in brief.absorbers]
    for index, allowable in enumerate(brief.allowables):
        for i, name in enumerate(getattr(allowable, "absorbers", None) or ()):
            if name not in names:
                path = ("allowable", index, "absorbers", i)
                findings.append(_unknown(path, name, names, "an absorber", "absorber"))
        if allowable.kind == "stroke" and not names:
            expected = "an [[absorber]], whose stroke is limited"
            findings.append(Finding(("allowable", index), "stroke", expected, depends=("absorber",)))
    if brief.absorbers and brief.sizing is not None:
        expected = (
            "no [sizing] beside an [[absorber]]: sizing does not know it; size one as a body of its own"
        )
        findings.append(Finding(("absorber",), brief.absorbers[0].name, expected, depends=("sizing",)))
    if brief.ballast is not None and brief.ballast.catalogs:
        findings += _catalogs(brief, ("ballast",), brief.ballast.catalogs)
        if brief.sizing is not None:
            expected = 'a [ballast] table with "size", "steps" and "cost_per_kg" beside [sizing]'
            findings.append(
                Finding(("ballast", "catalogs"), brief.ballast.catalogs[0], expected, depends=("sizing",))
            )
    return findings


def _name(brief: Brief, path: Path, index: int) -> list[Finding]:
    name = brief.absorbers[index].name
    taken = [
        *TAKEN,
        *(body.name for body in brief.bodies),
        *(station.name for station in brief.stations),
        *brief.station_groups,
        *(absorber.name for absorber in brief.absorbers[:index]),
    ]
    if name not in taken:
        return []
    expected = (
        "a name that no body, station, group and other absorber has (nor floor, ground, structure or ballast)"
    )
    return [Finding(path, name, expected, depends=("body", "station"))]


def _point(brief: Brief, path: Path, at: str) -> list[Finding]:
    point = next((point for point in brief.points if point.name == at), None)
    if point is None:
        return [_unknown(path, at, [each.name for each in brief.points], "a point", "point")]
    bodies = [body.name for body in brief.bodies]
    if point.on is not None and point.on not in bodies:
        expected = f"a point on a body ({', '.join(bodies)}), whose motion the absorber takes"
        return [Finding(path, f"{at}, on {point.on}", expected, depends=("point", "body"))]
    return []


def _catalogs(brief: Brief, path: Path, named: tuple[str, ...]) -> list[Finding]:
    known = [catalog.name for catalog in brief.catalogs]
    return [
        _unknown((*path, "catalogs", i), name, known, "a catalog", "catalog")
        for i, name in enumerate(named)
        if name not in known
    ]


def _unknown(path: Path, name: str, known: Iterable[str], what: str, table: str) -> Finding:
    names = list(known)
    listed = ", ".join(f'"{n}"' for n in names[:12]) or "none is stated"
    return Finding(path, name, f"the name of {what} ({listed})", nearest_name(name, names), (table,))
