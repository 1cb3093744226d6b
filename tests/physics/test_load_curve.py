"""Progressive mounts: curves, stops and the resting place of a machine."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.interpolate import PchipInterpolator
from scipy.optimize import fsolve

from detune.physics.load_curve import (
    CurveTurnsBack,
    ElementLaw,
    NotAtRest,
    at_rest,
    deflection_at,
    law_force,
    law_pieces,
    load_at,
    load_curve,
    pieces_force,
    tangent_at,
    tangent_at_load,
)
from detune.physics.tables import OutsideTable
from detune.physics.unsupported import UnsupportedMachine

POINTS = ([0.0, 0.002, 0.004, 0.006, 0.008], [0.0, 60.0, 150.0, 320.0, 700.0])
CURVE = load_curve(*POINTS)


def test_curve_against_scipy_and_its_inverse() -> None:
    own = PchipInterpolator(*POINTS)
    place = np.linspace(0.0, 0.008, 33)
    assert load_at(CURVE, place) == pytest.approx(own(place), abs=1e-10)
    assert tangent_at(CURVE, place) == pytest.approx(own(place, 1), rel=1e-10)
    load = np.linspace(0.0, 700.0, 57)
    assert load_at(CURVE, deflection_at(CURVE, load)) == pytest.approx(load, abs=1e-9)


def test_trap_tangent_and_not_secant() -> None:
    # A cubic spring F = a d^3 + b d: tangent 3 a d^2 + b against secant a d^2 + b. Fine table, 1e-3.
    d = np.linspace(0.0, 0.02, 201)
    curve = load_curve(d, 5e9 * d**3 + 2e4 * d)
    assert tangent_at(curve, 0.01) == pytest.approx(3 * 5e9 * 1e-4 + 2e4, rel=1e-3)
    assert tangent_at_load(curve, 5e9 * 1e-6 + 200.0) == pytest.approx(1.52e6, rel=1e-3)


@settings(deadline=None, max_examples=50)
@given(st.lists(st.tuples(st.floats(0.01, 5.0), st.floats(0.001, 100.0)), min_size=1, max_size=9))
def test_every_rising_curve_has_stiffness_everywhere(steps: list[tuple[float, float]]) -> None:
    d, n = np.cumsum([0.0, *(s[0] for s in steps)]), np.cumsum([0.0, *(s[1] for s in steps)])
    curve = load_curve(d, n)
    assert np.all(tangent_at(curve, np.linspace(d[0], d[-1], 200)) > 0.0)


def test_curves_that_turn_back_and_loads_beyond_are_refused_by_place() -> None:
    with pytest.raises(CurveTurnsBack, match=r"row 3 \(90 N at 0\.004 m\)"):
        load_curve([0.0, 0.002, 0.004], [0.0, 100.0, 90.0])
    with pytest.raises(CurveTurnsBack, match="row 2"):
        load_curve([0.0, 0.002, 0.004], [0.0, 0.0, 90.0])
    with pytest.raises(ValueError, match="deflection of the load curve: row 3"):
        load_curve([0.0, 0.002, 0.002], [0.0, 1.0, 90.0])
    with pytest.raises(ValueError, match="finite load"):
        load_curve([0.0, 0.002], [0.0, np.nan])
    with pytest.raises(OutsideTable, match="load 701 N"):
        deflection_at(CURVE, 701.0)
    with pytest.raises(OutsideTable, match=r"deflection -0\.001 m"):
        load_at(CURVE, -0.001)


LAWS = [
    ElementLaw(stiffness=1e4),
    ElementLaw(curve=CURVE),
    ElementLaw(curve=CURVE, pulls=False, stop_gap=0.0065, stop_stiffness=1e6),
    ElementLaw(stiffness=1e3, stop_gap=0.001, rebound_gap=0.002, stop_stiffness=1e5),
]


@settings(deadline=None, max_examples=50)
@given(st.floats(-0.02, 0.02))
def test_pieces_are_the_laws(deflection: float) -> None:
    force, tangent = pieces_force(law_pieces(LAWS), np.full(4, deflection))
    for e, law in enumerate(LAWS):
        own, slope = law_force(law, deflection)
        assert force[e] == pytest.approx(float(own), rel=1e-9, abs=1e-9)
        if min(abs(deflection - c) for c in (-0.002, 0.0, 0.001, 0.0065)) > 1e-12:
            assert tangent[e] == pytest.approx(float(slope), rel=1e-7, abs=1e-6)


CORNERS = np.array([[-0.5, -0.3], [0.5, -0.3], [-0.5, 0.3], [0.5, 0.3]])
# Heave up, roll and pitch: compression of a mount at (x, y) is -z - y rx + x ry.
ROWS = np.column_stack([-np.ones(4), -CORNERS[:, 1], CORNERS[:, 0]])


def test_machine_on_progressive_mounts_against_fsolve() -> None:
    load = np.array([-800.0, -60.0, 45.0])
    found = at_rest(ROWS, [ElementLaw(curve=CURVE)] * 4, load)
    own = PchipInterpolator(*POINTS, extrapolate=True)
    wanted = fsolve(lambda q: ROWS.T @ own(ROWS @ q) - load, [-0.005, 0.0, 0.0], xtol=1e-13)
    assert found.displacement == pytest.approx(wanted, rel=1e-9)
    assert ROWS.T @ found.force == pytest.approx(load, abs=1e-7)
    assert found.stiffness == pytest.approx(ROWS.T @ (own(ROWS @ wanted, 1)[:, None] * ROWS), rel=1e-7)
    # The loaded corner is the stiffer one: what a single stiffness a part would miss.
    assert found.tangent.max() > 1.1 * found.tangent.min()


def test_many_machines_at_once() -> None:
    load = np.linspace(0.1, 2.5, 300)[:, None] * np.array([-800.0, -60.0, 45.0])
    found = at_rest(ROWS, [ElementLaw(curve=CURVE)] * 4, load)
    assert found.displacement.shape == (300, 3)
    assert found.force @ ROWS == pytest.approx(load, abs=1e-6)


def test_a_stop_takes_the_rest_of_the_load() -> None:
    # Four springs of 10 kN/m with a 10 mm gap: 400 N on the springs, 600 N on springs and stops of 1 MN/m.
    law = ElementLaw(stiffness=1e4, stop_gap=0.01, stop_stiffness=1e6)
    found = at_rest(ROWS, [law] * 4, [-1000.0, 0.0, 0.0])
    assert found.displacement[0] == pytest.approx(-0.01 - 600.0 / 4 / 1.01e6)
    assert found.stopped.all()


def test_an_uneven_floor_and_a_mount_in_the_air() -> None:
    # One mount 20 mm short: with springs that pull all four share; with mounts that lie loose it may idle.
    pulls = at_rest(ROWS, [ElementLaw(stiffness=1e4)] * 4, [-1000.0, 0, 0], [-0.01, -0.01, -0.01, -0.02])
    assert pulls.force == pytest.approx([225.0, 275.0, 275.0, 225.0])
    loose = [ElementLaw(stiffness=1e4, pulls=False)] * 4
    idle = at_rest(ROWS, loose, [-1000.0, 0.0, 0.0], [-0.01, -0.01, -0.01, -0.5])
    assert idle.force == pytest.approx([0.0, 500.0, 500.0, 0.0], abs=1e-6)


def test_refusals_of_the_resting_place() -> None:
    with pytest.raises(UnsupportedMachine):
        at_rest(ROWS[:1], [ElementLaw(stiffness=1e4)], [-1000.0, 0.0, 0.0])
    with pytest.raises(OutsideTable, match="deflection"):
        at_rest(ROWS, [ElementLaw(curve=CURVE)] * 4, [-9000.0, 0.0, 0.0])
    # A moment beyond the edge of loose mounts tips the machine.
    with pytest.raises(NotAtRest, match="does it tip"):
        at_rest(ROWS, [ElementLaw(stiffness=1e4, pulls=False)] * 4, [-1000.0, 900.0, 0.0])
