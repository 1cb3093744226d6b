"""Limits in one-third-octave bands as rows for the bounds: one row for each family of loads, band and piece of speed.

Within a band the sets of one order add linearly and different orders as squares, as `response.bands` has it. Families
that can come to one frequency add linearly and the others as squares; each is held to its share of the limit, in
proportion to what it contributes at the design.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import BandAllowable
from detune.physics.octaves import band_index
from detune.problem.build import StateModel
from detune.proof.scatter_data import LimitedRows, ScatterSystem, values_at
from detune.response.bands import limited_bands, speed_pieces
from detune.response.coincidence import meeting
from detune.response.loads import Family
from detune.solvers.scatter_rows import NotBounded, ObservedRow, UnitView, load_set

Floats = NDArray[np.float64]
RMS = 0.5**0.5
LOOKED = 65
# No family is left with less than this share, so that one that grows over the box has some room.
LEAST_SHARE = 0.02


@dataclass(frozen=True, eq=False)
class BandRow:
    """One family of loads in one band of a state's machine, over one piece of its speed."""

    each: StateModel
    family: int
    band: int
    limits: LimitedRows


def band_rows_of(
    each: StateModel,
    allowable: BandAllowable,
    place: str,
    families: tuple[Family, ...],
    system: ScatterSystem,
) -> list[BandRow]:
    """The rows of one band limit; `system` is the design itself, by which shares are given. Raises NotBounded."""
    row = _observed(each, allowable, place)
    limit = {int(band): float(most) for band, most in zip(*allowable.bands(), strict=True)}
    found: list[BandRow] = []
    for number, family in enumerate(families):
        for low, high in speed_pieces(
            family.low, family.high, family.orders, limited_bands(((allowable, place),))
        ):
            middle = float(np.sqrt(low * high))
            band_of = {order: int(band_index(order * middle)) for order in family.orders}
            for band in dict.fromkeys(band_of.values()):
                if band not in limit:
                    continue
                sets = tuple(loads for loads in family.sets if band_of[loads[0].order] == band)
                rows = LimitedRows(
                    rows=row.rows[None],
                    forces=row.forces[None],
                    rate=np.array([float(row.rate)]),
                    ellipse=np.array([False]),
                    factor=np.array([RMS]),
                    squares=np.array([True]),
                    limit=np.array([limit[band]]),
                    sets=tuple(load_set(each.model, loads, [row]) for loads in sets),
                    speed=(low, high),
                )
                found.append(BandRow(each, number, band, rows))
    return _shared(found, meeting(families), system)


def _observed(each: StateModel, allowable: BandAllowable, place: str) -> ObservedRow:
    """The motion along the limit's direction, as its first component."""
    view = UnitView(each.model, set())
    seen = np.asarray(allowable.observed(view, place))[0]
    if len(view.rates) != 1:
        raise NotBounded("it mixes displacement with its derivatives")
    seen = (seen @ np.asarray(allowable.along()))[:, None] * np.array([1.0, 0.0, 0.0])
    n = each.model.frame.count
    return ObservedRow(
        rows=np.ascontiguousarray(seen[:n].T),
        forces=np.ascontiguousarray(seen[n:-3].T),
        base=np.ascontiguousarray(seen[-3:].T),
        rate=view.rates.pop(),
        ellipse=False,
        statistic="rms",
    )


def _shared(rows: list[BandRow], number: tuple[int, ...], system: ScatterSystem) -> list[BandRow]:
    """Every row with the share of its limit that its family has in the band."""
    value = {id(row): _at_design(row.limits, system) for row in rows}
    found = []
    for row in rows:
        # What a family has in a band is the largest of its pieces of speed.
        each: dict[int, float] = {}
        for other in rows:
            if other.band == row.band:
                each[other.family] = max(each.get(other.family, 0.0), value[id(other)])
        linked: dict[int, list[int]] = {}
        for family in each:
            linked.setdefault(number[family], []).append(family)
        groups = {key: sum(each[f] for f in families) for key, families in linked.items()}
        own = number[row.family]
        share = _share(list(groups.values()), groups[own], squares=True)
        share *= _share([each[f] for f in linked[own]], each[row.family], squares=False)
        found.append(BandRow(row.each, row.family, row.band, _limited(row.limits, share)))
    return found


def _share(parts: list[float], own: float, squares: bool) -> float:
    """The share of one of several parts that add up to one, as squares or linearly."""
    if len(parts) == 1:
        return 1.0
    power = 2.0 if squares else 1.0
    size = max(max(parts), 1e-300)
    floored: Callable[[float], float] = lambda part: max(part / size, LEAST_SHARE) ** power  # noqa: E731
    return float((floored(own) / sum(floored(part) for part in parts)) ** (1.0 / power))


def _limited(rows: LimitedRows, share: float) -> LimitedRows:
    from dataclasses import replace

    return replace(rows, limit=rows.limit * share)


def _at_design(rows: LimitedRows, system: ScatterSystem) -> float:
    """The greatest value of a row over its speeds with every figure as in the design."""
    speeds = np.linspace(*rows.speed, LOOKED)
    points = np.ones((LOOKED, system.variables + 1))
    points[:, -1] = (2.0 * np.pi * speeds) ** 2
    return float(values_at(system, rows, points).max())
