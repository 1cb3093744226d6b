"""Absorbers taken from a list: closed forms of the trade, batch = assessor, and what an absorber left out leaves.

Den Hartog, Mechanical Vibrations, sec. 3.3 (from memory, recomputed here by two equations of motion).
"""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from detune.brief.absorber import Absorber
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.relative_motion import RelativeMotion
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.settling_time import SettlingTime
from detune.brief.allowable.stroke import Stroke
from detune.brief.brief import Brief, demanded
from detune.brief.choice import Ballast, CatalogSource
from detune.brief.condition import Condition
from detune.brief.floor import Floor
from detune.brief.forcing.base_motion import BaseMotion
from detune.brief.forcing.base_pulse import BasePulse
from detune.brief.machine import Point
from detune.brief.state import State
from detune.parts.catalog import Catalog
from detune.parts.compose import absorber_mount, empty_station
from detune.parts.kinds.absorber import Absorber as Part
from detune.parts.kinds.mount import Mount
from detune.parts.laws import LoadCurve
from detune.problem.build import Problem, build
from detune.problem.stages import objective_values, stages
from detune.response.assess import assess
from detune.response.assessment import Assessment
from detune.response.design import Design
from detune.response.designs import all_designs
from response import law_machines as laws
from response import machines
from response import test_structure as on_structure

NIGHTLY = pytest.mark.nightly

G = 9.80665
MAIN, SPRING = 100.0, 1e6
OMEGA = math.sqrt(SPRING / MAIN)


def part(name: str, mass: float, frequency: float, ratio: float = 0.1, **changes: Any) -> Part:
    stated = {"mass_fixed": 0.0, "stroke": 1.0, "cost": 50.0, "stock": None, "tolerance": 0.02, **changes}
    return Part(
        catalog="absorbers", file="absorbers.csv", line=2, part=name, mass=mass, frequency=frequency,
        frequency_min=None, frequency_max=None, damping_ratio=ratio, **stated,
    )  # fmt: skip


def listed(*parts: Part) -> Catalog:
    return Catalog("absorbers", "absorber", parts, (), "absorbers.csv")


def with_absorber(brief: Brief, **changes: Any) -> Brief:
    stated = {"name": "absorber", "at": "P", "direction": "z", "catalogs": ("absorbers",), **changes}
    sources = (*brief.catalogs, CatalogSource(name="absorbers", file="absorbers.csv", kind="absorber"))
    return brief.model_copy(update={"absorbers": (Absorber(**stated),), "catalogs": sources})


def judged(brief: Brief, mount: Mount, absorber: Part | None) -> Assessment:
    fitted = empty_station("absorbers") if absorber is None else absorber_mount(absorber)
    return assess(brief, Design(brief.groups, (mount, fitted), 0.0))


def den_hartog(mu: float, f: float, z: float, g: float) -> float:
    """x1 / x_st of an undamped main mass; z = c / (2 m Omega_n), f = omega_a / Omega_n, g = omega / Omega_n."""
    above = (2 * z * g) ** 2 + (g**2 - f**2) ** 2
    below = (2 * z * g) ** 2 * (g**2 - 1 + mu * g**2) ** 2
    below += (mu * f**2 * g**2 - (g**2 - 1) * (g**2 - f**2)) ** 2
    return math.sqrt(above / below)


@pytest.mark.parametrize("mu", [0.05, 0.1, 0.25])
@pytest.mark.parametrize("g", [0.5, 0.896462, 0.98, 1.049342, 1.6])
def test_t1_frequency_response_of_a_main_mass_with_an_absorber(mu: float, g: float) -> None:
    """Den Hartog's closed form, and the same from m1 x1'' + k1 x1 + k2 (x1 - x2) + c2 (..) = F, m2 x2'' = .."""
    f = 1.0 / (1.0 + mu)
    own = math.sqrt(3.0 * mu / (8.0 * (1.0 + mu)))
    absorber = part("a", mu * MAIN, f * OMEGA / (2.0 * math.pi), own)
    brief = with_absorber(machines.one_axis(MAIN, machines.force(g * OMEGA / (2.0 * math.pi), 10.0)))
    found = judged(brief, machines.mount("m", SPRING), absorber)
    static = 10.0 / SPRING
    value = machines.value(found, "displacement")
    # z of the closed form is by the main frequency, the list's ratio by the absorber's own: z = own f.
    assert value == pytest.approx(static * den_hartog(mu, f, own * f, g), rel=1e-9)
    m2, w = mu * MAIN, g * OMEGA
    k2, c2 = m2 * (f * OMEGA) ** 2, 2.0 * own * m2 * f * OMEGA
    link = k2 + 1j * w * c2
    x1, x2 = np.linalg.solve([[SPRING + link - MAIN * w**2, -link], [-link, link - m2 * w**2]], [10.0, 0.0])
    assert value == pytest.approx(abs(x1), rel=1e-9)
    assert machines.value(found, "stroke") == pytest.approx(abs(x2 - x1), rel=1e-9)


@pytest.mark.parametrize(("mu", "height"), [(0.05, 6.403124), (0.1, 4.582576), (0.25, 3.0)])
def test_t1_best_tuning_and_damping_reach_the_height_of_the_fixed_points(mu: float, height: float) -> None:
    """T1: f = 1/(1+mu), z^2 = 3 mu/(8 (1+mu)) by its own frequency: the peak is sqrt(1 + 2/mu) to 1 %."""
    absorber = part("a", mu * MAIN, OMEGA / (1.0 + mu) / (2 * math.pi), math.sqrt(3 * mu / (8 * (1 + mu))))
    band = (0.5 * OMEGA / (2 * math.pi), 1.6 * OMEGA / (2 * math.pi))
    brief = with_absorber(machines.one_axis(MAIN, machines.force(band, 10.0)))
    found = judged(brief, machines.mount("m", SPRING), absorber)
    assert machines.value(found, "displacement") / (10.0 / SPRING) == pytest.approx(height, rel=0.01)
    # Den Hartog's fixed points lie on the curve whatever the damping, so no damping is below them.
    stiffer = judged(brief, machines.mount("m", SPRING), replace(absorber, damping_ratio=0.6))
    assert machines.value(stiffer, "displacement") / (10.0 / SPRING) > height * 0.999


def test_w18_stroke_and_split_frequencies_of_a_book() -> None:
    """W18 (Kelly): 200 kg on 4e5 N/m, 500 N at 50 rad/s; 100 kg on 2.5e5 N/m: X2 = 2 mm, 32.6787 and 68.4259 rad/s."""
    brief = with_absorber(machines.one_axis(200.0, machines.force(50.0 / (2 * math.pi), 500.0)))
    absorber = part("a", 100.0, 50.0 / (2 * math.pi), 0.0, stroke=2.1e-3)
    found = judged(brief, machines.mount("m", 4e5), absorber)
    assert [2 * math.pi * mode.frequency for mode in found.modes] == pytest.approx(
        [32.6787, 68.4259], rel=1e-5
    )
    # The absorber holds the main mass still, and its own motion is the force over its stiffness.
    assert machines.value(found, "displacement") == pytest.approx(0.0, abs=1e-12)
    (stroke,) = [row for row in found.margins if row.kind == "stroke"]
    assert stroke.value == pytest.approx(500.0 / 2.5e5, rel=1e-9)
    assert stroke.margin == pytest.approx(2.1 / 2.0 - 1.0, rel=1e-9) and stroke.place == "absorber"
    shorter = judged(brief, machines.mount("m", 4e5), replace(absorber, stroke=1.9e-3))
    assert not shorter.meets and shorter.tightest.kind == "stroke"


def test_its_mass_counts_in_load_price_and_added_mass_and_its_mode_in_separation() -> None:
    """100 + 8 + 2 kg on one mount; the modes of 102 and 8 kg by a cubic of two freedoms."""
    brief = with_absorber(machines.one_axis(MAIN, machines.force(20.0), [Separation(limit=0.01)]))
    absorber = part("a", 8.0, 12.0, mass_fixed=2.0, cost=70.0)
    found = judged(brief, machines.mount("m", SPRING, cost=9.0), absorber)
    assert machines.value(found, "load-range") == pytest.approx(110.0 * G, rel=1e-12)
    assert found.total_load == pytest.approx(110.0 * G, rel=1e-12)
    assert (found.cost, found.added_mass, found.part_numbers) == (79.0, 10.0, 2)
    k2 = 8.0 * (2 * math.pi * 12.0) ** 2
    # 102 * 8 w^4 - ((SPRING + k2) 8 + k2 102) w^2 + SPRING k2 = 0
    roots = np.roots([102.0 * 8.0, -((SPRING + k2) * 8.0 + k2 * 102.0), SPRING * k2])
    expected = sorted(math.sqrt(root) / (2 * math.pi) for root in roots)
    assert [mode.frequency for mode in found.modes] == pytest.approx(expected, rel=1e-10)
    assert [mode.name for mode in found.modes] == ["absorber", "heave"]
    assert found.separation == pytest.approx(1.0 - expected[1] / 20.0, rel=1e-9) or found.separation < 0.0
    assert found.modes[0].separation == pytest.approx(1.0 - expected[0] / 20.0, rel=1e-9)


def six_axes(seed: int, **changes: Any) -> tuple[Brief, tuple[Mount, ...]]:
    brief, mounts = machines.random_machine(seed, flexible_floor=bool(seed % 2))
    update = {
        "gravity_stiffness": True,
        "points": (*brief.points, Point(name="Q", position=(0.15, -0.2, 0.6))),
        "absorbers": (
            Absorber(name="upright", at="P", direction="z", catalogs=("absorbers",), empty=True),
            Absorber(name="slanted", at="Q", direction=(1.0, 0.4, 0.3), catalogs=("absorbers",), empty=True),
        ),
        "catalogs": (
            *brief.catalogs,
            CatalogSource(name="absorbers", file="absorbers.csv", kind="absorber"),
        ),
        "allowables": (*brief.allowables, Separation(limit=0.01), SettlingTime(to=0.05, limit=5.0)),
        "ballast": None,
        **changes,
    }
    return brief.model_copy(update=update), mounts


PARTS = listed(part("soft", 12.0, 9.0, 0.12, mass_fixed=2.0), part("stiff", 6.0, 24.0, 0.05, mass_fixed=1.0))


def compared(problem: Problem, every: int = 1, tolerance: float = 2e-4) -> int:
    """Compare margins and objectives of the batch with the assessor's; return how many rows were compared."""
    designs = all_designs(problem.model, 0, problem.count).take(np.arange(0, problem.count, every))
    rows: dict[tuple[str, str, str, str], list[Any]] = {}
    for stage in stages(problem):
        if not stage.bound:
            for requirement, margins in zip(stage.requirements, stage.margins(designs), strict=True):
                limit = requirement.allowable
                key = (limit.kind, limit.quantity(), requirement.place, requirement.condition)
                rows.setdefault(key, []).append(margins)
    objectives = objective_values(problem, designs, np.zeros(designs.count))
    count = 0
    for index in range(designs.count):
        found = assess(problem.brief, problem.design(designs, index))
        own: dict[tuple[str, str, str, str], list[float]] = {}
        for row in found.margins:
            own.setdefault((row.kind, row.quantity, row.place, row.condition), []).append(row.margin)
        for key, margins in own.items():
            # Several limits of one quantity, or several readings of an unknown damping: the least counts.
            batch = min(float(each[index]) for each in rows[key])
            assert min(margins) == pytest.approx(batch, rel=tolerance, abs=tolerance), key
            count += len(margins)
        for name, value in (
            ("cost", found.cost),
            ("separation", found.separation),
            ("added-mass", found.added_mass),
            ("part-numbers", found.part_numbers),
        ):
            assert objectives[name][index] == pytest.approx(value, rel=1e-8), name
    return count


@pytest.mark.parametrize("seed", [2, 3])
def test_batch_and_assessor_agree_on_six_axes(seed: int) -> None:
    """Two absorbers, one slanted, each may be left out, with gravity's stiffness: two assemblies, one result."""
    brief, mounts = six_axes(seed)
    cold = (State(name="cold", stiffness_factor=1.4),)
    conditions = (
        *brief.conditions,
        brief.conditions[0].model_copy(update={"name": "frost", "state": "cold"}),
    )
    brief = brief.model_copy(update={"states": cold, "conditions": conditions})
    catalogs = {"list": machines.catalog(*mounts), "absorbers": PARTS}
    problem = build(brief, catalogs)
    assert problem.count % 9 == 0
    assert compared(problem, every=max(1, problem.count // 9 - 1)) > 100


def test_batch_and_assessor_agree_in_a_shock_and_on_curves() -> None:
    """A half-sine of the floor under a mass on a progressive mount, with an absorber and without."""
    curve = LoadCurve((0.0, 0.004, 0.008, 0.012), (0.0, 600.0, 1500.0, 3200.0), "curve.csv")
    mount = replace(machines.mount("m", 2e5, loss=0.08), load_curve=curve)
    pulse = BasePulse(
        name="knock", conditions=("knock",), direction="z", shape="half-sine", amplitude=4.0, duration=0.02
    )
    brief = machines.one_axis(
        90.0,
        [machines.force((5.0, 40.0), 20.0, conditions=("running",)), pulse],
        conditions=(Condition(name="running"), Condition(name="knock", steady=False)),
        gravity_stiffness=True,
    ).model_copy(
        update={
            "allowables": (
                machines.far_limit(conditions=("running",)),
                RelativeMotion(at="P", to="floor", direction="z", measure="peak", limit=1.0),
            )
        }
    )
    problem = build(with_absorber(brief, empty=True), {"list": machines.catalog(mount), "absorbers": PARTS})
    assert compared(problem, tolerance=2e-3) > 10


def one_each(brief: Brief, *mounts: Mount) -> Problem:
    """Each group has its own mount; the upright absorber may be "soft", "stiff" or left out."""
    listed_mounts = machines.catalog(*mounts)
    choices = tuple(
        choice.model_copy(update={"parts": (mount.part,)})
        for choice, mount in zip(brief.choices, listed_mounts.parts, strict=True)
    )
    absorber = Absorber(
        name="upright", at="P", direction=(0.2, 0.0, 1.0), catalogs=("absorbers",), empty=True
    )
    sources = (*brief.catalogs, CatalogSource(name="absorbers", file="absorbers.csv", kind="absorber"))
    update = {"choices": choices, "absorbers": (absorber,), "catalogs": sources}
    return build(brief.model_copy(update=update), {"list": listed_mounts, "absorbers": PARTS})


@pytest.mark.parametrize(
    ("law", "kind"),
    [
        ("softening", "tone"),
        ("relaxing", "tone"),
        ("unknown", "tone"),
        ("air", "tone"),
        *(pytest.param("curved", kind, marks=NIGHTLY) for kind in ("noise", "pulse", "passage")),
        *(pytest.param("relaxing", kind, marks=NIGHTLY) for kind in ("noise", "pulse", "passage")),
        pytest.param("softening", "noise", marks=NIGHTLY),
    ],
)
def test_batch_and_assessor_agree_beside_parts_that_follow_a_law(law: str, kind: str) -> None:
    brief, (one, other) = machines.random_machine(3)
    road = BaseMotion(name="road", frequency=14.0, direction=(0.3, -0.5, 1.0), velocity=4e-3)
    limits = laws.LIMITS[1:] if kind == "pulse" else laws.LIMITS
    update = {
        "gravity_stiffness": True,
        "forcing": (road,) if kind == "tone" else laws.forcings(3)[kind],
        "conditions": laws.conditions(kind),
        "allowables": limits,
    }
    problem = one_each(brief.model_copy(update=update), getattr(laws, law)(one), other)
    assert compared(problem, tolerance=2e-3) > 20


def test_batch_and_assessor_agree_on_an_imported_structure(tmp_path: Path) -> None:
    brief = on_structure.on_beam(on_structure.structure(tmp_path, up_to="200 Hz"))
    assert compared(one_each(brief, *on_structure.mounts())) > 10


@pytest.mark.parametrize("seed", [4, 5])
def test_an_absorber_left_out_leaves_the_machine_as_it_was(seed: int) -> None:
    """Every margin and mode of a study without absorbers: to rounding by the assessor, to 1e-4 in the batch.

    The batch looks for suprema round every mode, that of the spare freedom too, and so samples elsewhere.
    """
    brief, mounts = six_axes(seed)
    bare = brief.model_copy(update={"absorbers": ()})
    nothing = empty_station("absorbers")
    chosen = tuple(mounts[g % len(mounts)] for g in range(len(brief.station_groups)))
    with_places = assess(brief, Design(brief.groups, (*chosen, nothing, nothing), 0.0))
    alone = assess(bare, Design(bare.groups, chosen, 0.0))
    assert [m.frequency for m in with_places.modes] == [m.frequency for m in alone.modes]
    assert {row.label: row.margin for row in with_places.margins} == {
        row.label: row.margin for row in alone.margins
    }
    catalogs = {"list": machines.catalog(*mounts), "absorbers": PARTS}
    wide, narrow = build(brief, catalogs), build(bare, catalogs)
    # In the batch the places stay as freedoms of their own: both left out is every ninth design.
    designs = all_designs(narrow.model, 0, narrow.count)
    last = all_designs(wide.model, 0, wide.count).take(np.arange(8, wide.count, 9))
    found = {
        r.label: m
        for s in stages(wide)
        if not s.bound
        for r, m in zip(s.requirements, s.margins(last), strict=True)
    }
    for stage in stages(narrow):
        if not stage.bound:
            for requirement, margins in zip(stage.requirements, stage.margins(designs), strict=True):
                assert found[requirement.label] == pytest.approx(margins, rel=1e-4, abs=1e-6)


def test_a_horizontal_absorber_rides_with_the_body_across_its_direction() -> None:
    """Heave of a mass free in z alone with an absorber along x: the whole mass heaves, sqrt(k / (M + m)) / 2 pi."""
    brief = with_absorber(machines.one_axis(MAIN, machines.force(25.0)), direction="x")
    found = judged(brief, machines.mount("m", SPRING), part("a", 10.0, 6.0, mass_fixed=1.0))
    assert [mode.frequency for mode in found.modes] == pytest.approx(
        [6.0, math.sqrt(SPRING / 111.0) / (2 * math.pi)], rel=1e-10
    )
    assert machines.value(found, "load-range") == pytest.approx(111.0 * G, rel=1e-12)


def test_gravity_works_on_a_sliding_mass_when_the_body_turns() -> None:
    """A body free about y alone, held by a spring K on its rotation, with a mass sliding along x on it.

    Static tilt under the slid mass and slide under the tilt are one matrix: K_theta t - m g s = 0 and
    k s - m g t = 0, so that the mode of lower frequency falls as m g grows. Checked by the two-freedom matrix.
    """
    from detune.brief.machine import Body, Connection, InertiaTensor, Station

    inertia = InertiaTensor(xx=2.0, yy=3.0, zz=2.0)
    body = Body(name="machine", free=("z", "ry"), mass=50.0, centre=(0.0, 0.0, 0.0), inertia=inertia)
    stations = (
        Station(name="S", group="G", position=(-0.3, 0.0, 0.0)),
        Station(name="T", group="G", position=(0.3, 0.0, 0.0)),
    )
    brief = machines.brief_of(
        bodies=(body,),
        points=(Point(name="P", position=(0.0, 0.0, 0.0)),),
        stations=stations,
        forcing=(machines.force(30.0),),
        gravity_stiffness=True,
        connections=(
            Connection(name="c", position=(0.0, 0.0, 0.0), stiffness=(0.0, 0.0, 1.0), loss_factor=0.0),
        ),
    )
    brief = with_absorber(brief, direction="x")
    m, k_mount, tuned = 10.0, 2e3, 1.2
    found = judged(brief, machines.mount("m", k_mount, lateral=1.0), part("a", m, tuned))
    k = m * (2 * math.pi * tuned) ** 2
    rocking = 2.0 * k_mount * 0.3**2
    # z of the mass falls by s t: energy -m g s t.
    mass = np.diag([3.0, m])
    stiffness = np.array([[rocking, -m * G], [-m * G, k]])
    expected = np.sqrt(np.linalg.eigvals(np.linalg.solve(mass, stiffness))) / (2 * math.pi)
    assert sorted(mode.frequency for mode in found.modes)[0] == pytest.approx(min(expected), rel=1e-4)
    still = math.sqrt(k / m) / (2 * math.pi)
    assert min(expected) < still * 0.99


def test_stroke_is_always_demanded_and_may_be_stated_tighter() -> None:
    brief = with_absorber(machines.one_axis(MAIN, machines.force(20.0)))
    allowables, notes = demanded(brief)
    assert sum(isinstance(a, Stroke) for a in allowables) == 1
    assert "the mass of an absorber moves within the stroke its list states" in notes
    stated = brief.model_copy(update={"allowables": (*brief.allowables, Stroke())})
    assert sum(isinstance(a, Stroke) for a in demanded(stated)[0]) == 1
    tighter = brief.model_copy(update={"allowables": (*brief.allowables, Stroke(limit=1e-9))})
    assert sum(isinstance(a, Stroke) for a in demanded(tighter)[0]) == 2
    found = judged(tighter, machines.mount("m", SPRING), part("a", 8.0, 19.0))
    assert not found.meets and found.tightest.upper == 1e-9
    # An absorber that is left out has no stroke to limit.
    assert judged(tighter, machines.mount("m", SPRING), None).meets


def test_ballast_of_a_ladder_beside_an_absorber_counts_once() -> None:
    ballast = Ballast(position=(0, 0, 0), size=(0.1, 0.1, 0.1), steps=(0.0, 20.0), cost_per_kg=1.0)
    brief = with_absorber(machines.one_axis(MAIN, machines.force(20.0), ballast=ballast), empty=True)
    problem = build(
        brief, {"list": machines.catalog(machines.mount("m", SPRING, loss=0.1)), "absorbers": PARTS}
    )
    assert problem.count == 6
    assert compared(problem) > 10
    limit = Displacement(at="P", direction="z", measure="peak", limit=1.0)
    assert limit.kind == "displacement" and Floor(kind="rigid") == machines.RIGID
