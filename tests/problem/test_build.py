"""The constraint builder: what is always demanded, what is refused, and its agreement with the assessor."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.brief.allowable.load_range import LoadRange
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.uplift import Uplift
from detune.brief.brief import Brief, demanded
from detune.brief.choice import CatalogSource, Choice
from detune.brief.condition import Condition
from detune.brief.machine import Body, Point, Station
from detune.ground.errors import BriefError
from detune.problem.build import build
from detune.problem.stages import stages
from detune.response.assess import assess
from detune.response.designs import all_designs
from detune.response.margin import lower_margin, upper_margin, window_margin
from response import machines


def feet(brief: Brief, *allowables: Any) -> list[tuple[str, tuple[str, ...] | None]]:
    """What is demanded beyond the stated allowables: kind and stations."""
    stated = brief.model_copy(update={"allowables": allowables})
    every, notes = demanded(stated)
    added = every[len(allowables) :]
    assert len(notes) == len(added)
    return [(a.kind, a.stations) for a in added if isinstance(a, LoadRange | MountDeflection | Uplift)]


ALL_THREE = [("load-range", None), ("mount-deflection", None), ("uplift", None)]


def test_a_part_is_never_overloaded_whatever_the_brief_states_for_some_stations() -> None:
    """The three demands hold at every station and in every condition; a stated one covers its own stations alone."""
    brief, _ = machines.random_machine(0)
    far = machines.far_limit()
    assert feet(brief, far) == ALL_THREE
    assert feet(brief, far, LoadRange(), MountDeflection(part="combined", limit="part"), Uplift()) == []
    assert feet(brief, far, LoadRange(stations=("S0",)))[0] == ("load-range", ("S1", "S2", "S3"))
    assert feet(brief, far, LoadRange(stations=("S0", "S1")), LoadRange(stations=("S2", "S3")))[0] == (
        "mount-deflection",
        None,
    )
    # Vibration alone below the part's limit says nothing of sag and vibration together.
    assert ("mount-deflection", None) in feet(brief, far, MountDeflection(part="dynamic", limit="part"))
    assert ("mount-deflection", None) in feet(brief, far, MountDeflection(part="combined", limit=0.01))
    assert ("uplift", None) in feet(brief, far, Uplift(conditions=("running",)))
    assert ("uplift", ("S1", "S2", "S3")) in feet(brief, far, Uplift(stations=("S0",)))


def test_margins_of_limits_that_are_not_above_zero() -> None:
    """DESIGN 2: limit/value - 1 and value/limit - 1; a part that may pull states its tension as a negative load."""
    assert upper_margin(np.array([1.0, 2.0, 4.0]), np.array(2.0)) == pytest.approx([1.0, 0.0, -0.5])
    assert lower_margin(np.array([1.0, 2.0, 4.0]), np.array(2.0)) == pytest.approx([-0.5, 0.0, 1.0])
    # 100 N of tension where 500 N are allowed: 5 - 1; 1000 N: 0.5 - 1; compression is free.
    found = lower_margin(np.array([-100.0, -1000.0, -500.0, 0.0, 300.0]), np.array(-500.0))
    assert found[:3] == pytest.approx([4.0, -0.5, 0.0])
    assert np.all(np.isposinf(found[3:]))
    assert lower_margin(np.array([-1.0, 0.0, 1.0]), np.array(0.0)).tolist() == [-np.inf, 0.0, np.inf]
    # The window of a mount that carries 200 to 1000 N, at 400 N: the lesser of 1 and 1.5.
    assert window_margin(np.array(400.0), np.array(200.0), np.array(1000.0)) == pytest.approx(1.0)


def test_a_hanging_part_that_may_pull_is_within_its_range() -> None:
    """10 kg hang on a part rated for 500 N of tension: 98.0665 N, margin 500/98.0665 - 1 = 4.0986."""
    brief = machines.one_axis(10.0, machines.force(5.0), [LoadRange()])
    hanging = brief.stations[0].model_copy(update={"axial": (0.0, 0.0, -1.0)})
    brief = brief.model_copy(update={"stations": (hanging,)})
    part = machines.mount(k=1e5, load_min=-500.0, load_max=500.0)
    (row,) = [row for row in machines.assessed(brief, part).margins if row.kind == "load-range"]
    assert row.value == pytest.approx(-98.0665, rel=1e-9)
    assert row.margin == pytest.approx(4.09858, rel=1e-5)


def refused(brief: Brief, *parts: Any, **catalogs: Any) -> list[tuple[str, str]]:
    with pytest.raises(BriefError) as caught:
        build(brief, catalogs or {"list": machines.catalog(*parts)})
    return [(fault.where, fault.found) for fault in caught.value.faults]


def test_a_faulty_brief_from_python_is_refused_like_a_file() -> None:
    """A group without a choice, a point that is not there: faults, not an exception of Python's."""
    brief = machines.one_axis(10.0, machines.force(5.0))
    assert refused(brief.model_copy(update={"choices": ()}), machines.mount()) == [("choice", "[]")]
    lost = brief.model_copy(update={"allowables": (machines.far_limit(at="Q"),)})
    assert refused(lost, machines.mount()) == [("allowable[1].at", "Q")]


def line_machine(positions: list[tuple[float, float, float]], free: tuple[str, ...]) -> Brief:
    return machines.brief_of(
        bodies=(
            Body(name="pump", free=free, mass=100.0, centre=(0.0, 0.0, 0.3), inertia_box=(0.5, 0.4, 0.3)),
        ),
        points=(Point(name="P", position=(0.0, 0.0, 0.3)),),
        stations=tuple(Station(name=f"S{i}", group="G", position=p) for i, p in enumerate(positions)),
        forcing=(machines.force(20.0),),
    )


SIX = ("x", "y", "z", "rx", "ry", "rz")


@pytest.mark.parametrize(
    "positions",
    [
        [(0.0, 0.0, 0.0)],
        [(-0.3, 0.0, 0.0), (0.3, 0.0, 0.0)],
        [(-0.3, 0.0, 0.0), (0.0, 0.0, 0.0), (0.3, 0.0, 0.0)],
        [(-0.3, -0.2, 0.0), (0.0, 0.0, 0.0), (0.3, 0.2, 0.0)],
    ],
    ids=["one station", "two stations", "three in line", "three in a slanting line"],
)
def test_a_machine_free_to_turn_about_its_line_of_stations_is_refused(
    positions: list[tuple[float, float, float]],
) -> None:
    """Upright parts with stiffness along three axes leave the rotation about their own line free."""
    brief = line_machine(positions, SIX)
    (fault,) = refused(brief, machines.mount(k=1e5, lateral=5e4))
    assert fault[0] == "station"
    assert "leave a motion of the machine without stiffness" in fault[1]


def test_two_stations_serve_a_machine_that_cannot_turn_about_their_line() -> None:
    brief = line_machine([(-0.3, 0.0, 0.0), (0.3, 0.0, 0.0)], ("x", "y", "z", "ry", "rz"))
    assert build(brief, {"list": machines.catalog(machines.mount(k=1e5, lateral=5e4))}).count == 1


def test_an_inclined_station_needs_lateral_stiffness_in_a_vertical_study_too() -> None:
    """At 45 degrees half of the vertical stiffness is lateral: it must not count as zero."""
    brief = machines.one_axis(10.0, machines.force(5.0))
    inclined = brief.stations[0].model_copy(update={"axial": (0.0, 1.0, 1.0)})
    brief = brief.model_copy(update={"stations": (inclined,)})
    assert refused(brief, machines.mount("bare")) == [("choice[1]", "no lateral stiffness for bare")]
    part = machines.mount("both", k=3e5, lateral=1e5)
    (mode,) = machines.assessed(brief, part).modes
    # k = (3e5 + 1e5)/2 on 10 kg: 22.5079 Hz.
    assert mode.frequency == pytest.approx(np.sqrt(2e4) / (2 * np.pi), rel=1e-9)


def test_every_group_without_parts_is_told() -> None:
    brief, _ = machines.random_machine(0)
    brief = brief.model_copy(
        update={
            "choices": tuple(
                Choice(group=group, catalogs=("list",), where={"family": ("spring",)})
                for group in brief.groups
            )
        }
    )
    assert refused(brief, machines.mount(k=1e5, lateral=5e4)) == [
        ("choice[1].where", "no part left for group left"),
        ("choice[2].where", "no part left for group right"),
    ]


def test_filters_and_named_parts_leave_their_reasons() -> None:
    brief = machines.one_axis(10.0, machines.force(5.0))
    choice = Choice(group="G", catalogs=("list",), where={"cost": {"max": 12}}, parts=("cheap",))  # type: ignore[dict-item]
    brief = brief.model_copy(update={"choices": (choice,)})
    parts = [
        machines.mount(name, cost=cost) for name, cost in (("cheap", 10.0), ("other", 11.0), ("dear", 13.0))
    ]
    problem = build(brief, {"list": machines.catalog(*parts)})
    assert [m.part for m in problem.candidates[0]] == ["cheap"]
    assert {d.mount.part: d.reason for d in problem.dropped} == {
        "dear": "cost 13 is above 12",
        "other": "not among the parts named",
    }


def test_the_same_part_number_in_two_catalogs_is_two_part_numbers() -> None:
    brief = machines.one_axis(10.0, machines.force(5.0)).model_copy(
        update={
            "catalogs": (CatalogSource(name="one", file="1.csv"), CatalogSource(name="two", file="2.csv")),
            "choices": (Choice(group="G", catalogs=("one", "two")),),
        }
    )
    catalogs = {name: machines.catalog(machines.mount("same"), name=name) for name in ("one", "two")}
    assert build(brief, catalogs).count == 2


@given(st.integers(0, 10_000))
@settings(deadline=None, max_examples=2)
def test_batch_and_assessor_judge_every_requirement_alike(seed: int) -> None:
    """The same labels, and margins that agree within 1e-3; a sampled stage never claims less than the whole range."""
    brief, (left, right) = machines.random_machine(seed)
    brief = brief.model_copy(
        update={
            "conditions": (
                *brief.conditions,
                Condition(name="slow", steady=False, shafts={"rotor": (3.0, 12.0)}),
            ),
            "allowables": (
                *brief.allowables,
                Separation(limit=0.1),
                MountDeflection(part="dynamic", limit=0.05),
            ),
        }
    )
    third = machines.mount("c", k=3e5, lateral=1e5, loss=0.1, pulls=False, deflection_max=0.02)
    problem = build(brief, {"list": machines.catalog(left, right, third)})
    designs = all_designs(problem.model, 0, problem.count)
    margins = machines.batch_margins(problem, designs)
    for index in range(problem.count):
        rows = assess(brief, problem.design(designs, index)).margins
        judged = {(row.quantity, row.place, row.condition) for row in rows}
        for row in rows:
            batch = margins[(row.quantity, row.place, row.condition)][index]
            # Beyond a million it is rounding that tells one "far from any limit" from another.
            assert min(batch, 1e6) == pytest.approx(min(row.margin, 1e6), rel=1e-3, abs=1e-3), row.label
        # What only the batch has is a limit that the part does not state.
        assert all(np.isposinf(margins[key][index]) for key in set(margins) - judged)
    every = list(stages(problem))
    for bound in (stage for stage in every if stage.bound):
        (whole,) = [s for s in every if not s.bound and s.requirements == bound.requirements]
        assert np.all(bound.margins(designs) >= whole.margins(designs) - 1e-9)
