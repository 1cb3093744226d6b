"""Bad study files: each fault names its line, its key, what stands there, what to write, and the nearest name.

Every case spoils a sound study by one edit and states the fault that must come of it, written down by hand
from the words a practitioner would need; nothing is taken from the reader's own tables.
"""

from __future__ import annotations

import tomllib
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest

from detune.brief.read import scan_brief
from detune.ground.errors import BriefError, Fault
from detune.study.load import load_study

HERE = Path(__file__).parent
GOOD = (HERE / "good_study.toml").read_text()
RUBBER = (HERE / "rubber.csv").read_text()
SPRING = (HERE / "spring.csv").read_text()


@dataclass(frozen=True)
class Case:
    """One edit of the good study, and the one fault that must come of it, `on` a line that starts so."""

    name: str
    old: str
    new: str
    where: str
    found: str
    expected: str
    on: str | None = None
    nearest: str | None = None


# pydantic speaks of inputs, instances and literals, and Python of None; a practitioner does not.
FOREIGN = ("Input should", "validation", "pydantic", "instance", "literal", "dictionary", "NoneType", "tuple")
Load = Callable[..., tuple[Fault, ...]]


@pytest.fixture
def faults_of(tmp_path: Path) -> Load:
    """Write a study and its catalogs, load it, and return its faults; it must have some."""

    def load(study: str, rubber: str = RUBBER, spring: str = SPRING) -> tuple[Fault, ...]:
        (tmp_path / "study.toml").write_text(study, encoding="utf-8")
        (tmp_path / "rubber.csv").write_text(rubber, encoding="utf-8")
        (tmp_path / "spring.csv").write_text(spring, encoding="utf-8")
        with pytest.raises(BriefError) as caught:
            load_study(tmp_path / "study.toml")
        return caught.value.faults

    return load


def spoilt(old: str, new: str) -> str:
    assert old in GOOD, f"the good study has no {old!r}"
    return GOOD.replace(old, new, 1)


def test_the_good_study_is_good(tmp_path: Path) -> None:
    (tmp_path / "study.toml").write_text(GOOD)
    (tmp_path / "rubber.csv").write_text(RUBBER)
    (tmp_path / "spring.csv").write_text(SPRING)
    study = load_study(tmp_path / "study.toml")
    assert study.brief.title == "Pump on four mounts"
    assert sorted(study.catalogs) == ["rubber", "spring"]


DATA = tomllib.loads((HERE / "bad_studies.toml").read_text())
CASES = [Case(**case) for case in DATA["case"]]


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name)
def test_one_edit_gives_one_fault_in_its_place(case: Case, faults_of: Load) -> None:
    study = spoilt(case.old, case.new)
    (fault,) = faults_of(study)
    line = None if fault.line is None else study.splitlines()[fault.line - 1].strip()
    assert fault.where == case.where
    assert (line is None) if case.on is None else (line is not None and line.startswith(case.on))
    assert fault.found == case.found
    assert case.expected in fault.expected
    assert fault.nearest == case.nearest
    assert fault.file.endswith("study.toml")
    assert not [word for word in FOREIGN if word in str(fault)]


@pytest.mark.parametrize("mistake", DATA["several"], ids=lambda mistake: mistake["name"])
def test_one_edit_that_shows_in_several_places(mistake: dict[str, Any], faults_of: Load) -> None:
    faults = faults_of(spoilt(mistake["old"], mistake["new"]))
    assert [[fault.where, fault.found] for fault in faults] == [row[:2] for row in mistake["faults"]]
    for fault, (_, _, expected) in zip(faults, mistake["faults"], strict=True):
        assert expected in fault.expected


def test_all_faults_of_a_file_come_at_once_in_the_order_of_lines(faults_of: Load) -> None:
    study = spoilt('mass = "120 kg"', 'mass = "-120 kg"')
    for old, new in (
        ('frequency = "9 Hz"', "frequency = 9"),
        ('unbalance = "300 g mm"', 'unbalence = "300 g mm"'),
        ('at = "flange"', 'at = "flang"'),
        ('limit = "150 N"', 'limit = "150 kg"'),
        ('catalogs = ["rubber", "spring"]', 'catalogs = ["rubber", "springs"]'),
        ("cost_per_kg = 1.2", "cost_per_kg = -1.2"),
    ):
        study = study.replace(old, new, 1)
    faults = faults_of(study)
    # A fault of one table does not hide the names that a sound table gets wrong.
    assert [fault.where for fault in faults] == [
        "body[1].mass",
        "floor.frequency",
        "forcing[1].unbalence",
        "allowable[1].at",
        "allowable[2].limit",
        "choice[2].catalogs[2]",
        "ballast.cost_per_kg",
    ]
    assert [fault.line for fault in faults] == sorted(fault.line or 0 for fault in faults)


def test_a_faulty_table_does_not_make_names_look_wrong(faults_of: Load) -> None:
    """The point "flange" is stated, if badly; the allowable that names it is right."""
    faults = faults_of(spoilt('position = ["0.2 m", "0 m", "0.6 m"]', 'position = ["0.2", "0 m", "0.6 m"]'))
    assert [fault.where for fault in faults] == ["point[1].position[1]"]


def test_indices_count_in_the_file_where_faulty_tables_stand_between(faults_of: Load) -> None:
    study = spoilt('name = "B"\ngroup', 'name = "B"\nparalel = 2\ngroup').replace(
        'name = "D"\ngroup = "free end"', 'name = "D"\ngroup = "free-end"'
    )
    assert [fault.where for fault in faults_of(study)] == ["station[2].paralel", "station[4].group"]


def test_faults_of_study_and_catalogs_are_told_together(faults_of: Load) -> None:
    faults = faults_of(
        spoilt('mass = "120 kg"', 'mass = "120"'),
        rubber=RUBBER.replace(",160,", ",-160,"),
        spring=SPRING.replace(",900,18", ",900,cheap"),
    )
    assert [(Path(fault.file).name, fault.line, fault.where) for fault in faults] == [
        ("rubber.csv", 2, "stiffness_z_static [N/mm]"),
        ("spring.csv", 3, "cost"),
        ("study.toml", 5, "body[1].mass"),
    ]


def test_a_bare_number_is_enough_where_a_column_has_no_unit(tmp_path: Path) -> None:
    """Cost is a bare number everywhere, so a window of cost is one too."""
    (tmp_path / "study.toml").write_text(spoilt('family = ["rubber"]', "cost = { max = 19 }"))
    (tmp_path / "rubber.csv").write_text(RUBBER)
    (tmp_path / "spring.csv").write_text(SPRING)
    assert load_study(tmp_path / "study.toml").brief.choices[0].where["cost"].max == "19"  # type: ignore[union-attr]


def test_parts_without_lateral_stiffness_cannot_stand_under_a_machine_that_moves_sideways(
    faults_of: Load,
) -> None:
    bare = "\n".join(
        ",".join(cell for column, cell in enumerate(row.split(",")) if column not in (4, 5))
        for row in RUBBER.splitlines()
    )
    faults = faults_of(GOOD, rubber=bare)
    assert [fault.where for fault in faults] == ["choice[1]", "choice[2]"]
    assert faults[0].found == "no lateral stiffness for rowan-a, rowan-b"
    assert "upright stations and vertical motion alone" in faults[0].expected


def test_an_empty_file_names_every_table_a_study_needs(faults_of: Load) -> None:
    faults = faults_of("")
    assert [fault.where for fault in faults] == [
        "title", "body", "station", "floor", "condition", "forcing", "allowable", "catalog", "choice",
    ]  # fmt: skip
    assert all(fault.found == "" and "which every study states" in fault.expected for fault in faults)


def test_tables_without_entries_are_told(faults_of: Load) -> None:
    """`body = []` states a table without anything in it."""
    study = "body = []\n" + GOOD.replace(GOOD[GOOD.index("[[body]]") : GOOD.index("[[point]]")], "")
    (fault,) = faults_of(study)
    assert (fault.where, fault.line, fault.expected) == ("body", 1, "at least one [[body]]")


NONSENSE = ["7", "true", '""', "[[]]", "{}", "1979-05-27"]
MORE_NONSENSE = ["-0.5", "inf", "nan",
                 '"12"', '"x y z"', "[]", "[1, 2, 3]", '["a", ["b"]]', "{ a = 1 }", "[{ a = [] }]",
                 "07:32:00", "1979-05-27T07:32:00Z", "9223372036854775807"]  # fmt: skip
# The first line of each key of each table; equal lines stand for each other.
KEYS = list(dict.fromkeys(line for line in GOOD.splitlines() if " = " in line))


@pytest.mark.parametrize(
    "value", [*NONSENSE, *(pytest.param(value, marks=pytest.mark.nightly) for value in MORE_NONSENSE)]
)
def test_no_nonsense_in_any_key_ends_in_a_traceback(value: str, tmp_path: Path) -> None:
    """Every key of the good study gets the value; it is either understood or refused, in our own words."""
    path = tmp_path / "study.toml"
    for line in KEYS:
        path.write_text(GOOD.replace(line, f"{line.split(' = ')[0]} = {value}", 1))
        try:
            faults = scan_brief(path).faults
        except BriefError as error:
            faults = error.faults
        for fault in faults:
            assert fault.expected and "\n" not in str(fault)
            assert not [word for word in FOREIGN if word in str(fault)], str(fault)
