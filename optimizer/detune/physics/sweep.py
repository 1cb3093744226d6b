"""Run-up and coast-down through resonance: the envelope of the response to a force of changing frequency.

The load is Re(g omega(t)^p exp(j phi(t))) with d phi/dt = omega(t), straight in time between stated moments;
p = 2 for an unbalance, where g is the mass times eccentricity. For each complex mode y' = pole y + load the
response is then an integral of exp(quadratic), that is the Faddeeva function w(z) = exp(-z^2) erfc(-j z), so
the response at any moment is evaluated in closed form and nothing is stepped along the sweep. The modulus of
the complex response is the envelope: no maximum is lost between samples of a carrier.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from detune.physics.array_types import ArrayLike, ComplexArray, FloatArray
from detune.physics.simulation import StateModes, phi1, state_modes

LARGEST_POWER = 4
CANDIDATES = 5
FEWEST_LOOKS = 1500
MOST_LOOKS = 20_000
UNDAMPED = 1e-12
AT_ONCE = 256
# Square of the distance beyond which so many terms of the series are enough.
FAR, TERMS = 81.0, 14


@dataclass(frozen=True, eq=False)
class SweepPeak:
    """Largest envelope of each response (R,), the speed in rad/s and time in s at which it stands, and steady
    state.

    steady is the largest steady-state amplitude over the same speeds; attenuation = peak/steady.
    """

    peak: FloatArray
    omega: FloatArray
    time: FloatArray
    steady: FloatArray

    @property
    def attenuation(self) -> FloatArray:
        """Peak over largest steady-state amplitude (R,); 1 where nothing moves."""
        moving = self.steady > 0.0
        return np.where(moving, self.peak / np.where(moving, self.steady, 1.0), 1.0)


def sweep_envelope(
    modes: StateModes,
    load: ArrayLike,
    moment: ArrayLike,
    speed: ArrayLike,
    power: int,
    time: ArrayLike,
) -> tuple[ComplexArray, ComplexArray]:
    """Complex displacement and velocity (T, n) at time (T,) in s, whose moduli are the envelopes; exact.

    modes of the machine; load (n,) complex, the amplitude over omega^power; moment (S + 1,) in s rising from
    the start at rest, speed (S + 1,) in rad/s at these moments, straight between; power 0 to 4. Times must
    lie within the moments. The phasors carry the phase of the sweep. Raises ValueError otherwise.
    """
    at, omega, asked = _checked(moment, speed, power, time)
    drive = modes.loads @ np.asarray(load, dtype=complex)
    y = np.zeros((asked.size, modes.poles.size), dtype=complex)
    start, phase = np.zeros(modes.poles.size, dtype=complex), 0.0
    for i in range(at.size - 1):
        length = at[i + 1] - at[i]
        rate = (omega[i + 1] - omega[i]) / length
        inside = (asked >= at[i]) & (asked <= at[i + 1])
        since = np.r_[asked[inside] - at[i], length]
        turned = np.exp(1j * phase) * drive
        piece = turned * _forced(modes.poles, omega[i], rate, power, since)
        if np.any(start):
            piece = piece + start * np.exp(modes.poles * since[:, None])
        y[inside] = piece[:-1]
        start = piece[-1]
        phase += omega[i] * length + 0.5 * rate * length**2
    return y @ modes.shapes.T, (y * modes.poles) @ modes.shapes.T


def unit_sweep(
    modes: StateModes, speed: tuple[float, float], duration: float, power: int, time: ArrayLike
) -> ComplexArray:
    """Complex modes (T, m) at time (T,) in s under omega^power exp(j phi) on each, from rest; exact.

    speed in rad/s at the start and at the end, straight between over `duration` in s; power 0 to 4. Any load on the
    machine is this times `modes.loads @ load`. Raises ValueError for times outside the run.
    """
    at, omega, asked = _checked([0.0, duration], speed, power, time)
    return _forced(modes.poles, omega[0], (omega[1] - omega[0]) / at[1], power, asked)


def run_through(
    mass: ArrayLike,
    damping: ArrayLike,
    stiffness: ArrayLike,
    load: ArrayLike,
    moment: ArrayLike,
    speed: ArrayLike,
    power: int = 2,
    displacement_rows: ArrayLike | None = None,
    velocity_rows: ArrayLike | None = None,
) -> SweepPeak:
    """Peaks of R responses of M q'' + C q' + K q = load omega^power exp(j phi), from rest, over a speed
    history.

    Matrices (n, n) in SI, load (n,) complex, moment (S + 1,) in s and speed (S + 1,) in rad/s (two of each
    for a run-up or coast-down at a constant rate). Responses are displacement_rows (R, n) on q (each freedom
    if left out) plus velocity_rows (R, n) on q'. Peaks are refined to 1e-5. Raises DefectiveModes,
    ValueError.
    """
    modes = state_modes(mass, damping, stiffness)
    count = modes.shapes.shape[0]
    rows = np.eye(count) if displacement_rows is None else np.atleast_2d(np.asarray(displacement_rows, float))
    fast = np.zeros_like(rows) if velocity_rows is None else np.atleast_2d(np.asarray(velocity_rows, float))
    at, omega, _ = _checked(moment, speed, power, np.asarray(moment))

    def envelope(time: FloatArray) -> FloatArray:
        moved, velocity = sweep_envelope(modes, load, at, omega, power, time)
        return np.asarray(np.abs(moved @ rows.T + velocity @ fast.T))

    peak, time = _largest(envelope, _moments_to_look_at(modes, at, omega))
    highest = _steady_peak(modes, modes.loads @ np.asarray(load, dtype=complex), omega, power, rows, fast)
    return SweepPeak(peak, np.interp(time, at, omega), time, highest)


def octave_sweep(low: float, high: float, octaves_per_minute: float) -> tuple[FloatArray, FloatArray]:
    """Moments (S + 1,) in s and speeds (S + 1,) in rad/s of a logarithmic sweep from low to high in Hz.

    df/dt = f ln2 R/60, drawn as straight pieces of a fiftieth of an octave. high below low sweeps down.
    """
    if not (low > 0.0 and high > 0.0 and low != high and octaves_per_minute > 0.0):
        raise ValueError("a sweep goes between two different frequencies above zero at a rate above zero")
    octaves = np.log2(high / low)
    part = np.linspace(0.0, 1.0, int(np.ceil(50.0 * abs(octaves))) + 1)
    return part * abs(octaves) * 60.0 / octaves_per_minute, 2.0 * np.pi * low * 2.0 ** (part * octaves)


def sweep_parameter(frequency: ArrayLike, quality: ArrayLike, rate: ArrayLike) -> FloatArray:
    """Sweep parameter eta = Q^2 (df/dt)/fn^2 of a mode: fn in Hz, Q = 1/(2 z), rate df/dt in Hz/s, either
    sense.
    """
    f, q, r = (np.asarray(a, dtype=float) for a in (frequency, quality, rate))
    return np.asarray(q**2 * np.abs(r) / f**2)


def attenuation_estimate(eta: ArrayLike) -> FloatArray:
    """Peak over steady-state peak of a lightly damped mode: Cronin's fit 1 - exp(-2.86 eta^-0.445); within 1
    %.

    D. L. Cronin (1965), from memory. A check and a first estimate; `run_through` computes it.
    """
    return np.asarray(1.0 - np.exp(-2.86 * np.asarray(eta, dtype=float) ** -0.445))


def _checked(
    moment: ArrayLike, speed: ArrayLike, power: int, time: ArrayLike
) -> tuple[FloatArray, FloatArray, FloatArray]:
    at, omega = np.asarray(moment, dtype=float), np.asarray(speed, dtype=float)
    asked = np.asarray(time, dtype=float)
    if at.ndim != 1 or at.shape != omega.shape or at.size < 2 or np.any(np.diff(at) <= 0.0):
        raise ValueError("a run needs two or more rising moments and a speed at each")
    if np.any(omega < 0.0):
        raise ValueError("the speed of a run is not below zero")
    if np.any(asked < at[0]) or np.any(asked > at[-1]):
        raise ValueError("a time lies outside the run")
    if power not in range(LARGEST_POWER + 1):
        raise ValueError(f"the load grows with a whole power of the speed, 0 to {LARGEST_POWER}")
    return at, omega, asked


def _forced(poles: ComplexArray, omega: float, rate: float, power: int, time: FloatArray) -> ComplexArray:
    """The integral of `_forced_at`, (T, m), for so many times at once that the arrays stay in the cache."""
    blocks = [
        _forced_at(poles, omega, rate, power, time[first : first + AT_ONCE])
        for first in range(0, time.size, AT_ONCE)
    ]
    return np.concatenate(blocks)


def _forced_at(poles: ComplexArray, omega: float, rate: float, power: int, time: FloatArray) -> ComplexArray:
    """exp(pole t) integral_0^t (omega + rate u)^power exp(j(omega u + rate u^2/2) - pole u) du, (T, m)."""
    t = time[:, None]
    if rate == 0.0:
        gap = (1j * omega - poles) * t
        near = np.abs(gap) < 1.0
        apart = (np.exp(1j * omega * t) - np.exp(poles * t)) / np.where(near, 1.0, 1j * omega - poles)
        together = np.exp(poles * t) * t * phi1(np.where(near, gap, 0.0))
        return np.asarray(omega**power * np.where(near, together, apart))
    carrier = np.exp(1j * (omega * t + 0.5 * rate * t**2))
    decay = np.exp(poles * t)
    integrals = [_chirp(poles, omega, rate, t, carrier, decay)]
    # With D = j omega(u): d(D^(k-1) E)/du = (k-1) j rate D^(k-2) E + D^k E - pole D^(k-1) E, integrated.
    here, begin = 1j * (omega + rate * t), 1j * omega
    for k in range(1, power + 1):
        following = here ** (k - 1) * carrier - begin ** (k - 1) * decay + poles * integrals[k - 1]
        if k >= 2:
            following = following - (k - 1) * 1j * rate * integrals[k - 2]
        integrals.append(following)
    return np.asarray(integrals[power] / 1j**power)


def _chirp(
    poles: ComplexArray, omega: float, rate: float, t: FloatArray, carrier: ComplexArray, decay: ComplexArray
) -> ComplexArray:
    """The integral of `_forced_at` for power 0, by the Faddeeva function on the side where it is bounded.

    With xi = kappa (u + b), kappa = sqrt(-j rate/2), b = (j omega - pole)/(j rate), the antiderivative of
    exp(q(u)) is -sqrt(pi)/(2 kappa) exp(q) w(j xi), or the same with the other sign and w(-j xi) plus a
    constant that stands for the free motion left by the passage.
    """
    kappa = np.sqrt(-0.5j * rate + 0.0j)
    b = (1j * omega - poles) / (1j * rate)
    scale = 0.5 * np.sqrt(np.pi) / kappa
    start, end = kappa * b, kappa * (t + b)
    first = np.where(start.real < 0.0, 1.0, -1.0)
    last = np.where(end.real < 0.0, 1.0, -1.0)
    passed = (first > 0.0) & (last < 0.0)
    free = np.zeros(passed.shape, dtype=complex)
    np.exp(poles * t - 0.5j * rate * b**2, out=free, where=passed)
    ends = last * carrier * faddeeva(-1j * last * end) - first * decay * faddeeva(-1j * first * start)
    return np.asarray(scale * (ends + 2.0 * free))


def faddeeva(z: ComplexArray) -> ComplexArray:
    """w(z) = exp(-z^2) erfc(-j z) for Im z >= 0, within 2e-14: far from 0 by its asymptotic series, else by scipy.

    j/(sqrt(pi) z) (1 + 1/(2 z^2) + 1 3/(2 z^2)^2 + 1 3 5/(2 z^2)^3 ...), Abramowitz and Stegun 7.1.23.
    """
    from scipy.special import wofz

    far = z.real**2 + z.imag**2 > FAR
    outer = z[far]
    part = 0.5 / (outer * outer)
    series = np.ones_like(part)
    for k in range(TERMS, 0, -1):
        series *= part
        series *= 2.0 * k - 1.0
        series += 1.0
    out = np.empty(z.shape, dtype=complex)
    out[far] = 1j / np.sqrt(np.pi) * series / outer
    out[~far] = wofz(z[~far])
    return out


def _moments_to_look_at(modes: StateModes, at: FloatArray, omega: FloatArray) -> FloatArray:
    """Times close enough together that no maximum of the envelope falls between: around each passage, and
    over all.
    """
    speeds = np.r_[omega, modes.poles.imag[modes.poles.imag > 0.0]]
    # Force and free motions beat at most at the difference of two of these; ten looks at each beat.
    beats = (at[-1] - at[0]) * np.ptp(speeds) / (2.0 * np.pi)
    count = int(np.clip(10.0 * beats, FEWEST_LOOKS, MOST_LOOKS))
    looks = [np.linspace(at[0], at[-1], count), at]
    for i in range(at.size - 1):
        rate = (omega[i + 1] - omega[i]) / (at[i + 1] - at[i])
        if rate == 0.0:
            continue
        grain = 1.0 / np.sqrt(abs(rate))
        for pole in modes.poles[modes.poles.imag > 0.0]:
            passage = at[i] + (pole.imag - omega[i]) / rate
            if at[i] - 20.0 * grain <= passage <= at[i + 1] + 20.0 * grain:
                damped = -pole.real / abs(rate)
                looks.append(passage + np.linspace(-3.0, 3.0, 241) * (damped + grain))
                looks.append(passage + np.linspace(-8.0, 20.0, 561) * grain)
    times = np.unique(np.concatenate(looks))
    return np.asarray(times[(times >= at[0]) & (times <= at[-1])])


def _steady_peak(
    modes: StateModes,
    drive: ComplexArray,
    omega: FloatArray,
    power: int,
    rows: FloatArray,
    fast: FloatArray,
) -> FloatArray:
    """Largest steady-state amplitude (R,) over the speeds of the run; infinite at an undamped resonance in
    it.
    """
    low, high = float(omega.min()), float(omega.max())
    residue = drive[:, None] * (modes.shapes.T @ rows.T + modes.poles[:, None] * (modes.shapes.T @ fast.T))
    undamped = np.abs(modes.poles.real) < UNDAMPED * np.abs(modes.poles)
    met = undamped & (modes.poles.imag >= low) & (modes.poles.imag <= high)
    excited = np.abs(residue) > UNDAMPED * np.abs(residue).max(axis=0)

    def steady(w: FloatArray) -> FloatArray:
        distance = 1j * w[:, None] - np.where(met, np.inf, modes.poles)
        return np.asarray(np.abs((w[:, None] ** power / distance) @ np.where(met[:, None], 0.0, residue)))

    highest, _ = _largest(steady, _speeds_to_look_at(modes, low, high))
    return np.where(np.any(met[:, None] & excited, axis=0), np.inf, highest)


def _largest(signal: Callable[[FloatArray], FloatArray], where: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Largest value (R,) of signal (T,) -> (T, R) and its place, from a grid and three refinements about
    the best.
    """
    values = signal(where)
    best, place = values.max(axis=0), where[np.argmax(values, axis=0)]
    for row in range(values.shape[1]):
        column = values[:, row]
        inner = np.flatnonzero((column[1:-1] >= column[:-2]) & (column[1:-1] >= column[2:])) + 1
        for index in inner[np.argsort(column[inner])[::-1][:CANDIDATES]]:
            low, high = where[index - 1], where[index + 1]
            for _ in range(3):
                near = np.linspace(low, high, 21)
                fine = signal(near)[:, row]
                top = int(np.argmax(fine))
                if fine[top] > best[row]:
                    best[row], place[row] = fine[top], near[top]
                low, high = near[max(top - 1, 0)], near[min(top + 1, 20)]
    return best, place


def _speeds_to_look_at(modes: StateModes, low: float, high: float) -> FloatArray:
    looks = [np.linspace(low, high, 800)]
    for pole in modes.poles[modes.poles.imag >= 0.0]:
        looks.append(pole.imag - pole.real * np.sinh(np.linspace(-8.0, 8.0, 161)))
    speeds = np.unique(np.concatenate(looks))
    return np.asarray(speeds[(speeds >= low) & (speeds <= high)])
