"""Which parts each group may take, and why the others are left out before any design is looked at."""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, cast

from detune.brief.brief import Brief, applies
from detune.brief.choice import Choice
from detune.brief.finding import Finding, Path
from detune.brief.statement import unit_direction
from detune.ground.errors import nearest_name
from detune.parts.catalog import Catalog
from detune.parts.compose import damper_refused, empty_station, in_parallel, with_damper
from detune.parts.kinds.mount import Mount
from detune.parts.laws import ROOM_TEMPERATURE
from detune.problem.listed import Dropped, of_kind, rows_wanted
from detune.problem.other_candidates import absorber_candidates, ballast_candidates, pieces_of
from detune.response.ballast import NOTHING, BallastStep

if TYPE_CHECKING:
    from detune.parts.kinds import Part
    from detune.parts.kinds.damper import Damper
    from detune.parts.kinds.pad import Pad

__all__ = ["Candidates", "Dropped", "excited_range", "find_candidates", "lateral_missing"]


@dataclass(frozen=True)
class Candidates:
    """The parts each group may take, in the brief's order of groups, those left out, and the ballast by cost.

    An absorber is a group of its own, of parts with a moving mass; the groups of absorbers come last.
    """

    mounts: tuple[tuple[Mount, ...], ...]
    dropped: tuple[Dropped, ...]
    findings: tuple[Finding, ...]
    ballast: tuple[BallastStep, ...] = (NOTHING,)


def find_candidates(brief: Brief, catalogs: Mapping[str, Catalog]) -> Candidates:
    """Return the candidates of every group, and every fault in the choices that only the catalogs show."""
    findings: list[Finding] = []
    dropped: list[Dropped] = []
    mounts: list[tuple[Mount, ...]] = []
    for group in brief.station_groups:
        index, choice = next((i, c) for i, c in enumerate(brief.choices) if c.group == group)
        path: Path = ("choice", index)
        rows = rows_wanted(path, choice, group, ("mount", "pad"), catalogs, dropped, findings)
        kept = _mounts(path, choice, rows, dropped, findings)
        mounts.append(_composed(path, choice, kept, catalogs, dropped, findings))
    findings += lateral_missing(brief, mounts)
    findings += _outside_tables(brief, mounts)
    mounts += absorber_candidates(brief, catalogs, dropped, findings)
    ballast = ballast_candidates(brief, catalogs, dropped, findings)
    return Candidates(tuple(mounts), tuple(dropped), tuple(findings), ballast)


def _mounts(
    path: Path, choice: Choice, rows: "list[Part]", dropped: list[Dropped], findings: list[Finding]
) -> list[Mount]:
    """Return the rows of a choice as mounts: each sheet of a pad list in every size that can be cut from it."""
    found = [row for row in rows if isinstance(row, Mount)]
    sheets = cast("list[Pad]", [row for row in rows if not isinstance(row, Mount)])
    if choice.sizes and rows and not sheets:
        expected = 'a list of pads among the catalogs, or no "sizes", which are those that pads are cut to'
        findings.append(Finding((*path, "sizes"), f"{len(choice.sizes)} sizes", expected))
    if sheets and not choice.sizes:
        expected = 'the sizes pads may be cut to, as "sizes", for example [["80 mm", "120 mm"]]'
        findings.append(Finding(path, f"pads of {sheets[0].catalog}", expected))
    cut = pieces_of(sheets, choice, dropped)
    if sheets and choice.sizes and not cut and not found:
        first = next(each for each in reversed(dropped) if each.group == choice.group)
        expected = f"a size that some sheet can be cut to; {first.reason}"
        findings.append(Finding((*path, "sizes"), f"no pad left for group {choice.group}", expected))
    return [*found, *cut]


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
        elif of_kind((*path, "dampers", i), catalogs[name], ("damper",), findings):
            dampers += cast("tuple[Damper, ...]", catalogs[name].parts)
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


def lateral_missing(brief: Brief, mounts: list[tuple[Mount, ...]]) -> list[Finding]:
    """A part without lateral stiffness can only stand where nothing but its axis matters."""
    vertical_only = all(freedom == "z" for body in brief.bodies for freedom in body.free)
    findings = []
    for group, candidates in zip(brief.station_groups, mounts, strict=False):
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
    for group, candidates in zip(brief.station_groups, mounts, strict=False):
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
                    found = (
                        f"{state.temperature:g} degC; the table of {mount.part} covers {warm[0]:g} to "
                        f"{warm[-1]:g} degC"
                    )
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
