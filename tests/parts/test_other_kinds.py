"""Dampers, ballast, absorbers and pads: hand values, arrays, what is assumed, and bad lists."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from detune.ground.errors import BriefError
from detune.parts.catalog import Catalog, filter_parts, read_catalog
from detune.parts.kinds import KINDS
from detune.parts.kinds.absorber import absorber_arrays
from detune.parts.kinds.ballast import ballast_arrays
from detune.parts.kinds.damper import damper_arrays
from detune.parts.kinds.mount import Mount, is_plain, mount_arrays
from detune.parts.kinds.pad import cut, pad_arrays
from detune.parts.prices import lowest_price, price_each

GOOD = {
    "damper": {
        "part": "elm-a",
        "viscous [N s/m]": "600",
        "viscous_lateral [N s/m]": "50",
        "stiffness_series [N/mm]": "300",
        "stroke [mm]": "40",
        "force_max [N]": "150",
        "tolerance [%]": "20",
        "mass [kg]": "0.8",
        "cost": "60",
        "cost_10": "52",
        "temperature_min [degC]": "-20",
        "temperature_max [degC]": "80",
        "stock": "8",
    },
    "ballast": {
        "part": "elm-a",
        "mass [kg]": "12",
        "length [mm]": "300",
        "width [mm]": "200",
        "height [mm]": "25.5",
        "tolerance [%]": "2",
        "cost": "31",
        "stock": "8",
    },
    "absorber": {
        "part": "elm-a",
        "mass [kg]": "4",
        "mass_fixed [kg]": "0.6",
        "frequency [Hz]": "20",
        "frequency_min [Hz]": "18",
        "frequency_max [Hz]": "22",
        "damping_ratio": "0.1",
        "stroke [mm]": "5",
        "tolerance [%]": "5",
        "cost": "140",
        "stock": "8",
    },
    "pad": {
        "part": "elm-a",
        "family": "rubber",
        "hardness": "50",
        "dynamic_to_static": "1.3",
        "loss_factor": "0.1",
        "thickness [mm]": "25",
        "sheet_width [mm]": "500",
        "sheet_length [mm]": "1000",
        "cut_min [mm]": "30",
        "shape_min": "0.25",
        "shape_max": "2",
        "pressure_max [MPa]": "0.8",
        "strain_max [%]": "15",
        "area_density [kg/m^2]": "30",
        "cost_per_m2": "400",
        "tolerance [%]": "20",
        "temperature_min [degC]": "-30",
        "temperature_max [degC]": "70",
    },
}


@pytest.fixture
def read(write: Callable[..., Path]) -> Callable[..., Catalog]:
    def _read(kind: str, cells: dict[str, str] | None = None, drop: tuple[str, ...] = ()) -> Catalog:
        row = {**GOOD[kind], **(cells or {})}
        table = {header: text for header, text in row.items() if header not in drop}
        return read_catalog(write(f"{','.join(table)}\n{','.join(table.values())}\n"), "trees", kind)

    return _read


def test_damper(read: Callable[..., Catalog]) -> None:
    catalog = read("damper")
    (part,) = catalog.parts
    assert catalog.assumed == ()
    arrays = damper_arrays(catalog.parts)
    figures = (
        arrays.viscous,
        arrays.viscous_lateral,
        arrays.stiffness_series,
        arrays.stroke,
        arrays.force_max,
    )
    assert [float(array[0]) for array in figures] == pytest.approx([600.0, 50.0, 300e3, 0.04, 150.0])
    assert [float(array[0]) for array in (arrays.tolerance, arrays.mass, arrays.cost)] == [0.2, 0.8, 60.0]
    assert (price_each(part, 9), price_each(part, 10), lowest_price(part)) == (60.0, 52.0, 52.0)
    assert arrays.cost_breaks.pieces.tolist() == [1, 10]


def test_damper_of_which_little_is_known(read: Callable[..., Catalog]) -> None:
    drop = tuple(set(GOOD["damper"]) - {"part", "viscous [N s/m]", "stroke [mm]", "cost"})
    catalog = read("damper", drop=drop)
    arrays = damper_arrays(catalog.parts)
    assert (arrays.stiffness_series[0], arrays.force_max[0]) == (math.inf, math.inf)
    assert math.isnan(arrays.mass[0])
    assert {(item.what, item.value) for item in catalog.assumed} == {
        ("viscous_lateral", "0 N s/m"),
        ("tolerance", "30 %"),
    }
    assert len(damper_arrays([])) == 0


def test_ballast(read: Callable[..., Catalog]) -> None:
    """12 kg of 300 x 200 mm: 12 (0.3^2 + 0.2^2)/12 = 0.13 kg m^2 about z; 12 (0.2^2 + 0.0255^2)/12 about x."""
    arrays = ballast_arrays(read("ballast").parts)
    np.testing.assert_allclose(arrays.inertia, [[0.04065025, 0.09065025, 0.13]], rtol=1e-12)
    np.testing.assert_allclose(arrays.size, [[0.3, 0.2, 0.0255]])
    assert (arrays.mass[0], arrays.tolerance[0]) == (12.0, pytest.approx(0.02))
    untold = read("ballast", drop=("tolerance [%]",))
    assert [(item.what, item.value) for item in untold.assumed] == [("tolerance", "5 %")]
    assert ballast_arrays([]).inertia.shape == (0, 3)


def test_absorber(read: Callable[..., Catalog]) -> None:
    """k = 4 (2 pi 20)^2 = 63165.468 N/m, c = 2 x 0.1 x 4 x 2 pi 20 = 100.530965 N s/m; at 19 Hz 57006.835."""
    arrays = absorber_arrays(read("absorber").parts)
    assert arrays.stiffness[0] == pytest.approx(63165.468, rel=1e-7)
    assert arrays.viscous[0] == pytest.approx(100.530965, rel=1e-8)
    assert arrays.stiffness_low[0] == pytest.approx(57006.835, rel=1e-7)
    assert arrays.stiffness_high[0] == pytest.approx(69639.929, rel=1e-7)
    assert (arrays.mass[0], arrays.mass_fixed[0], arrays.stroke[0]) == (4.0, 0.6, pytest.approx(0.005))
    assert {item.what for item in read("absorber", drop=("mass_fixed [kg]",)).assumed} == {"mass_fixed"}


def test_pad_cut_from_hardness(read: Callable[..., Catalog]) -> None:
    """50 x 50 x 25 mm: S = 2500/(2 x 25 x 100) = 0.5, as the disc of CHECKS M4, so E_c = 3.003 MPa at IRHD 50
    (E0 = 2.20 MPa, k = 0.73; Lindley, from memory); K = 3.003 x 2500/25 = 300.3 N/mm, and in shear
    0.64 x 100 = 64 N/mm."""
    catalog = read("pad")
    mount = cut(catalog.parts[0], 0.05, 0.05)  # type: ignore[arg-type]
    assert mount.stiffness_static == pytest.approx((64e3, 64e3, 300.3e3), rel=1e-9)
    assert mount.stiffness_dynamic == pytest.approx((83.2e3, 83.2e3, 390.39e3), rel=1e-9)
    # 0.8 MPa on 2500 mm^2 is 2000 N, but 15 % of 25 mm is 3.75 mm and 1126.125 N.
    assert mount.load_max == pytest.approx(1126.125, rel=1e-9)
    assert mount.deflection_max == pytest.approx(0.00375)
    assert (mount.cost, mount.mass) == pytest.approx((1.0, 0.075))
    assert mount.part == "elm-a 50 x 50 mm"
    assert mount.approximate == "stiffness estimated from its hardness and shape factor 0.5"
    assert (is_plain(mount), mount_arrays([mount]).cost[0]) == (True, pytest.approx(1.0))


def test_pad_cut_from_modulus(read: Callable[..., Catalog]) -> None:
    """The constants of IRHD 60 stated one by one (M4): E_c = 4.45 (1 + 2 x 0.57 x 0.25) = 5.71825 MPa."""
    stated = {"modulus [MPa]": "4.45", "modulus_shear [MPa]": "1.06", "shape_constant": "0.57"}
    catalog = read("pad", stated, drop=("hardness", "strain_max [%]"))
    mount = cut(catalog.parts[0], 0.05, 0.05)  # type: ignore[arg-type]
    assert mount.stiffness_static == pytest.approx((106e3, 106e3, 571.825e3), rel=1e-9)
    assert (mount.load_max, mount.deflection_max) == (pytest.approx(2000.0), None)
    assert "its modulus" in mount.approximate


@pytest.mark.parametrize(
    ("size", "expected"),
    [
        ((0.02, 0.05), "no side may be under 30 mm"),
        ((0.6, 0.6), "cannot be cut from a sheet of 500 x 1000 mm"),
        ((0.1, 1.2), "cannot be cut from a sheet of 500 x 1000 mm"),
        ((0.5, 0.9), "shape factor 6.43 is outside its range, 0.25 to 2"),
    ],
)
def test_pad_that_cannot_be_cut(
    size: tuple[float, float], expected: str, read: Callable[..., Catalog]
) -> None:
    with pytest.raises(ValueError, match=expected):
        cut(read("pad").parts[0], *size)  # type: ignore[arg-type]


def test_pad_arrays_and_what_is_assumed(read: Callable[..., Catalog]) -> None:
    catalog = read("pad", drop=("tolerance [%]", "strain_max [%]", "area_density [kg/m^2]"))
    assert [(item.what, item.value) for item in catalog.assumed] == [("tolerance", "20 %")]
    arrays = pad_arrays(catalog.parts)  # type: ignore[arg-type]
    assert (arrays.thickness[0], arrays.strain_max[0], arrays.tolerance[0]) == (0.025, math.inf, 0.2)
    assert math.isnan(arrays.area_density[0])
    assert arrays.pressure_max[0] == pytest.approx(0.8e6)


@pytest.mark.parametrize(
    ("kind", "cells", "drop", "line", "where", "expected"),
    [
        ("damper", {"viscous [N s/m]": "0"}, (), 2, "viscous [N s/m]", "a damping coefficient above 0"),
        ("damper", {"stroke [mm]": ""}, (), 2, "stroke [mm]", "a value in every row"),
        ("damper", {}, ("stroke [mm]",), 1, "stroke [mm]", "a column stroke [mm]"),
        ("damper", {"cost_10": "70"}, (), 2, "cost_10", "at most 60"),
        ("damper", {"temperature_min [degC]": "90"}, (), 2, "temperature_min [degC]", "less than temp"),
        ("damper", {"tolerance [%]": "100"}, (), 2, "tolerance [%]", "below 1"),
        ("damper", {"viscosity [N s/m]": "3"}, (), 1, "viscosity [N s/m]", "the name of a column"),
        # 300 x 200 x 25.5 mm of lead weigh 18.36 kg at 12,000 kg/m^3.
        ("ballast", {"mass [kg]": "19"}, (), 2, "mass [kg]", "at most 18.36 kg, a block of lead"),
        ("ballast", {"width [mm]": "-200"}, (), 2, "width [mm]", "a length above 0"),
        ("ballast", {"height [mm]": "thin"}, (), 2, "height [mm]", "a length as a number in mm"),
        ("absorber", {"frequency [Hz]": "25"}, (), 2, "frequency [Hz]", "a tuning between 18 Hz and 22 Hz"),
        ("absorber", {"frequency_max [Hz]": ""}, (), 2, "frequency_max [Hz]", "because frequency_min is"),
        ("absorber", {}, ("frequency_max [Hz]",), 1, "frequency_max [Hz]", "because frequency_min is stated"),
        ("absorber", {"tolerance [%]": ""}, (), 2, "tolerance [%]", "a value in every row: tuning"),
        ("absorber", {"damping_ratio": "1.2"}, (), 2, "damping_ratio", "at most 1"),
        ("absorber", {"stroke [mm]": "0"}, (), 2, "stroke [mm]", "a length above 0"),
        ("pad", {"hardness": "80"}, (), 2, "hardness", "at most 75 ShA"),
        ("pad", {"hardness": ""}, (), 2, "hardness", "exactly one of hardness and modulus"),
        ("pad", {}, ("hardness",), 1, "hardness [ShA]", "the list states neither"),
        ("pad", {"modulus [MPa]": "2.2"}, (), None, "", ""),
        ("pad", {"modulus [MPa]": "2.2", "modulus_shear [MPa]": "0.6"}, ("hardness",), 1, "shape_constant",
         "because modulus is stated"),
        ("pad", {"shape_constant": "0.7"}, (), 2, "shape_constant", "an empty cell beside hardness"),
        ("pad", {"sheet_width [mm]": "2000"}, (), 2, "sheet_width [mm]", "at most sheet_length, which is 1 m"),
        ("pad", {"cut_min [mm]": "600"}, (), 2, "cut_min [mm]", "at most sheet_width"),
        ("pad", {"shape_min": "3"}, (), 2, "shape_min", "at most shape_max, which is 2"),
        ("pad", {"dynamic_to_static": ""}, (), 2, "dynamic_to_static", "a value in every row"),
    ],
)  # fmt: skip
def test_bad_list(
    kind: str,
    cells: dict[str, str],
    drop: tuple[str, ...],
    line: int | None,
    where: str,
    expected: str,
    read: Callable[..., Catalog],
) -> None:
    with pytest.raises(BriefError) as caught:
        read(kind, cells, drop)
    if line is None:
        assert {fault.where for fault in caught.value.faults} >= {"hardness", "shape_constant"}
        return
    (fault,) = caught.value.faults
    assert (fault.line, fault.where) == (line, where)
    assert expected in fault.expected


@pytest.mark.parametrize("kind", GOOD)
def test_every_column_can_be_asked_for_and_filtered(kind: str, read: Callable[..., Catalog]) -> None:
    catalog = read(kind)
    rules: Any = KINDS[kind]
    for column in rules.COLUMNS:
        stated = rules.value(catalog.parts[0], column.name)
        assert stated is None or isinstance(stated, str if column.kind == "text" else float | int)
    with pytest.raises(KeyError):
        rules.value(catalog.parts[0], "line")
    assert rules.files(catalog.parts[0]) == ()
    assert filter_parts(catalog, {"part": ["elm-a"]})[0] == (0,)
    number = {"damper": "viscous", "ballast": "mass", "absorber": "frequency", "pad": "thickness"}[kind]
    assert filter_parts(catalog, {number: {"max": 1e-6}})[0] == ()


def test_list_of_mounts_and_of_another_kind(read: Callable[..., Catalog], make_list: Callable[..., str],
                                            write: Callable[..., Path]) -> None:  # fmt: skip
    with pytest.raises(BriefError) as caught:
        _ = read("damper").mounts
    assert (caught.value.faults[0].found, caught.value.faults[0].expected) == ("damper", "a list of mounts")
    mounts = read_catalog(write(make_list()), "trees").mounts
    assert all(isinstance(mount, Mount) for mount in mounts)
