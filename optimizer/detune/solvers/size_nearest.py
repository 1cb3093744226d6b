"""The way back to real parts: those nearest the ideal by what the requirements feel, then judged exactly.

Round the ideal point the margins m_i are linear in the logarithms of stiffness and damping of each group's part:
m_i + g_i . d for a part that lies d away. What counts as distance is the shortfall this predicts,
sqrt(sum_i max(0, -(m_i + g_i . d))^2), and only among parts of equal shortfall the plain change of the margins. One
half of the short list is the nearest designs, the other those predicted to meet every limit with the best objective.
The short list is evaluated exactly with all requirements, and the best of it by the assessor.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.ground.units import STANDARD_GRAVITY
from detune.parts.kinds.mount import Axes, Mount
from detune.problem.build import Problem
from detune.problem.requirement import Requirement
from detune.problem.stages import objective_values
from detune.response.assess import assess
from detune.response.assessment import Assessment
from detune.response.design import Design
from detune.response.designs import Designs
from detune.sizing.made_parts import Made, made_design
from detune.solvers.nearest_list import EACH, Listed, Options, best_of, listed_designs
from detune.solvers.size_batch import absorber_mass, batch, exact_stages, response_margin, static_loads

Floats = NDArray[np.float64]
STEP = 1e-3
LEAST_LOSS = 1e-3
SHORT_LIST = 300
LARGEST_MARGIN = 10.0
# How often the short list is drawn up again round the best real design.
RECENTRED = 4
# So many of the best real designs are assessed for each one that is shown.
LOOKED_AT = 3


@dataclass(frozen=True)
class NearDesign:
    """One real design near the ideal: its assessment, rank, the predicted shortfall of its margins, its objective."""

    assessment: Assessment
    distance: float
    predicted: float
    objective: float


@dataclass(frozen=True)
class Nearest:
    """Real designs that meet the brief, best objective first (or, where none does, the nearest ones).

    `looked_at` designs were evaluated exactly, of `designs` there are. `met` of them met every requirement.
    """

    designs: tuple[NearDesign, ...]
    looked_at: int
    of: int
    met: int


def nearest_parts(
    brief: Brief,
    ideals: list[Floats],
    problem: Problem,
    goal: str,
    sense: float,
    shown: int = 4,
    wanted: Callable[[Design], bool] = lambda design: True,
) -> Nearest:
    """Nearest real designs of the study's own `problem` to the points `ideals`, each (u,), best ideal first.

    Every ideal (the best of each branch, points of the front) has an equal share of the short list. Then the margins
    are taken as linear round the best real design so far, and so on while that finds a better one. Designs that are
    `wanted`, such as those that hold over the scatter, stand before the others that meet the brief.
    """
    known: list[_Evaluated] = []
    seen: set[tuple[tuple[int, ...], int]] = set()
    centres = [made_design(brief, values) for values in ideals]
    best: _Evaluated | None = None
    for _ in range(1 + RECENTRED):
        lists = [_short_list(centre, problem, goal, sense) for centre in centres]
        merged: dict[tuple[tuple[int, ...], int], Listed] = {}
        for place in range(max(len(each) for each in lists)):
            for each in lists:
                if place < len(each) and len(merged) < SHORT_LIST:
                    merged.setdefault((each[place].parts, each[place].step), each[place])
        fresh = [item for key, item in merged.items() if key not in seen]
        seen.update(merged)
        known += _evaluated(brief, problem, fresh, goal) if fresh else []
        last, best = best, min(known, key=lambda each: each.order(sense))
        if best is last:
            break
        centres = [Made(brief, best.design)]
    known.sort(key=lambda each: each.order(sense))
    return _shown(brief, problem, known, shown, wanted)


def _short_list(ideal: Made, problem: Problem, goal: str, sense: float) -> list[Listed]:
    """Real designs round one design: the nearest, and by turns the best of those predicted to meet every limit."""
    brief = ideal.brief
    margins, slope, offsets = sensitivities(ideal)
    loads = static_loads(ideal)
    options = []
    for group, mounts in enumerate(problem.candidates):
        name = brief.groups[group]
        carried = [load for group_name, load in loads if group_name == name]
        away = np.array([offsets.away(group, mount) for mount in mounts])
        pieces = sum(s.parallel for s in brief.every_station if s.group == name)
        value = sense * pieces * np.array([_share(mount, goal) for mount in mounts])
        every = Options(np.arange(len(mounts)), away @ slope[group].T, _overload(mounts, carried), value)
        options.append(best_of(margins, every, EACH))
    steps = np.asarray(problem.model.ballast_mass, dtype=float)
    price = {"cost": np.asarray(problem.model.ballast_cost, dtype=float), "added-mass": steps}.get(goal)
    options.append(
        Options(
            np.arange(len(steps)),
            np.outer(steps - ideal.design.ballast, offsets.ballast),
            np.zeros(len(steps)),
            np.zeros(len(steps)) if price is None else sense * price,
        )
    )
    return listed_designs(margins, options, SHORT_LIST)


def _share(mount: Mount, goal: str) -> float:
    """What one part adds to an objective that is a sum over parts; zero for others."""
    if goal == "cost":
        return mount.cost
    if goal == "stiffness":
        return mount.stiffness_dynamic[2]
    return (mount.viscous[2] or mount.loss_factor[2]) if goal == "damping" else 0.0


@dataclass(frozen=True)
class _Evaluated:
    """A real design of the short list, evaluated exactly: its least margin and objective."""

    listed: Listed
    design: Design
    least: float
    objective: float

    @property
    def met(self) -> bool:
        # Rounding of two ways to the same number must not drop a design that stands on its limit.
        return self.least >= -1e-6

    def order(self, sense: float) -> tuple[bool, float]:
        """By this the best comes first: what meets the brief by its objective, the rest by what it misses."""
        return (not self.met, sense * self.objective if self.met else -self.least)


def _evaluated(brief: Brief, problem: Problem, listed: list[Listed], goal: str) -> list[_Evaluated]:
    designs = Designs(
        np.array([item.parts for item in listed], dtype=np.intp).reshape(len(listed), -1),
        np.array([item.step for item in listed], dtype=np.intp),
    )
    requirements, margins = exact_margins(problem, designs)
    least = margins.min(axis=0)
    values = objective_values(problem, designs, least)
    values["worst-response"] = 1.0 / np.maximum(1.0 + response_margin(requirements, margins), 1e-12)
    named = [problem.design(designs, k) for k in range(designs.count)]
    if goal not in values:
        values[goal] = np.array([_total(design, brief, goal) for design in named])
    rows = zip(listed, named, least.tolist(), values[goal].tolist(), strict=True)
    return [_Evaluated(*row) for row in rows]


def _shown(
    brief: Brief, problem: Problem, known: list[_Evaluated], shown: int, wanted: Callable[[Design], bool]
) -> Nearest:
    """The best of what was evaluated, best first, as the assessor sees them."""
    met = sum(each.met for each in known)
    found: list[NearDesign] = []
    others: list[NearDesign] = []
    for each in known[: LOOKED_AT * shown]:
        judged = assess(brief, each.design)
        near = NearDesign(judged, each.listed.rank, each.listed.short, each.objective)
        if judged.meets and wanted(each.design):
            found.append(near)
        elif judged.meets or not met:
            others.append(near)
        if len(found) == shown or (not met and len(others) == shown):
            break
    return Nearest(tuple([*found, *others][:shown]), len(known), problem.count, met)


def exact_margins(problem: Problem, designs: Designs) -> tuple[tuple[Requirement, ...], Floats]:
    """All requirements and their margins (R, D) of a batch of real designs."""
    requirements: list[Requirement] = []
    rows = []
    numbers = np.arange(designs.count)
    for stage in exact_stages(problem):
        requirements += stage.requirements
        blocks = [designs.take(numbers[i : i + stage.size]) for i in range(0, designs.count, stage.size)]
        rows.append(np.concatenate([stage.margins(block) for block in blocks], axis=1))
    return tuple(requirements), np.nan_to_num(np.concatenate(rows), nan=-1.0)


def _total(design: Design, brief: Brief, goal: str) -> float:
    """Sum of stiffness or damping over the parts, as `size_batch` has it for made ones, or the absorbers' mass."""
    if goal == "absorber-mass":
        return absorber_mass(brief)
    total = 0.0
    for group, mount in zip(design.groups, design.mounts, strict=True):
        count = sum(s.parallel for s in brief.stations if s.group == group)
        # A loss factor is not summed over equal parts.
        total += (count if goal == "stiffness" or mount.viscous[2] else 1) * _share(mount, goal)
    return total


def _overload(mounts: tuple[Mount, ...], carried: list[float]) -> Floats:
    """How far (relative) the load lies outside each part's own range."""
    found = []
    for mount in mounts:
        over = max(max(load / mount.load_max - 1.0, 0.0) if mount.load_max > 0.0 else 1.0 for load in carried)
        under = max(max(mount.load_min / max(load, 1e-9) - 1.0, 0.0) for load in carried)
        found.append(over + under)
    return np.array(found)


@dataclass(frozen=True)
class Offsets:
    """How far a real part lies from the ideal one, in the coordinates of the sensitivities."""

    ideal: tuple[Mount, ...]
    omega: float
    ballast: Floats

    def away(self, group: int, mount: Mount) -> tuple[float, float, float]:
        """(ln axial stiffness, ln lateral stiffness, ln damping) of a part less those of the ideal one."""
        own, other = coordinates(self.ideal[group], self.omega), coordinates(mount, self.omega)
        return (other[0] - own[0], other[1] - own[1], other[2] - own[2])


def coordinates(mount: Mount, omega: float) -> tuple[float, float, float]:
    """Logarithms of axial and lateral dynamic stiffness and of the axial loss angle at omega (rad/s)."""
    axial, lateral = mount.stiffness_dynamic[2], mount.stiffness_dynamic[0] or 0.0
    if axial <= 0.0:
        return (-20.0, 0.0, 0.0)
    loss = max(mount.loss_factor[2] + mount.viscous[2] * omega / axial, LEAST_LOSS)
    return (
        float(np.log(axial)),
        float(np.log(lateral)) if lateral > 0.0 else 0.0,
        float(np.log(loss * axial)),
    )


def sensitivities(ideal: Made) -> tuple[Floats, Floats, Offsets]:
    """Margins (R,) at the ideal, their slopes (G, R, 3) in `coordinates`, and the offsets with the slope per kg."""
    brief, design = ideal.brief, ideal.design
    points = [design]
    for group in range(len(design.mounts)):
        points += [_changed(design, group, which) for which in range(3)]
    heavier = replace(design, ballast=design.ballast + 1e-2)
    if brief.ballast is not None:
        points.append(heavier)
    problem, designs = batch(brief, [Made(brief, each) for each in points])
    _, margins = exact_margins(problem, designs)
    margins = np.clip(margins, -1.0, LARGEST_MARGIN)
    base = margins[:, 0]
    groups = len(design.mounts)
    slopes = np.stack([(margins[:, 1 + 3 * g : 4 + 3 * g] - base[:, None]) / STEP for g in range(groups)])
    per_kg = (margins[:, -1] - base) / 1e-2 if brief.ballast is not None else np.zeros(len(base))
    omega = vertical_omega(ideal)
    return base, slopes, Offsets(design.mounts, omega, per_kg)


def vertical_omega(ideal: Made) -> float:
    """Angular frequency (rad/s) of the carried mass on all axial springs, at which dampings are compared."""
    total = stiffness = 0.0
    for station, (_, load) in zip(ideal.brief.stations, static_loads(ideal), strict=True):
        mount = ideal.design.mounts[ideal.design.groups.index(station.group)]
        total += station.parallel * abs(load)
        stiffness += station.parallel * mount.stiffness_dynamic[2]
    return float(np.sqrt(stiffness * STANDARD_GRAVITY / max(total, 1e-9)))


def _changed(design: Design, group: int, which: int) -> Design:
    mounts = list(design.mounts)
    mounts[group] = _nudged(mounts[group], which)
    return replace(design, mounts=tuple(mounts))


def _nudged(mount: Mount, which: int) -> Mount:
    """A part with one coordinate raised by STEP: axial stiffness, lateral stiffness, or damping of every axis."""
    factor = float(np.exp(STEP))
    if which == 2:

        def times(axes: Axes) -> Axes:
            return (_product(axes[0], factor), _product(axes[1], factor), factor * axes[2])

        return replace(mount, loss_factor=times(mount.loss_factor), viscous=times(mount.viscous))
    along, across = (factor, 1.0) if which == 0 else (1.0, factor)

    def scale(axes: Axes, up: float, side: float) -> Axes:
        return (_product(axes[0], side), _product(axes[1], side), up * axes[2])

    return replace(
        mount,
        stiffness_static=scale(mount.stiffness_static, along, across),
        stiffness_dynamic=scale(mount.stiffness_dynamic, along, across),
        # The loss force of a loss factor is its own coordinate: held while stiffness changes.
        loss_factor=scale(mount.loss_factor, 1.0 / along, 1.0 / across),
    )


def _product(value: float | None, factor: float) -> float | None:
    return None if value is None else value * factor
