"""Adjoint slopes of a brief's own requirements against complex steps through a machine put together again by hand."""

from __future__ import annotations

import importlib.util
import itertools
from pathlib import Path

import numpy as np
import pytest

from detune.sizing.made_parts import bounds, made_mount, values_by_unknown
from detune.sizing.part_slopes import LOSS, PRICE, STIFFNESS, VISCOUS, part_figures, part_law
from detune.solvers import size_gradients
from detune.solvers.gradient_modes import modes
from detune.solvers.gradient_noise import points
from detune.solvers.gradient_state import state_at
from detune.solvers.size_batch import judge
from detune.solvers.size_many_starts import Coordinates
from detune.study.load import load_study

HERE = Path(__file__).parent
_spec = importlib.util.spec_from_file_location("dense_machine", HERE / "dense_machine.py")
assert _spec is not None and _spec.loader is not None
dense = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(dense)
Dense, stepped, amplitude = dense.Dense, dense.stepped, dense.amplitude
TO = 1e-8
# Points already evaluated, by seed.
POINTS = {}


@pytest.fixture(scope="module")
def brief():
    return load_study(HERE / "everything_to_size.toml").brief


@pytest.fixture(scope="module")
def gradients(brief):
    return size_gradients.prepared(brief)


def at_point(brief, gradients, seed):
    """Unknowns somewhere inside their bounds, and all rows there."""
    x = Coordinates(brief).outward(0.1 + 0.8 * np.random.default_rng(seed).random(12))
    if seed not in POINTS:
        held = size_gradients.sides(gradients, x)
        POINTS[seed] = size_gradients.evaluated(gradients, x, held, whole=True), held
    return x, *POINTS[seed]


@pytest.fixture(scope="module", params=[0, 1])
def point(request, brief, gradients):
    return at_point(brief, gradients, request.param)


def close(brief, found, expected):
    """Slopes equal to 1e-8 of the largest, each unknown taken over its whole range."""
    low, high = bounds(brief)
    a, b = np.asarray(found) * (high - low), np.asarray(expected) * (high - low)
    assert np.abs(a - b).max() <= TO * max(np.abs(b).max(), 1e-12), (a, b)


def test_part_figures_are_those_of_the_made_parts(brief):
    x = Coordinates(brief).outward(np.full(12, 0.37))
    for group in brief.groups:
        figures, slopes = part_figures(part_law(brief, group), x)
        part = made_mount(brief, group, values_by_unknown(brief, x))
        assert figures[STIFFNESS] == pytest.approx([k or 0.0 for k in part.stiffness_dynamic], rel=1e-13)
        assert figures[VISCOUS] == pytest.approx([c or 0.0 for c in part.viscous], rel=1e-13)
        assert (figures[LOSS], figures[PRICE]) == pytest.approx((part.loss_factor[2], part.cost), rel=1e-13)
        assert slopes.shape == (8, 12)


def test_the_dense_machine_is_the_machine_of_the_study(brief, gradients, point):
    """Masses, stiffness and gravity's stiffness put together by hand are those of the program."""
    x, _, _ = point
    hand = Dense(x)
    at = size_gradients.state_at(gradients.states[0], x)
    for name in ("mass", "stiffness", "hysteretic", "viscous", "geometric", "static", "weight"):
        found, expected = getattr(at, name), getattr(hand, name)
        assert np.abs(found - expected).max() <= 1e-12 * np.abs(expected).max(), name


def test_static_rows(brief, gradients, point):
    x, found, _ = point
    reference = gradients.reference

    def smooth(ratio):
        return -np.log(ratio) if ratio.real >= 1.0 / np.e else 2.0 - np.e * ratio

    def heights(d):
        return {name: (dense.machine_rows(p) @ d.rest)[2] for name, p in dense.POINTS.items()}

    def level(d, sign):
        each = heights(d)
        return sign * (each["flange"] - each["foot"]) / 0.004

    expected = {
        ("sag", "flange"): [lambda d: smooth(-heights(d)["flange"] / 0.009)],
        ("tilt", "machine"): [lambda d: smooth(np.sqrt(d.rest[3] ** 2 + d.rest[4] ** 2) / np.radians(1.0))],
        ("level-difference", "flange, foot"): [lambda d, s=s: smooth(level(d, s)) for s in (1.0, -1.0)],
        **{("load-range", n): [lambda d, n=n: -d.load(n)[2] / reference] for n in ("A", "B", "C", "D", "arm")},
        ("stability", "whole machine"): [lambda d: 1.0 + least_share(d)],
    }  # fmt: skip

    def least_share(d):
        values = np.linalg.eigvals(np.linalg.solve(d.static, d.geometric))
        return values[np.argmin(values.real)]

    seen = 0
    for (kind, place), functions in expected.items():
        rows = [
            i
            for i, r in enumerate(found.rows.requirement)
            if r and (r.allowable.kind, r.place) == (kind, place)
        ]
        assert len(rows) == len(functions)
        for row, function in zip(rows, functions, strict=True):
            value, slopes = stepped(lambda z, f=function: f(Dense(z)), x)
            assert found.rows.value[row] == pytest.approx(value, rel=1e-10, abs=1e-12), kind
            close(brief, found.rows.slopes[row], slopes)
            seen += 1
    assert seen == 10


def test_separation_of_every_mode(brief, gradients, point):
    x, found, held = point

    def frequencies(z):
        d = Dense(z)
        values = np.linalg.eigvals(np.linalg.solve(d.mass, d.stiffness))
        return np.sqrt(values[np.argsort(values.real)]) / (2.0 * np.pi)

    value, slopes = stepped(frequencies, x)
    assert min(np.diff(value) / value[1:]) > 1e-3
    intervals = gradients.states[0].state.intervals
    assert len(intervals) == 4
    row = 0
    for (low, high), count in zip(intervals, held[0], strict=True):
        for mode in range(8):
            under = mode < count
            expected = 1.0 - value[mode] / low if under else value[mode] / high - 1.0
            assert found.apart[row] == pytest.approx(expected, abs=1e-9)
            close(brief, found.apart_slopes[row], -slopes[mode] / low if under else slopes[mode] / high)
            row += 1


def test_totals(brief, gradients, point):
    x, found, _ = point

    def cost(z):
        left, right, _, _, eta, c, ballast, mass, tuning, *_ = z
        spring = mass * (2.0 * np.pi * tuning) ** 2
        parts = 2 * (30 + 0.05 * left / 1e3 + 100 * eta) + 3 * (20 + 0.04 * right / 1e3 + 0.01 * c)
        return parts + 15 + 0.02 * spring / 1e3 + 1.5 * ballast

    value, slopes = stepped(cost, x)
    assert found.objectives["cost"][0] == pytest.approx(value, rel=1e-12)
    close(brief, found.objectives["cost"][1], slopes)
    value, slopes = stepped(lambda z: 2 * z[0] + 3 * z[1] + z[7] * (2.0 * np.pi * z[8]) ** 2, x)
    assert found.objectives["stiffness"][0] == pytest.approx(value, rel=1e-12)
    close(brief, found.objectives["stiffness"][1], slopes)
    assert (
        found.objectives["added-mass"][0] == x[6]
        and found.objectives["added-mass"][1].tolist() == np.eye(12)[6].tolist()
    )
    assert found.objectives["absorber-mass"][1].tolist() == np.eye(12)[7].tolist()


KINDS = (
    "displacement", "velocity", "acceleration", "weighted-acceleration", "relative-motion", "transmitted-force",
    "transmissibility", "mount-deflection", "gap", "uplift",
)  # fmt: skip


@pytest.mark.parametrize("kind", KINDS)
def test_responses_at_their_peaks(brief, gradients, point, kind):
    """At a peak the slope is that of the response at the frequency held (Danskin); log slopes by complex steps."""
    x, found, _ = point
    seen = set()
    for where, plan in gradients.responses:
        assert where == 0
        if plan.noises:
            continue
        for _index, requirement in enumerate(plan.requirements):
            allowable, place = requirement.allowable, requirement.place
            if allowable.kind != kind:
                continue
            rows = [i for i, r in enumerate(found.rows.requirement) if r == requirement]
            rows = [i for i in rows if found.rows.log[i] > -19.0 and np.isfinite(found.rows.omega[i])]
            family = plan.families[0]
            assert len(plan.families) == 1 or plan.largest
            for row in rows[:2]:
                speed = found.rows.omega[row]
                family = next(f for f in plan.families if 6.28 * f.low <= speed <= 6.29 * f.high)

                def total(z, family=family, speed=speed, allowable=allowable, place=place):
                    d = Dense(z)
                    by_order = {}
                    for loads in family.sets:
                        omega = speed * loads[0].order
                        load, base = np.zeros(8, dtype=complex), np.zeros(3, dtype=complex)
                        for each in loads:
                            if each.base is None:
                                load += omega**each.power * each.vector
                            else:
                                base += omega**each.power * np.asarray(each.base)
                        pair = d.observe(allowable, place, omega, d.respond(omega, load, base))
                        weight = 1.0
                        if allowable.has_weighting():
                            one = np.ones((1, 1, 3), dtype=complex)
                            weight = abs(allowable.weighted(one, np.array([[omega / 2 / np.pi]]))[0, 0, 0])
                        size = weight * amplitude(pair, allowable.along(), allowable.statistic())
                        by_order[loads[0].order] = by_order.get(loads[0].order, 0.0) + size
                    parts = list(by_order.values())
                    whole = (
                        np.sqrt(sum(p * p for p in parts)) if allowable.statistic() == "rms" else sum(parts)
                    )
                    if kind == "uplift":
                        return np.log(whole / -d.load(place)[2])
                    if kind == "mount-deflection" and allowable.part == "combined":
                        axial = d.deflected(place)[2]
                        whole = whole + axial * np.sign(axial.real)
                    if kind == "gap":
                        moved = dense.machine_rows(dense.POINTS[place]) @ d.rest
                        moved = moved - np.array([0.0, 0.0, 1.0]) * d.rest[7]
                        whole = whole + moved @ np.asarray(allowable.along())
                    return np.log(whole)

                value, slopes = stepped(total, x)
                limit = 1.0 if kind == "uplift" else getattr(allowable, "clearance", None) or allowable.limit
                assert found.rows.log[row] == pytest.approx(value - np.log(limit), abs=1e-9)
                close(brief, found.rows.log_slopes[row], slopes)
                seen.add((requirement.condition, place))
    assert len(seen) >= (1 if kind in ("gap", "displacement", "transmissibility") else 2), seen


def counted_noise(load, requirement, frequency, share):
    """Log of what noise counts as in a limit, as a function of the unknowns, by a rule of points with these shares.

    Mean largest magnitude in T: sigma (u + 0.5772/u), u = sqrt(2 ln(2 f T)) (Davenport 1964).
    """
    allowable, place, kind = requirement.allowable, requirement.place, requirement.allowable.kind
    weights = np.ones(len(frequency))
    if allowable.has_weighting():
        ones = np.ones((1, len(frequency), 3), dtype=complex)
        weights = np.abs(allowable.weighted(ones, frequency[None])[0, :, 0])

    def total(z):
        d = Dense(z)
        moved = rate = 0.0
        for f, s, w in zip(frequency, share, weights, strict=True):
            omega = 2.0 * np.pi * f
            base = np.asarray(load.load.base) * omega ** float(load.load.power)
            a, b = d.observe(allowable, place, omega, d.respond(omega, np.zeros(8, dtype=complex), base))
            along = allowable.along()
            if along is None:
                power = (a @ a + b @ b) * w**2
            else:
                power = ((a @ np.asarray(along)) ** 2 + (b @ np.asarray(along)) ** 2) * w**2
            moved, rate = moved + s * power, rate + s * power * omega**2
        statistic = allowable.statistic()
        sigma = np.sqrt(moved)
        if statistic in ("rms", "3-sigma"):
            size = sigma * (3.0 if statistic == "3-sigma" else 1.0)
        else:
            cycles = np.sqrt(rate / moved) / (2.0 * np.pi) * 600.0
            u = np.sqrt(2.0 * np.log(2.0 * cycles))
            size = sigma * (u + 0.5772156649015329 / u)
        return np.log(size / -d.load(place)[2]) if kind == "uplift" else np.log(size)

    return total


def noise_of(gradients, kind):
    """The noise of the study and the first limit of a kind on it."""
    (plan,) = [plan for _, plan in gradients.responses if plan.noises]
    return plan.noises[0], next(r for r in plan.requirements if r.allowable.kind == kind)


NOISY = ("acceleration", "velocity", "weighted-acceleration", "uplift")


@pytest.mark.parametrize(
    ("seed", "kind", "panels"), [*((0, kind, 40) for kind in NOISY), (1, "acceleration", 90)]
)
def test_random_responses(brief, gradients, seed, kind, panels):
    """Rms, 3-sigma and expected extreme of noise; the integral by a plain rule of many points, so to 1e-6."""
    x, found, _ = at_point(brief, gradients, seed)
    load, requirement = noise_of(gradients, kind)
    node, weight = np.polynomial.legendre.leggauss(8)
    corner = load.noise.spectrum.frequency
    pieces = np.concatenate([np.geomspace(a, b, panels + 1) for a, b in itertools.pairwise(corner)])
    pieces = np.unique(pieces)
    half = 0.5 * np.diff(pieces)[:, None]
    frequency = (0.5 * (pieces[1:] + pieces[:-1])[:, None] + half * node).ravel()
    share = (half * weight).ravel()
    exponent = np.diff(np.log(load.noise.spectrum.density)) / np.diff(np.log(corner))
    piece = np.searchsorted(corner, frequency) - 1
    share = share * load.noise.spectrum.density[piece] * (frequency / corner[piece]) ** exponent[piece]
    total = counted_noise(load, requirement, frequency, share)
    row = next(i for i, r in enumerate(found.rows.requirement) if r == requirement)
    chosen = [0, 5, 8, 10] if kind != "uplift" else [4, 6]
    value = float(np.real(total(x.astype(complex))))
    limit = 1.0 if kind == "uplift" else requirement.allowable.limit
    assert found.rows.log[row] == pytest.approx(value - np.log(limit), abs=1e-6)
    low, high = bounds(brief)
    largest = np.abs(found.rows.log_slopes[row] * (high - low)).max()
    for k in chosen:
        step = 1e-30 * max(abs(x[k]), 1.0)
        z = x.astype(complex)
        z[k] += 1j * step
        slope = float(np.imag(total(z)) / step) * (high[k] - low[k])
        assert found.rows.log_slopes[row, k] * (high[k] - low[k]) == pytest.approx(slope, abs=1e-6 * largest)


@pytest.mark.parametrize("seed", [0, 1])
@pytest.mark.parametrize("kind", NOISY)
def test_slopes_under_noise_at_the_points_of_the_search(brief, gradients, seed, kind):
    """At the points at which the search takes the integral its slopes are those of complex steps, to 1e-8."""
    x, found, _ = at_point(brief, gradients, seed)
    load, requirement = noise_of(gradients, kind)
    moving, _ = size_gradients._moving(state_at(gradients.states[0], x))
    omega, share = points(load.noise.spectrum, size_gradients._poles(moving, modes(moving)))
    total = counted_noise(load, requirement, omega / (2.0 * np.pi), share)
    row = next(i for i, r in enumerate(found.rows.requirement) if r == requirement)
    _, slopes = stepped(total, x)
    close(brief, found.rows.log_slopes[row], slopes)


def decay_and_slopes(x, rate):
    """The pole whose motion decays at `rate`, and how its decay changes with every unknown, by complex steps.

    (p^2 M + p C + K + j H) v = 0 in real form, j as the matrix (0, -1; 1, 0), is analytic in the unknowns, in v and in
    both parts of p. One Newton step from the solution at x, with an imaginary step in one unknown, gives the slope.
    """
    at = Dense(x.astype(complex))
    n = len(at.mass)
    turn, one = np.array([[0.0, -1.0], [1.0, 0.0]]), np.eye(2)
    inverse = np.linalg.inv(at.mass.real)
    stiffness = at.stiffness.real + 1j * at.hysteretic.real
    first = np.block([[np.zeros((n, n)), np.eye(n)], [-inverse @ stiffness, -inverse @ at.viscous.real]])
    poles, vectors = np.linalg.eig(first)
    index = int(np.argmin(np.abs(-poles.real - rate)))
    pole, vector = poles[index], vectors[:n, index] / np.linalg.norm(vectors[:n, index])
    start = np.concatenate([vector.real, vector.imag, [pole.real, pole.imag]])

    def missed(d, unknown):
        p = unknown[-2] * one + unknown[-1] * turn
        whole = np.kron(p @ p, d.mass) + np.kron(p, d.viscous) + np.kron(one, d.stiffness)
        whole = whole + np.kron(turn, d.hysteretic)
        held = [start[:-2] @ unknown[:-2] - 1.0, np.concatenate([start[n:-2], -start[:n]]) @ unknown[:-2]]
        return np.concatenate([whole @ unknown[:-2], held])

    jacobian = np.empty((len(start), len(start)))
    for column in range(len(start)):
        there = start.astype(complex)
        there[column] += 1e-30j
        jacobian[:, column] = np.imag(missed(at, there)) / 1e-30
    slopes = []
    for k in range(len(x)):
        step = 1e-30 * max(abs(x[k]), 1.0)
        z = x.astype(complex)
        z[k] += 1j * step
        moved = np.linalg.solve(jacobian, -np.imag(missed(Dense(z), start.astype(complex))) / step)
        slopes.append(-moved[-2])
    return -pole.real, np.array(slopes)


def test_decay_of_every_pole(brief, gradients, point):
    """Settling time by eigenvalues of the whole first-order system: q'' = -M^-1 (C q' + (K + j H) q)."""
    x, found, _ = point
    names = [i for i, r in enumerate(found.rows.requirement) if r and r.allowable.kind == "settling-time"]
    assert len(names) == 8
    values = found.rows.value[names]
    ratio = np.where(values <= 1.0, np.exp(-values), (2.0 - values) / np.e)
    decays = np.log(10.0) / 6.0 / ratio
    compared = 0
    for row, rate, value, share in zip(names, decays, values, ratio, strict=True):
        decay, slopes = decay_and_slopes(x, rate)
        assert decay == pytest.approx(rate, rel=1e-9)
        if share < 1e-3:
            continue
        close(brief, found.rows.slopes[row], slopes / rate * (1.0 if value <= 1.0 else np.e * share))
        compared += 1
    assert compared >= 3


def test_only_what_has_no_adjoint_is_differenced(tmp_path):
    """A limit in one-third-octave bands has no adjoint; every other limit of the study has one."""
    text = (HERE / "everything_to_size.toml").read_text(encoding="utf-8")
    band = (
        '[[allowable]]\nkind = "band-limit"\nat = "foot"\ndirection = "z"\nconditions = ["road"]\n'
        'criterion = "VC-A"\n\n[ballast]'
    )
    path = tmp_path / "study.toml"
    path.write_text(text.replace("[ballast]", band, 1), encoding="utf-8")
    found = size_gradients.prepared(load_study(path).brief)
    assert {r.allowable.kind for r in found.differenced} == {"band-limit"}
    x = Coordinates(found.brief).outward(np.full(12, 0.5))
    rows = size_gradients.evaluated(found, x, size_gradients.sides(found, x)).rows
    told = [i for i, r in enumerate(rows.requirement) if r and r.allowable.kind == "band-limit"]
    assert told and np.abs(rows.slopes[told]).max() > 0.0


def test_every_requirement_of_the_study_has_an_adjoint(gradients):
    assert gradients.differenced == ()


def test_rows_are_the_margins_of_the_batch_evaluation(brief, gradients, point):
    """Least row of each requirement against its margin, which the stages of `detune run` find in their own way."""
    x, found, _ = point
    judged = judge(brief, x[None])
    compared = 0
    for requirement, margin in zip(judged.requirements, judged.margins[:, 0], strict=True):
        rows = [i for i, r in enumerate(found.rows.requirement) if r == requirement]
        if not rows or margin > 1e5 or not np.isfinite(found.rows.log[rows[0]]):
            continue
        assert np.exp(-max(found.rows.log[i] for i in rows)) - 1.0 == pytest.approx(
            margin, rel=2e-4, abs=2e-4
        )
        compared += 1
    assert compared > 60


def test_modes_that_coincide_share_the_slope_of_their_mean():
    """A cube on four equal corners: x and y of one frequency. One stiffness raised splits them; their mean is smooth.

    For lateral x stiffness of half the feet, d(mean of w^2) = (d w_x^2 + 0)/2 by the uncoupled motion w_x^2
    = sum k_x/m.
    """
    brief = load_study(HERE / "cube_to_size.toml").brief
    found = size_gradients.prepared(brief)
    x = np.array([1e5, 1e5, 3e5])
    told = modes(size_gradients.state_at(found.states[0], x))
    squared = (2.0 * np.pi * told.frequency) ** 2
    pair = [i for i, s in enumerate(squared) if abs(s - 4e5 / 100.0) < 1e-6 * s]
    assert len(pair) == 2
    by_x = 8.0 * np.pi**2 * told.frequency[pair] * told.slopes[pair, 0]
    assert by_x == pytest.approx([4.0 / 100.0 / 2.0] * 2, rel=1e-9)


def test_a_response_that_does_not_agree_with_the_batch_is_differenced(brief, monkeypatch):
    """Were the maps of forces wrong by a tenth, the searches would not follow them."""
    from detune.solvers import gradient_probe

    plain = gradient_probe.ToneProbe.station_force
    monkeypatch.setattr(
        gradient_probe.ToneProbe, "station_force", lambda self, station: 1.1 * plain(self, station)
    )
    found = size_gradients.prepared(brief)
    kinds = {r.allowable.kind for r in found.differenced}
    assert "transmitted-force" in kinds and "displacement" not in kinds
