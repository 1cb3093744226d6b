"""Bad parts lists: each fault names file, line, column, what stands there, what to write, nearest name."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import pytest

from detune.ground.errors import BriefError, Fault
from detune.parts.catalog import read_catalog

ZS, ZD = "stiffness_z_static [N/mm]", "stiffness_z_dynamic [N/mm]"
XS, XD = "stiffness_x_static [N/mm]", "stiffness_x_dynamic [N/mm]"
YS, YD = "stiffness_y_static [N/mm]", "stiffness_y_dynamic [N/mm]"


@dataclass(frozen=True)
class Case:
    """How the good list is spoilt, and the one fault that must come of it."""

    name: str
    line: int | None
    where: str
    found: str
    expected: str
    nearest: str | None = None
    spoil: dict[str, Any] = field(default_factory=dict)
    study: dict[str, Any] = field(default_factory=dict)


def cell(name: str, header: str, text: str, expected: str, line: int = 3, nearest: str | None = None) -> Case:
    return Case(name, line, header, text, expected, nearest, {"cells": {(line, header): text}})


CELLS = [
    cell("missing cell", ZS, "", "a value in every row: axial stiffness"),
    cell("missing part number", "part", "", "a value in every row: part number"),
    cell("missing cost", "cost", "", "a value in every row: price"),
    cell("not a number", ZS, "stiff", "a stiffness as a number in N/mm"),
    cell("not a number, optional", "mass [kg]", "n/a", "or an empty cell where there is none"),
    cell("nan", ZD, "NaN", "a stiffness as a number in N/mm"),
    cell("infinite", "load_max [N]", "inf", "a force as a number in N"),
    cell("infinite by its exponent", "load_max [N]", "1e999", "a force as a number in N"),
    cell("too large for SI", ZD, "1e307", "a number that is not so large"),
    cell("underscore", "load_max [N]", "1_200", "a force as a number in N"),
    cell("other digits", "cost", "\u0662\u0664", "a cost as a number"),
    cell("two points", "cost", "1.2.3", "a cost as a number"),
    cell("unit in the cell", "load_max [N]", "1200 N", "the unit stands in the header, not in the cell"),
    cell("negative stiffness", ZS, "-160", "a stiffness above 0 N/m"),
    cell("zero stiffness", XD, "0", "a stiffness above 0 N/m"),
    cell("zero cost", "cost", "0", "a cost above 0"),
    cell("negative cost", "cost", "-3", "a cost above 0"),
    cell("negative mass", "mass [kg]", "-0.35", "a mass above 0 kg"),
    cell("loss factor too great", "loss_factor", "10", "a ratio at least 0 and at most 1.5"),
    cell("negative loss factor", "loss_factor", "-0.1", "a ratio at least 0 and at most 1.5"),
    cell("tolerance of all of it", "tolerance [%]", "100", "a ratio at least 0 and below 1"),
    cell("colder than can be", "temperature_min [degC]", "-300", "a temperature at least -273.15 degC"),
    cell("part of a mount in stock", "stock", "2.5", "a whole number"),
    cell("yes or no unreadable", "pulls", "maybe", "yes or no"),
    # 0.9 of 160 N/mm is 144 N/mm.
    cell("dynamic below static", ZD, "16", "at least 144 N/mm, 0.9 of stiffness_z_static"),
    cell("lateral dynamic below static", XD, "35.9", "at least 36 N/mm, 0.9 of stiffness_x_static"),
    cell("dynamic in another unit", ZD, "200000", "10 times stiffness_z_static"),
    cell("load window reversed", "load_min [N]", "1300", "at most load_max, which is 1200 N"),
    cell("tension without pulls", "load_min [N]", "-50", "at least 0 N, or pulls = yes"),
    cell(
        "rated above the greatest load",
        "load_rated [N]",
        "1500",
        "a load between load_min 200 N and load_max",
    ),
    cell("rated below the least load", "load_rated [N]", "20", "a load between load_min 200 N and load_max"),
    # 1200 N / 160 N/mm = 7.5 mm.
    cell(
        "cannot carry its load",
        "deflection_max [mm]",
        "7.4",
        "at least 7.5 mm, load_max / stiffness_z_static",
    ),
    cell("travel beyond its height", "free_height [mm]", "11", "at least deflection_max, which is 12 mm"),
    cell(
        "temperatures reversed", "temperature_min [degC]", "90", "less than temperature_max, which is 80 degC"
    ),
    cell("no damping in a row", "loss_factor", "", "exactly one of loss_factor, damping_ratio, viscous"),
    cell("lateral static without dynamic", XD, "", "because stiffness_x_static is stated"),
    cell("lateral dynamic without static", XS, "", "because stiffness_x_dynamic is stated"),
    cell("part number twice", "part", "rowan-a", "it stands already in line 2"),
    cell("part number over two lines", "part", '"row\nan"', "text on one line"),
]

LISTS = [
    Case("unknown header", 1, "mas [kg]", "mas [kg]", "the name of a column", "mass [kg]",
         {"rename": {"mass [kg]": "mas [kg]"}}),
    Case("unknown header, unlike any", 1, "Colour", "Colour", "other headers are mapped in the study", None,
         {"add": {"Colour": "black"}}),
    Case("empty map is no map", 1, "Colour", "Colour", "other headers are mapped in the study", None,
         {"add": {"Colour": "black"}}, {"header_map": {}, "units": {}, "constants": {}}),
    Case("capital letters", 1, "cost", "", "a column cost", "Cost", {"drop": ["cost"], "add": {"Cost": "2"}},
         {"header_map": {"mass": "mass [kg]"}}),
    Case("empty header", 1, "header", "", "a name in every cell of the header row", None, {"add": {"": "2"}}),
    Case("missing column", 1, ZD, "", "a column stiffness_z_dynamic [N/mm]", None, {"drop": [ZD]}),
    Case("no damping column", 1, "loss_factor", "", "the list states no damping", None,
         {"drop": ["loss_factor"]}),
    Case("same header twice", 1, "cost [1]", "cost [1]", "each column once; column 15", None,
         {"add": {"cost [1]": "24.5"}}),
    Case("no unit", 1, "mass", "", "a unit of mass, for example \"kg\"; write it as mass [kg]", None,
         {"rename": {"mass [kg]": "mass"}}),
    Case("unit of another dimension", 1, "mass [N]", "N", "a unit of mass", None,
         {"rename": {"mass [kg]": "mass [N]"}}),
    Case("stiffness in force", 1, "stiffness_z_static [N]", "N", "a unit of stiffness", None,
         {"rename": {ZS: "stiffness_z_static [N]"}}),
    Case("unknown unit", 1, "stiffness_z_static [N/mmm]", "N/mmm", "a unit of stiffness", "N/mm",
         {"rename": {ZS: "stiffness_z_static [N/mmm]"}}),
    Case("unit of a text", 1, "family [m]", "m", "no unit, for this column is text", None,
         {"rename": {"family": "family [m]"}}),
    Case("unit of a cost", 1, "cost [kg]", "kg", "no unit, for a cost is a bare number", None,
         {"rename": {"cost": "cost [kg]"}}),
    Case("two damping columns", 4, "viscous [N s/m]", "30", "this row fills loss_factor and viscous", None,
         {"add": {"viscous [N s/m]": ""}, "cells": {(4, "viscous [N s/m]"): "30"}}),
    Case("lateral damping alone", 2, "viscous_lateral [N s/m]", "30", "the axial coefficient in viscous",
         None,
         {"add": {"viscous_lateral [N s/m]": ""}, "cells": {(2, "viscous_lateral [N s/m]"): "30"}}),
    Case("lateral damping without stiffness", 1 + 1, "viscous_lateral [N s/m]", "30",
         "the lateral stiffness", None,
         {"rows": 1, "drop": [XS, XD], "rename": {"loss_factor": "viscous [N s/m]"},
          "add": {"viscous_lateral [N s/m]": "30"}}),
    Case("damping ratio without its load", 3, "load_rated [N]", "",
         "because damping_ratio holds at the rated load",
         None, {"rename": {"loss_factor": "damping_ratio"}, "cells": {(3, "load_rated [N]"): ""}}),
    Case("damping ratio without any load", 1, "load_rated [N]", "",
         "because damping_ratio holds at the rated load",
         None, {"rename": {"loss_factor": "damping_ratio"}, "drop": ["load_rated [N]"]}),
    Case("damping ratio in per cent without a sign", 2, "damping_ratio", "5", "at least 0 and at most 1",
         None,
         {"rename": {"loss_factor": "damping_ratio"}, "cells": {(2, "loss_factor"): "5"}}),
    Case("amplification of nothing", 2, "amplification", "1", "a ratio above 1 and at most 1000", None,
         {"rename": {"loss_factor": "amplification"}, "rows": 1, "cells": {(2, "loss_factor"): "1"}}),
    Case("lateral static column without dynamic", 1, XD, "", "because stiffness_x_static is stated", None,
         {"drop": [XD]}),
    Case("second lateral direction alone", 1, "stiffness_x_static [N/mm]", "", "because the list states y",
         None,
         {"drop": [XS, XD], "add": {YS: "40", YD: "50"}}),
    Case("second lateral direction alone in a row", 3, XS, "", "because this row states the y direction",
         None,
         {"add": {YS: "40", YD: "50"}, "cells": {(3, XS): "", (3, XD): ""}}),
    Case("family without a tolerance", 3, "family", "ruber", "or a stated tolerance", "rubber",
         {"cells": {(3, "family"): "ruber", (3, "tolerance [%]"): ""}}),
    Case("no rows", 1, "file", "", "a row for each part below the header", None, {"rows": 0}),
]  # fmt: skip

MAPPED = [
    Case("map to a header not there", 1, "headers.mass", "mass (kg)", "a header of this sheet",
         "mass [kg]", {},
         {"header_map": {"mass": "mass (kg)"}}),
    Case("map of no column", 1, "headers.mas", "mas", "the name of a column", "mass", {},
         {"header_map": {"mas": "mass [kg]"}}),
    Case("misspelt header beside a map", 1, "temperature_mim [degC]", "temperature_mim [degC]",
         "the name of a column", "temperature_min [degC]",
         {"rename": {"temperature_min [degC]": "temperature_mim [degC]"}},
         {"header_map": {"mass": "mass [kg]"}}),
    Case("mapped without a unit", 1, "Weight", "", "a unit of mass", None,
         {"rename": {"mass [kg]": "Weight"}},
         {"header_map": {"mass": "Weight"}}),
    Case("mapped with a wrong unit", 1, "Weight", "kN", "a unit of mass", None,
         {"rename": {"mass [kg]": "Weight"}},
         {"header_map": {"mass": "Weight"}, "units": {"mass": "kN"}}),
    Case("mapped to a header that stands twice", 1, "headers.mass", "W [kg]", "it stands 2 times", None,
         {"rename": {"mass [kg]": "W [kg]", "stock": "W [kg]"}}, {"header_map": {"mass": "W [kg]"}}),
    Case("unit of no column", 1, "units.maas", "maas", "the name of a column", "mass", {},
         {"units": {"maas": "kg"}}),
    Case("unit against the header", 1, "mass [kg]", "lb", "the unit of the header, kg", None, {},
         {"units": {"mass": "lb"}}),
    Case("unit of a column not read", 1, "units.amplification", "1", "amplification is not in the sheet",
         None, {},
         {"units": {"amplification": "1"}}),
    Case("unit of a constant", 1, "units.mass", "kg", "a constant carries its own", None,
         {"drop": ["mass [kg]"]},
         {"units": {"mass": "kg"}, "constants": {"mass": "2 kg"}}),
    Case("constant of no column", 1, "constants.famly", "famly", "the name of a column", "family", {},
         {"constants": {"famly": "rubber"}}),
    Case("constant and column", 1, "constants.family", "rubber", "a column that the sheet does not have",
         None, {},
         {"constants": {"family": "rubber"}}),
    Case("constant without a unit", 1, "constants.mass", "2", "a mass with its unit", None,
         {"drop": ["mass [kg]"]},
         {"constants": {"mass": "2"}}),
    Case("constant out of range", 1, "constants.loss_factor", "3", "a ratio at least 0 and at most 1.5", None,
         {"drop": ["loss_factor"]}, {"constants": {"loss_factor": "3"}}),
    Case("constant in part", 1, "constants.stock", "1.5", "a whole number", None, {"drop": ["stock"]},
         {"constants": {"stock": "1.5"}}),
    Case("constant neither yes nor no", 1, "constants.pulls", "often", "yes or no", None, {"drop": ["pulls"]},
         {"constants": {"pulls": "often"}}),
    Case("empty constant", 1, "constants.family", "", "a value for the whole list", None,
         {"drop": ["family"]},
         {"constants": {"family": " "}}),
    Case("damping constant and column", 2, "viscous [N s/m]", "30", "fills loss_factor and viscous", None,
         {"rows": 1, "rename": {"loss_factor": "viscous [N s/m]"}, "cells": {(2, "loss_factor"): "30"}},
         {"constants": {"loss_factor": "0.1"}}),
]  # fmt: skip


def faults_of(path: Path, **study: Any) -> tuple[Fault, ...]:
    with pytest.raises(BriefError) as caught:
        read_catalog(path, "trees", "mount", **study)
    assert all(fault.file == str(path) for fault in caught.value.faults)
    return caught.value.faults


@pytest.mark.parametrize("case", [*CELLS, *LISTS, *MAPPED], ids=lambda case: case.name)
def test_one_mistake_gives_its_one_fault(
    case: Case, make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    (fault,) = faults_of(write(make_list(**case.spoil)), **case.study)
    wanted = case.found.strip('"')
    assert (fault.line, fault.where, fault.found, fault.nearest) == (
        case.line,
        case.where,
        wanted,
        case.nearest,
    )
    assert case.expected in fault.expected


FILES = [
    ("empty", b"", 1, "the file is empty"),
    ("blank", b"\n  \n\n", 1, "the file is empty"),
    ("workbook", b"PK\x03\x04\x14\x00\x06", None, "an XLSX workbook"),
    ("old workbook", b"\xd0\xcf\x11\xe0\xa1\xb1", None, "an XLS workbook"),
    ("parquet", b"PAR1\x15\x04", None, "a Parquet file"),
    ("UTF-16", "part,cost\n".encode("utf-16"), None, "text in UTF-16; save it in UTF-8"),
    ("binary", b"part,cost\n\x01\x00\x02", 2, "this is a binary file"),
    ("Latin-1", b"part,cost\nrowan-a,2\nm\xfcller,2\n", 3, "text in UTF-8"),
]


@pytest.mark.parametrize(
    ("content", "line", "expected"), [case[1:] for case in FILES], ids=[c[0] for c in FILES]
)
def test_file_that_is_no_list(
    content: bytes, line: int | None, expected: str, write: Callable[..., Path]
) -> None:
    (fault,) = faults_of(write(content))
    assert (fault.line, fault.where) == (line, "file")
    assert expected in fault.expected


def test_missing_file_names_the_nearest(tmp_path: Path) -> None:
    (tmp_path / "rubber.csv").write_text("part\n")
    (fault,) = faults_of(tmp_path / "ruber.csv")
    assert (fault.line, fault.nearest) == (None, "rubber.csv")
    assert "no such file" in fault.expected


def test_missing_folder(tmp_path: Path) -> None:
    (fault,) = faults_of(tmp_path / "none" / "rubber.csv")
    assert fault.nearest is None


def test_folder_in_place_of_a_file(tmp_path: Path) -> None:
    (fault,) = faults_of(tmp_path)
    assert "this is a folder" in fault.expected


def test_unknown_kind(write: Callable[..., Path], make_list: Callable[..., str]) -> None:
    with pytest.raises(BriefError) as caught:
        read_catalog(write(make_list()), "trees", "mounts")
    (fault,) = caught.value.faults
    assert (fault.where, fault.found, fault.nearest) == ("kind", "mounts", "mount")


def test_decimal_comma_is_refused_in_a_sentence(
    make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    text = make_list(delimiter=";", cells={(3, "cost"): "24,5"})
    (fault,) = faults_of(write(text))
    assert (fault.line, fault.where, fault.found) == (3, "cost", "24,5")
    assert fault.expected == 'a cost as a number; a decimal comma is not read, write "24.5"'


def test_comma_between_thousands_is_refused(
    make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    (fault,) = faults_of(write(make_list(cells={(2, "load_max [N]"): '"1,200"'})))
    assert 'a comma can be read in two ways, write "1200" or a decimal point' in fault.expected


def test_decimal_comma_between_commas_changes_the_count(
    make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    (fault,) = faults_of(write(make_list(cells={(4, "cost"): "24,5"})))
    assert (fault.line, fault.where, fault.found) == (4, "row", "20 cells")
    assert fault.expected.startswith("19 cells, as many as the header has")
    assert "a decimal comma cuts a number in two" in fault.expected


@pytest.mark.parametrize("delimiter", [",", ";"])
def test_too_few_cells(make_list: Callable[..., str], write: Callable[..., Path], delimiter: str) -> None:
    lines = make_list(delimiter=delimiter).splitlines()
    lines[2] = lines[2].rpartition(delimiter)[0]
    (fault,) = faults_of(write("\n".join(lines)))
    assert (fault.line, fault.where, fault.found) == (3, "row", "18 cells")
    assert "comma cuts" not in fault.expected


def test_quotation_mark_that_never_closes(make_list: Callable[..., str], write: Callable[..., Path]) -> None:
    (fault,) = faults_of(write(make_list(cells={(3, "part"): '"rowan-b'})))
    assert (fault.line, fault.where) == (3, "row")
    assert "look for a stray" in fault.expected


def test_everything_at_once_in_the_order_of_the_sheet(
    make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    text = make_list(
        4,
        cells={(2, ZD): "abc", (3, "cost"): "0", (3, ZS): "", (4, "part"): "rowan-a", (5, "pulls"): "?"},
        rename={"mass [kg]": "mass [N]", "stock": "stok"},
        drop=["load_min [N]"],
    )
    lines = text.splitlines()
    faults = faults_of(write("\n".join([*lines, "rowan-z,rubber"])))
    assert [(fault.line, fault.where) for fault in faults] == [
        (1, "mass [N]"),
        (1, "stok"),
        (1, "load_min [N]"),
        (2, ZD),
        (3, ZS),
        (3, "cost"),
        (4, "part"),
        (5, "pulls"),
        (6, "row"),
    ]


def test_cells_below_a_wrong_unit_are_still_read(
    make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    text = make_list(rename={"mass [kg]": "mass [N]"}, cells={(4, "mass [kg]"): "heavy"})
    assert [fault.line for fault in faults_of(write(text))] == [1, 4]


def test_absurd_figures_are_compared_without_overflow(
    make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    faults = faults_of(write(make_list(1, {(2, ZS): "1e-320", (2, "load_max [N]"): "1e300"})))
    assert [fault.where for fault in faults] == [ZD, "deflection_max [mm]"]


def test_fault_reads_as_one_line(make_list: Callable[..., str], write: Callable[..., Path]) -> None:
    path = write(make_list(rename={"mass [kg]": "mas [kg]"}))
    (fault,) = faults_of(path)
    assert str(fault) == (
        f'{path}:1: mas [kg]: found "mas [kg]", expected the name of a column, with its unit as in mass [kg]'
        '; other headers are mapped in the study; did you mean "mass [kg]"?'
    )
