"""What the program filled in because a parts list left it out, kept so that a report can print it."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Assumed:
    """One figure that a catalog does not state.

    catalog: name of the catalog. part: part number, None when it holds for the whole catalog.
    what: the column. value: what was taken, with its unit. why: a sentence part giving the reason.
    """

    catalog: str
    part: str | None
    what: str
    value: str
    why: str


@dataclass(frozen=True, slots=True)
class AssumedGroup:
    """The same assumption made for several parts of one catalog. parts: part numbers, in catalog order."""

    catalog: str
    what: str
    value: str
    why: str
    parts: tuple[str, ...]

    def __str__(self) -> str:
        count = len(self.parts)
        for_whom = {0: "all parts", 1: self.parts[0] if self.parts else ""}.get(count, f"{count} parts")
        return f"{self.catalog}, {for_whom}: {self.what} assumed {self.value} ({self.why})"


def group_assumed(assumed: Iterable[Assumed]) -> tuple[AssumedGroup, ...]:
    """Put identical assumptions of one catalog together, in the order in which each first occurs."""
    groups: dict[tuple[str, str, str, str], list[str]] = {}
    for item in assumed:
        parts = groups.setdefault((item.catalog, item.what, item.value, item.why), [])
        if item.part is not None:
            parts.append(item.part)
    return tuple(
        AssumedGroup(catalog, what, value, why, tuple(parts))
        for (catalog, what, value, why), parts in groups.items()
    )
