"""Which parts each group may take, and why the others are left out before any design is looked at."""

from collections.abc import Mapping
from dataclasses import dataclass

from detune.brief.brief import Brief, applies
from detune.brief.choice import Choice, Window
from detune.brief.finding import Finding, Path
from detune.brief.statement import describe, unit_direction
from detune.ground import units
from detune.ground.errors import nearest_name
from detune.parts.catalog import Catalog, filter_parts
from detune.parts.columns import column_named
from detune.parts.compose import damper_refused, empty_station, in_parallel, with_damper
from detune.parts.kinds import KINDS
from detune.parts.kinds.damper import Damper
from detune.parts.kinds.mount import Mount
from detune.response.part_laws import ROOM_TEMPERATURE


@dataclass(frozen=True)
class Dropped:
    """A part that a group may not take, and the reason."""

    group: str
    mount: Mount
    reason: str


@dataclass(frozen=True)
class Candidates:
    """The parts each group may take, in the brief's order of groups, and those left out."""

    mounts: tuple[tuple[Mount, ...], ...]
    dropped: tuple[Dropped, ...]
    findings: tuple[Finding, ...]


def find_candidates(brief: Brief, catalogs: Mapping[str, Catalog]) -> Candidates:
    """Return the candidates of every group, and every fault in the choices that only the catalogs show."""
    findings: list[Finding] = []
    dropped: list[Dropped] = []
    mounts: list[tuple[Mount, ...]] = []
    for group in brief.groups:
        index, choice = next((i, c) for i, c in enumerate(brief.choices) if c.group == group)
        path: Path = ("choice", index)
        kept: list[Mount] = []
        earlier, before = len(findings), len(dropped)
        for i, name in enumerate(choice.catalogs):
            if name in catalogs and _of_kind((*path, "catalogs", i), catalogs[name], "mount", findings):
                kept += _from_catalog(path, choice, catalogs[name], dropped, findings)
        kept = _named(path, choice, kept, catalogs, dropped, findings)
        if not kept and len(findings) == earlier:
            first = dropped[before]
            expected = (
                f"a filter that some part passes; the first one left out, {first.mount.part}: {first.reason}"
            )
            findings.append(Finding((*path, "where"), f"no part left for group {group}", expected))
        mounts.append(_composed(path, choice, kept, catalogs, dropped, findings))
    findings += lateral_missing(brief, mounts)
    findings += _outside_tables(brief, mounts)
    return Candidates(tuple(mounts), tuple(dropped), tuple(findings))


def _of_kind(path: Path, catalog: Catalog, kind: str, findings: list[Finding]) -> bool:
    if catalog.kind != kind:
        findings.append(Finding(path, f"{catalog.name}, a {catalog.kind} list", f"a {kind} list"))
    return catalog.kind == kind


def _composed(
    path: Path,
    choice: Choice,
    kept: list[Mount],
    catalogs: Mapping[str, Catalog],
    dropped: list[Dropped],
    findings: list[Finding],
) -> tuple[Mount, ...]:
    """Return the parts with every admitted count in parallel and every damper beside them, and the empty station."""
    dampers: list[Damper] = []
    for i, name in enumerate(choice.dampers):
        if name not in catalogs:
            findings.append(Finding((*path, "dampers", i), name, "a catalog", nearest_name(name, catalogs)))
        elif _of_kind((*path, "dampers", i), catalogs[name], "damper", findings):
            dampers += [part for part in catalogs[name].parts if isinstance(part, Damper)]
    found: list[Mount] = []
    for count in choice.parallel:
        for mount in kept:
            several = in_parallel(mount, count)
            found.append(several)
            for damper in dampers:
                reason = damper_refused(several, damper)
                if reason is None:
                    found.append(with_damper(several, damper))
                else:
                    dropped.append(Dropped(choice.group, several, reason))
    if choice.empty:
        found.append(empty_station(choice.catalogs[0]))
    return tuple(found)


def _from_catalog(
    path: Path, choice: Choice, catalog: Catalog, dropped: list[Dropped], findings: list[Finding]
) -> list[Mount]:
    known = KINDS[catalog.kind].COLUMNS
    criteria: dict[str, list[str] | dict[str, float]] = {}
    sound = True
    for name, wanted in choice.where.items():
        place = (*path, "where", name)
        column = column_named(known, name)
        if column is None:
            findings.append(
                Finding(
                    place, name, "a column of the catalog", nearest_name(name, [each.name for each in known])
                )
            )
            sound = False
        elif isinstance(wanted, Window):
            window = _window(place, wanted, column.kind, findings)
            sound = sound and window is not None
            criteria[name] = window or {}
        elif column.kind not in ("text", "yes-no"):
            findings.append(
                Finding(
                    place, describe(wanted), f'a window such as {{ min = "...", max = "..." }} for {name}'
                )
            )
            sound = False
        elif not wanted:
            findings.append(Finding(place, "[]", f"at least one text, or {name} left out"))
            sound = False
        elif column.kind == "yes-no" and not set(wanted) <= {"yes", "no"}:
            findings.append(Finding(place, describe(wanted), '"yes", "no" or both'))
            sound = False
        else:
            criteria[name] = list(wanted)
    if not sound:
        return []
    kept, reasons = filter_parts(catalog, criteria)
    dropped += [Dropped(choice.group, catalog.mounts[i], reason) for i, reason in reasons.items()]
    return [catalog.mounts[i] for i in kept]


def _window(place: Path, window: Window, kind: str, findings: list[Finding]) -> dict[str, float] | None:
    if kind in ("text", "yes-no"):
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
            bounds[end] = units.parse(text, "ratio" if kind == "count" else kind)
        except units.UnitError as error:
            findings.append(Finding((*place, end), error.found, error.expected, error.nearest))
            return None
    if "min" in bounds and "max" in bounds and bounds["min"] > bounds["max"]:
        findings.append(
            Finding(place, f"{window.min} to {window.max}", "the lower end first, the upper end second")
        )
        return None
    return bounds


def _named(
    path: Path,
    choice: Choice,
    kept: list[Mount],
    catalogs: Mapping[str, Catalog],
    dropped: list[Dropped],
    findings: list[Finding],
) -> list[Mount]:
    if choice.parts is None:
        return kept
    known = [m.part for name in choice.catalogs if name in catalogs for m in catalogs[name].mounts]
    for i, part in enumerate(choice.parts):
        if part not in known:
            findings.append(
                Finding((*path, "parts", i), part, "a part of the chosen catalogs", nearest_name(part, known))
            )
    dropped += [
        Dropped(choice.group, m, "not among the parts named") for m in kept if m.part not in choice.parts
    ]
    return [m for m in kept if m.part in choice.parts]


def lateral_missing(brief: Brief, mounts: list[tuple[Mount, ...]]) -> list[Finding]:
    """A part without lateral stiffness can only stand where nothing but its axis matters."""
    vertical_only = all(freedom == "z" for body in brief.bodies for freedom in body.free)
    findings = []
    for group, candidates in zip(brief.groups, mounts, strict=True):
        upright = all(
            abs(unit_direction(station.axial)[2]) == 1.0
            for station in brief.stations
            if station.group == group
        )
        if vertical_only and upright:
            continue
        index = next(i for i, c in enumerate(brief.choices) if c.group == group)
        bare = [m.part for m in candidates if m.stiffness_dynamic[0] is None]
        if bare:
            listed = ", ".join(bare[:5]) + (f" and {len(bare) - 5} more" if len(bare) > 5 else "")
            findings.append(
                Finding(
                    ("choice", index),
                    f"no lateral stiffness for {listed}",
                    "lateral stiffness for every part chosen, or upright stations and vertical motion alone",
                )
            )
    return findings


def _outside_tables(brief: Brief, mounts: list[tuple[Mount, ...]]) -> list[Finding]:
    """A measured table says nothing outside its own frequencies and temperatures."""
    asked = excited_range(brief)
    findings = []
    for group, candidates in zip(brief.groups, mounts, strict=True):
        index = next(i for i, c in enumerate(brief.choices) if c.group == group)
        for mount in candidates:
            table = mount.law_table
            if table is None:
                continue
            low, high = table.frequency[0], table.frequency[-1]
            if asked is not None and (asked[0] < low or asked[1] > high):
                found = f"{mount.part}: its table covers {low:g} to {high:g} Hz"
                expected = f"a table over all that excites, {asked[0]:.4g} to {asked[1]:.4g} Hz"
                findings.append(Finding(("choice", index), found, expected))
            warm = table.temperature
            if warm and not warm[0] <= ROOM_TEMPERATURE <= warm[-1]:
                found = f"{mount.part}: its table covers {warm[0]:g} to {warm[-1]:g} degC"
                expected = f"a table that holds {ROOM_TEMPERATURE:g} degC, at which the machine is judged as installed"
                findings.append(Finding(("choice", index), found, expected))
            for number, state in enumerate(brief.states):
                if warm and not warm[0] <= state.temperature <= warm[-1]:
                    found = f"{state.temperature:g} degC; the table of {mount.part} covers {warm[0]:g} to {warm[-1]:g} degC"
                    findings.append(
                        Finding(("state", number, "temperature"), found, "a temperature inside it")
                    )
    return findings


def excited_range(brief: Brief) -> tuple[float, float] | None:
    """Return the lowest and highest frequency (Hz) of tones and noise in any condition, None if there is none."""
    ends: list[float] = []
    for condition in brief.conditions:
        for forcing in brief.forcing:
            if not applies(forcing.conditions, condition.name):
                continue
            for tone in forcing.tones(condition.shafts):
                ends += [tone.order * tone.low, tone.order * tone.high]
            for noise in forcing.noises():
                ends += [float(noise.spectrum.frequency[0]), float(noise.spectrum.frequency[-1])]
    return (min(ends), max(ends)) if ends else None
