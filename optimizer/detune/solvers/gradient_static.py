"""Static equilibrium of one state and the adjoint of anything linear in it: sag, tilt, loads, deflections.

K q = w with the static stiffness K. For a cotangent psi of the static features (`gradient_probe`),
lambda = K^-1 (psi dphi/dq) and dv/dx = lambda . (dw/dx - dK/dx q) + psi . dphi/dx.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.sizing.part_slopes import STIFFNESS
from detune.solvers.gradient_probe import StaticProbe
from detune.solvers.gradient_state import StateAt
from detune.solvers.gradient_tone import by_groups

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Rest:
    """The machine at rest: q (n,), elastic deflection (S, 3) and features (static_size,)."""

    at: StateAt
    q: Floats
    elastic: Floats
    spring: Floats
    features: Floats

    @property
    def view(self) -> StaticProbe:
        """What a limit looks at, one design."""
        return StaticProbe(self.at.sized.model, self.features[None])


def rest(at: StateAt) -> Rest:
    """The machine at rest at these unknowns. Raises numpy.linalg.LinAlgError where it is not held."""
    sized = at.sized
    packing = np.array([station.packing for station in sized.model.stations])
    spring = sized.each[:, None] * (at.station_parts()[:, STIFFNESS] / at.ratio[sized.group][:, None])
    parallel = np.array([float(station.parallel) for station in sized.model.stations])
    lift = (parallel * packing * spring[:, 2]) @ at.rows[:, 2]
    q = np.linalg.solve(at.static, at.weight + lift)
    elastic = at.rows @ q
    elastic[:, 2] -= packing
    features = np.concatenate([q, elastic.ravel(), (spring * elastic).ravel()])
    return Rest(at, q, elastic, spring, features)


def static_slopes(found: Rest, cotangent: Floats) -> Floats:
    """Slopes (V, u) of V values with these cotangents (V, static_size) of the features."""
    at = found.at
    sized = at.sized
    n, stations = len(found.q), len(sized.group)
    count = len(cotangent)
    by_load = cotangent[:, n + 3 * stations :].reshape(count, stations, 3)
    by_elastic = cotangent[:, n : n + 3 * stations].reshape(count, stations, 3) + found.spring * by_load
    by_q = cotangent[:, :n] + by_elastic.reshape(count, -1) @ at.flat
    adjoint = np.linalg.solve(at.static.T, by_q.T).T
    along = (adjoint @ at.flat.T).reshape(by_elastic.shape)
    parallel = np.array([float(station.parallel) for station in sized.model.stations])[None, :, None]
    by_spring = (by_load - parallel * along) * found.elastic
    figures = np.zeros((count, stations, at.parts.shape[1]))
    share = sized.each / at.ratio[sized.group]
    figures[:, :, STIFFNESS] = by_spring * share[None, :, None]
    slopes = by_groups(at, figures)
    machine = sized.slopes
    if not machine.columns:
        return slopes
    by_column = adjoint @ machine.weight.T
    if machine.rows.any():
        flat = machine.rows.reshape(len(machine.columns), -1, n)
        force = (by_elastic - found.spring * parallel * along).reshape(count, -1)
        back = (parallel[0] * found.spring * found.elastic).reshape(-1)
        by_column = by_column + force @ (flat @ found.q).T - (np.tensordot(back, flat, (0, 1)) @ adjoint.T).T
    slopes[:, list(machine.columns)] += by_column
    return slopes
