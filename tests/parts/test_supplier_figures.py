"""Stiffness from what suppliers print. Hand values from the definitions: a mass m on one spring k has
(2 pi f)^2 = k/m, and sags by m g/k; standard gravity 9.80665 m/s^2 (exact)."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.ground.errors import BriefError, Fault
from detune.parts.catalog import Catalog, read_catalog
from detune.parts.kinds.mount import value

ZS, ZD = "stiffness_z_static [N/mm]", "stiffness_z_dynamic [N/mm]"
XS, XD = "stiffness_x_static [N/mm]", "stiffness_x_dynamic [N/mm]"
FN, SAG, RATIO = "natural_frequency_rated [Hz]", "deflection_rated [mm]", "dynamic_to_static"


@pytest.fixture
def read(make_list: Callable[..., str], write: Callable[..., Path]) -> Callable[..., Catalog]:
    def _read(study: dict[str, Any] | None = None, **spoil: Any) -> Catalog:
        return read_catalog(write(make_list(**{"rows": 1, **spoil})), "trees", "mount", **(study or {}))

    return _read


@pytest.fixture
def fault_of(read: Callable[..., Catalog]) -> Callable[..., Fault]:
    def _fault(**how: Any) -> Fault:
        with pytest.raises(BriefError) as caught:
            read(**how)
        (fault,) = caught.value.faults
        return fault

    return _fault


def test_natural_frequency_at_the_rated_load(read: Callable[..., Catalog]) -> None:
    """980.665 N is 100 kg; at 7 Hz (43.98230 rad/s) k = 100 x 1934.4424 = 193444.24 N/m."""
    part = read(drop=[ZD], add={FN: "7"}).parts[0]
    assert part.stiffness_dynamic[2] == pytest.approx(193444.24, rel=1e-7)
    assert part.stiffness_static[2] == 160e3
    assert value(part, "natural_frequency_rated") == pytest.approx(7.0, rel=1e-12)


def test_natural_frequency_in_revolutions(read: Callable[..., Catalog]) -> None:
    """420 rpm is 7 Hz."""
    part = read(drop=[ZD], add={"natural_frequency_rated [rpm]": "420"}).parts[0]
    assert part.stiffness_dynamic[2] == pytest.approx(193444.24, rel=1e-7)


def test_deflection_at_the_rated_load(read: Callable[..., Catalog]) -> None:
    """980.665 N over 6.5 mm is 150871.54 N/m."""
    catalog = read(drop=[ZS], add={SAG: "6.5"})
    assert catalog.parts[0].stiffness_static[2] == pytest.approx(150871.54, rel=1e-7)
    assert catalog.parts[0].stiffness_dynamic[2] == 200e3
    assert [item.what for item in catalog.assumed] == ["stiffness_y"]


def test_a_stated_stiffness_comes_before_the_figure(read: Callable[..., Catalog]) -> None:
    """7.2 Hz gives 204656 N/m, 2.3 % above 200 N/mm; 6 mm gives 163444 N/m, 2.2 % above 160 N/mm."""
    part = read(add={FN: "7.2", SAG: "6"}).parts[0]
    assert (part.stiffness_static[2], part.stiffness_dynamic[2]) == (160e3, 200e3)


def test_ratio_of_the_row_fills_what_is_not_stated(read: Callable[..., Catalog]) -> None:
    catalog = read(drop=[ZD, XD], add={RATIO: "1.25"})
    assert catalog.parts[0].stiffness_dynamic == pytest.approx((50e3, 50e3, 200e3), rel=1e-12)
    assert [item.what for item in catalog.assumed] == ["stiffness_y"]
    back = read(drop=[ZS, XS], add={RATIO: "1.25"}).parts[0]
    assert back.stiffness_static == pytest.approx((40e3, 40e3, 160e3), rel=1e-12)


def test_ratio_of_the_whole_list_is_recorded_as_assumed(read: Callable[..., Catalog]) -> None:
    catalog = read({"constants": {RATIO: "1.3"}}, drop=[ZD, XD])
    assert catalog.parts[0].stiffness_dynamic == pytest.approx((52e3, 52e3, 208e3), rel=1e-12)
    stated = {item.what: item.value for item in catalog.assumed}
    assert stated["stiffness_z_dynamic"] == "1.3 times stiffness_z_static"
    assert stated["stiffness_x_dynamic"] == "1.3 times stiffness_x_static"
    back = read({"constants": {RATIO: "1.25"}}, drop=[ZS, XS])
    stated = {item.what: item.value for item in back.assumed}
    assert stated["stiffness_z_static"] == "stiffness_z_dynamic / 1.25"


def test_ratio_of_the_whole_list_leaves_complete_rows_alone(read: Callable[..., Catalog]) -> None:
    catalog = read({"constants": {RATIO: "1.9"}})
    assert catalog.parts[0].stiffness_dynamic[2] == 200e3
    assert [item.what for item in catalog.assumed] == ["stiffness_y"]


def test_one_figure_and_a_ratio_give_both(read: Callable[..., Catalog]) -> None:
    """From 7 Hz 193444.24 N/m in vibration, and at the ratio 1.25 154755.39 N/m at rest; likewise from 6.5 mm."""
    part = read(drop=[ZS, ZD], add={FN: "7", RATIO: "1.25"}).parts[0]
    assert part.stiffness_static[2] == pytest.approx(154755.39, rel=1e-7)
    part = read(drop=[ZS, ZD], add={SAG: "6.5", RATIO: "1.25"}).parts[0]
    assert part.stiffness_dynamic[2] == pytest.approx(188589.42, rel=1e-7)


def test_disagreeing_natural_frequency(fault_of: Callable[..., Fault]) -> None:
    """7.4 Hz gives 216186 N/m, 8.1 % above 200 N/mm."""
    fault = fault_of(add={FN: "7.4"})
    assert (fault.line, fault.where, fault.found) == (2, FN, "7.4")
    assert "agrees within 5 % with stiffness_z_dynamic, which is 200 N/mm" in fault.expected
    assert "216.2 N/mm" in fault.expected


def test_disagreeing_deflection(fault_of: Callable[..., Fault]) -> None:
    fault = fault_of(add={SAG: "5.5"})
    assert (fault.where, fault.found) == (SAG, "5.5")
    assert (
        "stiffness_z_static, which is 160 N/mm; load_rated over this deflection is 178.3 N/mm"
        in fault.expected
    )


def test_disagreeing_ratio(fault_of: Callable[..., Fault]) -> None:
    fault = fault_of(add={RATIO: "1.4"})
    assert (fault.where, fault.found) == (RATIO, "1.4")
    assert "which is 1.25" in fault.expected


@pytest.mark.parametrize(
    ("how", "line", "where", "expected"),
    [
        ({"drop": [ZD], "add": {FN: ""}}, 2, FN, "a value in every row: axial stiffness in vibration, or"),
        ({"drop": [ZS], "add": {SAG: ""}}, 2, SAG, "a value in every row: axial stiffness under a steady load"),
        ({"drop": [ZS]}, 1, ZS, "or deflection_rated or curve_file or dynamic_to_static"),
        ({"drop": [ZD], "add": {FN: "7"}, "cells": {(2, "load_rated [N]"): ""}}, 2, "load_rated [N]",
         "because natural_frequency_rated holds at the rated load"),
        ({"drop": [ZS, "load_rated [N]"], "add": {SAG: "7"}}, 1, "load_rated [N]",
         "because deflection_rated holds at the rated load"),
        ({"drop": [ZD], "add": {FN: "0"}}, 2, FN, "a frequency above 0 Hz"),
        ({"drop": [ZD], "add": {FN: "70"}}, 2, FN, "10 times stiffness_z_static"),
        ({"drop": [ZD], "add": {FN: "4"}}, 2, FN, "0.9 of stiffness_z_static"),
        ({"drop": [ZD, XD], "add": {RATIO: "0.5"}}, 2, RATIO, "a ratio at least 0.9 and at most 10"),
        ({"drop": [ZD, XD], "add": {RATIO: "1.2"}, "cells": {(2, "family"): "wire rope"}}, 2, RATIO,
         "only for the families rubber, neoprene, spring; this family is wire rope"),
        ({"drop": [ZS, ZD], "add": {RATIO: "1.2"}}, 1, "stiffness", ""),
    ],
)  # fmt: skip
def test_figures_that_are_refused(
    how: dict[str, Any], line: int, where: str, expected: str, read: Callable[..., Catalog]
) -> None:
    with pytest.raises(BriefError) as caught:
        read(**how)
    if where == "stiffness":
        assert len(caught.value.faults) == 2
        return
    (fault,) = caught.value.faults
    assert (fault.line, fault.where) == (line, where)
    assert expected in fault.expected


@settings(deadline=None, max_examples=40)
@given(st.floats(1.0, 40.0), st.floats(50.0, 1200.0))
def test_natural_frequency_comes_back(frequency: float, load: float) -> None:
    """k = (2 pi f)^2 F/g and its inverse, through the list's own text."""
    from tempfile import TemporaryDirectory

    static = (2 * math.pi * frequency) ** 2 * load / 9.80665 / 1.2
    header = (
        f"part,family,stiffness_z_static [N/m],{FN},loss_factor,load_min [N],load_rated [N],load_max [N],cost"
    )
    row = f"rowan-a,rubber,{static!r},{frequency!r},0.1,0,{load!r},1200,9"
    with TemporaryDirectory() as folder:
        path = Path(folder) / "list.csv"
        path.write_text(f"{header}\n{row}\n")
        part = read_catalog(path, "trees").parts[0]
    assert value(part, "natural_frequency_rated") == pytest.approx(frequency, rel=1e-9)
    assert value(part, "dynamic_to_static") == pytest.approx(1.2, rel=1e-9)
    assert value(part, "deflection_rated") == pytest.approx(load / static, rel=1e-9)
