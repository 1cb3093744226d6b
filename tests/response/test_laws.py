"""Mounts whose stiffness depends on frequency, temperature or load: two roads, closed forms, other libraries."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
import scipy.signal
from scipy.interpolate import PchipInterpolator
from scipy.optimize import brentq

from detune.brief.allowable.sag import Sag
from detune.brief.allowable.transmissibility import Transmissibility
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.brief import Brief
from detune.brief.forcing.base_motion import BaseMotion
from detune.brief.machine import Body, Point, Station
from detune.parts.kinds.mount import Mount
from detune.parts.laws import LoadCurve, Relaxation
from detune.physics.relaxation import kramers_kronig_violation, storage_deficit
from detune.response.assemble import PartBatch
from detune.response.designs import Designs
from detune.response.direct_laws import part_stiffness
from response import law_machines

machines = law_machines.machines

NIGHTLY = pytest.mark.nightly
TWO_PI = 2.0 * math.pi
LAWS = {
    "relaxation": law_machines.relaxing,
    "table": law_machines.tabled,
    "load curve": law_machines.curved,
    "air spring": law_machines.air,
}


SLOW = [pytest.param(kind, marks=NIGHTLY) for kind in ("base motion", "noise", "passage")]


@pytest.mark.parametrize("kind", ["tones", "pulse", *SLOW])
@pytest.mark.parametrize("law", LAWS)
def test_six_axes_batch_equals_assessor(law: str, kind: str) -> None:
    """Each law on one of two groups, a flexible floor, an offset centre and inclined stations."""
    seed = 3
    brief, (one, other) = machines.random_machine(seed)
    forcing = brief.forcing if kind == "tones" else law_machines.forcings(seed)[kind]
    conditions = brief.conditions if kind == "tones" else law_machines.conditions(kind)
    statics = law_machines.STATIC if kind == "tones" else law_machines.STATIC[:2]
    # After a shock the floor moves on, and absolute displacement has no greatest value.
    limits = law_machines.LIMITS[1:] if kind == "pulse" else law_machines.LIMITS
    brief = brief.model_copy(
        update={
            "gravity_stiffness": True,
            "forcing": forcing,
            "conditions": conditions,
            "allowables": (*limits, *statics),
        }
    )
    law_machines.agreed(brief, LAWS[law](one), other)


MASS, FN = 40.0, 8.0
K = MASS * (TWO_PI * FN) ** 2
G = 9.80665
MOTION = Transmissibility(of="motion", at="P", direction="z", limit=1e3)


def base(frequency: float) -> BaseMotion:
    return BaseMotion(name="road", frequency=frequency, direction="z", displacement=1e-3)


def one(brief: Brief, part: Mount, kind: str) -> float:
    """The value of the brief's only row of a kind, by both roads."""
    return float(machines.value(law_machines.agreed(brief, part, rel=1e-6), kind))


@pytest.mark.parametrize("ratio", [1.0, 3.0, 10.0])
@pytest.mark.parametrize("r", [0.5, 1.0, 1.6, 3.0, 8.0])
def test_relaxation_transmissibility_in_closed_form(ratio: float, r: float) -> None:
    # Ruzicka and Derby, Influence of Damping in Vibration Isolation (1971), from memory, recomputed: an elastically
    # coupled dashpot, T^2 = (1 + 4 ((N+1)/N)^2 z^2 r^2)/((1 - r^2)^2 + 4 z^2 r^2 (N + 1 - r^2)^2/N^2).
    z = 0.2
    part = replace(machines.mount(k=K, c=2.0 * z * math.sqrt(K * MASS)), relaxation=Relaxation(ratio))
    brief = machines.one_axis(MASS, base(r * FN), (MOTION,))
    lost = 2.0 * z * r / ratio
    expected = math.sqrt(
        (1.0 + (lost * (ratio + 1.0)) ** 2) / ((1.0 - r**2) ** 2 + (lost * (ratio + 1.0 - r**2)) ** 2)
    )
    assert one(brief, part, "transmissibility") == pytest.approx(expected, rel=1e-9)


def test_relaxation_against_a_state_space_with_an_inner_state() -> None:
    # X1: scipy.signal.StateSpace; the joint y of spring N k and dashpot c is the inner state, c y' = N k (x - y).
    ratio, c = 4.0, 900.0
    series = ratio * K
    a = np.array([[0, 1, 0], [-(K + series) / MASS, 0, series / MASS], [series / c, 0, -series / c]])
    system = scipy.signal.StateSpace(
        a, [[0], [1 / MASS], [0]], [[1, 0, 0], [K + series, 0, -series]], [[0], [0]]
    )
    part = replace(machines.mount(k=K, c=c), relaxation=Relaxation(ratio))
    force = TransmittedForce(through="floor", direction="z", measure="peak", limit=1e6)
    for f in (3.0, 8.0, 11.0, 40.0):
        inner = np.linalg.solve(1j * TWO_PI * f * np.eye(3) - system.A, system.B)
        expected = np.abs(system.C @ inner)[:, 0]
        found = law_machines.agreed(machines.one_axis(MASS, machines.force(f), (force,)), part, rel=1e-6)
        assert machines.value(found, "displacement") == pytest.approx(expected[0], rel=1e-9)
        assert machines.value(found, "transmitted-force") == pytest.approx(expected[1], rel=1e-9)


def two_bodies(k1: float, k2: float, m1: float, m2: float, f: float, *limits: object) -> Brief:
    """Body "machine" (m1) stands on "base" (m2) by station "upper" (k1), and that on the floor by "lower" (k2)."""
    return machines.brief_of(
        bodies=(
            Body(name="machine", free=("z",), mass=m1, centre=(0.0, 0.0, 1.0)),
            Body(name="base", free=("z",), mass=m2, centre=(0.0, 0.0, 0.3)),
        ),
        points=(Point(name="P", on="machine", position=(0.0, 0.0, 1.0)),),
        stations=(
            Station(name="upper", group="upper", on="machine", to="base", position=(0.0, 0.0, 0.6)),
            Station(name="lower", group="lower", on="base", position=(0.0, 0.0, 0.0)),
        ),
        forcing=(machines.force(f, on="machine"),),
        allowables=limits or (machines.far_limit(),),
    )


def test_two_stage_mounting_rolls_off_at_80_db_a_decade() -> None:
    # T = k1 k2/((k1 - m1 w^2)(k1 + k2 - m2 w^2) - k1^2): by hand from the two equations of motion.
    m1, m2, k1, k2 = 300.0, 150.0, 4e5, 9e5
    limit = Transmissibility(of="force", direction="z", limit=1e3)
    mounts = machines.mount("u", k1), machines.mount("l", k2)
    found = []
    for f in (4.0, 30.0, 100.0, 300.0, 1000.0):
        w2 = (TWO_PI * f) ** 2
        expected = abs(k1 * k2 / ((k1 - m1 * w2) * (k1 + k2 - m2 * w2) - k1**2))
        value = machines.value(law_machines.agreed(two_bodies(k1, k2, m1, m2, f, limit, machines.far_limit()),
                                                   *mounts, rel=1e-6), "transmissibility")  # fmt: skip
        assert value == pytest.approx(expected, rel=1e-9)
        found.append(value)
    # A decade, 100 to 1000 Hz: 80 dB to the last per cent; one stage alone has 40.
    assert 20.0 * math.log10(found[2] / found[4]) == pytest.approx(80.0, abs=0.3)


def test_w20_two_masses() -> None:
    # W20: Barton and Fieldhouse, Automotive Chassis Engineering, sec. 3.13: 7.8786 and 68.7086 rad/s.
    brief = two_bodies(22e3, 192e3, 317.5, 45.4, 2.0)
    found = law_machines.agreed(brief, machines.mount("u", 22e3), machines.mount("l", 192e3))
    assert [TWO_PI * mode.frequency for mode in found.modes] == pytest.approx([7.8786, 68.7086], rel=1e-4)


def with_absorber(mu: float, f: float, z2: float, r: float) -> tuple[Brief, tuple[Mount, Mount]]:
    """A mass on an undamped mount with an absorber of mass ratio mu on top; z2 refers to the absorber's frequency."""
    brief = two_bodies(1.0, 1.0, mu * MASS, MASS, r * FN)
    point = Point(name="P", on="base", position=(0.0, 0.0, 0.3))
    brief = brief.model_copy(
        update={"points": (point,), "forcing": (machines.force(r * FN, on="base", position=(0, 0, 0.3)),)}
    )
    own = f * TWO_PI * FN
    absorber = machines.mount("a", mu * MASS * own**2, c=2.0 * z2 * mu * MASS * own)
    return brief, (absorber, machines.mount("m", K))


@pytest.mark.parametrize("mu", [0.05, 0.2])
def test_p2_absorber_tuned_to_the_machine(mu: float) -> None:
    # P2: r1 r2 = 1, r1^2 + r2^2 = 2 + mu: .894427, 1.118034 and .801088, 1.248302.
    brief, mounts = with_absorber(mu, 1.0, 0.0, 0.5)
    found = [mode.frequency / FN for mode in machines.assessed(brief, *mounts).modes]
    expected = {0.05: [0.894427, 1.118034], 0.2: [0.801088, 1.248302]}[mu]
    assert found == pytest.approx(expected, rel=1e-6)
    assert found[0] * found[1] == pytest.approx(1.0, rel=1e-9)


@pytest.mark.parametrize("z2", [0.0, 0.05, 0.133631, 0.6])
def test_t1_fixed_points_of_an_absorber(z2: float) -> None:
    # T1: Den Hartog sec. 3.3, mu = .05, f = 1/1.05: at r = .896462 and 1.049342 the height is sqrt(1 + 2/mu) =
    # 6.403124 whatever the absorber's damping.
    for r in (0.896462, 1.049342):
        brief, mounts = with_absorber(0.05, 1.0 / 1.05, z2, r)
        value = machines.value(law_machines.agreed(brief, *mounts, rel=1e-6), "displacement")
        assert value * K == pytest.approx(6.403124, rel=2e-5)


@pytest.mark.parametrize(("temperature", "row"), [(None, 1), (20.0, 1), (-20.0, 0)])
def test_tabled_mount_at_the_points_of_its_table(temperature: float | None, row: int) -> None:
    # At a point of the table nothing is interpolated: X = F/|k r (1 + j eta) - m w^2|.
    part = law_machines.tabled(machines.mount(k=K), temperature=(-20.0, 20.0))
    state = (
        None if temperature in (None, 20.0) else law_machines.machines_state("cold", temperature=temperature)
    )
    for column, f in ((1, 10.0), (2, 100.0)):
        brief = machines.one_axis(MASS, machines.force(f))
        brief = law_machines.in_state(brief, state)
        table = part.law_table
        stiffness = K * table.stiffness_ratio[row][column] * (1.0 + 1j * table.loss_factor[row][column])
        expected = 1.0 / abs(stiffness - MASS * (TWO_PI * f) ** 2)
        assert one(brief, part, "displacement") == pytest.approx(expected, rel=1e-9)


def test_progressive_mount_rests_where_newton_by_hand_says_and_vibrates_at_its_tangent() -> None:
    # F(d) = k d (1 + b d^2) in 400 points: m g = F(d) has one real root; the tangent k (1 + 3 b d^2), times the
    # list's dynamic over static stiffness (1/0.8), carries the vibration.
    b, static = 4000.0, 0.8
    part = machines.mount(k=K, static=static, loss=0.05)
    k = static * K
    d = np.linspace(0.0, 0.04, 401)
    part = replace(part, load_curve=LoadCurve(tuple(d), tuple(k * d * (1.0 + b * d**2)), "curve.csv"))
    brief = machines.one_axis(MASS, machines.force(20.0), (Sag(at="P", limit=1.0),))
    roots = np.roots([k * b, 0.0, k, -MASS * G])
    rest = float(roots[np.abs(roots.imag) < 1e-9].real[0])
    found = law_machines.agreed(brief, part, rel=1e-6)
    assert machines.value(found, "sag") == pytest.approx(rest, rel=1e-6)
    tangent = k * (1.0 + 3.0 * b * rest**2)
    frequency = math.sqrt(tangent / static / MASS) / TWO_PI
    assert found.modes[0].frequency == pytest.approx(frequency, rel=1e-5)
    # Never the secant, which would be 7 % lower in frequency here.
    assert frequency > 1.05 * math.sqrt(MASS * G / rest / static / MASS) / TWO_PI


def test_progressive_mount_through_few_points_is_scipys_monotone_cubic() -> None:
    d, load = np.array([0.0, 2e-3, 4e-3, 6e-3, 8e-3]), np.array([0.0, 150.0, 350.0, 700.0, 1500.0])
    curve = PchipInterpolator(d, load)
    rest = brentq(lambda x: curve(x) - MASS * G, 0.0, 8e-3, xtol=1e-15)
    part = replace(machines.mount(k=1e5), load_curve=LoadCurve(tuple(d), tuple(load), "curve.csv"))
    brief = machines.one_axis(MASS, machines.force(20.0), (Sag(at="P", limit=1.0),))
    found = law_machines.agreed(brief, part, rel=1e-6)
    assert machines.value(found, "sag") == pytest.approx(rest, rel=1e-9)
    assert found.modes[0].frequency == pytest.approx(math.sqrt(curve(rest, 1) / MASS) / TWO_PI, rel=1e-9)


def test_a_load_beyond_the_curve_fails_the_brief() -> None:
    d, load = (0.0, 2e-3, 4e-3), (0.0, 150.0, 350.0)
    part = replace(machines.mount(k=1e5), load_curve=LoadCurve(d, load, "curve.csv"), deflection_max=4e-3)
    found = machines.assessed(machines.one_axis(MASS, machines.force(20.0)), part)
    assert not found.meets and found.least_margin < 0.0
    batch = law_machines.batch_rows(
        law_machines.problem_of(machines.one_axis(MASS, machines.force(20.0)), part)
    )
    assert any(np.isnan(margin) or margin < 0.0 for margin in batch.values())


@pytest.mark.parametrize("share", [0.3, 1.0, 2.5])
def test_air_spring_keeps_its_natural_frequency(share: float) -> None:
    # k = k_rated F/F_rated, so w^2 = k/m = k_rated g/F_rated whatever the mass (definition of the law).
    rated = MASS * G
    part = replace(machines.mount(k=K, static=1.0, loss=0.05), follows_load=True, load_rated=rated)
    found = law_machines.agreed(machines.one_axis(share * MASS, machines.force(20.0)), part, rel=1e-6)
    assert found.modes[0].frequency == pytest.approx(FN, rel=1e-5)


def test_p6_kramers_kronig_of_the_parts_as_they_are_used() -> None:
    # P6 with the stiffness that solver and assessor use: a relaxation and a table pass, a loss factor must not.
    f = np.geomspace(1.01, 990.0, 60)
    omega = TWO_PI * f
    relaxing = law_machines.relaxing(machines.mount(k=K, lateral=K), ratio=3.0, c=700.0)
    tabled = law_machines.tabled(machines.mount(k=K, lateral=K))
    constant = machines.mount(k=K, lateral=K, loss=0.15)
    found = {}
    for name, part in (("relaxation", relaxing), ("table", tabled), ("loss factor", constant)):
        problem = law_machines.problem_of(machines.one_axis(MASS, machines.force(20.0)), part)
        designs = Designs(np.zeros((1, 1), dtype=np.intp), np.zeros(1, dtype=np.intp))
        batch = PartBatch(problem.model, designs).stiffness(problem.model.stations[0], omega[None])[0, :, 2]
        assert batch == pytest.approx(part_stiffness(part, omega, 1.0, 20.0)[:, 2], rel=1e-9)
        found[name] = kramers_kronig_violation(omega, batch)
    assert found["relaxation"] < 0.03
    assert found["table"] < 0.15
    assert found["loss factor"] > 0.3
    # K_inf - K'(w0) of the relaxation: k (1 + N) less its storage stiffness, by the integral over its loss.
    w0 = 300.0
    stiffness = part_stiffness(relaxing, np.array([w0]), 1.0, 20.0)[0, 2]

    def loss(w: np.ndarray) -> np.ndarray:
        return part_stiffness(relaxing, w.ravel(), 1.0, 20.0)[:, 2].imag.reshape(w.shape)

    deficit = storage_deficit(loss, w0, 1e-4, 1e9)
    assert deficit == pytest.approx(4.0 * K - stiffness.real, rel=1e-5)
