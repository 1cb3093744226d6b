"""A good parts list becomes mounts in SI. Hand values: factors of NIST SP 811 (2008), appendix B.8."""

from __future__ import annotations

import math
import pickle
from collections.abc import Callable
from pathlib import Path

import pytest

from detune.parts.assumed import Assumed, group_assumed
from detune.parts.catalog import read_catalog

SUPPLIER = Path(__file__).parent / "data" / "supplier.csv"
HEADERS = {
    "part": "Item",
    "stiffness_z_static": "Rate, axial",
    "stiffness_z_dynamic": "Rate, axial, moving",
    "stiffness_x_static": "Shear rate",
    "stiffness_x_dynamic": "Shear rate, moving",
    "amplification": "Q",
    "load_min": "Load from",
    "load_max": "Load to",
    "deflection_max": "Travel",
    "free_height": "Height",
    "mass": "Weight",
    "cost": "Price (each)",
    "temperature_min": "Lowest",
    "temperature_max": "Highest",
}
RATES = ("stiffness_z_static", "stiffness_z_dynamic", "stiffness_x_static", "stiffness_x_dynamic")
UNITS = {
    **dict.fromkeys(RATES, "lbf/in"),
    **dict.fromkeys(("load_min", "load_max"), "lbf"),
    **dict.fromkeys(("deflection_max", "free_height"), "in"),
    "mass": "lb",
    **dict.fromkeys(("temperature_min", "temperature_max"), "degF"),
}
CONSTANTS = {"family": "rubber", "tolerance": "12 %", "pulls": "yes", "stock": "40"}


def test_our_own_headers_to_si(make_list: Callable[..., str], write: Callable[..., Path]) -> None:
    path = write(make_list())
    catalog = read_catalog(path, "trees", "mount")
    assert [part.part for part in catalog.parts] == ["rowan-a", "rowan-b", "rowan-c"]
    assert (catalog.name, catalog.kind, catalog.file, catalog.unread) == ("trees", "mount", str(path), ())
    part = catalog.parts[1]
    assert (part.catalog, part.file, part.line) == ("trees", str(path), 3)
    # Definitions: 1 N/mm = 1000 N/m, 1 mm = 0.001 m, 1 % = 0.01.
    assert part.stiffness_static == (40e3, 40e3, 160e3)
    assert part.stiffness_dynamic == (50e3, 50e3, 200e3)
    assert part.loss_factor == (0.1, 0.1, 0.1)
    assert part.viscous == (0.0, 0.0, 0.0)
    assert (part.load_min, part.load_max, part.load_rated) == (200.0, 1200.0, 980.665)
    assert part.deflection_max == pytest.approx(0.012, rel=1e-15)
    assert part.free_height == pytest.approx(0.040, rel=1e-15)
    assert (part.mass, part.cost, part.pulls, part.stock) == (0.35, 24.5, False, 12)
    assert part.tolerance == pytest.approx(0.15, rel=1e-15)
    assert (part.temperature_min, part.temperature_max) == (-30.0, 80.0)


def test_supplier_sheet_is_mapped_as_it_stands() -> None:
    catalog = read_catalog(SUPPLIER, "plums", "mount", HEADERS, UNITS, CONSTANTS)
    first, second, third = catalog.parts
    assert [part.line for part in catalog.parts] == [2, 3, 4]
    # 1 lbf/in = 175.1268 N/m (SP 811 prints 1.751 268 E+02), so 100, 125, 40, 50 lbf/in.
    assert first.stiffness_static == pytest.approx((7005.07, 7005.07, 17512.68), rel=1e-6)
    assert first.stiffness_dynamic == pytest.approx((8756.34, 8756.34, 21890.85), rel=1e-6)
    # 1 lbf = 4.448 222 N; 1 in = 0.0254 m exact; 1 lb = 0.453 592 4 kg.
    assert (first.load_min, first.load_max) == pytest.approx((88.96444, 266.89332), rel=1e-6)
    assert first.deflection_max == pytest.approx(0.02032, rel=1e-12)
    assert first.free_height == pytest.approx(0.0508, rel=1e-12)
    assert first.mass == pytest.approx(0.2267962, rel=1e-6)
    # t/degC = (t/degF - 32) / 1.8: -4 degF is -20 degC, 176 degF is 80 degC, 14 degF is -10 degC.
    assert (first.temperature_min, first.temperature_max) == pytest.approx((-20.0, 80.0), abs=1e-9)
    assert third.temperature_min == pytest.approx(-10.0, abs=1e-9)
    # Amplification 8 is the loss factor 1/8 (resonance of a mass on k (1 + j eta)).
    assert first.loss_factor == (0.125, 0.125, 0.125)
    assert second.loss_factor == (None, None, 0.25)
    assert second.stiffness_static[:2] == (None, None)
    assert (first.family, first.tolerance, first.pulls, first.stock) == ("rubber", 0.12, True, 40)
    assert first.cost == 31.2
    assert catalog.unread == ("Group", "Colour", "Drawing")


def test_one_sheet_column_may_serve_two_of_ours(
    make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    """A steel spring has one rate, static and dynamic."""
    text = make_list(rename={"stiffness_z_static [N/mm]": "Rate [N/mm]"}, drop=["stiffness_z_dynamic [N/mm]"])
    rates = {"stiffness_z_static": "Rate [N/mm]", "stiffness_z_dynamic": "Rate [N/mm]"}
    part = read_catalog(write(text), "trees", "mount", rates).parts[0]
    assert part.stiffness_static[2] == part.stiffness_dynamic[2] == 160e3


def test_unit_from_the_study_where_our_header_has_none(
    make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    text = make_list(rename={"mass [kg]": "mass"})
    part = read_catalog(write(text), "trees", "mount", None, {"mass": "lb"}).parts[0]
    assert part.mass == pytest.approx(0.35 * 0.45359237, rel=1e-12)  # exact pound, SP 811


@pytest.mark.parametrize("delimiter", [",", ";", "\t"])
@pytest.mark.parametrize("bom", [b"", b"\xef\xbb\xbf"])
@pytest.mark.parametrize("newline", ["\n", "\r\n", "\r"])
def test_delimiter_mark_and_line_ends(
    make_list: Callable[..., str], write: Callable[..., Path], delimiter: str, bom: bytes, newline: str
) -> None:
    plain = read_catalog(write(make_list()), "trees").parts
    text = make_list(delimiter=delimiter).replace("\n", newline)
    assert read_catalog(write(bom + text.encode()), "trees").parts == plain


def test_blank_rows_and_rows_of_delimiters_are_skipped_and_lines_still_count(
    make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    lines = make_list().splitlines()
    empty = "," * lines[0].count(",")
    text = "\n".join(["", lines[0], "", lines[1], empty, " " + empty, lines[2], lines[3], "", ""])
    assert [part.line for part in read_catalog(write(text), "trees").parts] == [4, 7, 8]


def test_quoted_cell_over_two_lines_keeps_the_line_of_its_row(
    make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    text = make_list(add={"Note": '"first\nsecond"'})
    parts = read_catalog(write(text), "trees", "mount", {"mass": "mass [kg]"}).parts
    assert [part.line for part in parts] == [2, 4, 6]


def test_spreadsheet_minus_sign_is_read(make_list: Callable[..., str], write: Callable[..., Path]) -> None:
    text = make_list(cells={(2, "temperature_min [degC]"): "\u221230"})
    assert read_catalog(write(text), "trees").parts[0].temperature_min == -30.0


def test_optional_figures_may_be_absent(make_list: Callable[..., str], write: Callable[..., Path]) -> None:
    optional = [
        "stiffness_x_static [N/mm]",
        "stiffness_x_dynamic [N/mm]",
        "load_rated [N]",
        "deflection_max [mm]",
        "pulls",
        "free_height [mm]",
        "mass [kg]",
        "temperature_min [degC]",
        "temperature_max [degC]",
        "stock",
    ]
    part = read_catalog(write(make_list(drop=optional)), "trees").parts[0]
    assert part.stiffness_static == (None, None, 160e3)
    assert part.stiffness_dynamic == (None, None, 200e3)
    assert part.loss_factor == (None, None, 0.1)
    assert part.viscous == (None, None, 0.0)
    absent = (part.load_rated, part.deflection_max, part.free_height, part.mass, part.stock)
    assert absent == (None,) * 5
    assert (part.temperature_min, part.temperature_max, part.pulls) == (None, None, False)


def test_damping_ratio_at_rated_load(make_list: Callable[..., str], write: Callable[..., Path]) -> None:
    """c = 2 z sqrt(k m): 100 kg on 200 N/mm at 5 % is 0.1 sqrt(2e7) = 447.2136 N s/m; on 50 half that."""
    text = make_list(rename={"loss_factor": "damping_ratio"}, cells={(2, "loss_factor"): "0.05"})
    part = read_catalog(write(text), "trees").parts[0]
    assert part.viscous == pytest.approx((223.6068, 223.6068, 447.2136), rel=1e-6)
    assert part.loss_factor == (0.0, 0.0, 0.0)
    assert (part.damping_from, part.damping_stated) == ("damping_ratio", 0.05)


def test_damping_ratio_without_lateral_stiffness(
    make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    lateral = ["stiffness_x_static [N/mm]", "stiffness_x_dynamic [N/mm]"]
    text = make_list(rename={"loss_factor": "damping_ratio"}, drop=lateral)
    part = read_catalog(write(text), "trees").parts[0]
    assert part.viscous[:2] == (None, None)
    assert part.viscous[2] == pytest.approx(0.2 * math.sqrt(2e7), rel=1e-12)


def test_viscous_coefficients(make_list: Callable[..., str], write: Callable[..., Path]) -> None:
    """1 lbf s/in = 175.1268 N s/m (SP 811, as lbf/in)."""
    text = make_list(rename={"loss_factor": "viscous [lbf s/in]"}, add={"viscous_lateral [N s/m]": "7"})
    part = read_catalog(write(text), "trees").parts[0]
    assert part.viscous == pytest.approx((7.0, 7.0, 17.51268), rel=1e-6)
    assert part.loss_factor == (0.0, 0.0, 0.0)
    assert part.damping_from == "viscous"


def test_rows_of_one_list_may_state_damping_each_in_its_way(
    make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    more = {"damping_ratio": "", "viscous [N s/m]": "", "amplification": ""}
    cells = {
        (3, "loss_factor"): "",
        (3, "damping_ratio"): "0.05",
        (4, "loss_factor"): "",
        (4, "viscous [N s/m]"): "300",
        (5, "loss_factor"): "",
        (5, "amplification"): "20",
    }
    parts = read_catalog(write(make_list(4, cells, add=more)), "trees").parts
    assert [part.damping_from for part in parts] == [
        "loss_factor",
        "damping_ratio",
        "viscous",
        "amplification",
    ]
    assert [part.loss_factor[2] for part in parts] == [0.1, 0.0, 0.0, 0.05]
    assert [part.viscous[2] for part in parts] == pytest.approx([0.0, 447.2136, 300.0, 0.0], rel=1e-6)


def test_second_lateral_direction(make_list: Callable[..., str], write: Callable[..., Path]) -> None:
    more = {"stiffness_y_static [N/mm]": "", "stiffness_y_dynamic [N/mm]": ""}
    cells = {(3, "stiffness_y_static [N/mm]"): "90", (3, "stiffness_y_dynamic [N/mm]"): "100"}
    catalog = read_catalog(write(make_list(2, cells, add=more)), "trees")
    assert catalog.parts[0].stiffness_dynamic == (50e3, 50e3, 200e3)
    assert catalog.parts[1].stiffness_static == (40e3, 90e3, 160e3)
    assert catalog.parts[1].stiffness_dynamic == (50e3, 100e3, 200e3)
    assert [item.part for item in catalog.assumed if item.what == "stiffness_y"] == ["rowan-a"]


def test_what_is_assumed_is_recorded(make_list: Callable[..., str], write: Callable[..., Path]) -> None:
    more = {"amplification": "", "viscous [N s/m]": "", "stiffness_y_static [kN/m]": "40"}
    more["stiffness_y_dynamic [kN/m]"] = "50"
    cells = {
        (2, "tolerance [%]"): "",
        (2, "family"): "spring",
        (3, "tolerance [%]"): "",
        (3, "pulls"): "",
        (4, "loss_factor"): "",
        (4, "amplification"): "4",
        (5, "loss_factor"): "",
        (5, "viscous [N s/m]"): "300",
        (6, "loss_factor"): "",
        (6, "amplification"): "5",
    }
    catalog = read_catalog(write(make_list(5, cells, add=more)), "trees")
    stated = {(item.part, item.what, item.value) for item in catalog.assumed}
    assert stated == {
        ("rowan-a", "tolerance", "10 %"),
        ("rowan-b", "tolerance", "15 %"),
        ("rowan-b", "pulls", "no"),
        ("rowan-c", "loss_factor", "1 / amplification"),
        ("rowan-d", "viscous_lateral", "0 N s/m"),
    }
    assert [part.tolerance for part in catalog.parts[:2]] == [0.10, 0.15]
    assert catalog.parts[3].viscous == (0.0, 0.0, 300.0)
    assert all(item.catalog == "trees" and item.why for item in catalog.assumed)


def test_complete_list_assumes_nothing(make_list: Callable[..., str], write: Callable[..., Path]) -> None:
    more = {"stiffness_y_static [N/mm]": "40", "stiffness_y_dynamic [N/mm]": "50"}
    assert read_catalog(write(make_list(add=more)), "trees").assumed == ()


def test_identical_assumptions_are_grouped() -> None:
    items = [
        Assumed("trees", "rowan-a", "tolerance", "15 %", "common practice"),
        Assumed("trees", "rowan-a", "pulls", "no", "not stated"),
        Assumed("trees", "rowan-b", "tolerance", "15 %", "common practice"),
        Assumed("hedge", "rowan-a", "tolerance", "15 %", "common practice"),
        Assumed("hedge", None, "currency", "one", "not stated"),
    ]
    groups = group_assumed(items)
    assert [(group.catalog, group.what, group.parts) for group in groups] == [
        ("trees", "tolerance", ("rowan-a", "rowan-b")),
        ("trees", "pulls", ("rowan-a",)),
        ("hedge", "tolerance", ("rowan-a",)),
        ("hedge", "currency", ()),
    ]
    assert str(groups[0]) == "trees, 2 parts: tolerance assumed 15 % (common practice)"
    assert str(groups[1]) == "trees, rowan-a: pulls assumed no (not stated)"
    assert str(groups[3]) == "hedge, all parts: currency assumed one (not stated)"


def test_catalog_is_frozen_and_travels_to_a_worker(
    make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    catalog = read_catalog(write(make_list(drop=["mass [kg]"])), "trees")
    assert pickle.loads(pickle.dumps(catalog)) == catalog
    with pytest.raises(AttributeError):
        catalog.parts[0].cost = 1.0  # type: ignore[misc]


def test_rounded_deflection_limit_is_accepted(
    make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    """1200 N / 160 N/mm = 7.5 mm; a list that prints 7.45 has rounded, one that prints 7.4 has not."""
    text = make_list(cells={(2, "deflection_max [mm]"): "7.45"})
    assert read_catalog(write(text), "trees").parts[0].deflection_max == pytest.approx(0.00745)


@pytest.mark.parametrize("text", ["12%", "12 %", "12.0 %"])
def test_per_cent_in_a_cell_of_ratios(
    text: str, make_list: Callable[..., str], write: Callable[..., Path]
) -> None:
    """12 % is 0.12, whether the header says per cent or nothing."""
    part = read_catalog(
        write(make_list(1, {(2, "tolerance [%]"): text, (2, "loss_factor"): text})), "trees"
    ).parts[0]
    assert part.tolerance == pytest.approx(0.12, rel=1e-12)
    assert part.loss_factor[2] == pytest.approx(0.12, rel=1e-12)
