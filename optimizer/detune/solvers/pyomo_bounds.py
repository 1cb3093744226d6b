"""What a second opinion needs besides the statement: bounds for its scaling, set cuts, and the worst tones.

All of it is plain numpy on the statement, apart from the bounded search.
"""

from dataclasses import dataclass
from itertools import product

import numpy as np
from numpy.typing import NDArray

from detune.solvers.pyomo_statement import Statement, ToneSet

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
TWO_PI = 2.0 * np.pi
SPEEDS = 41
# Bounds are widened by this much, so that rounding does not exclude what the final test would admit.
SLACK = 1.0e-6


@dataclass(frozen=True)
class Cut:
    """Designs that cannot meet the brief: any with one of these parts of every group (and at this ballast step)."""

    parts: tuple[tuple[int, ...], ...]
    step: int


@dataclass(frozen=True, eq=False)
class Tone:
    """A tone that is stated in full: omega, load (n,), rows (R, n) and the limits (R,) of |row q|."""

    omega: float
    load: Complexes
    rows: Floats
    limits: Floats


@dataclass(frozen=True, eq=False)
class Box:
    """Bounds on the displacement q (n,) and on the deflection (S, 3) of the stations."""

    q: Floats
    deflection: Floats


def static_box(statement: Statement) -> Box | None:
    """Return bounds that hold at rest for every design that is supported, None where none can be given.

    With K >= L in the Loewner order, |b K^-1 w| <= sqrt(b L^-1 b  w L^-1 w). L takes the least stiffness of each
    axis, empty stations apart: each pattern of empty groups has its own L.
    """
    boxes = []
    for chosen in product(*(_classes(static[:, 2]) for static in statement.static)):
        axes = [static[pick] for static, pick in zip(statement.static, chosen, strict=True)]
        low = statement.assembled(statement.fixed_static, [each.min(axis=0) for each in axes])
        if _definite(low):
            loads = np.max([load @ np.linalg.solve(low, load) for load in statement.load])
            boxes.append(_box(statement, _inverse(low), float(loads)))
            continue
        high = statement.assembled(statement.fixed_static, [each.max(axis=0) for each in axes])
        if _definite(high):
            return None
        # Not even the stiffest parts of this pattern hold the machine: the final test refuses all of them.
    return _union(boxes)


def tone_box(statement: Statement, tone: Tone) -> Box | None:
    """Return bounds of |q| and of the deflections under a tone, None where damping does not bound them.

    With D = A + j H and H >= L > 0, |c D^-1 f| <= sqrt(c L^-1 c  f* L^-1 f): H^-1/2 D H^-1/2 is a real symmetric
    matrix plus j times the unit matrix, whose inverse is at most one.
    """
    fixed = statement.fixed_hysteretic + tone.omega * statement.fixed_viscous
    low = statement.assembled(fixed, [damping.min(axis=0) for damping in _damping(statement, tone.omega)])
    if not _definite(low):
        return None
    inverse = _inverse(low)
    return _box(statement, inverse, float(np.real(np.conj(tone.load) @ inverse @ tone.load)))


def _damping(statement: Statement, omega: float) -> list[Floats]:
    return [loss + omega * c for loss, c in zip(statement.loss, statement.viscous, strict=True)]


def _classes(stiffness: Floats) -> list[NDArray[np.intp]]:
    """Return the parts that carry, and those that do not, each where there are some."""
    sets = [np.flatnonzero(stiffness > 0.0), np.flatnonzero(stiffness <= 0.0)]
    return [each for each in sets if each.size]


def _inverse(matrix: Floats) -> Floats:
    return np.asarray(np.linalg.inv(matrix), dtype=np.float64)


def _definite(matrix: Floats) -> bool:
    values = np.linalg.eigvalsh(matrix)
    return bool(values[0] > 1e-12 * abs(values[-1]))


def _box(statement: Statement, inverse: Floats, energy: float) -> Box:
    rows = statement.rows
    deflection = np.einsum("sai,ij,saj->sa", rows, inverse, rows)
    return Box(np.sqrt(np.diag(inverse) * energy), np.sqrt(np.maximum(deflection, 0.0) * energy))


def _union(boxes: list[Box]) -> Box | None:
    if not boxes:
        return None
    return Box(np.max([box.q for box in boxes], axis=0), np.max([box.deflection for box in boxes], axis=0))


def separation_cut(statement: Statement, parts: tuple[int, ...], step: int) -> Cut | None:
    """Return the largest set found of designs about one whose frequencies break the separation, None if they do not.

    Frequencies rise with stiffness in the Loewner order. If more of them lie below the upper edge of a forbidden
    band with the stiffest parts of the set than lie below its lower edge with the softest, some frequency of every
    design of the set lies inside.
    """
    for (low, high), required in zip(statement.bands, statement.separation, strict=True):
        if required <= -1.0:
            continue
        edges = TWO_PI * low * (1.0 - required), TWO_PI * high * (1.0 + required)
        sets = [[part] for part in parts]
        if not _inside(statement, sets, step, edges):
            continue
        for group, part in _by_likeness(statement, parts):
            wider = [[*each, part] if index == group else each for index, each in enumerate(sets)]
            if _inside(statement, wider, step, edges):
                sets = wider
        return Cut(tuple(tuple(each) for each in sets), step)
    return None


def _inside(statement: Statement, sets: list[list[int]], step: int, edges: tuple[float, float]) -> bool:
    dynamic = [values[each] for values, each in zip(statement.dynamic, sets, strict=True)]
    fixed, mass = statement.fixed_dynamic[step], statement.mass[step]
    whiten = np.linalg.inv(np.linalg.cholesky(mass))
    soft, stiff = (
        np.linalg.eigvalsh(whiten @ statement.assembled(fixed, axes) @ whiten.T)
        for axes in ([each.min(axis=0) for each in dynamic], [each.max(axis=0) for each in dynamic])
    )
    first, last = np.sign(edges[0]) * edges[0] ** 2, edges[1] ** 2
    # A hair inside: what the final test would admit at the very edge is not cut off.
    return int(np.sum(stiff < last * (1.0 - SLACK))) > int(np.sum(soft < first + SLACK * abs(first)))


def _by_likeness(statement: Statement, parts: tuple[int, ...]) -> list[tuple[int, int]]:
    """Return (group, part) of all other parts, those of nearest axial stiffness first."""
    found: list[tuple[float, int, int]] = []
    for group, (part, dynamic) in enumerate(zip(parts, statement.dynamic, strict=True)):
        size = np.log(np.maximum(dynamic[:, 2], 1e-12))
        away = np.abs(size - size[part])
        found += [(float(away[other]), group, other) for other in range(len(size)) if other != part]
    return [(group, other) for _, group, other in sorted(found)]


def worst_tone(statement: Statement, parts: tuple[int, ...], step: int) -> Tone | None:
    """Return the tone by which a design breaks a limit at a point by most, None where it breaks none."""
    worst, most = None, 1.0 + SLACK
    for tones in statement.tones:
        for speed in np.linspace(tones.low, tones.high, SPEEDS if tones.high > tones.low else 1):
            omega = TWO_PI * tones.order * float(speed)
            response = np.abs(tones.rows @ _response(statement, parts, step, tones, omega))
            limits = tones.limits(omega)
            ratio = float(np.max(response / limits))
            if ratio > most:
                worst, most = Tone(omega, tones.load(omega), tones.rows, limits), ratio
    return worst


def _response(
    statement: Statement, parts: tuple[int, ...], step: int, tones: ToneSet, omega: float
) -> Complexes:
    stiffness = statement.assembled(
        statement.fixed_dynamic[step], [k[part] for k, part in zip(statement.dynamic, parts, strict=True)]
    )
    damping = statement.assembled(
        statement.fixed_hysteretic + omega * statement.fixed_viscous,
        [h[part] for h, part in zip(_damping(statement, omega), parts, strict=True)],
    )
    matrix = stiffness - omega**2 * statement.mass[step] + 1j * damping
    return np.asarray(np.linalg.solve(matrix, tones.load(omega)))
