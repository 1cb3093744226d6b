"""The assessor's motion in time: steps of one length by the matrix exponential of the machine's own equations.

    x' = A x + b g(t),  x(t + h) = exp(A h) x(t) + integral_0^h exp(A (h - s)) b g(t + s) ds

x holds the undamped modes' displacements times their frequencies and their velocities, in which A is nearly skew and
of one unit. No complex mode is asked for, so that critical damping is like any other.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from detune.response.direct_modes import DirectModes

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
TWO_PI = 2.0 * np.pi
# Points of the Gauss-Legendre rule in a step: at 40 steps a cycle it errs by less than 1e-9 of the load.
POINTS = 3


@dataclass(frozen=True, eq=False)
class Stepping:
    """The machine's modes in time: n freedoms, states (2n,)."""

    found: DirectModes

    @cached_property
    def omega(self) -> Floats:
        """Undamped frequencies (n,), rad/s."""
        return TWO_PI * self.found.frequency

    @cached_property
    def _carried(self) -> Floats:
        return np.asarray(self.found.mass @ self.found.shapes)

    @cached_property
    def damping(self) -> Floats:
        """Viscous damping (n, n) of the freedoms: the stated one, and each mode's stand-in for its loss factor."""
        shapes = self.found.shapes
        lost = np.diag(shapes.T @ self.found.hysteretic @ shapes)
        return np.asarray(self.found.viscous + (self._carried / self.omega * lost) @ self._carried.T)

    @cached_property
    def _modal(self) -> tuple[Floats, Floats]:
        """Stiffness and damping (n, n) between the modes."""
        shapes = self.found.shapes
        return shapes.T @ self.found.stiffness @ shapes, shapes.T @ self.damping @ shapes

    @cached_property
    def matrix(self) -> Floats:
        """A (2n, 2n)."""
        stiffness, damping = self._modal
        count = len(self.omega)
        return np.block(
            [[np.zeros((count, count)), np.diag(self.omega)], [-stiffness / self.omega, -damping]]
        )

    def loaded(self, load: NDArray[Any]) -> NDArray[Any]:
        """b (2n,) of a load (n,) on the freedoms."""
        return np.concatenate([np.zeros(len(load)), self.found.shapes.T @ load])

    def state(self, displacement: Floats, velocity: Floats) -> Floats:
        """The state (2n,) of the freedoms at given displacement and velocity (n,)."""
        return np.concatenate([self.omega * (self._carried.T @ displacement), self._carried.T @ velocity])

    def rates(self, states: NDArray[Any], load: NDArray[Any]) -> tuple[NDArray[Any], NDArray[Any]]:
        """Displacement, velocity and acceleration (3, T, n) of the freedoms, and modal velocities over frequency.

        states (T, 2n); load (T, n) on the modes, as `loaded` has it in its second half. The last is (T, n) too.
        """
        count = len(self.omega)
        stiffness, damping = self._modal
        moved, fast = states[:, :count] / self.omega, states[:, count:]
        faster = load - moved @ stiffness.T - fast @ damping.T
        shapes = self.found.shapes.T
        found = np.empty((3, len(states), count), dtype=states.dtype)
        for number, modal in enumerate((moved, fast, faster)):
            np.matmul(modal, shapes, out=found[number])
        return found, (fast / self.omega) @ shapes


def stepped(advance: Floats, drive: NDArray[Any], start: NDArray[Any]) -> NDArray[Any]:
    """Return states (T + 1, s) of x_(k+1) = advance x_k + drive_k from x_0 = start (s,); drive (T, s).

    Taken in as many blocks as a block has steps: all blocks step together from rest, and what each starts with is
    added afterwards.
    """
    steps, size = drive.shape
    length = max(1, int(np.ceil(np.sqrt(steps))))
    blocks = -(-steps // length)
    kind = np.result_type(drive, start)
    inner = np.zeros((blocks * length, size), dtype=kind)
    inner[:steps] = drive
    inner = inner.reshape(blocks, length, size)
    turned = advance.T.astype(kind)
    # powers[k] = (advance^T)^(k + 1)
    powers = np.empty((length, size, size), dtype=kind)
    powers[0] = turned
    for k in range(1, length):
        inner[:, k] += inner[:, k - 1] @ turned
        powers[k] = powers[k - 1] @ turned
    first = np.empty((blocks, size), dtype=kind)
    now = start.astype(kind)
    for block in range(blocks):
        first[block] = now
        now = now @ powers[-1] + inner[block, -1]
    # (B, s) by (L, s, s) to (L, B, s): what every block starts with, carried through its steps.
    inner += (first @ powers).transpose(1, 0, 2)
    return np.concatenate([start.astype(kind)[None], inner.reshape(-1, size)[:steps]])


def swept_states(
    stepping: Stepping, loads: Sequence[tuple[Complexes, int]], way: tuple[float, float, float], count: int
) -> tuple[Complexes, Complexes]:
    """Return states (count, 2n) and modal loads (count, n) of a run from rest, both complex envelopes with their phase.

    loads: vectors (n,) on the freedoms with the power of the speed that each grows with. way: first and last speed
    of the load in rad/s, and the time (s) between. The load's integral in a step is taken by Gauss's rule.
    """
    from scipy.linalg import expm

    start, end, time = way
    step = time / (count - 1)
    node, weight = np.polynomial.legendre.leggauss(POINTS)
    share = 0.5 * (node + 1.0)
    moment = np.linspace(0.0, time, count)
    inside = moment[:-1, None] + share * step
    # exp(A (h - s)) at every node.
    carried = [expm(stepping.matrix * (step * (1.0 - s))) for s in share]
    advance = expm(stepping.matrix * step)

    def load_at(t: Floats, power: int) -> Complexes:
        speed = start + (end - start) * t / time
        return np.asarray(speed**power * np.exp(1j * (start * t + 0.5 * (end - start) * t**2 / time)))

    drive = np.zeros((count - 1, len(advance)), dtype=complex)
    acting = np.zeros((count, len(stepping.omega)), dtype=complex)
    for vector, power in loads:
        pattern = stepping.loaded(vector)
        reached = np.stack([0.5 * step * w * (e @ pattern) for w, e in zip(weight, carried, strict=True)])
        drive += load_at(inside, power) @ reached
        acting += load_at(moment, power)[:, None] * pattern[len(stepping.omega) :]
    return stepped(advance, drive, np.zeros(len(advance))), acting


def straight_states(
    stepping: Stepping, pattern: Floats, values: Floats, step: float, state: Floats
) -> Floats:
    """Return states (T, 2n) under a load that is straight between its samples values (T,) along pattern (2n,).

    Exact at any step: the integrals over a step are blocks of one matrix exponential (Van Loan, IEEE Trans. Autom.
    Control 23 (1978) 395; from memory).
    """
    from scipy.linalg import expm

    size = len(state)
    block = np.zeros((size + 2, size + 2))
    block[:size, :size], block[:size, size] = stepping.matrix * step, pattern * step
    block[size, size + 1] = 1.0
    whole = expm(block)
    held, rising = whole[:size, size], whole[:size, size + 1]
    drive = values[:-1, None] * held + np.diff(values)[:, None] * rising
    return np.asarray(stepped(whole[:size, :size], drive, state))
