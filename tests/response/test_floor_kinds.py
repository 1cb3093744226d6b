"""Floors known by their stiffness between the stations, and by a table of dynamic stiffness."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from pydantic import ValidationError

from detune.brief.allowable.base import HarmonicAllowable
from detune.brief.allowable.floor_ratio import FloorRatio
from detune.brief.allowable.floor_velocity import FloorVelocity
from detune.brief.allowable.sag import Sag
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.allowable.velocity import Velocity
from detune.brief.brief import Brief
from detune.brief.choice import Objectives
from detune.brief.condition import Condition
from detune.brief.cross_check import cross_check
from detune.brief.floor import Floor
from detune.brief.forcing.base_motion import BaseMotion
from detune.brief.forcing.force_pulse import ForcePulse
from detune.brief.forcing.harmonic_force import HarmonicForce
from detune.brief.machine import Body, InertiaTensor, Point, Station
from detune.brief.read import scan_brief
from detune.problem.build import build
from detune.response.assemble import dynamic_matrices
from detune.response.assess import assess
from detune.response.design import Design
from detune.response.designs import Designs, all_designs
from detune.response.direct import DirectMachine
from detune.response.direct_views import DirectTone
from detune.response.loads import condition_families
from detune.response.model import build_model
from detune.response.views import ToneBatch
from detune.solvers import bounded
from response import machines

TWO_PI = 2.0 * math.pi
G = 9.80665
CORNERS = {"A": (-0.6, -0.4), "B": (-0.6, 0.4), "C": (0.6, -0.4), "D": (0.6, 0.4)}
MASS, INERTIA, HEIGHT = 500.0, (30.0, 45.0, 50.0), 0.35
K, K_SIDE, ETA = 4.0e5, 2.0e5, 0.12


def compliance() -> np.ndarray:
    """A slab that yields most under the station on it, less under its neighbours (m/N); unlike at every station."""
    places = np.array(list(CORNERS.values()))
    apart = np.linalg.norm(places[:, None] - places[None], axis=2)
    own = np.diag([0.9e-7, 1.3e-7, 1.1e-7, 1.7e-7])
    return 1.6e-7 * np.exp(-((apart / 1.4) ** 2)) + own


STIFFNESS = np.linalg.inv(compliance())
STIFFNESS = 0.5 * (STIFFNESS + STIFFNESS.T)
FLOOR_MASS = np.array([[300.0, 40.0, 40.0, 10.0], [40.0, 350.0, 10.0, 40.0],
                       [40.0, 10.0, 280.0, 40.0], [10.0, 40.0, 40.0, 320.0]])  # fmt: skip
FLOOR_ETA = 0.06


def matrix(values: np.ndarray) -> tuple[tuple[float, ...], ...]:
    return tuple(tuple(float(x) for x in row) for row in values)


def slab(**changes: Any) -> Floor:
    stated: dict[str, Any] = {
        "kind": "stiffness-matrix",
        "stations": tuple(CORNERS),
        "stiffness_matrix": matrix(STIFFNESS),
        "mass_matrix": matrix(FLOOR_MASS),
        "loss_factor": FLOOR_ETA,
    }
    return Floor(**{k: v for k, v in {**stated, **changes}.items() if v is not None})


def machine_on(floor: Floor, *allowables: HarmonicAllowable | Sag, **changes: Any) -> Brief:
    x, y, z = INERTIA
    return machines.brief_of(
        **{
            "bodies": (
                Body(name="m", mass=MASS, centre=(0.05, -0.03, HEIGHT), inertia=InertiaTensor(xx=x, yy=y, zz=z)),
            ),
            "points": (Point(name="P", position=(0.3, 0.2, 0.5)),),
            "stations": tuple(
                Station(name=name, group="feet", position=(*place, 0.0)) for name, place in CORNERS.items()
            ),
            "floor": floor,
            "forcing": (
                HarmonicForce(
                    name="hum", frequency=23.0, position=(0.2, 0.1, 0.4), force=(30.0, -20.0, 80.0),
                    moment=(3.0, 0.0, 1.0),
                ),
            ),
            "allowables": (machines.far_limit(), *allowables),
            **changes,
        }
    )  # fmt: skip


PART = machines.mount("m", K, lateral=K_SIDE, loss=ETA)


def by_hand(
    frequency: float,
    force: np.ndarray,
    moment: np.ndarray,
    at: np.ndarray,
    floor: np.ndarray,
    mount: complex = 1.0,
) -> tuple[np.ndarray, np.ndarray]:
    """Motion of the body (6,) and of the floor under the stations (4,), by numpy from the cross product alone.

    floor: dynamic stiffness (4, 4) of the floor; mount: what the mounts' stiffness is multiplied by.
    """
    w, centre = TWO_PI * frequency, np.array([0.05, -0.03, HEIGHT])
    whole = np.zeros((10, 10), dtype=complex)
    whole[:6, :6] = -(w**2) * np.diag([MASS] * 3 + list(INERTIA))
    whole[6:, 6:] = floor
    for number, (x, y) in enumerate(CORNERS.values()):
        arm = np.array([x, y, 0.0]) - centre
        rows = np.zeros((3, 10))
        rows[:, :3] = np.eye(3)
        for axis in range(3):
            rows[:, 3 + axis] = np.cross(np.eye(3)[axis], arm)
        rows[2, 6 + number] = -1.0
        whole += mount * rows.T @ np.diag(np.array([K_SIDE, K_SIDE, K]) * (1 + 1j * ETA)) @ rows
    load = np.zeros(10, dtype=complex)
    load[:3], load[3:6] = force, moment + np.cross(at - centre, force)
    q = np.linalg.solve(whole, load)
    return q[:6], q[6:]


def floor_at(frequency: float, mass: np.ndarray = FLOOR_MASS) -> np.ndarray:
    return STIFFNESS * (1 + 1j * FLOOR_ETA) - (TWO_PI * frequency) ** 2 * mass


HUM = (np.array([30.0, -20.0, 80.0]), np.array([3.0, 0.0, 1.0]), np.array([0.2, 0.1, 0.4]))


class TestBetweenStations:
    """A full stiffness matrix between the stations."""

    @pytest.mark.parametrize("frequency", [6.0, 23.0, 71.0])
    def test_both_ways_against_numpy(self, frequency: float) -> None:
        """Motions, forces into the floor and into the ground; 1e-8 of the largest component."""
        brief = machine_on(slab())
        hum = brief.forcing[0].model_copy(update={"frequency": frequency})
        brief = brief.model_copy(update={"forcing": (hum,)})
        body, feet = by_hand(frequency, *HUM, floor_at(frequency))
        centre = np.array([0.05, -0.03, HEIGHT])
        point = body[:3] + np.cross(body[3:], np.array([0.3, 0.2, 0.5]) - centre)
        level = [
            np.array([K_SIDE, K_SIDE]) * (1 + 1j * ETA)
            * (body[:3] + np.cross(body[3:], np.array([x, y, 0.0]) - centre))[:2]
            for x, y in CORNERS.values()
        ]  # fmt: skip
        into = np.array([*np.sum(level, axis=0), (floor_at(frequency) @ feet).sum()])
        ground = np.array([*np.sum(level, axis=0), (STIFFNESS * (1 + 1j * FLOOR_ETA) @ feet).sum()])
        model = build_model(brief, ((PART,),))
        omega = TWO_PI * np.array([[frequency]])
        designs = all_designs(model, 0, 1)
        (family,) = condition_families(brief, model, brief.conditions[0])
        batch = ToneBatch(model, designs, dynamic_matrices(model, designs), family.sets[0], omega)
        direct = DirectTone(DirectMachine(brief, Design(("feet",), (PART,), 0.0)), hum.tones({}), omega)
        for view in (batch, direct):
            assert view.motion("P")[0, 0] == pytest.approx(point, abs=1e-8 * np.abs(point).max())
            assert view.total_force("floor")[0, 0] == pytest.approx(into, abs=1e-8 * np.abs(into).max())
            assert view.total_force("ground")[0, 0] == pytest.approx(ground, abs=1e-8 * np.abs(ground).max())
        put_in, lost = direct.power()
        assert put_in[0] == pytest.approx(lost[0], rel=1e-9)

    def test_at_rest(self) -> None:
        """Sag: the station forces of a rigid body on springs in series with the slab, solved by hand."""
        brief = machine_on(slab(), Sag(at="P", limit=1.0))
        found = machines.assessed(brief, PART)
        weight = MASS * G
        stiffness = np.zeros((10, 10))
        centre = np.array([0.05, -0.03, HEIGHT])
        for number, (x, y) in enumerate(CORNERS.values()):
            arm = np.array([x, y, 0.0]) - centre
            rows = np.zeros((3, 10))
            rows[:, :3] = np.eye(3)
            for axis in range(3):
                rows[:, 3 + axis] = np.cross(np.eye(3)[axis], arm)
            rows[2, 6 + number] = -1.0
            stiffness += rows.T @ np.diag([K_SIDE, K_SIDE, K]) @ rows
        stiffness[6:, 6:] += STIFFNESS
        q = np.linalg.solve(stiffness, np.array([0, 0, -weight, 0, 0, 0, 0, 0, 0, 0]))
        sag = -(q[:3] + np.cross(q[3:6], np.array([0.3, 0.2, 0.5]) - centre))[2]
        assert machines.value(found, "sag") == pytest.approx(sag, rel=1e-9)

    def test_supremum_over_a_range(self) -> None:
        """Velocity at P over 5 to 80 Hz against 4,000 frequencies by numpy, both ways."""
        limit = Velocity(at="P", direction="z", measure="peak", limit=1.0)
        hum = HarmonicForce(
            name="hum", frequency=(5.0, 80.0), position=(0.2, 0.1, 0.4), force=(30.0, -20.0, 80.0)
        )
        brief = machine_on(slab(), limit, forcing=(hum,))
        centre = np.array([0.05, -0.03, HEIGHT])
        dense = np.linspace(5.0, 80.0, 4001)
        moved = []
        for f in dense:
            body, _ = by_hand(float(f), HUM[0], np.zeros(3), HUM[2], floor_at(float(f)))
            moved.append(
                TWO_PI * f * abs((body[:3] + np.cross(body[3:], np.array([0.3, 0.2, 0.5]) - centre))[2])
            )
        value = machines.value(machines.assessed(brief, PART), "velocity")
        assert value == pytest.approx(max(moved), rel=1e-3) and value >= max(moved) * (1.0 - 1e-9)
        assert machines.batch_value(brief, PART, limit) == pytest.approx(value, rel=2e-4)

    def test_floor_ratio(self) -> None:
        """Root of the sum of squares under the four stations, bolted by springs 1e8 times as stiff."""
        brief = machine_on(slab(), FloorRatio(direction="z", limit=1.0))
        centre = np.array([0.05, -0.03, HEIGHT])
        unit = (np.array([0.0, 0.0, 1.0]), np.zeros(3), centre)
        soft = np.linalg.norm(by_hand(23.0, *unit, floor_at(23.0))[1])
        stiff = np.linalg.norm(by_hand(23.0, *unit, floor_at(23.0), 1e7)[1])
        value = machines.value(machines.assessed(brief, PART), "floor-ratio")
        assert value == pytest.approx(soft / stiff, rel=1e-5)
        batch = machines.batch_value(brief, PART, FloorRatio(direction="z", limit=1.0))
        assert batch == pytest.approx(value, rel=1e-8)

    def test_without_mass_it_is_the_stiffness_alone(self) -> None:
        """Against the full equations with no mass at all; what is put in is printed as assumed."""
        limit = Velocity(at="P", direction="z", measure="peak", limit=1.0)
        brief = machine_on(slab(mass_matrix=None), limit)
        body, _ = by_hand(23.0, *HUM, floor_at(23.0, 0.0 * FLOOR_MASS))
        centre = np.array([0.05, -0.03, HEIGHT])
        moved = TWO_PI * 23.0 * abs((body[:3] + np.cross(body[3:], np.array([0.3, 0.2, 0.5]) - centre))[2])
        value = machines.value(machines.assessed(brief, PART), "velocity")
        assert value == pytest.approx(moved, rel=2e-5)
        told = build(brief, {"list": machines.catalog(PART)}).assumed
        assert any(note.startswith("floor without mass: so little is put in") for note in told)

    def test_one_number_on_the_diagonal_is_four_springs(self) -> None:
        """Each foot alone on k_f: the mount in series with it, k k_f / (k + k_f), on a rigid floor."""
        springs = np.diag([5e5] * 4)
        brief = machine_on(
            slab(stiffness_matrix=matrix(springs), mass_matrix=None, loss_factor=ETA), Sag(at="P", limit=1.0)
        )
        series = machines.mount("m", K * 5e5 / (K + 5e5), lateral=K_SIDE, loss=ETA)
        rigid = machine_on(machines.RIGID, Sag(at="P", limit=1.0))
        one, other = machines.assessed(brief, PART), machines.assessed(rigid, series)
        for kind in ("sag", "displacement"):
            assert machines.value(one, kind) == pytest.approx(machines.value(other, kind), rel=1e-4)

    def test_velocity_of_the_floor_under_a_station(self) -> None:
        """Every foot by numpy, rms; both ways."""
        _, feet = by_hand(23.0, *HUM, floor_at(23.0))
        limit = FloorVelocity(stations=("B", "D"), measure="rms", limit=1.0)
        brief = machine_on(slab(), limit)
        found = machines.assessed(brief, PART)
        margins = machines.batch_margins(
            build(brief, {"list": machines.catalog(PART)}), Designs(np.zeros((1, 1), int), np.zeros(1, int))
        )
        for name, foot in zip(CORNERS, feet, strict=True):
            if name in ("B", "D"):
                expected = TWO_PI * 23.0 * abs(foot) / math.sqrt(2.0)
                assert machines.value(found, "floor-velocity", name) == pytest.approx(expected, rel=1e-8)
                margin = margins[limit.quantity(), name, "running"][0]
                assert 1.0 / (1.0 + margin) == pytest.approx(expected, rel=1e-8)

    def test_a_push_in_time_moves_the_floor_under_a_station_alike_both_ways(self) -> None:
        pulse = ForcePulse(
            name="bump", shape="half-sine", duration=0.02, position=(0.0, 0.0, 0.3), force=(0.0, 0.0, 900.0)
        )
        limit = FloorVelocity(stations=("B",), measure="peak", limit=1.0)
        brief = machine_on(slab(), limit, forcing=(pulse,))
        value = machines.value(machines.assessed(brief, PART), "floor-velocity")
        assert machines.batch_value(brief, PART, limit) == pytest.approx(value, rel=1e-3)
        # The impulse 2/pi F T moves no part of the floor faster than it would move the lightest foot alone.
        assert 0.0 < value < 2.0 / math.pi * 900.0 * 0.02 / np.linalg.eigvalsh(FLOOR_MASS)[0]

    def test_the_bounded_search_treats_it(self) -> None:
        brief = machine_on(slab(), Velocity(at="P", direction="z", measure="peak", limit=1.0))
        problem = build(brief, {"list": machines.catalog(PART)})
        assert bounded.refusal(problem) is None

    def test_from_files(self, tmp_path: Path) -> None:
        names = ", ".join(f"{name} z [N/mm]" for name in CORNERS)
        rows = "\n".join(", ".join(repr(float(x)) for x in row) for row in STIFFNESS / 1e3)
        (tmp_path / "k.csv").write_text(f"# slab\n{names}\n{rows}\n", encoding="utf-8")
        masses = "\n".join("; ".join(repr(float(x)) for x in row) for row in FLOOR_MASS)
        (tmp_path / "m.csv").write_text(
            names.replace(",", ";").replace("N/mm", "kg") + f"\n{masses}\n", encoding="utf-8"
        )
        read = Floor.model_validate(
            {
                "kind": "stiffness-matrix",
                "stations": list(CORNERS),
                "stiffness_matrix": "k.csv",
                "mass_matrix": "m.csv",
            },
            context={"folder": tmp_path, "from_file": True},
        )
        assert read.matrices is not None
        assert read.matrices.stiffness == pytest.approx(STIFFNESS, rel=1e-9)
        assert read.matrices.mass == pytest.approx(FLOOR_MASS)
        assert read.data_files() == ("k.csv", "m.csv")

    @pytest.mark.parametrize(
        "changes, words",
        [
            ({"stiffness_matrix": ((1.0, 2.0), (2.0, 1.0)), "mass_matrix": None}, "4 rows of 4 values"),
            (
                {"stiffness_matrix": matrix(STIFFNESS + np.triu(0.1 * STIFFNESS, 1))},
                "a symmetric matrix; between",
            ),
            ({"stiffness_matrix": matrix(STIFFNESS - 4e7 * np.ones((4, 4)))}, "positive semidefinite"),
            (
                {"stiffness_matrix": matrix(np.ones((4, 4)) * 1e7), "mass_matrix": None},
                '"mass_matrix" beside',
            ),
            ({"mass_matrix": matrix(np.ones((4, 4)))}, "a positive definite mass matrix"),
            ({"stations": None}, '"stations"'),
            ({"damping_ratio": 0.02}, "only the keys of a floor"),
            ({"stations": ("A", "A", "C", "D")}, "each name once"),
        ],
    )
    def test_matrices_that_are_refused(self, changes: dict[str, Any], words: str) -> None:
        with pytest.raises(ValidationError) as caught:
            slab(**changes)
        assert words in str(caught.value)

    def test_what_does_not_go_with_it(self) -> None:
        good = machine_on(slab())
        assert cross_check(good) == ()

        def fault(**changes: Any) -> Any:
            (found,) = cross_check(good.model_copy(update=changes))
            return found

        base = BaseMotion(name="road", frequency=(10.0, 60.0), direction="z", velocity=2e-3)
        assert "how the places under the stations move" in fault(forcing=(*good.forcing, base)).expected
        kinds: Any = (*good.allowables, FloorVelocity(measure="rms", limit=1.0))
        assert "moves differently under every station" in fault(allowables=kinds).expected
        under = FloorVelocity(stations=("A",), measure="rms", limit=1.0)
        plain = Floor(kind="mass-spring-damper", mass=900.0, stiffness=8e6, damping=6e3)
        assert fault(floor=plain, allowables=(*good.allowables, under)).expected.startswith('no "stations"')
        short = slab(stations=("A", "B", "C"), stiffness_matrix=matrix(STIFFNESS[:3, :3]),
                     mass_matrix=matrix(FLOOR_MASS[:3, :3]))  # fmt: skip
        assert fault(floor=short).expected == "every station that stands on the floor; D is left out"
        pulse = ForcePulse(
            name="bump", shape="half-sine", duration=0.01, position=(0.0, 0.0, 0.0), force=(0.0, 0.0, 9.0)
        )
        found = cross_check(machine_on(slab(mass_matrix=None), forcing=(*good.forcing, pulse)))
        assert 'a "mass_matrix" of the floor' in found[0].expected


TABLE = "frequency [Hz], stiffness [N/mm], imaginary [N/mm]\n"


def table_file(folder: Path, frequency: np.ndarray, values: np.ndarray) -> Floor:
    rows = "".join(
        f"{float(f)!r}, {float(d.real) / 1e3!r}, {float(d.imag) / 1e3!r}\n"
        for f, d in zip(frequency, values, strict=True)
    )
    (folder / "floor.csv").write_text(TABLE + rows, encoding="utf-8")
    stated = {"kind": "dynamic-stiffness", "file": "floor.csv", "static_stiffness": "8 kN/mm"}
    return Floor.model_validate(stated, context={"folder": folder, "from_file": True})


def two_modes(frequency: np.ndarray) -> np.ndarray:
    """Driving-point stiffness of a floor with two modes, 12 and 31 Hz, and a residual: 1 / (sum of receptances)."""
    w = TWO_PI * np.asarray(frequency)
    receptance = 1.0 / 2.2e8 + 0j
    for f, mass, eta in ((12.0, 3000.0, 0.03), (31.0, 2200.0, 0.02)):
        receptance = receptance + 1.0 / (mass * ((TWO_PI * f) ** 2 * (1 + 1j * eta) - w**2))
    return 1.0 / receptance


FREQUENCY = np.linspace(4.0, 60.0, 225)
TRADE = Objectives(trade=("cost", "least-margin"))


def on_table(floor: Floor, *allowables: HarmonicAllowable, **changes: Any) -> Brief:
    stated = {"forcing": (machines.force((5.0, 58.0)),), "floor": floor, "objectives": TRADE}
    forcing = changes.pop("forcing", stated.pop("forcing"))
    return machines.one_axis(250.0, forcing, allowables, **{**stated, **changes})


class TestTable:
    """Dynamic stiffness over frequency."""

    def test_response_and_ratio_by_hand(self, tmp_path: Path) -> None:
        """Machine on mount on D_f, straight between rows: more resonances than freedoms, all of them found."""
        k = 9e5 * (1 + 0.02j)
        velocity = Velocity(at="P", direction="z", measure="peak", limit=1.0)
        ratio = FloorRatio(direction="z", limit=1.0)
        into = TransmittedForce(through="floor", direction="z", measure="peak", limit=1.0)
        brief = on_table(table_file(tmp_path, FREQUENCY, two_modes(FREQUENCY)), velocity, ratio, into)
        part = machines.mount(k=9e5, loss=0.02)
        dense = np.linspace(5.0, 58.0, 200_001)
        values = two_modes(FREQUENCY)
        floor = np.interp(dense, FREQUENCY, values.real) + 1j * np.interp(dense, FREQUENCY, values.imag)
        w = TWO_PI * dense
        whole = (k - 250.0 * w**2) * (floor + k) - k**2
        expected = {
            "velocity": np.abs(w * (floor + k) / whole).max(),
            "floor-ratio": np.abs(k / whole * (floor - 250.0 * w**2)).max(),
            "transmitted-force": np.abs(k * floor / whole).max(),
        }
        found = machines.assessed(brief, part)
        for limit in (velocity, ratio, into):
            value = machines.value(found, limit.kind)
            assert value == pytest.approx(expected[limit.kind], rel=1e-3)
            assert value >= expected[limit.kind] * (1.0 - 1e-6)
            assert machines.batch_value(brief, part, limit) == pytest.approx(value, rel=1e-3)
        assert found.separation == math.inf
        assert max(row.closing_error for row in found.power) < 1e-9

    @pytest.mark.parametrize("k, eta", [(2e6, 1e-3), (4e5, 5e-3), (2e7, 0.01), (6e4, 0.05)])
    def test_sharp_peaks_are_found(self, tmp_path: Path, k: float, eta: float) -> None:
        limit = Velocity(at="P", direction="z", measure="peak", limit=1.0)
        floor = table_file(tmp_path, FREQUENCY, two_modes(FREQUENCY))
        brief = on_table(floor, limit)
        part = machines.mount(k=k, loss=eta)
        values, spring = two_modes(FREQUENCY), k * (1 + 1j * eta)
        dense = np.linspace(5.0, 58.0, 1_000_001)
        own = np.interp(dense, FREQUENCY, values.real) + 1j * np.interp(dense, FREQUENCY, values.imag)
        w = TWO_PI * dense
        moved = np.abs(w * (own + spring) / ((spring - 250.0 * w**2) * (own + spring) - spring**2)).max()
        value = machines.value(machines.assessed(brief, part), "velocity")
        assert value >= moved * (1.0 - 1e-4) and value == pytest.approx(moved, rel=2e-3)
        assert machines.batch_value(brief, part, limit) == pytest.approx(value, rel=1e-3)

    def test_a_table_of_a_known_floor_is_that_floor(self, tmp_path: Path) -> None:
        """mass-spring-damper written as a table at 0.05 Hz: every value of the same machine, six axes, 1e-4."""
        brief, mounts = machines.random_machine(2)
        known = brief.floor
        frequency = np.arange(5.0, 65.0, 0.05)
        w = TWO_PI * frequency
        values = known.stiffness - w**2 * known.mass + 1j * w * known.damping
        floor = table_file(tmp_path, frequency, values)
        floor = floor.model_copy(update={"static_stiffness": known.stiffness})
        limits = (
            Velocity(at="P", direction="resultant", measure="rms", limit=1.0),
            FloorVelocity(measure="peak", limit=1.0),
            FloorRatio(direction="z", limit=1.0),
        )
        stated = brief.model_copy(update={"allowables": (*brief.allowables, *limits), "objectives": TRADE})
        tabulated = stated.model_copy(update={"floor": floor})
        one, other = (assess(b, Design(b.groups, mounts, 0.0)) for b in (stated, tabulated))
        for row, same in zip(one.margins, other.margins, strict=True):
            assert (row.kind, row.place, row.condition) == (same.kind, same.place, same.condition)
            assert same.value == pytest.approx(row.value, rel=1e-4)

    def test_base_motion_enters_with_the_table(self, tmp_path: Path) -> None:
        """Free motion of the floor u: the machine gets k D_f u / ((k - m w^2)(D_f + k) - k^2)."""
        base = BaseMotion(name="road", frequency=22.0, direction="z", velocity=1e-3)
        limit = Velocity(at="P", direction="z", measure="peak", limit=1.0)
        brief = on_table(table_file(tmp_path, FREQUENCY, two_modes(FREQUENCY)), limit, forcing=base)
        k, w = 9e5 * (1 + 0.02j), TWO_PI * 22.0
        values = two_modes(FREQUENCY)
        floor = np.interp(22.0, FREQUENCY, values.real) + 1j * np.interp(22.0, FREQUENCY, values.imag)
        expected = abs(k * floor / ((k - 250.0 * w**2) * (floor + k) - k**2)) * 1e-3
        part = machines.mount(k=9e5, loss=0.02)
        assert machines.value(machines.assessed(brief, part), "velocity") == pytest.approx(expected, rel=1e-9)
        assert machines.batch_value(brief, part, limit) == pytest.approx(expected, rel=1e-9)

    def test_what_it_cannot_say_is_refused(self, tmp_path: Path) -> None:
        floor = table_file(tmp_path, FREQUENCY, two_modes(FREQUENCY))
        assert cross_check(on_table(floor)) == ()

        def expected(brief: Brief) -> str:
            (fault,) = cross_check(brief)
            return fault.expected

        outside = on_table(floor, forcing=machines.force((5.0, 61.0)))
        assert (
            expected(outside) == "excitation within the table of the floor's dynamic stiffness, 4 Hz to 60 Hz"
        )
        assert "separation and settling are not judged" in expected(on_table(floor, Separation(limit=0.2)))
        ground = TransmittedForce(through="ground", direction="z", measure="peak", limit=1.0)
        assert "does not say what it passes on" in expected(on_table(floor, ground))
        assert 'objectives without "separation"' in expected(on_table(floor, objectives=Objectives()))
        run = Condition(name="start", steady=False, shafts={"rotor": (10.0, 30.0)}, run_up={"rotor": 9.0})
        through = on_table(floor, forcing=machines.unbalance(1e-3), conditions=(run,))
        assert "known over its table alone" in expected(through)
        problem = build(on_table(floor), {"list": machines.catalog(machines.mount())})
        assert "follows frequency" in str(bounded.refusal(problem))

    @pytest.mark.parametrize(
        "text, words",
        [
            (
                "frequency [Hz], stiffness [N/mm]\n1, 2\n2, 3\n",
                'exactly one of the columns "imaginary [unit]"',
            ),
            (TABLE + "1, 2, 3\n", "at least two rows"),
            (TABLE + "2, 2, 3\n1, 2, 3\n", "a frequency that rises from row to row"),
            (TABLE + "1, 2, 3\n2, 2, -3\n", "zero or more (a floor takes energy)"),
            (TABLE.replace("N/mm", "kg") + "1, 2, 3\n", "in brackets behind the name"),
            (TABLE + "1, 2, 3\n2, x, 3\n", "line 3 of floor.csv has stiffness"),
        ],
    )
    def test_tables_that_are_refused(self, tmp_path: Path, text: str, words: str) -> None:
        (tmp_path / "floor.csv").write_text(text, encoding="utf-8")
        study = tmp_path / "study.toml"
        study.write_text(
            'title = "t"\n[floor]\nkind = "dynamic-stiffness"\nfile = "floor.csv"\nstatic_stiffness = "8 kN/mm"\n',
            encoding="utf-8",
        )
        (fault,) = [f for f in scan_brief(study).faults if f.where.startswith("floor")]
        assert (fault.where, fault.line) == ("floor.file", 4) and words in fault.expected
