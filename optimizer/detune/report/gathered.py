"""What the report works out beside the assessment: each once, and only while there is time for it."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import TypeVar

from detune.report.alternatives import Alternatives, alternatives
from detune.report.contributions import Contribution, contributions
from detune.report.forced_rows import forced_rows, tightest_of_each
from detune.report.forcing_shares import ForcingShare, forcing_shares
from detune.report.service_loads import ServiceLoad, service_loads
from detune.solvers.outcome import Settings
from detune.study.after_search import AfterSearch
from detune.study.run import Result

Found = TypeVar("Found")


@dataclass(frozen=True)
class Gathered:
    """Tables of the design that a reader looks at; None where there is none, or was no time for it.

    `sources`: what tones, noise and shocks have in the judged values.
    """

    loads: tuple[ServiceLoad, ...] | None
    shares: tuple[ForcingShare, ...] | None
    sources: tuple[Contribution, ...] | None
    beside: Alternatives | None


def gather(result: Result, work: AfterSearch | None = None) -> Gathered:
    """Return what the report needs, in the order of its worth, as far as there is time."""
    work = work or AfterSearch(Settings())
    subject, brief = result.subject, result.study.brief
    if subject is None:
        return Gathered(None, None, None, None)

    def while_time(what: str, found: Callable[[], Found]) -> Found | None:
        if work.may_begin():
            return found()
        work.leave_out(what)
        return None

    if work.may_begin():
        work.tell("Working out service loads, the share of each forcing, and the choices beside the answer.")
    loads = while_time("service loads", lambda: service_loads(brief, subject))
    shares = while_time(
        "what each forcing would do alone (contributions.csv)", lambda: forcing_shares(brief, subject)
    )
    sources = while_time(
        "what noise, shocks and run-ups each have in it",
        lambda: contributions(tightest_of_each(forced_rows(brief, subject))),
    )
    beside = None
    if result.answer is not None:
        beside = while_time("the choices beside the answer, cheaper and safer", lambda: alternatives(result))
    return Gathered(loads, shares, sources, beside)


def left_out_of(result: Result, work: AfterSearch | None) -> tuple[tuple[str, ...], str | None]:
    """Return what was left out of the whole run so far, and why, both in words."""
    if work is None:
        return result.left_out, result.why_left_out
    # The work may have begun after the result was there, or gone on from it.
    return tuple(dict.fromkeys((*result.left_out, *work.left_out))), result.why_left_out or work.why
