"""A design the user names: `group=part` pairs and the ballast."""

from detune.brief.brief import Brief
from detune.ground.errors import BriefError, Fault, nearest_name
from detune.ground.units import UnitError, parse
from detune.parts.catalog import Catalog
from detune.parts.kinds.mount import Mount
from detune.response.design import Design

SOURCE = "--design"


def named_design(brief: Brief, catalogs: dict[str, Catalog], text: str) -> Design:
    """Return the design written as "group=part, group=part, ballast=40 kg".

    Every part of every catalog of the study may be named, filters or not: the design is one the user
    has in mind, and is judged like any other. Raises BriefError with every fault.
    """
    faults: list[Fault] = []
    chosen: dict[str, Mount] = {}
    ballast: float | None = None
    known = {part.part: part for catalog in catalogs.values() for part in catalog.parts}
    for piece in (piece.strip() for piece in text.split(",")):
        key, equals, value = (side.strip() for side in piece.partition("="))
        if not equals or not value:
            faults.append(Fault(SOURCE, None, piece, piece, 'pieces such as "group=part" or "ballast=40 kg"'))
        elif key in brief.groups and value in known:
            chosen[key] = known[value]
        elif key in brief.groups:
            faults.append(
                Fault(SOURCE, None, key, value, "a part of the study's catalogs", nearest_name(value, known))
            )
        elif key == "ballast":
            ballast = _ballast(brief, value, faults)
        else:
            names = (*brief.groups, "ballast")
            faults.append(
                Fault(SOURCE, None, key, key, "one of " + ", ".join(names), nearest_name(key, names))
            )
    for group in brief.groups:
        if group not in chosen and not faults:
            faults.append(Fault(SOURCE, None, group, "", f'a part for group "{group}", as "{group}=part"'))
    if ballast is None and brief.ballast is not None and not faults:
        steps = ", ".join(f"{step:g} kg" for step in brief.ballast.steps)
        faults.append(Fault(SOURCE, None, "ballast", "", f'the ballast, as "ballast=40 kg" (steps: {steps})'))
    if faults:
        raise BriefError(faults)
    return Design(brief.groups, tuple(chosen[group] for group in brief.groups), ballast or 0.0)


def _ballast(brief: Brief, value: str, faults: list[Fault]) -> float | None:
    try:
        mass = parse(value, "mass")
    except UnitError as error:
        faults.append(Fault(SOURCE, None, "ballast", error.found, error.expected))
        return None
    if mass < 0.0 or (brief.ballast is None and mass > 0.0):
        faults.append(
            Fault(SOURCE, None, "ballast", value, "zero, or more where the study has a [ballast] table")
        )
        return None
    return mass
