"""Loss-factor damping in the time domain: causal stand-ins, and how far they are from it.

A constant loss factor is not causal (S. H. Crandall, J. Sound Vib. 11 (1970) 3): it cannot be integrated in
time, and one viscous coefficient eta K/w over-damps every mode above the one it is taken at. Two stand-ins:
each undamped mode with its own viscous damping eta/2, or springs and dashpots in series (a relaxation chain)
fitted over a band. Either is stated with its difference in the frequency domain.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from detune.physics.array_types import ArrayLike, ComplexArray, FloatArray
from detune.physics.modes import undamped_modes
from detune.physics.simulation import Motion, simulate_states

TIMES_PER_DECADE = 5
MARGIN_IN_DECADES = 1.5


@dataclass(frozen=True, eq=False)
class ViscousEquivalent:
    """Viscous matrix (n, n) in N s/m that gives each undamped mode, frequency (n,) in Hz, half its loss
    factor (n,).
    """

    damping: FloatArray
    frequency: FloatArray
    loss_factor: FloatArray


@dataclass(frozen=True, eq=False)
class RelaxationChain:
    """Springs and dashpots: K(w) = static + j w viscous + sum stiffness j w time/(1 + j w time); all not
    negative.

    static in N/m, viscous in N s/m, stiffness (N,) in N/m, time (N,) in s. Causal and passive by
    construction.
    """

    static: float
    viscous: float
    stiffness: FloatArray
    time: FloatArray


def viscous_equivalent(mass: ArrayLike, stiffness: ArrayLike, hysteretic: ArrayLike) -> ViscousEquivalent:
    """Per-mode viscous stand-in for stiffness + j hysteretic, matrices (n, n) in SI.

    The loss factor of mode phi is phi.T H phi/(phi.T K phi); its damping ratio is half of it, at its own
    frequency. Coupling between modes through damping is left out. A mode of frequency 0 gets no damping.
    Other viscous damping of the machine is added to the matrix as it is. Raises UnsupportedMachine for
    negative stiffness.
    """
    m, h = np.asarray(mass, dtype=float), np.asarray(hysteretic, dtype=float)
    frequency, shapes = undamped_modes(m, stiffness)
    omega = 2.0 * np.pi * frequency
    lost = np.sum(shapes * (h @ shapes), axis=0)
    held = omega > 1e-7 * omega.max()
    safe = np.where(held, omega, 1.0)
    carried = m @ shapes
    damping = (carried * np.where(held, lost / safe, 0.0)) @ carried.T
    return ViscousEquivalent(damping, frequency, np.where(held, lost / safe**2, 0.0))


def receptance_difference(
    mass: ArrayLike, omega: ArrayLike, stiffness: ArrayLike, stand_in: ArrayLike
) -> FloatArray:
    """Relative difference (F,) between the receptances of two machines with the same mass matrix.

    mass (n, n); omega (F,) in rad/s; stiffness and stand_in (F, n, n) or (n, n) complex, damping included.
    The norm is the Frobenius norm in mass-normalised coordinates, so that metres and radians may be mixed.
    """
    m = np.asarray(mass, dtype=float)
    w = np.asarray(omega, dtype=float)
    inverse = np.linalg.inv(np.linalg.cholesky(m))

    def receptance(k: ArrayLike) -> ComplexArray:
        scaled = inverse @ np.asarray(k, dtype=complex) @ inverse.T
        return np.asarray(np.linalg.inv(scaled - w[:, None, None] ** 2 * np.eye(m.shape[0])))

    true, other = receptance(stiffness), receptance(stand_in)
    return np.asarray(np.linalg.norm(other - true, axis=(1, 2)) / np.linalg.norm(true, axis=(1, 2)))


def chain_stiffness(chain: RelaxationChain, omega: ArrayLike) -> ComplexArray:
    """Dynamic stiffness in N/m of a chain at omega in rad/s (any shape)."""
    w = np.asarray(omega, dtype=float)
    turn = 1j * w[..., None] * chain.time
    return np.asarray(chain.static + 1j * w * chain.viscous + (chain.stiffness * turn / (1.0 + turn)).sum(-1))


def fit_relaxation_chain(omega: ArrayLike, stiffness: ArrayLike) -> RelaxationChain:
    """The chain nearest to a measured dynamic stiffness (F,) complex in N/m at omega (F,) in rad/s.

    Nonnegative least squares on the relative error, real and imaginary part, over relaxation times five to a
    decade from 1.5 decades below to 1.5 above the band. Raises ValueError for fewer than two frequencies or
    no stiffness.
    """
    from scipy.optimize import nnls

    w, target = np.asarray(omega, dtype=float), np.asarray(stiffness, dtype=complex)
    if (
        w.ndim != 1
        or w.shape != target.shape
        or w.size < 2
        or np.any(w <= 0.0)
        or np.any(np.abs(target) == 0.0)
    ):
        raise ValueError("a chain is fitted to two or more positive frequencies with a stiffness at each")
    low, high = np.log10(w.min()) - MARGIN_IN_DECADES, np.log10(w.max()) + MARGIN_IN_DECADES
    time = 10.0 ** -np.linspace(high, low, int(np.ceil((high - low) * TIMES_PER_DECADE)) + 1)
    turn = 1j * w[:, None] * time
    middle = float(np.sqrt(w.min() * w.max()))
    basis = np.hstack([np.ones((w.size, 1)), 1j * w[:, None] / middle, turn / (1.0 + turn)])
    basis, goal = basis / np.abs(target)[:, None], target / np.abs(target)
    size = float(np.abs(target).max())
    found, _ = nnls(np.vstack([basis.real, basis.imag]) * size, np.r_[goal.real, goal.imag])
    parts = found[2:] * size
    used = parts > 0.0
    return RelaxationChain(float(found[0] * size), float(found[1] * size / middle), parts[used], time[used])


def chain_for_loss_factor(
    stiffness: float, loss_factor: float, reference: float, low: float, high: float
) -> RelaxationChain:
    """Chain with a near-constant loss factor from low to high and the given storage stiffness at reference
    (rad/s).

    The target is the causal stiffness of constant loss factor, K ~ (j w)^a with a = 2/pi atan(eta) (a
    fractional derivative): its storage part must rise with frequency, by 10 % a decade where eta is 0.066.
    Raises ValueError unless low <= reference <= high and loss_factor > 0.
    """
    if not (0.0 < low <= reference <= high and low < high and loss_factor > 0.0):
        raise ValueError("a chain needs a loss factor above zero and 0 < low <= reference <= high")
    power = 2.0 / np.pi * np.arctan(loss_factor)
    decades = np.log10(high / low)
    w = np.geomspace(low, high, max(20, int(np.ceil(12 * decades))))
    return fit_relaxation_chain(w, stiffness * (1.0 + 1j * loss_factor) * (w / reference) ** power)


def largest_difference(chain: RelaxationChain, omega: ArrayLike, stiffness: ArrayLike) -> float:
    """Largest relative difference |K_chain - K|/|K| over omega (F,) against a stiffness (F,) or scalar,
    complex.
    """
    true = np.asarray(stiffness, dtype=complex)
    return float(np.max(np.abs(chain_stiffness(chain, omega) - true) / np.abs(true)))


def simulate_with_chains(
    mass: ArrayLike,
    damping: ArrayLike,
    stiffness: ArrayLike,
    rows: ArrayLike,
    chains: Sequence[RelaxationChain],
    record: ArrayLike,
    step: float,
    shapes: ArrayLike | None = None,
) -> Motion:
    """Motion (from rest) of M q'' + C q' + K q + sum rows[e].T chain_e(rows[e] q) = f(t), straight between
    samples.

    mass, damping, stiffness (n, n) without the chains; rows (E, n): deflection of element e is rows[e] @ q;
    record (T, n), or (T, p) with shapes (n, p). Exact, as `simulate`.
    """
    m, c, k = (np.atleast_2d(np.asarray(a, dtype=float)) for a in (mass, damping, stiffness))
    count = m.shape[0]
    row = np.asarray(rows, dtype=float).reshape(-1, count)
    spread = np.eye(count) if shapes is None else np.asarray(shapes, dtype=float).reshape(count, -1)
    c = c + row.T @ (np.array([chain.viscous for chain in chains])[:, None] * row)
    k = k + row.T @ (np.array([chain.static + chain.stiffness.sum() for chain in chains])[:, None] * row)
    owner = np.repeat(np.arange(len(chains)), [chain.time.size for chain in chains])
    inner = np.concatenate([chain.stiffness for chain in chains])
    rate = 1.0 / np.concatenate([chain.time for chain in chains])
    pull = (row[owner] * inner[:, None]).T
    inverse = np.linalg.inv(m)
    size = 2 * count + owner.size
    state = np.zeros((size, size))
    state[:count, count : 2 * count] = np.eye(count)
    state[count : 2 * count] = np.hstack([-inverse @ k, -inverse @ c, inverse @ pull])
    state[2 * count :, :count] = rate[:, None] * row[owner]
    state[2 * count :, 2 * count :] = -np.diag(rate)
    load = np.zeros((size, spread.shape[1]))
    load[count : 2 * count] = inverse @ spread
    states = simulate_states(state, load, record, step)
    forced = np.asarray(record, dtype=float).reshape(states.shape[0], -1) @ load[count : 2 * count].T
    acceleration = states @ state[count : 2 * count].T + forced
    return Motion(step, states[:, :count], states[:, count : 2 * count], acceleration, acceleration)
