"""The constraint builder: a brief and its catalogs become requirements over batches of designs."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from detune.brief.allowable.base import (
    Allowable,
    BandAllowable,
    DesignAllowable,
    HarmonicAllowable,
    ModeAllowable,
    StaticAllowable,
)
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.views import Places
from detune.brief.brief import Brief, applies, demanded, state_of
from detune.brief.condition import Condition
from detune.brief.cross_check import cross_check
from detune.brief.dwell import chosen_in, without_barred
from detune.brief.finding import Finding, faults_without_lines
from detune.ground.errors import BriefError
from detune.parts.assumed import group_assumed
from detune.parts.catalog import Catalog
from detune.parts.kinds.mount import Mount
from detune.physics.static import is_supported
from detune.problem.candidates import Dropped, find_candidates
from detune.problem.dwell import DwellRequirements, dwell_requirements
from detune.problem.notes import problem_notes
from detune.problem.requirement import Requirement
from detune.response.amplitude import deflection_pairs, works_by_amplitude
from detune.response.ballast import BallastStep
from detune.response.bands import BandRows, band_rows
from detune.response.condition_rows import condition_rows
from detune.response.damping_readings import readings_of
from detune.response.design import Design
from detune.response.designs import Designs, all_designs, design_count
from detune.response.evaluate import Rows
from detune.response.loads import steady_intervals, unit_families
from detune.response.model import Model, build_model
from detune.response.static_stiffness import static_stiffness


@dataclass(frozen=True)
class HarmonicRequirements:
    """Harmonic requirements of one condition that are evaluated together: rows and their requirements, in order.

    `driving`: the forcing of the condition, where it sets the amplitude at which parts work, else None.
    """

    rows: Rows
    requirements: tuple[Requirement, ...]
    model: Model
    driving: Rows | None = None


@dataclass(frozen=True)
class StateModel:
    """The machine in one state: its name (None as installed), model, and what steadily excites it there.

    `reading` says how damping of unknown kind is read in the model, None where every kind is known.
    """

    state: str | None
    model: Model
    places: Places
    intervals: tuple[tuple[float, float], ...]
    reading: str | None = None


@dataclass(frozen=True)
class BandRequirements:
    """Band limits of one condition that are evaluated together, as `HarmonicRequirements`."""

    rows: BandRows
    requirements: tuple[Requirement, ...]
    model: Model
    driving: Rows | None = None


@dataclass(frozen=True)
class Problem:
    """All a solver sees: the models, the requirements by the work they take, and what is traded.

    `states` holds the machine in every state that some condition is judged in, as installed first, and in each
    once for every reading of damping of unknown kind; what is at rest does not depend on the reading.
    """

    brief: Brief
    states: tuple[StateModel, ...]
    totals: tuple[Requirement, ...]
    statics: tuple[Requirement, ...]
    modes: tuple[Requirement, ...]
    harmonics: tuple[HarmonicRequirements, ...]
    bands: tuple[BandRequirements, ...]
    exempt_amplification: float | None
    dropped: tuple[Dropped, ...]
    assumed: tuple[str, ...]
    dwell: tuple[DwellRequirements, ...] = ()

    @property
    def model(self) -> Model:
        """The machine as installed."""
        return self.states[0].model

    @property
    def intervals(self) -> tuple[tuple[float, float], ...]:
        """The excitation intervals of all steady conditions, Hz."""
        return steady_intervals(self.brief)

    @property
    def count(self) -> int:
        """Number of designs."""
        return design_count(self.model)

    @property
    def requirements(self) -> tuple[Requirement, ...]:
        """Every requirement, in the order of the stages that judge them."""
        harmonic = tuple(r for group in self.harmonics for r in group.requirements)
        banded = tuple(r for group in self.bands for r in group.requirements)
        dwelling = tuple(each.requirement for each in self.dwell)
        return (*self.totals, *self.statics, *self.modes, *harmonic, *banded, *dwelling)

    @property
    def candidates(self) -> tuple[tuple[Mount, ...], ...]:
        """The parts each group may take."""
        return tuple(group.mounts for group in self.model.groups)

    def design(self, designs: Designs, index: int) -> Design:
        """Return design number `index` of a batch by name."""
        return Design(
            groups=self.brief.groups,
            mounts=tuple(
                group.mounts[part] for group, part in zip(self.model.groups, designs.part[index], strict=True)
            ),
            ballast=float(self.model.ballast_mass[designs.step[index]]),
            stack=_listed(self.model.ballast[designs.step[index]]),
        )


def _listed(step: BallastStep) -> BallastStep | None:
    return step if step.listed else None


def build(brief: Brief, catalogs: Mapping[str, Catalog]) -> Problem:
    """Return the problem of a brief. Raises BriefError with every fault the brief and catalogs show together."""
    findings = cross_check(brief)
    if findings:
        # Candidates are found by the names that have just been checked.
        raise BriefError(faults_without_lines(brief.file, findings))
    brief = without_barred(brief)
    if not brief.choices:
        expected = "a [[choice]] of parts for each group; a study that has none can be sized, not run"
        raise BriefError(faults_without_lines(brief.file, (Finding(("choice",), "", expected),)))
    candidates = find_candidates(brief, catalogs)
    if candidates.findings:
        raise BriefError(faults_without_lines(brief.file, candidates.findings))
    notes = tuple(str(group) for catalog in catalogs.values() for group in group_assumed(catalog.assumed))
    stated = [note for forcing in brief.forcing for note in forcing.assumed()]
    stated += [note for allowable in brief.allowables for note in allowable.assumed()]
    stated += () if brief.scatter is None else brief.scatter.assumed()
    notes = (*stated, *notes)
    return _problem(brief, candidates.mounts, candidates.dropped, notes, candidates.ballast)


def with_mounts(problem: Problem, mounts: tuple[tuple[Mount, ...], ...]) -> Problem:
    """Return the same requirements over other mounts, `mounts[g]` for group g."""
    return with_parts(problem.brief, mounts, problem.model.ballast)


def with_parts(
    brief: Brief, mounts: tuple[tuple[Mount, ...], ...], ballast: tuple[BallastStep, ...] | None = None
) -> Problem:
    """Return the requirements of a brief over any mounts, of a list or made to order, `mounts[g]` for group g.

    `ballast`: the steps it may take; None those that the brief states itself.
    """
    return _problem(brief, mounts, (), (), ballast)


def _problem(
    brief: Brief,
    mounts: tuple[tuple[Mount, ...], ...],
    dropped: tuple[Dropped, ...],
    catalog_notes: tuple[str, ...],
    ballast: tuple[BallastStep, ...] | None = None,
) -> Problem:
    states = _state_models(brief, mounts, ballast)
    allowables, demanded_notes = demanded(brief)
    model, places = states[0].model, states[0].places
    return Problem(
        brief=brief,
        states=states,
        totals=_expand(allowables, DesignAllowable, "design", places, None),
        statics=tuple(
            requirement
            for each in states
            if each.reading == states[0].reading
            for requirement in _expand(allowables, StaticAllowable, "at rest", each.places, each.state)
        ),
        modes=tuple(
            requirement
            for each in states
            for requirement in _expand(
                allowables, ModeAllowable, "steady conditions", each.places, each.state, each.reading
            )
        ),
        harmonics=tuple(
            group
            for condition in brief.conditions
            for each in states
            if each.state == condition.state
            for group in _harmonic(brief, each, condition, allowables)
        ),
        bands=tuple(
            group
            for condition in brief.conditions
            for each in states
            if each.state == condition.state
            for group in _banded(brief, each, condition, allowables)
        ),
        exempt_amplification=next(
            (a.exempt_amplification for a in allowables if isinstance(a, Separation)), None
        ),
        dropped=dropped,
        assumed=(*model.assumed, *demanded_notes, *problem_notes(brief, mounts), *catalog_notes),
        dwell=dwell_requirements(
            brief, tuple((each.state, each.model, each.places) for each in states), allowables
        ),
    )


def _state_models(
    brief: Brief, mounts: tuple[tuple[Mount, ...], ...], ballast: tuple[BallastStep, ...] | None
) -> tuple[StateModel, ...]:
    """Return the machine as installed and in every other state that a condition names, in every reading."""
    named = dict.fromkeys([None, *(condition.state for condition in brief.conditions)])
    readings = readings_of(mount for group in mounts for mount in group)
    models = []
    for name in named:
        for reading in readings:
            model = build_model(brief, mounts, state_of(brief, name), reading, ballast)
            _check_support(brief, model, name)
            held = [station for station in model.stations if station.parallel > 0]
            places = Places(
                tuple(model.points),
                tuple(station.name for station in held if not station.is_absorber),
                tuple(body.name for body in brief.bodies),
                tuple(absorber.name for absorber in brief.absorbers),
            )
            models.append(StateModel(name, model, places, steady_intervals(brief, name), reading))
    return tuple(models)


def _expand(
    allowables: tuple[Allowable, ...],
    form: type[Allowable],
    condition: str,
    places: Places,
    state: str | None,
    reading: str | None = None,
) -> tuple[Requirement, ...]:
    told = condition if state is None else f"{condition}, {state}"
    return tuple(
        Requirement(allowable, told, place, state, reading)
        for allowable in allowables
        if isinstance(allowable, form)
        for place in allowable.places(places)
    )


def _harmonic(
    brief: Brief, each: StateModel, condition: Condition, allowables: tuple[Allowable, ...]
) -> list[HarmonicRequirements]:
    """Return the groups of a condition: one under its forcing, and one for each unit load.

    None where the speeds not to dwell at are found for each design: those limits stand in `Problem.dwell`.
    """
    if chosen_in(brief, condition) is not None:
        return []
    forced: list[tuple[HarmonicAllowable, str]] = []
    groups: list[HarmonicRequirements] = []
    for allowable in allowables:
        if not isinstance(allowable, HarmonicAllowable) or not applies(allowable.conditions, condition.name):
            continue
        pairs = [(allowable, place) for place in allowable.places(each.places)]
        if allowable.unit_load() is None:
            forced += pairs
            continue
        families = unit_families(brief, each.model, condition, allowable)
        if families and pairs:
            groups.append(_group(brief, Rows(tuple(pairs), families, largest=True), condition, each))
    if forced:
        rows = condition_rows(brief, each.model, condition, tuple(forced))
        groups.insert(0, _group(brief, rows, condition, each))
    return groups


def _banded(
    brief: Brief, each: StateModel, condition: Condition, allowables: tuple[Allowable, ...]
) -> list[BandRequirements]:
    pairs = tuple(
        (allowable, place)
        for allowable in allowables
        if isinstance(allowable, BandAllowable) and applies(allowable.conditions, condition.name)
        for place in allowable.places(each.places)
    )
    if not pairs:
        return []
    requirements = tuple(
        Requirement(allowable, condition.name, place, each.state, each.reading) for allowable, place in pairs
    )
    rows = band_rows(brief, each.model, condition, pairs)
    return [BandRequirements(rows, requirements, each.model, _driving(brief, condition, each))]


def _driving(brief: Brief, condition: Condition, each: StateModel) -> Rows | None:
    if not works_by_amplitude(each.model):
        return None
    return condition_rows(brief, each.model, condition, deflection_pairs(each.model))


def _group(brief: Brief, rows: Rows, condition: Condition, each: StateModel) -> HarmonicRequirements:
    requirements = tuple(
        Requirement(allowable, condition.name, place, each.state, each.reading)
        for allowable, place in rows.pairs
    )
    return HarmonicRequirements(rows, requirements, each.model, _driving(brief, condition, each))


def _check_support(brief: Brief, model: Model, state: str | None) -> None:
    """Refuse a machine that its stations leave free to move: every design would share that fault."""
    if bool(np.all(is_supported(static_stiffness(model, all_designs(model, 0, 1))))):
        return
    free = ", ".join(dict.fromkeys(name for _, name in model.frame.names if name != "along"))
    finding = Finding(
        ("station",) if state is None else ("state",),
        f"{sum(s.parallel > 0 for s in model.stations if not s.is_absorber)} stations that leave a motion of "
        "the machine without stiffness",
        f"stations that hold every free direction ({free}); or fewer free directions",
    )
    raise BriefError(faults_without_lines(brief.file, (finding,)))
