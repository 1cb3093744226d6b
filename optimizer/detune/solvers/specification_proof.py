"""Whether every part whose figures lie in a box meets the brief: a proof over the box and over whole ranges of speed.

The bounds are those of scatter (`certify`): statics, loads, separation, stability, tones and noise, what is static in
a response at its worst. The figures of a group's parts take the place of the scatter of a lot. Limits in
one-third-octave bands are rows of their own, one for each band and piece of speed.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import BandAllowable
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.stability import Stability
from detune.brief.scatter import PartScatter, Scatter
from detune.problem.build import Problem, StateModel
from detune.problem.requirement import Requirement
from detune.proof.combined_bisect import Sampler, decide_rows
from detune.proof.noise_values import noise_sampled
from detune.proof.scatter_data import ScatterSystem
from detune.proof.static_rows import StaticRowsDecision, decide_static_rows
from detune.sizing.made_parts import Made
from detune.solvers.certify_response import Part, Response
from detune.solvers.certify_statics import StaticRow, separation_worst, stability_worst
from detune.solvers.design_rows import DesignRows, ResponseGroup
from detune.solvers.scatter_machine import NOTHING, ScatterMap, Variable
from detune.solvers.scatter_rows import NotBounded
from detune.solvers.size_batch import batch
from detune.solvers.specification_bands import BandRow, band_rows_of
from detune.solvers.specification_figures import Figure, axes_of

Floats = NDArray[np.float64]
MAX_BOXES = 1200
# Boxes of the bisection over all questions together; with these used up nothing further is proven.
ALL_BOXES = 150_000
# What a box without width is widened by: the samplers of the proof want something that moves.
HAIR = 1e-9
# Bounds on static loads are told to this share.
NEAR = 2e-3


class _FigureRows(DesignRows):
    """The rows of a design whose variables are the figures of its parts, as factors of the design's own."""

    def __init__(
        self, problem: Problem, part: NDArray[np.intp], step: int, figures: tuple[Figure, ...]
    ) -> None:
        super().__init__(problem, part, step)
        self.figures = figures
        groups = problem.brief.groups
        index = {(f.group, f.what): number for number, f in enumerate(figures)}
        kinds = {"static": "static lot", "loss factor": "damping lot", "viscous": "damping lot"}
        variables = tuple(Variable(kinds.get(f.what, "stiffness lot"), f.title, 1.0, 1.0) for f in figures)
        stations = [groups[station.group] for station in problem.model.stations]
        damped = [index.get((g, "loss factor"), index.get((g, "viscous"), NOTHING)) for g in stations]
        bodies = range(len(problem.brief.bodies))
        # Statics go by their own figure; what moves by those of `_in_motion`.
        self.map = ScatterMap(
            variables=variables,
            stiffness=tuple((index[g, "static"], NOTHING) for g in stations),
            damping=tuple((d, NOTHING) for d in damped),
            mass=tuple(NOTHING for _ in bodies),
            centre=tuple((NOTHING, NOTHING, NOTHING) for _ in bodies),
            forcing=(0.0, 0.0),
        )
        self._pairs = [self._axes(groups[s.group], axis) for s in problem.model.stations for axis in range(3)]

    def _axes(self, group: str, axis: int) -> tuple[int, int]:
        """Variables whose product multiplies the dynamic stiffness of one axis of a group's parts."""
        own = [
            number
            for number, figure in enumerate(self.figures)
            if figure.group == group and axis in axes_of(figure, self.figures)
        ]
        padded = [*own, NOTHING, NOTHING]
        return padded[0], padded[1]

    def system(self, each: StateModel) -> ScatterSystem:
        """The machine in a state over the box of the map; raises NotBounded."""
        base = super().system(each)
        pairs = base.stiffness_factors.copy()
        pairs[: len(self._pairs)] = self._pairs
        return replace(base, stiffness_factors=pairs, low=self.map.low, high=self.map.high)

    def over(self, low: Floats, high: Floats) -> None:
        """Take the box low, high (F,) of factors; a figure without width is given a hair of it."""
        high = np.maximum(high, low * (1.0 + HAIR))
        variables = tuple(
            replace(variable, low=a, high=b)
            for variable, a, b in zip(self.map.variables, low.tolist(), high.tolist(), strict=True)
        )
        self.map = replace(self.map, variables=variables)


class _Asked(Response):
    """Responses over a box of which a proof is asked: corners and modes alone are sampled first."""

    def _parts(self, room: Floats, stop: bool) -> list[Part]:
        system = self.group.system
        out: list[Part] = []
        for rows in self.group.families(room, 1.0):
            found = Sampler(system, rows)
            found.start()
            out.append(found)
        noise = self.group.noise(room, 1.0)
        if noise is not None:
            out.append(noise_sampled(system, noise, stop_at_violation=True))
        return out


class PartsProof:
    """The proof over boxes of figures of a design's parts. `left_out` tells in words what it does not hold."""

    def __init__(self, made: Made, figures: tuple[Figure, ...]) -> None:
        nothing = PartScatter(lot=0.0)
        stated = made.brief.model_copy(
            update={"scatter": Scatter(judge="interval", stiffness=nothing, damping=nothing)}
        )
        problem, designs = batch(stated, [Made(stated, made.design)])
        self.figures, self.brief = figures, stated
        self.value = np.array([figure.value for figure in figures])
        self.rows = _FigureRows(problem, designs.part[0], int(designs.step[0]), figures)
        self.statics = self.rows.statics()
        self.separations = self.rows.separations()
        self.responses = self.rows.responses()
        self.bands, banded = self._banded(problem)
        told = [(r, why) for r, why in self.rows.unknown if not isinstance(r.allowable, BandAllowable)]
        told += [*banded, *((r, "the bounds do not know this limit") for r in self.rows.unasked())]
        self.left_out = tuple(dict.fromkeys(f"{r.allowable.quantity()}: {why}" for r, why in told))
        self.boxes, self.left_open = 0, 0
        self._hardest = ""

    @property
    def holds_nothing(self) -> bool:
        """Whether no limit at all has a proof."""
        rows = [group.rows or group.stability for group in self.statics]
        return not (any(rows) or self.separations or self.responses or self.bands)

    @property
    def used_up(self) -> bool:
        """Whether the work allowed for all questions is used up."""
        return self.boxes >= ALL_BOXES

    @property
    def cut_short(self) -> bool:
        """Whether some question was left open for want of boxes, so that more could be proven with more work."""
        return self.used_up or self.left_open > 0

    def at_rest(self, low: Floats, high: Floats) -> bool:
        """Whether everything at rest is proven over a box of figures (F,) in SI."""
        self.rows.over(low / self.value, high / self.value)
        for group in self.statics:
            if group.rows and not set(self._decided(group.each, group.rows).status) <= {"proven"}:
                return False
            for requirement in group.stability:
                allowable = requirement.allowable
                assert isinstance(allowable, Stability)
                nothing = StaticRow(np.zeros((3, group.each.model.frame.count)))
                limits = self.rows.limits(group.each, [nothing])
                _, bound = stability_worst(self.brief, group.each, limits, self.rows.designs, self.rows.map)
                if not bound >= allowable.limit:
                    return False
        return True

    def _decided(self, each: StateModel, rows: list[StaticRow]) -> StaticRowsDecision:
        decision = decide_static_rows(self.rows.limits(each, rows))
        self.boxes += decision.boxes
        return decision

    def loads(self, low: Floats, high: Floats) -> dict[str, tuple[float, float]]:
        """Bounds on the static load (N) of one part of every group over a box of figures, in every state."""
        self.rows.over(low / self.value, high / self.value)
        found: dict[str, tuple[float, float]] = {}
        for group in self.statics:
            wanted = [
                (r, q)
                for r, q in zip(group.rows, group.owner, strict=True)
                if q.allowable.kind == "load-range"
            ]
            if not wanted:
                continue
            rows = [row for row, _ in wanted]
            first = self._decided(group.each, rows)
            # Asked to lie near what is attained, the bounds are bisected until they do.
            near = [
                replace(row, lower=a - NEAR * abs(a), upper=b + NEAR * abs(b))
                for row, a, b in zip(rows, first.attained_low, first.attained_high, strict=True)
            ]
            decision = self._decided(group.each, near)
            for number, (_, requirement) in enumerate(wanted):
                station = next(s for s in self.brief.stations if s.name == requirement.place)
                a, b = found.get(station.group, (np.inf, -np.inf))
                found[station.group] = (
                    min(a, decision.bound_low[number]),
                    max(b, decision.bound_high[number]),
                )
        return found

    def __call__(self, low: Floats, high: Floats) -> bool:
        """Whether every response and separation is proven over a box of figures (F,) in SI."""
        self.rows.over(low / self.value, high / self.value)
        if not all(self._apart(*each) for each in self.separations):
            return False
        work = {f"responses {number}": group for number, group in enumerate(self.responses)}
        order = sorted([*work, "bands"], key=lambda name: name != self._hardest)
        for name in order:
            kept = self._banded_kept() if name == "bands" else self._response_kept(work[name])
            if not kept:
                self._hardest = name
                return False
        return True

    def _apart(self, requirement: Requirement, each: StateModel, _: ScatterSystem) -> bool:
        allowable = requirement.allowable
        assert isinstance(allowable, Separation)
        found = separation_worst(self.brief, each, self.rows.system(each), allowable, self.rows.map)
        return bool(found.guaranteed >= allowable.limit)

    def _response_kept(self, group: ResponseGroup) -> bool:
        asked = _Asked(self.rows, replace(group, system=self.rows.system(group.each)))
        asked.sample(True)
        if asked.may_be_violated or self.used_up:
            return False
        # Noise takes several times as many boxes as tones.
        asked.decide(MAX_BOXES // 4 if group.group.rows.noises else MAX_BOXES, None, True)
        self.boxes += asked.boxes
        statuses = {status for decision in asked.decisions for status in decision.status}
        self.left_open += "undecided" in statuses and "violated" not in statuses
        return statuses <= {"proven"}

    def _banded_kept(self) -> bool:
        # The band that failed last is asked first.
        for number, row in enumerate(self.bands):
            if self.used_up:
                return False
            system = self.rows.system(row.each)
            samples = Sampler(system, row.limits)
            samples.start()
            decision = None if samples.violated else decide_rows(
                system, row.limits, max_boxes=MAX_BOXES, samples=samples
            )  # fmt: skip
            self.boxes += 0 if decision is None else decision.boxes
            self.left_open += decision is not None and decision.status[0] == "undecided"
            if decision is None or decision.status[0] != "proven":
                self.bands.insert(0, self.bands.pop(number))
                return False
        return True

    def _banded(self, problem: Problem) -> tuple[list[BandRow], list[tuple[Requirement, str]]]:
        """The rows of all band limits, and those that have none."""
        found: list[BandRow] = []
        left: list[tuple[Requirement, str]] = []
        self.rows.over(np.ones(len(self.figures)), np.ones(len(self.figures)))
        for group in problem.bands:
            each = next(state for state in problem.states if state.model is group.model)
            for (allowable, place), requirement in zip(group.rows.pairs, group.requirements, strict=True):
                if group.rows.noises:
                    left.append((requirement, "noise in one-third-octave bands"))
                    continue
                try:
                    system = self.rows.system(each)
                    found += band_rows_of(each, allowable, place, group.rows.families, system)
                except NotBounded as reason:
                    left.append((requirement, str(reason)))
        return found, left
