"""The boundary g(x, y) = 0 of a requirement as polylines with corrected points, not a pixel staircase.

Marching squares on a grid of lines that need not be even: the crossing on every grid edge is solved to machine
precision by bracketing, crossings are joined within cells, and every chord is split at points brought back to
g = 0 along the gradient until it leaves the curve by no more than a stated share of the picture. An island
between two grid lines is invisible to any grid; lines laid through points known to lie in it make it visible
(`one_axis_lines` gives them for a one-axis problem, from its exact branches).
"""

from __future__ import annotations

import itertools
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.sizing.one_axis_map import feasible_region
from detune.sizing.statement import OneAxisProblem, SizingError

Floats = NDArray[np.float64]
Requirement = Callable[[Floats, Floats], Floats]

_EDGES = (((0, 0), (1, 0)), ((1, 0), (1, 1)), ((1, 1), (0, 1)), ((0, 1), (0, 0)))
_Key = tuple[int, int, int]


@dataclass(frozen=True)
class Boundary:
    """One connected piece of the boundary of the requirement `name`: points (n, 2), closed or ending at the frame.

    `binding` (n,) is true where every other requirement is met, so that this one bounds the feasible region.
    """

    name: str
    points: Floats
    closed: bool
    binding: NDArray[np.bool_]


def _sides(values: Floats) -> NDArray[np.bool_]:
    # A grid point exactly on the curve counts as outside, so every crossing has a definite edge.
    return np.asarray(values < 0)


def _on_edge(g: Requirement, a: Floats, b: Floats) -> Floats:
    from scipy.optimize import brentq

    def along(t: float) -> float:
        p = a + t * (b - a)
        return float(g(np.array([p[0]]), np.array([p[1]]))[0])

    start, stop = along(0.0), along(1.0)
    if start == 0.0:
        return a
    if stop == 0.0:
        return b
    # An infinite value (an undamped resonance) is replaced by a large one of its own sign.
    t = brentq(lambda s: float(np.clip(along(s), -1e12, 1e12)), 0.0, 1.0, xtol=1e-14, rtol=8.9e-16)
    return np.asarray(a + t * (b - a))


def _cell_pairs(inside: NDArray[np.bool_], middle_inside: bool) -> list[tuple[int, int]]:
    crossed = [i for i in range(4) if inside[i] != inside[(i + 1) % 4]]
    if len(crossed) == 2:
        return [(crossed[0], crossed[1])]
    if len(crossed) == 4:
        # A saddle: the middle of the cell says which corners hang together.
        return [(0, 1), (2, 3)] if middle_inside != inside[0] else [(0, 3), (1, 2)]
    return []


def _edge_key(i: int, j: int, side: int) -> _Key:
    if side == 0:
        return (0, i, j)
    if side == 1:
        return (1, i + 1, j)
    if side == 2:
        return (0, i, j + 1)
    return (1, i, j)


def _links(g: Requirement, x: Floats, y: Floats) -> dict[_Key, list[_Key]]:
    xx, yy = np.meshgrid(x, y, indexing="ij")
    inside = _sides(g(xx.ravel(), yy.ravel()).reshape(xx.shape))
    count = inside[:-1, :-1].astype(int) + inside[1:, :-1] + inside[1:, 1:] + inside[:-1, 1:]
    links: dict[_Key, list[_Key]] = {}
    for i, j in np.argwhere((count > 0) & (count < 4)):
        corners = np.array([inside[i + a, j + b] for (a, b), _ in _EDGES])
        middle = g(np.array([0.5 * (x[i] + x[i + 1])]), np.array([0.5 * (y[j] + y[j + 1])]))
        for one, two in _cell_pairs(corners, bool(middle[0] < 0)):
            a, b = _edge_key(int(i), int(j), one), _edge_key(int(i), int(j), two)
            links.setdefault(a, []).append(b)
            links.setdefault(b, []).append(a)
    return links


def chains_of_cells(inside: NDArray[np.bool_]) -> list[tuple[list[_Key], bool]]:
    """Chains of grid edges (direction, i, j) that the boundary of `inside` (x, y) crosses, and whether each closes.

    At a saddle the inner corners are kept apart: only nodes are known here.
    """
    count = inside[:-1, :-1].astype(int) + inside[1:, :-1] + inside[1:, 1:] + inside[:-1, 1:]
    links: dict[_Key, list[_Key]] = {}
    for i, j in np.argwhere((count > 0) & (count < 4)):
        corners = np.array([inside[i + a, j + b] for (a, b), _ in _EDGES])
        for one, two in _cell_pairs(corners, False):
            a, b = _edge_key(int(i), int(j), one), _edge_key(int(i), int(j), two)
            links.setdefault(a, []).append(b)
            links.setdefault(b, []).append(a)
    return _chains(links)


def _chains(links: dict[_Key, list[_Key]]) -> list[tuple[list[_Key], bool]]:
    left = {k: list(v) for k, v in links.items()}
    chains: list[tuple[list[_Key], bool]] = []
    ends = [k for k, v in left.items() if len(v) == 1]
    for start in ends + list(left):
        if not left.get(start):
            continue
        chain = [start]
        while left[chain[-1]]:
            following = left[chain[-1]].pop()
            left[following].remove(chain[-1])
            chain.append(following)
        chains.append((chain, chain[0] == chain[-1]))
    return chains


def _correct(g: Requirement, p: Floats, reach: Floats) -> Floats | None:
    """Bring a point to g = 0 along the gradient; `reach` (2,) is the length unit of each axis."""
    q = p / reach
    h = 1e-6
    stencil = np.array([[0.0, 0.0], [1.0, 0.0], [-1.0, 0.0], [0.0, 1.0], [0.0, -1.0]])
    for _ in range(12):
        probe = (q + h * stencil) * reach
        v = g(probe[:, 0], probe[:, 1])
        if not np.all(np.isfinite(v)):
            return None
        slope = np.array([v[1] - v[2], v[3] - v[4]]) / (2 * h)
        size = float(slope @ slope)
        if size == 0.0:
            return None
        step = -v[0] * slope / size
        q = q + step
        if float(np.linalg.norm(q - p / reach)) > 1.0:
            return None
        if float(np.linalg.norm(step)) < 1e-12:
            break
    return np.asarray(q * reach)


def _refine(g: Requirement, points: list[Floats], frame: Floats, tolerance: float) -> list[Floats]:
    """Split chords until the corrected middle lies within `tolerance` of the frame size from the chord."""
    result = [points[0]]
    for a, b in itertools.pairwise(points):
        stack = [(a, b, 0)]
        while stack:
            p, q, depth = stack.pop()
            length = np.abs((q - p) / frame)
            middle = 0.5 * (p + q)
            if depth < 10 and float(length.max()) > tolerance:
                reach = np.maximum(np.abs(q - p), float(length.max()) * frame)
                found = _correct(g, middle, reach)
                if found is not None and float(np.abs((found - middle) / frame).max()) > tolerance:
                    stack.append((found, q, depth + 1))
                    stack.append((p, found, depth + 1))
                    continue
            result.append(q)
    return result


def trace_boundary(
    g: Requirement,
    x: Floats,
    y: Floats,
    name: str = "requirement",
    tolerance: float = 1e-3,
    logarithmic: tuple[bool, bool] = (False, False),
) -> list[Boundary]:
    """Boundary of {g < 0} over the rectangle of the rising grid lines `x` (n,), `y` (m,).

    `g` takes and returns arrays of one shape; `tolerance` is the chord error as a share of the frame, measured in
    the logarithm of an axis where `logarithmic` says so. Raises SizingError for lines that do not rise.
    """
    if x.size < 2 or y.size < 2 or np.any(np.diff(x) <= 0) or np.any(np.diff(y) <= 0):
        raise SizingError("grid lines must rise and be at least two in each direction")
    if (logarithmic[0] and x[0] <= 0) or (logarithmic[1] and y[0] <= 0):
        raise SizingError("a logarithmic axis needs positive grid lines")
    u = np.log(x) if logarithmic[0] else x
    v = np.log(y) if logarithmic[1] else y

    def picture(a: Floats, b: Floats) -> Floats:
        return np.asarray(g(np.exp(a) if logarithmic[0] else a, np.exp(b) if logarithmic[1] else b))

    frame = np.array([u[-1] - u[0], v[-1] - v[0]])
    boundaries = []
    for chain, closed in _chains(_links(picture, u, v)):
        points = []
        for direction, i, j in chain:
            a = np.array([u[i], v[j]])
            b = np.array([u[i + 1], v[j]]) if direction == 0 else np.array([u[i], v[j + 1]])
            points.append(_on_edge(picture, a, b))
        fine = np.array(_refine(picture, points, frame, tolerance))
        for axis in range(2):
            if logarithmic[axis]:
                fine[:, axis] = np.exp(fine[:, axis])
        boundaries.append(Boundary(name, fine, closed, np.ones(len(fine), dtype=bool)))
    return boundaries


def trace_region(
    requirements: dict[str, Requirement],
    x: Floats,
    y: Floats,
    tolerance: float = 1e-3,
    logarithmic: tuple[bool, bool] = (False, False),
) -> list[Boundary]:
    """Boundaries of all named requirements (met where g < 0), with the parts that bound the feasible region marked."""
    result = []
    for name, g in requirements.items():
        others = [h for other, h in requirements.items() if other != name]
        for piece in trace_boundary(g, x, y, name, tolerance, logarithmic):
            binding = np.ones(piece.points.shape[0], dtype=bool)
            for h in others:
                binding &= h(piece.points[:, 0], piece.points[:, 1]) <= 1e-9
            result.append(replace(piece, binding=binding))
    return result


def one_axis_lines(problem: OneAxisProblem, x: Floats, y: Floats) -> tuple[Floats, Floats]:
    """Grid lines of stiffness `x` and damping `y` completed so that every feasible island of the problem is cut.

    Each exact branch gives stiffness lines at its ends and inside, and damping lines through the middle of
    what is feasible at them, so at least one grid point lies inside each island however small. A long sliver that
    drifts across the lines is still cut into pieces by any grid: `one_axis_map.feasible_region` draws it whole.
    """
    stiffness, damping = list(x), list(y)
    for piece in feasible_region(problem, points=5):
        stiffness += [float(k) for k in piece.stiffness]
        middle = 0.5 * (piece.least_damping + piece.greatest_damping)
        damping += [float(d) for d in middle[1:-1]]
    xs = np.unique([v for v in stiffness if x[0] <= v <= x[-1]])
    ys = np.unique([v for v in damping if y[0] <= v <= y[-1]])
    return xs, ys
