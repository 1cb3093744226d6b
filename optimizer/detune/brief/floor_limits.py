"""What a floor known between stations, or by a table over frequency, cannot say."""

from detune.brief.allowable.base import HarmonicAllowable
from detune.brief.brief import Brief, applies
from detune.brief.finding import Finding, Path
from detune.ground.errors import nearest_name
from detune.ground.units import show

# Ends of a table may be written with fewer digits than a range of speed has.
ROUNDING = 1e-6


def between_stations_checked(brief: Brief) -> list[Finding]:
    """Return what does not go with a floor whose stiffness is known between stations alone."""
    floor = brief.floor
    stands = [station.name for station in brief.stations if station.to == "floor"]
    findings: list[Finding] = []
    if brief.structure is not None:
        found = "a [structure] beside a floor of kind stiffness-matrix"
        findings.append(Finding(("floor", "kind"), found, "one of the two", depends=("structure",)))
    for index, name in enumerate(floor.stations or ()):
        if name not in stands:
            expected = f"a station that stands on the floor ({', '.join(stands) or 'none'})"
            near = nearest_name(name, stands)
            findings.append(Finding(("floor", "stations", index), name, expected, near, ("station",)))
    missing = [name for name in stands if name not in (floor.stations or ())]
    if missing:
        expected = f"every station that stands on the floor; {', '.join(missing)} is left out"
        findings.append(
            Finding(("floor", "stations"), ", ".join(floor.stations or ()), expected, depends=("station",))
        )
    for index, connection in enumerate(brief.connections):
        if connection.to == "floor":
            expected = "a body: the floor is known under its stations alone"
            findings.append(Finding(("connection", index, "to"), "floor", expected, depends=("floor",)))
    for index, forcing in enumerate(brief.forcing):
        if forcing.floor_direction() is not None:
            expected = (
                "no motion of the floor beside a floor of kind stiffness-matrix: how the places under the "
                "stations move is not stated"
            )
            findings.append(Finding(("forcing", index), forcing.name, expected, depends=("floor",)))
    for index, allowable in enumerate(brief.allowables):
        findings += _one_motion(("allowable", index), allowable)
        if getattr(allowable, "through", None) == "ground" and (
            brief.scatter is not None or brief.sizing is not None
        ):
            found, expected = "ground", 'the force through the "floor" beside [scatter] or [sizing]'
            findings.append(Finding(("allowable", index, "through"), found, expected, depends=("floor",)))
    return [*findings, *_in_time(brief)]


def _one_motion(path: Path, allowable: object) -> list[Finding]:
    """Limits that take the floor as one place."""
    kind = str(getattr(allowable, "kind", ""))
    unit = allowable.unit_load() if isinstance(allowable, HarmonicAllowable) else None
    of_floor = (kind == "floor-velocity" and getattr(allowable, "stations", None) is None) or "floor" in (
        getattr(allowable, "stands_on", None) if kind == "gap" else None,
        getattr(allowable, "to", None) if kind == "relative-motion" else None,
        getattr(allowable, "at", None) if kind == "band-limit" else None,
    )
    if not of_floor and not (unit is not None and unit[0] == "base"):
        return []
    expected = (
        'a limit on the machine, on forces, on the floor ratio, or on floor-velocity with its "stations": a'
        " floor of kind "
        "stiffness-matrix moves differently under every station"
    )
    return [Finding(path, kind, expected, depends=("floor",))]


def _in_time(brief: Brief) -> list[Finding]:
    """A floor without mass follows at once, which calculations in time cannot step through."""
    findings = []
    ground = any(getattr(allowable, "through", None) == "ground" for allowable in brief.allowables)
    if brief.floor.mass_matrix is not None and not ground:
        return []
    expected = (
        'the force through the "floor" beside shocks, records and run-ups'
        if brief.floor.mass_matrix is not None
        else 'a "mass_matrix" of the floor beside shocks, records and run-ups, in which its own motion counts'
    )
    for index, forcing in enumerate(brief.forcing):
        if forcing.transients():
            findings.append(Finding(("forcing", index), forcing.name, expected, depends=("floor",)))
    for index, condition in enumerate(brief.conditions):
        if condition.run_up or condition.coast_down:
            findings.append(Finding(("condition", index), condition.name, expected, depends=("floor",)))
    return findings


def tabulated_checked(brief: Brief) -> list[Finding]:
    """Return excitation outside the table of a floor, and what a table over frequency cannot say."""
    table = brief.floor.table
    if table is None:
        return []
    low, high = float(table.frequency[0]), float(table.frequency[-1])
    findings = _outside(brief, low, high)
    if brief.structure is not None:
        found = "a [structure] beside a floor of kind dynamic-stiffness"
        findings.append(Finding(("floor", "kind"), found, "one of the two", depends=("structure",)))
    modal = (
        "limits on the response: a floor of kind dynamic-stiffness has resonances of its own that no count of modes "
        "holds, so that separation and settling are not judged on it"
    )
    for index, allowable in enumerate(brief.allowables):
        if allowable.kind in ("separation", "settling-time"):
            findings.append(Finding(("allowable", index), allowable.kind, modal, depends=("floor",)))
        if getattr(allowable, "through", None) == "ground":
            expected = 'the force through the "floor": its dynamic stiffness does not say what it passes on'
            findings.append(Finding(("allowable", index, "through"), "ground", expected, depends=("floor",)))
    if "separation" in brief.objectives.trade:
        expected = f'objectives without "separation", for example ["cost", "least-margin"]; {modal}'
        findings.append(Finding(("objectives", "trade"), "separation", expected, depends=("floor",)))
    if brief.sizing is not None:
        expected = "a floor of mass, spring and damper beside [sizing]"
        findings.append(Finding(("floor", "kind"), brief.floor.kind, expected, depends=("sizing",)))
    return findings


def _outside(brief: Brief, low: float, high: float) -> list[Finding]:
    findings = []
    table = f"{show(low, 'frequency')} to {show(high, 'frequency')}"
    slack = ROUNDING * high
    for index, forcing in enumerate(brief.forcing):
        ends: list[float] = []
        for condition in brief.conditions:
            if not applies(forcing.conditions, condition.name):
                continue
            if forcing.shaft_needed() in (None, *condition.shafts):
                for tone in forcing.tones(condition.shafts):
                    ends += [tone.order * tone.low, tone.order * tone.high]
        path: Path = ("forcing", index)
        if ends and (min(ends) < low - slack or max(ends) > high + slack):
            found = f"{show(min(ends), 'frequency')} to {show(max(ends), 'frequency')}"
            expected = f"excitation within the table of the floor's dynamic stiffness, {table}"
            findings.append(Finding(path, found, expected, depends=("floor", "condition")))
        if forcing.transients() or forcing.noises():
            expected = "tones alone on a floor of kind dynamic-stiffness, which is known over its table alone"
            findings.append(Finding(path, forcing.name, expected, depends=("floor",)))
    for index, condition in enumerate(brief.conditions):
        if condition.run_up or condition.coast_down:
            expected = "steady speeds alone on a floor of kind dynamic-stiffness, which is known over its table alone"
            findings.append(Finding(("condition", index), condition.name, expected, depends=("floor",)))
    return findings
