"""Worst separation of natural frequencies from excitation intervals under scatter.

Stiffness scatter: every eigenvalue grows with the stiffness matrix (Loewner order), so over independent positive
factors it covers exactly the interval between the two corners "all soft" and "all stiff", and the worst
separation is exact from two eigenproblems. The same holds for mass and inertia, with the opposite sign.
An uncertain centre of mass is not monotone: the extreme can lie inside. It is cut into boxes, and for each box
the mass matrix is enclosed between two others.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from detune.proof.selection_data import Floats, ForbiddenBands

ROUNDING = 1.0e-9


@dataclass(frozen=True, eq=False)
class UncertainBody:
    """One rigid body: mass interval kg, box of its centre m, inertia about the centre and its factor interval.

    selector (6, n): velocity of the body's reference point and its rotation from the n freedoms; centre_low and
    centre_high (3,) are measured from that reference point. inertia (3, 3) kg m^2.
    """

    mass: tuple[float, float]
    centre_low: Floats
    centre_high: Floats
    inertia: Floats
    inertia_factor: tuple[float, float]
    selector: Floats


@dataclass(frozen=True)
class SeparationDecision:
    """Worst separation over the scatter: guaranteed below which it never falls, attained at a named centre.

    status: against the required separations. centre: centre of each body where `attained` occurs.
    """

    status: Literal["proven", "violated", "undecided"]
    guaranteed: float
    attained: float
    centre: tuple[tuple[float, ...], ...]
    boxes: int


def _frequencies(stiffness: Floats, mass: Floats) -> Floats:
    factors = np.linalg.inv(np.linalg.cholesky(mass))
    values = np.linalg.eigvalsh(factors @ stiffness @ np.swapaxes(factors, -1, -2))
    frequency: Floats = np.sqrt(np.maximum(values, 0.0)) / (2.0 * np.pi)
    return frequency


def interval_separation(low: Floats, high: Floats, bands: ForbiddenBands) -> Floats:
    """Worst separation (N, I) per excitation interval when mode k may lie anywhere in [low, high] (N, n), Hz.

    The separation max(f/f_b - 1, 1 - f/f_a) falls to its least at f = 2 / (1/f_a + 1/f_b) and rises again.
    """
    valley = 2.0 / (1.0 / bands.low + 1.0 / bands.high)
    worst = np.clip(valley, low[:, :, None], high[:, :, None])
    each = np.maximum(worst / bands.high - 1.0, 1.0 - worst / bands.low)
    least: Floats = np.min(each, axis=1)
    return least


def two_corner_separation(
    stiffness_low: Floats, stiffness_high: Floats, mass: Floats, bands: ForbiddenBands
) -> Floats:
    """Exact worst separation (I,) from each interval over all K between the two corners; matrices (n, n).

    Exact when the corners belong to the scatter and are joined by a path inside it, as with independent (or
    common) positive stiffness factors.
    """
    low = _frequencies(stiffness_low[None], mass[None])
    high = _frequencies(stiffness_high[None], mass[None])
    result: Floats = interval_separation(low, high, bands)[0]
    return result


def _skew(vectors: Floats) -> Floats:
    x, y, z = np.moveaxis(vectors, -1, 0)
    zero = np.zeros_like(x)
    rows = [[zero, -z, y], [z, zero, -x], [-y, x, zero]]
    return np.stack([np.stack(row, axis=-1) for row in rows], axis=-2)


def body_mass(body: UncertainBody, mass: float, factor: float, centre: Floats) -> Floats:
    """Mass matrices (N, n, n) of a body for centres (N, 3)."""
    arm = np.concatenate([np.broadcast_to(np.eye(3), (*centre.shape, 3)), -_skew(centre)], axis=-1)
    own = mass * np.swapaxes(arm, -1, -2) @ arm
    own[:, 3:, 3:] += factor * body.inertia
    result: Floats = np.swapaxes(body.selector, 0, 1) @ own @ body.selector
    return result


def mass_enclosure(body: UncertainBody, low: Floats, high: Floats) -> tuple[Floats, Floats]:
    """Matrices (N, n, n) below and above every mass matrix of a body with its centre in boxes low, high (N, 3).

    With B = [I, -skew(c)] and c = c0 + d: (1 - e) B0^T B0 - (1/e - 1) D <= B^T B <= (1 + e) B0^T B0 + (1 + 1/e) D for
    0 < e < 1, where D = |d|^2 on the rotations; this is the inequality 2 x y <= e x^2 + y^2 / e.
    """
    middle = 0.5 * (low + high)
    reach = np.linalg.norm(0.5 * (high - low), axis=1)
    arm = np.concatenate([np.broadcast_to(np.eye(3), (*middle.shape, 3)), -_skew(middle)], axis=-1)
    square = np.swapaxes(arm, -1, -2) @ arm
    gyration = np.sqrt(np.trace(body.inertia) * body.inertia_factor[0] / (3.0 * body.mass[1]))
    e = np.clip(reach / max(gyration, 1e-12), 1e-12, 0.5)[:, None, None]
    turn = np.zeros((6, 6))
    turn[3:, 3:] = np.eye(3)
    spread = (reach**2)[:, None, None] * turn
    inertia = np.zeros((6, 6))
    inertia[3:, 3:] = body.inertia
    below = body.mass[0] * ((1.0 - e) * square - (1.0 / e - 1.0) * spread) + body.inertia_factor[0] * inertia
    above = body.mass[1] * ((1.0 + e) * square + (1.0 + 1.0 / e) * spread) + body.inertia_factor[1] * inertia
    left, right = body.selector.T, body.selector
    return left @ below @ right, left @ above @ right


def box_separation(
    stiffness_low: Floats,
    stiffness_high: Floats,
    fixed_mass: Floats,
    bodies: tuple[UncertainBody, ...],
    bands: ForbiddenBands,
    *,
    gap: float = 0.0,
    max_boxes: int = 4000,
) -> SeparationDecision:
    """Decide the required separations when stiffness, mass, inertia and the centres are uncertain.

    stiffness_low, stiffness_high, fixed_mass (n, n). Boxes of the centres are cut until each keeps every required
    separation, or a sampled centre breaks one, or max_boxes were bounded. With gap > 0 the cutting goes on until
    attained - guaranteed <= gap.
    """
    low = np.concatenate([body.centre_low for body in bodies])[None]
    high = np.concatenate([body.centre_high for body in bodies])[None]
    slack = np.inf
    attained, where = np.inf, 0.5 * (low + high)[0]
    guaranteed_closed, slack_closed, boxes = np.inf, np.inf, 0
    while True:
        middle = 0.5 * (low + high)
        samples = np.concatenate([middle, low, high])
        sampled = _sampled(stiffness_low, stiffness_high, fixed_mass, bodies, bands, samples)
        best = int(np.argmin(sampled.min(axis=1)))
        if sampled[best].min() < attained:
            attained, where = float(sampled[best].min()), samples[best]
        slack = min(slack, float((sampled - bands.separation).min()))
        bound = _bounded(stiffness_low, stiffness_high, fixed_mass, bodies, bands, low, high)
        boxes += len(low)
        margin, worst = (bound - bands.separation).min(axis=1), bound.min(axis=1)
        done = (margin >= 0.0) & ((worst >= attained - gap) if gap > 0.0 else True)
        guaranteed_closed = min(guaranteed_closed, float(worst[done].min(initial=np.inf)))
        slack_closed = min(slack_closed, float(margin[done].min(initial=np.inf)))
        open_low, open_high = low[~done], high[~done]
        guaranteed = min(guaranteed_closed, float(worst[~done].min(initial=np.inf)))
        if not len(open_low) or boxes + 2 * len(open_low) > max_boxes or (slack < 0.0 and gap <= 0.0):
            break
        low, high = _halve(open_low, open_high)
    status: Literal["proven", "violated", "undecided"] = "undecided"
    if slack < 0.0:
        status = "violated"
    elif min(slack_closed, float(margin[~done].min(initial=np.inf))) >= 0.0:
        status = "proven"
    centres = tuple(tuple(where[3 * i : 3 * i + 3].tolist()) for i in range(len(bodies)))
    return SeparationDecision(status, min(guaranteed, attained), attained, centres, boxes)


def _halve(low: Floats, high: Floats) -> tuple[Floats, Floats]:
    """Cut every box along its widest side."""
    side = np.argmax(high - low, axis=1)
    rows = np.arange(len(low))
    cut = 0.5 * (low[rows, side] + high[rows, side])
    first_high, second_low = high.copy(), low.copy()
    first_high[rows, side] = cut
    second_low[rows, side] = cut
    return np.concatenate([low, second_low]), np.concatenate([first_high, high])


def _sampled(
    stiffness_low: Floats,
    stiffness_high: Floats,
    fixed_mass: Floats,
    bodies: tuple[UncertainBody, ...],
    bands: ForbiddenBands,
    centres: Floats,
) -> Floats:
    """Exact worst separation (N, I) at given centres over stiffness, mass and inertia (two corners)."""
    light, heavy = np.zeros((len(centres), *fixed_mass.shape)) + fixed_mass, fixed_mass[None] + 0.0
    for i, body in enumerate(bodies):
        own = centres[:, 3 * i : 3 * i + 3]
        light = light + body_mass(body, body.mass[0], body.inertia_factor[0], own)
        heavy = heavy + body_mass(body, body.mass[1], body.inertia_factor[1], own)
    low, high = _frequencies(stiffness_low, heavy), _frequencies(stiffness_high, light)
    return interval_separation(low, high, bands)


def _bounded(
    stiffness_low: Floats,
    stiffness_high: Floats,
    fixed_mass: Floats,
    bodies: tuple[UncertainBody, ...],
    bands: ForbiddenBands,
    low: Floats,
    high: Floats,
) -> Floats:
    """Guaranteed separation (N, I) over boxes of the centres; -inf where the enclosure is not positive definite."""
    light = np.zeros((len(low), *fixed_mass.shape)) + fixed_mass
    heavy = light.copy()
    for i, body in enumerate(bodies):
        below, above = mass_enclosure(body, low[:, 3 * i : 3 * i + 3], high[:, 3 * i : 3 * i + 3])
        light, heavy = light + below, heavy + above
    values = np.linalg.eigvalsh(light)
    usable = values[:, 0] > 1e-9 * values[:, -1]
    bound = np.full((len(low), len(bands.low)), -np.inf)
    if usable.any():
        least = _frequencies(stiffness_low, heavy[usable]) * (1.0 - ROUNDING)
        most = _frequencies(stiffness_high, light[usable]) * (1.0 + ROUNDING)
        bound[usable] = interval_separation(least, most, bands)
    return bound
