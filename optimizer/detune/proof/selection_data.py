"""The selection problem in arrays: which part goes to which group, and which ballast step is taken.

Equations, with q the n generalised coordinates and b[s, a] the row of local axis a of station s:

    static    K_st q = load(ballast),   K_st = fixed.static + sum count b^T kappa_static b
    modes     K_dy v = (2 pi f)^2 M(ballast) v
    response  (-w^2 M + K_dy + j (H + w C)) q = load(w) + sum count b^T kappa(w) u(w),
              kappa(w) = kappa_dynamic + j (loss + w viscous) of the part chosen for the station's group.

All numbers are SI (N/m, kg, rad), frequencies are in Hz, amplitudes are peak.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Integers = NDArray[np.int64]


class SelectionError(ValueError):
    """The arrays of a selection problem do not fit together."""


@dataclass(frozen=True, eq=False)
class GroupParts:
    """The P candidate parts of one group; every station of the group carries the same choice.

    kappa_static, kappa_dynamic, loss, viscous: (P, 3) per local axis and per single part; N/m, N/m, N/m
    (dynamic stiffness times loss factor) and N s/m, none of them negative.
    cost: (P,) cost of choosing the part for the whole group.
    load_min, load_max: (P,) or (S_g, P) window of the static compression force of one part, N.
    deflection_max: (P,) or (S_g, P) limit of the static compression, m.
    count: number of parts in parallel at each station.
    An empty station is a part with all stiffness zero, load_min -inf, load_max and deflection_max +inf.
    """

    kappa_static: Floats
    kappa_dynamic: Floats
    loss: Floats
    viscous: Floats
    cost: Floats
    load_min: Floats
    load_max: Floats
    deflection_max: Floats
    count: int = 1

    @property
    def size(self) -> int:
        """Number of candidate parts."""
        return int(self.cost.shape[0])


@dataclass(frozen=True, eq=False)
class BallastSteps:
    """B ballast steps: mass matrices (B, n, n), static load vectors (B, n) and costs (B,)."""

    mass: Floats
    load: Floats
    cost: Floats


@dataclass(frozen=True, eq=False)
class FixedStiffness:
    """Connections that belong to no choice: static, dynamic, hysteretic (N/m), viscous (N s/m), (n, n) each."""

    static: Floats
    dynamic: Floats
    hysteretic: Floats
    viscous: Floats


@dataclass(frozen=True, eq=False)
class ForbiddenBands:
    """Excitation intervals [low, high] in Hz, (I,), and the separation required of each, (I,)."""

    low: Floats
    high: Floats
    separation: Floats


@dataclass(frozen=True, eq=False)
class StaticRows:
    """Rows (T, n) on the static displacement with lower and upper limits (T,): tilt, sag, level difference."""

    rows: Floats
    lower: Floats
    upper: Floats


@dataclass(frozen=True, eq=False)
class HarmonicCases:
    """L harmonic load cases, each at its own frequency, with the limits on the peak amplitudes they cause.

    frequency (L,) Hz; load (L, n) complex; base (L, S, 3) complex displacement of the far end of each station.
    rows (R, n) with row_limit (L, R): |rows q|.
    deflection_limit (L, S, 3): |b q - u|; force_limit (L, S, 3): |kappa (b q - u)| of one part.
    total (Q, S, 3) with total_limit (L, Q): |sum_s,a total count kappa (b q - u)|.
    A limit of +inf is no limit.
    """

    frequency: Floats
    load: Complexes
    base: Complexes
    rows: Floats
    row_limit: Floats
    deflection_limit: Floats
    force_limit: Floats
    total: Floats
    total_limit: Floats


@dataclass(frozen=True, eq=False)
class Selection:
    """A whole selection problem.

    stations (S, 3, n): attachment rows b; local axis 2 carries the static load.
    station_group (S,): group of each station.
    support_sign (S,): static compression is support_sign * b[s, 2] q (for axis 2 upwards: -1).
    groups: candidate parts of each of the G groups.
    whole_cost: cost (D,) of whole designs (D, G+1) where prices fall with the quantity bought; the costs of the
    groups are then lower bounds, and never sum to more than it (beyond rounding).
    Raises SelectionError where shapes or values do not fit.
    """

    stations: Floats
    station_group: Integers
    support_sign: Floats
    groups: tuple[GroupParts, ...]
    ballast: BallastSteps
    fixed: FixedStiffness
    bands: ForbiddenBands
    static_rows: StaticRows
    harmonic: HarmonicCases
    names: tuple[str, ...] = field(default=())
    whole_cost: Callable[[Integers], Floats] | None = None

    def __post_init__(self) -> None:
        check_selection(self)

    @property
    def freedoms(self) -> int:
        """Number n of generalised coordinates."""
        return int(self.stations.shape[2])

    @property
    def sizes(self) -> tuple[int, ...]:
        """Number of candidate parts of each group."""
        return tuple(group.size for group in self.groups)

    @property
    def design_count(self) -> int:
        """Number of designs: the product of the group sizes and the ballast steps."""
        total = int(self.ballast.cost.shape[0])
        for size in self.sizes:
            total *= size
        return total


def _need(condition: bool, text: str) -> None:
    if not condition:
        raise SelectionError(text)


def check_selection(selection: Selection) -> None:
    """Raise SelectionError unless all arrays fit together, are finite where they must be, and are SPD where due."""
    stations = selection.stations
    _need(stations.ndim == 3 and stations.shape[1] == 3, "stations must have shape (S, 3, n)")
    count, _, n = stations.shape
    group_count = len(selection.groups)
    _need(group_count >= 1, "a selection needs at least one group")
    _need(selection.station_group.shape == (count,), "station_group must have shape (S,)")
    _need(selection.support_sign.shape == (count,), "support_sign must have shape (S,)")
    _need(
        set(selection.station_group.tolist()) == set(range(group_count)),
        "every group from 0 to G-1 needs a station",
    )
    _need(bool(np.isfinite(stations).all()), "stations must be finite")
    for number, group in enumerate(selection.groups):
        _check_group(group, number, int(np.sum(selection.station_group == number)))
    _check_masses(selection.ballast, n)
    fixed = selection.fixed
    for name in ("static", "dynamic", "hysteretic", "viscous"):
        matrix = getattr(fixed, name)
        _need(matrix.shape == (n, n), f"fixed {name} stiffness must have shape (n, n)")
        _need(bool(np.allclose(matrix, matrix.T)), f"fixed {name} stiffness must be symmetric")
    bands = selection.bands
    _need(bands.low.shape == bands.high.shape == bands.separation.shape, "bands need equal lengths")
    _need(bool((bands.low > 0).all() and (bands.high >= bands.low).all()), "bands need 0 < low <= high")
    rows = selection.static_rows
    _need(rows.rows.shape == (rows.lower.shape[0], n), "static rows must have shape (T, n)")
    _need(rows.lower.shape == rows.upper.shape, "static rows need as many lower as upper limits")
    _check_harmonic(selection.harmonic, count, n)


def _check_group(group: GroupParts, number: int, station_count: int) -> None:
    for name in ("kappa_static", "kappa_dynamic", "loss", "viscous"):
        values = getattr(group, name)
        _need(values.shape == (group.size, 3), f"group {number}: {name} must have shape (P, 3)")
        good = bool(np.isfinite(values).all() and (values >= 0.0).all())
        _need(good, f"group {number}: {name} must be finite and not negative")
    _need(group.size >= 1, f"group {number} has no candidate part")
    _need(group.count >= 1, f"group {number}: count must be at least 1")
    _need(bool(np.isfinite(group.cost).all()), f"group {number}: cost must be finite")
    for name in ("load_min", "load_max", "deflection_max"):
        shape = getattr(group, name).shape
        ok = shape in ((group.size,), (station_count, group.size))
        _need(ok, f"group {number}: {name} must have shape (P,) or (S_g, P)")
        _need(not bool(np.isnan(getattr(group, name)).any()), f"group {number}: {name} must not be NaN")


def _check_masses(ballast: BallastSteps, n: int) -> None:
    steps = ballast.cost.shape[0]
    _need(steps >= 1, "at least one ballast step is needed (no ballast is a step)")
    _need(ballast.mass.shape == (steps, n, n), "ballast mass must have shape (B, n, n)")
    _need(ballast.load.shape == (steps, n), "ballast load must have shape (B, n)")
    _need(bool(np.isfinite(ballast.mass).all() and np.isfinite(ballast.load).all()), "ballast must be finite")
    least = np.linalg.eigvalsh(ballast.mass)[:, 0]
    _need(bool((least > 0.0).all()), "every mass matrix must be positive definite")


def _check_harmonic(cases: HarmonicCases, stations: int, n: int) -> None:
    count = cases.frequency.shape[0]
    rows, totals = cases.rows.shape[0], cases.total.shape[0]
    expected = {
        "load": (count, n),
        "base": (count, stations, 3),
        "rows": (rows, n),
        "row_limit": (count, rows),
        "deflection_limit": (count, stations, 3),
        "force_limit": (count, stations, 3),
        "total": (totals, stations, 3),
        "total_limit": (count, totals),
    }
    for name, shape in expected.items():
        _need(getattr(cases, name).shape == shape, f"harmonic {name} must have shape {shape}")
    _need(bool((cases.frequency > 0).all()), "harmonic frequencies must be positive")


def no_harmonic_cases(stations: int, n: int) -> HarmonicCases:
    """An empty set of load cases for S stations and n freedoms."""
    return HarmonicCases(
        frequency=np.zeros(0),
        load=np.zeros((0, n), dtype=np.complex128),
        base=np.zeros((0, stations, 3), dtype=np.complex128),
        rows=np.zeros((0, n)),
        row_limit=np.zeros((0, 0)),
        deflection_limit=np.zeros((0, stations, 3)),
        force_limit=np.zeros((0, stations, 3)),
        total=np.zeros((0, stations, 3)),
        total_limit=np.zeros((0, 0)),
    )


def no_fixed_stiffness(n: int) -> FixedStiffness:
    """Zero fixed stiffness for n freedoms."""
    zero = np.zeros((n, n))
    return FixedStiffness(static=zero, dynamic=zero, hysteretic=zero, viscous=zero)


def no_static_rows(n: int) -> StaticRows:
    """An empty set of static rows for n freedoms."""
    return StaticRows(rows=np.zeros((0, n)), lower=np.zeros(0), upper=np.zeros(0))


def deflection_window(selection: Selection, group: int) -> tuple[Floats, Floats]:
    """Lower and upper static compression (S_g, P) allowed at the group's stations, m.

    The load window is divided by the static stiffness of one part. A part without stiffness along the
    supporting axis carries no load: it is excluded (lower above upper) when its window asks for a load.
    """
    parts = selection.groups[group]
    stations = int(np.sum(selection.station_group == group))
    shape = (stations, parts.size)
    stiffness = np.broadcast_to(parts.kappa_static[:, 2], shape)
    load_min = np.broadcast_to(parts.load_min, shape)
    load_max = np.broadcast_to(parts.load_max, shape)
    travel = np.broadcast_to(parts.deflection_max, shape)
    has = stiffness > 0.0
    safe = np.where(has, stiffness, 1.0)
    lower = np.where(has, load_min / safe, np.where(load_min > 0.0, np.inf, -np.inf))
    upper = np.where(has, np.minimum(load_max / safe, travel), np.where(load_max < 0.0, -np.inf, travel))
    return np.ascontiguousarray(lower), np.ascontiguousarray(upper)
