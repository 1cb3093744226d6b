"""All requirements of one design as rows for the bounds: static ones, separations, responses, and what is left over."""

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import HarmonicAllowable
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.stability import Stability
from detune.problem.build import HarmonicRequirements, Problem, StateModel
from detune.problem.requirement import Requirement
from detune.proof.noise_data import NoiseRows
from detune.proof.scatter_data import LimitedRows, ScatterSystem
from detune.proof.static_rows import StaticLimits, static_values_at
from detune.response.designs import Designs
from detune.solvers.certify_statics import StaticRow, offset_row, static_limits, static_row
from detune.solvers.scatter_machine import NOTHING, ScatterMap, scatter_map, scatter_system, why_not_linear
from detune.solvers.scatter_rows import NotBounded, ObservedRow, limited_rows, noise_rows, observed_row

Floats = NDArray[np.float64]
NOT_KNOWN = "the bounds do not know this limit"
NOT_IN_TIME = "shock and passages through resonance are not bounded over the scatter"


@dataclass
class StaticGroup:
    """Static rows of one state and the requirement each belongs to."""

    each: StateModel
    rows: list[StaticRow] = field(default_factory=list)
    owner: list[Requirement] = field(default_factory=list)
    stability: list[Requirement] = field(default_factory=list)


@dataclass
class ResponseGroup:
    """Response rows of one group: limit (of the whole value), and the static row each depends on and how."""

    group: HarmonicRequirements
    each: StateModel
    system: ScatterSystem
    requirements: list[Requirement] = field(default_factory=list)
    observed: list[ObservedRow] = field(default_factory=list)
    limit: list[float] = field(default_factory=list)
    static: list[tuple[StaticRow | None, str]] = field(default_factory=list)

    @property
    def largest(self) -> bool:
        """Whether families are alternatives, of which the largest counts."""
        return self.group.rows.largest

    def families(self, limit: Floats, forcing: float) -> list[LimitedRows]:
        """The rows under every family, with limits (R,)."""
        return [
            limited_rows(self.group, self.observed, limit, family, forcing)
            for family in self.group.rows.families
        ]

    @property
    def parts(self) -> int:
        """How many independent parts add up: families, and all noise together."""
        return len(self.group.rows.families) + bool(self.group.rows.noises)

    def noise(self, limit: Floats, forcing: float) -> NoiseRows | None:
        """The rows under all noise with limits (R,), None without noise."""
        noises = self.group.rows.noises
        return noise_rows(self.group.model, noises, self.observed, limit, forcing) if noises else None


class DesignRows:
    """The rows of a design (part (G,), ballast step) under the scatter of the problem's brief."""

    def __init__(self, problem: Problem, part: NDArray[np.intp], step: int) -> None:
        self.problem, self.part, self.step = problem, np.asarray(part, dtype=np.intp), step
        self.designs = Designs(self.part[None], np.array([step]))
        self.design = problem.design(self.designs, 0)
        self.map: ScatterMap = scatter_map(problem.brief, self.design)
        self.unknown: list[tuple[Requirement, str]] = []
        self._known: set[int] = set()
        self._systems: dict[int, ScatterSystem | str] = {}

    def system(self, each: StateModel) -> ScatterSystem:
        """The machine in a state under scatter; raises NotBounded."""
        if id(each) not in self._systems:
            reason = why_not_linear(each, self.part)
            self._systems[id(each)] = (
                scatter_system(self.problem.brief, each, self.part, self.step, self.map)
                if reason is None
                else reason
            )
        found = self._systems[id(each)]
        if isinstance(found, str):
            raise NotBounded(found)
        return found

    def limits(self, each: StateModel, rows: list[StaticRow]) -> StaticLimits:
        """Static rows as arrays."""
        return static_limits(self.problem.brief, each, self.part, self.step, self.map, rows)

    def statics(self) -> list[StaticGroup]:
        """Static rows of every state."""
        first, out = self.problem.states[0].reading, []
        for each in self.problem.states:
            if each.reading != first:
                continue
            group = StaticGroup(each)
            for requirement in self.problem.statics:
                if requirement.state != each.state:
                    continue
                try:
                    reason = why_not_linear(each, self.part)
                    if reason is not None:
                        raise NotBounded(reason)
                    if isinstance(requirement.allowable, Stability):
                        group.stability.append(requirement)
                        self._known.add(id(requirement))
                        continue
                    more = static_row(each, self.part, self.map, requirement)
                except NotBounded as problem:
                    self.unknown.append((requirement, str(problem)))
                    continue
                self._known.add(id(requirement))
                group.rows += more
                group.owner += [requirement] * len(more)
            out.append(group)
        return out

    def separations(self) -> list[tuple[Requirement, StateModel, ScatterSystem]]:
        """Separation requirements with the machine of each; other limits on modes are left over."""
        out = []
        for requirement in self.problem.modes:
            each = next(
                s
                for s in self.problem.states
                if (s.state, s.reading) == (requirement.state, requirement.reading)
            )
            try:
                if not isinstance(requirement.allowable, Separation):
                    raise NotBounded("the bounds do not know this quantity of the modes")
                if requirement.allowable.exempt_amplification is not None:
                    raise NotBounded("modes are exempted by amplification")
                out.append((requirement, each, self.system(each)))
                self._known.add(id(requirement))
            except NotBounded as problem:
                self.unknown.append((requirement, str(problem)))
        return out

    def responses(self) -> list[ResponseGroup]:
        """Response rows of every group; band limits are left over."""
        out = [self._response(group) for group in self.problem.harmonics]
        for group in self.problem.bands:
            self.unknown += [(r, "band limits are not bounded over the scatter") for r in group.requirements]
        return [group for group in out if group is not None and group.requirements]

    def unasked(self) -> list[Requirement]:
        """Requirements of which neither the bounds nor `unknown` have heard, once all rows were asked for."""
        left = {id(requirement) for requirement, _ in self.unknown} | self._known
        return [r for r in self.problem.requirements if not r.is_total and id(r) not in left]

    def _response(self, group: HarmonicRequirements) -> ResponseGroup | None:
        rows = group.rows
        each = next(state for state in self.problem.states if state.model is group.model)
        try:
            if group.driving is not None:
                raise NotBounded("parts follow the amplitude")
            if rows.transients or rows.passages:
                raise NotBounded(NOT_IN_TIME)
            found = ResponseGroup(group, each, self.system(each))
        except NotBounded as problem:
            self.unknown += [(requirement, str(problem)) for requirement in group.requirements]
            return None
        for (allowable, place), requirement in zip(rows.pairs, group.requirements, strict=True):
            try:
                bound = self._plain_bound(each, allowable, place)
                if np.isinf(bound):
                    self._known.add(id(requirement))
                    continue
                unit = allowable.unit_load()
                moved = any(c != NOTHING for centre in self.map.centre for c in centre)
                if unit is not None and unit[0] == "force" and moved:
                    raise NotBounded("a unit force at a mass centre that scatters")
                row = observed_row(group.model, allowable, place, rows)
                static = offset_row(each, self.part, self.map, allowable, place)
            except NotBounded as problem:
                self.unknown.append((requirement, str(problem)))
                continue
            self._known.add(id(requirement))
            found.requirements.append(requirement)
            found.observed.append(row)
            found.limit.append(bound)
            found.static.append(static)
        return found

    def _plain_bound(self, each: StateModel, allowable: HarmonicAllowable, place: str) -> float:
        view = _PartValues(each, self.part)
        try:
            return float(allowable.bound(view, place)[0])  # type: ignore[arg-type]
        except _NeedsStatics:
            if allowable.kind != "uplift":
                raise NotBounded("its limit depends on the static equilibrium") from None
            # Uplift: its limit is the static compression, which `offset_row` supplies; free where the part may pull.
            return np.inf if bool(view.part_value(place, "pulls")[0] > 0.5) else 0.0

    def static_parts(self, group: ResponseGroup, points: Floats) -> tuple[Floats, Floats]:
        """What is added to each response row, and its limit, at points (N, V): each (N, R)."""
        adds = np.zeros((len(points), len(group.requirements)))
        limit = np.tile(np.array(group.limit), (len(points), 1))
        stated = [(index, row, how) for index, (row, how) in enumerate(group.static) if row is not None]
        if not stated:
            return adds, limit
        values = static_values_at(self.limits(group.each, [row for _, row, _ in stated]), points)
        for (index, _, how), value in zip(stated, values.T, strict=True):
            if how == "limits":
                limit[:, index] = np.maximum(value, 0.0)
            else:
                adds[:, index] = value
        return adds, limit


class _NeedsStatics(Exception):
    """A bound asked for more than the part's own figures."""


@dataclass(frozen=True)
class _PartValues:
    """A static view that knows the parts' figures alone."""

    each: StateModel
    part: NDArray[np.intp]
    count: int = 1

    def part_value(self, station: str, column: str) -> Floats:
        group = next(s.group for s in self.each.model.stations if s.name == station)
        values = getattr(self.each.model.groups[group].arrays, column)
        return np.asarray(values, dtype=float)[self.part[[group]]]

    def __getattr__(self, name: str) -> object:
        raise _NeedsStatics(name)
