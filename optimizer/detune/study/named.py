"""A design the user names: `group=part` pairs and the ballast."""

from detune.brief.brief import Brief
from detune.ground.errors import BriefError, Fault, nearest_name
from detune.ground.units import UnitError, parse
from detune.parts.catalog import Catalog
from detune.parts.kinds.mount import Mount
from detune.problem.candidates import lateral_missing
from detune.response.design import Design

SOURCE = "--design"


def named_design(brief: Brief, catalogs: dict[str, Catalog], text: str) -> Design:
    """Return the design written as "group=part, group=part, ballast=40 kg".

    Every part of every catalog of the study may be named, filters or not: the design is one the user
    has in mind, and is judged like any other. A number that several catalogs have is written
    "catalog:part". Raises BriefError with every fault.
    """
    faults: list[Fault] = []
    chosen: dict[str, Mount | None] = {}
    ballast: float | None = None
    seen: list[str] = []
    for piece in (piece.strip() for piece in text.split(",")):
        key, equals, value = (side.strip() for side in piece.partition("="))
        if not equals or not value:
            faults.append(Fault(SOURCE, None, piece, piece, 'pieces such as "group=part" or "ballast=40 kg"'))
        elif key in seen:
            faults.append(Fault(SOURCE, None, key, value, f"each group once; {key} stands here twice"))
        elif key in brief.groups:
            chosen[key] = _part(catalogs, key, value, faults)
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
    if brief.ballast is not None and "ballast" not in seen:
        steps = ", ".join(f"{step:g} kg" for step in brief.ballast.steps)
        faults.append(Fault(SOURCE, None, "ballast", "", f'the ballast, as "ballast=40 kg" (steps: {steps})'))
    mounts = tuple(mount for mount in (chosen.get(group) for group in brief.groups) if mount is not None)
    if len(mounts) == len(brief.groups):
        for finding in lateral_missing(brief, [(mount,) for mount in mounts]):
            faults.append(Fault(SOURCE, None, "parts", finding.found, finding.expected))
    if faults:
        raise BriefError(faults)
    return Design(brief.groups, mounts, ballast or 0.0)


def _part(catalogs: dict[str, Catalog], group: str, value: str, faults: list[Fault]) -> Mount | None:
    named, colon, part = value.partition(":")
    mounts = [m for catalog in catalogs.values() for m in catalog.parts if isinstance(m, Mount)]
    if colon and named in catalogs:
        found = [m for m in mounts if m.catalog == named and m.part == part.strip()]
        known = [f"{m.catalog}:{m.part}" for m in mounts]
    else:
        found = [m for m in mounts if m.part == value]
        known = [m.part for m in mounts]
    if len(found) == 1:
        return found[0]
    if found:
        spelt = " or ".join(f'"{mount.catalog}:{mount.part}"' for mount in found)
        faults.append(
            Fault(SOURCE, None, group, value, f"which of the catalogs that have this part: {spelt}")
        )
    else:
        expected = "a part of the study's catalogs"
        faults.append(Fault(SOURCE, None, group, value, expected, nearest_name(value, known)))
    return None


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
