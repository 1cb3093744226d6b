"""Margins of every requirement of the brief for many values of the unknowns at once."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.brief.mass_properties import mass_properties
from detune.problem.build import Problem, with_parts
from detune.problem.requirement import Requirement
from detune.problem.stages import Stage, objective_values, stages
from detune.response.designs import Designs
from detune.response.direct import DirectMachine
from detune.response.direct_views import DirectStatic
from detune.sizing.made_parts import OF_MACHINE, Made, changes_brief, made_design, sizing_of

Floats = NDArray[np.float64]
# A margin of infinity (nothing limited) is shown and compared as this.
LARGEST = 1e6


@dataclass(frozen=True)
class Judged:
    """Margins (R, N) of `requirements` and the objectives (N,) by name, at N points."""

    requirements: tuple[Requirement, ...]
    margins: Floats
    objectives: dict[str, Floats]

    @property
    def least(self) -> Floats:
        """Least margin (N,) of all that is not a total of the design."""
        rows = [i for i, r in enumerate(self.requirements) if not r.is_total]
        return np.asarray(self.margins[rows].min(axis=0))

    @property
    def met(self) -> NDArray[np.bool_]:
        """Whether every requirement is met (N,)."""
        return np.asarray((self.margins >= 0.0).all(axis=0))


def judge(brief: Brief, values: Floats) -> Judged:
    """Margins and objectives at points `values` (N, u). Raises BriefError where the machine is not held."""
    if not changes_brief(brief):
        return judge_alike(brief, [made_design(brief, row) for row in values])
    # Points that share absorber mass and positions stand in one machine and are judged together.
    machine = [k for k, u in enumerate(sizing_of(brief).unknown) if u.kind in OF_MACHINE]
    _, which = np.unique(values[:, machine], axis=0, return_inverse=True)
    groups = [np.flatnonzero(which.ravel() == number) for number in range(int(which.max()) + 1)]
    parts = []
    for group in groups:
        made = [made_design(brief, row) for row in values[group]]
        parts.append(judge_alike(made[0].brief, made))
    back = np.argsort(np.concatenate(groups), kind="stable")
    names = parts[0].objectives
    return Judged(
        parts[0].requirements,
        np.concatenate([part.margins for part in parts], axis=1)[:, back],
        {name: np.concatenate([part.objectives[name] for part in parts])[back] for name in names},
    )


def judge_alike(brief: Brief, made: list[Made]) -> Judged:
    """Judge designs that stand in one and the same brief, but for their ballast."""
    problem, designs = batch(brief, made)
    requirements: list[Requirement] = []
    rows: list[Floats] = []
    for stage in exact_stages(problem):
        requirements += stage.requirements
        rows.append(_margins(stage, designs))
    margins = np.clip(np.nan_to_num(np.concatenate(rows), nan=-1.0), -1.0, LARGEST)
    counted = [i for i, r in enumerate(requirements) if not r.is_total]
    found = objective_values(problem, designs, margins[counted].min(axis=0))
    found["worst-response"] = 1.0 / np.maximum(1.0 + response_margin(tuple(requirements), margins), 1e-12)
    found["stiffness"] = _sums(problem, made, "stiffness")
    found["damping"] = _sums(problem, made, "damping")
    found["absorber-mass"] = np.full(len(made), absorber_mass(brief))
    return Judged(tuple(requirements), margins, found)


def response_margin(requirements: tuple[Requirement, ...], margins: Floats) -> Floats:
    """Least margin (N,) of the limits on responses to the forcing, statics, modes and totals left out."""
    from detune.brief.allowable.base import BandAllowable, HarmonicAllowable

    forms = (HarmonicAllowable, BandAllowable)
    rows = [i for i, r in enumerate(requirements) if isinstance(r.allowable, forms)]
    return np.asarray(margins[rows].min(axis=0))


def absorber_mass(brief: Brief) -> float:
    """Mass in kg of the bodies whose mass is an unknown."""
    named = {unknown.body for unknown in sizing_of(brief).unknown if unknown.kind == "absorber-mass"}
    return sum(mass_properties(body).mass for body in brief.bodies if body.name in named)


def _sums(problem: Problem, made: list[Made], what: str) -> Floats:
    """Axial dynamic stiffness N/m, or damping (N s/m where viscous, else the loss factor), summed over the parts."""
    pieces = [
        sum(station.parallel for station in problem.model.stations if station.group == index)
        for index in range(len(problem.model.groups))
    ]
    rows = []
    for each in made:
        total = 0.0
        for count, mount in zip(pieces, each.design.mounts, strict=True):
            if what == "stiffness":
                total += count * mount.stiffness_dynamic[2]
            elif mount.viscous[2]:
                total += count * mount.viscous[2]
            else:
                total += mount.loss_factor[2]
        rows.append(total)
    return np.array(rows)


def batch(brief: Brief, made: list[Made]) -> tuple[Problem, Designs]:
    """The problem over the parts of many designs of one brief, and the designs in it, in order."""
    groups = range(len(brief.groups))
    mounts = tuple(tuple(each.design.mounts[g] for each in made) for g in groups)
    ballast = np.array([each.design.ballast for each in made])
    steps, index = np.unique(ballast, return_inverse=True)
    changed = brief
    if brief.ballast is not None:
        changed = brief.model_copy(
            update={"ballast": brief.ballast.model_copy(update={"steps": tuple(steps.tolist())})}
        )
    problem = with_parts(changed, mounts)
    number = np.arange(len(made), dtype=np.intp)
    part = np.repeat(number[:, None], len(brief.groups), axis=1)
    step = index.astype(np.intp) if brief.ballast is not None else np.zeros(len(made), dtype=np.intp)
    return problem, Designs(part, step)


def exact_stages(problem: Problem) -> tuple[Stage, ...]:
    """One exact stage for each set of requirements, the bounds left out."""
    chosen: dict[tuple[Requirement, ...], Stage] = {}
    for stage in stages(problem):
        if not stage.bound:
            chosen[stage.requirements] = stage
    return tuple(chosen.values())


def _margins(stage: Stage, designs: Designs) -> Floats:
    numbers = np.arange(designs.count)
    blocks = [designs.take(numbers[i : i + stage.size]) for i in range(0, designs.count, stage.size)]
    return np.concatenate([stage.margins(block) for block in blocks], axis=1)


def unknown_titles(brief: Brief) -> tuple[str, ...]:
    """The unknowns in words."""
    return tuple(unknown.title for unknown in sizing_of(brief).unknown)


def static_loads(made: Made) -> tuple[tuple[str, float], ...]:
    """Group and static axial load (N, compression positive) of one part at every station of a design."""
    static = DirectStatic(DirectMachine(made.brief, made.design))
    return tuple((s.group, float(-static.station_load(s.name)[0][2])) for s in made.brief.stations)


def margins_of(
    brief: Brief, values: Floats, wanted: tuple[Requirement, ...]
) -> tuple[tuple[Requirement, ...], Floats]:
    """Some requirements and their margins (R, N) at points `values` (N, u), as `judge` finds them."""
    columns: list[Floats] = []
    told: list[Requirement] = []
    for row in values if changes_brief(brief) else values[None]:
        made = [made_design(brief, each) for each in np.atleast_2d(row)]
        problem, designs = batch(made[0].brief, made)
        told, rows = [], []
        for stage in exact_stages(problem):
            kept = [i for i, r in enumerate(stage.requirements) if r in wanted]
            if kept:
                told += [stage.requirements[i] for i in kept]
                rows.append(_margins(stage, designs)[kept])
        columns.append(np.concatenate(rows))
    margins = np.nan_to_num(np.concatenate(columns, axis=1), nan=-1.0)
    return tuple(told), np.clip(margins, -1.0, LARGEST)
