"""Reading a study file: all faults at once, each with its line, key, found value and nearest name."""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pydantic import ValidationError

from detune.brief import allowable, forcing
from detune.brief.brief import Brief
from detune.brief.choice import Ballast, CatalogSource, Choice, Objectives
from detune.brief.condition import Condition
from detune.brief.cross_check import Finding, cross_check
from detune.brief.floor import Floor
from detune.brief.machine import Body, Connection, Point, Station, SteadyLoad
from detune.brief.statement import Statement, describe
from detune.ground.errors import BriefError, Fault, nearest_name
from detune.ground.toml_lines import Positions, dotted, load

SINGLE: dict[str, type[Statement]] = {"floor": Floor, "ballast": Ballast, "objectives": Objectives}
REPEATED: dict[str, type[Statement]] = {
    "body": Body,
    "point": Point,
    "station": Station,
    "connection": Connection,
    "steady_load": SteadyLoad,
    "condition": Condition,
    "catalog": CatalogSource,
    "choice": Choice,
}
BY_KIND: dict[str, Mapping[str, type[Statement]]] = {"forcing": forcing.KINDS, "allowable": allowable.KINDS}
FIELD = {
    "body": "bodies",
    "point": "points",
    "station": "stations",
    "connection": "connections",
    "steady_load": "steady_loads",
    "condition": "conditions",
    "catalog": "catalogs",
    "choice": "choices",
    "forcing": "forcing",
    "allowable": "allowables",
}
REQUIRED = ("title", "body", "station", "floor", "condition", "forcing", "allowable", "catalog", "choice")
TEXTS = ("title", "notes")
TABLES = (*TEXTS, *SINGLE, *REPEATED, *BY_KIND)
PYDANTIC_EXPECTED = {
    "string_type": "text in quotes",
    "string_too_short": "text that is not empty",
    "bool_type": "true or false",
    "int_type": "a whole number",
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
    for name in TEXTS:
        if name in data:
            if isinstance(data[name], str) and data[name].strip():
                read[name] = data[name].strip()
            else:
                findings.append(Finding((name,), describe(data[name]), "text in quotes"))
    for name, single in SINGLE.items():
        if name in data:
            statement = _read_one(single, data[name], (name,), findings)
            if statement is not None:
                read[name] = statement
    for name in (*REPEATED, *BY_KIND):
        if name in data:
            read[FIELD[name]] = tuple(_read_many(name, data[name], findings))
    brief = None
    if not findings:
        brief = Brief(**read, folder=study.parent, file=str(path))
        findings += cross_check(brief)
    else:
        findings += _cross_check_what_was_read(read, data)
    faults = tuple(to_fault(str(path), finding, positions) for finding in findings)
    return Reading(None if faults else brief, read.get("catalogs", ()), faults, positions)


def _unknown_tables(data: Mapping[str, Any]) -> Iterator[Finding]:
    for name in data:
        if name not in TABLES:
            yield Finding((name,), name, "one of the tables of a study: " + ", ".join(TABLES), nearest_name(name, TABLES))
    for name in REQUIRED:
        if name not in data:
            table = f"[[{name}]]" if name in REPEATED or name in BY_KIND else name
            yield Finding((name,), "nothing", f"{table}, which every study states")


def _read_many(name: str, raw: Any, findings: list[Finding]) -> Iterator[Statement]:
    if not isinstance(raw, list):
        findings.append(Finding((name,), describe(raw), f"a list of tables, each opened by [[{name}]]"))
        return
    for index, item in enumerate(raw):
        path: tuple[str | int, ...] = (name, index)
        cls: type[Statement] | None = REPEATED.get(name)
        if cls is None:
            cls = _kind_of(name, item, path, findings)
        if cls is not None:
            statement = _read_one(cls, item, path, findings)
            if statement is not None:
                yield statement


def _kind_of(
    name: str, item: Any, path: tuple[str | int, ...], findings: list[Finding]
) -> type[Statement] | None:
    kinds = BY_KIND[name]
    kind = item.get("kind") if isinstance(item, dict) else None
    if isinstance(kind, str) and kind in kinds:
        return kinds[kind]
    listed = ", ".join(f'"{known}"' for known in kinds)
    found = "no kind" if kind is None else describe(kind)
    findings.append(
        Finding((*path, "kind"), found, f"one of {listed}", nearest_name(str(kind), kinds) if kind else None)
    )
    return None


def _read_one(
    cls: type[Statement], raw: Any, path: tuple[str | int, ...], findings: list[Finding]
) -> Statement | None:
    if not isinstance(raw, dict):
        findings.append(Finding(path, describe(raw), "a table of keys and values"))
        return None
    try:
        return cls.model_validate(raw, context={"from_file": True})
    except ValidationError as error:
        findings += _findings_of(error, cls, raw, path)
        return None


def _findings_of(
    error: ValidationError, cls: type[Statement], raw: dict[str, Any], path: tuple[str | int, ...]
) -> list[Finding]:
    """Return one finding a place; the branches of a union that all failed are told together."""
    by_place: dict[tuple[str | int, ...], list[Finding]] = {}
    for item in error.errors(include_url=False):
        place, value = _resolve(item["loc"], raw)
        missing = item["type"] == "missing"
        if missing:
            place = (*place, item["loc"][-1]) if not place or place[-1] != item["loc"][-1] else place
        context = item.get("ctx", {})
        nearest = None
        if item["type"] == "statement":
            found, expected = context["found"], context["expected"]
        elif missing:
            found, expected = "nothing", f'"{item["loc"][-1]}", which has no default'
        elif item["type"] == "extra_forbidden":
            known = _fields_at(cls, item["loc"][:-1])
            found = str(item["loc"][-1])
            expected = "one of the keys " + ", ".join(known)
            nearest = nearest_name(found, known)
        elif item["type"] == "literal_error":
            found, expected = describe(item["input"]), "one of " + str(context["expected"]).replace("'", '"')
            choices = [part.strip("' ") for part in str(context["expected"]).replace(" or ", ",").split(",")]
            nearest = nearest_name(str(item["input"]), choices)
        elif item["type"] in ("too_short", "too_long", "missing_argument"):
            found, expected = describe(value), f"a list of {context.get('min_length', context.get('max_length'))} values"
        else:
            found, expected = describe(value), PYDANTIC_EXPECTED.get(item["type"], item["msg"])
        by_place.setdefault(place, []).append(Finding((*path, *place), found, expected, nearest))
    return [_joined(findings) for findings in by_place.values()]


def _joined(findings: list[Finding]) -> Finding:
    expected = " or ".join(dict.fromkeys(finding.expected for finding in findings))
    nearest = next((finding.nearest for finding in findings if finding.nearest), None)
    return Finding(findings[0].path, findings[0].found, expected, nearest)


def _resolve(location: tuple[str | int, ...], raw: Any) -> tuple[tuple[str | int, ...], Any]:
    """Return the part of pydantic's location that exists in the file, and the value there.

    Locations also carry the names of union branches, which a user never wrote.
    """
    place: list[str | int] = []
    value = raw
    for key in location:
        if isinstance(value, dict) and key in value or isinstance(value, list) and _index(key, value):
            value = value[key]
            place.append(key)
    return tuple(place), value


def _index(key: str | int, items: list[Any]) -> bool:
    return isinstance(key, int) and 0 <= key < len(items)


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


def _cross_check_what_was_read(read: dict[str, Any], data: Mapping[str, Any]) -> list[Finding]:
    """Cross-check a faulty study as far as its tables were read in full.

    A table with a fault of its own would make every name that refers to it look wrong, so
    only a brief whose repeated tables all came through is looked at.
    """
    whole = all(len(read.get(FIELD[name], ())) == len(data.get(name, ())) for name in (*REPEATED, *BY_KIND))
    if not whole or any(FIELD.get(name, name) not in read for name in REQUIRED):
        return []
    return list(cross_check(Brief(**read)))


def to_fault(file: str, finding: Finding, positions: Positions) -> Fault:
    """Return a finding as a fault with its line in the study file."""
    return Fault(file, positions.line(finding.path), dotted(finding.path), finding.found, finding.expected, finding.nearest)
