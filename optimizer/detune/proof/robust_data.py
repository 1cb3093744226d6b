"""What a robust proof speaks of: a system whose stiffness, damping and mass may vary, and one limited output.

    D(x, w) q = load w^p + sum_a b_a^T kappa_a u_a w^p
    D = -w^2 (M + sum_i m_i M_i) + K + j (H + w C) + sum_a b_a^T kappa_a b_a
    kappa_a = s k_a + j t (s h_a + w c_a)                         stiffness factor s, damping factor t
    y = w^r (row^T q + sum_a force_a kappa_a (b_a^T q - u_a)) - offset (at p = r = 0)

Variables are numbered: each axis names the variable of its s and of its t, each mass term that of its m. Several axes
sharing a variable move together (scatter by lot); an axis with a variable of its own moves alone (by part).
A variable of -1 is fixed at 1. The last variable of a box is always omega^2, in (rad/s)^2.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from detune.proof.selection_data import Complexes, Floats, Integers


class RobustError(ValueError):
    """The arrays of a robust problem do not fit together."""


@dataclass(frozen=True, eq=False)
class VaryingSystem:
    """What every system here has besides its variables: matrices (n, n) that are certain, and A spring axes.

    axes (A, n): attachment rows. stiffness, loss, viscous (A,): N/m, N/m, N s/m, parallel count included, not negative.
    """

    mass: Floats
    fixed_dynamic: Floats
    fixed_hysteretic: Floats
    fixed_viscous: Floats
    axes: Floats
    stiffness: Floats
    loss: Floats
    viscous: Floats

    def _check(
        self,
        low: Floats,
        high: Floats,
        shapes: dict[str, tuple[int, ...]],
        of_axes: tuple[str, str],
        of_terms: tuple[str, ...],
    ) -> None:
        """Raise RobustError unless all arrays fit: `shapes` of those a system has of its own.

        `of_axes`, `of_terms`: which arrays name variables, -1 for none; those of axes have to stay above zero.
        """
        n, count, variables = self.mass.shape[0], self.axes.shape[0], low.shape[0]
        common: dict[str, tuple[int, ...]] = dict.fromkeys(
            ("mass", "fixed_dynamic", "fixed_hysteretic", "fixed_viscous"), (n, n)
        )
        common |= {"axes": (count, n)} | dict.fromkeys(("stiffness", "loss", "viscous"), (count,))
        for name, shape in {**common, **shapes, "high": (variables,)}.items():
            if getattr(self, name).shape != shape:
                raise RobustError(f"{name} must have shape {shape}")
        if not bool((high >= low).all()):
            raise RobustError("every variable needs low <= high")
        for name in (*of_axes, *of_terms):
            index = getattr(self, name)
            if index.size and (index.min() < -1 or index.max() >= variables):
                raise RobustError(f"{name} names a variable that does not exist")
        for name in of_axes:
            used = getattr(self, name)
            if bool((low[used[used >= 0]] <= 0.0).any()):
                raise RobustError("stiffness and damping factors must be positive")
        for name in ("stiffness", "loss", "viscous"):
            if bool((getattr(self, name) < 0.0).any()):
                raise RobustError(f"{name} must not be negative")


@dataclass(frozen=True, eq=False)
class RobustSystem(VaryingSystem):
    """A system with V uncertain variables.

    stiffness_variable, damping_variable (A,): index of a variable or -1.
    mass_terms (P, n, n) symmetric with mass_variable (P,): mass added per unit of a variable.
    low, high (V,): interval of each variable (factors of s and t must stay positive).
    """

    stiffness_variable: Integers
    damping_variable: Integers
    mass_terms: Floats
    mass_variable: Integers
    low: Floats
    high: Floats

    def __post_init__(self) -> None:
        n, count, terms = self.mass.shape[0], self.axes.shape[0], self.mass_variable.shape[0]
        of_axes = ("stiffness_variable", "damping_variable")
        shapes: dict[str, tuple[int, ...]] = dict.fromkeys(of_axes, (count,))
        shapes["mass_terms"] = (terms, n, n)
        self._check(self.low, self.high, shapes, of_axes, ("mass_variable",))

    @property
    def variables(self) -> int:
        """Number V of uncertain variables."""
        return int(self.low.shape[0])


@dataclass(frozen=True, eq=False)
class OutputLimit:
    """One output of a system and its limit over a frequency interval.

    row (n,) complex; force (A,) complex coefficients of the axis forces; offset: complex, subtracted (only with
    load_power = output_power = 0). load (n,) complex and base (A,) complex at omega = 1, times omega^load_power.
    output_power: 1 for velocity, 2 for acceleration. limit: upper limit of |y|. frequency: (low, high) in Hz.
    """

    row: Complexes
    force: Complexes
    load: Complexes
    base: Complexes
    limit: float
    frequency: tuple[float, float]
    load_power: float = 0.0
    output_power: float = 0.0
    offset: complex = 0.0

    def __post_init__(self) -> None:
        low, high = self.frequency
        if not 0.0 < low <= high:
            raise RobustError("the frequency interval needs 0 < low <= high")
        if not self.limit >= 0.0:
            raise RobustError("the limit must be a number that is not negative")
        if self.offset != 0.0 and (self.load_power != 0.0 or self.output_power != 0.0):
            raise RobustError("an offset needs load_power and output_power zero")


def first_box(system: RobustSystem, output: OutputLimit) -> tuple[Floats, Floats]:
    """Lower and upper corner (V+1,) of the whole box; the last variable is omega^2."""
    low, high = output.frequency
    squares = np.array([(2.0 * np.pi * low) ** 2, (2.0 * np.pi * high) ** 2])
    return np.append(system.low, squares[0]), np.append(system.high, squares[1])


def axis_stiffness(system: RobustSystem, points: Floats) -> Complexes:
    """kappa (N, A) at points (N, V+1)."""
    ones = np.ones((points.shape[0], 1))
    padded = np.concatenate([points[:, :-1], ones], axis=1)
    s, t = padded[:, system.stiffness_variable], padded[:, system.damping_variable]
    omega = np.sqrt(points[:, -1])[:, None]
    kappa: Complexes = s * system.stiffness + 1j * t * (s * system.loss + omega * system.viscous)
    return kappa


def system_matrices(system: RobustSystem, points: Floats, kappa: Complexes) -> Complexes:
    """D (N, n, n) at points (N, V+1) for axis stiffness kappa (N, A)."""
    squares = points[:, -1]
    omega = np.sqrt(squares)[:, None, None]
    matrices = system.fixed_dynamic + 1j * (system.fixed_hysteretic + omega * system.fixed_viscous)
    matrices = matrices - squares[:, None, None] * system.mass
    for i, term in enumerate(system.mass_terms):
        amount = points[:, system.mass_variable[i]] if system.mass_variable[i] >= 0 else np.ones(len(points))
        matrices = matrices - (squares * amount)[:, None, None] * term
    outer = np.einsum("ai,aj->aij", system.axes, system.axes).reshape(-1, system.mass.size)
    result: Complexes = matrices + (kappa @ outer).reshape(matrices.shape)
    return result


def output_at(system: RobustSystem, output: OutputLimit, points: Floats) -> Floats:
    """|y| (N,) at points (N, V+1), by a direct solve."""
    kappa = axis_stiffness(system, points)
    matrices = system_matrices(system, points, kappa)
    load = output.load + (kappa * output.base) @ system.axes
    q = np.linalg.solve(matrices, load[:, :, None])[:, :, 0]
    deflection = q @ system.axes.T - output.base
    y = q @ output.row + (output.force * kappa * deflection).sum(axis=1)
    power = np.sqrt(points[:, -1]) ** (output.load_power + output.output_power)
    size: Floats = np.abs(y * power - output.offset)
    return size
