"""Certification of one design: every requirement of the brief over its whole scatter and speed range.

Static rows, separation and responses to tones and noise are decided by the bounds of the proof floor. What the bounds
do not know (shock, passages, bands, weightings, laws of parts) is judged by the assessor at sampled points of the
scatter and says so.
"""

import time
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.separation import Separation
from detune.brief.allowable.stability import Stability
from detune.problem.build import Problem
from detune.problem.requirement import Requirement
from detune.proof.static_rows import StaticRowsDecision, decide_static_rows
from detune.response.designs import total_cost
from detune.response.margin import window_margin
from detune.solvers.certify_guard import second_look
from detune.solvers.certify_response import Response
from detune.solvers.certify_statics import StaticRow, separation_worst, stability_worst
from detune.solvers.design_rows import NOT_KNOWN, DesignRows, StaticGroup
from detune.solvers.sampled_rows import sampled_verdicts
from detune.solvers.scatter_machine import corner_words
from detune.solvers.verdict import (
    DesignVerdict,
    Proof,
    RowVerdict,
    SeparationProof,
    StaticProof,
    Status,
    design_status,
)

Floats = NDArray[np.float64]
MAX_BOXES = 20_000


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
        else:
            self.rows = second_look(self.made, self.rows)
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
        made.unknown += [(requirement, NOT_KNOWN) for requirement in made.unasked()]
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
        bound_margin: float | None = None,
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
                guaranteed_margin=None
                if guaranteed is None
                else margin(guaranteed)
                if bound_margin is None
                else bound_margin,
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
        """The worst side of the worst of a requirement's rows, and the bound that comes nearest to a limit
        or beyond.
        """
        worst: tuple[float, float, tuple[float, ...], StaticRow] | None = None
        least = (np.inf, np.nan)
        for i in index:
            row = rows[i]
            lower, upper = (np.array(v) if np.isfinite(v) else None for v in (row.lower, row.upper))
            for found, bound, where in (
                (decision.attained_low[i], decision.bound_low[i], decision.where_low[i]),
                (decision.attained_high[i], decision.bound_high[i], decision.where_high[i]),
            ):
                margin = float(window_margin(np.array(found), lower, upper))
                least = min(least, (float(window_margin(np.array(bound), lower, upper)), bound))
                if worst is None or margin < worst[0]:
                    worst = margin, found, where, row
        assert worst is not None
        statuses = {decision.status[i] for i in index}
        status: Status = (
            "violated" if "violated" in statuses else "undecided" if "undecided" in statuses else "proven"
        )
        _, value, where, row = worst
        self._row(requirement, status, value, least[1], (row.lower, row.upper), where, bound_margin=least[0])

    def _stability(self, group: StaticGroup, requirement: Requirement) -> None:
        allowable = requirement.allowable
        assert isinstance(allowable, Stability)
        nothing = StaticRow(np.zeros((3, group.each.model.frame.count)))
        made = self.made
        worst, bound = stability_worst(
            made.problem.brief, group.each, made.limits(group.each, [nothing]), made.designs, made.map
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
        work = [Response(self.made, group) for group in self.made.responses()]
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

    def _judge(self, each: Response, max_boxes: int) -> None:
        each.decide(max_boxes, self.interrupted, self.stop)
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
