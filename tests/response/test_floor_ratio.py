"""Floor's motion with the machine on its mounts over that with the machine bolted down."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

from detune.brief.allowable.floor_ratio import FloorRatio
from detune.brief.allowable.transmissibility import Transmissibility
from detune.brief.brief import Brief
from detune.brief.condition import Condition
from detune.brief.cross_check import cross_check
from detune.brief.floor import Floor
from detune.brief.forcing.harmonic_force import HarmonicForce
from detune.brief.machine import Body, Connection, Station
from detune.brief.read import scan_brief
from detune.brief.state import State
from detune.parts.kinds.mount import Mount
from detune.problem.build import build
from detune.response.assess import assess
from detune.response.assessment import MarginRow
from detune.response.designs import all_designs
from response import machines
from response import test_structure as on
from response import test_two_ways as two_ways
from small_studies import mass_on_mounts, parts_from, study_text, table, tone, written

TWO_PI = 2.0 * math.pi
M, MF, KF, CF = 200.0, 3000.0, 2.0e7, 8.0e3
SLAB = Floor(kind="mass-spring-damper", mass=MF, stiffness=KF, damping=CF)


def ratio(limit: float = 1e6, **changes: object) -> FloorRatio:
    return FloorRatio(**{"direction": "z", "limit": limit, **changes})


def hand(frequency: np.ndarray, k: float, c: float) -> np.ndarray:
    """Two masses by hand: (k' - w^2 m)(D_f + k') - k'^2 below k', against D_f - w^2 m of one mass on the floor."""
    w = TWO_PI * frequency
    mount, floor = k + 1j * w * c, KF - w**2 * MF + 1j * w * CF
    mounted = mount / ((mount - w**2 * M) * (floor + mount) - mount**2)
    return np.abs(mounted * (floor - w**2 * M))


def row_of(brief: Brief, *mounts: Mount) -> MarginRow:
    found = [row for row in machines.assessed(brief, *mounts).margins if row.kind == "floor-ratio"]
    return max(found, key=lambda row: row.value)


@pytest.mark.parametrize("k, c", [(3e5, 300.0), (3e5, 3.0), (8e4, 900.0), (2e7, 1e4), (6e6, 50.0)])
def test_one_axis_by_hand(k: float, c: float) -> None:
    """Supremum over 3 to 60 Hz against the closed form sampled densely, and at its own frequency."""
    limit = ratio()
    brief = machines.one_axis(M, machines.force((3.0, 60.0)), [limit], floor=SLAB)
    part = machines.mount(k=k, c=c)
    dense = np.linspace(3.0, 60.0, 300_001)
    expected = hand(dense, k, c)
    row = row_of(brief, part)
    assert row.value == pytest.approx(expected.max(), rel=1e-4)
    assert row.frequency is not None
    assert row.value == pytest.approx(float(hand(np.array([row.frequency]), k, c)[0]), rel=1e-8)
    assert row.frequency == pytest.approx(dense[expected.argmax()], rel=1e-3)
    assert machines.batch_value(brief, part, limit) == pytest.approx(expected.max(), rel=1e-4)


def test_against_python_control() -> None:
    """The H-infinity norm of the ratio as a transfer function, by python-control, over all frequencies."""
    control = pytest.importorskip("control")
    k, c = 3e5, 250.0
    s = control.tf("s")
    mount, floor = k + c * s, KF + CF * s + MF * s**2
    system = mount * (floor + M * s**2) / ((mount + M * s**2) * (floor + mount) - mount**2)
    norm = control.system_norm(control.minreal(system, verbose=False), p="inf", tol=1e-8)
    brief = machines.one_axis(M, machines.force((0.5, 300.0)), [ratio()], floor=SLAB)
    assert row_of(brief, machines.mount(k=k, c=c)).value == pytest.approx(norm, rel=1e-4)


def test_limits_of_stiff_and_of_soft_mounts() -> None:
    """Infinitely stiff mounts are bolts: 1. Of soft ones k / (m w^2) is left, times what the floor does for itself."""
    at = machines.one_axis(M, machines.force(31.0), [ratio()], floor=SLAB)
    assert row_of(at, machines.mount(k=1e13)).value == pytest.approx(1.0, rel=1e-5)
    w = TWO_PI * 31.0
    floor = KF - w**2 * MF + 1j * w * CF
    soft = 1.0 / (M * w**2) * abs(floor - w**2 * M) / abs(floor)
    assert row_of(at, machines.mount(k=1.0)).value == pytest.approx(soft, rel=1e-4)


def test_force_ratio_stands_beside_it_and_is_another_number() -> None:
    """Force into the floor per unit force: k' D_f / ((k' - w^2 m)(D_f + k') - k'^2), by hand."""
    k, c = 3e5, 300.0
    other = Transmissibility(of="force", direction="z", limit=1e6)
    brief = machines.one_axis(M, machines.force(20.0), [ratio(), other], floor=SLAB)
    found = machines.assessed(brief, machines.mount(k=k, c=c))
    w = TWO_PI * 20.0
    mount, floor = k + 1j * w * c, KF - w**2 * MF + 1j * w * CF
    force = abs(mount * floor / ((mount - w**2 * M) * (floor + mount) - mount**2))
    assert machines.value(found, "transmissibility") == pytest.approx(force, rel=1e-9)
    (row,) = [row for row in found.margins if row.kind == "floor-ratio"]
    assert "insertion ratio of the mounts" in row.quantity
    assert row.note == f"force ratio (transmissibility) at this frequency: {force:.4g}"
    assert row.value == pytest.approx(float(hand(np.array([20.0]), k, c)[0]), rel=1e-9)


@pytest.mark.parametrize("seed", range(3))
def test_six_axes_bolted_down_move_as_one_mass_with_the_floor(seed: int) -> None:
    """Bolted: F_z / (k_f + j w c_f - w^2 (m + m_f)), whatever else the machine is; on mounts by numpy's solver."""
    brief, mounts = machines.random_machine(seed, viscous=True)
    direction = (0.3, -0.2, 1.0)
    hum = HarmonicForce(name="hum", frequency=17.0, position=(0.0, 0.0, 0.0), force=(0.0, 0.0, 1.0))
    limit = FloorRatio(direction=direction, limit=1e6)
    brief = brief.model_copy(update={"forcing": (hum,), "allowables": (*brief.allowables, limit)})
    brief = brief.model_copy(update={"conditions": (brief.conditions[0].model_copy(update={"shafts": {}}),)})
    mass, damping, stiffness = two_ways.by_hand(brief, mounts)
    unit = np.array(direction) / np.linalg.norm(direction)
    w = TWO_PI * 17.0
    load = np.zeros(7)
    load[:3] = unit
    q = np.linalg.solve(stiffness + 1j * w * damping - w**2 * mass, load)[6]
    floor = brief.floor
    bolted = unit[2] / (floor.stiffness + 1j * w * floor.damping - w**2 * (floor.mass + brief.bodies[0].mass))
    row = row_of(brief, *mounts)
    assert row.value == pytest.approx(abs(q / bolted), rel=1e-8)


@pytest.mark.parametrize("seed", range(2))
def test_batch_and_assessor_agree_over_a_range(seed: int) -> None:
    brief, mounts = machines.random_machine(seed)
    limit = FloorRatio(direction="z", limit=10.0)
    brief = brief.model_copy(update={"allowables": (*brief.allowables, limit)})
    problem = build(brief, {"list": machines.catalog(*mounts)})
    designs = all_designs(problem.model, 0, problem.count)
    margins = machines.batch_margins(problem, designs)
    (found,) = [m for (quantity, _, _), m in margins.items() if quantity == limit.quantity()]
    for number in range(problem.count):
        judged = assess(problem.brief, problem.design(designs, number))
        own = min(row.margin for row in judged.margins if row.kind == "floor-ratio")
        assert found[number] == pytest.approx(own, rel=2e-4)


def test_a_floor_that_stands_still_when_bolted_down_makes_a_sharp_peak() -> None:
    """A body on a pipe of the machine is an absorber: at its own frequency the bolted floor hardly moves.

    Loaded on that body itself, the two machines differ there; dense sampling by numpy, two and three masses.
    """
    m1, m2, k2, eta, k, loss = 40.0, 300.0, 40.0 * (TWO_PI * 23.7) ** 2, 1e-3, 9e5, 0.05
    bodies = (
        Body(name="gear", free=("z",), mass=m1, centre=(0.0, 0.0, 0.0)),
        Body(name="frame", free=("z",), mass=m2, centre=(0.0, 0.0, 0.0)),
        Body(name="tank", free=("z",), mass=25.0, centre=(0.0, 0.0, 0.0)),
    )
    k3 = 25.0 * (TWO_PI * 41.3) ** 2
    pipes = (
        Connection(name="bearing", on="gear", to="frame", position=(0.0, 0.0, 0.0), stiffness=(1.0, 1.0, k2),
                   loss_factor=eta),
        Connection(name="hose", on="tank", to="floor", position=(0.0, 0.0, 0.0), stiffness=(1.0, 1.0, k3),
                   loss_factor=eta),
    )  # fmt: skip
    brief = machines.brief_of(
        bodies=bodies,
        points=(machines.Point(name="P", on="frame", position=(0.0, 0.0, 0.0)),),
        stations=(Station(name="S", on="frame", group="G", position=(0.0, 0.0, 0.0)),),
        connections=pipes,
        floor=SLAB,
        forcing=(machines.force((15.0, 60.0), on="gear"),),
        allowables=(machines.far_limit(), ratio()),
    )
    part = machines.mount(k=k, loss=loss)

    def floor_motion(frequency: np.ndarray, bolted: bool) -> np.ndarray:
        w = TWO_PI * frequency
        gear, tank = k2 * (1 + 1j * eta), k3 * (1 + 1j * eta)
        mount = 1e16 if bolted else k * (1 + 1j * loss)
        out = np.zeros(len(w), dtype=complex)
        for i, omega in enumerate(w):
            stiffness = np.zeros((4, 4), dtype=complex)
            for a, b, spring in ((0, 1, gear), (1, 3, mount), (2, 3, tank)):
                stiffness[[a, b], [a, b]] += spring
                stiffness[[a, b], [b, a]] -= spring
            stiffness[3, 3] += KF + 1j * omega * CF
            out[i] = np.linalg.solve(stiffness - omega**2 * np.diag([m1, m2, 25.0, MF]), [1, 0, 0, 0])[3]
        return np.abs(out)

    dense = np.unique(np.concatenate([np.linspace(15, 60, 6001), 41.3 + np.linspace(-0.4, 0.4, 4001)]))
    expected = floor_motion(dense, False) / floor_motion(dense, True)
    row = row_of(brief, part)
    assert row.value == pytest.approx(expected.max(), rel=2e-3)
    assert row.value >= expected.max() * (1.0 - 1e-4)
    assert machines.batch_value(brief, part, ratio()) == pytest.approx(row.value, rel=1e-3)


def test_a_machine_on_a_beam_by_springs_as_stiff_as_bolts(tmp_path: Path) -> None:
    """Feet that move differently: root of the sum of their squares, bolted by 1e13 N/m in the full equations."""
    brief = on.on_beam(on.structure(tmp_path))
    limit = FloorRatio(direction="z", limit=1e6)
    brief = brief.model_copy(
        update={"allowables": (*brief.allowables, limit), "forcing": (machines.force((8.0, 60.0)),)}
    )
    parts = machines.mount("a", 4e5, loss=0.1), machines.mount("b", 6e5, loss=0.1)
    row = row_of(brief, *parts)
    assert row.frequency is not None

    def feet(frequency: float, springs: tuple[complex, complex]) -> float:
        from scipy.linalg import eigh

        values, shapes = eigh(on.STIFFNESS_MATRIX, on.MASS_MATRIX)
        w = TWO_PI * frequency
        size = len(values) + 2
        matrix = np.zeros((size, size), dtype=complex)
        matrix[range(2, size), range(2, size)] = values - w**2 + 2j * on.RATIO * np.sqrt(values) * w
        matrix[0, 0], matrix[1, 1] = -(w**2) * on.BODY_MASS, -(w**2) * on.INERTIA
        rows = []
        for x, node, spring in ((-on.HALF, on.LEFT, springs[0]), (on.HALF, on.RIGHT, springs[1])):
            foot = np.zeros(size)
            foot[2:] = shapes[on.freedom(node)]
            # A turn about y lifts what lies at negative x.
            across = -foot
            across[0], across[1] = 1.0, -x
            matrix += spring * np.outer(across, across)
            rows.append(foot)
        load = np.zeros(size)
        load[0] = 1.0
        return float(np.linalg.norm(np.array(rows) @ np.linalg.solve(matrix, load)))

    soft = (4e5 * (1 + 0.1j), 6e5 * (1 + 0.1j))
    dense = np.linspace(8.0, 60.0, 1501)
    expected = max(feet(f, soft) / feet(f, (1e13, 1e13)) for f in dense)
    here = feet(row.frequency, soft) / feet(row.frequency, (1e13, 1e13))
    assert row.value == pytest.approx(here, rel=1e-5)
    assert row.value >= expected * (1.0 - 1e-6)


RIGID_FAULT = "a floor that is not rigid"


def test_what_is_refused() -> None:
    """A rigid floor, a direction that leaves the floor at rest, and a frequency nothing reaches."""
    rigid = machines.one_axis(M, machines.force(20.0), [ratio()])
    (fault,) = cross_check(rigid)
    assert fault.expected.startswith(RIGID_FAULT) and fault.path == ("allowable", 1)
    brief, _ = machines.random_machine(0)
    level = brief.model_copy(update={"allowables": (*brief.allowables, ratio(direction="x"))})
    (fault,) = cross_check(level)
    assert fault.path == ("allowable", 1, "direction") and "up and down alone" in fault.expected
    high = machines.one_axis(M, machines.force(20.0), [ratio(from_frequency=30.0)], floor=SLAB)
    (fault,) = cross_check(high)
    assert fault.path == ("allowable", 1, "from_frequency")


def test_faults_name_line_and_key(tmp_path: Path) -> None:
    text = study_text(
        "A mass",
        mass_on_mounts("200 kg", stations={"S": 0.0}),
        table("condition", name="running"),
        tone("20 Hz", "1 N"),
        table("allowable", kind="floor-ratio", direction="z", limit="0"),
        parts_from("mounts"),
    )
    study = written(tmp_path, text)
    (fault,) = [f for f in scan_brief(study).faults if f.where.startswith("allowable")]
    assert (fault.where, fault.expected) == ("allowable[1].limit", "a limit above zero")
    assert text.splitlines()[(fault.line or 0) - 1] == 'limit = "0"'
    written(tmp_path, text.replace('limit = "0"', 'limit = "20 %"'))
    (fault,) = scan_brief(study).faults
    assert fault.expected.startswith(RIGID_FAULT) and fault.found == "floor-ratio"


def test_a_lost_mount_leaves_the_reference_as_it_is() -> None:
    """Bolted at every station of the study in any state; on the mounts that are left by numpy's solver."""
    brief, mounts = machines.random_machine(1, viscous=True)
    hum = HarmonicForce(name="hum", frequency=17.0, position=(0.0, 0.0, 0.0), force=(0.0, 0.0, 1.0))
    left = brief.model_copy(update={"stations": brief.stations[:2] + brief.stations[3:]})
    mass, damping, stiffness = two_ways.by_hand(left, mounts)
    w, floor = TWO_PI * 17.0, brief.floor
    load = np.array([0.0, 0.0, 1.0, 0.0, 0.0, 0.0, 0.0])
    q = np.linalg.solve(stiffness + 1j * w * damping - w**2 * mass, load)[6]
    whole = floor.mass + brief.bodies[0].mass
    bolted = 1.0 / (floor.stiffness + 1j * w * floor.damping - w**2 * whole)
    lost = brief.model_copy(
        update={
            "forcing": (hum,),
            "allowables": (*brief.allowables, ratio()),
            "states": (State(name="one lost", lost=(brief.stations[2].name,)),),
            "conditions": (Condition(name="running", state="one lost"),),
        }
    )
    row = row_of(lost, *mounts)
    assert row.value == pytest.approx(abs(q / bolted), rel=1e-8)
