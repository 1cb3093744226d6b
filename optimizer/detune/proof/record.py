"""Proof record: plain JSON data that say what was proven, by which rules and boxes, chained by hashes.

Every entry carries the digest of the one before it, so that no entry can be changed, removed or moved without
breaking the chain. The record holds the data a checker needs to compute everything again: it is no approval, and it
says nothing that `checker.py` cannot find out by itself.
"""

from __future__ import annotations

import hashlib
import json
import math
from dataclasses import dataclass, fields, is_dataclass
from pathlib import Path
from typing import Any

import numpy as np

from detune.proof.bisect import Decision
from detune.proof.robust_data import OutputLimit, RobustSystem
from detune.proof.search import SearchResult
from detune.proof.selection_data import Selection

FORMAT = "detune proof record 1"
LARGEST_SELECTION = 200_000
AXIS_ARRAYS = ("kappa_static", "kappa_dynamic", "loss", "viscous")


@dataclass(frozen=True)
class ProofEntry:
    """One statement of a record: its kind, its data, and the chain."""

    kind: str
    data: dict[str, Any]
    previous: str
    digest: str


@dataclass(frozen=True)
class ProofRecord:
    """Entries in order; the first one names the format and the title."""

    entries: tuple[ProofEntry, ...]

    @property
    def digest(self) -> str:
        """Digest of the last entry: it stands for the whole record."""
        return self.entries[-1].digest


def plain(value: Any) -> Any:
    """Data as JSON can hold them: arrays to lists, complex numbers to re and im, infinities to "inf" and "-inf"."""
    if isinstance(value, np.ndarray):
        if np.iscomplexobj(value):
            return {"re": plain(value.real), "im": plain(value.imag)}
        return plain(value.tolist())
    if isinstance(value, complex):
        return {"re": plain(value.real), "im": plain(value.imag)}
    if isinstance(value, (np.floating, float)):
        number = float(value)
        if math.isnan(number):
            return "nan"
        return number if math.isfinite(number) else ("inf" if number > 0 else "-inf")
    if isinstance(value, np.integer):
        return int(value)
    if isinstance(value, np.bool_):
        return bool(value)
    if isinstance(value, (list, tuple)):
        return [plain(item) for item in value]
    if isinstance(value, dict):
        return {str(key): plain(item) for key, item in value.items()}
    if is_dataclass(value) and not isinstance(value, type):
        return {item.name: plain(getattr(value, item.name)) for item in fields(value)}
    if value is None or isinstance(value, (str, int, bool)):
        return value
    raise TypeError(f"a proof record cannot hold {type(value).__name__}")


def entry_digest(kind: str, data: dict[str, Any], previous: str) -> str:
    """SHA-256 of an entry's canonical JSON text."""
    text = json.dumps([kind, data, previous], sort_keys=True, separators=(",", ":"), allow_nan=False)
    return hashlib.sha256(text.encode("ascii")).hexdigest()


def append(record: ProofRecord, kind: str, data: dict[str, Any]) -> ProofRecord:
    """The record with one more entry."""
    clean = plain(data)
    previous = record.entries[-1].digest if record.entries else ""
    return ProofRecord(
        (*record.entries, ProofEntry(kind, clean, previous, entry_digest(kind, clean, previous)))
    )


def new_record(title: str, inputs: dict[str, str] | None = None) -> ProofRecord:
    """A record with its first entry: the format, a title, and the digests of the input files by name."""
    return append(ProofRecord(()), "record", {"format": FORMAT, "title": title, "inputs": inputs or {}})


def selection_digest(selection: Selection) -> str:
    """SHA-256 of all arrays of a selection."""
    return hashlib.sha256(json.dumps(plain(selection), sort_keys=True).encode("ascii")).hexdigest()


def add_search(
    record: ProofRecord, selection: Selection, result: SearchResult, final_test: str = "rows"
) -> ProofRecord:
    """Append a search: what was found, how many designs each rule settled, and the data of the designs found.

    final_test: "rows" when the rows of the selection decided (a checker may then enumerate), else a name for what
    decided beyond them.

    The whole selection is kept while it has at most 200,000 designs, so that a checker can enumerate it; beyond
    that its digest, and the data of the chosen parts.
    """
    small = selection.design_count <= LARGEST_SELECTION
    data = {
        "aim": result.aim,
        "final_test": final_test,
        "status": result.status,
        "kernels": result.kernels,
        "elapsed": result.elapsed,
        "design_count": result.design_count,
        "counts": result.counts,
        "lower_bound": result.lower_bound,
        "designs": [plain(found) for found in result.designs],
        "selection_digest": selection_digest(selection),
        "selection": plain(selection) if small else None,
        "chosen": [chosen_design(selection, found.parts, found.ballast) for found in result.designs],
    }
    return append(record, "search", data)


def chosen_design(selection: Selection, parts: tuple[int, ...], ballast: int) -> dict[str, Any]:
    """All data of one design that its rows need: chosen parts, mass, load, and the limits."""
    groups = []
    for group, part in zip(selection.groups, parts, strict=True):
        row = {}
        for item in fields(group):
            if item.name != "count":
                values = getattr(group, item.name)
                # Stiffness arrays are (P, 3); windows may be (S_g, P), with the parts last.
                row[item.name] = values[part] if item.name in AXIS_ARRAYS else values[..., part]
        groups.append({**row, "count": group.count})
    return {
        "groups": plain(groups),
        "mass": plain(selection.ballast.mass[ballast]),
        "load": plain(selection.ballast.load[ballast]),
        "ballast_cost": plain(selection.ballast.cost[ballast]),
        "stations": plain(selection.stations),
        "station_group": plain(selection.station_group),
        "support_sign": plain(selection.support_sign),
        "fixed": plain(selection.fixed),
        "bands": plain(selection.bands),
        "static_rows": plain(selection.static_rows),
        "harmonic": plain(selection.harmonic),
    }


def add_decision(
    record: ProofRecord, name: str, system: RobustSystem, output: OutputLimit, decision: Decision
) -> ProofRecord:
    """Append a decided (or undecided) limit: the system, the output, the outcome and the tree of boxes."""
    data = {
        "name": name,
        "system": plain(system),
        "output": plain(output),
        "decision": plain(decision),
    }
    return append(record, "decision", data)


def add_note(record: ProofRecord, kind: str, data: dict[str, Any]) -> ProofRecord:
    """Append plain data of another kind (a rule of an upper floor, an assessment); the checker holds the chain only."""
    if kind in ("record", "search", "decision"):
        raise ValueError(f"entries of kind {kind} have their own function")
    return append(record, kind, data)


def record_text(record: ProofRecord) -> str:
    """Return a record as JSON, one entry a line."""
    lines = [json.dumps(plain(entry), allow_nan=False) for entry in record.entries]
    return "[\n" + ",\n".join(lines) + "\n]\n"


def write_record(record: ProofRecord, path: Path) -> None:
    """Write a record as JSON."""
    path.write_text(record_text(record), encoding="ascii")
