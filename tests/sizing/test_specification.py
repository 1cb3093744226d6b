"""Purchase boxes: random points inside always pass, just outside a face some fail, and nothing can be grown."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.sizing.specification import largest_proven_box
from detune.sizing.statement import SizingError

MASS, HERTZ, LIMIT = 100.0, 25.0, 0.25
OMEGA = 2 * math.pi * HERTZ


def transmissibility(k, eta):
    return np.abs(k * (1 + 1j * eta) / (k * (1 + 1j * eta) - MASS * OMEGA**2))


def proven(low, high):
    """Exact on the soft side: T rises with k and with eta there (both r > sqrt 2), so the upper corner decides."""
    return bool(high[0] < 0.5 * MASS * OMEGA**2 and transmissibility(high[0], high[1]) <= LIMIT)


def specification(tolerance=1e-4):
    return largest_proven_box(
        ("stiffness", "loss factor"),
        np.array([2e5, 0.1]),
        np.array([5e4, 0.02]),
        np.array([5e6, 1.0]),
        proven,
        (True, False),
        tolerance,
    )


def test_every_part_inside_passes_and_just_outside_a_face_some_fail():
    spec = specification()
    rng = np.random.default_rng(0)
    inside = rng.uniform(spec.lower, spec.upper, size=(4000, 2))
    assert np.all(transmissibility(inside[:, 0], inside[:, 1]) <= LIMIT * (1 + 1e-12))
    upper = [f for f in spec.faces if f.upper_end]
    assert [f.stopped_by for f in upper] == ["no proof beyond", "no proof beyond"]
    assert transmissibility(upper[0].first_unproven, spec.upper[1]) > LIMIT
    assert transmissibility(spec.upper[0], upper[1].first_unproven) > LIMIT
    assert upper[0].first_unproven / upper[0].value - 1 < 2e-4
    # Nothing below matters for isolation, so the lower faces go to the limits of the search.
    assert [f.stopped_by for f in spec.faces if not f.upper_end] == ["limit of the search"] * 2
    assert spec.lower == pytest.approx([5e4, 0.02])


@settings(deadline=None, max_examples=25)
@given(st.integers(0, 10_000), st.integers(1, 4))
def test_maximal_by_inclusion_for_random_convex_regions(seed, size):
    # The region is an ellipsoid: a box lies in it exactly when its farthest corner does.
    rng = np.random.default_rng(seed)
    weights = rng.uniform(0.2, 3.0, size)
    center = rng.uniform(-0.2, 0.2, size)

    def inside(low, high):
        return bool(weights @ np.maximum(np.abs(low), np.abs(high)) ** 2 <= 1.0)

    names = tuple(f"q{i}" for i in range(size))
    spec = largest_proven_box(names, center, np.full(size, -3.0), np.full(size, 3.0), inside, (False,) * size)
    assert inside(spec.lower, spec.upper)
    assert np.all(spec.lower <= center) and np.all(center <= spec.upper)
    for face in spec.faces:
        low, high = spec.lower.copy(), spec.upper.copy()
        i = names.index(face.quantity)
        (high if face.upper_end else low)[i] = face.first_unproven
        assert not inside(low, high)
        assert abs(face.first_unproven - face.value) <= 6.0 * 1e-3 * (1 + 1e-9)


def test_an_unproven_design_and_bad_limits_are_refused():
    with pytest.raises(SizingError, match="not proven"):
        largest_proven_box(
            ("k",), np.array([1.0]), np.array([0.5]), np.array([2.0]), lambda a, b: False, (True,)
        )
    with pytest.raises(SizingError, match="do not hold the design"):
        largest_proven_box(("k",), np.array([3.0]), np.array([0.5]), np.array([2.0]), proven, (True,))
