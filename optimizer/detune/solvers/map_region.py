"""The feasible region of a map on lines fine enough to be drawn: looked at closely only where its rim passes."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.sizing.batch_trace import Margins, Traced
from detune.solvers.map_islands import Islands

Floats = NDArray[np.float64]
# Lines of a map whose margins are in closed form, and halvings of the cells on the rim of one whose are not.
FINE, HALVINGS = 181, 3
# What is smaller than this share of the frame both ways is marked, since it cannot be seen.
SPECK = 0.012


@dataclass(frozen=True)
class Region:
    """Least margin (Y, X) on lines x (X,), y (Y,): evaluated on the rim, interpolated where a cell is of one sign.

    `specks` (S, 2): the middles of feasible islands too small to be seen on a map.
    """

    x: Floats
    y: Floats
    least: Floats
    specks: Floats


def region_of(
    margins: Margins, traced: Traced, islands: Islands, logs: tuple[bool, bool], exact: bool
) -> Region:
    """The region of a traced map; `margins` gives those of all requirements (R, N) at places x (N,), y (N,)."""
    if not exact:
        return _with_specks(*_halved(margins, traced, logs), (), logs)
    x, y = (
        np.unique(np.concatenate([_between(lines, FINE, log), more]))
        for lines, log, more in zip((traced.x, traced.y), logs, (islands.x, islands.y), strict=True)
    )
    xx, yy = np.meshgrid(x, y)
    least = margins(xx.ravel(), yy.ravel()).min(axis=0).reshape(xx.shape)
    return _with_specks(x, y, least, islands.pieces, logs)


def _with_specks(
    x: Floats, y: Floats, least: Floats, pieces: tuple[Floats, ...], logs: tuple[bool, bool]
) -> Region:
    """The region with the middles of its parts that are smaller than SPECK of the frame both ways."""
    from scipy.ndimage import find_objects, label

    spans = [(float(line[0]), float(line[-1])) for line in (x, y)]
    boxes = [
        (x[part[1]][[0, -1]], y[part[0]][[0, -1]])
        for part in find_objects(label(least >= 0.0, structure=np.ones((3, 3)))[0])
    ]
    boxes += [
        (np.array([p[:, 0].min(), p[:, 0].max()]), np.array([p[:, 1].min(), p[:, 1].max()])) for p in pieces
    ]
    found: list[tuple[float, float]] = []
    for box in boxes:
        ends = [_share(edge, span, log) for edge, span, log in zip(box, spans, logs, strict=True)]
        middle = (float(box[0].mean()), float(box[1].mean()))
        small = all(high - low < SPECK for low, high in ends)
        if small and not any(np.allclose(middle, other, rtol=1e-2) for other in found):
            found.append(middle)
    return Region(x, y, least, np.array(found).reshape(-1, 2))


def _share(edge: Floats, span: tuple[float, float], log: bool) -> tuple[float, float]:
    scaled = np.log([*edge, *span]) if log else np.array([*edge, *span])
    low, high = (scaled[:2] - scaled[2]) / (scaled[3] - scaled[2])
    return float(low), float(high)


def _between(lines: Floats, count: int, log: bool) -> Floats:
    low, high = float(lines[0]), float(lines[-1])
    found = np.geomspace(low, high, count) if log else np.linspace(low, high, count)
    found[0], found[-1] = low, high
    return np.asarray(found)


def _doubled(lines: Floats, log: bool) -> Floats:
    """The lines with one more in the middle of each two."""
    scaled = np.log(lines) if log else lines
    found = np.empty(2 * len(lines) - 1)
    found[::2], found[1::2] = scaled, 0.5 * (scaled[:-1] + scaled[1:])
    real = np.exp(found) if log else found
    real[::2] = lines
    return np.asarray(real)


def _halved(margins: Margins, traced: Traced, logs: tuple[bool, bool]) -> tuple[Floats, Floats, Floats]:
    x, y, values = traced.x, traced.y, np.clip(traced.margins, -1.0, 1.0)
    for _ in range(HALVINGS):
        rim = _on_the_rim(values)
        x, y = _doubled(x, logs[0]), _doubled(y, logs[1])
        finer = np.empty((len(values), len(y), len(x)))
        finer[:, ::2, ::2] = values
        finer[:, ::2, 1::2] = 0.5 * (values[:, :, :-1] + values[:, :, 1:])
        finer[:, 1::2] = 0.5 * (finer[:, :-1:2] + finer[:, 2::2])
        # New nodes of cells on the rim, and of their neighbours, are evaluated.
        wanted = np.zeros(finer.shape[1:], dtype=bool)
        for row, column in np.argwhere(rim):
            wanted[2 * row : 2 * row + 3, 2 * column : 2 * column + 3] = True
        wanted[::2, ::2] = False
        rows, columns = np.nonzero(wanted)
        if len(rows):
            finer[:, rows, columns] = np.clip(margins(x[columns], y[rows]), -1.0, 1.0)
        values = finer
    return x, y, np.asarray(values.min(axis=0))


def _on_the_rim(values: Floats) -> NDArray[np.bool_]:
    """Cells (Y-1, X-1) that may hold something feasible and something not, and those beside them; values (R, Y, X).

    A cell may where every requirement is met at some corner: the white between two lines may pass between the corners.
    """
    met = values >= 0.0
    corners = np.stack([met[:, :-1, :-1], met[:, 1:, :-1], met[:, :-1, 1:], met[:, 1:, 1:]])
    mixed = corners.any(axis=0).all(axis=0) & ~corners.all(axis=(0, 1))
    padded = np.pad(mixed, 1)
    spread = padded[1:-1, 1:-1] | padded[:-2, 1:-1] | padded[2:, 1:-1] | padded[1:-1, :-2] | padded[1:-1, 2:]
    return np.asarray(spread)
