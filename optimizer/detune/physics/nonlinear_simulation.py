"""Shock on mounts with progressive curves and stops: step-by-step integration of the whole curves.

    M q'' + C q' + sum rows[e].T force_e(rows[e] q + offset_e) = f(t)

By `nonlinear_recursion`, with a step taken from the stiffest slope that any curve or stop has; the run is repeated
with half the step, and the difference of the peaks is the stated error.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from detune.physics.array_types import ArrayLike, FloatArray
from detune.physics.load_curve import ElementLaw, LawPieces, law_pieces, pieces_force
from detune.physics.nonlinear_recursion import run_on_laws
from detune.physics.simulation import Motion

# Radians of the stiffest motion in one step.
ANGLE_PER_STEP = 0.4


@dataclass(frozen=True, eq=False)
class NonlinearMotion:
    """Motion at the samples; deflection and force (T, E) of the elements; error: relative, of the largest
    force.

    beyond (E,) tells which elements left the table of their curve at some moment (it went on straight there).
    """

    motion: Motion
    deflection: FloatArray
    force: FloatArray
    error: float
    beyond: tuple[bool, ...]


def simulate_on_laws(
    mass: ArrayLike,
    damping: ArrayLike,
    rows: ArrayLike,
    laws: Sequence[ElementLaw],
    record: ArrayLike,
    step: float,
    shapes: ArrayLike | None = None,
    steady: ArrayLike = 0.0,
    offset: ArrayLike = 0.0,
    displacement: ArrayLike | None = None,
    velocity: ArrayLike | None = None,
) -> NonlinearMotion:
    """Motion of a machine on progressive mounts under a load record that is straight between samples.

    mass, damping (n, n); rows (E, n), deflection of element e is rows[e] @ q + offset[e]; laws: E of them;
    record (T, n), or (T, p) with shapes (n, p); step in s; steady (n,) constant load such as the weight.
    displacement, velocity (n,): start, as a rule the `at_rest` displacement under the steady load. For a base
    acceleration the load is -M i a(t) on coordinates relative to the base. Elements that leave their curve
    are told in `beyond`; their force there is no figure of the supplier.
    """
    m, c = (np.atleast_2d(np.asarray(a, dtype=float)) for a in (mass, damping))
    count = m.shape[0]
    b = np.atleast_2d(np.asarray(rows, dtype=float))
    table = np.asarray(record, dtype=float).reshape(np.shape(record)[0], -1)
    spread = np.eye(count) if shapes is None else np.asarray(shapes, dtype=float).reshape(count, -1)
    load = table @ spread.T + np.broadcast_to(np.asarray(steady, dtype=float), (count,))
    gap = np.broadcast_to(np.asarray(offset, dtype=float), (b.shape[0],))
    zero = np.zeros(count)
    start = np.stack([zero if s is None else np.asarray(s, dtype=float) for s in (displacement, velocity)])
    pieces = law_pieces(laws)
    parts = max(1, int(np.ceil(step * _fastest(m, c, b, pieces) / ANGLE_PER_STEP)))
    inverse = np.linalg.inv(m)
    setting = (m, c, b, laws, gap, load, step)
    rough = run_on_laws(*setting, parts, start)
    fine = run_on_laws(*setting, 2 * parts, start)
    deflection = fine[:, 0] @ b.T + gap
    force = pieces_force(pieces, deflection)[0]
    rough_force = pieces_force(pieces, rough[:, 0] @ b.T + gap)[0]
    largest = float(np.max(np.abs(force))) or 1.0
    error = float(np.max(np.abs(np.abs(force).max(axis=0) - np.abs(rough_force).max(axis=0)))) / largest
    acceleration = (load - fine[:, 1] @ c.T - force @ b) @ inverse.T
    motion = Motion(step, fine[:, 0], fine[:, 1], acceleration, acceleration)
    return NonlinearMotion(motion, deflection, force, error, _beyond(laws, deflection))


def _fastest(m: FloatArray, c: FloatArray, b: FloatArray, pieces: LawPieces) -> float:
    """Upper estimate in rad/s of the fastest motion, with every element at its stiffest slope."""
    corner = np.where(np.isfinite(pieces.corner), pieces.corner, 0.0)
    width = np.ones_like(pieces.anchor)
    width[:, 1:-1] = np.diff(corner, axis=1)
    c1, c2, c3 = (pieces.coefficient[..., i] for i in (1, 2, 3))
    # A cubic's slope is a parabola, bounded over a piece by its terms at the piece's width.
    steepest = (np.abs(c1) + 2.0 * np.abs(c2 * width) + 3.0 * np.abs(c3) * width**2).max(axis=1)
    inverse = np.linalg.inv(np.linalg.cholesky(m))
    stiffness = inverse @ (b.T @ (steepest[:, None] * b)) @ inverse.T
    damper = np.linalg.norm(inverse @ c @ inverse.T, 2)
    return float(np.sqrt(np.linalg.eigvalsh(stiffness)[-1]) + damper)


def _beyond(laws: Sequence[ElementLaw], deflection: FloatArray) -> tuple[bool, ...]:
    outcome = []
    for e, law in enumerate(laws):
        if law.curve is None:
            outcome.append(False)
            continue
        used = deflection[:, e] if law.pulls else np.maximum(deflection[:, e], 0.0)
        ends = law.curve.deflection
        outcome.append(bool(used.min() < ends[0] or used.max() > ends[-1]))
    return tuple(outcome)
