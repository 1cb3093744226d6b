"""Named states: a lost mount, cold, creep, packing; and what a study says that names them wrongly."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from pydantic import ValidationError

from detune.brief.allowable.load_range import LoadRange
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.allowable.sag import Sag
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.tilt import Tilt
from detune.brief.brief import Brief
from detune.brief.condition import Condition
from detune.brief.cross_check import cross_check
from detune.brief.machine import Body, InertiaTensor, Point, Station
from detune.brief.state import State
from detune.ground.errors import BriefError
from detune.parts.kinds.mount import Mount
from detune.problem.build import build
from detune.response.assess import assess
from detune.response.assessment import Assessment
from detune.response.design import Design
from response import law_machines

machines = law_machines.machines

TWO_PI = 2.0 * math.pi
G = 9.80665
MASS, K = 200.0, 1.0e5


def six_stations(**changes: Any) -> Brief:
    """A machine, its centre off the middle, on six stations of two groups."""
    places = {
        "A": (-0.5, -0.4),
        "B": (0.0, -0.4),
        "C": (0.5, -0.4),
        "D": (-0.5, 0.4),
        "E": (0.0, 0.4),
        "F": (0.5, 0.4),
    }
    return machines.brief_of(
        **{
            "gravity_stiffness": True,
            "bodies": (
                Body(
                    name="machine", mass=MASS, centre=(0.05, 0.03, 0.25),
                    inertia=InertiaTensor(xx=12.0, yy=18.0, zz=22.0),
                ),
            ),
            "points": (Point(name="P", position=(0.4, 0.2, 0.6)),),
            "stations": tuple(
                Station(name=name, group="left" if x < 0.25 else "right", position=(x, y, 0.0))
                for name, (x, y) in places.items()
            ),
            "forcing": (machines.force(18.0, 40.0, position=(0.3, 0.1, 0.2)),),
            "allowables": (*law_machines.LIMITS, Sag(at="P", limit=1.0), Tilt(limit=1.0), Separation(limit=1e-3)),
            **changes,
        }
    )  # fmt: skip


def parts() -> tuple[Mount, Mount]:
    return machines.mount("a", K, lateral=0.6 * K, static=0.8, loss=0.1), machines.mount(
        "b", 1.4 * K, lateral=K, static=0.8, loss=0.1
    )


def judged(state: State | None, brief: Brief | None = None, *mounts: Mount) -> Assessment:
    """The assessment with every condition in a state, agreed by both roads."""
    return law_machines.agreed(
        law_machines.in_state(brief or six_stations(), state), *(mounts or parts()), rel=1e-6
    )


def in_state_rows(assessment: Assessment, state: str | None) -> dict[tuple[str, str], float]:
    """Values by quantity and place of what is at rest, steady or running in a state."""
    told = "" if state is None else f", {state}"
    names = (f"at rest{told}", f"steady conditions{told}", "running")
    return {(r.quantity, r.place): r.value for r in assessment.margins if r.condition in names}


def test_a_lost_mount_is_the_study_without_its_station() -> None:
    lost = in_state_rows(judged(State(name="B lost", lost=("B",))), "B lost")
    brief = six_stations()
    without = brief.model_copy(update={"stations": tuple(s for s in brief.stations if s.name != "B")})
    alone = in_state_rows(law_machines.agreed(without, *parts()), None)
    assert lost.keys() == alone.keys()
    for key, value in alone.items():
        assert lost[key] == pytest.approx(value, rel=1e-9), key
    # It was bought all the same.
    both = judged(State(name="B lost", lost=("B",)))
    assert both.cost == pytest.approx(6 * 10.0)


def test_a_state_is_judged_beside_the_machine_as_installed() -> None:
    installed = judged(None)
    cold = judged(State(name="cold", stiffness_factor=1.6))
    kept = in_state_rows(cold, None)
    for key, value in in_state_rows(installed, None).items():
        # Nothing excites the machine as installed: its modes are apart from nothing.
        if key[0] not in {r.quantity for r in cold.margins if r.condition == "running"} | {
            "separation from resonance"
        }:
            assert kept[key] == pytest.approx(value, rel=1e-12)
    # 1.6 times stiffer parts: the study with such parts, statics too.
    stiff = tuple(
        machines.mount(
            m.part, 1.6 * m.stiffness_dynamic[2], lateral=1.6 * m.stiffness_dynamic[0], static=0.8, loss=0.1
        )
        for m in parts()
    )
    other = in_state_rows(law_machines.agreed(six_stations(), *stiff), None)
    for key, value in in_state_rows(cold, "cold").items():
        assert value == pytest.approx(other[key], rel=1e-9), key


def test_a_stiffness_factor_of_one_group_alone() -> None:
    state = State(name="left cold", stiffness_factor=1.6, groups=("left",))
    a, b = parts()
    stiff = machines.mount(a.part, 1.6 * K, lateral=1.6 * 0.6 * K, static=0.8, loss=0.1)
    other = in_state_rows(law_machines.agreed(six_stations(), stiff, b), None)
    for key, value in in_state_rows(judged(state), "left cold").items():
        assert value == pytest.approx(other[key], rel=1e-9), key


def test_creep_adds_its_share_to_sag_tilt_and_deflection_and_to_nothing_else() -> None:
    installed, crept = judged(None), judged(State(name="crept", creep=0.2))
    before, after = in_state_rows(installed, None), in_state_rows(crept, "crept")
    dynamic = {
        place: v for (quantity, place), v in before.items() if quantity == "mount deflection, dynamic, axial"
    }
    for key, value in before.items():
        quantity, place = key
        if quantity in ("sag", "tilt"):
            assert after[key] == pytest.approx(1.2 * value, rel=1e-9), key
        elif quantity.startswith("mount deflection, static"):
            static = value - dynamic[place]
            assert after[key] == pytest.approx(dynamic[place] + 1.2 * static, rel=1e-9), key
        else:
            assert after[key] == pytest.approx(value, rel=1e-9), key


def test_packing_brings_the_machine_level() -> None:
    # Vertical parts under a rigid machine: a foot lifted by what its part sags by, less the sag of the mean plane,
    # leaves no tilt and the loads as they were. By hand: part i carries F_i, packing_i = F_i/k_i - d.
    installed = judged(None)
    assert machines.value(installed, "tilt") > 1e-4
    a, b = parts()
    brief = six_stations()
    # The loads of a level machine: all parts compressed by what packing leaves, so F = k (d + packing); with
    # packing = F/k - d any F that balances will do. Take the F of equal compression of a rigid plane, then check.
    stiffness = {s.name: (a if s.group == "left" else b).stiffness_static[2] for s in brief.stations}
    x = np.array([[s.position[0] - 0.05, s.position[1] - 0.03] for s in brief.stations])
    rows = np.vstack([np.ones(6), x.T])
    loads = np.linalg.lstsq(rows, np.array([MASS * G, 0.0, 0.0]), rcond=None)[0]
    sag = {s.name: f / stiffness[s.name] for s, f in zip(brief.stations, loads, strict=True)}
    state = State(name="levelled", packing={name: value - min(sag.values()) for name, value in sag.items()})
    found = judged(state)
    rows_found = in_state_rows(found, "levelled")
    assert rows_found["tilt", "machine"] == pytest.approx(0.0, abs=1e-12)
    assert rows_found["sag", "P"] == pytest.approx(min(sag.values()), rel=1e-9)
    for station, load in zip(brief.stations, loads, strict=True):
        assert rows_found["static load of the part, axial", station.name] == pytest.approx(load, rel=1e-9)
    # Packing changes nothing that vibrates.
    running = {key: v for key, v in in_state_rows(installed, None).items() if key[0].endswith("peak")}
    for key, value in running.items():
        assert rows_found[key] == pytest.approx(value, rel=1e-9), key


def test_packing_alone_on_two_springs() -> None:
    # Two unlike springs side by side under a mass that moves vertically: with one foot lifted by u,
    # m g = k1 d + k2 (d + u) and each carries its own.
    k1, k2, u = 8e4, 5e4, 1.5e-3
    body = Body(name="machine", free=("z",), mass=MASS, centre=(0.0, 0.0, 0.0))
    brief = machines.brief_of(
        bodies=(body,), points=(Point(name="P", position=(0.0, 0.0, 0.0)),),
        stations=(
            Station(name="one", group="one", position=(0.0, 0.0, 0.0)),
            Station(name="two", group="two", position=(0.0, 0.0, 0.0)),
        ),
        forcing=(machines.force(18.0),), allowables=(Sag(at="P", limit=1.0), machines.far_limit(), LoadRange()),
    )  # fmt: skip
    state = State(name="packed", packing={"two": u})
    found = judged(state, brief, machines.mount("a", k1), machines.mount("b", k2))
    rows = in_state_rows(found, "packed")
    d = (MASS * G - k2 * u) / (k1 + k2)
    assert rows["sag", "P"] == pytest.approx(d, rel=1e-12)
    assert rows["static load of the part, axial", "one"] == pytest.approx(k1 * d, rel=1e-12)
    assert rows["static load of the part, axial", "two"] == pytest.approx(k2 * (d + u), rel=1e-12)


@pytest.mark.parametrize("law", ["curved", "air", "relaxing", "tabled"])
def test_states_and_laws_together(law: str) -> None:
    state = State(
        name="worn", lost=("B",), stiffness_factor=1.3, creep=0.1, packing={"C": 5e-4}, temperature=5.0
    )
    one, other = parts()
    changed = getattr(law_machines, law)(one, *((500.0,) if law == "air" else ()))
    judged(state, six_stations(), changed, other)


def test_a_limit_at_the_lost_station_alone_has_no_place() -> None:
    limit = MountDeflection(part="dynamic", stations=("B",), limit=1.0)
    brief = six_stations(allowables=(machines.far_limit(), limit))
    found = judged(State(name="B lost", lost=("B",)), brief)
    assert not [row for row in found.margins if row.place == "B" and row.condition == "running"]


def test_a_machine_that_a_lost_mount_leaves_without_support_is_refused() -> None:
    brief = six_stations()
    state = State(name="most lost", lost=("A", "B", "C", "D", "E"))
    brief = law_machines.in_state(brief, state)
    with pytest.raises(BriefError) as caught:
        build(brief, {"list": machines.catalog(*parts())})
    (fault,) = caught.value.faults
    assert "1 stations that leave a motion of the machine without stiffness" in fault.found


def findings(brief: Brief) -> list[tuple[tuple[object, ...], str, str | None]]:
    return [(f.path, f.found, f.nearest) for f in cross_check(brief)]


def test_names_that_are_not_there() -> None:
    brief = six_stations()
    running = (Condition(name="running", state="cald"),)
    cold = State(name="cold", stiffness_factor=1.5, groups=("lef",), lost=("BB",), packing={"Q": 1e-3})
    found = findings(brief.model_copy(update={"states": (cold,), "conditions": running}))
    assert (("condition", 0, "state"), "cald", "cold") in found
    assert (("state", 0, "lost"), "BB", "B") in found
    assert any(path == ("state", 0, "packing") and name == "Q" for path, name, _ in found)
    assert (("state", 0, "groups"), "lef", "left") in found
    assert any(path == ("state", 0, "name") for path, _, _ in found)


def test_two_states_of_one_name_are_refused() -> None:
    cold, colder = State(name="cold", stiffness_factor=1.5), State(name="cold", stiffness_factor=2.0)
    brief = six_stations(conditions=(Condition(name="running", state="cold"),), states=(cold, colder))
    assert any(path == ("state", 1, "name") for path, _, _ in findings(brief))


@pytest.mark.parametrize(
    ("stated", "expected"),
    [
        ({}, "a state that changes something"),
        ({"stiffness_factor": 0.0}, "a stiffness factor above zero"),
        ({"stiffness_factor": -1.3}, "a stiffness factor above zero"),
        ({"creep": -0.1}, "a creep of zero or more"),
        ({"groups": ("left",)}, 'a "stiffness_factor" for these groups'),
        ({"lost": ("A", "A")}, "each name once"),
        ({"stiffness_factor": 1.5, "groups": ()}, "at least one name"),
    ],
)
def test_values_that_make_no_state(stated: dict[str, Any], expected: str) -> None:
    with pytest.raises(ValidationError) as caught:
        State(name="odd", **stated)
    assert expected in str(caught.value)


def test_a_temperature_outside_a_table_is_refused() -> None:
    part = law_machines.tabled(parts()[0], temperature=(-20.0, 20.0))
    state = State(name="arctic", temperature=-40.0)
    brief = law_machines.in_state(six_stations(), state)
    with pytest.raises(BriefError) as caught:
        build(brief, {"list": machines.catalog(part, parts()[1])})
    assert any("-40" in fault.found and "-20 to 20 degC" in fault.found for fault in caught.value.faults)
    # As installed stands at 20 degC, which a table of cold alone does not hold.
    cold = law_machines.tabled(parts()[0], temperature=(-40.0, -10.0))
    with pytest.raises(BriefError):
        build(six_stations(), {"list": machines.catalog(cold, parts()[1])})


def test_every_station_lost_everywhere_is_the_same_for_both_roads() -> None:
    state = State(name="two lost", lost=("A", "F"))
    found = assess(law_machines.in_state(six_stations(), state), Design(("left", "right"), parts(), 0.0))
    assert np.isfinite(found.least_margin)
