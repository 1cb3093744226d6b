"""What a problem replaces or approximates for the parts it may choose, in words for the report."""

from collections.abc import Callable, Iterable

from detune.brief.brief import Brief, applies, body_of
from detune.brief.condition import Condition
from detune.brief.dwell import dwell_notes
from detune.ground.units import show
from detune.parts.kinds.mount import Mount

NAMED = 4


def problem_notes(brief: Brief, candidates: tuple[tuple[Mount, ...], ...]) -> tuple[str, ...]:
    """Return what is taken in another form than stated, for any part that some group may take."""
    mounts = tuple(dict.fromkeys(mount for group in candidates for mount in group))
    return (
        *_in_time(brief, mounts),
        *_laws(brief, mounts),
        *_structure(brief),
        *_guided(brief),
        *dwell_notes(brief),
        *_pads(mounts),
        *_absorbers(brief),
        *_pieces(brief),
    )


def _pads(mounts: tuple[Mount, ...]) -> list[str]:
    cut = _named(mounts, lambda mount: bool(mount.approximate))
    if not cut:
        return []
    return [
        f"stiffness of pads ({cut}) is estimated from the rubber and the shape factor, both faces held from "
        "sliding: good for a first size, not for a proof"
    ]


def _pieces(brief: Brief) -> list[str]:
    if brief.ballast is None or not brief.ballast.catalogs or brief.scatter is None:
        return []
    return ["the tolerance of pieces of ballast is not in the scatter: each has its listed mass"]


def _absorbers(brief: Brief) -> list[str]:
    return [
        f"{absorber.name}: a point mass guided on its body along its direction; its mode counts in separation "
        "like any other, its stroke from where it rests, and its spring is not limited at rest"
        + ("; set to another tuning it keeps mass, damping ratio and stroke" if absorber.tunings else "")
        for absorber in brief.absorbers
    ]


def _structure(brief: Brief) -> list[str]:
    structure = brief.structure
    if structure is None or structure.modes.left_out == 0:
        return []
    kept, highest = len(structure.modes.frequency), show(structure.modes.frequency[-1], "frequency")
    return [
        f"{structure.name}: {structure.modes.left_out} modes above {highest} are left out ({kept} are kept); "
        "at rest and in vibration it yields by the modes kept alone"
    ]


def _guided(brief: Brief) -> list[str]:
    """A direction in which a body is not free is held against the ground, whatever else the body stands on."""
    bodies = {body.name: body for body in brief.bodies}
    notes = []
    for station in brief.stations:
        own, other = bodies[body_of(brief, station.on)], bodies.get(station.to)
        held = [] if other is None else [f for f in other.free if f not in own.free]
        if other is not None and held:
            notes.append(
                f"{own.name}: along {', '.join(held)} it is held by the ground and not by {other.name}, whose "
                "motion there the parts between them therefore resist; let it be free there if it goes along "
                f"with {other.name}"
            )
    return list(dict.fromkeys(notes))


def _in_time(brief: Brief, mounts: tuple[Mount, ...]) -> list[str]:
    lossy = any(any(mount.loss_factor) for mount in mounts) or any(c.loss_factor for c in brief.connections)
    changing = _named(mounts, lambda m: m.relaxation is not None or m.law_table is not None)
    notes = []
    for condition in brief.conditions:
        if not _calculated_in_time(brief, condition):
            continue
        if lossy:
            notes.append(
                f'loss-factor damping in condition "{condition.name}" stands as viscous damping of each mode\'s own'
                " loss factor, as a loss factor is not causal"
            )
        if changing:
            notes.append(
                f'stiffness over frequency ({changing}) in condition "{condition.name}": each mode keeps the stiffness'
                " and damping of its own natural frequency"
            )
    return notes


def _laws(brief: Brief, mounts: tuple[Mount, ...]) -> list[str]:
    tabled = _named(mounts, lambda m: m.law_table is not None)
    curved = _named(mounts, lambda m: m.load_curve is not None or m.follows_load)
    moving = _named(mounts, lambda m: m.amplitude_table is not None)
    unknown = _named(mounts, lambda m: m.damping_unknown is not None)
    shocked = any(_transients(brief, condition) for condition in brief.conditions)
    notes = []
    if tabled:
        notes.append(f"table of {tabled}: taken at its end value for natural frequencies outside it")
    if curved:
        whole = (
            "; in shocks and records the whole curve counts, and a part that leaves it fails"
            if shocked
            else ""
        )
        notes.append(
            f"load-deflection curve of {curved}: tones, noise and run-ups see its tangent stiffness at rest{whole}"
        )
    if moving:
        notes.append(
            f"stiffness over amplitude of {moving}: every response is taken at the amplitude it produces "
            "itself, found by iteration; natural frequencies and separation at the listed stiffness; ratios "
            "to a unit load and band limits at the worse of that amplitude and none; beyond the ends of a "
            "table its end values hold"
        )
    if unknown:
        notes.append(
            f"damping of unknown kind ({unknown}): every response is judged with it read as viscous and read "
            "as a loss factor, and the worse counts"
        )
    return notes


def _calculated_in_time(brief: Brief, condition: Condition) -> bool:
    return bool(condition.run_up or condition.coast_down) or _transients(brief, condition)


def _transients(brief: Brief, condition: Condition) -> bool:
    return any(f.transients() for f in brief.forcing if applies(f.conditions, condition.name))


def _named(mounts: Iterable[Mount], chosen: Callable[[Mount], bool]) -> str:
    """Return the names of the mounts that are chosen, the first few of many; empty where there is none."""
    names = list(dict.fromkeys(mount.base or mount.part for mount in mounts if chosen(mount)))
    more = f" and {len(names) - NAMED} more" if len(names) > NAMED else ""
    return ", ".join(names[:NAMED]) + more
