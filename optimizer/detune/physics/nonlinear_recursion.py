"""Motion on load-deflection curves by an exact linear recursion, the bend of the curves put on as a load.

    M q'' + C q' + K q + sum rows[e].T r_e = f(t),    r_e = force_e(d) - tangent_e (d - d_0)

K holds the tangents at the start, so that r is all that is not linear. Over each step f is straight and r is the
cubic with the values and rates of both ends; the step under such loads is exact (matrix exponential), so a step errs
with the fourth power of its length and by the bend alone. Values and rates of r belong to the motion they make: a
window of steps is run through again until it changes no more, which converges faster than any power (waveform
iteration; Hairer, Norsett and Wanner, Solving Ordinary Differential Equations I, sec. I.8). A window in which an
element meets a kink (a stop, a mount going slack) is taken in finer steps.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from detune.physics.array_types import BoolArray, FloatArray
from detune.physics.load_curve import ElementLaw, LawPieces, law_pieces, pieces_force

WINDOW = 32
MOST_ITERATIONS = 40
# Change of the deflections at which a window is settled, of the largest deflection.
SETTLED = 1e-9
# Parts of a step in a window with a kink, and what jump of slope makes one, of the largest slope.
FINER = 8
KINK = 1e-3


class WindowNotSettled(ArithmeticError):
    """The iteration over one step did not settle: the step is far too long for the stiffness."""


@dataclass(frozen=True, eq=False)
class _Step:
    """Exact step of length `time` for states (q, q'/fast): `advance` (s, s), and what a load and its first, second
    and third derivative by time/step add, for loads on the freedoms (4, s, n) and through the elements (4, s, E)."""

    time: float
    advance: FloatArray
    loads: FloatArray
    bends: FloatArray


@dataclass(frozen=True, eq=False)
class _Curved:
    """Elements with a bend: rows (E, n), offsets, reference slopes and start (E,), their cubics, and their kinks."""

    rows: FloatArray
    gap: FloatArray
    slope: FloatArray
    pieces: LawPieces
    kinks: BoolArray

    def deflected(self, states: FloatArray, n: int) -> FloatArray:
        """Return the deflections (T, E) in states (T, 2n)."""
        return np.asarray(states[:, :n] @ self.rows.T + self.gap)

    def bend(self, deflection: FloatArray, rate: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return what the forces have beyond the reference slopes, and its rate, (T, E)."""
        force, tangent = pieces_force(self.pieces, deflection)
        return force - self.slope * (deflection - self.gap), (tangent - self.slope) * rate

    def meets_kink(self, deflection: FloatArray) -> bool:
        """Return whether an element passes a kink among deflections (T, E)."""
        if not self.kinks.any():
            return False
        beyond = (deflection[..., None] >= self.pieces.corner) & self.kinks
        return bool(np.any(beyond[1:] != beyond[:-1]))


def run_on_laws(
    mass: FloatArray,
    damping: FloatArray,
    rows: FloatArray,
    laws: Sequence[ElementLaw],
    gap: FloatArray,
    load: FloatArray,
    step: float,
    parts: int,
    start: FloatArray,
) -> FloatArray:
    """States (T, 2, n) at the samples, displacement and velocity, each step between them taken in `parts`.

    mass, damping (n, n); rows (E, n) and gap (E,): deflection of element e is rows[e] @ q + gap[e]; load (T, n)
    straight between samples; step in s; start (2, n). Raises WindowNotSettled.
    """
    n = mass.shape[0]
    bent = np.array([law.curve is not None or not law.pulls or law.stop_stiffness > 0.0 for law in laws])
    stiffness, held, curved = _split(rows, laws, gap, bent, start[0])
    fast = float(np.sqrt(np.abs(np.linalg.eigvals(np.linalg.solve(mass, stiffness))).max())) or 1.0
    inverse = np.linalg.inv(mass)
    system = np.block(
        [[np.zeros((n, n)), fast * np.eye(n)], [-inverse @ stiffness / fast, -inverse @ damping]]
    )
    spread = np.vstack([np.zeros((n, n)), inverse / fast])
    acting = load - held
    time = step / parts
    plain = _propagator(system, spread, curved.rows, time)
    finer = _propagator(system, spread, curved.rows, time / FINER) if curved.kinks.any() else None
    states = np.empty((load.shape[0], 2 * n))
    states[0] = np.r_[start[0], start[1] / fast]
    samples = max(1, WINDOW // parts)
    for first in range(0, load.shape[0] - 1, samples):
        piece = acting[first : first + samples + 1]
        found = _window(plain, curved, fast, _straight(piece, parts), states[first])
        if finer is not None and (found is None or curved.meets_kink(curved.deflected(found, n))):
            found = _window(finer, curved, fast, _straight(piece, parts * FINER), states[first])
            found = None if found is None else found[::FINER]
        if found is None:
            found = _one_by_one(plain, curved, fast, _straight(piece, parts), states[first])
        states[first : first + len(piece)] = found[::parts]
    return np.stack([states[:, :n], fast * states[:, n:]], axis=1)


def _split(
    rows: FloatArray, laws: Sequence[ElementLaw], gap: FloatArray, bent: BoolArray, start: FloatArray
) -> tuple[FloatArray, FloatArray, _Curved]:
    """Stiffness (n, n) with every element's slope at the start, forces (n,) at q = 0 of the straight elements, and the
    bent ones."""
    pieces = law_pieces(laws)
    force, slope = pieces_force(pieces, rows @ start + gap)
    stiffness = rows.T @ (slope[:, None] * rows)
    straight = ~bent
    constant = force[straight] - slope[straight] * (rows[straight] @ start)
    kept = LawPieces(pieces.corner[bent], pieces.anchor[bent], pieces.coefficient[bent])
    curved = _Curved(rows[bent], gap[bent], slope[bent], kept, _kinks(kept))
    return stiffness, constant @ rows[straight], curved


def _kinks(pieces: LawPieces) -> BoolArray:
    """Mask (E, C) of the corners at which the slope jumps."""
    finite = np.isfinite(pieces.corner)
    corner = np.where(finite, pieces.corner, 0.0)

    def slope(shift: int) -> FloatArray:
        # The piece before a corner has the corner's own number, the one after it the next.
        x = corner - pieces.anchor[:, shift : shift + corner.shape[1]]
        c = pieces.coefficient[:, shift : shift + corner.shape[1]]
        return np.asarray(c[..., 1] + x * (2.0 * c[..., 2] + 3.0 * x * c[..., 3]))

    left, right = slope(0), slope(1)
    largest = np.max(np.where(finite, np.maximum(np.abs(left), np.abs(right)), 0.0), axis=1, initial=0.0)
    return np.asarray(finite & (np.abs(right - left) > KINK * largest[:, None]))


def _propagator(system: FloatArray, spread: FloatArray, rows: FloatArray, time: float) -> _Step:
    from scipy.linalg import expm

    size, inputs = system.shape[0], np.hstack([spread, spread @ rows.T])
    width = inputs.shape[1]
    # The chain of identities integrates loads that grow with the powers of time (Van Loan, IEEE Trans. AC-23, 1978).
    block = np.zeros((size + 4 * width, size + 4 * width))
    block[:size, :size], block[:size, size : size + width] = system * time, inputs * time
    for power in range(3):
        at = size + power * width
        block[at : at + width, at + width : at + 2 * width] = np.eye(width)
    exponential = expm(block)[:size]
    held = exponential[:, size:].reshape(size, 4, width).transpose(1, 0, 2)
    count = spread.shape[1]
    return _Step(time, exponential[:, :size], held[:, :, :count], held[:, :, count:])


def _straight(load: FloatArray, parts: int) -> FloatArray:
    """The load with each straight piece cut into parts."""
    if parts == 1:
        return load
    share = (np.arange(parts) / parts)[:, None]
    inner = load[:-1, None] + share * np.diff(load, axis=0)[:, None]
    return np.concatenate([inner.reshape(-1, load.shape[1]), load[-1:]])


def _window(
    step: _Step, curved: _Curved, fast: float, load: FloatArray, state: FloatArray
) -> FloatArray | None:
    """States (W + 1, 2n) from a state on, None where the iteration does not settle."""
    n = load.shape[1]
    pushed = load[:-1] @ step.loads[0].T + np.diff(load, axis=0) @ step.loads[1].T
    states = np.empty((load.shape[0], 2 * n))
    states[0] = state
    bend, rate = curved.bend(curved.deflected(state[None], n), fast * state[None, n:] @ curved.rows.T)
    bend = np.repeat(bend, load.shape[0], axis=0)
    rate = np.repeat(rate, load.shape[0], axis=0)
    before = np.full((load.shape[0], curved.gap.size), np.inf)
    for _ in range(MOST_ITERATIONS):
        drive = pushed - _bent(step, bend, rate)
        for i in range(len(drive)):
            states[i + 1] = step.advance @ states[i] + drive[i]
        deflection = curved.deflected(states, n)
        largest = float(np.max(np.abs(deflection), initial=0.0))
        if not np.isfinite(largest):
            return None
        if float(np.max(np.abs(deflection - before), initial=0.0)) <= SETTLED * largest:
            return states
        before = deflection
        bend, rate = curved.bend(deflection, fast * states[:, n:] @ curved.rows.T)
    return None


def _bent(step: _Step, bend: FloatArray, rate: FloatArray) -> FloatArray:
    """What the bends add in each step (W, 2n): cubics through values and rates (W + 1, E) at the ends."""
    rise = np.diff(bend, axis=0)
    early, late = step.time * rate[:-1], step.time * rate[1:]
    added: FloatArray = bend[:-1] @ step.bends[0].T + early @ step.bends[1].T
    added += 2.0 * (3.0 * rise - 2.0 * early - late) @ step.bends[2].T
    added += 6.0 * (early + late - 2.0 * rise) @ step.bends[3].T
    return added


def _one_by_one(step: _Step, curved: _Curved, fast: float, load: FloatArray, state: FloatArray) -> FloatArray:
    """States of a window that did not settle as a whole, step after step."""
    states = [state]
    for i in range(len(load) - 1):
        found = _window(step, curved, fast, load[i : i + 2], states[-1])
        if found is None:
            raise WindowNotSettled("the motion on the curves did not settle within one step")
        states.append(found[-1])
    return np.stack(states)
