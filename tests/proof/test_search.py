"""Bounded search against plain enumeration: optimum, front, counts, early stops."""

from dataclasses import replace

import numpy as np
import pytest

from detune.proof.exact_test import exact_accept
from detune.proof.instances import InstanceSettings, make_instance, random_designs
from detune.proof.response_rows import response_margin
from detune.proof.search import SearchSettings
from detune.proof.search_front import search_front, search_least_cost
from proof import brute_force as brute

NUMPY = SearchSettings(kernels="numpy")

SHAPES = [
    InstanceSettings(parts=7, groups=1, seed=1, tight=False, response_share=0.5, separation=0.02),
    InstanceSettings(parts=6, groups=2, seed=2, tight=False, response_share=0.4, separation=0.03),
    InstanceSettings(
        parts=4, groups=3, seed=3, ballast_steps=2, tight=False, response_share=0.5, separation=0.02
    ),
    InstanceSettings(parts=4, groups=3, seed=4, empty=True, tight=False, response_share=0.5, separation=0.02),
    InstanceSettings(
        parts=3, groups=4, seed=5, ballast_steps=2, tight=False, response_share=0.6, separation=0.02
    ),
    InstanceSettings(
        parts=3, groups=4, seed=6, tight=False, response_share=0.6, separation=0.0, base_motion=True
    ),
]


def small_instance(number):
    """Small instances of changing shape: 1 to 4 groups, ballast, empty groups, base motion."""
    shape = SHAPES[number % len(SHAPES)]
    return make_instance(replace(shape, seed=1000 + number))


def reference(selection):
    points = []
    for design in brute.all_designs(selection):
        feasible, separation, _ = brute.assess(selection, design)
        if feasible:
            points.append((brute.cost_of(selection, design), separation, design))
    return brute.front_of(points), len(points)


def compare(result, expected):
    """The found (cost, value) pairs equal the expected ones; values are eigenvalues of two different routines."""
    found = [(d.cost, d.value) for d in result.designs]
    assert len(found) == len(expected)
    for (cost, value), (cost_, value_, _) in zip(found, expected, strict=True):
        assert cost == pytest.approx(cost_, rel=1e-12)
        assert value == pytest.approx(value_, abs=1e-9)


@pytest.mark.parametrize("number", range(12))
def test_front_and_optimum_equal_plain_enumeration(number):
    selection = small_instance(number)
    front, _ = reference(selection)
    result = search_front(selection, settings=NUMPY)
    compare(result, front)
    assert sum(result.counts.values()) == selection.design_count
    least = search_least_cost(selection, settings=NUMPY)
    compare(least, front[:1])
    assert sum(least.counts.values()) == selection.design_count
    assert least.status == "complete" and least.lower_bound == np.inf and least.gap == 0.0


def test_small_instances_are_not_all_alike():
    """The comparison above would be empty if no instance had a feasible design or a front of several points."""
    lengths = [len(reference(small_instance(n))[0]) for n in range(6)]
    assert sum(length > 0 for length in lengths) >= 3


@pytest.mark.nightly
@pytest.mark.parametrize("number", range(12, 212))
def test_two_hundred_instances_equal_plain_enumeration(number):
    selection = small_instance(number)
    front, _ = reference(selection)
    compare(search_front(selection, settings=NUMPY), front)
    compare(search_least_cost(selection, settings=NUMPY), front[:1])


@pytest.mark.parametrize("number", [1, 2, 4, 5])
def test_front_of_cost_against_least_margin(number):
    selection = small_instance(number)
    settings = SearchSettings(kernels="numpy", value="margin", static_counts=False)

    def accept(designs):
        """Margin of the response rows alone, by the plain loop."""
        answers = [brute.assess(selection, design) for design in designs.tolist()]
        return np.array([a[0] for a in answers], dtype=bool), np.array([a[2] for a in answers])

    points = []
    for design in brute.all_designs(selection):
        feasible, _, margin = brute.assess(selection, design)
        if feasible:
            points.append((brute.cost_of(selection, design), margin, design))
    result = search_front(selection, accept, settings)
    compare(result, brute.front_of(points))


def test_exact_test_agrees_with_the_plain_loop():
    selection = small_instance(5)
    designs = random_designs(selection, 60, np.random.default_rng(5))
    feasible, value = exact_accept(selection)(designs)
    margin = response_margin(selection, designs)
    for row, design in enumerate(designs.tolist()):
        met, separation, least = brute.assess(selection, design)
        assert feasible[row] == met
        if met:
            assert value[row] == pytest.approx(separation, abs=1e-9)
        if np.isfinite(least):
            assert margin[row] == pytest.approx(least, rel=1e-8, abs=1e-8)


def test_stricter_final_test_is_obeyed():
    """A final test that refuses the cheapest design must lead to the next one, never to "none exists"."""
    selection = small_instance(1)
    points = [
        (brute.cost_of(selection, d), s, d)
        for d in brute.all_designs(selection)
        for ok, s, _ in [brute.assess(selection, d)]
        if ok
    ]
    points.sort()
    assert len(points) >= 2
    refused = points[0][2]
    inner = exact_accept(selection)

    def accept(designs):
        feasible, value = inner(designs)
        return feasible & ~(designs == np.array(refused)).all(axis=1), value

    result = search_least_cost(selection, accept, NUMPY)
    assert result.designs[0].cost == pytest.approx(points[1][0], rel=1e-12)


def test_interrupt_and_time_limit_are_labelled():
    selection = make_instance(InstanceSettings(parts=20, groups=3, seed=1))
    calls = []

    def stop_after_a_while():
        calls.append(1)
        return len(calls) > 12

    seen = []
    settings = replace(NUMPY, interrupted=stop_after_a_while, progress=seen.append)
    result = search_least_cost(selection, settings=settings)
    assert result.status == "interrupted"
    whole = search_least_cost(selection, settings=NUMPY)
    assert result.lower_bound <= whole.designs[0].cost
    assert 0 < sum(result.counts.values()) < selection.design_count
    assert seen and seen[0].share_excluded > 0.0
    late = search_least_cost(selection, settings=replace(NUMPY, time_limit=0.0))
    assert late.status == "time_limit" and late.designs == () and np.isfinite(late.lower_bound)
    assert np.isnan(late.gap)


def test_cost_cap_limits_the_front():
    selection = small_instance(7)
    front, _ = reference(selection)
    assert front
    cap = front[0][0]
    result = search_front(selection, settings=replace(NUMPY, cost_cap=cap))
    compare(result, front[:1])
