"""Forcing and limits that are each sound and yet cannot be judged together, told before any design is looked at."""

from detune.brief.allowable.base import BandAllowable, HarmonicAllowable
from detune.brief.brief import Brief, applies
from detune.brief.condition import Condition
from detune.brief.finding import Finding, Path
from detune.brief.forcing.base import Forcing, Tone, Transient
from detune.brief.statement import Direction
from detune.physics.octaves import band_edges

# Components below this share of the whole are rounding of the digits people write.
NOTHING = 1e-9


def not_matching(brief: Brief) -> list[Finding]:
    """Return the forcing that nothing follows and the limits that the forcing of their conditions does not allow."""
    findings = []
    for index, forcing in enumerate(brief.forcing):
        findings += _floor_motion(brief, ("forcing", index), forcing)
    for index, allowable in enumerate(brief.allowables):
        path: Path = ("allowable", index)
        if allowable.kind == "separation":
            findings += _nothing_to_separate_from(brief, path)
        elif isinstance(allowable, BandAllowable):
            findings += _bands(brief, path, allowable)
        elif isinstance(allowable, HarmonicAllowable):
            if allowable.kind == "floor-velocity" and brief.floor.kind == "rigid":
                expected = "a floor that is not rigid, whose velocity the parts decide"
                findings.append(Finding(path, "floor-velocity", expected, depends=("floor",)))
            if allowable.kind in ("transmissibility", "floor-ratio"):
                findings += _no_excitation_frequency(brief, path, allowable)
            findings += _in_time(brief, path, allowable)
    return findings


def acting(brief: Brief, condition: Condition) -> list[Forcing]:
    """Return the forcing of a condition, without what follows a shaft that the condition does not state."""
    return [
        forcing
        for forcing in brief.forcing
        if applies(forcing.conditions, condition.name) and forcing.shaft_needed() in (None, *condition.shafts)
    ]


def _floor_motion(brief: Brief, path: Path, forcing: Forcing) -> list[Finding]:
    direction = forcing.floor_direction()
    if direction is None:
        return []
    if brief.structure is not None:
        expected = (
            "no motion of the floor beside a [structure]: how the supports that hold it move is not stated"
        )
        return [Finding(path, forcing.name, expected, depends=("structure",))]
    free = {axis for body in brief.bodies for axis in body.free}
    if all(abs(part) < NOTHING or axis in free for axis, part in zip("xyz", direction, strict=True)):
        return []
    known = ", ".join(axis for axis in "xyz" if axis in free) or "none of x, y and z"
    expected = f"floor motion in a direction in which a body can follow it: the bodies are free in {known}"
    return [Finding((*path, "direction"), _shown(direction), expected, depends=("body",))]


def _shown(direction: Direction) -> str:
    axes = {(1.0, 0.0, 0.0): "x", (0.0, 1.0, 0.0): "y", (0.0, 0.0, 1.0): "z"}
    return axes.get(direction, "[" + ", ".join(f"{part:.4g}" for part in direction) + "]")


def _tones(brief: Brief, condition: Condition) -> list[Tone]:
    return [tone for forcing in acting(brief, condition) for tone in forcing.tones(condition.shafts)]


def _nothing_to_separate_from(brief: Brief, path: Path) -> list[Finding]:
    steady = [condition for condition in brief.conditions if condition.steady]
    if not steady or any(_tones(brief, condition) for condition in steady):
        return []
    expected = (
        "a tone in some steady condition: under random or shock forcing alone no frequency is to be kept away from, "
        "and the limits on the response decide"
    )
    return [Finding(path, "separation", expected, depends=("condition", "forcing"))]


def _no_excitation_frequency(brief: Brief, path: Path, allowable: HarmonicAllowable) -> list[Finding]:
    """A ratio is judged at the excitation frequencies; where no tone acts there are none."""
    conditions = [c for c in brief.conditions if applies(allowable.conditions, c.name)]
    if not conditions or any(_tones(brief, condition) for condition in conditions):
        return []
    expected = (
        "a condition in which a tone acts: a ratio is judged at the excitation frequencies, and random or shock "
        "forcing is limited by its response"
    )
    return [Finding(path, allowable.kind, expected, depends=("condition", "forcing"))]


def _bands(brief: Brief, path: Path, allowable: BandAllowable) -> list[Finding]:
    """Band limits under shocks, and those whose bands nothing excites."""
    low, high = (
        float(edge[which]) for edge, which in zip(band_edges(allowable.bands()[0]), (0, -1), strict=True)
    )
    excited = False
    for condition in brief.conditions:
        if not applies(allowable.conditions, condition.name):
            continue
        for forcing in acting(brief, condition):
            if forcing.transients():
                expected = (
                    f'tones and noise alone under a band limit: a record with use = "spectrum" or "lines", or '
                    f'conditions without "{forcing.name}", as "conditions"'
                )
                return [Finding(path, allowable.kind, expected, depends=("condition", "forcing"))]
            reach = [
                (tone.order * tone.low, tone.order * tone.high) for tone in forcing.tones(condition.shafts)
            ]
            reach += [
                (float(n.spectrum.frequency[0]), float(n.spectrum.frequency[-1])) for n in forcing.noises()
            ]
            excited = excited or any(first <= high and last >= low for first, last in reach)
    if excited or not brief.conditions:
        return []
    reach_of = f"{low:.3g} to {high:.4g} Hz"
    expected = f"an excitation within the bands of the curve, {reach_of}; outside them nothing is judged"
    return [Finding(path, allowable.kind, expected, depends=("condition", "forcing"))]


def _in_time(brief: Brief, path: Path, allowable: HarmonicAllowable) -> list[Finding]:
    """Limits that a response in time cannot be held against."""
    if allowable.unit_load() is not None:
        return []
    for condition in brief.conditions:
        if not applies(allowable.conditions, condition.name):
            continue
        for forcing in acting(brief, condition):
            for transient in forcing.transients():
                expected = _why_not(allowable, transient, forcing, condition)
                if expected:
                    return [Finding(path, allowable.kind, expected, depends=("condition", "forcing"))]
    return []


def _why_not(
    allowable: HarmonicAllowable, transient: Transient, forcing: Forcing, condition: Condition
) -> str:
    where = f'conditions without "{forcing.name}", as "conditions" ("{condition.name}" has it)'
    if allowable.has_weighting():
        return f"tones and noise alone under a frequency-weighted limit: {where}"
    if transient.base is not None and not transient.weight_acts and allowable.kind == "displacement":
        return f'kind = "relative-motion" with to = "floor" under {_never_ends(transient)}; or {where}'
    if transient.record is None and allowable.statistic() == "rms":
        return f'measure = "peak" under a shock, whose rms depends on how long one looks; or {where}'
    return ""


def _never_ends(transient: Transient) -> str:
    """Say why an absolute displacement has no largest value under a motion of the floor."""
    if transient.record is not None:
        return "a record of the floor's acceleration, which does not say where the floor was nor how fast at its start"
    return (
        "a pulse or step, after which the floor keeps the velocity it was given (it is at rest before), so that its "
        "displacement grows for ever"
    )
