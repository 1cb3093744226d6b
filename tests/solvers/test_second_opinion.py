"""The second opinion's own process, honest statuses, and every bound it rests on."""

from __future__ import annotations

import math
import os
import signal
import time
from typing import Any

import numpy as np
import pytest

from detune.ground.errors import SolveError
from detune.proof.exact_test import exact_accept, natural_frequencies, separation_met
from detune.proof.instances import InstanceSettings, make_instance, random_designs
from detune.solvers import second_opinion
from detune.solvers.outcome import Settings
from detune.solvers.own_process import OwnProcess
from detune.solvers.pyomo_bounds import (
    Cut,
    Tone,
    separation_cut,
    static_box,
    tone_box,
    worst_tone,
)
from detune.solvers.pyomo_model import Task, run
from solvers import briefs

SELECTION = make_instance(
    InstanceSettings(parts=6, groups=3, seed=5, empty=True, ballast_steps=2, tight=False, separation=0.05)
)
STATEMENT = briefs.statement_of_selection(SELECTION)


def test_a_process_that_overruns_is_ended() -> None:
    with OwnProcess(time.sleep) as process:
        assert process.ask(0.0, 30.0) is None
        started = time.perf_counter()
        assert process.ask(60.0, 0.1) is None
        assert time.perf_counter() - started < 10.0
        # The next question finds a new process.
        assert process.ask(0.0, 30.0) is None and process.pipe is not None


def test_a_stop_ends_the_wait() -> None:
    with OwnProcess(time.sleep) as process:
        process.ask(0.0, 30.0)
        started = time.perf_counter()
        assert process.ask(60.0, 50.0, lambda: True) is None
        assert time.perf_counter() - started < 5.0


def test_a_process_that_fails_or_dies_is_an_error() -> None:
    with OwnProcess(math.sqrt) as process, pytest.raises(SolveError, match="math domain error"):
        process.ask(-1.0, 30.0)
    with OwnProcess(os._exit) as process, pytest.raises(SolveError, match="died: exit code 3"):
        process.ask(3, 30.0)
    with OwnProcess(signal.raise_signal) as process, pytest.raises(SolveError, match="died: signal 9"):
        process.ask(signal.SIGKILL, 30.0)


def test_an_error_that_was_not_expected_stays_off_the_terminal(capfd: pytest.CaptureFixture[str]) -> None:
    """SCIP raises a bare Exception where its LP solver fails; here a root is asked of a text, a TypeError."""
    with OwnProcess(math.sqrt) as process:
        with pytest.raises(SolveError, match="process died: TypeError: must be real number, not str"):
            process.ask("four", 30.0)
        # Another process answers the next question.
        assert process.ask(4.0, 30.0) == 2.0
        words = process.words
        assert words is not None and words.exists()
    assert not words.exists()
    assert capfd.readouterr().err == ""


@pytest.mark.parametrize("backend", ["highs", "scip_direct"])
def test_statuses_are_mapped_honestly(backend: Any) -> None:
    """Infeasible once everything is cut off; a limit that is over at once proves nothing."""
    everything = tuple(Cut(tuple(tuple(range(size)) for size in STATEMENT.sizes), step) for step in range(2))
    none = run(Task(STATEMENT, everything, (), backend, 60.0))
    assert none.status == "infeasible" and none.bound == math.inf
    some = run(Task(STATEMENT, (), (), backend, 120.0))
    assert some.status == "optimal"
    cost = sum(float(c[j]) for c, j in zip(STATEMENT.cost, some.parts, strict=True))
    assert cost + STATEMENT.step_cost[some.step] == pytest.approx(some.bound, rel=1e-6)
    late = run(Task(STATEMENT, (), (), backend, 1e-6))
    assert late.status in ("time limit", "optimal")
    if late.status == "time limit":
        assert late.parts == () and late.bound <= some.bound + 1e-6


def test_a_relaxation_without_cuts_is_never_dearer_than_the_optimum() -> None:
    answer = run(Task(STATEMENT, (), (), "highs", 120.0))
    every = random_designs(SELECTION, 2000, np.random.default_rng(3))
    met = every[exact_accept(SELECTION)(every)[0]]
    assert len(met) > 3
    costs = [
        sum(float(c[j]) for c, j in zip(STATEMENT.cost, d[:-1], strict=True)) + STATEMENT.step_cost[d[-1]]
        for d in met
    ]
    assert answer.bound <= min(costs) + 1e-9


def test_static_bounds_hold_for_every_supported_design() -> None:
    box = static_box(STATEMENT)
    assert box is not None
    for *parts, step in random_designs(SELECTION, 400, np.random.default_rng(1)).tolist():
        stiffness = STATEMENT.assembled(
            STATEMENT.fixed_static, [k[j] for k, j in zip(STATEMENT.static, parts, strict=True)]
        )
        if np.linalg.eigvalsh(stiffness)[0] <= 0.0:
            continue
        q = np.linalg.solve(stiffness, STATEMENT.load[step])
        assert np.all(np.abs(q) <= box.q * (1.0 + 1e-9))
        assert np.all(np.abs(STATEMENT.rows @ q) <= box.deflection * (1.0 + 1e-9))


def test_tone_bounds_hold_for_every_design() -> None:
    loose = make_instance(InstanceSettings(parts=6, groups=2, seed=9, ballast_steps=2, tight=False))
    statement = briefs.statement_of_selection(loose)
    tones = statement.tones[4]
    omega = 2.0 * np.pi * tones.low
    tone = Tone(omega, tones.load(omega), tones.rows, tones.limits(omega))
    box = tone_box(statement, tone)
    assert box is not None
    for *parts, step in random_designs(loose, 200, np.random.default_rng(2)).tolist():
        k = statement.assembled(
            statement.fixed_dynamic[step], [k[j] for k, j in zip(statement.dynamic, parts, strict=True)]
        )
        h = statement.assembled(
            statement.fixed_hysteretic, [h[j] for h, j in zip(statement.loss, parts, strict=True)]
        )
        q = np.linalg.solve(k + 1j * h - omega**2 * statement.mass[step], tone.load)
        assert np.all(np.abs(q) <= box.q * (1.0 + 1e-9))
        assert np.all(np.abs(statement.rows @ q) <= box.deflection * (1.0 + 1e-9))


def test_every_design_of_a_separation_cut_breaks_the_separation() -> None:
    random = np.random.default_rng(4)
    wide = 0
    for *parts, step in random_designs(SELECTION, 60, random).tolist():
        cut = separation_cut(STATEMENT, tuple(parts), step)
        met = separation_met(natural_frequencies(SELECTION, np.array([[*parts, step]])), SELECTION.bands)[0]
        if cut is None:
            assert met
            continue
        assert not met
        assert all(part in chosen for part, chosen in zip(parts, cut.parts, strict=True))
        inside = np.stack([random.choice(chosen, 40) for chosen in cut.parts] + [np.full(40, step)], axis=1)
        assert not separation_met(natural_frequencies(SELECTION, inside), SELECTION.bands).any()
        wide += sum(len(chosen) > 1 for chosen in cut.parts)
    assert wide > 20


def test_the_worst_tone_is_found_where_a_limit_is_broken() -> None:
    """With all limits halved below a design's own response it is named; with doubled ones it is not."""
    tones = STATEMENT.tones
    parts, step = (2, 3, 4), 0
    found = worst_tone(STATEMENT, parts, step)
    k = STATEMENT.assembled(
        STATEMENT.fixed_dynamic[step], [k[j] for k, j in zip(STATEMENT.dynamic, parts, strict=True)]
    )
    h = STATEMENT.assembled(
        STATEMENT.fixed_hysteretic, [h[j] for h, j in zip(STATEMENT.loss, parts, strict=True)]
    )
    ratios = []
    for each in tones:
        omega = 2.0 * np.pi * each.low
        q = np.linalg.solve(k + 1j * h - omega**2 * STATEMENT.mass[step], each.load(omega))
        ratios.append(float(np.max(np.abs(each.rows @ q) / each.limit)))
    if max(ratios) > 1.001:
        assert found is not None
        assert found.omega == pytest.approx(2.0 * np.pi * tones[int(np.argmax(ratios))].low)
    else:
        assert found is None


def test_refuses_what_is_too_large_in_plain_words() -> None:
    problem = briefs.small_problem(0, most=9)
    big = [max(len(group.mounts) for group in problem.model.groups)]
    if big[0] <= second_opinion.MOST_PARTS:
        problem = briefs.small_problem(6, most=24)
    words = second_opinion.refusal(problem)
    sizes = [len(group.mounts) for group in problem.model.groups]
    assert (words is None) == (max(sizes) <= 20)
    margin_first = briefs.small_problem(1, trade=("least-margin", "cost"))
    assert "least cost" in str(second_opinion.refusal(margin_first))
    with pytest.raises(SolveError, match="does not apply"):
        second_opinion.solve(margin_first, Settings())
