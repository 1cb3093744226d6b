"""Rows of parts lists by the name a user writes: mounts, dampers, pads in a size, absorbers, stacks of ballast."""

import re
from collections.abc import Sequence
from typing import TYPE_CHECKING, Protocol, TypeVar, cast

from detune.brief.brief import Brief
from detune.ground.errors import Fault, nearest_name
from detune.ground.units import UnitError, parse
from detune.parts.catalog import Catalog
from detune.parts.compose import EMPTY, absorber_mount, empty_station, retuned
from detune.parts.kinds.mount import Mount
from detune.response.ballast import BallastStep, none_of, stacked

if TYPE_CHECKING:
    from detune.parts.kinds.absorber import Absorber
    from detune.parts.kinds.ballast import Ballast
    from detune.parts.kinds.pad import Pad

SOURCE = "--design"
SEVERAL = re.compile(r"(?P<count>\d+) *[x×] +(?P<part>.+)", re.ASCII)
SIZE = re.compile(r"(?P<part>.+?) +(?P<width>[\d.]+) *[x×] *(?P<length>[\d.]+) *(?P<unit>[a-z]+)", re.ASCII)


TUNED = re.compile(r"(?P<part>.+?) +at +(?P<tuning>.+)", re.ASCII)


class Row(Protocol):
    """A row of a parts list."""

    @property
    def catalog(self) -> str: ...

    @property
    def part(self) -> str: ...


Part = TypeVar("Part", bound=Row)


def of_name(parts: Sequence[Part], value: str) -> list[Part]:
    """Return the parts of this number, or of "catalog:part"."""
    named, colon, number = value.partition(":")
    if colon and any(part.catalog == named for part in parts):
        return [part for part in parts if part.catalog == named and part.part == number.strip()]
    return [part for part in parts if part.part == value]


def one_named(
    parts: Sequence[Part], group: str, value: str, expected: tuple[str, ...], faults: list[Fault]
) -> Part | None:
    """Return the only part of this number, else None with a fault."""
    found = of_name(parts, value)
    if len(found) == 1:
        return found[0]
    if found:
        spelt = " or ".join(f'"{part.catalog}:{part.part}"' for part in found)
        faults.append(
            Fault(SOURCE, None, group, value, f"which of the catalogs that have this part: {spelt}")
        )
        return None
    colon = ":" in value and any(part.catalog == value.partition(":")[0] for part in parts)
    known = [f"{part.catalog}:{part.part}" if colon else part.part for part in parts]
    known += [word.strip('"') for word in expected[1:]]
    words = " or ".join(expected) if parts else f"{expected[0]}, which have none"
    faults.append(Fault(SOURCE, None, group, value, words, nearest_name(value, known)))
    return None


def named_pad(catalogs: dict[str, Catalog], group: str, value: str, faults: list[Fault]) -> Mount | None:
    """Return the pad written "sheet 80 x 120 mm" as a mount; None where no sheet is named, or with a fault."""
    pads = cast("list[Pad]", _rows(catalogs, "pad"))
    size = SIZE.fullmatch(value)
    if size is None or not of_name(pads, size["part"]):
        return None
    from detune.parts.kinds.pad import cut

    found = one_named(pads, group, size["part"], ("a sheet of the study's catalogs",), faults)
    if found is None:
        return None
    try:
        sides = [parse(f"{size[side]} {size['unit']}", "length") for side in ("width", "length")]
        return cut(found, *sides)
    except UnitError as error:
        faults.append(Fault(SOURCE, None, group, error.found, error.expected, error.nearest))
    except ValueError as error:
        faults.append(
            Fault(SOURCE, None, group, value, f"a size that can be cut and is within the range: {error}")
        )
    return None


def named_absorber(catalogs: dict[str, Catalog], name: str, value: str, faults: list[Fault]) -> Mount | None:
    """Return the absorber of this number, "number at 14 Hz" set to another tuning, or the empty place."""
    rows = cast("list[Absorber]", _rows(catalogs, "absorber"))
    if value.casefold() == EMPTY:
        return empty_station(rows[0].catalog if rows else "")
    tuned = TUNED.fullmatch(value)
    number = tuned["part"] if tuned is not None and not of_name(rows, value) else value
    found = one_named(rows, name, number, ("an absorber of the study's catalogs", f'"{EMPTY}"'), faults)
    if found is None or number == value or tuned is None:
        return None if found is None else absorber_mount(found)
    try:
        return retuned(found, parse(tuned["tuning"], "frequency"))
    except UnitError as error:
        faults.append(Fault(SOURCE, None, name, error.found, error.expected, error.nearest))
    except ValueError as error:
        faults.append(Fault(SOURCE, None, name, value, f"a tuning it can be set to: {error}"))
    return None


def named_stack(
    brief: Brief, catalogs: dict[str, Catalog], value: str, faults: list[Fault]
) -> BallastStep | None:
    """Return the ballast written "3 x piece", "piece", "(empty)" or "0 kg", of the lists of pieces."""
    table = brief.ballast
    assert table is not None
    if value.casefold() in (EMPTY, "0 kg"):
        return none_of(table)
    several = SEVERAL.fullmatch(value)
    count, number = (int(several["count"]), several["part"]) if several else (1, value)
    rows = cast("list[Ballast]", _rows(catalogs, "ballast"))
    if several and of_name(rows, value):
        count, number = 1, value
    found = one_named(rows, "ballast", number, ("a piece of the study's catalogs", f'"{EMPTY}"'), faults)
    if found is not None and count < 1:
        faults.append(Fault(SOURCE, None, "ballast", value, f'one piece or more, for example "2 x {number}"'))
        return None
    return None if found is None else stacked(table, found, count)


def _rows(catalogs: dict[str, Catalog], kind: str) -> list[object]:
    return [part for catalog in catalogs.values() if catalog.kind == kind for part in catalog.parts]
