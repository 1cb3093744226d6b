"""Gravity's geometric stiffness as a function of masses and station positions, with its derivatives.

Equal springs at all stations carry the static forces (`response.model_gravity`): with E = sum B^T B and the static load
w, E q = w, and the force at a station is -B q in its own axes. The rest (the bodies' own weights, ballast) is linear in
the masses. Each force F at an arm r adds the bilinear form of `physics.gravity`, so

    dG = sum form(dr, F) + form(r, dF),   dF = -(B dq + dB q),   E dq = dw - dE q.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.physics.gravity import geometric_stiffness
from detune.response.model import Model
from detune.response.model_gravity import equal_springs

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Carried:
    """What the stations of one state carry under gravity: H springs (stations first, then given connections).

    `ends` (body, springs, sign) says on which body each force acts; `turns` and `centres` are those bodies'.
    """

    own: list[int]
    times: Floats
    axes: Floats
    rows: Floats
    positions: Floats
    ends: tuple[tuple[str, NDArray[np.intp], Floats], ...]
    turns: dict[str, Floats]
    centres: dict[str, Floats]


def carried(model: Model) -> Carried | None:
    """What the stations of a model carry; None where nothing holds the machine."""
    springs = equal_springs(model.frame, model.stations, model.connections)
    if springs.stiffness is None:
        return None
    held = springs.holding
    ends = []
    for body in model.frame.references:
        numbers = [(k, 1.0) for k, each in enumerate(held) if each[0] == body]
        numbers += [(k, -1.0) for k, each in enumerate(held) if each[1] == body]
        if numbers:
            index = np.array([k for k, _ in numbers], dtype=np.intp)
            ends.append((body, index, np.array([sign for _, sign in numbers])))
    return Carried(
        springs.own,
        np.array([float(each[4]) for each in held]),
        np.array([each[3] for each in held]),
        np.array([each[5] for each in held]),
        np.array([each[2] for each in held]),
        tuple(ends),
        {body: model.frame.rotation_rows(body) for body, _, _ in ends},
        {body: model.frame.references[body] for body, _, _ in ends},
    )


def _form(springs: Carried, arms_of: Floats, forces_of: Floats, relative: bool = True) -> Floats:
    """Sum over all springs of the geometric stiffness (B, n, n) of forces (B, H, 3) at places (H, 3).

    `relative`: the places are positions, from which each body's centre is taken; else they are changes of position.
    """
    n = next(iter(springs.turns.values())).shape[1]
    total = np.zeros((len(forces_of), n, n))
    for body, index, sign in springs.ends:
        arms = arms_of[index] - (springs.centres[body] if relative else 0.0)
        turn = springs.turns[body]
        total += turn.T @ geometric_stiffness(arms, sign[:, None] * forces_of[:, index]) @ turn
    return total


def under(springs: Carried, rows: Floats, positions: Floats, weight: Floats) -> Floats:
    """Geometric stiffness (B, n, n) of what the springs carry under static loads (B, n)."""
    rest = np.asarray(np.linalg.solve(_stiffness(springs, rows, rows), weight[:, springs.own].T).T, float)
    return _form(springs, positions, _forces(springs, rows, rest))


def _stiffness(springs: Carried, left: Floats, right: Floats) -> Floats:
    size = left.shape[2]
    return (springs.times[:, None, None] * left).reshape(-1, size).T @ right.reshape(-1, size)


def _forces(springs: Carried, rows: Floats, rest: Floats) -> Floats:
    """Forces (B, H, 3), global, of motions (B, f) of the bodies' freedoms."""
    local = np.moveaxis(rows @ rest.T, 2, 0)
    return -springs.times[:, None] * (springs.axes @ local[..., None])[..., 0]


def by_position(
    springs: Carried, rows: Floats, positions: Floats, weight: Floats, d_rows: Floats, d_positions: Floats
) -> Floats:
    """Derivative (n, n) of `under` a static load (n,) as rows and positions move by these amounts."""
    stiffness = _stiffness(springs, rows, rows)
    rest = np.asarray(np.linalg.solve(stiffness, weight[springs.own]), dtype=float)
    change = _stiffness(springs, d_rows, rows)
    d_rest = np.asarray(-np.linalg.solve(stiffness, (change + change.T) @ rest), dtype=float)
    forces = _forces(springs, rows, np.array([rest, d_rest], dtype=float))
    d_forces = _forces(springs, d_rows, rest[None]) + forces[1:]
    moved = _form(springs, d_positions, forces[:1], relative=False)
    return np.asarray((_form(springs, positions, d_forces) + moved)[0])
