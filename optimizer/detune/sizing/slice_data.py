"""The arrays of one-axis sizing in scaled form: what is asked (`Question`) and the room to work it out (`Bench`).

Everything stands per unit of mass, kappa = k/m and g = (c/m)^2 (viscous) or (eta k/m)^2 (loss factor), and in
scaled frequency u = w^2 / w0^2. A slice at mass m
is then one at unit mass whose receptance limits are divided
by m^2: a heavier mass relaxes them, and every other limit does not know the mass.

The same code (`slice_response`, `slice_envelope`, `slice_exchange`) runs interpreted on lists and compiled on
numpy arrays.
"""

from __future__ import annotations

import threading
from typing import Any, NamedTuple

# Kinds of a limit: at one line, over a range that its ends and one parabola state whole, over any other range.
LINE, CLOSED, OPEN = 0, 1, 2
LINEAR, TRANSMISSIBILITY, SEPARATION = 0, 1, 2
# The share of a line at one u (see `Bench.pool`).
AT_LINE = 0.0
# A piece of an envelope brings its end, two crossings, and at most eight stationary points of the goal.
POINTS_PER_ROW = 44


class Question(NamedTuple):
    """Limits (n, 7), excitations and goal, all scaled; `viscous` is 1 or 0.

    A limit says scale u^power (times |K|^2 in transmission form) <= |D|^2 over [low, high]; BY_MASS is 1 where the
    scale is to be divided by the mass squared. `forbidden` (f, 2) are open intervals of kappa, `excited` (e, 2) the
    excitation intervals in the same unit, and `peaks` the kappa between them where separation may be greatest.
    """

    viscous: int
    limits: Any
    forbidden: Any
    excited: Any
    peaks: Any
    goal: int
    goal_u: float


class Room(NamedTuple):
    """What differs between slices: window of kappa, damping bounds (of sqrt(g), or loss factors), and weights.

    The linear goal is `stiffness` kappa + `damping` d + `squared` d^2 + `constant` with d = sqrt(g) or the loss factor.
    `mass` is the unit of mass; with a `ratio` below one the slice is relaxed over masses from `ratio` to one of it.
    """

    mass: float
    ratio: float
    left: float
    right: float
    least_damping: float
    most_damping: float
    stiffness: float
    damping: float
    squared: float
    constant: float


class Bench(NamedTuple):
    """Work space. `pool` (P, 3) outlives a slice; `level` are the scales at its mass.

    An entry of the pool is a line at u (limit, u, AT_LINE), or the tangent at k of what a range asks for at u = share k
    (limit, k, share).

    A row (R, 7) says gamma >= p0 + p1 k + p2 k^2 (sense 1), <= (sense -1), or p >= 0 whatever gamma (sense 0), for k
    from FROM to TO; CAUSE is its limit (-1 and -2: the damping bounds). Envelopes `lower`, `upper` and `spare` are
    pieces (left end, row). `segments` (S, 10), `ranges` (n, 4) for the two ends of a cell.
    """

    pool: Any
    level: Any
    rows: Any
    lower: Any
    upper: Any
    spare: Any
    points: Any
    work: Any
    segments: Any
    stack: Any
    ranges: Any


# Columns of a limit, of a row, of a segment, and of a range at the ends of a cell.
TRANSMISSION, POWER, SCALE, BY_MASS, LOW, HIGH, KIND = 0, 1, 2, 3, 4, 5, 6
P0, P1, P2, SENSE, FROM, TO, CAUSE = 0, 1, 2, 3, 4, 5, 6
LEFT, RIGHT, STIFFNESS, GAMMA, VALUE, LEFT_GAMMA, RIGHT_GAMMA, FIRST, LAST, LEEWAY = (
    0,
    1,
    2,
    3,
    4,
    5,
    6,
    7,
    8,
    9,
)
LEAST, MOST = 0, 2


def pool(capacity: int, arrays: bool) -> Any:
    """Room for so many lines."""
    import numpy as np

    return np.zeros((capacity, 3)) if arrays else [[0.0, 0.0, 0.0] for _ in range(capacity)]


_scratch = threading.local()


def bench(lines: Any, limits: int, arrays: bool) -> Bench:
    """Work space for a pool of lines: numpy arrays for compiled code, lists for interpreted code.

    All but the pool is scratch, and all problems of a thread share it.
    """
    key = "arrays" if arrays else "lists"
    kept: tuple[int, Bench] | None = getattr(_scratch, key, None)
    need = 2 * len(lines) + limits + 2
    if kept is None or kept[0] < need:
        kept = need, _new_bench(need, arrays)
        setattr(_scratch, key, kept)
    return kept[1]._replace(pool=lines)


def _new_bench(rows: int, arrays: bool) -> Bench:
    """Scratch for so many rows; over an interval of masses a line has two rows, and a limit has one at most beside."""
    import numpy as np

    def flat(size: int) -> Any:
        return np.zeros(size) if arrays else [0.0] * size

    def table(size: int, columns: int) -> Any:
        return np.zeros((size, columns)) if arrays else [[0.0] * columns for _ in range(size)]

    return Bench(
        pool=None,
        level=flat(rows),
        rows=table(rows, 7),
        lower=table(4 * rows + 8, 2),
        upper=table(4 * rows + 8, 2),
        spare=table(4 * rows + 8, 2),
        points=flat(POINTS_PER_ROW * rows + 64),
        work=table(4, 10),
        segments=table(8 * rows + 64, 10),
        stack=table(128, 2),
        ranges=table(rows, 4),
    )
