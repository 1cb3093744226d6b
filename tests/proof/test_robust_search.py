"""Cheapest proven design: certification in cost order against a plain list of all designs."""

import importlib.util
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from detune.proof.instances import InstanceSettings, make_instance
from detune.proof.robust_search import search_robust
from detune.proof.search import SearchSettings

_spec = importlib.util.spec_from_file_location("brute_force", Path(__file__).with_name("brute_force.py"))
brute = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(brute)

NUMPY = SearchSettings(kernels="numpy")


@pytest.fixture(scope="module")
def problem():
    """A small instance and its nominally feasible designs in order of cost."""
    selection = make_instance(
        InstanceSettings(
            parts=5, groups=3, seed=5, ballast_steps=2, tight=False, response_share=0.6, separation=0.0
        )
    )
    feasible = [d for d in brute.all_designs(selection) if brute.assess(selection, d)[0]]
    feasible.sort(key=lambda d: brute.cost_of(selection, d))
    assert len(feasible) >= 4
    return selection, feasible


def test_first_proven_in_cost_order_wins(problem):
    selection, feasible = problem
    asked = []

    def certifier(design):
        asked.append(tuple(design.tolist()))
        return "proven" if asked[-1] == feasible[3] else "violated"

    result = search_robust(selection, certifier, settings=NUMPY)
    assert (*result.winner.parts, result.winner.ballast) == feasible[3]
    assert asked == feasible[:4] and result.examined == 4
    assert result.optimal and result.undecided == ()
    expected = brute.cost_of(selection, feasible[3]) / brute.cost_of(selection, feasible[0]) - 1.0
    assert result.price == pytest.approx(expected, rel=1e-12)


def test_undecided_designs_are_reported_and_spoil_the_claim_of_optimality(problem):
    """ALGORITHMS 5: a design that was merely undecided was once skipped, and a dearer one called optimal."""
    selection, feasible = problem

    def certifier(design):
        place = feasible.index(tuple(design.tolist()))
        return {0: "violated", 1: "undecided", 2: "proven"}[place]

    result = search_robust(selection, certifier, settings=NUMPY)
    assert [(*d.parts, d.ballast) for d in result.undecided] == [feasible[1]]
    assert (*result.winner.parts, result.winner.ballast) == feasible[2]
    assert not result.optimal


def test_none_exists_only_when_all_were_refuted(problem):
    selection, feasible = problem
    asked = []

    def certifier(design):
        asked.append(tuple(design.tolist()))
        return "violated"

    result = search_robust(selection, certifier, settings=NUMPY)
    assert result.winner is None and result.status == "complete" and result.lower_bound == np.inf
    assert sorted(asked) == sorted(feasible)
    assert not result.optimal


def test_interrupt_keeps_what_is_known(problem):
    selection, feasible = problem
    count = []

    def certifier(design):
        count.append(1)
        return "violated"

    settings = replace(NUMPY, interrupted=lambda: len(count) >= 2)
    result = search_robust(selection, certifier, settings=settings)
    assert result.status == "interrupted" and result.winner is None
    assert result.lower_bound <= brute.cost_of(selection, feasible[2])
    with pytest.raises(ValueError, match="step"):
        search_robust(selection, certifier, settings=NUMPY, step=0.0)
