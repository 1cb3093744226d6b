"""What a one-axis sizing problem states: limits, bounds, ballast, separation and the objective.

All quantities are SI and amplitudes are peak; frequencies are in Hz. One mass `m` stands on one mount of
dynamic stiffness `k` (N/m) with viscous damping `c` (N s/m) or a constant loss factor `eta`; the complex
dynamic stiffness of the mounted mass is

    D = k - m w^2 + j w c            (viscous)
    D = k - m w^2 + j eta k          (loss factor)
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

STANDARD_GRAVITY = 9.80665

DampingKind = Literal["viscous", "loss factor"]
Quantity = Literal[
    "displacement", "velocity", "acceleration", "deflection", "transmitted force", "transmissibility"
]
Source = Literal["force", "unbalance", "base displacement", "base velocity", "base acceleration", "unit"]
Goal = Literal[
    "weighted sum",
    "softest",
    "stiffest",
    "least damping",
    "least added mass",
    "least transmissibility",
    "greatest separation",
]

_DERIVATIVES = {"displacement": 0, "velocity": 1, "acceleration": 2}
_BASE = {"base displacement": 0, "base velocity": 1, "base acceleration": 2}


class SizingError(ValueError):
    """A sizing problem that cannot be stated as written; the message says what to change."""


@dataclass(frozen=True)
class ResponseLimit:
    """One upper limit on one response of the mounted mass, at a line or over a whole frequency range.

    `limit` is in SI (m, m/s, m/s2, N, or a ratio). `amplitude` is N for a force, kg m for an unbalance
    (force amplitude * w^2), m, m/s or m/s2 for base motion, and 1 for a transmissibility (source "unit").
    `deflection` is the dynamic stretch of the mount; under base motion displacement, velocity and
    acceleration are those of the mass in space. Equal lower and upper frequency make a line.
    """

    name: str
    quantity: Quantity
    limit: float
    lower_frequency: float
    upper_frequency: float
    source: Source = "unit"
    amplitude: float = 1.0

    def __post_init__(self) -> None:
        if not (self.limit > 0 and math.isfinite(self.limit)):
            raise SizingError(f"limit '{self.name}': the limit must be a positive number, got {self.limit}")
        if not (self.amplitude > 0 and math.isfinite(self.amplitude)):
            raise SizingError(f"limit '{self.name}': the amplitude must be positive, got {self.amplitude}")
        if not 0 < self.lower_frequency <= self.upper_frequency < math.inf:
            raise SizingError(
                f"limit '{self.name}': frequencies {self.lower_frequency} to {self.upper_frequency} Hz are "
                "crossed, zero or not finite"
            )
        if (self.quantity == "transmissibility") != (self.source == "unit"):
            raise SizingError(
                f"limit '{self.name}': a transmissibility has no source, every other limit has one"
            )
        if self.quantity == "transmitted force" and self.source in _BASE:
            raise SizingError(
                f"limit '{self.name}': under base motion state the force as an acceleration of the mass"
            )


@dataclass(frozen=True)
class PowerForm:
    """A limit as a power law in u = w^2, the form every algebraic step uses.

    Receptance form:   scale * u^power <= |D|^2.
    Transmission form: scale * u^power * |K|^2 <= |D|^2, with K the complex dynamic stiffness of the mount.
    `mass_proportional` says that `scale` is to be multiplied by m^2 (mount deflection under base motion).
    """

    transmission: bool
    scale: float
    power: int
    mass_proportional: bool


def power_form(limit: ResponseLimit) -> PowerForm:
    """Rewrite one limit as a power law in u = w^2 (see `PowerForm`).

    Follows from X = F/D for a force, F = (m e) w^2 for an unbalance, X = Y K/D for base motion and
    X - Y = m w^2 Y/D for the stretch of the mount.
    """
    ratio = (limit.amplitude / limit.limit) ** 2
    if limit.quantity == "transmissibility":
        return PowerForm(True, ratio, 0, False)
    if limit.source in _BASE:
        order = _BASE[limit.source]
        if limit.quantity == "deflection":
            return PowerForm(False, ratio, 2 - order, True)
        return PowerForm(True, ratio, _DERIVATIVES[limit.quantity] - order, False)
    force_power = 2 if limit.source == "unbalance" else 0
    if limit.quantity == "transmitted force":
        return PowerForm(True, ratio, force_power, False)
    order = 0 if limit.quantity == "deflection" else _DERIVATIVES[limit.quantity]
    return PowerForm(False, ratio, force_power + order, False)


@dataclass(frozen=True)
class SagLimit:
    """Window on the static sag m g / k_static in metres, with k_static = k / dynamic_to_static."""

    least: float
    most: float
    dynamic_to_static: float

    def __post_init__(self) -> None:
        if not 0 <= self.least <= self.most or not self.dynamic_to_static > 0:
            raise SizingError(
                "sag: the least sag exceeds the most, or the dynamic-to-static ratio is not positive"
            )


@dataclass(frozen=True)
class Ballast:
    """Added mass in kg between `least` and `most`; with `step` only least, least + step, ... are allowed."""

    least: float
    most: float
    step: float | None = None

    def __post_init__(self) -> None:
        if not 0 <= self.least <= self.most < math.inf:
            raise SizingError(
                f"ballast: bounds {self.least} to {self.most} kg are crossed, negative or not finite"
            )
        if self.step is not None and not self.step > 0:
            raise SizingError("ballast: the step must be positive")

    def values(self) -> tuple[float, ...]:
        """All allowed steps in kg; raises SizingError when the ballast is continuous."""
        if self.step is None:
            raise SizingError("ballast: continuous ballast has no list of values")
        count = math.floor((self.most - self.least) / self.step * (1 + 1e-12) + 1e-12)
        return tuple(self.least + i * self.step for i in range(count + 1))


@dataclass(frozen=True)
class Objective:
    """What is minimised (or, for stiffest and greatest separation, maximised).

    "weighted sum" is stiffness_weight * k + damping_weight * d + damping_squared_weight * d^2 +
    mass_weight * ballast, d being c (N s/m) or the loss factor. Only one of the two damping weights may
    differ from zero and neither may be negative. `frequency` (Hz) belongs to "least transmissibility".
    """

    goal: Goal
    stiffness_weight: float = 0.0
    damping_weight: float = 0.0
    damping_squared_weight: float = 0.0
    mass_weight: float = 0.0
    frequency: float | None = None

    def __post_init__(self) -> None:
        if self.damping_weight < 0 or self.damping_squared_weight < 0:
            raise SizingError("objective: a damping weight is negative; damping can only cost something")
        if self.damping_weight and self.damping_squared_weight:
            raise SizingError("objective: weight damping or damping squared, not both")
        if self.goal == "least transmissibility" and not (self.frequency or 0.0) > 0:
            raise SizingError("objective: least transmissibility needs the frequency at which it is judged")


@dataclass(frozen=True)
class OneAxisProblem:
    """One mounted mass with unknown stiffness, damping and (optionally) ballast.

    `mass` in kg without ballast; `stiffness_bounds` in N/m; `damping_bounds` in N s/m or as loss factor;
    `excitation_intervals` in Hz (used for separation and for naming branches; when empty the lines and
    ranges of the limits name the branches); `separation` is the least separation from every excitation
    interval (f_n/f_b - 1 above, 1 - f_n/f_a below).
    """

    mass: float
    damping_kind: DampingKind
    stiffness_bounds: tuple[float, float]
    damping_bounds: tuple[float, float]
    objective: Objective
    limits: tuple[ResponseLimit, ...] = ()
    sag: SagLimit | None = None
    excitation_intervals: tuple[tuple[float, float], ...] = ()
    separation: float | None = None
    ballast: Ballast | None = None

    def __post_init__(self) -> None:
        if not self.mass > 0:
            raise SizingError(f"the mass must be positive, got {self.mass} kg")
        for label, (low, high) in (("stiffness", self.stiffness_bounds), ("damping", self.damping_bounds)):
            if not (0 <= low <= high and math.isfinite(high)):
                raise SizingError(f"{label}: bounds {low} to {high} are crossed, negative or not finite")
        if not self.stiffness_bounds[0] > 0:
            raise SizingError(
                "stiffness: the lower bound must be above zero; a mass without a mount has no answer"
            )
        if any(not 0 < a <= b for a, b in self.excitation_intervals):
            raise SizingError("excitation intervals must be positive and not crossed")
        needs = self.separation is not None or self.objective.goal == "greatest separation"
        if needs and not self.excitation_intervals:
            raise SizingError("separation is asked for but no excitation interval is given")
        if self.separation is not None and not 0 <= self.separation < math.inf:
            raise SizingError(
                "separation must be zero or more; from 1 on only the stiff side of an excitation serves"
            )
        if self.ballast is None and (
            self.objective.goal == "least added mass" or self.objective.mass_weight != 0
        ):
            raise SizingError("the objective weighs added mass but no ballast is allowed")
        names = [limit.name for limit in self.limits]
        if len(set(names)) != len(names):
            raise SizingError("two limits carry the same name")


def excitations(problem: OneAxisProblem) -> tuple[tuple[float, float], ...]:
    """Excitation intervals in Hz in rising order, touching ones merged; from the limits when none are given."""
    given = problem.excitation_intervals or tuple(
        (limit.lower_frequency, limit.upper_frequency) for limit in problem.limits
    )
    merged: list[tuple[float, float]] = []
    for low, high in sorted(given):
        if merged and low <= merged[-1][1]:
            merged[-1] = (merged[-1][0], max(merged[-1][1], high))
        else:
            merged.append((low, high))
    return tuple(merged)
