"""Progressive mounts: load-deflection curves, stops, and the resting place of a machine that stands on them.

A curve is the monotone cubic of `tables` through the supplier's points; the stiffness that vibration sees is
its tangent at the working load, never load over deflection. Compression is positive.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from detune.physics.array_types import ArrayLike, BoolArray, FloatArray
from detune.physics.tables import hermite, monotone_slopes, require_inside, require_rising
from detune.physics.unsupported import UnsupportedMachine

MOST_STEPS = 100
MOST_HALVINGS = 60
IDLE_SHARE = 1e-6


class CurveTurnsBack(ValueError):
    """A load-deflection curve falls or stands still: one load would belong to several deflections."""


class NotAtRest(ArithmeticError):
    """The static iteration did not settle."""


@dataclass(frozen=True, eq=False)
class LoadCurve:
    """Points deflection (P,) in m and load (P,) in N, both rising, and the slopes (P,) in N/m of the curve
    there.
    """

    deflection: FloatArray
    load: FloatArray
    slope: FloatArray


@dataclass(frozen=True, eq=False)
class ElementLaw:
    """Static force of one mount axis over its deflection: a spring, a curve, or both added; and stops.

    stiffness in N/m. pulls: whether the mount holds in tension; if not, force is zero below deflection zero.
    Beyond stop_gap (compression) or rebound_gap (tension), both in m, a stop of stop_stiffness in N/m is
    added.
    """

    stiffness: float = 0.0
    curve: LoadCurve | None = None
    pulls: bool = True
    stop_gap: float = float("inf")
    rebound_gap: float = float("inf")
    stop_stiffness: float = 0.0


@dataclass(frozen=True, eq=False)
class LawPieces:
    """Laws of E elements as cubics in (deflection - anchor) between corners (E, C); made by `law_pieces`.

    anchor (E, C + 1), coefficient (E, C + 1, 4) lowest power first; laws with fewer corners are filled with
    infinity.
    """

    corner: FloatArray
    anchor: FloatArray
    coefficient: FloatArray


@dataclass(frozen=True, eq=False)
class Rest:
    """Resting place: displacement (..., n), and for E elements deflection, force, tangent (..., E); stiffness
    matrix.

    stiffness (..., n, n) is the tangent about the resting place; stopped (..., E) tells which elements stand
    on a stop.
    """

    displacement: FloatArray
    deflection: FloatArray
    force: FloatArray
    tangent: FloatArray
    stiffness: FloatArray
    stopped: BoolArray


def load_curve(deflection: ArrayLike, load: ArrayLike) -> LoadCurve:
    """The curve through deflection (P,) in m and load (P,) in N. Raises CurveTurnsBack, ValueError, by row.

    An end slope that the three-point rule would bring to zero is set to half the last secant: a mount is
    nowhere without stiffness.
    """
    d, n = np.asarray(deflection, dtype=float), np.asarray(load, dtype=float)
    require_rising("deflection of the load curve", d)
    if n.shape != d.shape or not np.all(np.isfinite(n)):
        raise ValueError("load curve: one finite load is needed for each deflection")
    back = np.flatnonzero(np.diff(n) <= 0.0)
    if back.size:
        row = int(back[0]) + 2
        raise CurveTurnsBack(
            f"load curve: the load in row {row} ({n[row - 1]:g} N at {d[row - 1]:g} m) does not rise above "
            "the row before it"
        )
    slope = monotone_slopes(d, n)
    secant = np.diff(n) / np.diff(d)
    for end, near in ((0, 0), (-1, -1)):
        if slope[end] <= 0.0:
            slope[end] = 0.5 * secant[near]
    return LoadCurve(d, n, slope)


def load_at(curve: LoadCurve, deflection: ArrayLike) -> FloatArray:
    """Load in N at deflection in m (any shape). Raises OutsideTable."""
    _require_on_curve(curve, deflection)
    return hermite(curve.deflection, curve.load, curve.slope, deflection)[0]


def tangent_at(curve: LoadCurve, deflection: ArrayLike) -> FloatArray:
    """Tangent stiffness in N/m at deflection in m (any shape). Raises OutsideTable."""
    _require_on_curve(curve, deflection)
    return hermite(curve.deflection, curve.load, curve.slope, deflection)[1]


def deflection_at(curve: LoadCurve, load: ArrayLike) -> FloatArray:
    """Deflection in m under load in N (any shape): Newton kept inside its bracket. Raises OutsideTable."""
    asked = np.asarray(load, dtype=float)
    require_inside("load", "N", asked, float(curve.load[0]), float(curve.load[-1]))
    piece = np.clip(np.searchsorted(curve.load, asked, side="right") - 1, 0, curve.load.size - 2)
    low, high = curve.deflection[piece], curve.deflection[piece + 1]
    place = 0.5 * (low + high)
    for _ in range(60):
        value, slope = hermite(curve.deflection, curve.load, curve.slope, place)
        above = value > asked
        low, high = np.where(above, low, place), np.where(above, place, high)
        step = place - (value - asked) / slope
        place = np.where((step > low) & (step < high), step, 0.5 * (low + high))
    return np.asarray(place)


def tangent_at_load(curve: LoadCurve, load: ArrayLike) -> FloatArray:
    """Tangent stiffness in N/m under load in N (any shape). Raises OutsideTable."""
    return hermite(curve.deflection, curve.load, curve.slope, deflection_at(curve, load))[1]


def law_force(law: ElementLaw, deflection: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Force in N and tangent stiffness in N/m at deflection in m (any shape).

    Beyond its points the curve goes on straight, for iterations on the way; `require_law` refuses such an
    outcome.
    """
    d = np.asarray(deflection, dtype=float)
    force, tangent = law.stiffness * d, np.full_like(d, law.stiffness)
    if law.curve is not None:
        value, slope = hermite(law.curve.deflection, law.curve.load, law.curve.slope, d)
        force, tangent = force + value, tangent + slope
    if not law.pulls:
        force, tangent = np.where(d < 0.0, 0.0, force), np.where(d < 0.0, 0.0, tangent)
    over, under = d > law.stop_gap, d < -law.rebound_gap
    force = force + np.where(over, law.stop_stiffness * (d - np.where(over, law.stop_gap, 0.0)), 0.0)
    force = force + np.where(under, law.stop_stiffness * (d + np.where(under, law.rebound_gap, 0.0)), 0.0)
    return force, tangent + np.where(over | under, law.stop_stiffness, 0.0)


def require_law(law: ElementLaw, deflection: ArrayLike) -> None:
    """Raise OutsideTable where a curve is used beyond its points (an idle mount in the air is not in use)."""
    if law.curve is not None:
        d = np.asarray(deflection, dtype=float)
        _require_on_curve(law.curve, d if law.pulls else np.maximum(d, 0.0))


def law_pieces(laws: Sequence[ElementLaw]) -> LawPieces:
    """The laws of E elements as one set of piecewise cubics, which give the forces of all elements at
    once.
    """
    corners = [_corners(law) for law in laws]
    count = max(corner.size for corner in corners)
    corner = np.full((len(laws), count), np.inf)
    anchor = np.zeros((len(laws), count + 1))
    coefficient = np.zeros((len(laws), count + 1, 4))
    for e, (law, own) in enumerate(zip(laws, corners, strict=True)):
        corner[e, : own.size] = own
        # A cubic is known from value and slope at two points inside the piece, clear of the kinks at its end.
        width = np.r_[1.0, np.diff(own), 1.0]
        start = np.r_[own[:1] - 1.0, own] if own.size else np.zeros(1)
        width = width[: start.size]
        left, right = start + 0.25 * width, start + 0.75 * width
        (f0, k0), (f1, k1) = law_force(law, left), law_force(law, right)
        gap = right - left
        mean = (f1 - f0) / gap
        anchor[e, : start.size] = left
        coefficient[e, : start.size] = np.stack(
            [f0, k0, (3.0 * mean - 2.0 * k0 - k1) / gap, (k0 + k1 - 2.0 * mean) / gap**2], axis=-1
        )
    return LawPieces(corner, anchor, coefficient)


def _corners(law: ElementLaw) -> FloatArray:
    places = [] if law.curve is None else list(law.curve.deflection)
    places += [] if law.pulls else [0.0]
    places += [gap for gap in (law.stop_gap, -law.rebound_gap) if np.isfinite(gap)]
    return np.unique(np.array(places, dtype=float))


def pieces_force(pieces: LawPieces, deflection: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Forces in N and tangents in N/m (..., E) at deflections (..., E) in m."""
    d = np.asarray(deflection, dtype=float)
    index = (d[..., None] >= pieces.corner).sum(axis=-1)
    element = np.arange(pieces.anchor.shape[0])
    x = d - pieces.anchor[element, index]
    c = pieces.coefficient[element, index]
    c1, c2, c3 = c[..., 1], c[..., 2], c[..., 3]
    force = c[..., 0] + x * (c1 + x * (c2 + x * c3))
    return force, c1 + x * (2.0 * c2 + 3.0 * x * c3)


def at_rest(
    rows: ArrayLike,
    laws: Sequence[ElementLaw],
    load: ArrayLike,
    offset: ArrayLike = 0.0,
    tolerance: float = 1e-10,
) -> Rest:
    """Where sum rows[e].T force_e(rows[e] q + offset_e) = load, for leading design axes of load and offset.

    rows (E, n): deflection of element e is rows[e] @ q + offset[e]; n general freedoms; laws: E of them; load
    (..., n) in N and N m; offset (..., E) in m (uneven floor, free height). Every force rises with its
    deflection, so the energy is convex: Newton's method, each step halved while it overshoots the valley,
    finds its one floor. Raises UnsupportedMachine when a direction has no stiffness, OutsideTable when an
    element rests beyond its curve, NotAtRest.
    """
    b = np.atleast_2d(np.asarray(rows, dtype=float))
    w, gap = np.asarray(load, dtype=float), np.asarray(offset, dtype=float)
    lead = np.broadcast_shapes(w.shape[:-1], gap.shape[:-1])
    w = np.broadcast_to(w, (*lead, b.shape[1]))
    gap = np.broadcast_to(gap, (*lead, b.shape[0]))
    q = np.zeros((*lead, b.shape[1]))
    pieces = law_pieces(laws)
    force, tangent = pieces_force(pieces, q @ b.T + gap)
    # Residuals are compared through the first tangent stiffness, which gives N and N m one measure.
    mean = _mean_stiffness(laws)
    first = np.einsum("...e,ei->...i", np.maximum(tangent, mean), b**2)
    weight = np.where(first > 0.0, 1.0 / np.where(first > 0.0, first, 1.0), 0.0)
    for _ in range(MOST_STEPS):
        residual = w - force @ b
        merit = np.sum(weight * residual**2, axis=-1)
        size = np.sum(weight * (w**2 + (np.abs(force) @ np.abs(b)) ** 2), axis=-1)
        if np.all(merit <= tolerance**2 * size):
            return _rest(b, laws, q, gap, force, tangent)
        step = _newton_step(b, tangent, np.maximum(tangent, IDLE_SHARE * mean), residual)
        downhill = np.sum(residual * step, axis=-1)
        share = np.ones((*lead, 1))
        for _ in range(MOST_HALVINGS):
            force, tangent = pieces_force(pieces, (q + share * step) @ b.T + gap)
            beyond = np.sum((w - force @ b) * step, axis=-1) < -0.5 * downhill
            if not np.any(beyond & (merit > tolerance**2 * size)):
                break
            share = np.where(beyond[..., None], 0.5 * share, share)
        q = q + share * step
    raise NotAtRest(f"the static load found no balance in {MOST_STEPS} steps; does it tip?")


def _require_on_curve(curve: LoadCurve, deflection: ArrayLike) -> None:
    require_inside("deflection", "m", deflection, float(curve.deflection[0]), float(curve.deflection[-1]))


def _mean_stiffness(laws: Sequence[ElementLaw]) -> FloatArray:
    mean = []
    for law in laws:
        curve = law.curve
        slope = 0.0 if curve is None else np.ptp(curve.load) / np.ptp(curve.deflection)
        mean.append(law.stiffness + float(slope))
    return np.array(mean)


def _newton_step(
    rows: FloatArray, tangent: FloatArray, floored: FloatArray, residual: FloatArray
) -> FloatArray:
    """Newton's step; where idle mounts leave a direction free, floored tangents carry it back to contact."""
    stiffness = np.einsum("...e,ei,ej->...ij", tangent, rows, rows)
    free = ~_is_stiff(stiffness)
    if np.any(free):
        held = np.einsum("...e,ei,ej->...ij", floored, rows, rows)
        if not np.all(_is_stiff(held)):
            raise UnsupportedMachine("a direction of the machine carries no stiffness")
        stiffness = np.where(free[..., None, None], held, stiffness)
    return np.asarray(np.linalg.solve(stiffness, residual[..., None])[..., 0])


def _is_stiff(stiffness: FloatArray) -> BoolArray:
    diagonal = np.einsum("...ii->...i", stiffness)
    scale = np.sqrt(np.where(diagonal > 0.0, diagonal, 1.0))
    scaled = stiffness / (scale[..., :, None] * scale[..., None, :])
    return np.asarray(np.linalg.eigvalsh(scaled)[..., 0] > 1e-12)


def _rest(
    rows: FloatArray,
    laws: Sequence[ElementLaw],
    q: FloatArray,
    offset: FloatArray,
    force: FloatArray,
    tangent: FloatArray,
) -> Rest:
    deflection = q @ rows.T + offset
    for e, law in enumerate(laws):
        require_law(law, deflection[..., e])
    high = np.array([law.stop_gap for law in laws])
    low = np.array([-law.rebound_gap for law in laws])
    stopped = (deflection > high) | (deflection < low)
    stiffness = np.einsum("...e,ei,ej->...ij", tangent, rows, rows)
    if not np.all(_is_stiff(stiffness)):
        raise UnsupportedMachine("the machine rests with a direction that carries no stiffness")
    return Rest(q, deflection, force, tangent, stiffness, stopped)
