"""Bad laws: every fault names the file in which it stands, its line, its column, and what to write."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from detune.ground.errors import BriefError, Fault
from detune.parts.catalog import read_catalog

ZS, ZD = "stiffness_z_static [N/mm]", "stiffness_z_dynamic [N/mm]"
CURVE = ["deflection [mm],load [N]", "0,0", "5,800", "12,1920"]
TABLE = ["frequency [Hz],stiffness_ratio,loss_factor", "5,0.9,0.1", "20,1,0.12", "100,1.3,0.2"]
BOTH = [
    "temperature [degC],frequency [Hz],stiffness_dynamic [N/mm],loss_factor",
    "-20,5,300,0.2",
    "-20,100,420,0.3",
    "20,5,180,0.1",
    "20,100,260,0.14",
]
AMPLITUDE = ["amplitude [mm],stiffness_ratio,loss_factor", "0.05,1.4,0.08", "0.5,1,0.15", "2,0.8,0.12"]
BASES = {"curve_file": CURVE, "law_file": TABLE, "amplitude_file": AMPLITUDE}


@pytest.fixture
def faults_of(
    tmp_path: Path, make_list: Callable[..., str], write: Callable[..., Path]
) -> Callable[..., tuple[Fault, ...]]:
    def _faults(law: list[str] | None = None, **spoil: Any) -> tuple[Fault, ...]:
        if law is not None:
            (tmp_path / "law.csv").write_text("\n".join(law) + "\n")
        with pytest.raises(BriefError) as caught:
            read_catalog(write(make_list(**{"rows": 1, **spoil})), "trees")
        return caught.value.faults

    return _faults


def spoil_for(column: str) -> dict[str, Any]:
    drop = [ZS] if column == "curve_file" else ["loss_factor"]
    return {"drop": drop, "add": {column: "law.csv"}}


def changed(lines: list[str], *changes: tuple[int, str | None]) -> list[str]:
    """Return the lines with some replaced or, for None, left out; line 1 is the header."""
    made: list[str | None] = list(lines)
    for line, text in changes:
        made[line - 1] = text
    return [text for text in made if text is not None]


@pytest.mark.parametrize(
    ("column", "law", "line", "where", "found", "expected"),
    [
        ("curve_file", changed(CURVE, (4, "12,700")), 4, "load [N]", "700", "the curve turns back"),
        ("curve_file", changed(CURVE, (4, "12,800")), 4, "load [N]", "800", "more than 800 N"),
        ("curve_file", changed(CURVE, (4, "4,1920")), 4, "deflection [mm]", "4", "more than 5 mm"),
        ("curve_file", changed(CURVE, (2, "1,100")), 2, "deflection [mm]", "1", "a row with deflection 0"),
        ("curve_file", changed(CURVE, (2, "0,40")), 2, "load [N]", "40", "0 N at deflection 0"),
        ("curve_file", changed(CURVE, (3, "5,")), 3, "load [N]", "", "a value in every row"),
        ("curve_file", changed(CURVE, (3, "5,much")), 3, "load [N]", "much", "a force as a number in N"),
        ("curve_file", changed(CURVE, (1, "deflection,load [N]")), 1, "deflection", "", "a unit of length"),
        ("curve_file", [f"{line},1" if at else f"{line},note" for at, line in enumerate(CURVE)], 1, "note",
         "note", "the name of a column"),
        ("curve_file", CURVE[:2], 2, "row", "1 row", "at least two rows"),
        ("curve_file", CURVE[:1], 1, "file", "", "a row for each part"),
        ("law_file", changed(TABLE, (3, "5,1,0.12")), 3, "frequency [Hz]", "5", "more than 5 Hz"),
        ("law_file", changed(TABLE, (3, "0,1,0.12")), 3, "frequency [Hz]", "0", "a frequency above 0 Hz"),
        ("law_file", changed(TABLE, (3, "20,-1,0.12")), 3, "stiffness_ratio", "-1", "a ratio above 0"),
        ("law_file", changed(TABLE, (3, "20,1,-0.12")), 3, "loss_factor", "-0.12", "a ratio above 0"),
        ("law_file", changed(TABLE, (3, "20,1,0")), 3, "loss_factor", "0", "a ratio above 0"),
        ("law_file", changed(TABLE, (3, "20,,0.12")), 3, "stiffness_ratio", "", "nothing is filled in"),
        ("law_file", changed(TABLE, (3, "20,1,")), 3, "loss_factor", "", "a value in every row"),
        ("law_file", changed(TABLE, (2, "5,1.2,0.1"), (3, "20,1.4,0.12")), 2, "stiffness_ratio", "1.2",
         "a ratio of 1"),
        ("law_file", changed(TABLE, (1, "frequency [Hz],stiffness_dynamic [N/mm],loss_factor")), None,
         "law_file", "law.csv", "it reaches from 0.9 N/mm to 1.3 N/mm"),
        ("law_file", changed(TABLE, (1, "frequency [Hz],stiffness,loss_factor")), 1, "stiffness", "stiffness",
         "the name of a column"),
        ("law_file", TABLE[:2], 2, "frequency [Hz]", "5", "at least two frequencies"),
        ("law_file", changed(BOTH, (5, None)), 4, "frequency [Hz]", "5", "a row for 100 Hz"),
        ("law_file", changed(BOTH, (4, "20,8,180,0.1")), 4, "frequency [Hz]", "8", "a row for 5 Hz"),
        ("law_file", [*BOTH, "20,200,300,0.2"], 6, "frequency [Hz]", "200", "no row"),
        ("law_file", [*BOTH, "-20,5,300,0.2"], 6, "temperature [degC]", "-20", "more than 20 degC"),
        ("law_file", changed(BOTH, (3, ",100,420,0.3")), 3, "temperature [degC]", "", "in every row"),
        ("amplitude_file", changed(AMPLITUDE, (4, "0.4,0.8,0.12")), 4, "amplitude [mm]", "0.4", "more than"),
        ("amplitude_file", changed(AMPLITUDE, (2, "-0.05,1.4,0.08")), 2, "amplitude [mm]", "-0.05", "above 0"),
        ("amplitude_file", changed(AMPLITUDE, (3, "0.5,0,0.15")), 3, "stiffness_ratio", "0", "a ratio above"),
        ("amplitude_file", changed(AMPLITUDE, (2, "0.05,0.7,0.08"), (3, "0.5,0.9,0.15")), 3,
         "stiffness_ratio", "0.9", "a ratio of 1"),
        ("amplitude_file", AMPLITUDE[:2], 2, "row", "1 row", "at least two rows"),
    ],
)  # fmt: skip
def test_bad_file(
    column: str,
    law: list[str],
    line: int | None,
    where: str,
    found: str,
    expected: str,
    faults_of: Callable[..., tuple[Fault, ...]],
) -> None:
    faults = faults_of(law, **spoil_for(column))
    fault = faults[0]
    in_list = line is None
    assert len(faults) == 1
    assert Path(fault.file).name == ("list.csv" if in_list else "law.csv")
    assert (fault.line, fault.where, fault.found) == (2 if in_list else line, where, found)
    assert expected in fault.expected


def test_two_stiffness_columns(faults_of: Callable[..., tuple[Fault, ...]]) -> None:
    law = [
        "frequency [Hz],stiffness_ratio,stiffness_dynamic [N/mm],loss_factor",
        "5,1,200,0.1",
        "9,1,200,0.1",
    ]
    (fault,) = faults_of(law, **spoil_for("law_file"))
    assert (fault.line, fault.where) == (1, "stiffness_ratio")
    assert "exactly one of stiffness_dynamic and stiffness_ratio" in fault.expected


@pytest.mark.parametrize("column", BASES)
def test_file_that_is_not_there(
    column: str, faults_of: Callable[..., tuple[Fault, ...]], tmp_path: Path
) -> None:
    (tmp_path / "laws.csv").write_text("")
    (fault,) = faults_of(None, **spoil_for(column))
    assert (Path(fault.file).name, fault.line, fault.where) == ("list.csv", 2, column)
    assert (fault.found, fault.nearest) == ("law.csv", "laws.csv")


def test_absolute_path_is_refused(faults_of: Callable[..., tuple[Fault, ...]], tmp_path: Path) -> None:
    path = str(tmp_path / "law.csv")
    (fault,) = faults_of(CURVE, drop=[ZS], add={"curve_file": path})
    assert "relative to the folder of this list" in fault.expected


def test_faulty_file_of_many_rows_is_told_once_and_all_files_together(
    faults_of: Callable[..., tuple[Fault, ...]], tmp_path: Path
) -> None:
    (tmp_path / "other.csv").write_text("\n".join(changed(TABLE, (2, "5,0.9,-1"))))
    cells = {(5, "law_file"): "other.csv", (5, "curve_file"): "", (5, "loss_factor"): "", (5, ZS): "160"}
    add = {"curve_file": "law.csv", "law_file": ""}
    faults = faults_of(
        changed(CURVE, (4, "12,3")),
        rows=4,
        cells={**{(line, ZS): "" for line in (2, 3, 4)}, **cells},
        add=add,
    )
    assert [(Path(fault.file).name, fault.line) for fault in faults] == [("law.csv", 4), ("other.csv", 2)]


@pytest.mark.parametrize(
    ("law", "spoil", "line", "where", "expected"),
    [
        (CURVE, {"add": {"curve_file": "law.csv"}, "cells": {(2, ZS): "190"}}, 2, ZS,
         "the tangent of the curve at load_rated within 5 %, which is 160 N/mm"),
        (CURVE, {"drop": [ZS], "add": {"curve_file": "law.csv", "deflection_rated [mm]": "7"}}, 2,
         "deflection_rated [mm]", "the deflection of the curve at load_rated within 5 %, which is 6.129 mm"),
        (CURVE, {"drop": [ZS], "add": {"curve_file": "law.csv"}, "cells": {(2, "load_max [N]"): "2000"}}, 2,
         "load_max [N]", "at most the end of the curve, 1920 N at 12 mm"),
        (CURVE, {"drop": [ZS], "add": {"curve_file": "law.csv"},
                 "cells": {(2, "load_min [N]"): "-20", (2, "pulls"): "yes"}}, 2, "load_min [N]",
         "at least the start of the curve, 0 N"),
        (["deflection [mm],load [N]", "-2,-320", "0,0", "12,1920"],
         {"drop": [ZS], "add": {"curve_file": "law.csv"}}, 2, "curve_file", "or pulls = yes"),
        (CURVE, {"drop": [ZS], "add": {"curve_file": "law.csv"}, "cells": {(2, "deflection_max [mm]"): "14"}},
         2, "deflection_max [mm]", "which is its stop"),
        (CURVE, {"drop": [ZS], "add": {"curve_file": "law.csv"}, "cells": {(2, "deflection_max [mm]"): "7"}},
         2, "deflection_max [mm]", "at least 7.5 mm, the deflection of the curve"),
        (CURVE, {"drop": [ZS, "load_rated [N]"], "add": {"curve_file": "law.csv"}}, 1, "load_rated [N]",
         "the stiffness of a curve is its tangent at the rated load"),
        (TABLE, {"add": {"law_file": "law.csv"}}, 2, "loss_factor",
         "an empty cell, for law_file states the damping"),
        (TABLE, {"drop": ["loss_factor"], "add": {"law_file": "law.csv", "damping_kind": "viscous"}}, 2,
         "damping_kind", "an empty cell, for law_file states the damping"),
        (AMPLITUDE, {"add": {"amplitude_file": "law.csv"}}, 2, "loss_factor",
         "an empty cell, for amplitude_file states the damping"),
        (AMPLITUDE, {"drop": ["loss_factor"], "add": {"amplitude_file": "law.csv", "amplitude_max [mm]": "1"}},
         2, "amplitude_max [mm]", "amplitude_file states the range"),
        (None, {"add": {"amplitude_min [mm]": "2", "amplitude_max [mm]": "1"}}, 2, "amplitude_min [mm]",
         "less than amplitude_max, which is 1 mm"),
        (None, {"add": {"relaxation_ratio": "3"}}, 2, "relaxation_ratio",
         "an empty cell, or the dashpot's coefficient in viscous"),
        (None, {"rename": {"loss_factor": "viscous [N s/m]"}, "add": {"relaxation_ratio": "0"}}, 2,
         "relaxation_ratio", "a ratio above 0"),
        (None, {"add": {"damping_kind": "viscos"}}, 2, "damping_kind", "viscous, loss factor or unknown"),
        (None, {"add": {"damping_kind": "viscous"}}, 2, "damping_kind",
         "loss factor or unknown, for the row states loss_factor"),
        (None, {"rename": {"loss_factor": "viscous [N s/m]"}, "add": {"damping_kind": "unknown"}}, 2,
         "damping_kind", "viscous, for the row states viscous"),
        (None, {"drop": ["load_rated [N]"], "add": {"damping_kind": "unknown"}}, 1, "load_rated [N]",
         "a damping that may be viscous is read at the rated load"),
        (None, {"drop": ["load_rated [N]"], "add": {"stiffness_follows_load": "yes"}}, 1, "load_rated [N]",
         "an air spring's stiffness is stated at the rated load"),
        (None, {"add": {"stiffness_follows_load": "yes"}, "cells": {(2, "load_min [N]"): "0"}}, 2,
         "load_min [N]", "an air spring without load has no stiffness"),
        (None, {"add": {"stiffness_follows_load": "yes"}, "cells": {(2, "pulls"): "yes"}}, 2, "pulls",
         "an air spring does not hold in tension"),
        (CURVE, {"drop": [ZS], "add": {"stiffness_follows_load": "yes", "curve_file": "law.csv"}}, 2,
         "curve_file", "an empty cell beside stiffness_follows_load"),
    ],
)  # fmt: skip
def test_law_against_its_row(
    law: list[str] | None,
    spoil: dict[str, Any],
    line: int,
    where: str,
    expected: str,
    faults_of: Callable[..., tuple[Fault, ...]],
) -> None:
    (fault,) = faults_of(law, **spoil)
    assert (Path(fault.file).name, fault.line, fault.where) == ("list.csv", line, where)
    assert expected in fault.expected


def test_only_one_file_can_state_the_damping(
    faults_of: Callable[..., tuple[Fault, ...]], tmp_path: Path
) -> None:
    (tmp_path / "other.csv").write_text("\n".join(AMPLITUDE))
    add = {"law_file": "law.csv", "amplitude_file": "other.csv"}
    (fault,) = faults_of(TABLE, drop=["loss_factor"], add=add)
    assert (fault.where, fault.found) == ("amplitude_file", "other.csv")
