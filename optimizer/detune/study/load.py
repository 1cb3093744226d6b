"""A study: the brief and its catalogs, read together so that all faults are told at once."""

import hashlib
from dataclasses import dataclass
from pathlib import Path

from detune.brief.brief import Brief
from detune.brief.read import scan_brief, to_fault
from detune.ground.errors import BriefError, Fault
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
    reading = scan_brief(path)
    faults = list(reading.faults)
    catalogs: dict[str, Catalog] = {}
    folder = Path(path).parent
    for source in reading.catalogs:
        try:
            catalogs[source.name] = read_catalog(
                folder / source.file, source.name, source.kind, source.headers, source.units, source.constants
            )
        except BriefError as error:
            faults += error.faults
    if reading.brief is not None:
        # With a faulty catalog its parts are unknown, and nothing said about choices would be worth reading.
        if len(catalogs) == len(reading.catalogs):
            found = find_candidates(reading.brief, catalogs).findings
            faults += [to_fault(str(path), finding, reading.positions) for finding in found]
    if faults or reading.brief is None:
        raise BriefError(_once(faults))
    files = [Path(path), *(folder / source.file for source in reading.catalogs)]
    hashes = tuple((file.name, hashlib.sha256(file.read_bytes()).hexdigest()) for file in files)
    return Study(reading.brief, catalogs, hashes, Path(path).read_text(encoding="utf-8"))


def _once(faults: list[Fault]) -> list[Fault]:
    return list(dict.fromkeys(faults))
