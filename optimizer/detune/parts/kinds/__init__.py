"""The kinds of part a catalog may list, one file a kind. A new kind is a new file and one line in KINDS."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Protocol, TypeAlias

from detune.ground.errors import Fault
from detune.parts.assumed import Assumed
from detune.parts.columns import Column
from detune.parts.kinds import mount
from detune.parts.kinds.mount import Mount
from detune.parts.table import Table

Part: TypeAlias = Mount
"""What a catalog holds; a union once there is a second kind."""


class Kind(Protocol):
    """What a file of this folder provides. COLUMNS must hold a column "part" of kind text."""

    @property
    def COLUMNS(self) -> tuple[Column, ...]: ...

    def check(self, table: Table) -> Sequence[Fault]:
        """Return what is wrong between the cells of each row."""

    def build(self, table: Table, catalog: str) -> tuple[tuple[Part, ...], tuple[Assumed, ...]]:
        """Make the parts of a table without faults, and list what was assumed."""

    def value(self, part: Part, column: str) -> float | str | bool | None:
        """Return a part's figure in a column, in SI, None where the list states nothing."""


KINDS: dict[str, Kind] = {
    "mount": mount,
}
