"""Property tests of every bound: random boxes, many random completions, not one violation."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.proof.ball import output_bound
from detune.proof.bisect import decide, lots, singles, worst_case
from detune.proof.loewner import eigenvalue_prune, static_interval, undamped_response_interval
from detune.proof.robust_data import OutputLimit, RobustError, RobustSystem, first_box, output_at

SEEDS = st.integers(0, 2**32 - 1)


def attachment(x, y, z):
    """[I, -skew(r)]: displacement of a point at r from the reference, small rotations."""
    return np.array([[1, 0, 0, 0, z, -y], [0, 1, 0, -z, 0, x], [0, 0, 1, y, -x, 0]], dtype=float)


def random_system(rng, *, width, by="part", damping=True, mass_scatter=False, viscous=False):
    """A machine of 300 to 1500 kg on 4 mounts with independent stiffness and damping factors."""
    m = rng.uniform(300, 1500)
    mass = np.diag([m, m, m, *(m * rng.uniform(0.05, 0.3, 3))])
    corners = [(sx * rng.uniform(0.4, 0.8), sy * rng.uniform(0.3, 0.6)) for sx in (-1, 1) for sy in (-1, 1)]
    axes = np.concatenate([attachment(x, y, -rng.uniform(0.1, 0.5)) for x, y in corners])
    stiffness = m * (2 * np.pi * rng.uniform(4, 12)) ** 2 / 4 * rng.uniform(0.3, 1.5, 12)
    sv = singles(4) if by == "part" else lots(np.array([7, 7, 3, 3]))
    count = int(sv.max()) + 1
    dv = sv + count if damping else np.full(12, -1)
    mv = 2 * count if damping else count
    variables = mv + (1 if mass_scatter else 0)
    low, high = np.full(variables, 1 - width), np.full(variables, 1 + width)
    terms = np.zeros((0, 6, 6))
    if mass_scatter:
        row = attachment(0.2, -0.1, 0.1)
        terms = (0.05 * m * row.T @ row)[None]
    zero = np.zeros((6, 6))
    return RobustSystem(
        mass=mass,
        fixed_dynamic=zero,
        fixed_hysteretic=zero,
        fixed_viscous=np.eye(6) * (5.0 if viscous else 0.0),
        axes=axes,
        stiffness=stiffness,
        loss=stiffness * rng.uniform(0.02, 0.3),
        viscous=stiffness * (1e-3 if viscous else 0.0),
        stiffness_variable=sv,
        damping_variable=dv,
        mass_terms=terms,
        mass_variable=np.full(len(terms), mv),
        low=low,
        high=high,
    )


def random_output(rng, frequency, *, base=False, force=False, limit=np.inf):
    power = 2.0 if not base else float(rng.integers(0, 2))
    return OutputLimit(
        row=(np.zeros(6) if force else rng.normal(size=6)).astype(complex),
        force=(rng.normal(size=12) if force else np.zeros(12)).astype(complex),
        load=rng.normal(size=6) + 1j * rng.normal(size=6),
        base=(1e-3 * rng.normal(size=12) if base else np.zeros(12)).astype(complex),
        limit=limit,
        frequency=frequency,
        load_power=power,
        output_power=float(rng.integers(0, 3)),
    )


def random_points(rng, low, high, count):
    """Random points of a box, half of them at corners."""
    points = low + (high - low) * rng.uniform(size=(count, len(low)))
    corner = low + (high - low) * rng.integers(0, 2, (count, len(low)))
    return np.concatenate([points, corner])


@settings(max_examples=40, deadline=None)
@given(SEEDS, st.booleans(), st.booleans(), st.booleans(), st.booleans())
def test_ball_is_never_below_a_sample(seed, base, force, mass_scatter, viscous):
    rng = np.random.default_rng(seed)
    system = random_system(
        rng,
        width=10 ** rng.uniform(-4, -0.7),
        by="part" if rng.integers(2) else "lot",
        damping=bool(rng.integers(2)),
        mass_scatter=mass_scatter,
        viscous=viscous,
    )
    f = rng.uniform(3, 40)
    output = random_output(rng, (f, f * (1 + 10 ** rng.uniform(-4, -1))), base=base, force=force)
    low, high = first_box(system, output)
    upper, _ = output_bound(system, output, low[None], high[None])
    values = output_at(system, output, random_points(rng, low, high, 400))
    assert values.max() <= upper[0]


@settings(max_examples=15, deadline=None)
@given(SEEDS)
def test_ball_of_a_tiny_box_is_tight(seed):
    """A box of relative width 1e-7 leaves the bound within 1 % of the value: the bound is not vacuous."""
    rng = np.random.default_rng(seed)
    system = random_system(rng, width=1e-7)
    f = rng.uniform(3, 40)
    output = random_output(rng, (f, f))
    low, high = first_box(system, output)
    upper, _ = output_bound(system, output, low[None], high[None])
    assert upper[0] <= 1.01 * output_at(system, output, low[None])[0]


def stiffness_pair(rng, n):
    """K_low, K_high and random K between them, from n + 3 rank-one springs."""
    rows = rng.normal(size=(n + 3, n))
    middle = np.exp(rng.normal(size=n + 3))
    width = np.exp(10 ** rng.uniform(-3, 0))
    low, high = middle / width, middle * width

    def build(k):
        return np.einsum("...a,ai,aj->...ij", k, rows, rows)

    inside = low + (high - low) * rng.uniform(size=(200, n + 3))
    inside[:100] = np.where(rng.integers(0, 2, (100, n + 3)), low, high)
    return build(low), build(high), build(inside)


@settings(max_examples=60, deadline=None)
@given(SEEDS, st.integers(1, 7))
def test_static_interval_holds_every_completion(seed, n):
    rng = np.random.default_rng(seed)
    low, high, inside = stiffness_pair(rng, n)
    rows, load = rng.normal(size=(4, n)), rng.normal(size=n)
    z_low, z_high, valid = static_interval(low[None], high[None], rows, load)
    assert valid[0]
    values = (
        np.linalg.solve(inside, load) @ rows.T
        if n == 1
        else np.linalg.solve(inside, load[:, None])[..., 0] @ rows.T
    )
    assert (values >= z_low[0]).all() and (values <= z_high[0]).all()


@settings(max_examples=60, deadline=None)
@given(SEEDS, st.integers(1, 7))
def test_undamped_interval_holds_every_completion(seed, n):
    rng = np.random.default_rng(seed)
    low, high, inside = stiffness_pair(rng, n)
    mass = np.diag(np.exp(rng.normal(size=n)))
    rows, load = rng.normal(size=(3, n)), rng.normal(size=n)
    frequency = np.exp(rng.uniform(-4, 1.5))
    z_low, z_high, valid = undamped_response_interval(low[None], high[None], mass, frequency, rows, load)
    if not valid[0]:
        assert np.isinf(z_low).all() and np.isinf(z_high).all()
        return
    shifted = inside - (2 * np.pi * frequency) ** 2 * mass
    values = np.linalg.solve(shifted, load[:, None])[..., 0] @ rows.T
    assert (values >= z_low[0]).all() and (values <= z_high[0]).all()


@settings(max_examples=80, deadline=None)
@given(SEEDS, st.integers(1, 7))
def test_eigenvalue_prune_is_right_for_every_completion(seed, n):
    rng = np.random.default_rng(seed)
    low, high, inside = stiffness_pair(rng, n)
    values = np.linalg.eigvalsh(inside)
    centre = np.exp(rng.uniform(np.log(1e-2), np.log(values.max())))
    band = np.array([[centre / 1.3]]), np.array([[centre * 1.3]])
    flag = eigenvalue_prune(np.linalg.eigvalsh(low[None]), np.linalg.eigvalsh(high[None]), *band)
    if flag[0]:
        assert ((values > band[0]) & (values < band[1])).any(axis=1).all()


@settings(max_examples=12, deadline=None)
@given(SEEDS, st.sampled_from(["part", "lot"]))
def test_worst_case_is_never_below_samples(seed, by):
    rng = np.random.default_rng(seed)
    system = random_system(rng, width=0.02, by=by, damping=False)
    f = rng.uniform(15, 30)
    output = random_output(rng, (f, 1.1 * f))
    found = worst_case(system, output, gap=0.05, max_boxes=1500)
    low, high = first_box(system, output)
    values = output_at(system, output, random_points(rng, low, high, 1500))
    assert values.max() <= found.upper
    assert found.lower <= found.upper


@pytest.mark.nightly
@pytest.mark.parametrize("seed", range(20))
def test_worst_case_against_ten_thousand_samples_and_local_search(seed):
    import scipy.optimize

    rng = np.random.default_rng(seed)
    system = random_system(rng, width=0.05, by="part", damping=False)
    f = rng.uniform(6, 30)
    output = random_output(rng, (f, 1.15 * f))
    found = worst_case(system, output, gap=0.02, max_boxes=5000)
    low, high = first_box(system, output)
    points = random_points(rng, low, high, 5000)
    values = output_at(system, output, points)
    best = points[np.argmax(values)]

    def negative(x):
        return -float(output_at(system, output, (low + (high - low) * x)[None])[0])

    start = (best - low) / (high - low)
    local = scipy.optimize.minimize(negative, start, bounds=[(0, 1)] * len(low), method="L-BFGS-B")
    assert max(values.max(), -local.fun) <= found.upper


def test_decision_is_proven_just_above_the_worst_case_and_violated_below():
    rng = np.random.default_rng(3)
    system = random_system(rng, width=0.03, by="lot", damping=False)
    output = random_output(rng, (18.0, 22.0))
    bracket = worst_case(system, output, gap=0.01)
    assert bracket.upper <= 1.0101 * bracket.lower
    above = decide(system, limited(output, 1.02 * bracket.lower))
    assert above.status == "proven" and above.upper <= above.limit
    below = decide(system, limited(output, 0.999 * bracket.lower))
    assert below.status == "violated" and below.splits == ()
    point = np.append(below.worst, (2 * np.pi * below.frequency) ** 2)
    assert output_at(system, output, point[None])[0] == pytest.approx(below.lower, rel=1e-9)
    assert below.lower > below.limit


def limited(output, limit):
    from dataclasses import replace

    return replace(output, limit=limit)


def test_bisects_until_decided():
    """ALGORITHMS 5: stopping at a small gap left the bound a hair above the limit, and a good design was skipped.

    The limit lies between the true worst case and the bound of the first box: only bisection certifies it.
    """
    rng = np.random.default_rng(11)
    system = random_system(rng, width=0.01, by="lot", damping=False)
    output = random_output(rng, (30.0, 30.0))
    low, high = first_box(system, output)
    first, _ = output_bound(system, output, low[None], high[None])
    fine = worst_case(system, output, gap=1e-4)
    assert first[0] > fine.upper * 1.0001
    limit = fine.upper + 1e-3 * (first[0] - fine.upper)
    decision = decide(system, limited(output, limit))
    assert decision.status == "proven" and decision.boxes > 1
    capped = decide(system, limited(output, limit), max_boxes=1)
    assert capped.status == "undecided"
    assert capped.lower <= limit < capped.upper


def test_interrupted_decision_is_undecided():
    rng = np.random.default_rng(12)
    system = random_system(rng, width=0.05, by="part", damping=False)
    output = random_output(rng, (8.0, 20.0))
    value = worst_case(system, output, gap=0.5, max_boxes=300)
    stopped = decide(system, limited(output, 1.01 * value.lower), interrupted=lambda: True)
    assert stopped.status == "undecided" and stopped.upper == np.inf


def test_single_mount_oscillator_has_the_closed_form_worst_case():
    """One freedom, k(1 + j eta), |q| = F / |k - m w^2 + j eta k|; at w below resonance the softest spring is worst.

    m = 100 kg, k = 1e6 N/m +-10 %, eta = 0.1, 5 Hz: F / sqrt((9e5 - 100 w^2)^2 + (9e4)^2), by hand.
    """
    one, zero = np.eye(1), np.zeros((1, 1))
    system = RobustSystem(
        mass=100.0 * one,
        fixed_dynamic=zero,
        fixed_hysteretic=zero,
        fixed_viscous=zero,
        axes=one,
        stiffness=np.array([1e6]),
        loss=np.array([1e5]),
        viscous=np.zeros(1),
        stiffness_variable=np.array([0]),
        damping_variable=np.array([-1]),
        mass_terms=np.zeros((0, 1, 1)),
        mass_variable=np.zeros(0, dtype=np.int64),
        low=np.array([0.9]),
        high=np.array([1.1]),
    )
    output = OutputLimit(
        row=np.ones(1, dtype=complex),
        force=np.zeros(1, dtype=complex),
        load=np.ones(1, dtype=complex),
        base=np.zeros(1, dtype=complex),
        limit=1.0,
        frequency=(5.0, 5.0),
    )
    w = 2 * np.pi * 5.0
    expected = 1.0 / np.hypot(9e5 - 100.0 * w**2, 9e4)
    found = worst_case(system, output, gap=1e-3)
    assert found.lower == pytest.approx(expected, rel=1e-12)
    assert expected <= found.upper <= expected * 1.001


def test_bad_arrays_are_refused():
    rng = np.random.default_rng(0)
    system = random_system(rng, width=0.1)
    from dataclasses import replace

    with pytest.raises(RobustError, match="positive"):
        replace(system, low=system.low - 1.0)
    with pytest.raises(RobustError, match="frequency"):
        random_output(rng, (5.0, 4.0))
