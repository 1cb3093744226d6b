"""Boundaries of many requirements at once, where a single evaluation is dear and a batch of them is not.

Marching squares on the nodes of a grid; then all crossings of all grid edges, of all requirements, are closed in on
together (Illinois variant of regula falsi, one batch a round), and so are the middles of all chords, along the
normal to the chord. The points lie on the boundary to the stated tolerance, not on the grid.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.sizing.statement import SizingError
from detune.sizing.trace import Boundary, chains_of_cells

Floats = NDArray[np.float64]
# Margins (R, N) at points x (N,), y (N,); met where zero or more.
Margins = Callable[[Floats, Floats], Floats]
TOLERANCE = 1e-4
# A turn (radians) from which on points are put between those of a line once more.
BEND = 0.06
# How often the chord on which a line begins or ends to bind is halved.
ENDS = 4


@dataclass(frozen=True)
class Traced:
    """Margins (R, Y, X) at the nodes of the grid lines `x` and `y`, and the boundaries of the named requirements."""

    x: Floats
    y: Floats
    names: tuple[str, ...]
    margins: Floats
    boundaries: tuple[Boundary, ...]

    @property
    def least(self) -> Floats:
        """Least margin (Y, X) at the nodes."""
        return np.asarray(self.margins.min(axis=0))


class _Picture:
    """Coordinates in which each axis runs from 0 to 1, by its logarithm where asked."""

    def __init__(self, x: Floats, y: Floats, logarithmic: tuple[bool, bool]) -> None:
        self.logarithmic = logarithmic
        self.low = np.array([self._in(x[:1], 0)[0], self._in(y[:1], 1)[0]])
        self.span = np.array([self._in(x[-1:], 0)[0], self._in(y[-1:], 1)[0]]) - self.low

    def _in(self, values: Floats, axis: int) -> Floats:
        return np.log(values) if self.logarithmic[axis] else values

    def inward(self, x: Floats, y: Floats) -> Floats:
        return np.asarray((np.stack([self._in(x, 0), self._in(y, 1)], axis=-1) - self.low) / self.span)

    def outward(self, points: Floats) -> Floats:
        real: Floats = self.low + points * self.span
        for axis in range(2):
            if self.logarithmic[axis]:
                real[..., axis] = np.exp(real[..., axis])
        return real


def _closed_in(
    margins: Margins,
    picture: _Picture,
    a: Floats,
    b: Floats,
    va: Floats,
    vb: Floats,
    row: NDArray[np.intp],
    rounds: int,
) -> Floats:
    """Points (N, 2) of zero margin between a and b, where requirement row[i] has va and vb of opposite sign."""
    low, high = np.zeros(len(a)), np.ones(len(a))
    fa, fb = np.clip(va, -1.0, 1.0), np.clip(vb, -1.0, 1.0)
    middle = 0.5 * (low + high)
    for number in range(rounds):
        width = fb - fa
        share = np.where(width != 0.0, -fa / np.where(width != 0.0, width, 1.0), 0.5)
        # Every third step halves, so that a steep margin cannot hold one end for ever.
        share = np.where(number % 3 == 2, 0.5, np.clip(share, 0.02, 0.98))
        middle = low + share * (high - low)
        place = picture.outward(a + middle[:, None] * (b - a))
        value = np.clip(margins(place[:, 0], place[:, 1])[row, np.arange(len(a))], -1.0, 1.0)
        same = (value >= 0.0) == (fa >= 0.0)
        low, fa = np.where(same, middle, low), np.where(same, value, fa)
        high, fb = np.where(same, high, middle), np.where(same, fb, value)
        if float(np.max((high - low) * np.linalg.norm(b - a, axis=1), initial=0.0)) < TOLERANCE:
            break
    width = fb - fa
    share = np.where(np.abs(width) > 0.0, -fa / np.where(width != 0.0, width, 1.0), 0.5)
    best = low + np.clip(share, 0.0, 1.0) * (high - low)
    return np.asarray(a + best[:, None] * (b - a))


def trace_batch(
    margins: Margins,
    names: tuple[str, ...],
    x: Floats,
    y: Floats,
    logarithmic: tuple[bool, bool] = (False, False),
    rounds: int = 12,
) -> Traced:
    """Boundaries of all requirements over the rectangle of the rising lines x (X,), y (Y,).

    Raises SizingError for lines that do not rise or logarithms of zero.
    """
    if x.size < 2 or y.size < 2 or np.any(np.diff(x) <= 0) or np.any(np.diff(y) <= 0):
        raise SizingError("grid lines must rise and be at least two in each direction")
    if (logarithmic[0] and x[0] <= 0) or (logarithmic[1] and y[0] <= 0):
        raise SizingError("a logarithmic axis needs positive grid lines")
    picture = _Picture(x, y, logarithmic)
    xx, yy = np.meshgrid(x, y)
    values = margins(xx.ravel(), yy.ravel()).reshape(len(names), y.size, x.size)
    edges: list[tuple[int, int, int, int]] = []
    found: list[tuple[int, list[tuple[int, int, int]], bool]] = []
    index: dict[tuple[int, int, int, int], int] = {}
    for row in range(len(names)):
        for chain, closed in chains_of_cells(values[row].T >= 0.0):
            for key in chain:
                whole = (row, *key)
                if whole not in index:
                    index[whole] = len(edges)
                    edges.append(whole)
            found.append((row, chain, closed))
    if not edges:
        return Traced(x, y, names, values, ())
    points = _edge_points(margins, picture, x, y, values, edges, rounds)
    return Traced(x, y, names, values, tuple(_pieces(margins, picture, names, found, index, points, x, y)))


def _edge_points(
    margins: Margins, picture: _Picture, x: Floats, y: Floats, values: Floats, edges: list[tuple[int, int, int, int]],
    rounds: int,
) -> Floats:  # fmt: skip
    key = np.array(edges)
    row, along, i, j = key.T
    k, m = i + (along == 0), j + (along == 1)
    a, b = picture.inward(x[i], y[j]), picture.inward(x[k], y[m])
    return _closed_in(margins, picture, a, b, values[row, j, i], values[row, m, k], row, rounds)


def _pieces(
    margins: Margins,
    picture: _Picture,
    names: tuple[str, ...],
    found: list[tuple[int, list[tuple[int, int, int]], bool]],
    index: dict[tuple[int, int, int, int], int],
    points: Floats,
    x: Floats,
    y: Floats,
) -> list[Boundary]:
    lines = [(row, points[[index[row, *key] for key in chain]], closed) for row, chain, closed in found]
    reach = 0.5 * max(1.0 / (x.size - 1), 1.0 / (y.size - 1))
    # Between all points once, then only where the line bends, and where it begins or ends to bind.
    for bend in (0.0, BEND, BEND):
        lines = _with_middles(margins, picture, lines, reach, [_bent(line, bend) for _, line, _ in lines])
    binding = _binding(margins, picture, lines)
    for _ in range(ENDS):
        changes = [own[:-1] != own[1:] for own in binding]
        lines = _with_middles(margins, picture, lines, reach, changes)
        binding = _binding(margins, picture, lines)
    return [
        Boundary(names[row], picture.outward(line.copy()), closed, own)
        for (row, line, closed), own in zip(lines, binding, strict=True)
    ]


def _binding(
    margins: Margins, picture: _Picture, lines: list[tuple[int, Floats, bool]]
) -> list[NDArray[np.bool_]]:
    """For each line whether every other requirement is met at its points (n,)."""
    every = picture.outward(np.concatenate([line for _, line, _ in lines]))
    all_margins = margins(every[:, 0], every[:, 1])
    result, first = [], 0
    for row, line, _ in lines:
        others = np.delete(all_margins[:, first : first + len(line)], row, axis=0)
        first += len(line)
        result.append(np.all(others >= -1e-6, axis=0) if len(others) else np.ones(len(line), dtype=bool))
    return result


def _with_middles(
    margins: Margins,
    picture: _Picture,
    lines: list[tuple[int, Floats, bool]],
    reach: float,
    wanted: list[NDArray[np.bool_]],
) -> list[tuple[int, Floats, bool]]:
    """Put between two points one more, found along the normal of their chord where it crosses there.

    `wanted`: between which points of each line.
    """
    middle = np.concatenate([0.5 * (line[:-1] + line[1:]) for _, line, _ in lines])
    chord = np.concatenate([line[1:] - line[:-1] for _, line, _ in lines])
    row = np.concatenate([np.full(len(line) - 1, r, dtype=np.intp) for r, line, _ in lines])
    normal = np.stack([-chord[:, 1], chord[:, 0]], axis=1)
    length = np.linalg.norm(normal, axis=1)
    normal = normal / np.maximum(length, 1e-30)[:, None] * np.minimum(0.5 * length, reach)[:, None]
    a, b = np.clip(middle - normal, 0.0, 1.0), np.clip(middle + normal, 0.0, 1.0)
    bent = np.concatenate(wanted)
    va, vb = np.ones(len(row)), np.ones(len(row))
    if bent.any():
        for value, side in ((va, a), (vb, b)):
            place = picture.outward(side[bent].copy())
            value[bent] = margins(place[:, 0], place[:, 1])[row[bent], np.arange(int(bent.sum()))]
    crossing = ((va >= 0.0) != (vb >= 0.0)) & (length > TOLERANCE) & bent
    if crossing.any():
        c = crossing
        middle[c] = _closed_in(margins, picture, a[c], b[c], va[c], vb[c], row[c], 8)
    result, first = [], 0
    for r, line, closed in lines:
        count = len(line) - 1
        own, used = middle[first : first + count], crossing[first : first + count]
        first += count
        woven = [line[0]]
        for number in range(count):
            woven += [own[number]] if used[number] else []
            woven.append(line[number + 1])
        result.append((r, np.array(woven), closed))
    return result


def _bent(line: Floats, bend: float) -> NDArray[np.bool_]:
    """Whether a line (n, 2) turns by `bend` or more at an end of each of its n - 1 chords."""
    if bend <= 0.0:
        return np.ones(len(line) - 1, dtype=bool)
    chord = np.diff(line, axis=0)
    angle = np.unwrap(np.arctan2(chord[:, 1], chord[:, 0]))
    turns = np.concatenate([[0.0], np.abs(np.diff(angle)), [0.0]]) >= bend
    return np.asarray(turns[:-1] | turns[1:])
