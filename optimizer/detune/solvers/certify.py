"""Certification of one design: every requirement of the brief over its whole scatter and speed range.

Static rows, separation and responses are decided by the bounds of the proof floor. What the bounds do not know (noise,
shock, passages, bands, laws of parts) is judged by the assessor at sampled points of the scatter and says so.
"""

import time
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable import Separation, Stability
from detune.problem.build import Problem
from detune.problem.requirement import Requirement
from detune.proof.combined_bisect import RowsDecision, Sampler, decide_rows, sampled
from detune.proof.scatter_data import values_at
from detune.proof.static_rows import StaticRowsDecision, decide_static_rows
from detune.response.designs import total_cost
from detune.response.margin import window_margin
from detune.solvers.certify_statics import StaticRow, separation_worst, stability_worst
from detune.solvers.design_rows import DesignRows, ResponseGroup, StaticGroup
from detune.solvers.sampled_rows import sampled_verdicts
from detune.solvers.scatter_machine import corner_words
from detune.solvers.verdict import (
    DesignVerdict,
    Proof,
    ResponseProof,
    RowVerdict,
    SeparationProof,
    StaticProof,
    Status,
    design_status,
)

Floats = NDArray[np.float64]
MAX_BOXES = 20_000
SPARE = 0.005


def certify(
    problem: Problem,
    part: NDArray[np.intp],
    step: int,
    *,
    max_boxes: int = MAX_BOXES,
    stop_at_violation: bool = True,
    interrupted: Callable[[], bool] | None = None,
) -> DesignVerdict:
    """Decide every requirement of a design (part (G,), ballast step) over the scatter of the problem's brief.

    With `stop_at_violation` the first requirement found violated ends the work, and the rest is left out. max_boxes:
    of each family of loads. Raises BriefError where a listed tolerance is missing.
    """
    return _Work(DesignRows(problem, part, step), max_boxes, stop_at_violation, interrupted).verdict()


class _Work:
    def __init__(
        self, made: DesignRows, max_boxes: int, stop: bool, interrupted: Callable[[], bool] | None
    ) -> None:
        self.started = time.perf_counter()
        self.made, self.max_boxes, self.stop, self.interrupted = made, max_boxes, stop, interrupted
        self.rows: list[RowVerdict] = []
        self.proofs: list[Proof] = []
        self.boxes = 0

    def verdict(self) -> DesignVerdict:
        for work in (self._statics, self._modes, self._responses, self._left_over):
            work()
            if self._over():
                break
        rows = tuple(self.rows)
        return DesignVerdict(
            part=tuple(int(p) for p in self.made.part),
            step=self.made.step,
            cost=float(total_cost(self.made.problem.model, self.made.designs)[0]),
            status=design_status(rows),
            rows=rows,
            boxes=self.boxes,
            seconds=time.perf_counter() - self.started,
            proofs=tuple(self.proofs),
        )

    def _over(self) -> bool:
        return self.stop and any(row.status == "violated" for row in self.rows)

    def _left_over(self) -> None:
        made = self.made
        if made.unknown:
            self.rows += sampled_verdicts(made.problem.brief, made.design, made.map, made.unknown)

    def _row(
        self,
        requirement: Requirement,
        status: Status,
        worst: float,
        guaranteed: float | None,
        limits: tuple[float | None, float | None],
        point: tuple[float, ...],
        frequency: float | None = None,
        where: str = "",
    ) -> None:
        allowable = requirement.allowable
        lower, upper = (None if v is None or not np.isfinite(v) else float(v) for v in limits)

        def margin(value: float) -> float:
            low, high = (None if v is None else np.array(v) for v in (lower, upper))
            return float(window_margin(np.array(value), low, high))

        self.rows.append(
            RowVerdict(
                kind=allowable.kind,
                condition=requirement.condition,
                place=requirement.place,
                quantity=allowable.quantity(),
                unit=allowable.unit,
                status=status,
                worst=worst,
                guaranteed=guaranteed,
                lower=lower,
                upper=upper,
                margin=margin(worst),
                guaranteed_margin=None if guaranteed is None else margin(guaranteed),
                frequency=None if frequency is None or np.isnan(frequency) else frequency,
                where=where or corner_words(self.made.map.variables, point),
                point=point,
                note=requirement.reading or "",
            )
        )

    def _statics(self) -> None:
        for group in self.made.statics():
            for requirement in group.stability:
                self._stability(group, requirement)
            if not group.rows:
                continue
            limits = self.made.limits(group.each, group.rows)
            decision = decide_static_rows(limits)
            labels = tuple(requirement.label for requirement in group.owner)
            name = f"at rest, {group.each.state or 'as installed'}"
            self.proofs.append(StaticProof(name, labels, limits, decision))
            self.boxes += decision.boxes
            for requirement in dict.fromkeys(group.owner):
                own = [i for i, r in enumerate(group.owner) if r is requirement]
                self._static_verdict(requirement, own, group.rows, decision)

    def _static_verdict(
        self, requirement: Requirement, index: list[int], rows: list[StaticRow], decision: StaticRowsDecision
    ) -> None:
        """The worst side of the worst of a requirement's rows."""
        sides = []
        for i in index:
            row = rows[i]
            for worst, bound, where in (
                (decision.attained_low[i], decision.bound_low[i], decision.where_low[i]),
                (decision.attained_high[i], decision.bound_high[i], decision.where_high[i]),
            ):
                lower, upper = (np.array(v) if np.isfinite(v) else None for v in (row.lower, row.upper))
                sides.append((float(window_margin(np.array(worst), lower, upper)), worst, bound, where, row))
        _, worst, bound, where, row = min(sides, key=lambda side: side[0])
        found = {decision.status[i] for i in index}
        status: Status = (
            "violated" if "violated" in found else "undecided" if "undecided" in found else "proven"
        )
        self._row(requirement, status, worst, bound, (row.lower, row.upper), where)

    def _stability(self, group: StaticGroup, requirement: Requirement) -> None:
        allowable = requirement.allowable
        assert isinstance(allowable, Stability)
        nothing = StaticRow(np.zeros((3, group.each.model.frame.count)))
        made = self.made
        worst, bound = stability_worst(
            made.problem.brief, group.each, made.limits(group.each, [nothing]), made.step, made.map
        )
        kept: Status = "proven" if bound >= allowable.limit else "undecided"
        status: Status = kept if worst >= allowable.limit else "violated"
        point = tuple(self.made.map.low.tolist())
        self._row(
            requirement,
            status,
            worst,
            bound,
            (allowable.limit, None),
            point,
            where="all parts at their softest",
        )

    def _modes(self) -> None:
        for requirement, each, system in self.made.separations():
            allowable = requirement.allowable
            assert isinstance(allowable, Separation)
            found = separation_worst(self.made.problem.brief, each, system, allowable, self.made.map)
            kept = found.guaranteed >= allowable.limit
            status: Status = (
                "violated" if found.worst < allowable.limit else "proven" if kept else "undecided"
            )
            if self.made.map.stiffness_only:
                self.proofs.append(
                    SeparationProof(
                        requirement.label, system, each.intervals, allowable.limit, status, found.worst
                    )
                )
            limits = (allowable.limit, None)
            self._row(
                requirement,
                status,
                found.worst,
                found.guaranteed,
                limits,
                found.point,
                found.frequency,
                found.where,
            )

    def _responses(self) -> None:
        """Samples of every family first, so that a violated design is not bounded at length; then the proofs."""
        work = [_Response(self.made, group, self.proofs) for group in self.made.responses()]
        for each in work:
            each.sample(self.stop)
            if self.stop and each.may_be_violated:
                self._judge(each, 0)
                if self._over():
                    return
        for each in work:
            self._judge(each, self.max_boxes)
            if self._over():
                return

    def _judge(self, each: "_Response", max_boxes: int) -> None:
        each.decide(max_boxes, self.interrupted)
        self.boxes, each.boxes = self.boxes + each.boxes, 0
        if max_boxes:
            self.proofs += each.proofs()
        for index, requirement in enumerate(each.group.requirements):
            found = each.verdict(index)
            if max_boxes or found.status == "violated":
                limits = (None, found.limit)
                self._row(
                    requirement, found.status, found.worst, found.bound, limits, found.point, found.speed
                )
        if not max_boxes and self._over():
            self.proofs += each.proofs()


def claimed(decision: StaticRowsDecision, row: int) -> tuple[float, float]:
    """The enclosure that is claimed of a static row: the one proven, half a per cent wider, so that it can be re-checked."""
    low, high = decision.bound_low[row], decision.bound_high[row]
    spare = SPARE * max(abs(low), abs(high))
    return low - spare, high + spare


class _Found:
    """What was found of one response row."""

    def __init__(
        self, status: Status, worst: float, bound: float, limit: float, point: tuple[float, ...], speed: float
    ) -> None:
        self.status, self.worst, self.bound, self.limit = status, worst, bound, limit
        self.point, self.speed = point, speed


class _Response:
    """One group of response rows on its way to a decision."""

    def __init__(self, made: DesignRows, group: ResponseGroup, proofs: list[Proof]) -> None:
        self.made, self.group = made, group
        self.condition = group.requirements[0].condition
        self.adds = np.zeros(len(group.requirements))
        self.limit = np.array(group.limit)
        self.boxes = 0
        self.static: StaticProof | None = None
        self._offsets()
        self.samples: list[Sampler] = []
        self.decisions: list[RowsDecision] = []

    def _offsets(self) -> None:
        """Take static parts at their own worst bound, over the whole scatter."""
        rows = [(i, row, how) for i, (row, how) in enumerate(self.group.static) if row is not None]
        if not rows:
            return
        limits = self.made.limits(self.group.each, [row for _, row, _ in rows])
        decision = decide_static_rows(limits)
        self.boxes += decision.boxes
        labels = tuple(self.group.requirements[i].label for i, *_ in rows)
        self.static = StaticProof(f"static parts of responses, {self.condition}", labels, limits, decision)
        for number, (index, _, how) in enumerate(rows):
            low, high = claimed(decision, number)
            if how == "limits":
                self.limit[index] = max(low, 0.0)
            else:
                self.adds[index] = high

    def sample(self, stop: bool) -> None:
        """Corners, grid and pattern search; families at independent speeds get each its share of the limit."""
        room = np.maximum(self.limit - self.adds, 0.0)
        forcing = 1.0 if self.group.largest else 1.0 + self.made.map.forcing[1]
        families = self.group.families(room, forcing)
        if len(families) == 1 or self.group.largest:
            self.samples = [sampled(self.group.system, rows, stop_at_violation=stop) for rows in families]
            return
        free = [sampled(self.group.system, rows, stop_at_violation=False) for rows in families]
        every = np.stack([found.best for found in free])
        together = self._together(every)
        for number, found in enumerate(free):
            share = found.best * np.where(together > 0.0, room / np.maximum(together, 1e-300), 1.0)
            # A row that a family does not move keeps a hair of the limit.
            share = np.maximum(share, 1e-9 * room)
            again = Sampler(self.group.system, self.group.families(share, forcing)[number])
            again.best, again.where = found.best, found.where
            self.samples.append(again)

    def _together(self, values: Floats) -> Floats:
        """Values of the families (F, R) put together (R,)."""
        if self.group.largest or len(values) == 1:
            return np.asarray(values.max(axis=0))
        squares = np.array([row.squares for row in self.group.observed])
        return np.asarray(np.where(squares, np.sqrt((values**2).sum(axis=0)), values.sum(axis=0)))

    @property
    def may_be_violated(self) -> bool:
        """Whether some sample exceeds the limit that is left beside the static part's worst."""
        return any(found.violated for found in self.samples)

    def decide(self, max_boxes: int, interrupted: Callable[[], bool] | None) -> None:
        """Decide every family."""
        self.decisions = [
            decide_rows(
                self.group.system, found.limits, max_boxes=max_boxes, interrupted=interrupted, samples=found
            )
            for found in self.samples
        ]
        self.boxes += sum(decision.boxes for decision in self.decisions)

    def proofs(self) -> list[Proof]:
        """What the record needs."""
        labels = tuple(requirement.label for requirement in self.group.requirements)
        found: list[Proof] = [] if self.static is None else [self.static]
        for family, samples, decision in zip(
            self.group.group.rows.families, self.samples, self.decisions, strict=True
        ):
            name = f"{self.condition}, {family.speed}"
            found.append(ResponseProof(name, labels, self.group.system, samples.limits, decision))
        return found

    def _at_one_point(self, index: int, point: Floats) -> tuple[float, float, float, tuple[float, ...]]:
        """By how much a row breaks its limit at one point of the scatter, every family at its worst speed; the value."""
        values = []
        for samples, decision in zip(self.samples, self.decisions, strict=True):
            low, high = samples.limits.speed
            speeds = np.append(np.linspace(low, high, 65), np.clip(decision.speed[index], low, high))
            points = np.concatenate(
                [np.tile(point, (len(speeds), 1)), ((2.0 * np.pi * speeds) ** 2)[:, None]], axis=1
            )
            values.append(values_at(self.group.system, samples.limits, points)[:, index].max())
        every = np.zeros((len(values), len(self.limit)))
        every[:, index] = values
        adds, limit = (float(v[0, index]) for v in self.made.static_parts(self.group, point[None]))
        value = float(self._together(every)[index]) + adds
        return value - limit, value, limit, tuple(point.tolist())

    def verdict(self, index: int) -> _Found:
        """What is known of one row. Violated only where one point of the scatter breaks the limit by itself."""
        lower = np.array([decision.lower for decision in self.decisions])
        upper = np.array([decision.upper for decision in self.decisions])
        worst, bound = float(self._together(lower)[index]), float(self._together(upper)[index])
        biggest = self.decisions[int(lower[:, index].argmax())]
        point = biggest.worst[index]
        statuses = {decision.status[index] for decision in self.decisions}
        status: Status = "proven" if statuses == {"proven"} else "undecided"
        adds, limit = (v[0, index] for v in self.made.static_parts(self.group, np.array(point)[None]))
        if len(self.decisions) > 1 and not self.group.largest:
            # Families that are worst at different points of the scatter are no witness: they have to be at one.
            found = max(
                (self._at_one_point(index, np.array(d.worst[index])) for d in self.decisions),
                key=lambda f: f[0],
            )
            broken, value, limit, point = found
        else:
            broken, value = worst + adds - limit, worst + adds
        if broken > 0.0:
            return _Found("violated", value, bound + self.adds[index], limit, point, biggest.speed[index])
        stated = float(self.limit[index])
        return _Found(status, worst + adds, bound + self.adds[index], stated, point, biggest.speed[index])
