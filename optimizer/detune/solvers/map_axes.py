"""The two axes of a map: unknowns, or on one axis the natural frequency and the damping ratio that stand for two.

With the machine's mass m, the stiffness k and damping c of all parts together: f = sqrt(k/m) / 2 pi stands in the
place of the stiffness and z = c / (2 sqrt(k m)) in that of the viscous damping. Both go with the ballast, where that
is the other axis.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.brief.sizing import DAMPING_RATIO, NATURAL_FREQUENCY
from detune.sizing.made_parts import bounds, logarithmic, sizing_of
from detune.solvers.one_axis_statement import OneAxis

Floats = NDArray[np.float64]
TWO_PI = 2.0 * math.pi
# A damping ratio is not drawn beyond these.
RATIOS = (1e-3, 3.0)
KIND_OF = {NATURAL_FREQUENCY: "stiffness", DAMPING_RATIO: "viscous"}


@dataclass(frozen=True)
class MapAxis:
    """One axis of a map: what it is in words, its kind of unit, its range, and the unknown (column) it moves.

    `group`: whose parts it is a figure of, None for ballast, positions and absorbers. `derived`: not the unknown
    itself but the natural frequency or damping ratio that stands for it.
    """

    title: str
    unit: str
    low: float
    high: float
    logarithmic: bool
    column: int
    group: str | None
    kind: str
    derived: bool = False


@dataclass(frozen=True)
class MapPlane:
    """The plane of a map: its axes, and the other unknowns held at `values` (u,)."""

    brief: Brief
    axis: OneAxis | None
    first: MapAxis
    second: MapAxis
    values: Floats

    @property
    def derived(self) -> bool:
        """Whether an axis is no unknown itself, so that the plane reaches beyond the bounds of the unknowns."""
        return self.first.derived or self.second.derived

    def points(self, x: Floats, y: Floats) -> Floats:
        """The unknowns (N, u) at places x (N,), y (N,) of the map."""
        found = np.repeat(self.values[None], len(x), axis=0)
        for own, at in ((self.first, x), (self.second, y)):
            if not own.derived:
                found[:, own.column] = at
        # The stiffness first: a damping ratio is of it.
        for own, at in ((self.first, x), (self.second, y)):
            if own.title == NATURAL_FREQUENCY:
                found[:, own.column] = self.mass(found) * (TWO_PI * at) ** 2 / self.pieces
        for own, at in ((self.first, x), (self.second, y)):
            if own.title == DAMPING_RATIO:
                stiffness = self.stiffness(found)
                found[:, own.column] = 2.0 * at * np.sqrt(stiffness * self.mass(found)) / self.pieces
        return found

    def place(self, points: Floats) -> Floats:
        """Where points (N, u) lie on the map (N, 2)."""
        return np.stack([self._of(own, points) for own in (self.first, self.second)], axis=1)

    def _of(self, own: MapAxis, points: Floats) -> Floats:
        if own.title == NATURAL_FREQUENCY and own.derived:
            return np.asarray(np.sqrt(self.stiffness(points) / self.mass(points)) / TWO_PI)
        if own.title == DAMPING_RATIO and own.derived:
            critical = 2.0 * np.sqrt(self.stiffness(points) * self.mass(points))
            return np.asarray(points[:, own.column] * self.pieces / critical)
        return np.asarray(points[:, own.column])

    @property
    def pieces(self) -> int:
        """How many parts share the load of a machine on one axis."""
        assert self.axis is not None
        return self.axis.pieces

    def mass(self, points: Floats) -> Floats:
        """Mass (N,) of the machine on one axis, kg."""
        assert self.axis is not None
        column = _column(self.brief, "ballast")
        own = np.full(len(points), self.axis.problem.mass)
        return own if column is None else own + points[:, column]

    def stiffness(self, points: Floats) -> Floats:
        """Stiffness (N,) of all parts of a machine on one axis, N/m."""
        assert self.axis is not None
        column = _column(self.brief, "stiffness")
        if column is None:
            return np.full(len(points), self.axis.problem.stiffness_bounds[0])
        return np.asarray(self.pieces * points[:, column])

    def within(self, points: Floats) -> Floats:
        """How far (N,) the unknowns of derived axes lie within their bounds; zero or more is inside."""
        least = np.full(len(points), np.inf)
        low, high = bounds(self.brief)
        for own in (self.first, self.second):
            if own.derived:
                value = points[:, own.column]
                below = value / low[own.column] - 1.0 if low[own.column] > 0.0 else np.inf
                # Rounding of the way there and back must not shut out the bound itself.
                least = np.minimum(least, np.minimum(below, high[own.column] / value - 1.0) + 1e-9)
        return least


def _column(brief: Brief, kind: str) -> int | None:
    return next((k for k, u in enumerate(sizing_of(brief).unknown) if u.kind == kind), None)


def plane_of(brief: Brief, axis: OneAxis | None, names: tuple[str, ...], values: Floats) -> MapPlane:
    """The plane of the map that a study names, round the point `values` (u,)."""
    first, second = (_plain(brief, name) for name in names)
    plane = MapPlane(brief, axis, first, second, values)
    if not plane.derived:
        return plane
    low, high = bounds(brief)
    moved = [own.column for own in (first, second)]
    corners = []
    for number in range(2 ** len(moved)):
        corner = values.copy()
        for bit, column in enumerate(moved):
            corner[column] = (high if number >> bit & 1 else low)[column]
        corners.append(corner)
    reached = plane.place(np.array(corners))
    ends = []
    for number, own in enumerate((first, second)):
        a, b = float(reached[:, number].min()), float(reached[:, number].max())
        if own.title == DAMPING_RATIO and own.derived:
            a, b = max(a, RATIOS[0]), max(min(b, RATIOS[1]), 2.0 * RATIOS[0])
        ends.append(replace(own, low=a, high=b) if own.derived else own)
    return replace(plane, first=ends[0], second=ends[1])


def _plain(brief: Brief, name: str) -> MapAxis:
    unknowns = sizing_of(brief).unknown
    low, high = bounds(brief)
    titles = [unknown.title for unknown in unknowns]
    if name in titles:
        k = titles.index(name)
        own = unknowns[k]
        return MapAxis(
            name, own.unit, float(low[k]), float(high[k]), logarithmic(own), k, own.group, own.kind
        )
    kind = KIND_OF[name]
    k = next(number for number, unknown in enumerate(unknowns) if unknown.kind == kind)
    unit = "frequency" if name == NATURAL_FREQUENCY else "ratio"
    return MapAxis(name, unit, 0.0, 0.0, True, k, unknowns[k].group, kind, derived=True)
