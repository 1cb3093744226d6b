"""One fault of a brief, before it has a file and a line."""

from collections.abc import Iterable
from dataclasses import dataclass

from detune.ground.errors import Fault
from detune.ground.toml_lines import dotted

Path = tuple[str | int, ...]


@dataclass(frozen=True)
class Finding:
    """Where (keys and indices as in the study file), what was found, what was expected, the nearest name.

    `depends` names the tables that must have been read in full for the fault to be one.
    """

    path: Path
    found: str
    expected: str
    nearest: str | None = None
    depends: tuple[str, ...] = ()


def faults_without_lines(file: str, findings: Iterable[Finding]) -> list[Fault]:
    """Return findings as faults of a brief whose file is not at hand."""
    return [Fault(file, None, dotted(f.path), f.found, f.expected, f.nearest) for f in findings]
