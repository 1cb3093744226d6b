"""A named design judged over the scatter that its study states: certified, or its yield, as the study asks."""

import time
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from detune.problem.build import Problem, with_parts
from detune.response.design import Design, ballast_of
from detune.solvers.certify import certify
from detune.solvers.interrupt import stop_on_interrupt
from detune.solvers.verdict import DesignVerdict
from detune.solvers.yields import Yield, design_yield

TIME_LIMIT = 60.0
MOST_BOXES = 200_000
"""A single design is worked at until the time is up rather than until the boxes are."""


@dataclass(frozen=True)
class OverScatter:
    """What the scatter makes of one design: its verdict (judge = "interval") or its yield ("distribution").

    stopped: whether the time limit or an interruption ended the proof before every limit was decided.
    """

    verdict: DesignVerdict | None
    found: Yield | None
    stopped: bool
    seconds: float

    @property
    def proven(self) -> bool | None:
        """True where every limit is proven, False where one is violated, None where it is open (or a yield)."""
        if self.verdict is None:
            return None
        return {"proven": True, "violated": False}.get(self.verdict.status)


def over_scatter(
    problem: Problem, design: Design, time_limit: float | None = TIME_LIMIT
) -> OverScatter | None:
    """Return what the scatter makes of a design, None where the study states none.

    problem: of the study, as `build` makes it; the design may take any part. time_limit (s): for the proof of
    responses, after which what is not decided stays undecided with its bracket. Raises BriefError where a
    tolerance is missing.
    """
    scatter = problem.brief.scatter
    if scatter is None:
        return None
    started = time.perf_counter()
    own = with_parts(
        problem.brief, tuple((mount,) for mount in design.mounts), (ballast_of(problem.brief, design),)
    )
    part = np.zeros(len(design.mounts), dtype=np.intp)
    if scatter.judge == "distribution":
        return OverScatter(None, design_yield(own, part, 0), False, time.perf_counter() - started)
    ended = False
    with stop_on_interrupt(None) as stop:

        def interrupted() -> bool:
            nonlocal ended
            late = time_limit is not None and time.perf_counter() - started > time_limit
            ended = ended or late or stop()
            return ended

        asked: Callable[[], bool] = interrupted
        verdict = certify(own, part, 0, max_boxes=MOST_BOXES, stop_at_violation=False, interrupted=asked)
    open_rows = any(row.status == "undecided" for row in verdict.rows)
    return OverScatter(verdict, None, ended and open_rows, time.perf_counter() - started)
