"""Natural frequencies, mode shapes, what each mode is called, how strongly it amplifies, and damped poles."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from detune.physics.array_types import ArrayLike, ComplexArray, FloatArray
from detune.physics.unsupported import UnsupportedMachine

# An eigenvalue more negative than this share of the largest is physics, not rounding.
ROUNDING = 1e-10

MOTIONS = {"x": "surge", "y": "sway", "z": "heave", "rx": "roll", "ry": "pitch", "rz": "yaw"}


def undamped_modes(mass: ArrayLike, stiffness: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Natural frequencies and mass-normalised shapes of K phi = w^2 M phi.

    Shapes: mass (..., n, n) symmetric positive definite, stiffness (..., n, n) symmetric, leading axes
    broadcast -> (frequency (..., n) in Hz, ascending; shapes (..., n, n), one mode a column,
    phi.T M phi = 1). UnsupportedMachine if an eigenvalue is negative beyond rounding; a free direction has frequency 0.
    numpy.linalg.LinAlgError if a mass matrix is not positive definite.
    """
    inverse, standard = _standard_form(mass, stiffness)
    eigenvalues, vectors = np.linalg.eigh(standard)
    return _frequency(eigenvalues), np.swapaxes(inverse, -1, -2) @ vectors


def undamped_frequencies(mass: ArrayLike, stiffness: ArrayLike) -> FloatArray:
    """Natural frequencies alone, in Hz, ascending. Shapes and errors as ``undamped_modes`` -> (..., n)."""
    _, standard = _standard_form(mass, stiffness)
    return _frequency(np.asarray(np.linalg.eigvalsh(standard)))


def modal_loss_factors(
    shapes: ArrayLike, hysteretic: ArrayLike, viscous: ArrayLike, frequency: ArrayLike
) -> FloatArray:
    """Equivalent loss factor of each mode: phi.T (H + w C) phi / (phi.T K phi) at the mode's own w.

    Shapes: shapes (..., n, m) mass-normalised (so phi.T K phi = w^2), hysteretic (..., n, n) the imaginary
    part of the stiffness in N/m, viscous (..., n, n) in N s/m, frequency (..., m) in Hz -> (..., m). Twice
    the damping ratio for viscous damping. Off-diagonal damping between modes is left out (Ungar and Kerwin,
    J. Acoust. Soc. Am. 34 (1962) 954). A mode of frequency 0 is not oscillating: its loss factor is infinite.
    """
    phi = np.asarray(shapes, dtype=float)
    omega = 2.0 * np.pi * np.asarray(frequency, dtype=float)
    lost = _modal(phi, hysteretic) + omega * _modal(phi, viscous)
    still = omega <= 0.0
    return np.where(still, np.inf, lost / np.where(still, 1.0, omega) ** 2)


def amplification_at_mode(loss_factor: ArrayLike) -> FloatArray:
    """Amplification at a mode, 1/eta; infinite without damping. Shapes broadcast."""
    eta = np.asarray(loss_factor, dtype=float)
    damped = eta > 0.0
    return np.where(damped, 1.0 / np.where(damped, eta, 1.0), np.inf)


def participation(mass: ArrayLike, shapes: ArrayLike, directions: ArrayLike | None = None) -> FloatArray:
    """Effective mass fraction of each mode in each direction: (phi.T M d)^2 / (d.T M d).

    Shapes: mass (..., n, n), shapes (..., n, m) mass-normalised, directions (n, k) the freedoms' motion when
    everything moves as one in a direction (identity if left out: each freedom on its own) -> (..., m, k). The
    fractions of all modes add up to 1 in every direction. Clough and Penzien, Dynamics of Structures, ch. 13.
    """
    m = np.asarray(mass, dtype=float)
    d = np.eye(m.shape[-1]) if directions is None else np.asarray(directions, dtype=float)
    carried = m @ d
    factors = np.swapaxes(np.asarray(shapes, dtype=float), -1, -2) @ carried
    whole = np.einsum("...nk,...nk->...k", np.broadcast_to(d, carried.shape), carried)
    return np.asarray(factors**2 / whole[..., None, :])


def energy_shares(shape: ArrayLike, mass: ArrayLike) -> FloatArray:
    """Share of each freedom in a mode's kinetic energy: phi_j (M phi)_j / phi.T M phi, adding up to 1.

    Shapes: shape (n), mass (n, n) -> (n). A share can be slightly negative when the reference point is not
    the mass centre.
    """
    phi = np.asarray(shape, dtype=float)
    shares = phi * (np.asarray(mass, dtype=float) @ phi)
    return np.asarray(shares / shares.sum())


def mode_name(
    shape: ArrayLike, names: Sequence[str], mass: ArrayLike, pure: float = 0.85, named: float = 0.1
) -> str:
    """Plain name of a mode from its kinetic-energy shares, such as "heave", "sway with roll" or "floor".

    Shapes: shape (n), mass (n, n); names: the n freedoms, each "x", "y", "z", "rx", "ry", "rz", the same
    after a body's name ("frame z"), or a name of its own ("floor"). x is surge, y sway, z heave, rx roll, ry
    pitch, rz yaw. A motion with at least ``pure`` of the energy names the mode alone; otherwise the second is
    added if it has at least ``named``. With several bodies the body is said as well ("heave of frame").
    """
    if len(names) != np.shape(shape)[0]:
        raise ValueError("a mode shape needs one name for each freedom")
    parts = [name.rpartition(" ") for name in names]
    bodies = {body for body, _, motion in parts if motion in MOTIONS}
    totals: dict[str, float] = {}
    for (body, _, motion), whole, share in zip(parts, names, energy_shares(shape, mass), strict=True):
        word = MOTIONS.get(motion, whole)
        if motion in MOTIONS and len(bodies) > 1 and body:
            word = f"{word} of {body}"
        totals[word] = totals.get(word, 0.0) + float(share)
    # Rounding first, so that two equal shares keep the order of the freedoms instead of the order of the last
    # bit.
    ranked = sorted(totals.items(), key=lambda item: -round(item[1], 6))
    first, second = ranked[0], ranked[1] if len(ranked) > 1 else ("", 0.0)
    if first[1] >= pure or second[1] < named:
        return first[0]
    return f"{first[0]} with {second[0]}"


def damped_poles(
    mass: ArrayLike, viscous: ArrayLike, hysteretic: ArrayLike, stiffness: ArrayLike
) -> ComplexArray:
    """Poles of (p^2 M + p C + K + j H) q = 0 with frequency not negative, in rad/s.

    Shapes: four (..., n, n), leading axes broadcast -> (..., n), by ascending frequency. Im p is the damped
    natural frequency, -Re p the half-power half width and the rate of decay. An overdamped mode gives the
    slower of its two real poles. Hysteretic damping is defined for positive frequencies only, so its poles
    describe the response at frequencies near them and no motion in time. Companion form; Tisseur and
    Meerbergen, SIAM Rev. 43 (2001) 235.
    """
    m, c, h, k = np.broadcast_arrays(
        *(np.asarray(a, dtype=float) for a in (mass, viscous, hysteretic, stiffness))
    )
    n = m.shape[-1]
    lower = np.linalg.cholesky(m)
    inverse = np.linalg.inv(lower)
    turned = np.swapaxes(inverse, -1, -2)
    companion = np.zeros((*m.shape[:-2], 2 * n, 2 * n), dtype=complex)
    companion[..., :n, n:] = np.eye(n)
    companion[..., n:, :n] = -(inverse @ (k + 1j * h) @ turned)
    companion[..., n:, n:] = -(inverse @ c @ turned)
    poles = np.linalg.eigvals(companion)
    size = np.abs(poles).max(axis=-1, keepdims=True)
    # Real poles carry an imaginary part of rounding size that must not decide their order.
    imaginary = np.where(np.abs(poles.imag) < 1e-9 * size, 0.0, poles.imag)
    order = np.lexsort((poles.real, imaginary), axis=-1)
    chosen = np.take_along_axis(np.asarray(poles.real + 1j * imaginary), order[..., n:], axis=-1)
    return np.asarray(chosen, dtype=complex)


def _standard_form(mass: ArrayLike, stiffness: ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Inverse Cholesky factor of M, and inv(L) K inv(L).T, whose eigenvalues are the squared frequencies."""
    inverse = np.linalg.inv(np.linalg.cholesky(np.asarray(mass, dtype=float)))
    standard = inverse @ np.asarray(stiffness, dtype=float) @ np.swapaxes(inverse, -1, -2)
    return inverse, standard


def _frequency(eigenvalues: FloatArray) -> FloatArray:
    limit = -ROUNDING * np.abs(eigenvalues).max(axis=-1)
    lost = eigenvalues[..., 0] < limit
    if np.any(lost):
        where = "" if lost.ndim == 0 else f" ({int(np.sum(lost))} of {lost.size} machines)"
        raise UnsupportedMachine(
            f"a mode has negative stiffness: the machine is pushed away from rest{where}"
        )
    return np.asarray(np.sqrt(np.maximum(eigenvalues, 0.0)) / (2.0 * np.pi))


def _modal(phi: FloatArray, matrix: ArrayLike) -> FloatArray:
    return np.asarray(np.sum(phi * (np.asarray(matrix, dtype=float) @ phi), axis=-2))
