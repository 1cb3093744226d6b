"""A study: the brief and its catalogs, read together so that all faults are told at once."""

import hashlib
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from detune.brief.brief import Brief
from detune.brief.choice import CatalogSource
from detune.brief.cross_check import cross_check
from detune.brief.dwell import without_barred
from detune.brief.finding import faults_without_lines
from detune.brief.read import scan_data, to_fault
from detune.ground.errors import BriefError, Fault
from detune.ground.toml_lines import Positions, dotted, load
from detune.parts.catalog import Catalog, read_catalog
from detune.problem.candidates import find_candidates


@dataclass(frozen=True)
class Study:
    """A brief, its catalogs by name, and the SHA-256 of every file that was read."""

    brief: Brief
    catalogs: dict[str, Catalog]
    hashes: tuple[tuple[str, str], ...]
    source: str


def load_study(path: str | Path) -> Study:
    """Return the study of a file. Raises BriefError with every fault of the study file and its catalogs."""
    data, positions = load(path)
    return study_of_tables(data, positions, path)


def study_of_tables(data: Mapping[str, Any], positions: Positions, path: str | Path) -> Study:
    """Return the study of tables loaded from `path`. Raises BriefError with every fault."""
    reading = scan_data(data, positions, path)
    faults = list(reading.faults)
    catalogs = _catalogs(reading.catalogs, Path(path).parent, faults, str(path), positions)
    # With a faulty catalog its parts are unknown, and nothing said about choices would be worth reading.
    if reading.brief is not None and reading.brief.choices and len(catalogs) == len(reading.catalogs):
        found = find_candidates(reading.brief, catalogs).findings
        faults += [to_fault(str(path), finding, reading.positions) for finding in found]
    if faults or reading.brief is None:
        raise BriefError(dict.fromkeys(faults))
    source = Path(path).read_text(encoding="utf-8")
    return Study(reading.brief, catalogs, _hashes(reading.brief, catalogs, Path(path)), source)


def study_of(brief: Brief) -> Study:
    """Return the study of a brief made in Python; catalog files are taken relative to `brief.folder`."""
    faults: list[Fault] = []
    catalogs = _catalogs(brief.catalogs, brief.folder, faults, brief.file, None)
    findings = cross_check(brief)
    if brief.choices and len(catalogs) == len(brief.catalogs):
        findings = (*findings, *find_candidates(brief, catalogs).findings)
    faults += faults_without_lines(brief.file, findings)
    if faults:
        raise BriefError(dict.fromkeys(faults))
    source = brief.model_dump_json(indent=2)
    return Study(without_barred(brief), catalogs, _hashes(brief, catalogs, None), source)


def _catalogs(
    sources: tuple[CatalogSource, ...],
    folder: Path,
    faults: list[Fault],
    study: str,
    positions: Positions | None,
) -> dict[str, Catalog]:
    catalogs = {}
    for index, source in enumerate(sources):
        try:
            catalogs[source.name] = read_catalog(
                folder / source.file,
                source.name,
                source.kind,
                source.headers,
                source.units,
                source.constants,
                source.sheet,
            )
        except BriefError as error:
            faults += [_told_at_its_name(fault, index, source, study, positions) for fault in error.faults]
    return catalogs


def _told_at_its_name(
    fault: Fault, index: int, source: CatalogSource, study: str, positions: Positions | None
) -> Fault:
    """Return a fault of a whole catalog (no such file, no such kind) at the place where the study names it."""
    if fault.line is not None or fault.where not in ("file", "kind"):
        return fault
    path = ("catalog", index, fault.where)
    found = source.file if fault.where == "file" else source.kind
    expected = (
        f"{fault.expected} ({fault.found})" if fault.where == "file" and fault.found else fault.expected
    )
    line = None if positions is None else positions.line(path)
    return Fault(study, line, dotted(path), found, expected, fault.nearest)


def _hashes(brief: Brief, catalogs: Mapping[str, Catalog], study: Path | None) -> tuple[tuple[str, str], ...]:
    files = [] if study is None else [study]
    for source in brief.catalogs:
        files.append(brief.folder / source.file)
        files += [Path(name) for name in catalogs[source.name].further_files]
    named = [name for forcing in brief.forcing for name in forcing.data_files()]
    named += [name for allowable in brief.allowables for name in allowable.data_files()]
    named += brief.floor.data_files()
    files += [brief.folder / name for name in dict.fromkeys(named)]
    return tuple((file.name, hashlib.sha256(file.read_bytes()).hexdigest()) for file in files)
