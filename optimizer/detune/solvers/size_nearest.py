"""The way back to real parts: those nearest the ideal by what the requirements feel, then judged exactly.

Round the ideal point the margins m_i are linear in the logarithms of stiffness and damping of each group's part:
m_i + g_i . d for a part that lies d away. What counts as distance is the shortfall this predicts,
sqrt(sum_i max(0, -(m_i + g_i . d))^2), and only among parts of equal shortfall the plain change of the margins. The
first ones are evaluated exactly with all requirements, and the best of those by the assessor.
"""

from __future__ import annotations

import itertools
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
from detune.solvers.size_batch import batch, exact_stages, response_margin, static_loads

Floats = NDArray[np.float64]
# Rank, predicted shortfall, part of each group, ballast step.
_Listed = tuple[float, float, tuple[int, ...], int]
STEP = 1e-3
LEAST_LOSS = 1e-3
SHORT_LIST = 300
EACH = 40
LARGEST_MARGIN = 10.0
# Parts that stay on the feasible side are ranked by how far they move the margins, with this weight.
MOVED = 1e-3


@dataclass(frozen=True)
class NearDesign:
    """One real design near the ideal: its rank, the predicted shortfall of its margins, and its assessment."""

    assessment: Assessment
    distance: float
    predicted: float


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
    brief: Brief, ideals: list[Floats], problem: Problem, goal: str, sense: float, shown: int = 4
) -> Nearest:
    """Nearest real designs of the study's own `problem` to the points `ideals`, each (u,), best ideal first.

    Every ideal (the best of each branch, points of the front) has an equal share of the short list.
    """
    merged: dict[tuple[tuple[int, ...], int], _Listed] = {}
    lists = [_short_list(brief, values, problem) for values in ideals]
    for place in range(max(len(each) for each in lists)):
        for each in lists:
            if place < len(each) and len(merged) < SHORT_LIST:
                merged.setdefault((each[place][2], each[place][3]), each[place])
    listed = list(merged.values())
    designs = Designs(
        np.array([item[2] for item in listed], dtype=np.intp).reshape(len(listed), -1),
        np.array([item[3] for item in listed], dtype=np.intp),
    )
    return _judged(brief, problem, designs, listed, goal, sense, shown)


def _short_list(brief: Brief, values: Floats, problem: Problem) -> list[_Listed]:
    """Real designs by their predicted shortfall from one ideal, the least first."""
    ideal = made_design(brief, values)
    margins, slope, offsets = sensitivities(ideal)
    loads = static_loads(ideal)
    ranked = []
    for group, mounts in enumerate(problem.candidates):
        name = brief.groups[group]
        carried = [load for group_name, load in loads if group_name == name]
        away = [offsets.away(group, mount) for mount in mounts]
        moved = slope[group] @ np.array(away).T
        short = _shortfall(margins[:, None] + moved) + _overload(mounts, carried)
        order = np.argsort(short + MOVED * np.linalg.norm(moved, axis=0), kind="stable")[:EACH]
        ranked.append([(int(k), moved[:, k], _overload((mounts[k],), carried)[0]) for k in order])
    steps = problem.model.ballast_mass
    listed = []
    for chosen in itertools.islice(itertools.product(*ranked), 200_000):
        shift = margins + sum(each[1] for each in chosen)
        over = sum(each[2] for each in chosen)
        for step, kilograms in enumerate(steps):
            there = shift + offsets.ballast * (kilograms - ideal.design.ballast)
            short = float(_shortfall(there[:, None])[0]) + over
            tie = MOVED * float(np.linalg.norm(there - margins))
            listed.append((short + tie, short, tuple(each[0] for each in chosen), step))
    listed.sort(key=lambda item: (item[0], item[2], item[3]))
    return listed[:SHORT_LIST]


def _judged(
    brief: Brief,
    problem: Problem,
    designs: Designs,
    listed: list[_Listed],
    goal: str,
    sense: float,
    shown: int,
) -> Nearest:
    requirements, margins = exact_margins(problem, designs)
    least = margins.min(axis=0)
    values = objective_values(problem, designs, least)
    values["worst-response"] = 1.0 / np.maximum(1.0 + response_margin(requirements, margins), 1e-12)
    if goal not in values:
        values[goal] = np.array(
            [_total(problem.design(designs, k), brief, goal) for k in range(designs.count)]
        )
    # Rounding of two ways to the same number must not drop a design that stands on its limit.
    met = least >= -1e-6
    order = sorted(
        range(designs.count), key=lambda k: (not met[k], sense * values[goal][k] if met[k] else -least[k])
    )
    found: list[NearDesign] = []
    for k in order[: 2 * shown]:
        judged = assess(brief, problem.design(designs, k))
        if judged.meets or not met.any():
            found.append(NearDesign(judged, listed[k][0], listed[k][1]))
        if len(found) == shown:
            break
    return Nearest(tuple(found), designs.count, problem.count, int(met.sum()))


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
    total = 0.0
    for station in brief.stations:
        mount = design.mounts[design.groups.index(station.group)]
        total += station.parallel * (mount.stiffness_dynamic[2] if goal == "stiffness" else mount.viscous[2])
    return total


def _shortfall(margins: Floats) -> Floats:
    return np.asarray(np.sqrt(np.sum(np.minimum(margins, 0.0) ** 2, axis=0)))


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
