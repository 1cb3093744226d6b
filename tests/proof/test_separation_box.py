"""Worst separation under scatter against dense sampling, and the case in which corners of the centre are not enough."""

import numpy as np
import pytest
import scipy.linalg
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.proof.selection_data import ForbiddenBands
from detune.proof.separation_box import UncertainBody, box_separation, mass_enclosure, two_corner_separation

SEEDS = st.integers(0, 2**32 - 1)


def bands(*triples):
    low, high, need = np.array(triples).T
    return ForbiddenBands(low=low, high=high, separation=need)


def plain_separation(frequency, low, high):
    return min(max(f / high - 1, 1 - f / low) for f in frequency)


def arm(c):
    x, y, z = c
    return np.array([[1, 0, 0, 0, z, -y], [0, 1, 0, -z, 0, x], [0, 0, 1, y, -x, 0]], dtype=float)


def machine(rng, width, centre_width):
    m = rng.uniform(300, 1200)
    corners = [(sx * 0.6, sy * 0.4, -0.3) for sx in (-1, 1) for sy in (-1, 1)]
    rows = np.concatenate([arm(c) for c in corners])
    k = m * (2 * np.pi * rng.uniform(4, 9)) ** 2 / 4 * np.repeat(rng.uniform(0.5, 1.5, 4), 3)
    inertia = np.diag(m * rng.uniform(0.06, 0.2, 3))
    centre = rng.uniform(-0.05, 0.05, 3)
    body = UncertainBody(
        mass=(0.95 * m, 1.05 * m),
        centre_low=centre - centre_width,
        centre_high=centre + centre_width,
        inertia=inertia,
        inertia_factor=(0.8, 1.2),
        selector=np.eye(6),
    )
    return rows, k, k * (1 - width), k * (1 + width), body


def assemble(rows, k):
    return rows.T @ (k[:, None] * rows)


def mass_at(body, m, factor, centre):
    own = m * arm(centre).T @ arm(centre)
    own[3:, 3:] += factor * body.inertia
    return own


@settings(max_examples=25, deadline=None)
@given(SEEDS)
def test_two_corners_are_exact(seed):
    """Never above any sample, and attained along the path of a common factor (2,001 steps)."""
    rng = np.random.default_rng(seed)
    rows, k, low, high, body = machine(rng, 0.1, 0.0)
    mass = mass_at(body, body.mass[0], 1.0, body.centre_low)
    f_a = rng.uniform(3, 15)
    found = two_corner_separation(
        assemble(rows, low), assemble(rows, high), mass, bands((f_a, 1.2 * f_a, 0.1))
    )[0]
    for _ in range(60):
        sample = low + (high - low) * np.repeat(rng.uniform(size=4), 3)
        f = np.sqrt(scipy.linalg.eigh(assemble(rows, sample), mass, eigvals_only=True)) / (2 * np.pi)
        assert plain_separation(f, f_a, 1.2 * f_a) >= found - 1e-9
    base = np.sqrt(scipy.linalg.eigh(assemble(rows, k), mass, eigvals_only=True)) / (2 * np.pi)
    path = [plain_separation(base * np.sqrt(s), f_a, 1.2 * f_a) for s in np.linspace(0.9, 1.1, 2001)]
    assert min(path) == pytest.approx(found, abs=2e-4)


@settings(max_examples=20, deadline=None)
@given(SEEDS)
def test_mass_enclosure_holds(seed):
    rng = np.random.default_rng(seed)
    *_, body = machine(rng, 0.1, 10 ** rng.uniform(-3, -1))
    below, above = mass_enclosure(body, body.centre_low[None], body.centre_high[None])
    for _ in range(200):
        centre = body.centre_low + (body.centre_high - body.centre_low) * rng.uniform(size=3)
        m = rng.uniform(*body.mass)
        mass = mass_at(body, m, rng.uniform(*body.inertia_factor), centre)
        scale = np.trace(mass)
        assert np.linalg.eigvalsh(mass - below[0])[0] >= -1e-9 * scale
        assert np.linalg.eigvalsh(above[0] - mass)[0] >= -1e-9 * scale


@settings(max_examples=5, deadline=None)
@given(SEEDS)
def test_box_separation_is_never_above_a_sample(seed):
    rng = np.random.default_rng(seed)
    rows, _, low, high, body = machine(rng, 0.05, 0.03)
    f_a = rng.uniform(3, 15)
    band = bands((f_a, 1.1 * f_a, 0.05))
    found = box_separation(
        assemble(rows, low), assemble(rows, high), np.zeros((6, 6)), (body,), band, gap=0.01, max_boxes=1500
    )
    assert found.guaranteed <= found.attained
    for _ in range(300):
        centre = body.centre_low + (body.centre_high - body.centre_low) * rng.uniform(size=3)
        mass = mass_at(body, rng.uniform(*body.mass), rng.uniform(*body.inertia_factor), centre)
        k = low + (high - low) * np.repeat(rng.integers(0, 2, 4), 3)
        f = np.sqrt(scipy.linalg.eigh(assemble(rows, k), mass, eigvals_only=True)) / (2 * np.pi)
        assert plain_separation(f, f_a, 1.1 * f_a) >= found.guaranteed - 1e-12


def test_extreme_inside_the_box_of_the_centre_is_not_missed():
    """With symmetric mounts a mode is extreme at the centre of symmetry, strictly inside the box of the centre.

    400 kg on four equal mounts, centre height on the mounts' plane: the corners of the box separate better
    than its middle, so corners alone would overstate the separation.
    """
    corners = [(sx * 0.6, sy * 0.4, 0.0) for sx in (-1, 1) for sy in (-1, 1)]
    rows = np.concatenate([arm(c) for c in corners])
    k = np.tile([3e5, 3e5, 4e5], 4)
    body = UncertainBody(
        mass=(400.0, 400.0),
        centre_low=np.array([-0.1, 0.0, 0.0]),
        centre_high=np.array([0.1, 0.0, 0.0]),
        inertia=np.diag([20.0, 40.0, 50.0]),
        inertia_factor=(1.0, 1.0),
        selector=np.eye(6),
    )

    def modes(x):
        mass = mass_at(body, 400.0, 1.0, np.array([x, 0.0, 0.0]))
        return np.sqrt(scipy.linalg.eigh(assemble(rows, k), mass, eigvals_only=True)) / (2 * np.pi)

    # Heave couples with pitch when the centre moves off the middle and the two frequencies repel each other.
    heave = np.sqrt(4 * 4e5 / 400.0) / (2 * np.pi)
    assert np.min(np.abs(modes(0.0) - heave)) < 1e-9
    f_a = 1.001 * heave
    band = bands((f_a, 1.002 * f_a, -0.5))
    corner = min(plain_separation(modes(x), f_a, 1.002 * f_a) for x in (-0.1, 0.1))
    middle = plain_separation(modes(0.0), f_a, 1.002 * f_a)
    assert middle < corner
    stiffness = assemble(rows, k)
    found = box_separation(stiffness, stiffness, np.zeros((6, 6)), (body,), band, gap=1e-3)
    assert found.guaranteed <= middle + 1e-12
    assert found.attained == pytest.approx(middle, abs=2e-3)


def test_status_of_a_decision():
    rng = np.random.default_rng(5)
    rows, _, low, high, body = machine(rng, 0.02, 0.01)
    soft, stiff, zero = assemble(rows, low), assemble(rows, high), np.zeros((6, 6))
    far = bands((200.0, 210.0, 0.2))
    assert box_separation(soft, stiff, zero, (body,), far).status == "proven"
    centre = 0.5 * (body.centre_low + body.centre_high)
    f = np.sqrt(scipy.linalg.eigh(soft, mass_at(body, body.mass[1], 1.2, centre), eigvals_only=True))[2]
    f /= 2 * np.pi
    assert box_separation(soft, stiff, zero, (body,), bands((f, 1.01 * f, 0.1))).status == "violated"
    bracket = box_separation(soft, stiff, zero, (body,), bands((200.0, 210.0, -1.0)), gap=1e-6, max_boxes=64)
    tight = bands((200.0, 210.0, bracket.attained - 1e-9))
    assert box_separation(soft, stiff, zero, (body,), tight, max_boxes=2).status == "undecided"
