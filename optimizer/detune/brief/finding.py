"""One fault of a brief, before it has a file and a line."""

from dataclasses import dataclass

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
