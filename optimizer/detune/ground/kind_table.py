"""A table of kinds, one line a kind, that reads a kind's file when the kind is first asked for.

Reading a study would otherwise read the file of every kind there is, though a study names a handful.
"""

from collections.abc import Iterator, Mapping
from importlib import import_module
from typing import Any, Generic, TypeVar

Entry = TypeVar("Entry")


class KindTable(Mapping[str, Entry], Generic[Entry]):
    """The kinds of one folder by the name a user writes.

    package: the folder's dotted name. homes: kind -> "file" for a kind that is a module, or "file.Name" for
    one that is a name in it.
    """

    def __init__(self, package: str, homes: Mapping[str, str]) -> None:
        self._package = package
        self._homes = dict(homes)
        self._loaded: dict[str, Entry] = {}

    def __getitem__(self, kind: str) -> Entry:
        if kind not in self._loaded:
            module, _, name = self._homes[kind].partition(".")
            found: Any = import_module(f"{self._package}.{module}")
            self._loaded[kind] = getattr(found, name) if name else found
        return self._loaded[kind]

    def __iter__(self) -> Iterator[str]:
        return iter(self._homes)

    def __len__(self) -> int:
        return len(self._homes)

    def __contains__(self, kind: object) -> bool:
        # Mapping's own would load the kind to answer.
        return kind in self._homes

    def home(self, kind: str) -> str:
        """Return the line of a kind: its file, and the name in it after a dot."""
        return self._homes[kind]
