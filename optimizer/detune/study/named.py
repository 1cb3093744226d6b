"""A design the user names: `group=part` pairs and the ballast."""

from detune.brief.brief import Brief
from detune.ground.errors import BriefError, Fault, nearest_name
from detune.ground.units import UnitError, parse
from detune.parts.catalog import Catalog
from detune.parts.compose import EMPTY, damper_refused, empty_station, in_parallel, with_damper
from detune.parts.kinds.damper import Damper
from detune.parts.kinds.mount import Mount
from detune.problem.candidates import lateral_missing
from detune.response.ballast import BallastStep
from detune.response.design import Design
from detune.study.named_rows import (
    SEVERAL,
    SOURCE,
    named_absorber,
    named_pad,
    named_stack,
    of_name,
    one_named,
)


def named_design(brief: Brief, catalogs: dict[str, Catalog], text: str) -> Design:
    """Return the design written as "group=part, group=2 x part + damper, group=(empty), ballast=40 kg".

    A pad is written with its size, "sheet 80 x 120 mm"; an absorber under its own name; ballast of a list in pieces,
    "ballast=3 x piece".

    Every part of every catalog of the study may be named, filters or not, in any number and with any damper: the
    design is one the user has in mind, and is judged like any other. A number that several catalogs have is
    written "catalog:part". Raises BriefError with every fault.
    """
    faults: list[Fault] = []
    chosen: dict[str, Mount | None] = {}
    ballast: float | None = None
    stack: BallastStep | None = None
    pieces_due = brief.ballast is not None and bool(brief.ballast.catalogs)
    absorbers = {absorber.name for absorber in brief.absorbers}
    seen: list[str] = []
    for piece in (piece.strip() for piece in text.split(",")):
        key, equals, value = (side.strip() for side in piece.partition("="))
        if not equals or not value:
            faults.append(Fault(SOURCE, None, piece, piece, 'pieces such as "group=part" or "ballast=40 kg"'))
        elif key in seen:
            faults.append(Fault(SOURCE, None, key, value, f"each group once; {key} stands here twice"))
        elif key in absorbers:
            chosen[key] = named_absorber(catalogs, key, value, faults)
        elif key in brief.groups:
            chosen[key] = _part(catalogs, key, value, faults)
        elif key == "ballast" and pieces_due:
            stack = named_stack(brief, catalogs, value, faults)
            ballast = None if stack is None else stack.mass
        elif key == "ballast":
            ballast = _ballast(brief, value, faults)
        else:
            names = (*brief.groups, "ballast")
            faults.append(
                Fault(SOURCE, None, key, key, "one of " + ", ".join(names), nearest_name(key, names))
            )
        seen.append(key)
    for group in brief.groups:
        if group not in chosen:
            faults.append(Fault(SOURCE, None, group, "", f'a part for group "{group}", as "{group}=part"'))
    if pieces_due and "ballast" not in seen:
        expected = 'the ballast, as "ballast=2 x part" or "ballast=(empty)"'
        faults.append(Fault(SOURCE, None, "ballast", "", expected))
    elif brief.ballast is not None and "ballast" not in seen:
        steps = ", ".join(f"{step:g} kg" for step in brief.ballast.steps)
        faults.append(Fault(SOURCE, None, "ballast", "", f'the ballast, as "ballast=40 kg" (steps: {steps})'))
    mounts = tuple(mount for mount in (chosen.get(group) for group in brief.groups) if mount is not None)
    if len(mounts) == len(brief.groups):
        for finding in lateral_missing(brief, [(mount,) for mount in mounts]):
            faults.append(Fault(SOURCE, None, "parts", finding.found, finding.expected))
    if faults:
        raise BriefError(faults)
    return Design(brief.groups, mounts, ballast or 0.0, stack)


def _part(catalogs: dict[str, Catalog], group: str, value: str, faults: list[Fault]) -> Mount | None:
    """Return what stands at a station of the group: a part, or several of it, with a damper beside them, or nothing."""
    mounts = [m for catalog in catalogs.values() for m in catalog.parts if isinstance(m, Mount)]
    whole = of_name(mounts, value)
    if len(whole) == 1:
        return whole[0]
    if value.casefold() == EMPTY:
        return empty_station(mounts[0].catalog if mounts else "")
    text, plus, beside = (side.strip() for side in value.partition(" + "))
    several = SEVERAL.fullmatch(text)
    count, name = (int(several["count"]), several["part"]) if several else (1, text)
    if count < 1:
        faults.append(Fault(SOURCE, None, group, text, f'one mount or more, for example "2 x {name}"'))
    before = len(faults)
    pad = named_pad(catalogs, group, name, faults)
    if len(faults) > before:
        return None
    expected = ("a part of the study's catalogs", f'"{EMPTY}"')
    found = pad if pad is not None else one_named(mounts, group, name, expected, faults)
    dampers = [d for catalog in catalogs.values() for d in catalog.parts if isinstance(d, Damper)]
    wanted = ("a damper of the study's catalogs",)
    damper = one_named(dampers, group, beside, wanted, faults) if plus else None
    if found is None or count < 1 or (plus and damper is None):
        return None
    mount = in_parallel(found, count)
    if damper is None:
        return mount
    reason = damper_refused(mount, damper)
    if reason is not None:
        faults.append(
            Fault(SOURCE, None, group, value, f"a damper that can stand beside this mount: {reason}")
        )
        return None
    return with_damper(mount, damper)


def _ballast(brief: Brief, value: str, faults: list[Fault]) -> float | None:
    try:
        mass = parse(value, "mass")
    except UnitError as error:
        faults.append(Fault(SOURCE, None, "ballast", error.found, error.expected, error.nearest))
        return None
    if mass < 0.0 or (brief.ballast is None and mass > 0.0):
        faults.append(
            Fault(SOURCE, None, "ballast", value, "zero, or more where the study has a [ballast] table")
        )
        return None
    return mass
