"""The assessor: every requirement of a brief for one design, by the exact equations, on its own.

Nothing here comes from the solvers' batch evaluation. Suprema are found by another route as well:
complex poles from the quadratic eigenproblem place the samples, and every local maximum is refined
by a bounded one-dimensional search.
"""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import (
    Allowable,
    BandAllowable,
    DesignAllowable,
    HarmonicAllowable,
    ModeAllowable,
    StaticAllowable,
)
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.views import DesignView, Places
from detune.brief.brief import Brief, applies, demanded, state_of
from detune.brief.condition import Condition
from detune.brief.dwell import without_barred
from detune.ground.units import show
from detune.response.assess_rows import livelier, mode_rows, station_rows
from detune.response.assessment import Assessment, MarginRow, PowerRow
from detune.response.bill import bill
from detune.response.damping_readings import readings_of
from detune.response.design import Design
from detune.response.direct import DirectMachine
from detune.response.direct_amplitude import (
    WorkingAmplitude,
    follows_amplitude,
    suprema_at_amplitude,
    working_amplitude,
)
from detune.response.direct_bands import direct_band_ratio
from detune.response.direct_dwell import DwellFound, Judged, dwell_found, over_left, with_left
from detune.response.direct_floor import with_force_ratio
from detune.response.direct_modes import DirectModes, direct_modes
from detune.response.direct_random import RandomPart
from detune.response.direct_stand_in import told_of_stand_ins
from detune.response.direct_supremum import (
    Pairs,
    Supremum,
    forced_suprema,
    steady_intervals,
    tones_of,
    unit_load_suprema,
)
from detune.response.direct_views import DirectStatic, DirectTone
from detune.response.margin import window_margin
from detune.response.row_notes import BY_SEVERAL, amplitude_cautions, noted, worse_reading
from detune.response.standing import toppling

Floats = NDArray[np.float64]
TWO_PI = 2.0 * np.pi


def assess(brief: Brief, design: Design) -> Assessment:
    """Return the assessment of one design. Raises UnsupportedMachine where statics have no solution."""
    brief = without_barred(brief)
    allowables, _ = demanded(brief)
    totals = design_totals(brief, design)
    rows: list[MarginRow] = []
    for allowable in allowables:
        if isinstance(allowable, DesignAllowable):
            value = float(allowable.value(totals)[0])
            rows.append(_row(allowable, "design", "whole machine", value, None, allowable.upper_limit()))
    exempt = exempt_amplification(brief)
    readings = readings_of(design.mounts)
    found = [_in_state(brief, design, name, reading) for name in states_of(brief) for reading in readings]
    dwelling = _dwelling(brief, found, allowables)
    found = [_held_against_left(each, dwelling) for each in found]
    rows += [
        _row(d.limit, d.condition.name, d.limit.shaft, d.width, None, d.allowance) for d in dwelling.values()
    ]
    for first in range(0, len(found), len(readings)):
        rows += worse_reading(
            [
                (each.reading, _rows_in_state(each, allowables, dwelling))
                for each in found[first : first + len(readings)]
            ]
        )
    kept = tuple(row for row in rows if row.upper is None or np.isfinite(row.upper))
    counted = [row.margin for row in kept if row.kind not in ("cost", "added-mass", "part-numbers")]
    installed = found[0]
    return Assessment(
        design=design,
        meets=all(row.margin >= 0.0 for row in kept),
        cost=float(totals.cost[0]),
        added_mass=float(totals.added_mass[0]),
        part_numbers=int(totals.part_numbers[0]),
        separation=min(each.modes.least_separation(exempt) for each in found),
        least_margin=min(counted),
        margins=kept,
        stations=station_rows(brief, installed.static, design),
        modes=livelier([mode_rows(each.modes, exempt, each.machine) for each in found[: len(readings)]]),
        power=tuple(power for each in found for power in _power_rows(each)),
        total_load=_total_load(installed.machine),
        notes=_notes(found[:: len(readings)], rows) + told_of_stand_ins(found, allowables),
        barred=tuple(band for d in dwelling.values() for band in d.bands),
    )


def _total_load(machine: DirectMachine) -> float:
    """Return the static load downward of everything that stands on the parts, N."""
    total = machine.dead_load[2 : 6 * len(machine.brief.bodies) : 6].sum()
    total += sum(machine.dead_load @ each.own(machine) * each.along[2] for each in machine.absorbers)
    return float(-total)


@dataclass(frozen=True)
class _InState:
    """The machine in one state and reading of unknown damping, with its statics, modes, conditions and places."""

    state: str | None
    reading: str | None
    machine: DirectMachine
    static: DirectStatic
    modes: DirectModes
    conditions: tuple[Condition, ...]
    places: Places


def _dwelling(
    brief: Brief, found: list[_InState], allowables: tuple[Allowable, ...]
) -> dict[str, DwellFound]:
    """Return what is barred in every condition that asks for speeds not to dwell at, by its name."""
    dwelling = {}
    for condition in brief.conditions:
        here = [
            Judged(each.machine, each.static, each.modes, each.places)
            for each in found
            if each.state == condition.state
        ]
        judged = dwell_found(brief, condition, here, allowables)
        if judged is not None:
            dwelling[condition.name] = judged
    return dwelling


def _held_against_left(each: _InState, dwelling: dict[str, DwellFound]) -> _InState:
    own = [d for d in dwelling.values() if d.condition.state == each.state]
    return replace(each, modes=with_left(each.modes, own)) if own else each


def _notes(found: list[_InState], rows: list[MarginRow]) -> tuple[str, ...]:
    """Return what no row says: why the machine does not stand, and amplitudes outside what parts are listed for."""
    falls = [note for each in found if (note := toppling(each.static)) is not None]
    at_rest = {condition.name: each.static for each in found for condition in each.conditions}
    return (*falls, *amplitude_cautions(rows, at_rest))


def states_of(brief: Brief) -> tuple[str | None, ...]:
    """Return the states conditions are judged in, as installed (None) first."""
    return tuple(dict.fromkeys([None, *(condition.state for condition in brief.conditions)]))


def _in_state(brief: Brief, design: Design, name: str | None, reading: str | None) -> _InState:
    machine = DirectMachine(brief, design, state_of(brief, name), reading)
    carrying = tuple(s.name for s in brief.stations if machine.share(s) > 0.0)
    fitted = tuple(absorber.station.name for absorber in machine.absorbers)
    return _InState(
        state=name,
        reading=reading,
        machine=machine,
        static=DirectStatic(machine),
        modes=direct_modes(machine, steady_intervals(brief, name)),
        conditions=tuple(c for c in brief.conditions if c.state == name),
        places=Places(
            tuple(p.name for p in brief.points), carrying, tuple(b.name for b in brief.bodies), fitted
        ),
    )


def _rows_in_state(
    each: _InState, allowables: tuple[Allowable, ...], dwelling: dict[str, DwellFound]
) -> list[MarginRow]:
    told = "" if each.state is None else f", {each.state}"
    rows: list[MarginRow] = []
    for allowable in allowables:
        if isinstance(allowable, StaticAllowable):
            rows += [
                _static_row(each.static, allowable, place, f"at rest{told}")
                for place in allowable.places(each.places)
            ]
        elif isinstance(allowable, ModeAllowable):
            value = float(allowable.value(each.modes.view)[0])
            limits = allowable.lower_limit(), allowable.upper_limit()
            rows.append(_row(allowable, f"steady conditions{told}", "whole machine", value, *limits))
    for condition in each.conditions:
        if condition.name in dwelling:
            found = dwelling[condition.name]
            rows += over_left(found, lambda piece: _rows_in_condition(each, piece, allowables))
        else:
            rows += _rows_in_condition(each, condition, allowables)
    return rows


def _rows_in_condition(
    each: _InState, condition: Condition, allowables: tuple[Allowable, ...]
) -> list[MarginRow]:
    working = working_amplitude(each.machine, condition) if follows_amplitude(each.machine) else None
    judged = _band_rows(each, condition, allowables, working)
    judged += _harmonic_rows(each, condition, allowables, working)
    stands, curves = not each.machine.topples, each.machine.rest is not None
    several = working is not None and working.several
    told = {"stands": stands, "on_curves": curves, "at_amplitude": working is not None, "several": several}
    return [noted(row, **told) for row in judged]


def _ends(each: _InState, working: WorkingAmplitude | None) -> list[tuple[DirectMachine, DirectModes]]:
    """Return the machine and its modes at the amplitudes a ratio or a band is judged at: none, and its own."""
    if working is None:
        return [(each.machine, each.modes)]
    ends = working.totals
    machines = [each.machine.at_amplitude(a) for a in (np.zeros_like(ends[0]), *ends)]
    return [(machine, direct_modes(machine, [])) for machine in machines]


def _band_rows(
    each: _InState,
    condition: Condition,
    allowables: tuple[Allowable, ...],
    working: WorkingAmplitude | None,
) -> list[MarginRow]:
    rows = []
    for allowable in allowables:
        if isinstance(allowable, BandAllowable) and applies(allowable.conditions, condition.name):
            for place in allowable.places(each.places):
                ratio, at = max(
                    (direct_band_ratio(*end, condition, allowable, place) for end in _ends(each, working)),
                    key=lambda found: found[0],
                )
                ratio = ratio if working is None or working.settled else np.inf
                frequency = None if np.isnan(at) else at
                rows.append(_row(allowable, condition.name, place, ratio, None, 1.0, frequency))
    return rows


def design_totals(brief: Brief, design: Design) -> DesignView:
    """Return cost, added mass and number of part numbers of one design."""
    rows = bill(brief, design)
    added = design.ballast + sum(
        design.mounts[design.groups.index(absorber.name)].moving_mass
        + design.mounts[design.groups.index(absorber.name)].riding_mass
        for absorber in brief.absorbers
    )
    numbers = len({(row.what, row.catalog, row.part) for row in rows if not row.by_weight})
    return DesignView(
        np.array([sum(row.cost for row in rows)]), np.array([added]), np.array([float(numbers)])
    )


def exempt_amplification(brief: Brief) -> float | None:
    """Return the amplification below which the brief exempts modes from separation, or None."""
    return next((a.exempt_amplification for a in brief.allowables if isinstance(a, Separation)), None)


def _row(
    allowable: Allowable,
    condition: str,
    place: str,
    value: float,
    lower: float | None,
    upper: float | None,
    frequency: float | None = None,
    note: str = "",
) -> MarginRow:
    margin = float(
        window_margin(
            np.array(value),
            None if lower is None or np.isnan(lower) else np.array(lower),
            None if upper is None or np.isnan(upper) else np.array(upper),
        )
    )
    return MarginRow(
        kind=allowable.kind,
        condition=condition,
        place=place,
        quantity=allowable.quantity(),
        unit=allowable.unit,
        value=value,
        lower=lower,
        upper=upper,
        # A value that is not a number must never pass.
        margin=-np.inf if np.isnan(value) else margin,
        frequency=frequency,
        note=note,
        reference=allowable.level_reference() if isinstance(allowable, HarmonicAllowable) else None,
    )


def _static_row(static: DirectStatic, allowable: StaticAllowable, place: str, condition: str) -> MarginRow:
    lower, upper = allowable.bounds(static, place)
    return _row(
        allowable,
        condition,
        place,
        float(allowable.value(static, place)[0]),
        None if lower is None else float(lower[0]),
        None if upper is None else float(upper[0]),
    )


def _harmonic_rows(
    each: _InState, condition: Condition, allowables: tuple[Allowable, ...], working: WorkingAmplitude | None
) -> list[MarginRow]:
    machine, static, names = each.machine, each.static, each.places
    harmonic = [
        a for a in allowables if isinstance(a, HarmonicAllowable) and applies(a.conditions, condition.name)
    ]
    forced = tuple((a, place) for a in harmonic if a.unit_load() is None for place in a.places(names))
    rows = []
    if forced:
        if working is None:
            under = forced_suprema(machine, each.modes, condition, forced)
        else:
            under = suprema_at_amplitude(machine, condition, forced, working)
        rows += _judged(static, condition, forced, under)
    for allowable in harmonic:
        if allowable.unit_load() is not None:
            pairs = tuple((allowable, place) for place in allowable.places(names))
            ends = [unit_load_suprema(*end, condition, allowable, pairs) for end in _ends(each, working)]
            found = _larger([end for end in ends if end is not None])
            if found is not None and working is not None and not working.settled:
                found = replace(found, value=np.full_like(found.value, np.inf))
            judged = [] if found is None else _judged(static, condition, pairs, found)
            rows += with_force_ratio(machine, allowable, judged)
    return rows


def _larger(ends: list[Supremum]) -> Supremum | None:
    best = ends[0] if ends else None
    for other in ends[1:]:
        assert best is not None
        more = other.value > best.value
        best = Supremum(np.where(more, other.value, best.value), np.where(more, other.speed, best.speed))
    return best


def _judged(static: DirectStatic, condition: Condition, pairs: Pairs, found: Supremum) -> list[MarginRow]:
    return [
        _row(
            allowable,
            condition.name,
            place,
            float(found.value[index] + allowable.offset(static, place)[0]),
            None,
            float(allowable.bound(static, place)[0]),
            None if np.isnan(found.speed[index]) else float(found.speed[index]),
            BY_SEVERAL if found.several else _random_note(allowable, found.noise, index),
        )
        for index, (allowable, place) in enumerate(pairs)
    ]


def _random_note(allowable: HarmonicAllowable, noise: RandomPart | None, index: int) -> str:
    """Return how the random part is counted: as its expected extreme, or with that beside it."""
    if noise is None:
        return ""
    lasting = show(noise.duration, "time")
    if allowable.statistic() in ("peak", "peak-to-peak"):
        return f"random part: expected extreme in {lasting}"
    return f"expected extreme of the random part in {lasting}: {show(float(noise.extreme[index]), allowable.unit)}"


def _power_rows(each: _InState) -> tuple[PowerRow, ...]:
    """Energy balance of each condition, tone by tone, at the middle of its speed range."""
    rows = []
    for condition in each.conditions:
        put_in = dissipated = 0.0
        error = 0.0
        speed = 0.0
        for tone in tones_of(each.machine.brief, condition):
            speed = 0.5 * (tone.low + tone.high)
            view = DirectTone(each.machine, (tone,), np.array([[TWO_PI * speed * tone.order]]))
            into, lost = view.power()
            put_in, dissipated = put_in + float(into[0]), dissipated + float(lost[0])
            scale = max(abs(float(into[0])), abs(float(lost[0])), np.finfo(float).tiny)
            error = max(error, abs(float(into[0]) - float(lost[0])) / scale)
        told = condition.name if each.reading is None else f"{condition.name}, {each.reading}"
        rows.append(PowerRow(told, speed, put_in, dissipated, error))
    return tuple(rows)
