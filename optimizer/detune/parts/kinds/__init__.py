"""The kinds of part a catalog may list, one file a kind. A new kind is a new file and one line in KINDS."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING, Any, Protocol, TypeAlias

from detune.ground.errors import Fault
from detune.ground.kind_table import KindTable
from detune.parts.assumed import Assumed
from detune.parts.columns import Column
from detune.parts.table import Table

if TYPE_CHECKING:
    from detune.parts.kinds.absorber import Absorber
    from detune.parts.kinds.ballast import Ballast
    from detune.parts.kinds.damper import Damper
    from detune.parts.kinds.mount import Mount
    from detune.parts.kinds.pad import Pad

Part: TypeAlias = "Mount | Damper | Ballast | Absorber | Pad"
"""What a catalog holds, all of one kind."""


class Kind(Protocol):
    """What a file of this folder provides. COLUMNS must hold a column "part" of kind text."""

    @property
    def COLUMNS(self) -> tuple[Column, ...]: ...

    def check(self, table: Table) -> Sequence[Fault]:
        """Return what is wrong between the cells of each row."""

    def build(self, table: Table, catalog: str) -> tuple[tuple[Part, ...], tuple[Assumed, ...]]:
        """Make the parts of a table without faults, and list what was assumed."""

    @property
    def value(self) -> Callable[[Any, str], float | str | bool | None]:
        """Return a part's figure in a column, in SI, None where the list states nothing."""

    @property
    def files(self) -> Callable[[Any], tuple[str, ...]]:
        """Return the further files that a part was read from."""


KINDS: KindTable[Kind] = KindTable(
    __name__,
    {
        "mount": "mount",
        "damper": "damper",
        "ballast": "ballast",
        "absorber": "absorber",
        "pad": "pad",
    },
)
