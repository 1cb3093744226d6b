"""Gravity's geometric stiffness: an inverted pendulum on mounts, a hanging machine, and a machine that topples."""

from __future__ import annotations

import math

import numpy as np
import pytest

from detune.brief.brief import Brief
from detune.brief.choice import Ballast
from detune.brief.machine import Body, InertiaTensor, Point, Station
from detune.parts.kinds.mount import Mount
from response import law_machines

machines = law_machines.machines

TWO_PI = 2.0 * math.pi
G = 9.80665
MASS, K, HALF = 300.0, 2.0e4, 0.25
# Four mounts at (+-a, +-a) in one plane: the rocking stiffness about the plane is 4 k a^2, and what topples it is
# m g h, whatever the lateral stiffness (physics.gravity; by hand from the energy of a rigid body on springs).
CRITICAL = 4.0 * K * HALF**2 / (MASS * G)


def tower(height: float, **changes: object) -> Brief:
    """A machine whose centre lies `height` above its four mounts, all in the plane z = 0."""
    corners = [(x, y) for x in (-HALF, HALF) for y in (-HALF, HALF)]
    inertia = InertiaTensor(xx=20.0, yy=20.0, zz=15.0)
    return machines.brief_of(
        **{
            "gravity_stiffness": True,
            "bodies": (Body(name="machine", mass=MASS, centre=(0.0, 0.0, height), inertia=inertia),),
            "points": (Point(name="P", position=(0.0, 0.0, height)),),
            "stations": tuple(
                Station(name=f"S{i}", group="G", position=(x, y, 0.0)) for i, (x, y) in enumerate(corners)
            ),
            "forcing": (machines.force(20.0, position=(0.0, 0.0, height)),),
            **changes,
        }
    )


def part(lateral: float = 3e4) -> Mount:
    return machines.mount("m", K, lateral=lateral, loss=0.1)


@pytest.mark.parametrize("share", [0.3, 0.9, 0.999])
def test_critical_height_of_mounts_in_one_plane(share: float) -> None:
    assessment = law_machines.agreed(tower(share * CRITICAL), part(), rel=1e-6)
    assert machines.value(assessment, "stability") == pytest.approx(1.0 / share, rel=1e-9)
    assert assessment.notes == ()
    assert assessment.meets


@pytest.mark.parametrize("share", [1.001, 1.6])
def test_a_machine_that_topples_is_refused_in_a_sentence(share: float) -> None:
    assessment = law_machines.agreed(tower(share * CRITICAL), part(), rel=1e-6)
    (row,) = [row for row in assessment.margins if row.kind == "stability"]
    assert row.margin == pytest.approx(1.0 / share - 1.0, rel=1e-9)
    assert not assessment.meets
    (sentence,) = assessment.notes
    weight, carried = MASS * G, MASS * G / share
    assert sentence.startswith("The machine does not stand: on these parts it topples at")
    assert f"{carried:.0f} N"[:3] in sentence.replace(",", "") or f"{carried / 1e3:.3g} kN" in sentence
    assert "mass centre lies" in sentence and "no higher than" in sentence
    # By hand: 4 k a^2 = 5000 N m over 2942 N.
    assert pytest.approx(1.69953, abs=1e-5) == CRITICAL
    assert f"{1e3 * CRITICAL:.4g}"[:4] in sentence.replace(",", "") or f"{CRITICAL:.3g} m" in sentence, (
        sentence
    )
    assert weight > carried


def test_rocking_frequency_of_an_inverted_pendulum() -> None:
    # Mounts so stiff sideways that the machine turns about their plane: w^2 = (4 k a^2 - m g h)/(J + m h^2), the
    # inverted pendulum on a rotational spring (Den Hartog, Mechanical Vibrations, ch. 2, from memory; recomputed).
    height = 0.8
    stiff = machines.mount("m", K, lateral=1e10, loss=0.1)
    for gravity in (True, False):
        assessment = machines.assessed(tower(height, gravity_stiffness=gravity), stiff)
        toppling = MASS * G * height if gravity else 0.0
        expected = math.sqrt((4.0 * K * HALF**2 - toppling) / (20.0 + MASS * height**2)) / TWO_PI
        assert assessment.modes[0].frequency == pytest.approx(expected, rel=1e-5)
        assert assessment.modes[1].frequency == pytest.approx(expected, rel=1e-5)


def test_a_hanging_machine_never_topples_and_swings_faster() -> None:
    # Below its mounts gravity adds m g h; with no rocking stiffness worth the name it is a compound pendulum,
    # w^2 = m g h/(J + m h^2) (any text on mechanics).
    soft = machines.mount("m", 2.0e4, lateral=1e10, loss=0.1)
    height = -1.5
    hanging = tower(height)
    assessment = law_machines.agreed(hanging, soft, rel=1e-6)
    assert machines.value(assessment, "stability") == math.inf
    expected = math.sqrt((4.0 * 2.0e4 * HALF**2 + MASS * G * 1.5) / (20.0 + MASS * height**2)) / TWO_PI
    assert assessment.modes[0].frequency == pytest.approx(expected, rel=1e-5)


def test_ballast_low_down_lets_it_stand() -> None:
    # Centre of both together: (300 h + 200 z)/500; it topples where 4 k a^2 < g (300 h + 200 z).
    height = 1.2 * CRITICAL
    ballast = Ballast(position=(0.0, 0.0, -2.0), size=(0.3, 0.3, 0.1), steps=(0.0, 200.0), cost_per_kg=1.0)
    brief = tower(height, ballast=ballast)
    without = machines.assessed(brief, part())
    assert not without.meets and len(without.notes) == 1
    with_it = machines.assessed(brief, part(), ballast=200.0)
    moment = G * (MASS * height - 200.0 * 2.0)
    expected = math.inf if moment <= 0.0 else 4.0 * K * HALF**2 / moment
    assert machines.value(with_it, "stability") == pytest.approx(expected, rel=1e-9)
    assert with_it.notes == ()


def test_lateral_loads_count_too() -> None:
    """Inclined stations at different heights, an offset centre: batch and assessor alike, near toppling."""
    brief, (one, other) = machines.random_machine(5, flexible_floor=False)
    brief = brief.model_copy(update={"gravity_stiffness": True})
    soft = [machines.mount(m.part, 4e3, lateral=3e3, loss=0.1) for m in (one, other)]
    low = machines.value(law_machines.agreed(brief, *soft), "stability")
    stiffer = [machines.mount(m.part, 8e3, lateral=6e3, loss=0.1) for m in (one, other)]
    pipeless = brief.model_copy(update={"connections": ()})
    low, high = (machines.value(law_machines.agreed(pipeless, *m), "stability") for m in (soft, stiffer))
    # Twice the stiffness carries twice the weight: the theorem of scaling.
    assert np.isfinite(low) and high == pytest.approx(2.0 * low, rel=1e-9)
