"""The scaled question of a one-axis problem, and the lines its pool starts with."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

from detune.sizing.slice_data import (
    AT_LINE,
    CLOSED,
    HIGH,
    KIND,
    LINE,
    LINEAR,
    LOW,
    OPEN,
    SEPARATION,
    TRANSMISSIBILITY,
    Question,
)
from detune.sizing.statement import DampingKind, OneAxisProblem, PowerForm, power_form

SEEDS = 7


def is_closed(form: PowerForm, kind: DampingKind) -> bool:
    """Whether the lines at both ends of a range and `closed_envelope` together say all that the range says.

    True for the forms listed there; for A^2 u^2 with A >= m, where the bound rises with u throughout; and for a
    constant T <= 1, which binds at the lower end: (T^2 (k - m u)^2 - k^2)/(u (1 - T^2)) rises with u.
    """
    if form.transmission:
        return form.power == 0
    return form.power in ((0, 1, 2) if kind == "loss factor" else (1, 2))


@dataclass(frozen=True)
class Scales:
    """Reference stiffness (N/m) and squared frequency (rad2/s2) that make the algebra dimensionless."""

    stiffness: float
    squared_frequency: float

    @classmethod
    def of(cls, problem: OneAxisProblem) -> Scales:
        """Reference values near the middle of the problem's own stiffness bounds."""
        low, high = problem.stiffness_bounds
        stiffness = math.sqrt(low * high)
        return cls(stiffness, stiffness / problem.mass)

    @property
    def mass(self) -> float:
        """Reference mass in kg."""
        return self.stiffness / self.squared_frequency

    @property
    def to_u(self) -> float:
        """Factor from a squared frequency in Hz2 to u, and to stiffness per mass."""
        return (2.0 * math.pi) ** 2 / self.squared_frequency


def separation_peaks(intervals: tuple[tuple[float, float], ...]) -> tuple[float, ...]:
    """Frequencies where the least separation can have an inner maximum: 2 / (1/f_b + 1/f_a) of each pair."""
    return tuple(2.0 / (1.0 / b + 1.0 / a) for _, b in intervals for a, _ in intervals if a > b)


def question_of(problem: OneAxisProblem, scales: Scales, arrays: bool) -> Question:
    """The scaled question, of numpy arrays for compiled code or of lists for interpreted code."""
    import numpy as np

    def table(values: list[list[float]], columns: int) -> Any:
        return np.array(values, dtype=float).reshape(-1, columns) if arrays else values

    to_u = scales.to_u
    limits = []
    for limit in problem.limits:
        form = power_form(limit)
        factor = scales.squared_frequency**form.power
        if not form.transmission:
            factor /= scales.squared_frequency**2 if form.mass_proportional else scales.stiffness**2
        closed = CLOSED if is_closed(form, problem.damping_kind) else OPEN
        limits.append(
            [
                float(form.transmission),
                float(form.power),
                form.scale * factor,
                0.0 if form.transmission or form.mass_proportional else 1.0,
                limit.lower_frequency**2 * to_u,
                limit.upper_frequency**2 * to_u,
                float(LINE if limit.lower_frequency == limit.upper_frequency else closed),
            ]
        )
    forbidden: list[list[float]] = []
    if problem.separation is not None:
        away = problem.separation
        forbidden = [
            [to_u * (a * max(1.0 - away, 0.0)) ** 2, to_u * (b * (1.0 + away)) ** 2]
            for a, b in problem.excitation_intervals
        ]
    goal = {"least transmissibility": TRANSMISSIBILITY, "greatest separation": SEPARATION}
    frequency = problem.objective.frequency or 0.0
    peaks = [f * f * to_u for f in separation_peaks(problem.excitation_intervals)]
    return Question(
        viscous=1 if problem.damping_kind == "viscous" else 0,
        limits=table(limits, 7),
        forbidden=table(forbidden, 2),
        excited=table([[a * a * to_u, b * b * to_u] for a, b in problem.excitation_intervals], 2),
        peaks=np.array(peaks, dtype=float) if arrays else peaks,
        goal=goal.get(problem.objective.goal, LINEAR),
        goal_u=frequency**2 * to_u,
    )


def seeds(question: Question) -> list[tuple[int, float, float]]:
    """The lines a pool starts with: every line, the ends of a closed range, and a few places of any other."""
    found: list[tuple[int, float, float]] = []
    for i, limit in enumerate(question.limits):
        low, high, kind = float(limit[LOW]), float(limit[HIGH]), int(limit[KIND])
        if kind == LINE:
            found.append((i, low, AT_LINE))
        elif kind == CLOSED:
            found += [(i, low, AT_LINE), (i, high, AT_LINE)]
        else:
            step = (high / low) ** (1.0 / (SEEDS - 1))
            found += [(i, low * step**n, AT_LINE) for n in range(SEEDS - 1)] + [(i, high, AT_LINE)]
            found += [(i, low * step**n, 1.0) for n in (1, SEEDS // 2, SEEDS - 2)]
    return found
