"""Static rows and whole designs under scatter: never contradicted by samples, and decided in the right direction."""

import functools
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.proof.bisect import decide
from detune.proof.exact_test import exact_accept
from detune.proof.instances import InstanceSettings, make_instance, random_designs
from detune.proof.response_rows import case_margin
from detune.proof.robust_data import first_box, output_at
from detune.proof.robust_design import (
    case_outputs,
    certify,
    robust_separation,
    robust_system,
    static_scatter,
)
from detune.proof.static_scatter import StaticScatter, decide_static, static_enclosure, static_values

SEEDS = st.integers(0, 2**32 - 1)


@functools.cache
def instance(seed, base_motion=False):
    return make_instance(
        InstanceSettings(
            parts=6,
            groups=3,
            seed=seed,
            tight=False,
            response_share=0.5,
            separation=0.02,
            base_motion=base_motion,
        )
    )


def two_springs(lower, upper):
    """A beam of 1000 N on springs of 1e5 N/m at 1 m left and right, each +-10 % by itself; loads by hand.

    The load of each spring is 500 N whatever its stiffness (statically determinate), the sag is 500/k.
    """
    return StaticScatter(
        fixed=np.zeros((2, 2)),
        axes=np.array([[1.0, -1.0], [1.0, 1.0]]),
        stiffness=np.array([1e5, 1e5]),
        variable=np.array([0, 1]),
        load=np.array([1000.0, 0.0]),
        rows=np.array([[1.0, -1.0], [1.0, -1.0]]),
        scale=np.array([1.0, 1e5]),
        scale_variable=np.array([-1, 0]),
        lower=np.asarray(lower, dtype=float),
        upper=np.asarray(upper, dtype=float),
        low=np.array([0.9, 0.9]),
        high=np.array([1.1, 1.1]),
    )


def test_statically_determinate_beam():
    decision = decide_static(two_springs([0.0, 490.0], [5.7e-3, 510.0]))
    assert decision.status == "proven" and decision.boxes > 1
    assert decision.attained_high[0] == pytest.approx(500.0 / 0.9e5, rel=1e-12)
    assert decision.bound_high[0] <= 5.7e-3
    assert decision.attained_low[1] == pytest.approx(500.0, rel=1e-12)
    violated = decide_static(two_springs([0.0, 490.0], [5.5e-3, 510.0]))
    assert violated.status == "violated" and violated.row == 0 and violated.factors[0] == 0.9
    capped = decide_static(two_springs([0.0, 499.0], [5.7e-3, 501.0]), max_boxes=4)
    assert capped.status == "undecided"


@settings(max_examples=15, deadline=None)
@given(SEEDS, st.sampled_from([0.01, 0.05, 0.2]))
def test_static_enclosure_holds_every_sample(seed, tolerance):
    rng = np.random.default_rng(seed)
    selection = instance(seed % 3)
    design = random_designs(selection, 1, rng)[0]
    problem = static_scatter(selection, design, stiffness_tolerance=tolerance)
    low, high = static_enclosure(problem, problem.low[None], problem.high[None])
    factors = problem.low + (problem.high - problem.low) * rng.uniform(size=(300, len(problem.low)))
    factors[150:] = np.where(rng.integers(0, 2, (150, len(problem.low))), problem.low, problem.high)
    values = static_values(problem, factors)
    assert (values >= low[0] - 1e-9 * np.abs(values)).all() and (
        values <= high[0] + 1e-9 * np.abs(values)
    ).all()


@pytest.mark.parametrize("base_motion", [False, True])
def test_outputs_of_a_design_are_the_rows_of_the_selection(base_motion):
    """The least of limit/|y| - 1 over the robust outputs at the nominal point is the margin of the load case."""
    selection = instance(3, base_motion)
    design = random_designs(selection, 1, np.random.default_rng(2))[0]
    system = robust_system(selection, design, stiffness_tolerance=0.1, damping_tolerance=0.3)
    for case in (0, 7, 14):
        least = np.inf
        for _, output in case_outputs(selection, case):
            low, high = first_box(system, output)
            value = output_at(system, output, 0.5 * (low + high)[None])[0]
            if value > 0.0:
                least = min(least, output.limit / value - 1.0)
        assert least == pytest.approx(case_margin(selection, design[None], case)[0], rel=1e-9)


@functools.cache
def certified_instance():
    """An instance with one load case and a design that has a little room, and that design."""
    names = ("frequency", "load", "base", "row_limit", "deflection_limit", "force_limit", "total_limit")
    for seed in range(20):
        selection = instance(seed)
        cases = {name: getattr(selection.harmonic, name)[7:8] for name in names}
        selection = replace(selection, harmonic=replace(selection.harmonic, **cases))
        designs = random_designs(selection, 200, np.random.default_rng(seed))
        feasible, value = exact_accept(selection)(designs)
        if feasible.any():
            return selection, designs[int(np.argmax(np.where(feasible, value, -np.inf)))]
    raise AssertionError("no instance with a feasible design")


def test_certificate_agrees_with_samples():
    selection, design = certified_instance()
    tiny = certify(selection, design, stiffness_tolerance=1e-6)
    assert tiny.status == "proven"
    wide = certify(selection, design, stiffness_tolerance=0.4)
    assert wide.status == "violated"
    assert np.allclose(robust_separation(selection, design, stiffness_tolerance=1e-6), tiny.separation)


def test_robust_separation_is_below_the_nominal_one():
    selection, design = certified_instance()
    near = robust_separation(selection, design, stiffness_tolerance=1e-9)
    far = robust_separation(selection, design, stiffness_tolerance=0.05)
    assert (far <= near + 1e-12).all()


def test_undecided_output_makes_no_certificate():
    selection, design = certified_instance()
    stopped = certify(selection, design, stiffness_tolerance=1e-3, interrupted=lambda: True)
    assert stopped.status != "proven"
    system = robust_system(selection, design, stiffness_tolerance=1e-3)
    name, output = next(iter(case_outputs(selection, 0)))
    assert name == "case 0 row 0"
    assert decide(system, output, interrupted=lambda: True).status != "proven"
