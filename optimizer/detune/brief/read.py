"""Reading a study file: all faults at once, each with its line, key, found value and nearest name."""

import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from detune.brief import allowable, forcing
from detune.brief.absorber import Absorber
from detune.brief.brief import Brief
from detune.brief.choice import Ballast, CatalogSource, Choice, Objectives
from detune.brief.condition import Condition
from detune.brief.cross_check import cross_check
from detune.brief.dwell import without_barred
from detune.brief.finding import Finding
from detune.brief.floor import Floor
from detune.brief.machine import Body, Connection, Point, Station, SteadyLoad
from detune.brief.scatter import Scatter
from detune.brief.sizing import Sizing
from detune.brief.state import State
from detune.brief.statement import Statement, describe
from detune.brief.structure import Structure
from detune.ground.errors import BriefError, Fault, nearest_name
from detune.ground.toml_lines import Positions, dotted, load

SINGLE: dict[str, type[Statement]] = {
    "floor": Floor,
    "ballast": Ballast,
    "objectives": Objectives,
    "structure": Structure,
    "sizing": Sizing,
    "scatter": Scatter,
}
REPEATED: dict[str, type[Statement]] = {
    "body": Body,
    "point": Point,
    "station": Station,
    "connection": Connection,
    "steady_load": SteadyLoad,
    "state": State,
    "condition": Condition,
    "catalog": CatalogSource,
    "choice": Choice,
    "absorber": Absorber,
}
BY_KIND: dict[str, Mapping[str, type[Statement]]] = {"forcing": forcing.KINDS, "allowable": allowable.KINDS}
FIELD = {
    "body": "bodies",
    "point": "points",
    "station": "stations",
    "connection": "connections",
    "steady_load": "steady_loads",
    "state": "states",
    "condition": "conditions",
    "catalog": "catalogs",
    "choice": "choices",
    "absorber": "absorbers",
    "forcing": "forcing",
    "allowable": "allowables",
}
RIGID = Floor(kind="rigid")
REQUIRED = ("title", "body", "station", "floor", "condition", "forcing", "allowable", "catalog", "choice")
# A study that sizes its parts may stand before there is a parts list.
LISTS = ("catalog", "choice")
TEXTS = ("title", "notes")
YES_NO = ("gravity_stiffness",)
TABLES = (*TEXTS, *YES_NO, *SINGLE, *REPEATED, *BY_KIND)
EXPECTED = {
    "string_type": "text in quotes",
    "string_too_short": "text that is not empty",
    "bool_type": "true or false",
    "int_type": "a whole number",
    "int_parsing": "a whole number",
    "int_from_float": "a whole number",
    "float_type": "a number",
    "float_parsing": "a number",
    "tuple_type": "a list in square brackets",
    "dict_type": "a table",
    "model_type": "a table of keys and values",
    "finite_number": "a finite number",
}


@dataclass(frozen=True)
class Reading:
    """What could be read of a study file: the brief if it is sound, the catalogs it names, the faults."""

    brief: Brief | None
    catalogs: tuple[CatalogSource, ...]
    faults: tuple[Fault, ...]
    positions: Positions


def read_brief(path: str | Path) -> Brief:
    """Return the brief of a study file. Raises BriefError with every fault found."""
    reading = scan_brief(path)
    if reading.brief is None:
        raise BriefError(reading.faults)
    return reading.brief


def scan_brief(path: str | Path) -> Reading:
    """Read a study file as far as it goes. Raises BriefError only where nothing can be read (TOML syntax)."""
    data, positions = load(path)
    return scan_data(data, positions, path)


def scan_data(data: Mapping[str, Any], positions: Positions, path: str | Path) -> Reading:
    """Read the tables of a study file that has been loaded, or varied since."""
    study = Path(path)
    findings: list[Finding] = list(_unknown_tables(data))
    read: dict[str, Any] = {}
    not_read = {name for name in _required(data) if name not in data}
    for name in TEXTS:
        if name in data:
            if isinstance(data[name], str) and data[name].strip():
                read[name] = data[name].strip()
            else:
                findings.append(Finding((name,), describe(data[name]), "text in quotes"))
    for name in YES_NO:
        if name in data:
            if isinstance(data[name], bool):
                read[name] = data[name]
            else:
                findings.append(Finding((name,), describe(data[name]), "true or false"))
    for name, single in SINGLE.items():
        if name in data:
            statement = _read_one(single, data[name], (name,), findings, study.parent)
            if statement is None:
                not_read.add(name)
            else:
                read[name] = statement
    rows: dict[str, list[int]] = {}
    for name in (*REPEATED, *BY_KIND):
        if name in data:
            before = len(findings)
            found = dict(_read_many(name, data[name], findings, study.parent))
            read[FIELD[name]], rows[name] = tuple(found.values()), list(found)
            if len(findings) > before:
                not_read.add(name)
    # Every statement has been read and checked; checking them all again takes longer than the reading.
    whole = Brief.model_construct(
        **{"title": "untitled", "floor": RIGID, **_nothing(), **read}, folder=study.parent, file=str(path)
    )
    findings += [_in_file(finding, rows) for finding in cross_check(whole, not_read)]
    faults = tuple(to_fault(str(path), finding, positions) for finding in findings)
    return Reading(None if faults else without_barred(whole), read.get("catalogs", ()), faults, positions)


def _nothing() -> dict[str, tuple[Statement, ...]]:
    """Return empty tables, so that the rest of a faulty study can be cross-checked."""
    return {FIELD[name]: () for name in (*REPEATED, *BY_KIND)}


def _in_file(finding: Finding, rows: Mapping[str, list[int]]) -> Finding:
    """Return a finding with the index its table has in the file, where faulty ones stand between."""
    table, *rest = finding.path
    if rest and isinstance(rest[0], int) and str(table) in rows:
        return replace(finding, path=(table, rows[str(table)][rest[0]], *rest[1:]))
    return finding


def _required(data: Mapping[str, Any]) -> tuple[str, ...]:
    return tuple(name for name in REQUIRED if name not in LISTS or "sizing" not in data)


def _unknown_tables(data: Mapping[str, Any]) -> Iterator[Finding]:
    for name in data:
        if name not in TABLES:
            yield Finding(
                (name,),
                name,
                "one of the tables of a study: " + ", ".join(TABLES),
                nearest_name(name, TABLES),
            )
    for name in _required(data):
        if name not in data:
            table = (
                f"[[{name}]]"
                if name in REPEATED or name in BY_KIND
                else f"[{name}]"
                if name in SINGLE
                else name
            )
            yield Finding((name,), "", f"{table}, which every study states")


def _read_many(name: str, raw: Any, findings: list[Finding], folder: Path) -> Iterator[tuple[int, Statement]]:
    if not isinstance(raw, list):
        findings.append(Finding((name,), describe(raw), f"a list of tables, each opened by [[{name}]]"))
        return
    for index, item in enumerate(raw):
        path: tuple[str | int, ...] = (name, index)
        cls: type[Statement] | None = REPEATED.get(name)
        if cls is None:
            cls = _kind_of(name, item, path, findings)
        if cls is not None:
            statement = _read_one(cls, item, path, findings, folder)
            if statement is not None:
                yield index, statement


def _kind_of(
    name: str, item: Any, path: tuple[str | int, ...], findings: list[Finding]
) -> type[Statement] | None:
    if not isinstance(item, dict):
        findings.append(Finding(path, describe(item), f"a table opened by [[{name}]]"))
        return None
    kinds = BY_KIND[name]
    kind = item.get("kind")
    if isinstance(kind, str) and kind in kinds:
        return kinds[kind]
    listed = ", ".join(f'"{known}"' for known in kinds)
    found = "" if kind is None else describe(kind)
    nearest = nearest_name(kind, kinds) if isinstance(kind, str) else None
    findings.append(Finding((*path, "kind"), found, f"one of {listed}", nearest))
    return None


def _read_one(
    cls: type[Statement], raw: Any, path: tuple[str | int, ...], findings: list[Finding], folder: Path
) -> Statement | None:
    if not isinstance(raw, dict):
        findings.append(Finding(path, describe(raw), "a table of keys and values"))
        return None
    try:
        return cls.model_validate(raw, context={"from_file": True, "folder": folder})
    except ValidationError as error:
        findings += _findings_of(error, cls, raw, path)
        return None


def _findings_of(
    error: ValidationError, cls: type[Statement], raw: dict[str, Any], path: tuple[str | int, ...]
) -> list[Finding]:
    """Return one finding a place; the branches of a union that all failed are told together."""
    by_place: dict[tuple[str | int, ...], list[Finding]] = {}
    misspelt: set[tuple[str | int, ...]] = set()
    errors = error.errors(include_url=False)
    for item in sorted(errors, key=lambda item: item["type"] == "missing"):
        place, value = _resolve(item["loc"], raw)
        key = item["loc"][-1] if item["loc"] else ""
        if item["type"] == "missing" and isinstance(key, int):
            # An entry of a list: the last one missing tells the length.
            by_place[(*path, *place)] = [
                Finding((*path, *place), describe(value), f"a list of {key + 1} values")
            ]
            continue
        if item["type"] == "missing":
            place = (*place, key)
            if place in misspelt:
                continue
            finding = Finding((*path, *place), "", f'"{key}", which has no default')
        else:
            finding = _finding_of(item, cls, value, (*path, *place))
        if item["type"] == "extra_forbidden" and finding.nearest is not None:
            misspelt.add((*place[:-1], finding.nearest))
        by_place.setdefault(finding.path, []).append(finding)
    # Of a union, the branch that was entered deeper is the one that was meant.
    deeper = {place[:length] for place in by_place for length in range(len(place))}
    return [_joined(findings) for place, findings in by_place.items() if place not in deeper]


def _finding_of(item: Any, cls: type[Statement], value: Any, place: tuple[str | int, ...]) -> Finding:
    """Return the finding of one of pydantic's errors, in our words."""
    context = item.get("ctx", {})
    if item["type"] == "statement":
        found, at = context["found"], context["at"]
        if at is not None and isinstance(value, dict) and at in value:
            place, value = (*place, at), value[at]
        # What the user wrote reads better than its value in SI.
        if isinstance(value, (str, int, float, list)):
            found = describe(value)
        return Finding(place, found, context["expected"], context["nearest"])
    if item["type"] == "extra_forbidden":
        known = _fields_at(cls, item["loc"][:-1])
        found = str(item["loc"][-1])
        return Finding(place, found, "one of the keys " + ", ".join(known), nearest_name(found, known))
    if item["type"] == "literal_error":
        choices = re.findall(r"'([^']*)'", context["expected"])
        listed = ", ".join(f'"{choice}"' for choice in choices)
        nearest = nearest_name(item["input"], choices) if isinstance(item["input"], str) else None
        return Finding(place, describe(value), f"one of {listed}" if len(choices) > 1 else listed, nearest)
    if item["type"] in ("too_short", "too_long"):
        length = context.get("min_length", context.get("max_length"))
        return Finding(place, describe(value), f"a list of {length} values")
    return Finding(place, describe(value), EXPECTED.get(item["type"], "a value of another kind"))


def _joined(findings: list[Finding]) -> Finding:
    expected = ", or ".join(dict.fromkeys(finding.expected for finding in findings))
    nearest = next((finding.nearest for finding in findings if finding.nearest), None)
    return Finding(findings[0].path, findings[0].found, expected, nearest)


def _resolve(location: tuple[str | int, ...], raw: Any) -> tuple[tuple[str | int, ...], Any]:
    """Return the part of pydantic's location that exists in the file, and the value there.

    Locations also carry the names of union branches, which a user never wrote.
    """
    place: list[str | int] = []
    value = raw
    for key in location:
        if _has(key, value):
            value = value[key]
            place.append(key)
    return tuple(place), value


def _has(key: str | int, value: Any) -> bool:
    if isinstance(value, dict):
        return key in value
    return isinstance(value, list) and isinstance(key, int) and 0 <= key < len(value)


def _fields_at(cls: type[Statement], location: tuple[str | int, ...]) -> list[str]:
    current: type[Statement] = cls
    for key in location:
        field = current.model_fields.get(str(key))
        if field is None:
            continue
        found = _statement_in(field.annotation)
        if found is None:
            break
        current = found
    return list(current.model_fields)


def _statement_in(annotation: Any) -> type[Statement] | None:
    if isinstance(annotation, type) and issubclass(annotation, Statement):
        return annotation
    for argument in getattr(annotation, "__args__", ()):
        found = _statement_in(argument)
        if found is not None:
            return found
    return None


def to_fault(file: str, finding: Finding, positions: Positions) -> Fault:
    """Return a finding as a fault with its line in the study file."""
    return Fault(
        file,
        positions.line(finding.path),
        dotted(finding.path),
        finding.found,
        finding.expected,
        finding.nearest,
    )
