"""All nominally feasible designs between two costs, against a plain list of all designs."""

import itertools
from dataclasses import replace

import numpy as np
import pytest

from detune.proof.designs_between import designs_between
from detune.proof.exact_test import exact_accept
from detune.proof.instances import InstanceSettings, make_instance
from detune.proof.search import SearchSettings
from proof import brute_force as brute

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


@pytest.mark.parametrize("pieces", [1, 2, 5])
def test_every_feasible_design_comes_once_and_in_order_of_cost(problem, pieces):
    selection, feasible = problem
    costs = np.array([brute.cost_of(selection, d) for d in feasible])
    edges = np.linspace(costs.min() - 1.0, costs.max(), pieces + 1)
    edges[-1] = costs.max()
    found = []
    for done_to, cap in itertools.pairwise(edges):
        designs, result = designs_between(
            selection, exact_accept(selection, NUMPY.value), NUMPY, float(cap), float(done_to)
        )
        assert result.status == "complete"
        assert all(done_to < d.cost <= cap for d in designs)
        found += designs
    assert sorted((*d.parts, d.ballast) for d in found) == sorted(feasible)
    assert [d.cost for d in found] == pytest.approx(sorted(costs))


def test_an_interrupt_is_told(problem):
    selection, _ = problem
    settings = replace(NUMPY, interrupted=lambda: True)
    _, result = designs_between(selection, exact_accept(selection, NUMPY.value), settings, np.inf, -np.inf)
    assert result.status == "interrupted"
