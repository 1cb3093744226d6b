"""The closed forms of one-axis sizing over a range against dense frequencies, for every kind of limit and damping.

The dense side is written from |X| <= limit with complex numbers of numpy alone (`instances.response`).
"""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest

from detune.sizing import slice_exchange, slice_response
from detune.sizing.slice_data import bench, pool
from detune.sizing.slice_question import Scales, question_of
from detune.sizing.statement import Objective, OneAxisProblem, ResponseLimit
from sizing import instances

MASS, LOW, HIGH = 100.0, 8.0, 16.0
KINDS = [("transmissibility", "unit"), ("transmitted force", "force"), ("transmitted force", "unbalance")]
KINDS += list(itertools.product(("displacement", "velocity", "acceleration"), ("force", "unbalance")))
KINDS += list(
    itertools.product(
        ("displacement", "velocity", "acceleration", "deflection"),
        ("base displacement", "base velocity", "base acceleration"),
    )
)


def made(quantity: str, source: str, kind: str, share: float, hertz: float):
    """A problem whose limit is `share` of the greatest response at a natural frequency and moderate damping."""
    k = MASS * (2 * math.pi * hertz) ** 2
    d = 0.16 * math.sqrt(k * MASS) if kind == "viscous" else 0.16
    raw = ResponseLimit("limit", quantity, 1.0, LOW, HIGH, source, 1.0)
    f = np.linspace(LOW, HIGH, 4001)
    level = share * float(instances.response(raw, kind, k, d, MASS, f).max())
    limit = ResponseLimit("limit", quantity, level, LOW, HIGH, source, 1.0)
    high = 1e6 if kind == "viscous" else 50.0
    problem = OneAxisProblem(MASS, kind, (k / 9, k * 9), (0.0, high), Objective("softest"), (limit,))
    scales = Scales.of(problem)
    question = question_of(problem, scales, False)
    work = bench(pool(4, False), 1, False)
    for n, value in enumerate([question.limits[0]]):
        work.level[n] = value[2]
    return limit, k, scales, question, work


def unit_of(scales: Scales, k: float, kind: str, gamma: float) -> float:
    """Damping in SI of a scaled gamma at a stiffness."""
    scaled = k / (MASS * scales.squared_frequency)
    root = math.sqrt(gamma)
    return root * MASS * math.sqrt(scales.squared_frequency) if kind == "viscous" else root / scaled


@pytest.mark.parametrize("kind", ["viscous", "loss factor"])
@pytest.mark.parametrize(("quantity", "source"), KINDS)
def test_damping_a_range_asks_for_and_allows(quantity, source, kind):
    """Just inside the interval every dense frequency meets the limit; just outside one of them does not."""
    seen = 0
    for share, hertz in itertools.product((0.5, 1.0, 1.6), (6.0, 9.0, 12.0, 15.0, 22.0)):
        limit, k, scales, question, work = made(quantity, source, kind, share, hertz)
        scaled = k / (MASS * scales.squared_frequency)
        least, _ = slice_response.bounding_damping(question, work, 0, scaled, True)
        most, _ = slice_response.bounding_damping(question, work, 0, scaled, False)
        f = np.unique(
            np.concatenate([np.linspace(LOW, HIGH, 40001), hertz * (1 + np.linspace(-0.01, 0.01, 4001))])
        )
        f = f[(f >= LOW) & (f <= HIGH)]

        def worst(gamma, limit=limit, k=k, scales=scales, f=f):
            with np.errstate(divide="ignore"):
                response = instances.response(limit, kind, k, unit_of(scales, k, kind, gamma), MASS, f)
            return float(response.max()) / limit.limit

        low, high = max(least, 0.0), min(most, 1e3 * scaled**2)
        if low < high:
            assert worst(low * (1 + 1e-7) + 1e-13) <= 1 + 1e-6
            assert worst(high * (1 - 1e-7)) <= 1 + 1e-6
            seen += 1
        if 0 < least < math.inf:
            assert worst(least * (1 - 1e-3)) > 1
        if most < 1e3 * scaled**2 and most > 0:
            assert worst(most * (1 + 1e-3)) > 1
        if least == math.inf or most <= 0:
            assert all(worst(g * scaled**2) > 1 - 1e-9 for g in (1e-6, 1e-3, 1e-1, 1.0, 100.0))
    assert seen > 0 or quantity == "transmissibility"


def asked(row, viscous: bool, k: float, u):
    """By hand from level u^q [|K|^2] <= |D|^2 at unit mass: gamma s (1 - t) >= t [k^2] - (k - u)^2, where 1 - t > 0."""
    transmission, power, level = row[:3]
    t = level * u**power
    free = 1.0 - t if transmission else np.ones_like(u)
    top = t * k**2 if transmission else t
    with np.errstate(divide="ignore"):
        need = (top - (k - u) ** 2) / ((u if viscous else 1.0) * free)
    return np.where(free > 0, need, -np.inf)


@pytest.mark.parametrize("kind", ["viscous", "loss factor"])
@pytest.mark.parametrize(("quantity", "source"), KINDS)
def test_the_tangent_along_a_ridge_is_never_above_what_the_range_asks_for(quantity, source, kind):
    """S from dense u at other stiffnesses stays above the tangent (C convex, its proof); at its own they touch."""
    touched = 0
    for share, hertz in itertools.product((0.7, 1.3), (9.0, 12.0, 15.0)):
        _, k, scales, question, work = made(quantity, source, kind, share, hertz)
        own = k / (MASS * scales.squared_frequency)
        least, u = slice_response.bounding_damping(question, work, 0, own, True)
        low, high, _ = slice_response.part_of_range(question, work, 0, True)
        if not (0 < least < math.inf and low < u < high):
            continue
        touched += 1
        ratio = u / own
        value, slope, e1, e2 = slice_response.ridge(question, work, 0, own, ratio)
        everywhere = asked(question.limits[0], kind == "viscous", own, np.linspace(low, high, 100001)[1:-1])
        assert least == pytest.approx(float(everywhere.max()), rel=1e-6)
        assert value + e1 * own + e2 * own**2 == pytest.approx(least, rel=1e-7, abs=1e-12)
        for other in np.linspace(low / ratio, high / ratio, 60)[1:-1].tolist():
            tangent = value + slope * (other - own) + e1 * other + e2 * other**2
            places = np.array([*np.linspace(low, high, 400)[1:-1].tolist(), other * ratio])
            dense = float(asked(question.limits[0], kind == "viscous", other, places).max())
            assert tangent <= dense + 1e-9 * (abs(dense) + own**2)
    assert touched or (quantity, source) in {("transmissibility", "unit")}


def test_levels_are_those_of_the_mass():
    """A receptance limit per unit of mass is divided by the mass squared; a transmission is not."""
    limits = (
        ResponseLimit("X", "displacement", 1e-3, 5.0, 5.0, "force", 100.0),
        ResponseLimit("T", "transmissibility", 2.0, 5.0, 5.0),
    )
    problem = OneAxisProblem(10.0, "viscous", (1e3, 1e5), (0.0, 10.0), Objective("softest"), limits)
    scales = Scales.of(problem)
    question = question_of(problem, scales, False)
    work = bench(pool(2, False), 2, False)
    from detune.sizing.slice_kernels import Slices

    slices = Slices(problem, "plain")
    slice_exchange.set_levels(question, slices.room(20.0, 20.0), work)
    # (F/x/m/w0^2)^2 with F/x = 1e5 N/m, m = 20 kg, w0^2 = sqrt(1e3 1e5)/10 = 1e3 rad2/s2.
    assert work.level[0] == pytest.approx((1e5 / 20.0 / 1e3) ** 2, rel=1e-12)
    assert work.level[1] == pytest.approx(0.25, rel=1e-12)
