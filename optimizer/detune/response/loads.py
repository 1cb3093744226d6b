"""The tones of a condition as loads on the freedoms, gathered by the speed they share."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import HarmonicAllowable
from detune.brief.brief import Brief, applies, body_of
from detune.brief.condition import Condition
from detune.brief.dwell import chosen_in
from detune.brief.forcing.base import Tone
from detune.response.model import Model

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]


@dataclass(frozen=True)
class Load:
    """One tone on the freedoms: `vector` (n,) or a floor motion `base` (3,), times omega**power."""

    source: str
    order: float
    vector: Complexes
    base: Complexes | None
    power: int


@dataclass(frozen=True)
class Family:
    """Loads that share one speed between `low` and `high` (Hz).

    Each inner tuple is one coherent set: loads of one order whose phases are known, added as
    phasors. Sets are added by their amplitudes.
    """

    speed: str
    low: float
    high: float
    sets: tuple[tuple[Load, ...], ...]

    @property
    def orders(self) -> tuple[float, ...]:
        return tuple(dict.fromkeys(loads[0].order for loads in self.sets))


def condition_tones(brief: Brief, condition: Condition) -> tuple[Tone, ...]:
    """Return the tones of every forcing that acts in a condition."""
    return tuple(
        tone
        for forcing in brief.forcing
        if applies(forcing.conditions, condition.name)
        for tone in forcing.tones(condition.shafts)
    )


def condition_families(brief: Brief, model: Model, condition: Condition) -> tuple[Family, ...]:
    """Return the loads of a condition, one family a speed."""
    by_speed: dict[str, list[Tone]] = {}
    for tone in condition_tones(brief, condition):
        by_speed.setdefault(tone.speed, []).append(tone)
    return tuple(
        Family(speed, tones[0].low, tones[0].high, _coherent_sets(brief, model, tones))
        for speed, tones in by_speed.items()
    )


def unit_families(
    brief: Brief, model: Model, condition: Condition, allowable: HarmonicAllowable
) -> tuple[Family, ...]:
    """Return one family for each excitation interval, holding the allowable's unit load."""
    unit = allowable.unit_load()
    assert unit is not None
    kind, direction = unit
    along = np.asarray(direction, dtype=complex)
    n = model.frame.count
    if kind == "force":
        body = brief.bodies[0].name
        rows = model.frame.motion_rows(body, model.frame.references[body])
        load = Load("unit force", 1.0, rows.T @ along, None, 0)
    else:
        load = Load("unit floor motion", 1.0, np.zeros(n, dtype=complex), along, 0)
    families = []
    for low, high in excitation_intervals(brief, (condition,)):
        low = max(low, allowable.lowest_frequency())
        if high >= low:
            families.append(Family(f"{low:.4g}-{high:.4g} Hz", low, high, ((load,),)))
    return tuple(families)


def excitation_intervals(
    brief: Brief, conditions: tuple[Condition, ...], broadband: bool = True
) -> tuple[tuple[float, float], ...]:
    """Return the excitation intervals (Hz), each order its own, without repetition and in order."""
    found = {
        (tone.order * tone.low, tone.order * tone.high)
        for condition in conditions
        for tone in condition_tones(brief, condition)
        if broadband or not tone.broadband
    }
    return tuple(sorted(found))


def steady_intervals(brief: Brief, *states: str | None) -> tuple[tuple[float, float], ...]:
    """Return the excitation intervals of the steady conditions (in these states; none named: in any).

    Separation is judged against them. Bands of a spectrum are none: broadband excitation is governed by response.
    Orders of a shaft whose speeds not to dwell at are found for each design are left out: `problem.dwell` has them.
    """
    found: set[tuple[float, float]] = set()
    if brief.floor.kind == "dynamic-stiffness":
        # A tabulated floor has resonances that its one freedom does not count: the response governs.
        return ()
    for condition in brief.conditions:
        if condition.steady and (not states or condition.state in states):
            chosen = chosen_in(brief, condition)
            moved = None if chosen is None else chosen.shaft
            found |= {
                (tone.order * tone.low, tone.order * tone.high)
                for tone in condition_tones(brief, condition)
                if not tone.broadband and tone.speed != moved
            }
    return tuple(sorted(found))


def _coherent_sets(brief: Brief, model: Model, tones: list[Tone]) -> tuple[tuple[Load, ...], ...]:
    together: dict[float, list[Load]] = {}
    alone: list[tuple[Load, ...]] = []
    for tone in tones:
        load = _load(brief, model, tone)
        if tone.phase_known:
            together.setdefault(tone.order, []).append(load)
        else:
            alone.append((load,))
    return (*(tuple(loads) for loads in together.values()), *alone)


def _load(brief: Brief, model: Model, tone: Tone) -> Load:
    vector = np.zeros(model.frame.count, dtype=complex)
    load = Load(tone.source, tone.order, vector, None, tone.power)
    if tone.base is not None:
        return replace(load, base=np.array(tone.base))
    body = body_of(brief, tone.on)
    moved = model.frame.motion_rows(body, np.array(tone.position)).T @ np.array(tone.force)
    turned = model.frame.rotation_rows(body).T @ np.array(tone.moment)
    return replace(load, vector=moved + turned)
