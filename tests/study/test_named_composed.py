"""Named designs with several mounts at a station, dampers beside them, and empty stations."""

from __future__ import annotations

import pytest

from detune.ground.errors import BriefError
from detune.response.assess import assess
from detune.study.named import named_design
from solvers import briefs

machines = briefs.machines

ROWAN = machines.mount("rowan-c", 2e5, lateral=1e5, loss=0.1, cost=9.0)
ALDER = machines.mount("alder-b", 3e5, lateral=1e5, loss=0.1, cost=7.0)
# A number that reads like a count stays the part that bears it.
ODD = machines.mount("2 x yew", 4e5, lateral=1e5, loss=0.1, cost=5.0)
LISTS = {
    "list": machines.catalog(ROWAN, ALDER, ODD),
    "dashpots": briefs.dampers(briefs.damper("pot-s", 500.0, 4.0), briefs.damper("pot-m", 900.0, 6.0)),
}
BRIEF, _ = machines.random_machine(2)


def test_several_with_a_damper_and_an_empty_group() -> None:
    design = named_design(BRIEF, LISTS, "left=2 x rowan-c + pot-s, right=(empty)")
    left, right = design.mounts
    assert (left.part, left.base, left.pieces, left.damper) == ("2 x rowan-c + pot-s", "rowan-c", 2, "pot-s")
    # Two of 2e5 N/m and one damper of 500 N s/m; 2 x 9 and 4.
    assert (left.stiffness_dynamic[2], left.viscous[2], left.cost) == (4e5, 500.0, 22.0)
    assert right.pieces == 0 and right.cost == 0.0
    # What a design prints is what names it.
    again = ", ".join(f"{group}={part}" for group, part in zip(design.groups, design.parts, strict=True))
    assert named_design(BRIEF, LISTS, again) == design


@pytest.mark.parametrize(
    ("text", "part"),
    [
        ("3x rowan-c", "3 x rowan-c"),
        ("3 × rowan-c", "3 x rowan-c"),
        ("1 x rowan-c", "rowan-c"),
        ("list:rowan-c + dashpots:pot-m", "rowan-c + pot-m"),
        ("2 x list:rowan-c", "2 x rowan-c"),
        ("2 x yew", "2 x yew"),
        ("2 x 2 x yew", "2 x 2 x yew"),
        ("(Empty)", "(empty)"),
    ],
)
def test_spellings(text: str, part: str) -> None:
    assert named_design(BRIEF, LISTS, f"left={text}, right=alder-b").parts == (part, "alder-b")


@pytest.mark.parametrize(
    ("text", "found", "expected", "nearest"),
    [
        ("2 x rowan-d", "rowan-d", "a part of the study's catalogs", "rowan-c"),
        ("rowan-c + pot-x", "pot-x", "a damper of the study's catalogs", "pot-m"),
        ("rowan-c + alder-b", "alder-b", "a damper of the study's catalogs", None),
        ("0 x rowan-c", "0 x rowan-c", "one mount or more", None),
        ("empty", "empty", '"(empty)"', "(empty)"),
        ("pot-s", "pot-s", "a part of the study's catalogs", None),
        ("two x rowan-c", "two x rowan-c", "a part of the study's catalogs", "rowan-c"),
    ],
)
def test_faults_name_what_is_meant(text: str, found: str, expected: str, nearest: str | None) -> None:
    with pytest.raises(BriefError) as caught:
        named_design(BRIEF, LISTS, f"left={text}, right=alder-b")
    (fault,) = caught.value.faults
    assert (fault.where, fault.found) == ("left", found)
    assert expected in fault.expected
    if nearest is not None:
        assert fault.nearest == nearest


def test_a_study_without_dampers_says_so() -> None:
    with pytest.raises(BriefError, match="have none"):
        named_design(BRIEF, {"list": LISTS["list"]}, "left=rowan-c + pot-s, right=alder-b")


def test_a_named_design_is_assessed_like_any_other() -> None:
    design = named_design(BRIEF, LISTS, "left=2 x rowan-c + pot-s, right=alder-b")
    judged = assess(BRIEF, design)
    # The left group has one station with one place and one with two: (1 + 2) x 22; so has the right one, at 7 each.
    assert judged.cost == 3 * 22.0 + 3 * 7.0
    assert judged.part_numbers == 3
