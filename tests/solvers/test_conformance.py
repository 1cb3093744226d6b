"""What every solver must do: known optima, "none exists", labelled early stops, counts that add up."""

from __future__ import annotations

import signal
from types import ModuleType
from typing import Any

import pytest

from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.choice import Ballast
from detune.brief.machine import Station
from detune.problem.build import Problem, build
from detune.response.assess import assess
from detune.solvers import SOLVERS, bounded, choose, enumeration
from detune.solvers.outcome import Progress, Settings
from detune.study.front import assessed_front
from solvers import briefs

machines = briefs.machines

ALL = pytest.mark.parametrize("solver", SOLVERS.values(), ids=SOLVERS)


def parts() -> list[Any]:
    """100 kg (981 N) under 100 N at 25 Hz; the transmitted force of an undamped mass is 100 N / |1 - w^2 m / k|.

    elm  k = 1.0 kN/mm: 100 / |1 - 2.467| = 68.1 N    ash  k = 0.2 kN/mm: 100 / |1 - 12.34| = 8.8 N
    fir  as ash, but carries 500 N at most            oak  as ash, dearer
    """
    return [
        machines.mount("elm", 1e6, cost=5.0),
        machines.mount("ash", 2e5, cost=9.0),
        machines.mount("fir", 2e5, cost=1.0, load_max=500.0),
        machines.mount("oak", 2e5, cost=12.0),
    ]


def on_one_mount(limit: float, **changes: Any) -> Problem:
    allowable = TransmittedForce(through="floor", direction="z", measure="peak", limit=limit)
    brief = machines.one_axis(100.0, machines.force(25.0, 100.0), [allowable], **changes)
    return build(brief, {"list": machines.catalog(*parts())})


def on_two_mounts() -> Problem:
    """The same mass held by two groups side by side, their stiffness adding up: the weight is shared as they are.

    Two of ash have 0.4 kN/mm: 100 / |1 - 6.17| = 19.3 N; ash and elm 1.2 kN/mm: 100 / |1 - 2.056| = 94.7 N.
    With fir beside fir each carries 490 N, within its 500 N: that is the cheapest, at 1 + 1.
    """
    stations = (
        Station(name="S", group="G", position=(0.0, 0.0, 0.0)),
        Station(name="T", group="H", position=(0.0, 0.0, 0.0)),
    )
    return on_one_mount(
        20.0, stations=stations, choices=tuple(briefs.Choice(group=g, catalogs=("list",)) for g in "GH")
    )


@ALL
def test_finds_the_known_optimum_of_one_mount(solver: ModuleType) -> None:
    problem = on_one_mount(10.0)
    outcome = solver.solve(problem, Settings())
    assert outcome.stopped == "finished" and not outcome.none_exists
    assert outcome.objectives["cost"].min() == 9.0
    best = assessed_front(problem, outcome).points[0]
    assert best.meets and best.design.parts == ("ash",)
    assert outcome.record.accounted and outcome.record.designs == 4
    assert outcome.record.looked_at == 4 and outcome.record.lower_bound == float("inf")


@ALL
def test_finds_the_known_optimum_of_two_groups(solver: ModuleType) -> None:
    problem = on_two_mounts()
    outcome = solver.solve(problem, Settings())
    assert outcome.objectives["cost"].min() == 2.0
    assert assessed_front(problem, outcome).points[0].design.parts == ("fir", "fir")
    assert outcome.record.accounted and outcome.record.designs == 16


@ALL
def test_takes_the_ballast_that_opens_the_brief(solver: ModuleType) -> None:
    """The mass moves by 100 N / (m w^2 - k): 44.1 um with 100 kg on ash, 30.7 um with 140 kg (40 kg at 0.1 each)."""
    ballast = Ballast(
        position=(0.0, 0.0, 0.0), size=(0.1, 0.1, 0.1), steps=(0.0, 40.0, 80.0), cost_per_kg=0.1
    )
    limit = Displacement(at="P", direction="z", measure="peak", limit=35e-6)
    brief = machines.one_axis(100.0, machines.force(25.0, 100.0), [limit], ballast=ballast)
    ash = [part for part in parts() if part.part != "elm"]
    outcome = solver.solve(build(brief, {"list": machines.catalog(*ash)}), Settings())
    assert outcome.objectives["cost"].min() == pytest.approx(9.0 + 4.0, abs=1e-12)
    cheapest = outcome.objectives["cost"].argmin()
    assert outcome.designs.step[cheapest] == 1


@ALL
def test_proves_that_none_exists(solver: ModuleType) -> None:
    outcome = solver.solve(on_one_mount(1.0), Settings())
    assert outcome.none_exists and outcome.stopped == "finished"
    assert outcome.designs.count == 0 and outcome.record.met == 0 and outcome.record.accounted


@ALL
def test_an_infinite_separation_does_not_hide_the_optimum(solver: ModuleType) -> None:
    """A condition that is passed through has no excitation interval: every separation is infinite."""
    brief = machines.one_axis(100.0, machines.force(25.0, 100.0))
    brief = brief.model_copy(
        update={"conditions": (brief.conditions[0].model_copy(update={"steady": False}),)}
    )
    outcome = solver.solve(build(brief, {"list": machines.catalog(*parts())}), Settings())
    assert outcome.objectives["cost"].min() == 5.0


@ALL
def test_no_separation_asked_for_means_no_mode_is_refused(solver: ModuleType) -> None:
    """elm on 100 kg has its mode at 15.9 Hz; with a force from 14 to 18 Hz it stands in the interval, and may."""
    brief = machines.one_axis(
        100.0, machines.force((14.0, 18.0), 1.0), objectives=briefs.Objectives(trade=("cost", "separation"))
    )
    damped = machines.mount("elm", 1e6, loss=0.1, cost=5.0)
    soft = machines.mount("ash", 2e5, loss=0.1, cost=9.0)
    outcome = solver.solve(build(brief, {"list": machines.catalog(damped, soft)}), Settings())
    cheapest = outcome.objectives["cost"].argmin()
    assert outcome.objectives["cost"][cheapest] == 5.0
    # 15.915 Hz within [14, 18]: the greater of 15.915/18 - 1 and 1 - 15.915/14.
    assert outcome.objectives["separation"][cheapest] == pytest.approx(-0.1158, abs=1e-4)


@ALL
def test_a_time_limit_of_zero_is_never_called_finished(solver: ModuleType) -> None:
    for problem in (on_one_mount(10.0), on_one_mount(1.0), briefs.small_problem(1)):
        outcome = solver.solve(problem, Settings(time_limit=0.0))
        assert outcome.stopped == "time limit"
        assert not outcome.none_exists and not outcome.record.accounted
        assert outcome.record.looked_at < problem.count
        bound = outcome.record.lower_bound
        assert bound is None or bound <= 9.0 + 100.0


@ALL
def test_an_interrupt_is_labelled_and_claims_only_what_was_judged(solver: ModuleType) -> None:
    problem = briefs.small_problem(0)
    outcome = solver.solve(problem, Settings(interrupted=lambda: True))
    assert outcome.stopped == "interrupted"
    assert not outcome.none_exists and not outcome.record.accounted
    for number in range(outcome.designs.count):
        assert assess(problem.brief, problem.design(outcome.designs, number)).meets


@ALL
def test_designs_meet_the_brief_and_the_counts_add_up(solver: ModuleType) -> None:
    problem = briefs.small_problem(4)
    outcome = solver.solve(problem, Settings())
    front = assessed_front(problem, outcome)
    assert front.points and all(point.meets for point in front.points) and not front.withdrawn
    assert outcome.record.accounted
    assert outcome.record.met >= len(front.points)
    for name, values in outcome.objectives.items():
        assert len(values) == outcome.designs.count, name


@pytest.mark.parametrize("solver", [enumeration, bounded], ids=["enumeration", "bounded"])
def test_ctrl_c_leaves_a_usable_partial_result(solver: ModuleType, monkeypatch: pytest.MonkeyPatch) -> None:
    """A real signal after the first progress: what was found stays, with a bound below the true least cost."""
    monkeypatch.setattr(enumeration, "BLOCK", 200)
    problem = briefs.small_problem(12)
    whole = solver.solve(problem, Settings())
    before = signal.getsignal(signal.SIGINT)
    told: list[Progress] = []

    def tell(progress: Progress) -> None:
        told.append(progress)
        if progress.incumbent is not None and len(told) == len([p for p in told if p.incumbent is None]) + 1:
            signal.raise_signal(signal.SIGINT)

    outcome = solver.solve(problem, Settings(progress=tell))
    assert signal.getsignal(signal.SIGINT) is before
    assert outcome.stopped == "interrupted"
    assert outcome.designs.count > 0 and not outcome.record.accounted
    least = whole.objectives["cost"].min()
    assert outcome.objectives["cost"].min() >= least
    assert min(outcome.record.lower_bound, outcome.objectives["cost"].min()) <= least
    shares = [progress.share for progress in told]
    assert shares == sorted(shares) and 0.0 < shares[0] <= 1.0
    assert all(p.lower_bound is not None for p in told)


def test_a_second_opinion_is_given_on_request_alone() -> None:
    for problem in (on_one_mount(10.0), briefs.small_problem(4)):
        assert choose(problem)[0] == enumeration.NAME
        assert SOLVERS["second opinion"].accepts(problem)
