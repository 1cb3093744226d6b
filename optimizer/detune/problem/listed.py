"""Rows of parts lists: which a choice takes, by filters and by name, and why it leaves the others."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Protocol

from detune.brief.choice import Window
from detune.brief.finding import Finding, Path
from detune.brief.shares import LOSS_FACTORS_BELOW, per_cent_wanted
from detune.brief.statement import describe
from detune.ground import units
from detune.ground.errors import nearest_name
from detune.parts.catalog import Catalog, filter_parts
from detune.parts.columns import Column, column_named
from detune.parts.kinds import KINDS

if TYPE_CHECKING:
    from detune.parts.kinds import Part

Where = Mapping[str, tuple[str, ...] | Window]


class Listed(Protocol):
    """A row of a parts list of any kind, with where it stands."""

    @property
    def catalog(self) -> str: ...

    @property
    def line(self) -> int: ...

    @property
    def part(self) -> str: ...


class Wish(Protocol):
    """What a statement says of the rows it wants: a choice of mounts, of an absorber, of ballast."""

    @property
    def catalogs(self) -> tuple[str, ...]: ...

    @property
    def where(self) -> Where: ...

    @property
    def parts(self) -> tuple[str, ...] | None: ...


@dataclass(frozen=True)
class Dropped:
    """A part that a group may not take, and the reason."""

    group: str
    mount: Listed
    reason: str


def rows_wanted(
    path: Path,
    wish: Wish,
    group: str,
    kinds: tuple[str, ...],
    catalogs: Mapping[str, Catalog],
    dropped: list[Dropped],
    findings: list[Finding],
) -> "list[Part]":
    """Return the rows that a statement at `path` takes from its catalogs, which are to be of one of these
    kinds.

    Adds to `dropped` what is left out, and a finding where nothing is left.
    """
    kept: list[Part] = []
    known: list[Part] = []
    earlier, before = len(findings), len(dropped)
    for i, name in enumerate(wish.catalogs):
        if name in catalogs and of_kind((*path, "catalogs", i), catalogs[name], kinds, findings):
            known += catalogs[name].parts
            kept += _filtered(path, wish, group, catalogs[name], dropped, findings)
    kept = _named(path, wish, group, kept, [part.part for part in known], dropped, findings)
    if not kept and len(findings) == earlier:
        first = dropped[before]
        expected = (
            f"a filter that some part passes; the first one left out, {first.mount.part}: {first.reason}"
        )
        findings.append(Finding((*path, "where"), f"no part left for group {group}", expected))
    return kept


def of_kind(path: Path, catalog: Catalog, kinds: tuple[str, ...], findings: list[Finding]) -> bool:
    """Return whether a catalog is of one of these kinds, with a finding where it is not."""
    if catalog.kind not in kinds:
        article = "an" if catalog.kind[0] in "aeiou" else "a"
        expected = " or ".join(f"{'an' if kind[0] in 'aeiou' else 'a'} {kind} list" for kind in kinds)
        findings.append(Finding(path, f"{catalog.name}, {article} {catalog.kind} list", expected))
    return catalog.kind in kinds


def _filtered(
    path: Path, wish: Wish, group: str, catalog: Catalog, dropped: list[Dropped], findings: list[Finding]
) -> "Sequence[Part]":
    criteria = _criteria(path, wish, catalog.kind, findings)
    if criteria is None:
        return ()
    kept, reasons = filter_parts(catalog, criteria)
    dropped += [Dropped(group, catalog.parts[i], reason) for i, reason in reasons.items()]
    return [catalog.parts[i] for i in kept]


def _criteria(
    path: Path, wish: Wish, kind: str, findings: list[Finding]
) -> dict[str, list[str] | dict[str, float]] | None:
    """Return the filters in SI, None where one has a fault."""
    known = KINDS[kind].COLUMNS
    criteria: dict[str, list[str] | dict[str, float]] = {}
    earlier = len(findings)
    for name, wanted in wish.where.items():
        place = (*path, "where", name)
        column = column_named(known, name)
        if column is None:
            nearest = nearest_name(name, [each.name for each in known])
            findings.append(Finding(place, name, "a column of the catalog", nearest))
        elif isinstance(wanted, Window):
            criteria[name] = _window(place, wanted, column, findings) or {}
        elif column.kind not in ("text", "yes-no"):
            expected = f'a window such as {{ min = "...", max = "..." }} for {name}'
            findings.append(Finding(place, describe(wanted), expected))
        elif not wanted:
            findings.append(Finding(place, "[]", f"at least one text, or {name} left out"))
        elif column.kind == "yes-no" and not set(wanted) <= {"yes", "no"}:
            findings.append(Finding(place, describe(wanted), '"yes", "no" or both'))
        else:
            criteria[name] = list(wanted)
    return None if len(findings) > earlier else criteria


def _window(place: Path, window: Window, column: Column, findings: list[Finding]) -> dict[str, float] | None:
    if not column.numeric:
        findings.append(
            Finding(place, f"a window for {place[-1]}", 'a list of admitted texts, for example ["rubber"]')
        )
        return None
    bounds: dict[str, float] = {}
    for end in ("min", "max"):
        text = getattr(window, end)
        if text is None:
            continue
        try:
            bounds[end] = units.parse(text, "ratio" if column.kind == "count" else column.kind)
        except units.UnitError as error:
            findings.append(Finding((*place, end), error.found, error.expected, error.nearest))
            return None
        if _per_cent_is_missing(column, text, bounds[end]):
            what = f"a share ({column.name} is {column.limits.words(column.kind)})"
            expected = per_cent_wanted(what, text.strip(), bounds[end])
            findings.append(Finding((*place, end), text, expected, f"{text.strip()} %"))
            return None
    if "min" in bounds and "max" in bounds and bounds["min"] > bounds["max"]:
        findings.append(
            Finding(place, f"{window.min} to {window.max}", "the lower end first, the upper end second")
        )
        return None
    return bounds


def _per_cent_is_missing(column: Column, text: str, value: float) -> bool:
    """Return whether a window end is a share without its per cent sign that no row of the column can reach."""
    high, high_open = column.limits.high, column.limits.high_open
    is_share = column.kind == "ratio" and high < LOSS_FACTORS_BELOW
    return is_share and units.is_bare_number(text) and (value > high or (high_open and value == high))


def _named(
    path: Path,
    wish: Wish,
    group: str,
    kept: "list[Part]",
    known: list[str],
    dropped: list[Dropped],
    findings: list[Finding],
) -> "list[Part]":
    if wish.parts is None:
        return kept
    for i, part in enumerate(wish.parts):
        if part not in known:
            findings.append(
                Finding((*path, "parts", i), part, "a part of the chosen catalogs", nearest_name(part, known))
            )
    dropped += [
        Dropped(group, row, "not among the parts named") for row in kept if row.part not in wish.parts
    ]
    return [row for row in kept if row.part in wish.parts]
