"""Parts chosen by their columns."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.ground.errors import BriefError
from detune.parts.catalog import Catalog, Criterion, criteria_in_si, filter_parts, read_catalog
from detune.parts.kinds.mount import COLUMNS, value

RUBBER = Path(__file__).parents[2] / "catalogs" / "rubber.csv"
CATALOG = read_catalog(RUBBER, "rubber")


@pytest.fixture
def catalog(make_list: Callable[..., str], write: Callable[..., Path]) -> Catalog:
    more = {"damping_ratio": ""}
    cells = {
        (2, "load_max [N]"): "1000",
        (3, "load_max [N]"): "1500",
        (4, "load_max [N]"): "1800",
        (3, "pulls"): "yes",
        (4, "temperature_min [degC]"): "",
        (4, "loss_factor"): "",
        (4, "damping_ratio"): "0.05",
    }
    return read_catalog(write(make_list(3, cells, add=more)), "trees")


@pytest.mark.parametrize(
    ("criteria", "kept"),
    [
        ({}, (0, 1, 2)),
        ({"load_max": {"min": 1500.0}}, (1, 2)),
        ({"load_max": {"max": 1500.0}}, (0, 1)),
        ({"load_max": {"min": 1100.0, "max": 1700.0}}, (1,)),
        ({"load_max": {"min": 1500.0}, "pulls": ["no"]}, (2,)),
        ({"pulls": ["yes", "no"]}, (0, 1, 2)),
        ({"part": ["rowan-a", "rowan-c", "elm"]}, (0, 2)),
        ({"family": ["spring"]}, ()),
        ({"stiffness_z_dynamic": {"max": 200e3}}, (0, 1, 2)),
        ({"stiffness_x_static": {"min": 40.1e3}}, ()),
        ({"damping_ratio": {"min": 0.0}}, (2,)),
        ({"loss_factor": {"min": 0.0}}, (0, 1)),
        ({"temperature_min": {"max": -20.0}}, (0, 1)),
        ({"stock": {"min": 12}}, (0, 1, 2)),
    ],
)
def test_kept(catalog: Catalog, criteria: dict[str, Criterion], kept: tuple[int, ...]) -> None:
    found, dropped = filter_parts(catalog, criteria)
    assert found == kept
    assert sorted([*found, *dropped]) == [0, 1, 2]


@pytest.mark.parametrize(
    ("criteria", "index", "reason"),
    [
        ({"load_max": {"min": 1200.0}}, 0, "load_max 1000 N is below 1200 N"),
        ({"load_max": {"max": 1200.0}}, 1, "load_max 1500 N is above 1200 N"),
        ({"temperature_min": {"max": -20.0}}, 2, "the list states no temperature_min"),
        ({"pulls": ["yes"]}, 0, "pulls no is not among yes"),
        ({"family": ["spring", "air"]}, 2, "family rubber is not among spring, air"),
    ],
)
def test_reason(catalog: Catalog, criteria: dict[str, Criterion], index: int, reason: str) -> None:
    assert filter_parts(catalog, criteria)[1][index] == reason


@pytest.mark.parametrize(
    ("criteria", "where", "found", "expected", "nearest"),
    [
        ({"load_mx": {"min": 1.0}}, "filter.load_mx", "load_mx", "a column of a mount list", "load_max"),
        ({"zzz": ["a"]}, "filter.zzz", "zzz", "a column of a mount list", None),
        ({"load_max": ["1200"]}, "filter.load_max", "['1200']", "a window with min, max or both", None),
        ({"load_max": {}}, "filter.load_max", "{}", "a window with min, max or both", None),
        ({"load_max": {"minn": 1.0}}, "filter.load_max.minn", "minn", "min or max", "min"),
        ({"load_max": {"min": math.nan}}, "filter.load_max.min", "nan", "a number in SI", None),
        ({"load_max": {"min": "12 N"}}, "filter.load_max.min", "12 N", "a number in SI", None),
        ({"load_max": {"min": True}}, "filter.load_max.min", "True", "a number in SI", None),
        ({"load_max": {"min": 9.0, "max": 2.0}}, "filter.load_max.min", "9 N", "which is 2 N", None),
        ({"family": {"min": 1.0}}, "filter.family", "{'min': 1.0}", "a list of the texts allowed", None),
        ({"family": "rubber"}, "filter.family", "rubber", "a list of the texts allowed", None),
        ({"family": []}, "filter.family", "[]", "a list of the texts allowed", None),
        ({"pulls": ["true"]}, "filter.pulls", "true", "yes or no", None),
    ],
)
def test_criterion_that_cannot_be_judged(
    catalog: Catalog, criteria: Any, where: str, found: str, expected: str, nearest: str | None
) -> None:
    with pytest.raises(BriefError) as caught:
        filter_parts(catalog, criteria)
    (fault,) = caught.value.faults
    assert (fault.file, fault.where, fault.found, fault.nearest) == (catalog.file, where, found, nearest)
    assert expected in fault.expected


def test_every_wrong_criterion_at_once(catalog: Catalog) -> None:
    with pytest.raises(BriefError) as caught:
        filter_parts(
            catalog, {"load_mx": {"min": 1.0}, "pulls": ["?"], "load_max": {"least": 1.0, "min": "a"}}
        )  # type: ignore[dict-item]
    assert len(caught.value.faults) == 4


def test_criteria_as_a_study_writes_them() -> None:
    """1.2 kN is 1200 N, 10 lbf/in 1751.268 N/m (SP 811, B.8), 14 degF -10 degC."""
    criteria = criteria_in_si(
        {
            "load_max": {"min": "1.2 kN", "max": None},
            "stiffness_z_static": {"min": "10 lbf/in", "max": "5 N/mm"},
            "temperature_min": {"max": "14 degF"},
            "stock": {"min": "4"},
            "pulls": ("yes",),
        }
    )
    assert criteria["load_max"] == {"min": 1200.0}
    assert criteria["stiffness_z_static"] == pytest.approx({"min": 1751.268, "max": 5000.0}, rel=1e-6)
    assert criteria["temperature_min"] == pytest.approx({"max": -10.0}, abs=1e-9)
    assert (criteria["stock"], criteria["pulls"]) == ({"min": 4.0}, ("yes",))


def test_criteria_that_cannot_be_read_all_at_once() -> None:
    texts: Any = {
        "load_max": {"min": "1200", "max": "2 kg"},
        "lod_max": {"min": "1 N"},
        "family": {"min": "1"},
    }
    with pytest.raises(BriefError) as caught:
        criteria_in_si(texts, file="study.toml")
    found = [(fault.file, fault.where, fault.found, fault.nearest) for fault in caught.value.faults]
    assert found == [
        ("study.toml", "filter.load_max.min", "1200", None),
        ("study.toml", "filter.load_max.max", "2 kg", None),
        ("study.toml", "filter.lod_max", "lod_max", "load_max"),
        ("study.toml", "filter.family", "{'min': '1'}", None),
    ]


def test_every_column_can_be_asked_for_and_no_other() -> None:
    for part in CATALOG.parts:
        for column in COLUMNS:
            stated = value(part, column.name)
            assert stated is None or isinstance(stated, str if column.kind == "text" else float | int)
    with pytest.raises(KeyError):
        value(CATALOG.parts[0], "line")


WINDOWS = st.fixed_dictionaries(
    {},
    optional={
        "load_max": st.floats(50, 8000),
        "stiffness_z_static": st.floats(1e4, 2e6),
        "stiffness_y_dynamic": st.floats(1e3, 2e6),
        "cost": st.floats(5, 150),
        "temperature_max": st.floats(60, 110),
        "deflection_max": st.floats(0.001, 0.03),
    },
)


@settings(deadline=None, max_examples=60)
@given(WINDOWS, WINDOWS, st.floats(1.0, 2.0))
def test_more_or_narrower_criteria_never_add_a_part(
    ends: dict[str, float], more: dict[str, float], factor: float
) -> None:
    loose: dict[str, Criterion] = {name: {"max": end} for name, end in ends.items()}
    tight: dict[str, Criterion] = {name: {"max": end / factor} for name, end in ends.items()}
    both: dict[str, Criterion] = {
        **{name: {"max": end} for name, end in more.items() if name not in ends},
        **tight,
    }
    kept = [set(filter_parts(CATALOG, criteria)[0]) for criteria in ({}, loose, tight, both)]
    assert kept[0] == set(range(len(CATALOG.parts)))
    assert kept[3] <= kept[2] <= kept[1] <= kept[0]


@settings(deadline=None, max_examples=30)
@given(st.lists(st.sampled_from([part.part for part in CATALOG.parts]), min_size=1, unique=True))
def test_named_parts_are_kept_and_only_they(names: list[str]) -> None:
    kept, _ = filter_parts(CATALOG, {"part": names})
    assert {CATALOG.parts[index].part for index in kept} == set(names)
