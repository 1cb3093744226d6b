"""Motion in time of a linear viscous system under a load that is straight between samples: exact recursion.

    M q'' + C q' + K q = f(t)

Between two samples the load is straight, so the step from one to the next is exact (first-order hold); the
step carries no error of its own at any length. Systems that have a full set of complex modes are taken apart
into scalar recursions; the others (critical damping, a free body) go through the matrix exponential.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from detune.physics.array_types import AnyArray, ArrayLike, ComplexArray, FloatArray

# Beyond this condition number of the eigenvectors, modal decoupling loses more than six digits.
WORST_CONDITION = 1e7
SAMPLES_PER_CYCLE = 14


class DefectiveModes(ArithmeticError):
    """The system has no full set of complex modes (critical damping, or a body that nothing holds)."""


@dataclass(frozen=True, eq=False)
class Motion:
    """Displacement, velocity and acceleration (T, n) at samples `step` s apart.

    acceleration holds the values just before each sample, acceleration_after those just after; they differ
    only where the load jumps.
    """

    step: float
    displacement: FloatArray
    velocity: FloatArray
    acceleration: FloatArray
    acceleration_after: FloatArray


@dataclass(frozen=True, eq=False)
class StateModes:
    """Complex modes: q = Re or sum of shapes (n, m) times y (m,), with y' = poles y + loads (m, n) f.

    All poles are there, both of each pair, so m = 2n and the sum over all modes is q itself.
    """

    poles: ComplexArray
    shapes: ComplexArray
    loads: ComplexArray


@dataclass(frozen=True, eq=False)
class Extremes:
    """Highest and lowest value (R,) over time and the times (R,) in s at which they occur."""

    highest: FloatArray
    lowest: FloatArray
    highest_time: FloatArray
    lowest_time: FloatArray

    @property
    def largest(self) -> FloatArray:
        """Largest magnitude (R,)."""
        return np.maximum(self.highest, -self.lowest)


def phi1(z: ArrayLike) -> ComplexArray:
    """(exp(z) - 1)/z, 1 at z = 0."""
    x = np.asarray(z, dtype=complex)
    zero = x == 0.0
    return np.asarray(np.where(zero, 1.0, np.expm1(x) / np.where(zero, 1.0, x)))


def phi2(z: ArrayLike) -> ComplexArray:
    """(exp(z) - 1 - z)/z^2, 1/2 at z = 0."""
    x = np.asarray(z, dtype=complex)
    near = np.abs(x) < 0.5
    small = np.where(near, x, 0.0)
    series = np.full_like(x, 1.0)
    # 1/2! + z/3! + ... in Horner's form; 14 terms leave 1e-18 at |z| = 0.5.
    for k in range(15, 2, -1):
        series = 1.0 + small / k * series
    far = np.where(near, 1.0, x)
    return np.asarray(np.where(near, 0.5 * series, (phi1(far) - 1.0) / far))


def simulate(
    mass: ArrayLike,
    damping: ArrayLike,
    stiffness: ArrayLike,
    record: ArrayLike,
    step: float,
    shapes: ArrayLike | None = None,
    record_after: ArrayLike | None = None,
    displacement: ArrayLike | None = None,
    velocity: ArrayLike | None = None,
) -> Motion:
    """Motion under a load record, exact for a load that is straight between samples.

    mass, damping, stiffness (n, n) in SI; record (T, n) load on each freedom, or (T, p) with shapes (n, p) so
    that the load is shapes @ record; step in s. record_after: values just after each sample where the load
    jumps. displacement, velocity (n,): state at the first sample, rest if left out. A base acceleration a(t)
    enters as the load -M i a(t) on coordinates relative to the base. Raises ValueError for shapes that do not
    fit, and numpy.linalg.LinAlgError unless mass is positive definite.
    """
    m, c, k = (np.atleast_2d(np.asarray(a, dtype=float)) for a in (mass, damping, stiffness))
    count = m.shape[0]
    before = _columns(record)
    after = before if record_after is None else _columns(record_after)
    spread = np.eye(count) if shapes is None else np.asarray(shapes, dtype=float).reshape(count, -1)
    if before.shape != after.shape or before.shape[1] != spread.shape[1]:
        raise ValueError("the load record does not fit the load shapes")
    start = [np.zeros(count) if s is None else np.asarray(s, dtype=float) for s in (displacement, velocity)]
    state, load, unit, fast = _scaled_state(m, c, k)
    lower = np.linalg.cholesky(m)
    initial = np.r_[lower.T @ start[0], lower.T @ start[1] / fast]
    states = simulate_states(state, load @ spread, before, step, after, initial)
    moved = states[:, :count] @ unit.T
    speed = fast * (states[:, count:] @ unit.T)
    held = speed @ c.T + moved @ k.T
    acceleration = np.linalg.solve(m, (before @ spread.T - held).T).T
    if after is before:
        return Motion(step, moved, speed, acceleration, acceleration)
    return Motion(step, moved, speed, acceleration, np.linalg.solve(m, (after @ spread.T - held).T).T)


def simulate_states(
    state: ArrayLike,
    inputs: ArrayLike,
    record: ArrayLike,
    step: float,
    record_after: ArrayLike | None = None,
    initial: ArrayLike | None = None,
) -> FloatArray:
    """States (T, s) of x' = state x + inputs u for u (T, p) straight between samples; exact.

    state (s, s), inputs (s, p), step in s; record_after as in `simulate`; initial (s,) or rest.
    """
    from scipy.linalg import matrix_balance

    # Balancing takes the mixture of units out of the condition number of the eigenvectors.
    a, scale = matrix_balance(np.asarray(state, dtype=float), permute=False, separate=True)
    size = np.asarray(scale[0], dtype=float)
    b = np.asarray(inputs, dtype=float).reshape(a.shape[0], -1) / size[:, None]
    before = _columns(record)
    after = before if record_after is None else _columns(record_after)
    first = np.zeros(a.shape[0]) if initial is None else np.asarray(initial, dtype=float) / size
    poles, vectors = np.linalg.eig(a)
    if np.linalg.cond(vectors) > WORST_CONDITION:
        return np.asarray(size * _matrix_recursion(a, b, before, after, step, first))
    return np.asarray(size * _modal_recursion(poles, vectors, b, before, after, step, first))


def state_modes(mass: ArrayLike, damping: ArrayLike, stiffness: ArrayLike) -> StateModes:
    """Complex modes of M q'' + C q' + K q = f, matrices (n, n).

    Raises DefectiveModes when there is no full set; a small change of damping or stiffness gives one.
    """
    m, c, k = (np.atleast_2d(np.asarray(a, dtype=float)) for a in (mass, damping, stiffness))
    count = m.shape[0]
    state, load, unit, _ = _scaled_state(m, c, k)
    poles, vectors = np.linalg.eig(state)
    condition = float(np.linalg.cond(vectors))
    if condition > WORST_CONDITION:
        raise DefectiveModes(f"the complex modes are not independent (condition number {condition:.1e})")
    loads = np.linalg.solve(vectors, load.astype(complex))
    return StateModes(poles.astype(complex), unit @ vectors[:count], loads)


def refined_record(record: ArrayLike, step: float, fastest: float) -> tuple[FloatArray, float]:
    """The record (T, ...) with straight pieces cut so that the fastest motion, in rad/s, has 14 samples a
    cycle.

    Changes nothing in the motion, which is exact at any step; it brings the samples close enough for `peaks`.
    Returns the record and its new step in s.
    """
    given = np.asarray(record, dtype=float)
    parts = max(1, int(np.ceil(fastest * step * SAMPLES_PER_CYCLE / (2.0 * np.pi))))
    share = (np.arange(parts) / parts).reshape(1, parts, *([1] * (given.ndim - 1)))
    inner = given[:-1, None] + share * np.diff(given, axis=0)[:, None]
    return np.concatenate([inner.reshape(-1, *given.shape[1:]), given[-1:]]), step / parts


def peaks(motion: Motion, displacement_rows: ArrayLike, velocity_rows: ArrayLike | None = None) -> Extremes:
    """Extremes between samples of R responses: displacement_rows (R, n) on q plus velocity_rows (R, n) on q'.

    Spring and damper forces, deflections and absolute accelerations M^-1(-C q' - K q) have this form. Between
    samples the response is the cubic with the exact values and rates at both ends: fourteen samples in a
    cycle give 1e-4 of the peak.
    """
    rows = np.atleast_2d(np.asarray(displacement_rows, dtype=float))
    value, rate = motion.displacement @ rows.T, motion.velocity @ rows.T
    if velocity_rows is None:
        return extremes_between_samples(value, rate, rate, motion.step)
    fast = np.atleast_2d(np.asarray(velocity_rows, dtype=float))
    value = value + motion.velocity @ fast.T
    return extremes_between_samples(
        value, rate + motion.acceleration @ fast.T, rate + motion.acceleration_after @ fast.T, motion.step
    )


def extremes_between_samples(
    value: ArrayLike, rate_before: ArrayLike, rate_after: ArrayLike, step: float
) -> Extremes:
    """Extremes (R,) of signals with values (T, R) and rates just before and after each sample (T, R)."""
    x = _columns(value)
    up, down = _columns(rate_after)[:-1] * step, _columns(rate_before)[1:] * step
    rise = np.diff(x, axis=0)
    turning = up * down < 0.0
    when, column = np.nonzero(turning)
    m0, m1, d = up[turning], down[turning], rise[turning]
    cubic, square = 3.0 * (m0 + m1 - 2.0 * d), 2.0 * (3.0 * d - 2.0 * m0 - m1)
    # The one root in (0, 1) of cubic t^2 + square t + m0, in the form that survives a vanishing cubic term.
    root = np.sqrt(np.maximum(square**2 - 4.0 * cubic * m0, 0.0))
    t = -2.0 * m0 / (square - np.sign(m0) * root)
    between = x[when, column] + t * (m0 + t * (0.5 * square + t * cubic / 3.0))
    outcome = []
    for sign in (1.0, -1.0):
        best = np.argmax(sign * x, axis=0)
        top, at = np.max(sign * x, axis=0), best * step
        order = np.argsort(sign * between, kind="stable")
        # Later entries overwrite earlier ones, so the largest of each column is left.
        inner, inner_at = np.full(x.shape[1], -np.inf), np.zeros(x.shape[1])
        inner[column[order]] = sign * between[order]
        inner_at[column[order]] = (when[order] + t[order]) * step
        outcome += [sign * np.maximum(top, inner), np.where(inner > top, inner_at, at)]
    return Extremes(outcome[0], outcome[2], outcome[1], outcome[3])


def _columns(values: ArrayLike) -> FloatArray:
    table = np.asarray(values, dtype=float)
    return table[:, None] if table.ndim == 1 else table


def _scaled_state(
    m: FloatArray, c: FloatArray, k: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray, float]:
    """State matrix in mass-normalised coordinates with velocities over a reference, so that units do not
    matter.

    Returns the matrix (2n, 2n), its load matrix (2n, n), the way back to q (n, n) and the reference in rad/s.
    """
    count = m.shape[0]
    inverse = np.linalg.inv(np.linalg.cholesky(m))
    spring, damper = inverse @ k @ inverse.T, inverse @ c @ inverse.T
    fast = float(np.sqrt(np.abs(np.linalg.eigvals(spring)).max())) or 1.0
    state = np.zeros((2 * count, 2 * count))
    state[:count, count:] = fast * np.eye(count)
    state[count:, :count] = -spring / fast
    state[count:, count:] = -damper
    load = np.vstack([np.zeros((count, count)), inverse / fast])
    return state, load, inverse.T, fast


def _modal_recursion(
    poles: AnyArray,
    vectors: AnyArray,
    b: FloatArray,
    before: FloatArray,
    after: FloatArray,
    step: float,
    first: FloatArray,
) -> FloatArray:
    from scipy.signal import lfilter

    # Of each conjugate pair one is carried and its real part doubled.
    kept = poles.imag >= 0.0
    weight = np.where(poles.imag[kept] > 0.0, 2.0, 1.0)
    loads = np.linalg.solve(vectors, b.astype(complex))[kept]
    start = np.linalg.solve(vectors, first.astype(complex))[kept]
    z = poles[kept] * step
    late = step * phi2(z)
    early = step * phi1(z) - late
    drive = (after[:-1] @ loads.T) * early + (before[1:] @ loads.T) * late
    modal = np.empty((before.shape[0], z.size), dtype=complex)
    for i in range(z.size):
        modal[:, i] = lfilter([1.0], [1.0, -np.exp(z[i])], np.r_[start[i], drive[:, i]])
    return np.asarray(((modal * weight) @ vectors[:, kept].T).real)


def _matrix_recursion(
    a: FloatArray, b: FloatArray, before: FloatArray, after: FloatArray, step: float, first: FloatArray
) -> FloatArray:
    from scipy.linalg import expm

    size, width = b.shape
    block = np.zeros((size + 2 * width, size + 2 * width))
    block[:size, :size], block[:size, size : size + width] = a * step, b * step
    block[size : size + width, size + width :] = np.eye(width)
    exponential = expm(block)
    advance, whole = exponential[:size, :size], exponential[:size, size : size + width]
    late = exponential[:size, size + width :]
    drive = after[:-1] @ (whole - late).T + before[1:] @ late.T
    states = np.empty((before.shape[0], size))
    states[0] = first
    for i in range(before.shape[0] - 1):
        states[i + 1] = advance @ states[i] + drive[i]
    return states
