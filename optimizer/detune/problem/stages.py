"""The stages a batch of designs goes through, cheap ones first, and the margins each stage gives."""

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import DesignAllowable, HarmonicAllowable, ModeAllowable, StaticAllowable
from detune.brief.allowable.separation import least_separation
from detune.brief.allowable.stability import Stability
from detune.brief.allowable.views import DesignView
from detune.problem.build import BandRequirements, HarmonicRequirements, Problem
from detune.problem.requirement import Requirement
from detune.response.absorbers import added_mass
from detune.response.amplitude import values_at_own_amplitude, worse_of_two_amplitudes
from detune.response.assemble import Dynamic, dynamic_matrices
from detune.response.bands import band_ratios
from detune.response.designs import Designs, part_numbers, total_cost
from detune.response.evaluate import TWO_PI, family_amplitude, response_values
from detune.response.margin import upper_margin, window_margin
from detune.response.modes import mode_batch
from detune.response.views_static import static_batch

Floats = NDArray[np.float64]
SCREEN_SPEEDS = 7


@dataclass(frozen=True)
class Stage:
    """One stage: requirements and their margins (R, D). A `bound` stage gives upper bounds of the margins.

    A bound stage samples a few speeds: a design it excludes is rightly excluded, one it keeps is not
    yet decided. `size` is how many designs are best handled at once.
    """

    name: str
    requirements: tuple[Requirement, ...]
    margins: Callable[[Designs], Floats]
    bound: bool
    size: int


def stages(problem: Problem) -> tuple[Stage, ...]:
    """Return the stages of a problem in the order of the work they take."""
    result: list[Stage] = []
    if problem.totals:
        result.append(Stage("totals", problem.totals, lambda d: _totals(problem, d), False, 100_000))
    # Toppling takes an eigenvalue problem a design, so it waits until the loads have been looked at.
    standing = tuple(r for r in problem.statics if isinstance(r.allowable, Stability))
    loads = tuple(r for r in problem.statics if r not in standing)
    if loads:
        result.append(Stage("statics", loads, lambda d: _statics(problem, d, loads), False, 20_000))
    if standing:
        result.append(Stage("stability", standing, lambda d: _statics(problem, d, standing), False, 20_000))
    if problem.modes:
        result.append(Stage("separation", problem.modes, lambda d: _modes(problem, d), False, 20_000))
    # Where parts follow the amplitude, a few speeds or a part of the forcing bound nothing.
    steady = [group for group in problem.harmonics if group.driving is None]
    result += [_screen(group) for group in steady]
    result += [_response(group, slow_parts=False) for group in steady if group.rows.has_slow_parts]
    for group in problem.harmonics:
        result.append(_response(group, slow_parts=True))
    result += [_banded(group) for group in problem.bands]
    result += [
        Stage("speeds not to dwell at", (each.requirement,), each.margins, False, 100)
        for each in problem.dwell
    ]
    return tuple(result)


def objective_values(problem: Problem, designs: Designs, least_margin: Floats) -> dict[str, Floats]:
    """Return every objective (D,) of a batch whose least margins are known."""
    separation = np.full(designs.count, np.inf)
    for each in problem.states:
        dynamic = dynamic_matrices(each.model, designs)
        view = mode_batch(dynamic).view(dynamic, each.intervals)
        separation = np.minimum(separation, least_separation(view, problem.exempt_amplification))
    for dwell in problem.dwell:
        separation = np.minimum(separation, dwell.separations(designs, problem.exempt_amplification))
    return {
        "cost": total_cost(problem.model, designs),
        "separation": separation,
        "least-margin": least_margin,
        "added-mass": added_mass(problem.model, designs),
        "part-numbers": part_numbers(problem.model, designs),
    }


def _totals(problem: Problem, designs: Designs) -> Floats:
    view = DesignView(
        total_cost(problem.model, designs),
        added_mass(problem.model, designs),
        part_numbers(problem.model, designs),
    )
    rows = []
    for requirement in problem.totals:
        assert isinstance(requirement.allowable, DesignAllowable)
        limit = np.array(requirement.allowable.upper_limit())
        rows.append(upper_margin(requirement.allowable.value(view), limit))
    return np.stack(rows)


def _statics(problem: Problem, designs: Designs, requirements: tuple[Requirement, ...]) -> Floats:
    first = problem.states[0].reading
    views = {
        each.state: static_batch(each.model, designs) for each in problem.states if each.reading == first
    }
    rows = []
    for requirement in requirements:
        assert isinstance(requirement.allowable, StaticAllowable)
        view = views[requirement.state]
        lower, upper = requirement.allowable.bounds(view, requirement.place)
        rows.append(window_margin(requirement.allowable.value(view, requirement.place), lower, upper))
    return np.stack(rows)


def _modes(problem: Problem, designs: Designs) -> Floats:
    views = {}
    for each in problem.states:
        dynamic = dynamic_matrices(each.model, designs)
        views[each.state, each.reading] = mode_batch(dynamic).view(dynamic, each.intervals)
    rows = []
    for requirement in problem.modes:
        assert isinstance(requirement.allowable, ModeAllowable)
        view = views[requirement.state, requirement.reading]
        limits = requirement.allowable.lower_limit(), requirement.allowable.upper_limit()
        lower, upper = (None if limit is None else np.array(limit) for limit in limits)
        rows.append(window_margin(requirement.allowable.value(view), lower, upper))
    return np.stack(rows)


def _screen(group: HarmonicRequirements) -> Stage:
    """Sample a few speeds of each family: no supremum lies below a sample."""

    def margins(designs: Designs) -> Floats:
        dynamic = dynamic_matrices(group.model, designs)
        sampled = np.zeros((len(group.rows.pairs), designs.count))
        for family in group.rows.families:
            speed = TWO_PI * np.linspace(
                family.low, family.high, SCREEN_SPEEDS if family.high > family.low else 1
            )
            speeds = np.broadcast_to(speed, (designs.count, len(speed)))
            value = family_amplitude(group.model, designs, dynamic, group.rows, family, speeds)
            sampled = np.maximum(sampled, value.max(axis=-1))
        return _harmonic_margins(group, designs, np.where(dynamic.topples, np.inf, sampled))

    return Stage("response at sampled speeds", group.requirements, margins, True, 2_000)


def _response(group: HarmonicRequirements, slow_parts: bool) -> Stage:
    def margins(designs: Designs) -> Floats:
        dynamic = dynamic_matrices(group.model, designs)
        if group.driving is not None:
            found = values_at_own_amplitude(group.model, designs, dynamic, group.rows, group.driving)
        else:
            modal = mode_batch(dynamic)
            found = response_values(group.model, designs, dynamic, modal, group.rows, slow_parts)
        return _harmonic_margins(group, designs, np.where(dynamic.topples, np.inf, found.value))

    name = "response over the whole range" if slow_parts else "response without records and passages"
    return Stage(name, group.requirements, margins, not slow_parts, 500 if group.driving is None else 100)


def _banded(group: BandRequirements) -> Stage:
    def margins(designs: Designs) -> Floats:
        dynamic = dynamic_matrices(group.model, designs)

        def ratios(at: Dynamic) -> Floats:
            return band_ratios(group.model, designs, at, mode_batch(at), group.rows).value

        if group.driving is None:
            found = ratios(dynamic)
        else:
            found = worse_of_two_amplitudes(group.model, designs, dynamic, group.driving, ratios)
        return upper_margin(np.where(dynamic.topples, np.inf, found), np.array(1.0))

    return Stage("response in one-third-octave bands", group.requirements, margins, False, 500)


def _harmonic_margins(group: HarmonicRequirements, designs: Designs, amplitude: Floats) -> Floats:
    static = static_batch(group.model, designs)
    rows = []
    for (allowable, place), value in zip(group.rows.pairs, amplitude, strict=True):
        assert isinstance(allowable, HarmonicAllowable)
        total = value + allowable.offset(static, place)
        rows.append(upper_margin(total, allowable.bound(static, place)))
    return np.stack(rows)
