"""The machine bolted down on its floor, as the reference of the floor ratio, for a batch of designs.

Every part is replaced by a rigid link: with C the deflections of all stations, C q = 0, and q = N p with N a
basis of the null space of C. What is left is N^T D N p = N^T f (any text on constrained structures), in which
no part stands, so that it depends on the ballast step alone.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.response.floor_table import beyond_spring
from detune.response.model import Model
from detune.response.solve import solve_or_resonate

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
Complexes = NDArray[np.complex128]
# Singular values below this share of the largest are rounding: stations on one line, or one over another.
RANK = 1e-9
# A bolted machine that leaves the floor at rest: the ratio has no meaning and meets no limit.
NO_REFERENCE = 1e30
# Zeros of the reference are no closer to the frequency axis than this share of their frequency.
SHARPEST = 1e-7


@dataclass(frozen=True)
class Bolted:
    """p motions that bend no part: `basis` (n, p); `mass` and complex `stiffness` (B, p, p), `viscous` (p, p).

    `feet` (R, n): motions of the floor under the stations, directions that are held left out.
    """

    basis: Floats
    mass: Floats
    stiffness: Complexes
    viscous: Floats
    feet: Floats


def bolted_down(model: Model) -> Bolted:
    """Return the machine with every station rigid."""
    across = np.concatenate([s.rows for s in model.stations if not s.is_absorber])
    _, values, right = np.linalg.svd(across)
    rank = int(np.sum(values > RANK * values[0]))
    basis = right[rank:].T
    elastic = model.fixed_dynamic + 1j * model.fixed_hysteretic
    stiffness = np.array([elastic + own for own in _gravity(model)])
    return Bolted(
        basis=basis,
        mass=basis.T @ model.mass @ basis,
        stiffness=basis.T @ stiffness @ basis,
        viscous=basis.T @ model.fixed_viscous @ basis,
        feet=feet_of(model),
    )


def feet_of(model: Model) -> Floats:
    """Return rows (R, n): each moving direction of the floor under each station."""
    rows = np.concatenate([station.foot for station in model.stations])
    moving: Floats = rows[np.any(rows != 0.0, axis=1)]
    return moving


def _gravity(model: Model) -> Floats:
    return model.geometric if model.with_gravity_stiffness else np.zeros_like(model.mass)


def bolted_q(model: Model, step: Integers, omega: Floats, load: Complexes) -> Complexes:
    """Return the motion (D, F, n) of the bolted machine under loads (D, F, n) at omega (D, F) rad/s."""
    found = bolted_down(model)
    w = omega[:, :, None, None]
    stiffness = found.stiffness[step][:, None] + 1j * w * found.viscous
    if model.floor_table is not None:
        more = beyond_spring(model.floor_table, model.floor_mass, model.floor_stiffness, omega)
        stiffness = stiffness + more[..., None, None] * np.outer(found.basis[-1], found.basis[-1])
    dynamic: Complexes = np.asarray(stiffness - w**2 * found.mass[step][:, None])
    p = solve_or_resonate(dynamic, stiffness, load @ found.basis)
    return np.asarray(p @ found.basis.T)


def floor_ratio(model: Model, step: Integers, omega: Floats, load: Complexes, q: Complexes) -> Complexes:
    """Return the floor's motion on mounts over that bolted down, along z of (D, F, 3); x and y are zero.

    step (D,), omega (D, F) in rad/s, load and q (D, F, n) of the machine on its mounts.
    """
    feet = feet_of(model)
    mounted = np.sqrt(np.sum(np.abs(q @ feet.T) ** 2, axis=-1))
    bolted = np.sqrt(np.sum(np.abs(bolted_q(model, step, omega, load) @ feet.T) ** 2, axis=-1))
    ratio = np.where(bolted > 0.0, mounted / np.where(bolted > 0.0, bolted, 1.0), NO_REFERENCE)
    out = np.zeros((*omega.shape, 3), dtype=complex)
    out[..., 2] = np.minimum(ratio, NO_REFERENCE)
    return out


def reference_zeros(model: Model, vector: Complexes) -> Complexes:
    """Return frequencies (B, m) in rad/s, as poles are written, at which the bolted floor hardly moves.

    There the ratio may peak. They are the finite zeros of the transfer from the load `vector` (n,) to each
    foot: generalised eigenvalues of the system pencil bordered by load and output (Rosenbrock). Unused ones
    are far away.
    """
    from scipy.linalg import eig

    found, p = bolted_down(model), bolted_down(model).basis.shape[1]
    steps = []
    for mass, stiffness in zip(found.mass, found.stiffness, strict=True):
        zeros: list[complex] = []
        border = vector @ found.basis
        for foot in found.feet @ found.basis:
            left = np.zeros((2 * p + 1, 2 * p + 1), dtype=complex)
            right = np.zeros_like(left)
            left[:p, p : 2 * p] = right[:p, :p] = np.eye(p)
            left[p : 2 * p, :p], left[p : 2 * p, p : 2 * p] = -stiffness, -found.viscous
            right[p : 2 * p, p : 2 * p] = mass
            left[p : 2 * p, -1], left[-1, :p] = border, foot
            top, bottom = eig(left, right, right=False, homogeneous_eigvals=True)
            finite = np.abs(bottom) > RANK * np.abs(top).max(initial=1e-300)
            zeros += (top[finite] / bottom[finite]).tolist()
        steps.append([z for z in zeros if z.imag > 0.0])
    out = np.full((len(steps), max(len(z) for z in steps)), -1.0 + 1e-3j, dtype=complex)
    for number, each in enumerate(steps):
        out[number, : len(each)] = [complex(-max(abs(z.real), SHARPEST * abs(z)), z.imag) for z in each]
    return out
