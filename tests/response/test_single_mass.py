"""A mass on one mount, through the whole program: brief, matrices, supremum, margins.

Every value is checked twice, by the assessor and by the batch evaluation the solvers use. Ids and
expected values are those of the project's table of checks; sources stand beside each.
"""

from __future__ import annotations

import math
from functools import partial

import numpy as np
import pytest

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.base import Allowable
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.transmissibility import Transmissibility
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.allowable.velocity import Velocity
from detune.brief.forcing.base_motion import BaseMotion
from detune.brief.forcing.shaft_orders import Order, ShaftOrders
from detune.parts.kinds.mount import Mount
from response import machines

TWO_PI = 2.0 * math.pi
SUPREMUM = 1e-4
"""Relative tolerance of a supremum over a range; single frequencies are exact to rounding."""

X = machines.far_limit()
FORCE = TransmittedForce(through="floor", direction="z", measure="peak", limit=1e9)
RATIO = Transmissibility(of="force", direction="z", limit=1e6)
MOTION = Transmissibility(of="motion", at="P", direction="z", limit=1e6)


both = partial(machines.both, rel=SUPREMUM)


def viscous(mass: float, k: float, z: float) -> Mount:
    return machines.mount(k=k, c=2.0 * z * math.sqrt(k * mass))


M, K = 100.0, 4e5
FN = math.sqrt(K / M) / TWO_PI


# S1, Den Hartog, Mechanical Vibrations, ch. 2; Rao 5e sec. 3.4 (computed, from memory).
@pytest.mark.parametrize(
    ("z", "r", "height"),
    [
        (0.05, 0.997497, 10.012523),
        (0.1, 0.989949, 5.025189),
        (0.2, 0.959166, 2.551552),
        (0.5, 0.707107, 1.154701),
    ],
)
def test_s1_displacement_peak_under_constant_force(z: float, r: float, height: float) -> None:
    brief = machines.one_axis(M, machines.force((0.2 * FN, 3.0 * FN), 50.0))
    part = viscous(M, K, z)
    assert both(brief, part, X) / (50.0 / K) == pytest.approx(height, rel=SUPREMUM)
    row = next(row for row in machines.assessed(brief, part).margins if row.kind == "displacement")
    # Where it occurs: a flat peak is located as the root of its height's tolerance.
    assert row.frequency / FN == pytest.approx(r, abs=0.02 * z)


def test_s1_no_peak_from_damping_ratio_root_half_on() -> None:
    """Monotone for z >= 1/sqrt 2: the largest is at the lower end of the range, near 1 at r -> 0."""
    brief = machines.one_axis(M, machines.force((1e-4 * FN, 3.0 * FN), 50.0))
    assert both(brief, viscous(M, K, 0.75), X) / (50.0 / K) == pytest.approx(1.0, rel=1e-6)


# S3, Rao 5e sec. 3.7; Thomson sec. 3.2.
@pytest.mark.parametrize(("z", "r", "height"), [(0.1, 1.010153, 5.025189), (0.2, 1.042572, 2.551552)])
def test_s3_rotating_unbalance(z: float, r: float, height: float) -> None:
    me = 0.02
    brief = machines.one_axis(M, machines.unbalance(me), shafts={"rotor": (0.3 * FN, 4.0 * FN)})
    part = viscous(M, K, z)
    assert both(brief, part, X) * M / me == pytest.approx(height, rel=SUPREMUM)
    row = next(row for row in machines.assessed(brief, part).margins if row.kind == "displacement")
    assert row.frequency / FN == pytest.approx(r, abs=0.02 * z)


def test_s3_far_above_resonance_the_centre_of_mass_stands_still() -> None:
    """MX/(me) -> 1; at r = 1000 it is within 1e-6."""
    brief = machines.one_axis(M, machines.unbalance(0.02), shafts={"rotor": (1000.0 * FN, 1000.0 * FN)})
    assert both(brief, viscous(M, K, 0.1), X) * M / 0.02 == pytest.approx(1.0, rel=2e-6)


# S4, Rao 5e sec. 3.6 and 9.10; Harris' Handbook ch. 30.
@pytest.mark.parametrize("allowable", [RATIO, MOTION], ids=["force", "motion"])
@pytest.mark.parametrize(
    "damping", [{"z": 0.0}, {"z": 0.01}, {"z": 0.3}, {"z": 2.0}, {"eta": 0.05}, {"eta": 1.0}]
)
def test_s4_transmissibility_is_one_at_root_two(damping: dict[str, float], allowable: Allowable) -> None:
    f = math.sqrt(2.0) * FN
    part = viscous(M, K, damping["z"]) if "z" in damping else machines.mount(k=K, loss=damping["eta"])
    assert both(machines.one_axis(M, machines.force(f)), part, allowable) == pytest.approx(1.0, abs=1e-12)


# S5, Rao 5e problems of ch. 3; Inman sec. 2.4 (stationary point confirmed by algebra).
@pytest.mark.parametrize(
    ("z", "r", "height"),
    [
        (0.05, 0.9975216, 10.062214),
        (0.1, 0.9903343, 5.122774),
        (0.2, 0.9647297, 2.733921),
        (0.5, 0.8555997, 1.467890),
    ],
)
def test_s5_transmissibility_peak(z: float, r: float, height: float) -> None:
    brief = machines.one_axis(M, machines.force((0.2 * FN, 3.0 * FN)))
    part = viscous(M, K, z)
    assert both(brief, part, RATIO) == pytest.approx(height, rel=SUPREMUM)
    at_peak = machines.one_axis(M, machines.force(r * FN))
    assert both(at_peak, part, RATIO) == pytest.approx(height, rel=1e-6)


# S6, the formula of any text.
S6 = {
    3: {0.01: 0.125221, 0.05: 0.130412, 0.1: 0.145366, 0.2: 0.193096, 0.5: 0.370117},
    10: {0.01: 0.010301, 0.05: 0.014284, 0.1: 0.022582, 0.2: 0.041614, 0.5: 0.101000},
}


@pytest.mark.parametrize(("r", "z"), [(r, z) for r, row in S6.items() for z in row])
def test_s6_transmissibility_above_resonance(r: int, z: float) -> None:
    brief = machines.one_axis(M, machines.force(r * FN))
    assert both(brief, viscous(M, K, z), RATIO) == pytest.approx(S6[r][z], abs=1e-6)


# S9, Den Hartog; Snowdon 1968: peak at r = 1, sqrt(1 + 1/eta^2); faster roll-off than viscous.
@pytest.mark.parametrize(("r", "expected"), [(1, 10.049876), (3, 0.125614), (10, 0.010151)])
def test_s9_loss_factor(r: int, expected: float) -> None:
    part = machines.mount(k=K, loss=0.1)
    assert both(machines.one_axis(M, machines.force(r * FN)), part, RATIO) == pytest.approx(
        expected, rel=5e-5
    )


def test_s9_peak_of_a_loss_factor_over_a_range() -> None:
    part = machines.mount(k=K, loss=0.1)
    brief = machines.one_axis(M, machines.force((0.5 * FN, 2.0 * FN)))
    assert both(brief, part, RATIO) == pytest.approx(10.049876, rel=SUPREMUM)


def test_w1_car_on_a_sinusoidal_road() -> None:
    """Rao 5e Example 3.6: X/Y = 1.100963 at 20 km/h, .849320 at 100 km/h (published X 0.0550 m)."""
    m, k = 1200.0, 4e5
    for speed, ratio in ((20.0, 1.100963), (100.0, 0.849320)):
        road = BaseMotion(name="road", frequency=speed / 3.6 / 6.0, direction="z", displacement=0.05)
        x = both(machines.one_axis(m, road), viscous(m, k, 0.5), X)
        assert x == pytest.approx(0.05 * ratio, rel=1e-5)


def test_w1_the_same_road_as_velocity_and_as_acceleration() -> None:
    """Y w and Y w^2 state the same motion: X = 0.055048 m."""
    w = 5.81776
    f = w / TWO_PI
    part = viscous(1200.0, 4e5, 0.5)
    for stated in ({"velocity": 0.05 * w}, {"acceleration": 0.05 * w**2}):
        road = BaseMotion(name="road", frequency=f, direction="z", **stated)
        assert both(machines.one_axis(1200.0, road), part, X) == pytest.approx(0.055048, rel=1e-5)


def test_w2_unbalanced_machine() -> None:
    """Thomson, Theory of Vibration, Example 3.6-1: X .0379 mm, T .137, Ft 47.89 N in the book."""
    brief = machines.one_axis(100.0, machines.force(50.0, 350.0))
    part = viscous(100.0, 7e5, 0.2)
    assert both(brief, part, X) == pytest.approx(3.792e-5, rel=5e-4)
    assert both(brief, part, RATIO) == pytest.approx(0.13685, rel=5e-4)
    assert both(brief, part, FORCE) == pytest.approx(47.90, rel=5e-4)
    (mode,) = machines.assessed(brief, part).modes
    assert mode.frequency == pytest.approx(13.316, rel=1e-4)


def test_w3_five_outputs() -> None:
    """Open worked text (read): X .0229 m, T 1.57, Ft 707.6 N, V .298 m/s computed from the rounded X."""
    brief = machines.one_axis(70.0, machines.force(13.0 / TWO_PI, 450.0))
    part = viscous(70.0, 3e4, 0.2)
    velocity = Velocity(at="P", direction="z", measure="peak", limit=1e6)
    assert both(brief, part, X) == pytest.approx(0.022877, rel=1e-4)
    assert both(brief, part, RATIO) == pytest.approx(1.57249, rel=1e-4)
    assert both(brief, part, FORCE) == pytest.approx(707.62, rel=1e-4)
    assert both(brief, part, velocity) == pytest.approx(0.29740, rel=1e-4)
    assert both(brief, part, velocity) == pytest.approx(0.298, rel=5e-3)
    acceleration = Acceleration(at="P", direction="z", measure="peak", limit=1e6)
    assert both(brief, part, acceleration) == pytest.approx(0.29740 * 13.0, rel=1e-4)


def test_rms_and_peak_to_peak_of_the_same_motion() -> None:
    """A sine of peak X has rms X/sqrt 2 and peak-to-peak 2 X (definition); W3's X = .022877 m."""
    brief = machines.one_axis(70.0, machines.force(13.0 / TWO_PI, 450.0))
    part = viscous(70.0, 3e4, 0.2)
    for measure, factor in (("rms", math.sqrt(0.5)), ("peak-to-peak", 2.0)):
        limit = Displacement(at="P", direction="z", measure=measure, limit=1e6)
        assert both(brief, part, limit) == pytest.approx(factor * 0.022877, rel=1e-4)


def test_w4_three_springs_for_ten_per_cent() -> None:
    """Thomson (refrigerator): 30 kg, 580 rpm, k = 3353.7 N/m each (published 3.35e3)."""
    brief = machines.one_axis(30.0, machines.force(580 * machines.RPM), parallel=3)
    assert both(brief, machines.mount(k=3353.7), RATIO) == pytest.approx(0.1, rel=2e-4)


def test_w5_four_springs_for_ten_per_cent() -> None:
    """Rao 5e Example 9.4: 40 kg, 1000 rpm, 9969.3 N/m each (published 9969.6)."""
    brief = machines.one_axis(40.0, machines.force(1000 * machines.RPM), parallel=4)
    assert both(brief, machines.mount(k=9969.3), RATIO) == pytest.approx(0.1, rel=1e-4)


def test_w5_undamped_five_per_cent() -> None:
    """Rao 5e Example 9.5: 50 kg, 1000 cos 120 t N, 34285.7 N/m, 1.45833 mm."""
    brief = machines.one_axis(50.0, machines.force(120.0 / TWO_PI, 1000.0))
    part = machines.mount(k=34285.7)
    assert both(brief, part, RATIO) == pytest.approx(0.05, rel=1e-4)
    assert both(brief, part, X) == pytest.approx(1.45833e-3, rel=1e-4)


def test_w5_damping_for_a_ratio_of_four_at_resonance() -> None:
    """Rao 5e Example 9.8: z = .129099."""
    brief = machines.one_axis(M, machines.force(FN))
    assert both(brief, viscous(M, K, 0.129099), RATIO) == pytest.approx(4.0, rel=1e-5)


def test_w8_fan_with_a_known_unbalance() -> None:
    """Rao problem (answers .3973 mm and 32.92 N read): 380 kg, 45 mm static at g = 9.81, .15 kg m, 1750 rpm."""
    n = 1750 * machines.RPM
    brief = machines.one_axis(380.0, machines.unbalance(0.15), shafts={"rotor": (n, n)})
    part = machines.mount(k=380.0 * 9.81 / 0.045)
    assert both(brief, part, X) == pytest.approx(0.39732e-3, rel=1e-4)
    assert both(brief, part, FORCE) == pytest.approx(32.914, rel=1e-4)


def test_w9_spring_for_a_twelfth() -> None:
    """McLean & Nelson, Schaum's Engineering Mechanics, Ex. 19-25 (read): 20 lb, 600 rpm, g = 386, 15.7 lb/in."""
    lbf_per_inch = 4.4482216 / 0.0254
    mass = 20.0 / 386.0 * lbf_per_inch
    brief = machines.one_axis(mass, machines.force(600 * machines.RPM))
    assert both(brief, machines.mount(k=15.735 * lbf_per_inch), RATIO) == pytest.approx(1.0 / 12.0, rel=1e-4)


@pytest.mark.parametrize(("f", "mm"), [(1.0, 1.5510), (5.4, 36.878), (50.0, 0.018462)])
def test_w11_undamped_amplitudes(f: float, mm: float) -> None:
    """McLean & Nelson, Ex. 19-24 (read): 5 kg, 6000 N/m, 9 N; the printed figure at 5.4 Hz is known to be wrong."""
    assert both(machines.one_axis(5.0, machines.force(f, 9.0)), machines.mount(k=6000.0), X) == pytest.approx(
        mm * 1e-3, rel=1e-4
    )


def test_w12_forced_damped_amplitude() -> None:
    """Bevan, Theory of Machines, ch. 15 Ex. 6 (read): .372 in, and 3.29 in at resonance.

    W = 20 lb, k = 50 lb/in, F = 30 lb at 50 rad/s; c/m = a with a^2 = b/30.02 and b = k g/W, g = 32.2 * 12.
    """
    inch, pound = 0.0254, 4.4482216
    mass = 20.0 * pound / (32.2 * 12.0 * inch)
    k = 50.0 * pound / inch
    b = 50.0 * 32.2 * 12.0 / 20.0
    part = machines.mount(k=k, c=mass * math.sqrt(b / 30.02))
    for w, amplitude in ((50.0, 0.37154), (math.sqrt(b), 3.2874)):
        brief = machines.one_axis(mass, machines.force(w / TWO_PI, 30.0 * pound))
        assert both(brief, part, X) / inch == pytest.approx(amplitude, rel=1e-4)


def test_w13_press() -> None:
    """Meriam & Kraige, Dynamics, Sample 8/6 (inputs read): X = .019377 ft, Ft = 67.85 lb."""
    foot, pound = 0.3048, 4.4482216
    mass = 100.0 * pound / (32.2 * foot)
    part = machines.mount(k=2400.0 * pound / foot, c=85.0 * pound / foot)
    brief = machines.one_axis(mass, machines.force(30.0 / TWO_PI, 50.0 * pound))
    assert both(brief, part, X) / foot == pytest.approx(0.019377, rel=2e-4)
    assert both(brief, part, FORCE) / pound == pytest.approx(67.85, rel=2e-4)


def test_p3_energy_of_one_cycle() -> None:
    """Input equals dissipated power: 1.420027 W both ways, X = 1.117564e-3 m (recomputed by hand)."""
    brief = machines.one_axis(50.0, machines.force(12.0, 100.0))
    assessment = machines.assessed(brief, machines.mount(k=2e5, c=400.0))
    (power,) = assessment.power
    assert machines.value(assessment, "displacement") == pytest.approx(1.117564e-3, rel=1e-6)
    assert power.put_in == pytest.approx(1.420027, rel=1e-6)
    assert power.dissipated == pytest.approx(1.420027, rel=1e-6)
    assert power.closing_error < 1e-12


def test_c1_balance_grade() -> None:
    """ISO 21940-11:2016: 50 kg at G 6.3 and 3000 rpm is 1002.68 g mm and turns with 98.96 N.

    On a mount far softer than the excitation the displacement is me/m: 1002.68e-6 kg m over 50 kg.
    """
    f = 3000 * machines.RPM
    by_grade = machines.unbalance(
        1.0, unbalance=None, grade=6.3e-3, rotor_mass=50.0, grade_speed=f, phase=None
    )
    brief = machines.one_axis(50.0, by_grade, shafts={"rotor": (f, f)})
    assert both(brief, machines.mount(k=1.0), X) == pytest.approx(1002.68e-6 / 50.0, rel=1e-5)
    stiff = machines.mount(k=1e12)
    assert both(brief, stiff, FORCE) == pytest.approx(98.96, rel=1e-4)


def test_static_deflection_takes_the_static_stiffness_and_the_frequency_the_dynamic_one() -> None:
    """Trap of the trade: 100 kg on 98066.5 N/m static sags 10.000 mm; at twice that in vibration f is
    sqrt 2 times the 4.98403 Hz that belong to 10 mm (S11, Harris' Handbook).
    """
    part = machines.mount(k=2 * 98066.5, static=0.5)
    assessment = machines.assessed(machines.one_axis(100.0, machines.force(30.0)), part)
    assert assessment.stations[0].compression == pytest.approx(10.0e-3, rel=1e-12)
    assert assessment.stations[0].axial_load == pytest.approx(980.665, rel=1e-12)
    assert assessment.modes[0].frequency == pytest.approx(math.sqrt(2.0) * 4.98403, rel=1e-5)


def test_a_mount_without_damping_at_resonance_never_passes() -> None:
    """Infinite response: no finite limit is met, whether resonance is hit or only passed."""
    part = machines.mount(k=K)
    for frequency in (FN, (0.5 * FN, 2.0 * FN)):
        brief = machines.one_axis(M, machines.force(frequency))
        brief = brief.model_copy(update={"allowables": (machines.far_limit(limit=10.0),)})
        assert not machines.assessed(brief, part).meets
        assert machines.batch_value(brief, part, machines.far_limit(limit=10.0)) > 1e6


def test_rigid_floor_takes_the_same_force_as_the_ground() -> None:
    brief = machines.one_axis(M, machines.force((0.5 * FN, 4 * FN), 20.0))
    part = machines.mount(k=K, loss=0.1)
    ground = TransmittedForce(through="ground", direction="z", measure="peak", limit=1e9)
    assert both(brief, part, ground) == pytest.approx(both(brief, part, FORCE), rel=1e-12)


def test_unknown_phases_add_linearly_and_known_ones_as_phasors() -> None:
    """Two equal forces of one shaft order: unknown 2 F, in phase 2 F, opposed 0, in quadrature sqrt 2 F."""
    part = machines.mount(k=K, loss=0.1)
    single = machines.one_axis(M, machines.force(20.0))
    one = both(single, part, X)

    def pair(phases: tuple[float | None, float | None]) -> float:
        forcing = [
            ShaftOrders(
                name=f"pump {i}",
                shaft="rotor",
                position=(0.0, 0.0, 0.0),
                orders=(Order(order=1.0, force=(0.0, 0.0, 1.0), phase=phase),),
            )
            for i, phase in enumerate(phases)
        ]
        brief = machines.one_axis(M, forcing, shafts={"rotor": (20.0, 20.0)})
        return both(brief, part, X)

    assert pair((None, None)) == pytest.approx(2.0 * one, rel=1e-12)
    assert pair((0.0, 0.0)) == pytest.approx(2.0 * one, rel=1e-12)
    assert pair((0.0, math.pi)) == pytest.approx(0.0, abs=1e-12 * one)
    assert pair((0.0, math.pi / 2)) == pytest.approx(math.sqrt(2.0) * one, rel=1e-12)


def test_supremum_of_the_sum_is_not_the_sum_of_suprema() -> None:
    """Orders share one speed: order 1 and order 2 meet the resonance at different speeds.

    Undamped-like narrow peaks: with loss factor 0.01 each peak is 100 F/k; at either one the other order
    adds little, so the supremum is close to one peak and far from two (values of |H| by hand: r = 2 gives
    1/3, r = 1/2 gives 4/3 of F/k).
    """
    orders = ShaftOrders(
        name="pump",
        shaft="rotor",
        position=(0.0, 0.0, 0.0),
        orders=tuple(Order(order=n, force=(0.0, 0.0, 1.0)) for n in (1.0, 2.0)),
    )
    brief = machines.one_axis(M, orders, shafts={"rotor": (0.3 * FN, 1.5 * FN)})
    value = both(brief, machines.mount(k=K, loss=0.01), X) * K
    # At the shaft speed f_n / 2 order 2 is at resonance and order 1 at r = 1/2.
    assert value == pytest.approx(100.0 + 4.0 / 3.0, rel=1e-3)
    assert np.isfinite(value)
