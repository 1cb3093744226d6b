"""A brief as a one-axis sizing problem, and what of the brief that problem does not hold.

One body free in z alone on upright parts of one group over a rigid floor is one mass on one stiffness and one
damping. Every limit that has a single source at a time becomes a limit of `sizing.statement` as it stands. Where
several sources add up, each alone is held to the limit: a relaxation, said so in `OneAxis.relaxed`; then the answer
is global if the assessor finds that it meets the brief, and a bound otherwise.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.added_mass import AddedMass
from detune.brief.allowable.band_limit import BandLimit
from detune.brief.allowable.base import Allowable, BandAllowable, HarmonicAllowable
from detune.brief.allowable.cost import CostLimit
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.load_range import LoadRange
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.allowable.sag import Sag
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.stability import Stability
from detune.brief.allowable.tilt import Tilt
from detune.brief.allowable.transmissibility import Transmissibility
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.allowable.uplift import Uplift
from detune.brief.allowable.velocity import Velocity
from detune.brief.brief import Brief, applies, demanded
from detune.brief.condition import Condition
from detune.brief.mass_properties import mass_properties
from detune.brief.sizing import SizingUnknown
from detune.brief.statement import unit_direction
from detune.physics.octaves import band_edges
from detune.problem.build import Problem
from detune.response.loads import Load, condition_families, excitation_intervals
from detune.sizing.made_parts import asks_for_own_range, made_table, sizing_of
from detune.sizing.never_binds import never_binds
from detune.sizing.statement import (
    STANDARD_GRAVITY,
    Ballast,
    Objective,
    OneAxisProblem,
    Quantity,
    ResponseLimit,
    SagLimit,
    Source,
)
from detune.solvers.one_axis_objective import objective_of

FACTOR = {"peak": 1.0, "3-sigma": 1.0, "rms": 2.0**0.5, "peak-to-peak": 0.5}
QUANTITIES: dict[type[Allowable], Quantity] = {
    Displacement: "displacement",
    Velocity: "velocity",
    Acceleration: "acceleration",
}
FORCE: dict[int, Source] = {0: "force", 2: "unbalance"}
BASE: dict[int, Source] = {0: "base displacement", -1: "base velocity", -2: "base acceleration"}
# Ranges that only share an edge.
EDGE = 1e-9


@dataclass(frozen=True)
class OneAxis:
    """The one-axis problem of a brief. `pieces` equal parts share its stiffness and damping.

    Limits that every design within the bounds meets are left out (`never_binds`). `relaxed` tells in words what the
    problem leaves out or holds one source at a time; where it is empty, the
    problem is the brief. `labels` names for each limit of the problem the requirement it belongs to.
    """

    problem: OneAxisProblem
    pieces: int
    relaxed: tuple[str, ...]
    labels: tuple[str, ...]


def why_not_one_axis(brief: Brief) -> str | None:
    """Why the brief is no one-axis problem, None if it is."""
    sizing = sizing_of(brief)
    if len(brief.bodies) > 1:
        return "there are several bodies"
    if brief.bodies[0].free != ("z",):
        return "the machine moves in more than the vertical"
    if brief.floor.kind != "rigid" or brief.structure is not None:
        return "the floor moves"
    if brief.connections:
        return "given connections carry part of the machine"
    if len(brief.groups) > 1:
        return "there are several groups of parts"
    if any(abs(unit_direction(s.axial)[2]) < 1.0 or s.to != "floor" for s in brief.stations):
        return "parts stand inclined, or not on the floor"
    if brief.states:
        return "conditions are judged in several states"
    kinds = [unknown.kind for unknown in sizing.unknown]
    if any(unknown.kind == "stiffness" and unknown.axis != "axial" for unknown in sizing.unknown):
        return "a lateral stiffness is unknown"
    if not set(kinds) <= {"stiffness", "loss-factor", "viscous", "ballast", "parallel"}:
        return "absorbers or positions are unknown"
    made = made_table(brief, brief.groups[0])
    both = ("viscous" in kinds or bool(made.viscous)) and ("loss-factor" in kinds or bool(made.loss_factor))
    return "viscous and loss-factor damping act together" if both else None


def one_axis(brief: Brief, problem: Problem, every_limit: bool = False) -> OneAxis:
    """The brief as a one-axis problem; `problem` is the brief's own with any parts, for its loads.

    `every_limit`: those too that no design within the bounds can miss.
    """
    sizing = sizing_of(brief)
    group = brief.groups[0]
    made = made_table(brief, group)
    unknowns = {unknown.kind: unknown for unknown in sizing.unknown}
    pieces = sum(station.parallel for station in brief.stations)
    mass = mass_properties(brief.bodies[0]).mass
    viscous = is_viscous(brief)
    added = _ballast(brief, unknowns.get("ballast"))
    limits = _Limits(brief, problem, pieces, (mass + added.least, mass + added.most))
    limits.gather()
    stiffness = _scaled(unknowns.get("stiffness"), made.stiffness, pieces)
    damping = (
        _scaled(unknowns.get("viscous"), made.viscous, pieces)
        if viscous
        else _scaled(unknowns.get("loss-factor"), made.loss_factor, 1)
    )
    free = "ballast" in unknowns
    statement = OneAxisProblem(
        mass=mass,
        damping_kind="viscous" if viscous else "loss factor",
        stiffness_bounds=stiffness,
        damping_bounds=damping,
        objective=Objective("softest"),
        limits=tuple(limits.found),
        sag=None if limits.sag is None else SagLimit(0.0, limits.sag, made.dynamic_to_static),
        excitation_intervals=problem.intervals,
        separation=limits.separation,
        ballast=added if free else None,
    )
    # Where the level of all limits is sought, one that holds at the level of the brief may not hold at another.
    every_limit = every_limit or "worst-response" in (sizing.goal, *sizing.trade)
    kept = [i for i, each in enumerate(statement.limits) if every_limit or not never_binds(statement, each)]
    stated = replace(
        statement,
        objective=objective_of(brief, statement),
        limits=tuple(statement.limits[i] for i in kept),
    )
    labels = tuple(limits.labels[i] for i in kept)
    return OneAxis(stated, pieces, tuple(dict.fromkeys(limits.relaxed)), labels)


def is_viscous(brief: Brief) -> bool:
    """Whether the damping of the one-axis problem is viscous. Where a kind is stated as zero the other one counts."""
    kinds = {unknown.kind for unknown in sizing_of(brief).unknown}
    made = made_table(brief, brief.groups[0])
    stated = made.viscous is not None and not (made.viscous == 0.0 and made.loss_factor)
    return "viscous" in kinds or (stated and "loss-factor" not in kinds)


def _scaled(unknown: SizingUnknown | None, fixed: float | None, pieces: int) -> tuple[float, float]:
    if unknown is None:
        return (pieces * (fixed or 0.0),) * 2
    low, high = unknown.bounds
    return pieces * low, pieces * high


def _ballast(brief: Brief, unknown: SizingUnknown | None) -> Ballast:
    if unknown is None:
        return Ballast(0.0, 0.0)
    least, most = unknown.bounds
    caps = [a.upper_limit() for a in brief.allowables if isinstance(a, AddedMass)]
    return Ballast(least, max(min([most, *caps]), least), unknown.steps)


class _Limits:
    """Gathers the limits of a brief, allowable by allowable."""

    def __init__(self, brief: Brief, problem: Problem, pieces: int, mass: tuple[float, float]) -> None:
        self.brief, self.problem, self.pieces, self.mass = brief, problem, pieces, mass
        self.found: list[ResponseLimit] = []
        self.labels: list[str] = []
        self.relaxed: list[str] = []
        self.sag: float | None = None
        self.separation: float | None = None

    def gather(self) -> None:
        """Go through every allowable that is demanded."""
        for allowable in demanded(self.brief)[0]:
            if asks_for_own_range(self.brief, allowable):
                self._relax(allowable, "the range of the part itself")
            elif isinstance(allowable, Sag):
                self.sag = allowable.limit if self.sag is None else min(self.sag, allowable.limit)
                if self.brief.steady_loads:
                    self._relax(allowable, "steady loads besides the weight")
            elif isinstance(allowable, Separation):
                if allowable.exempt_amplification is None:
                    self.separation = max(self.separation or 0.0, allowable.limit)
                else:
                    self._relax(allowable, "modes exempted by their amplification")
            elif isinstance(allowable, CostLimit):
                self._relax(allowable, "a limit on cost")
            elif isinstance(allowable, (LoadRange, Stability, Tilt, AddedMass)):
                continue
            elif isinstance(allowable, (HarmonicAllowable, BandAllowable)):
                for condition in self.brief.conditions:
                    if applies(allowable.conditions, condition.name):
                        self._in(condition, allowable)
            else:
                self._relax(allowable, "a kind that has no one-axis form")

    def _relax(self, allowable: Allowable, why: str) -> None:
        self.relaxed.append(f"{allowable.quantity()}: {why}")

    def _in(self, condition: Condition, allowable: HarmonicAllowable | BandAllowable) -> None:
        if isinstance(allowable, MountDeflection) and allowable.limit == "part":
            return
        if isinstance(allowable, Transmissibility):
            self._transmissibility(condition, allowable)
            return
        acting = [f for f in self.brief.forcing if applies(f.conditions, condition.name)]
        if condition.run_up or condition.coast_down or any(f.transients() for f in acting):
            self._relax(allowable, f"records, pulses and passages of {condition.name}")
        if any(f.noises() for f in acting):
            self._relax(allowable, f"noise of {condition.name}")
        sets = [
            (family.low, family.high, loads)
            for family in condition_families(self.brief, self.problem.model, condition)
            if family.speed not in (*condition.run_up, *condition.coast_down)
            for loads in family.sets
        ]
        if isinstance(allowable, BandAllowable):
            self._bands(condition, allowable, sets)
            return
        if len(sets) > 1:
            self._relax(allowable, f"the sum of {len(sets)} sources in {condition.name}, each held alone")
        for number, (low, high, loads) in enumerate(sets):
            order = loads[0].order
            self._one(condition, allowable, loads, order * low, order * high, number)

    def _source(self, loads: tuple[Load, ...], at: float | None) -> tuple[Source, float] | None:
        """Source and amplitude of one coherent set, None where it is no power of the frequency."""
        powers = {load.power for load in loads}
        based = {load.base is not None for load in loads}
        if len(based) > 1 or (len(powers) > 1 and at is None):
            return None
        omega = 1.0 if at is None else 2.0 * np.pi * at
        if based == {True}:
            base = sum((load.base for load in loads if load.base is not None), np.zeros(3, complex))
            power = powers.pop() if len(powers) == 1 else None
            if power not in BASE or np.abs(base[:2]).max() > 1e-9 * np.abs(base).max():
                return None
            return BASE[power], float(abs(base[2]))
        if len(powers) == 1 and next(iter(powers)) in FORCE:
            power = powers.pop()
            return FORCE[power], float(abs(sum(load.vector[0] for load in loads)))
        if at is None:
            return None
        return "force", float(abs(sum(load.vector[0] * omega**load.power for load in loads)))

    def _one(
        self, condition: Condition, allowable: HarmonicAllowable, loads: tuple[Load, ...], low: float, high: float,
        number: int,
    ) -> None:  # fmt: skip
        source = self._source(loads, low if low == high else None)
        if source is None:
            self._relax(allowable, f"a source of {condition.name} that is no power of the frequency")
            return
        if source[1] == 0.0:
            return
        meant = self._meaning(allowable, source[0])
        if meant is None:
            return
        quantity, limit = meant
        self._add(f"{allowable.quantity()} ({condition.name})", quantity, limit, low, high, source, number)

    def _meaning(self, allowable: HarmonicAllowable, source: Source) -> tuple[Quantity, float] | None:
        """Quantity and peak limit of an allowable, None where it is not for the one axis."""
        based = source in BASE.values()
        along = allowable.along()
        share = 1.0 if along is None else abs(along[2])
        if type(allowable) in QUANTITIES:
            limit = getattr(allowable, "limit") * FACTOR[allowable.statistic()]  # noqa: B009
            return (QUANTITIES[type(allowable)], limit / share) if share > 0.0 else None
        if isinstance(allowable, MountDeflection):
            if allowable.direction == "lateral":
                return None
            if allowable.part == "combined":
                self._relax(allowable, "static and dynamic deflection together")
            return "deflection", float(allowable.limit)
        if isinstance(allowable, TransmittedForce):
            if allowable.direction == "lateral" or share == 0.0:
                return None
            count = self.pieces if allowable.through == "each-station" else 1
            return self._force(allowable, count * allowable.limit * FACTOR[allowable.measure] / share, based)
        if isinstance(allowable, Uplift):
            return self._uplift(allowable, based)
        self._relax(allowable, "a kind that has no one-axis form")
        return None

    def _force(self, allowable: Allowable, limit: float, based: bool) -> tuple[Quantity, float]:
        if not based:
            return "transmitted force", limit
        # Under base motion the parts carry the mass times its acceleration.
        if self.mass[0] != self.mass[1]:
            self._relax(allowable, "a force limit that tightens with the ballast")
        return "acceleration", limit / self.mass[0]

    def _uplift(self, allowable: Allowable, based: bool) -> tuple[Quantity, float] | None:
        if made_table(self.brief, self.brief.groups[0]).pulls:
            return None
        if self.brief.steady_loads:
            self._relax(allowable, "steady loads besides the weight")
            return None
        if based:
            return "acceleration", STANDARD_GRAVITY
        if self.mass[0] != self.mass[1]:
            self._relax(allowable, "a weight that grows with the ballast")
        return "transmitted force", self.mass[1] * STANDARD_GRAVITY

    def _transmissibility(self, condition: Condition, allowable: Transmissibility) -> None:
        if abs(unit_direction(allowable.direction)[2]) < 1.0:
            self._relax(allowable, "a direction that is not vertical")
            return
        name = f"{allowable.quantity()} ({condition.name})"
        merged = _merged(excitation_intervals(self.brief, (condition,)), allowable.lowest_frequency())
        for number, (low, high) in enumerate(merged):
            self._add(name, "transmissibility", allowable.limit, low, high, ("unit", 1.0), number)

    def _bands(
        self,
        condition: Condition,
        allowable: BandAllowable,
        sets: list[tuple[float, float, tuple[Load, ...]]],
    ) -> None:
        share = abs(allowable.along()[2])
        if not isinstance(allowable, BandLimit) or allowable.at == "floor":
            self._relax(allowable, "a kind that has no one-axis form")
            return
        if share == 0.0:
            return
        several = False
        for band, limit in zip(*allowable.bands(), strict=True):
            edges = band_edges(np.array([band]))
            first, last = float(edges[0][0]), float(edges[1][0])
            here = 0
            for number, (low, high, loads) in enumerate(sets):
                a, b = max(loads[0].order * low, first), min(loads[0].order * high, last)
                if b < a or (high > low and b <= a * (1.0 + EDGE)):
                    continue
                here += 1
                source = self._source(loads, a if a == b else None)
                if source is None:
                    self._relax(allowable, f"a source of {condition.name} that is no power of the frequency")
                    continue
                name = f"{allowable.quantity()} ({condition.name})"
                self._add(name, "velocity", float(limit) * 2.0**0.5 / share, a, b, source, number)
            several = several or here > 1
        if several:
            self._relax(allowable, f"several sources in one band in {condition.name}, each held alone")

    def _add(
        self, name: str, quantity: Quantity, limit: float, low: float, high: float, source: tuple[Source, float],
        number: int,
    ) -> None:  # fmt: skip
        where = f"{low:.4g} Hz" if low == high else f"{low:.4g} to {high:.4g} Hz"
        full = f"{name}, {where}"
        if any(limit_.name == full for limit_ in self.found):
            full = f"{full}, source {number + 1}"
        if any(limit_.name == full for limit_ in self.found):
            full = f"{full} [{len(self.found)}]"
        self.labels.append(name)
        self.found.append(ResponseLimit(full, quantity, limit, low, high, source[0], source[1]))


def _merged(intervals: tuple[tuple[float, float], ...], least: float) -> list[tuple[float, float]]:
    merged: list[tuple[float, float]] = []
    for low, high in sorted((max(low, least), high) for low, high in intervals if high >= least):
        if merged and low <= merged[-1][1] * (1.0 + EDGE):
            merged[-1] = (merged[-1][0], max(merged[-1][1], high))
        else:
            merged.append((low, high))
    return merged
