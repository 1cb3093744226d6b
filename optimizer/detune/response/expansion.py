"""Responses of a batch of designs by their poles: one eigenvalue problem a design, not a solution a frequency.

With M = L L^T and everything divided by L on both sides, (p^2 + p C + K + j H)^-1 is V (p - poles)^-1 V^-1 of
its companion matrix, and without dashpots V (poles^2 + p^2)^-1 V^-1 of K + j H alone (Tisseur and Meerbergen,
SIAM Rev. 43 (2001) 235). The inverse of V stands for the left vectors, so that equal poles of symmetric
machines do no harm.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.response.assemble import Dynamic

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Booleans = NDArray[np.bool_]
# Largest residual of D(w) D(w)^-1 = 1 at the poles' own frequencies, in mass-normalised coordinates.
CLOSE = 1e-7
# A pole that decays by less than this share of its frequency could be met exactly by a frequency.
LEAST_DECAY = 1e-8


@dataclass(frozen=True, eq=False)
class Expansion:
    """D designs by m poles: q = left (D, n, m) (right (D, m, n) f) over (j w - pole), or over (pole - w^2).

    `squares`: the poles (D, m) are squared frequencies, those of machines without dashpots.
    """

    poles: Complexes
    left: Complexes
    right: Complexes
    squares: bool

    def take(self, index: NDArray[np.intp]) -> "Expansion":
        """Return the expansion of the designs at these indices."""
        return Expansion(self.poles[index], self.left[index], self.right[index], self.squares)

    def response(self, omega: Floats, load: Complexes) -> Complexes:
        """Return q (D, F, n) under load (D, F, n) at omega (D, F) in rad/s."""
        w = omega[..., None]
        apart = self.poles[:, None] - w**2 if self.squares else 1j * w - self.poles[:, None]
        modal = load @ np.swapaxes(self.right, -1, -2)
        modal /= apart
        return np.asarray(modal @ np.swapaxes(self.left, -1, -2), dtype=complex)


def expansion_of(dynamic: Dynamic) -> tuple[Expansion, Booleans]:
    """Return the expansion of a batch without frequency laws, and the designs (D,) it holds for.

    It does not hold where poles coincide without a full set of vectors (critical damping), where one hardly
    decays, or where the residual at the poles' frequencies is not small.
    """
    n = dynamic.mass.shape[-1]
    inverse = np.linalg.inv(np.linalg.cholesky(dynamic.mass))
    turned = np.swapaxes(inverse, -1, -2)
    held: Complexes = inverse @ (dynamic.stiffness + 1j * dynamic.hysteretic) @ turned
    squares = not dynamic.viscous.any()
    viscous = np.zeros_like(held) if squares else (inverse @ dynamic.viscous @ turned).astype(complex)
    if squares:
        poles, vectors = np.linalg.eig(held)
        back, sharp = _inverse(vectors)
        left, right = turned @ vectors, back @ inverse
        frequency = np.sqrt(np.abs(poles))
        decays = np.abs(poles.imag) > 2.0 * LEAST_DECAY * np.abs(poles)
    else:
        companion = np.zeros((len(held), 2 * n, 2 * n), dtype=complex)
        companion[:, :n, n:] = np.eye(n)
        companion[:, n:, :n], companion[:, n:, n:] = -held, -viscous
        poles, vectors = np.linalg.eig(companion)
        back, sharp = _inverse(vectors)
        left, right = turned @ vectors[:, :n], back[:, :, n:] @ inverse
        frequency = np.abs(poles.imag)
        decays = np.abs(poles.real) > LEAST_DECAY * np.abs(poles)
    found = Expansion(poles, left, right, squares)
    good = sharp & decays.all(axis=1)
    residual = np.full(len(held), np.inf)
    residual[good] = _residual(found, good, inverse, held, viscous, frequency)
    return found, good & (residual < CLOSE)


def _inverse(vectors: Complexes) -> tuple[Complexes, Booleans]:
    try:
        return np.asarray(np.linalg.inv(vectors), dtype=complex), np.ones(len(vectors), dtype=bool)
    except np.linalg.LinAlgError:
        singular = np.linalg.slogdet(vectors)[1] == -np.inf
        kept = np.where(singular[:, None, None], np.eye(vectors.shape[-1]), vectors)
        return np.asarray(np.linalg.inv(kept), dtype=complex), np.asarray(~singular)


def _residual(
    found: Expansion, good: Booleans, inverse: Floats, held: Complexes, viscous: Complexes, frequency: Floats
) -> Floats:
    """Largest residual of D(w) D(w)^-1 = 1 of the good designs, at their least, middle and highest frequency."""
    ordered = np.sort(frequency[good], axis=1)
    places = [0, ordered.shape[1] // 2, -1]
    omega = ordered[:, places]
    lower = np.linalg.inv(inverse[good])
    one = Expansion(found.poles[good], found.left[good], found.right[good], found.squares)
    n = inverse.shape[-1]
    worst = np.zeros(len(omega))
    for place in range(len(places)):
        w = omega[:, [place]]
        # Every column of the inverse at once: loads of one mass-normalised unit each.
        loads = np.swapaxes(lower, -1, -2).astype(complex)
        moved = one.response(np.repeat(w, n, axis=1), loads) @ lower
        matrix = held[good] - (w**2)[..., None] * np.eye(n) + 1j * w[..., None] * viscous[good]
        missing = matrix @ np.swapaxes(moved, -1, -2) - np.eye(n)
        worst = np.maximum(worst, np.abs(missing).max(axis=(1, 2)))
    return np.where(np.isfinite(worst), worst, np.inf)
