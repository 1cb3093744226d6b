"""Candidates that are no mounts of a list: pads cut to size, absorbers, and stacks of ballast."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, cast

from detune.brief.brief import Brief
from detune.brief.choice import Choice
from detune.brief.finding import Finding
from detune.parts.catalog import Catalog
from detune.parts.compose import absorber_mount, empty_station, retuned
from detune.parts.kinds.mount import Mount
from detune.problem.listed import Dropped, rows_wanted
from detune.response.ballast import NOTHING, BallastStep, ladder, none_of, stacked

if TYPE_CHECKING:
    from detune.parts.kinds.absorber import Absorber
    from detune.parts.kinds.ballast import Ballast
    from detune.parts.kinds.pad import Pad

BALLAST = "ballast"


@dataclass(frozen=True)
class NotCut:
    """A piece that cannot be cut, named as if it could, with the row of its sheet."""

    catalog: str
    line: int
    part: str


def pieces_of(sheets: "Sequence[Pad]", choice: Choice, dropped: list[Dropped]) -> list[Mount]:
    """Return every sheet in every size of the choice that can be cut from it; the others are dropped."""
    if not sheets:
        return []
    from detune.parts.kinds.pad import cut, piece_name

    found = []
    for pad in sheets:
        for width, length in choice.sizes:
            try:
                found.append(cut(pad, width, length))
            except ValueError as error:
                piece = NotCut(pad.catalog, pad.line, piece_name(pad, width, length))
                dropped.append(Dropped(choice.group, piece, str(error)))
    return found


def absorber_candidates(
    brief: Brief, catalogs: Mapping[str, Catalog], dropped: list[Dropped], findings: list[Finding]
) -> list[tuple[Mount, ...]]:
    """Return for every absorber of the brief the parts it may be, the empty place last where it may be left out."""
    groups = []
    for index, absorber in enumerate(brief.absorbers):
        path = ("absorber", index)
        rows = rows_wanted(path, absorber, absorber.name, ("absorber",), catalogs, dropped, findings)
        found = [mount for row in cast("list[Absorber]", rows) for mount in _tuned(row, absorber.tunings)]
        if rows and absorber.tunings and not any(mount.base for mount in found):
            tunings = ", ".join(f"{frequency:g} Hz" for frequency in absorber.tunings)
            expected = "frequencies between frequency_min and frequency_max of some absorber of the lists"
            findings.append(Finding((*path, "tunings"), tunings, expected))
        groups.append((*found, *([empty_station(absorber.catalogs[0])] if absorber.empty else [])))
    return groups


def _tuned(row: "Absorber", tunings: tuple[float, ...]) -> list[Mount]:
    """Return an absorber at its listed tuning, and at every other one that it can be set to."""
    found = [absorber_mount(row)]
    if row.frequency_min is not None and row.frequency_max is not None:
        within = (f for f in tunings if row.frequency_min <= f <= row.frequency_max)
        found += [retuned(row, frequency) for frequency in within if frequency != row.frequency]
    return found


def ballast_candidates(
    brief: Brief, catalogs: Mapping[str, Catalog], dropped: list[Dropped], findings: list[Finding]
) -> tuple[BallastStep, ...]:
    """Return the steps of the brief, or every stack of the pieces it may take, as many as are in stock."""
    table = brief.ballast
    if table is None or not table.catalogs:
        return ladder(brief)
    rows = rows_wanted(("ballast",), table, BALLAST, ("ballast",), catalogs, dropped, findings)
    found = [none_of(table)] if table.empty else []
    for part in cast("list[Ballast]", rows):
        most = table.pieces if part.stock is None else min(table.pieces, part.stock)
        if most == 0:
            dropped.append(Dropped(BALLAST, part, "the list states none in stock"))
        found += [stacked(table, part, pieces) for pieces in range(1, most + 1)]
    if not found and rows:
        findings.append(
            Finding(("ballast", "catalogs"), "no piece in stock", "a list with some piece in stock")
        )
    return tuple(found) or (NOTHING,)
