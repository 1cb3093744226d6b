"""Every requirement and objective of a brief at one point of the unknowns, with slopes by adjoint where there are any.

Requirements without an adjoint (records, passages, bands, settling time, and whatever a new kind looks at that the
features do not hold) are differenced, in their own rows only; `Gradients.differenced` says which.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.added_mass import AddedMass
from detune.brief.allowable.base import BandAllowable, HarmonicAllowable
from detune.brief.allowable.cost import CostLimit
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.settling_time import SettlingTime
from detune.brief.allowable.stability import Stability
from detune.brief.brief import Brief
from detune.ground.units import STANDARD_GRAVITY
from detune.physics.modes import damped_poles
from detune.physics.unsupported import UnsupportedMachine
from detune.problem.build import Problem
from detune.problem.requirement import Requirement
from detune.sizing.made_parts import bounds, made_design, sizing_of
from detune.sizing.part_slopes import LOSS, PRICE, VISCOUS
from detune.solvers import gradient_rows as rows_of
from detune.solvers.gradient_mixture import ResponsePlan
from detune.solvers.gradient_modes import Modes, below, distances, modes
from detune.solvers.gradient_probe import NoMap
from detune.solvers.gradient_rows import NOTHING, Rows, StaticPlan, plain, together
from detune.solvers.gradient_settling import decay_rates
from detune.solvers.gradient_standing import least_share, without_gravity
from detune.solvers.gradient_state import SizedState, StateAt, sized_states, state_at
from detune.solvers.gradient_static import Rest, rest
from detune.solvers.size_batch import batch, margins_of

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
# Sides: for every state, how many modes lie below each of its excitation intervals.
Sides = tuple[tuple[int, ...], ...]
STEP = 1e-4
# Share by which a response may differ from the batch evaluation, whose suprema settle to 1e-4.
ALIKE = 1e-3
NARROWEST = 1e-9
# Separation of a mode that the brief exempts: beyond any.
EXEMPT = 1e3


@dataclass(frozen=True)
class Gradients:
    """What is needed to evaluate a brief with slopes; `differenced` are the requirements that have no adjoint.

    `reference` is a force (N) by which forces near zero are judged.
    """

    brief: Brief
    states: tuple[SizedState, ...]
    statics: tuple[tuple[int, tuple[StaticPlan, ...]], ...]
    responses: tuple[tuple[int, ResponsePlan], ...]
    modes: tuple[tuple[int, Requirement], ...]
    standings: tuple[tuple[int, Requirement], ...]
    totals: tuple[Requirement, ...]
    differenced: tuple[Requirement, ...]
    differenced_brief: Brief | None
    exempt: float | None
    reference: float


@dataclass(frozen=True)
class Point:
    """One point of the unknowns: rows of all requirements, objectives with slopes (u,), and each mode's separation.

    `apart` (k,) with slopes (k, u): separation of every mode from every interval, on the side it is held to.
    """

    rows: Rows
    objectives: dict[str, tuple[float, Floats]]
    apart: Floats
    apart_slopes: Floats


def prepared(brief: Brief) -> Gradients:
    """What is to be known once of a brief before its slopes are asked for."""
    low, high = bounds(brief)
    middle = 0.5 * (low + high)
    made = made_design(brief, middle)
    problem, _ = batch(made.brief, [made])
    states = sized_states(brief)
    number = {id(each.model): k for k, each in enumerate(problem.states)}
    left: list[Requirement] = [r for group in problem.bands for r in group.requirements]
    statics, standings = _statics(problem, left)
    responses = []
    for group in problem.harmonics:
        where = number[id(group.model)]
        plan, rest_of = rows_of.response_plan(group, states[where].model)
        left += rest_of
        if plan is not None:
            responses.append((where, plan))
    of_modes = []
    for requirement in problem.modes:
        if not isinstance(requirement.allowable, Separation | SettlingTime):
            left.append(requirement)
            continue
        named = [(s.state, s.reading) for s in problem.states]
        of_modes.append((named.index((requirement.state, requirement.reading)), requirement))
    totals = [r for r in problem.totals if isinstance(r.allowable, CostLimit | AddedMass)]
    left += [r for r in problem.totals if r not in totals]
    kept = tuple(a for a in brief.allowables if any(r.allowable == a for r in left))
    weight = float(np.abs(states[0].model.weight[0]).max())
    found = Gradients(
        brief, states, statics, tuple(responses), tuple(of_modes), standings, tuple(totals), tuple(left),
        brief.model_copy(update={"allowables": kept}) if left else None, problem.exempt_amplification,
        max(weight, STANDARD_GRAVITY) / max(len(brief.stations), 1),
    )  # fmt: skip
    return _trusted(found, middle)


def _trusted(gradients: Gradients, values: Floats) -> Gradients:
    """Difference every response whose rows do not say what the batch evaluation says at these values.

    None is known; should the two ever part company, a search goes by slow slopes and not by wrong ones.
    """
    rows = evaluated(gradients, values, sides(gradients, values)).rows
    largest: dict[Requirement, float] = {}
    for requirement, log in zip(rows.requirement, rows.log.tolist(), strict=True):
        if requirement is not None and log == log:
            largest[requirement] = max(log, largest.get(requirement, log))
    told, margins = margins_of(gradients.brief, values[None], tuple(largest))
    wrong = []
    for requirement, margin in zip(told, margins[:, 0].tolist(), strict=True):
        ratio = np.exp(largest[requirement])
        # What lies far below its limit is followed at samples alone.
        if abs(ratio * (1.0 + margin) - 1.0) > ALIKE and ratio > rows_of.NEAR and margin > -1.0:
            wrong.append(requirement)
    if not wrong:
        return gradients
    plans = []
    for where, plan in gradients.responses:
        kept = rows_of.without(plan, wrong)
        plans += [] if kept is None else [(where, kept)]
    left = (*gradients.differenced, *wrong)
    kept_allowables = tuple(a for a in gradients.brief.allowables if any(r.allowable == a for r in left))
    return replace(
        gradients,
        responses=tuple(plans),
        differenced=left,
        differenced_brief=gradients.brief.model_copy(update={"allowables": kept_allowables}),
    )


def _statics(
    problem: Problem, left: list[Requirement]
) -> tuple[tuple[tuple[int, tuple[StaticPlan, ...]], ...], tuple[tuple[int, Requirement], ...]]:
    """Plans of the static requirements by state, and those against toppling; those without one are put to `left`."""
    found: dict[int, list[StaticPlan]] = {}
    standings: list[tuple[int, Requirement]] = []
    names = [each.state for each in problem.states]
    for requirement in problem.statics:
        where = names.index(requirement.state)
        if isinstance(requirement.allowable, Stability):
            standings.append((where, requirement))
            continue
        try:
            plan = rows_of.static_plan(requirement, problem.states[where].model)
        except NoMap:
            left.append(requirement)
            continue
        found.setdefault(where, []).append(plan)
    return tuple((where, tuple(plans)) for where, plans in found.items()), tuple(standings)


def sides(gradients: Gradients, values: Floats) -> Sides:
    """On which side of each excitation interval every mode lies at these values."""
    found = []
    for sized in gradients.states:
        told = modes(_moving(state_at(sized, values))[0])
        found.append(tuple(below(told, interval) for interval in sized.state.intervals))
    return tuple(found)


def _moving(at: StateAt) -> tuple[StateAt, Rows | None]:
    """The state as it moves, gravity left out where it would topple on its dynamic stiffness; the row against that."""
    if not at.sized.model.with_gravity_stiffness:
        return at, None
    least, slopes = least_share(at, static=False)
    row = plain(np.array([1.0 + least]), slopes[None], (None,))
    return (without_gravity(at) if 1.0 + least <= 0.0 else at), row


def evaluated(gradients: Gradients, values: Floats, held: Sides, whole: bool = False) -> Point:
    """Requirements and objectives at the values (u,), every mode on the side that `held` says.

    `whole` asks for the slopes of limits too that are far from being reached (`gradient_rows.FAR`).
    Raises numpy.linalg.LinAlgError where the machine is not held at all.
    """
    parts: list[Rows] = []
    apart: list[tuple[Floats, Floats]] = []
    places: list[tuple[StateAt, StateAt, Rest, Modes]] = []
    for sized, counts in zip(gradients.states, held, strict=True):
        at = state_at(sized, values)
        moving, row = _moving(at)
        parts += [] if row is None else [row]
        told = modes(moving)
        places.append((at, moving, rest(at), told))
        apart.append(_apart(gradients, sized, told, counts))
    for where, plans in gradients.statics:
        parts.append(rows_of.static_rows(plans, places[where][2], gradients.reference))
    for where, requirement in gradients.standings:
        assert isinstance(requirement.allowable, Stability)
        least, by_least = least_share(places[where][0], static=True)
        limit = requirement.allowable.limit
        parts.append(plain(np.array([1.0 + limit * least]), limit * by_least[None], (requirement,)))
    for where, requirement in gradients.modes:
        if isinstance(requirement.allowable, SettlingTime):
            parts.append(_settling(requirement, requirement.allowable, places[where][1]))
            continue
        assert isinstance(requirement.allowable, Separation)
        distance, by = apart[where]
        parts.append(plain(distance - requirement.allowable.limit, by, (requirement,) * len(distance)))
    for where, plan in gradients.responses:
        _, moving, still, told = places[where]
        poles = _poles(moving, told)
        parts.append(rows_of.response_rows(plan, moving, still, poles, gradients.reference, whole))
    objectives = _objectives(gradients, places[0][0], values)
    parts.append(_totals(gradients, objectives))
    if gradients.differenced:
        parts.append(_differenced(gradients, values))
    distances_found = np.concatenate([np.zeros(0), *(d for d, _ in apart)])
    by_unknown = np.concatenate([np.zeros((0, len(values))), *(s for _, s in apart)])
    return Point(together(parts, len(values)), objectives, distances_found, by_unknown)


def _apart(
    gradients: Gradients, sized: SizedState, found: Modes, counts: tuple[int, ...]
) -> tuple[Floats, Floats]:
    """Separation (k,) of every mode from every interval of a state, and slopes; exempt modes lie far off."""
    with np.errstate(divide="ignore"):
        exempt = 1.0 / found.loss_factor < (gradients.exempt or 0.0)
    value, slopes = [np.zeros(0)], [np.zeros((0, found.slopes.shape[1]))]
    for interval, count in zip(sized.state.intervals, counts, strict=True):
        each, by = distances(found, interval, count)
        value.append(np.where(exempt, EXEMPT, each))
        slopes.append(np.where(exempt[:, None], 0.0, by))
    return np.concatenate(value), np.concatenate(slopes)


def _settling(requirement: Requirement, allowable: SettlingTime, at: StateAt) -> Rows:
    """One row for each pole: how long its motion takes to decay, against the limit."""
    decay, by = decay_rates(at)
    least = np.log(1.0 / allowable.to) / allowable.limit
    safe = np.maximum(decay, 1e-12 * least)
    value, slopes = rows_of.smooth(least / safe, -(least / safe**2)[:, None] * by)
    return plain(value, slopes, (requirement,) * len(value))


def _poles(at: StateAt, found: Modes) -> Complexes:
    """Damped poles (m,) rad/s round which responses peak."""
    if at.viscous.any():
        poles = damped_poles(at.mass, at.viscous, at.hysteretic, at.stiffness)
    else:
        poles = 2.0 * np.pi * found.frequency * (1j - 0.5 * np.minimum(found.loss_factor, 2.0))
    width = np.maximum(-poles.real, NARROWEST * np.maximum(np.abs(poles), NARROWEST))
    return np.asarray(1j * poles.imag - width)


def _objectives(gradients: Gradients, at: StateAt, values: Floats) -> dict[str, tuple[float, Floats]]:
    """Cost, added mass, and the sums of stiffness and damping, each with its slopes (u,)."""
    brief, count = gradients.brief, len(values)
    pieces = np.array([float(law.pieces) for law in gradients.states[0].laws])
    cost, by_cost = float(pieces @ at.parts[:, PRICE]), pieces @ at.part_slopes[:, PRICE]
    added, by_added = 0.0, np.zeros(count)
    for place, unknown in enumerate(sizing_of(brief).unknown):
        if unknown.kind == "ballast":
            added, by_added[place] = float(values[place]), 1.0
    if brief.ballast is not None:
        cost, by_cost = (
            cost + brief.ballast.cost_per_kg * added,
            by_cost + brief.ballast.cost_per_kg * by_added,
        )
    absorbers, by_absorbers = 0.0, np.zeros(count)
    for place, unknown in enumerate(sizing_of(brief).unknown):
        if unknown.kind == "absorber-mass":
            absorbers, by_absorbers[place] = absorbers + float(values[place]), 1.0
    axial = at.parts[:, 2], at.part_slopes[:, 2]
    damping, by_damping = 0.0, np.zeros(count)
    for group, number in enumerate(pieces):
        viscous = at.parts[group, VISCOUS][2]
        place, share = (VISCOUS.stop - 1, number) if viscous else (LOSS, 1.0)
        damping += share * at.parts[group, place]
        by_damping += share * at.part_slopes[group, place]
    return {
        "cost": (cost, by_cost),
        "added-mass": (added, by_added),
        "absorber-mass": (absorbers, by_absorbers),
        "stiffness": (float(pieces @ axial[0]), pieces @ axial[1]),
        "damping": (float(damping), by_damping),
    }


def _totals(gradients: Gradients, objectives: dict[str, tuple[float, Floats]]) -> Rows:
    """Rows of limits on cost and added mass."""
    values, slopes = [], []
    for requirement in gradients.totals:
        allowable = requirement.allowable
        assert isinstance(allowable, CostLimit | AddedMass)
        total, by = objectives["cost" if isinstance(allowable, CostLimit) else "added-mass"]
        values.append(1.0 - total / allowable.limit)
        slopes.append(-by / allowable.limit)
    unknowns = len(next(iter(objectives.values()))[1])
    return plain(np.array(values), np.array(slopes).reshape(-1, unknowns), gradients.totals)


def _differenced(gradients: Gradients, values: Floats) -> Rows:
    """Rows of the requirements without an adjoint: one batch of the point and its neighbours."""
    brief = gradients.differenced_brief
    assert brief is not None
    low, high = bounds(brief)
    span = np.where(high > low, STEP * (high - low), STEP)
    step = np.where(values + span <= high, span, -span)
    told, margins = margins_of(
        brief, np.concatenate([values[None], values + np.diag(step)]), gradients.differenced
    )
    margin = np.minimum(margins, NOTHING)
    slopes = (margin[:, 1:] - margin[:, :1]) / step
    is_response = np.array([isinstance(r.allowable, HarmonicAllowable | BandAllowable) for r in told])
    passed = np.maximum(1.0 + margin[:, 0], 1e-9)
    log = np.where(is_response, -np.log(passed), np.nan)
    by_log = np.where(is_response[:, None], -slopes / passed[:, None], np.nan)
    return Rows(margin[:, 0], slopes, told, log, by_log, np.full(len(told), np.nan))


__all__ = ["Gradients", "Point", "Sides", "UnsupportedMachine", "evaluated", "prepared", "sides"]
