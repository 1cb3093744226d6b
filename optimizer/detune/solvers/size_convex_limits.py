"""Response limits of a brief that can be held whatever the damping, as limits of `sizing.lmi`.

A limit on motion under tones whose amplitude is one power p of the frequency is |row^T q| w^r <= L with a
load w^p f. On the soft side A = w^2 M - K > 0 the bound w^(p+r) sqrt(c^T A^-1 c  f^H A^-1 f) is w^(p+r-2)
times something that falls with w: for p + r <= 2 its worst place is the lower end of the range. Beyond, the
factor (w2/w1)^(p+r-2) is put on top, which errs on the safe side. On the stiff side everything grows with w,
and the upper end is the worst place. Tones that act together are held to shares of one limit: the sum of
their amplitudes is never below what they add up to.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, cast

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.base import TONE_FACTOR, BandAllowable, HarmonicAllowable
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.machine_velocity import MachineVelocity
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.allowable.relative_motion import RelativeMotion
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.velocity import Velocity
from detune.brief.brief import Brief, applies, demanded
from detune.brief.condition import Condition
from detune.problem.build import Problem
from detune.response.loads import Load, condition_families
from detune.response.model import Model, find_station
from detune.sizing.lmi import DampingFreeLimit, Side

Floats = NDArray[np.float64]
MOTIONS = (Displacement, Velocity, Acceleration, MachineVelocity, RelativeMotion, MountDeflection)
# The solver's own tolerance must not eat up what makes the restriction safe.
ROOM = 1e-6


@dataclass(frozen=True)
class HeldLimits:
    """`limits` of one side; `held` names what they hold, `left` in words what they leave to the assessor."""

    limits: tuple[DampingFreeLimit, ...]
    held: tuple[str, ...]
    left: tuple[str, ...]


class _Unstated(Exception):
    """The limit has no form of this kind; the text says why."""


class _Rows:
    """What an allowable observes, as rows over the freedoms (1, n, 3), with the number of derivatives it takes."""

    count = 1

    def __init__(self, model: Model) -> None:
        self.model, self.rate = model, 0

    def motion(self, point: str, rate: int = 0) -> Floats:
        self.rate = rate
        return np.asarray(self.model.points[point].T[None])

    def floor_motion(self, rate: int = 0) -> Floats:
        if self.model.frame.flexible_floor:
            raise _Unstated("it looks at a floor that moves")
        return np.zeros((1, self.model.frame.count, 3))

    def station_deflection(self, station: str, rate: int = 0) -> Floats:
        self.rate = rate
        return np.asarray(find_station(self.model, station).rows.T[None])


def damping_free_limits(brief: Brief, problem: Problem, side: Side) -> HeldLimits:
    """The response limits of a brief that hold whatever the damping on one side of all excitation."""
    limits: list[DampingFreeLimit] = []
    held: list[str] = []
    left: list[str] = []
    for allowable in demanded(brief)[0]:
        if isinstance(allowable, Separation):
            continue
        label = allowable.quantity()
        if not isinstance(allowable, MOTIONS):
            what = isinstance(allowable, (HarmonicAllowable, BandAllowable))
            left.append(f"{label} (a force or a ratio)" if what else "limits at rest and totals")
            continue
        for condition in brief.conditions:
            if not applies(allowable.conditions, condition.name):
                continue
            for place in allowable.places(problem.states[0].places):
                name = f"{label} at {place} ({condition.name})"
                if isinstance(allowable, MountDeflection) and allowable.limit == "part":
                    left.append("each part's own deflection")
                    continue
                try:
                    found = _stated(brief, problem, condition, allowable, place, side, name)
                except _Unstated as reason:
                    left.append(f"{name}: {reason}")
                    continue
                limits += found
                held += [name] if found else []
    return HeldLimits(tuple(limits), tuple(held), tuple(dict.fromkeys(left)))


def _stated(
    brief: Brief, problem: Problem, condition: Condition, allowable: HarmonicAllowable, place: str, side: Side,
    name: str,
) -> list[DampingFreeLimit]:  # fmt: skip
    acting = [forcing for forcing in brief.forcing if applies(forcing.conditions, condition.name)]
    if condition.run_up or condition.coast_down or any(each.transients() for each in acting):
        raise _Unstated("records, pulses and passages")
    if any(each.noises() for each in acting):
        raise _Unstated("noise")
    if isinstance(allowable, MountDeflection) and allowable.part != "dynamic":
        raise _Unstated("static and dynamic deflection together")
    view = _Rows(problem.model)
    observed = allowable.observed(cast(Any, view), place)[0]
    along = allowable.along()
    rows = observed @ np.asarray(along)[:, None] if along is not None else observed
    most = float(allowable.bound(cast(Any, view), place)[0]) / TONE_FACTOR[allowable.statistic()]
    found = []
    for family in condition_families(brief, problem.model, condition):
        for loads in family.sets:
            order = loads[0].order
            limit = _one(loads, order * family.low, order * family.high, view.rate, most, side)
            if limit is not None:
                frequency, load, level = limit
                found.append(DampingFreeLimit(name, frequency, rows.T, load, level * (1.0 - ROOM), side))
    return [limit for limit in found if np.any(limit.row)]


def _one(
    loads: tuple[Load, ...], low: float, high: float, rate: int, most: float, side: Side
) -> tuple[float, NDArray[np.complex128], float] | None:
    """Frequency (Hz), load and limit of one coherent set of tones; None where it has no load."""
    if any(load.base is not None for load in loads):
        raise _Unstated("motion of the floor, which acts through the parts")
    powers = {load.power for load in loads}
    if len(powers) > 1 and low < high:
        raise _Unstated("tones that grow by different powers of the frequency")
    at = low if side == "below" else high
    omega = 2.0 * np.pi * at
    total = np.asarray(sum(load.vector * omega ** float(load.power) for load in loads), dtype=complex)
    if not np.any(total):
        return None
    beyond = max(max(powers) + rate - 2, 0) if side == "below" else 0
    return at, total, most / omega**rate / (high / low) ** beyond
