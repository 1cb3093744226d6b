"""The problem in arrays for a second opinion: written from the model alone, apart from the bounded search's arrays.

It is a relaxation. The machine as installed is stated with its load windows, sag, tilt and separation, and tones at
points; everything else is left to the problem's own final test. A station with parts in parallel counts several times.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.load_range import LoadRange
from detune.brief.allowable.sag import Sag
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.tilt import Tilt
from detune.brief.allowable.velocity import Velocity
from detune.problem.build import Problem

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Integers = NDArray[np.intp]
TWO_PI = 2.0 * np.pi
# omega to this power makes the quantity of a displacement.
RATES = {Displacement: 0, Velocity: 1, Acceleration: 2}
# A peak of the tone for each unit of the stated measure.
PEAK = {"peak": 1.0, "3-sigma": 1.0, "rms": 2.0**0.5, "peak-to-peak": 0.5}


@dataclass(frozen=True, eq=False)
class ToneSet:
    """Loads of one order that act together between two speeds (Hz), and limits on what they may do.

    vectors: (load (n,), power of omega) each. rows (R, n), limit (R,) and rate (R,): omega^rate |row q| <= limit.
    """

    order: float
    low: float
    high: float
    vectors: tuple[tuple[Complexes, int], ...]
    rows: Floats
    limit: Floats
    rate: Floats

    def load(self, omega: float) -> Complexes:
        """Return the load (n,) at omega."""
        parts = [vector * omega**power for vector, power in self.vectors]
        return np.asarray(np.sum(parts, axis=0), dtype=np.complex128)

    def limits(self, omega: float) -> Floats:
        """Return the limits (R,) of |row q| at omega."""
        return np.asarray(self.limit / omega**self.rate)


@dataclass(frozen=True, eq=False)
class Statement:
    """The arrays, with S stations, n freedoms, B ballast steps, and P parts of each group.

    rows (S, 3, n): deflection of the station in its axes, axis 2 along the part. group, parallel (S,).
    cost: (P,) of each whole group; step_cost (B,). static, dynamic, loss, viscous: (P, 3) of one part of each group.
    lower, upper: (P,) window of the static compression -rows[s, 2] q for each station, m.
    fixed_static, fixed_hysteretic, fixed_viscous (n, n); fixed_dynamic, mass (B, n, n); load (B, n).
    sag_rows (T, n) with least (T,) and most (T,). bands (I, 2) in Hz and the separation (I,) required, -1 for none.
    """

    rows: Floats
    group: Integers
    parallel: Floats
    cost: tuple[Floats, ...]
    step_cost: Floats
    static: tuple[Floats, ...]
    dynamic: tuple[Floats, ...]
    loss: tuple[Floats, ...]
    viscous: tuple[Floats, ...]
    lower: tuple[Floats, ...]
    upper: tuple[Floats, ...]
    fixed_static: Floats
    fixed_dynamic: Floats
    fixed_hysteretic: Floats
    fixed_viscous: Floats
    mass: Floats
    load: Floats
    sag_rows: Floats
    least: Floats
    most: Floats
    bands: Floats
    separation: Floats
    tones: tuple[ToneSet, ...]

    @property
    def sizes(self) -> tuple[int, ...]:
        """Number of parts of each group."""
        return tuple(len(cost) for cost in self.cost)

    def assembled(self, fixed: Floats, axes: list[Floats]) -> Floats:
        """Return fixed (n, n) plus what the stations add for axis values (3,) of each group."""
        total = fixed.copy()
        for rows, group, parallel in zip(self.rows, self.group, self.parallel, strict=True):
            total += parallel * rows.T @ (axes[group][:, None] * rows)
        return total


def statement_of(problem: Problem) -> Statement:
    """Return the statement of a problem as installed."""
    model = problem.model
    arrays = [group.arrays for group in model.groups]
    bought = [
        sum(station.bought for station in model.stations if station.group == index)
        for index in range(len(model.groups))
    ]
    windows = [_window(problem, number) for number in range(len(model.stations))]
    sag_rows, least, most = _rest(problem)
    bands, separation = _bands(problem)
    geometric = model.geometric if model.with_gravity_stiffness else np.zeros_like(model.mass)
    return Statement(
        rows=np.array([station.rows for station in model.stations]),
        group=np.array([station.group for station in model.stations], dtype=np.intp),
        parallel=np.array([float(station.parallel) for station in model.stations]),
        cost=tuple(np.asarray(n * each.cost) for n, each in zip(bought, arrays, strict=True)),
        step_cost=model.ballast_cost,
        static=tuple(each.stiffness_static for each in arrays),
        dynamic=tuple(each.stiffness_dynamic for each in arrays),
        loss=tuple(each.stiffness_dynamic * each.loss_factor for each in arrays),
        viscous=tuple(each.viscous for each in arrays),
        lower=tuple(low for low, _ in windows),
        upper=tuple(high for _, high in windows),
        fixed_static=model.fixed_static,
        fixed_dynamic=model.fixed_dynamic + geometric,
        fixed_hysteretic=model.fixed_hysteretic,
        fixed_viscous=model.fixed_viscous,
        mass=model.mass,
        load=model.weight,
        sag_rows=sag_rows,
        least=least,
        most=most,
        bands=bands,
        separation=separation,
        tones=_tones(problem),
    )


def _window(problem: Problem, number: int) -> tuple[Floats, Floats]:
    """Return the static compression (P,) that each part's load range leaves at a station."""
    station = problem.model.stations[number]
    arrays = problem.model.groups[station.group].arrays
    k = arrays.stiffness_static[:, 2]
    limited = any(
        isinstance(r.allowable, LoadRange) and r.state is None and r.place == station.name
        for r in problem.statics
    )
    carries = (k > 0.0) & limited
    safe = np.where(k > 0.0, k, 1.0)
    return np.where(carries, arrays.load_min / safe, -np.inf), np.where(
        carries, arrays.load_max / safe, np.inf
    )


def _rest(problem: Problem) -> tuple[Floats, Floats, Floats]:
    """Return rows (T, n) on the static displacement as installed, with their least and greatest values."""
    model = problem.model
    rows: list[Floats] = []
    least: list[float] = []
    most: list[float] = []
    for requirement in problem.statics:
        limit = requirement.allowable
        if requirement.state is not None:
            continue
        if isinstance(limit, Sag):
            rows.append(-model.points[requirement.place][2])
            least.append(-np.inf)
            most.append(limit.limit)
        if isinstance(limit, Tilt):
            turn = model.frame.rotation_rows(requirement.place)
            # An octagon about the circle of admitted rotations about the two level axes.
            for angle in np.arange(4) * np.pi / 4.0:
                rows.append(np.cos(angle) * turn[0] + np.sin(angle) * turn[1])
                least.append(-limit.limit)
                most.append(limit.limit)
    n = model.frame.count
    return np.array(rows).reshape(-1, n), np.array(least, dtype=float), np.array(most, dtype=float)


def _bands(problem: Problem) -> tuple[Floats, Floats]:
    """Return the excitation intervals (I, 2) as installed and the separation (I,) that the brief asks of each."""
    asked = [
        requirement.allowable.limit
        for requirement in problem.modes
        if isinstance(requirement.allowable, Separation)
        and requirement.state is None
        and requirement.allowable.exempt_amplification is None
    ]
    bands = np.array(problem.states[0].intervals, dtype=float).reshape(-1, 2) if asked else np.zeros((0, 2))
    return bands, np.full(len(bands), max(asked, default=-1.0))


def _tones(problem: Problem) -> tuple[ToneSet, ...]:
    """Return the coherent loads on the machine as installed: a sum over loads is no smaller than any of them."""
    found = []
    for group in problem.harmonics:
        if group.model is not problem.model:
            continue
        rows: list[Floats] = []
        limits: list[tuple[float, int]] = []
        for limit, place in group.rows.pairs:
            rate = next((rate for kind, rate in RATES.items() if type(limit) is kind), None)
            if rate is None or not isinstance(limit, (Displacement, Velocity, Acceleration)):
                continue
            along = limit.along()
            for direction in np.eye(3) if along is None else [np.array(along)]:
                rows.append(direction @ problem.model.points[place])
                limits.append((limit.limit * PEAK[limit.measure], rate))
        if not rows:
            continue
        for family in group.rows.families:
            for loads in family.sets:
                if all(load.base is None for load in loads):
                    vectors = tuple((load.vector, load.power) for load in loads)
                    table = np.array(limits, dtype=float)
                    found.append(
                        ToneSet(
                            loads[0].order,
                            family.low,
                            family.high,
                            vectors,
                            np.array(rows),
                            table[:, 0],
                            table[:, 1],
                        )
                    )
    return tuple(found)
