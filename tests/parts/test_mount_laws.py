"""Laws of mounts as a list states them: values by hand, then what each law means."""

from __future__ import annotations

import math
import pickle
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from detune.parts.catalog import Catalog, read_catalog
from detune.parts.kinds.mount import amplitude_caution, is_plain, mount_arrays, value
from detune.parts.laws import (
    AmplitudeTable,
    LawTable,
    LoadCurve,
    Relaxation,
    UnknownDamping,
    curve_physics,
    deflection_under,
    follows_load,
    table_physics,
    tangent_stiffness,
)
from detune.physics.damping import relaxation_stiffness
from detune.physics.relaxation import table_stiffness

ZS, ZD = "stiffness_z_static [N/mm]", "stiffness_z_dynamic [N/mm]"
XS, XD = "stiffness_x_static [N/mm]", "stiffness_x_dynamic [N/mm]"
STRAIGHT = "deflection [mm],load [N]\n0,0\n5,800\n12,1920\n"
RISING = "deflection [mm],load [N]\n0,0\n2,200\n4,500\n6,1000\n8,1800\n"
BY_FREQUENCY = "frequency [Hz],stiffness_ratio,loss_factor\n5,0.9,0.1\n20,1,0.12\n100,1.3,0.2\n"
BY_BOTH = """temperature [degC],frequency [Hz],stiffness_dynamic [N/mm],loss_factor
-20,5,300,0.2
-20,100,420,0.3
20,5,180,0.1
20,100,260,0.14
"""
BY_AMPLITUDE = "amplitude [mm],stiffness_ratio,loss_factor\n0.05,1.4,0.08\n0.5,1,0.15\n2,0.8,0.12\n"


@pytest.fixture
def read(tmp_path: Path, make_list: Callable[..., str], write: Callable[..., Path]) -> Callable[..., Catalog]:
    """Read the good list, spoilt, with a file law.csv beside it."""

    def _read(law: str = "", **spoil: Any) -> Catalog:
        (tmp_path / "law.csv").write_text(law)
        return read_catalog(write(make_list(**{"rows": 1, **spoil})), "trees")

    return _read


def test_plain_mounts_are_plain(read: Callable[..., Catalog]) -> None:
    catalog = read(rows=2)
    assert [is_plain(part) for part in catalog.parts] == [True, True]
    assert mount_arrays(catalog.parts).plain.tolist() == [True, True]
    assert catalog.further_files == ()
    part = catalog.parts[0]
    assert (part.damping_kind, value(part, "damping_kind")) == ("loss factor", "loss factor")
    assert value(part, "stiffness_follows_load") is False


def test_relaxation(read: Callable[..., Catalog]) -> None:
    """K = k + j w c N k/(N k + j w c): with k = 200, N k = 600 and w c = 600 N/mm it is 500 + 300 j N/mm."""
    more = {"relaxation_ratio": "3", "viscous_lateral [N s/m]": "400"}
    part = read(
        rename={"loss_factor": "viscous [N s/m]"}, cells={(2, "loss_factor"): "6000"}, add=more
    ).parts[0]
    assert part.relaxation == Relaxation(3.0)
    assert (part.viscous, part.loss_factor) == ((400.0, 400.0, 6000.0), (0.0, 0.0, 0.0))
    assert (is_plain(part), value(part, "relaxation_ratio")) == (False, 3.0)
    stiffness = relaxation_stiffness(
        part.stiffness_dynamic[2], part.viscous[2], part.relaxation.stiffness_ratio, 100.0
    )
    assert stiffness == pytest.approx(500e3 + 300e3j, rel=1e-12)


def test_load_curve(read: Callable[..., Catalog]) -> None:
    catalog = read(STRAIGHT, drop=[ZS, "deflection_max [mm]"], add={"curve_file": "law.csv"})
    part = catalog.parts[0]
    assert part.load_curve is not None
    assert part.load_curve.deflection == pytest.approx((0.0, 0.005, 0.012))
    assert part.load_curve.load == (0.0, 800.0, 1920.0)
    # A straight curve of 160 N/mm: its tangent is that everywhere, and 980.665 N rest at 6.129156 mm.
    assert part.stiffness_static[2] == pytest.approx(160e3, rel=1e-9)
    assert value(part, "deflection_rated") == pytest.approx(6.129156e-3, rel=1e-6)
    assert (part.deflection_max, is_plain(part)) == (0.012, False)
    assert catalog.further_files == (part.load_curve.file,) == (value(part, "curve_file"),)
    assert Path(part.load_curve.file).name == "law.csv"


def test_progressive_curve_gives_its_tangent_never_its_secant(read: Callable[..., Catalog]) -> None:
    """At 980.665 N the secant is about 165 N/mm; the neighbouring chords are 250 and 400 N/mm."""
    cells = {(2, ZD): "400", (2, "load_max [N]"): "1200"}
    part = read(RISING, drop=[ZS, "deflection_max [mm]"], cells=cells, add={"curve_file": "law.csv"}).parts[0]
    assert part.load_curve is not None
    assert 250e3 < part.stiffness_static[2] < 400e3
    assert deflection_under(part.load_curve, 500.0) == pytest.approx(0.004, rel=1e-9)
    step = 1e-7
    load = 980.665
    chord = (
        2
        * step
        / (deflection_under(part.load_curve, load + step) - deflection_under(part.load_curve, load - step))
    )
    assert part.stiffness_static[2] == pytest.approx(chord, rel=1e-4)
    stiffening = [tangent_stiffness(part.load_curve, load) for load in (100.0, 400.0, 800.0, 1500.0)]
    assert stiffening == sorted(stiffening)
    with pytest.raises(ValueError, match="outside the table"):
        tangent_stiffness(part.load_curve, 1801.0)


def test_stated_stiffness_beside_a_curve_must_be_its_tangent(read: Callable[..., Catalog]) -> None:
    part = read(STRAIGHT, cells={(2, ZS): "163"}, add={"curve_file": "law.csv"}).parts[0]
    assert part.stiffness_static[2] == 163e3


def test_curve_that_pulls(read: Callable[..., Catalog]) -> None:
    curve = "deflection [mm],load [N]\n-6,-960\n0,0\n5,800\n12,1920\n"
    cells = {(2, "load_min [N]"): "-500", (2, "pulls"): "yes"}
    part = read(curve, drop=[ZS], cells=cells, add={"curve_file": "law.csv"}).parts[0]
    assert part.load_curve is not None
    assert deflection_under(part.load_curve, -480.0) == pytest.approx(-0.003, rel=1e-9)


def test_air_spring(read: Callable[..., Catalog]) -> None:
    part = read(add={"stiffness_follows_load": "yes"}, cells={(2, "deflection_max [mm]"): "5"}).parts[0]
    assert (part.follows_load, is_plain(part)) == (True, False)
    assert value(part, "deflection_rated") is None
    # Half the load, half the stiffness, the same natural frequency sqrt(k/m).
    k = follows_load(part.stiffness_dynamic[2], 980.665, 490.3325)
    assert k == pytest.approx(100e3, rel=1e-12)
    assert math.sqrt(k / 50.0) == pytest.approx(math.sqrt(200e3 / 100.0), rel=1e-12)
    with pytest.raises(ValueError, match="in compression"):
        follows_load(k, 980.665, -1.0)


def test_table_over_frequency(read: Callable[..., Catalog]) -> None:
    part = read(BY_FREQUENCY, drop=["loss_factor"], add={"law_file": "law.csv"}).parts[0]
    table = part.law_table
    assert table == LawTable(
        (5.0, 20.0, 100.0), (), ((0.9, 1.0, 1.3),), ((0.1, 0.12, 0.2),), False, table.file if table else ""
    )
    assert (part.damping_from, part.damping_kind, is_plain(part)) == ("law_file", "loss factor", False)
    # The least loss factor of the table stands in the row; the table says the rest.
    assert part.loss_factor == (0.1, 0.1, 0.1)
    assert value(part, "loss_factor") is None
    assert table is not None
    at_corner = table_stiffness(table_physics(table, 20.0), 2 * math.pi * 20.0, 20.0)
    assert part.stiffness_dynamic[2] * at_corner == pytest.approx(200e3 * (1 + 0.12j), rel=1e-9)


def test_table_over_temperature_in_newtons_per_metre(read: Callable[..., Catalog]) -> None:
    part = read(BY_BOTH, drop=["loss_factor"], add={"law_file": "law.csv"}).parts[0]
    table = part.law_table
    assert table is not None and table.absolute
    assert (table.frequency, table.temperature) == ((5.0, 100.0), (-20.0, 20.0))
    # Over the row's 200 N/mm: 300/200, 420/200, 180/200, 260/200.
    np.testing.assert_allclose(table.stiffness_ratio, [[1.5, 2.1], [0.9, 1.3]], rtol=1e-12)
    np.testing.assert_allclose(table.loss_factor, [[0.2, 0.3], [0.1, 0.14]])
    cold = table_stiffness(table_physics(table, 20.0), 2 * math.pi * 100.0, -20.0)
    assert 200e3 * cold == pytest.approx(420e3 * (1 + 0.3j), rel=1e-9)


def test_table_over_amplitude_and_its_range(read: Callable[..., Catalog]) -> None:
    part = read(BY_AMPLITUDE, drop=["loss_factor"], add={"amplitude_file": "law.csv"}).parts[0]
    table = part.amplitude_table
    assert isinstance(table, AmplitudeTable)
    assert table.amplitude == pytest.approx((5e-5, 5e-4, 2e-3))
    assert (table.stiffness_ratio, table.loss_factor) == ((1.4, 1.0, 0.8), (0.08, 0.15, 0.12))
    assert (part.loss_factor[2], part.damping_from, is_plain(part)) == (0.08, "amplitude_file", False)
    assert amplitude_caution(part, 1e-3) is None
    assert "below 50 µm" in (amplitude_caution(part, 1e-5) or "")


def test_amplitude_range_of_a_plain_row(read: Callable[..., Catalog]) -> None:
    part = read(add={"amplitude_min [mm]": "0.1", "amplitude_max [mm]": "1.5"}).parts[0]
    assert is_plain(part)
    assert amplitude_caution(part, 1e-3) is None
    assert amplitude_caution(part, 1.6e-3) == (
        "rowan-a: a dynamic deflection of 1.6 mm peak is above 1.5 mm, the greatest for which its figures hold"
    )
    assert "below 0.1 mm" in (amplitude_caution(part, 5e-5) or "")
    assert amplitude_caution(read().parts[0], 1.0) is None


@pytest.mark.parametrize(
    ("column", "figure", "kind", "eta", "viscous"),
    [
        # 100 kg on 200 N/mm: 2 sqrt(k m) = 8944.272 N s/m; laterally on 50 N/mm half of that.
        ("damping_ratio", "0.05", "viscous", 0.0, 447.2136),
        ("damping_ratio", "0.05", "loss factor", 0.1, 0.0),
        ("loss_factor", "0.1", "loss factor", 0.1, 0.0),
        ("amplification", "8", "loss factor", 0.125, 0.0),
        # Transmissibility peak 3 of a viscous mount: u = sqrt(1 - 1/9) = 0.942809, z = sqrt((1 - u)/2)/u =
        # 0.179361; Inman, Engineering Vibration, 2.4, inverted by hand.
        ("amplification", "3", "viscous", 0.0, 1604.25),
    ],
)
def test_kind_of_damping(
    column: str, figure: str, kind: str, eta: float, viscous: float, read: Callable[..., Catalog]
) -> None:
    part = read(
        rename={"loss_factor": column}, cells={(2, "loss_factor"): figure}, add={"damping_kind": kind}
    ).parts[0]
    assert part.loss_factor[2] == pytest.approx(eta, rel=1e-12)
    assert part.viscous[2] == pytest.approx(viscous, rel=1e-5)
    assert part.viscous[0] == pytest.approx(viscous / 2, rel=1e-5)
    assert (part.damping_kind, part.damping_unknown, is_plain(part)) == (kind, None, True)


@pytest.mark.parametrize(
    ("column", "figure", "used", "eta", "viscous"),
    [
        ("damping_ratio", "0.05", "viscous", 0.1, 447.2136),
        ("loss_factor", "0.1", "loss factor", 0.1, 447.2136),
        ("amplification", "3", "loss factor", 1 / 3, 1604.25),
    ],
)
def test_unknown_kind_keeps_both_readings(
    column: str, figure: str, used: str, eta: float, viscous: float, read: Callable[..., Catalog]
) -> None:
    more = {"damping_kind": "unknown"}
    part = read(rename={"loss_factor": column}, cells={(2, "loss_factor"): figure}, add=more).parts[0]
    both = part.damping_unknown
    assert isinstance(both, UnknownDamping)
    assert both.loss_factor == pytest.approx((eta,) * 3, rel=1e-9)
    assert both.viscous == pytest.approx((viscous / 2, viscous / 2, viscous), rel=1e-5)
    assert (part.damping_kind, is_plain(part)) == ("unknown", False)
    assert (part.loss_factor[2] > 0, part.viscous[2] > 0) == (used == "loss factor", used == "viscous")


def test_stated_kind_is_not_assumed(read: Callable[..., Catalog]) -> None:
    more = {"damping_kind": "loss factor"}
    low = {"rename": {"loss_factor": "amplification"}, "cells": {(2, "loss_factor"): "4"}}
    assert "loss_factor" in {item.what for item in read(**low).assumed}
    assert "loss_factor" not in {item.what for item in read(**low, add=more).assumed}


def test_laws_without_lateral_stiffness(read: Callable[..., Catalog]) -> None:
    part = read(drop=[XS, XD], add={"damping_kind": "unknown"}).parts[0]
    assert part.damping_unknown is not None
    assert part.damping_unknown.loss_factor == (None, None, 0.1)
    assert part.damping_unknown.viscous[:2] == (None, None)


def test_mounts_with_laws_travel_to_a_worker(read: Callable[..., Catalog]) -> None:
    catalog = read(
        RISING, drop=[ZS, "deflection_max [mm]"], cells={(2, ZD): "400"}, add={"curve_file": "law.csv"}
    )
    assert pickle.loads(pickle.dumps(catalog)) == catalog
    assert hash(catalog.parts[0]) == hash(pickle.loads(pickle.dumps(catalog.parts[0])))


def test_one_file_serves_many_rows(read: Callable[..., Catalog]) -> None:
    catalog = read(BY_FREQUENCY, rows=3, drop=["loss_factor"], add={"law_file": "law.csv"})
    assert len({part.law_table for part in catalog.parts}) == 1
    assert len(catalog.further_files) == 1


def test_curve_as_physics_passes_through_its_points() -> None:
    curve = LoadCurve((0.0, 0.002, 0.004), (0.0, 200.0, 500.0), "law.csv")
    smooth = curve_physics(curve)
    np.testing.assert_allclose(smooth.load, curve.load)
    assert deflection_under(curve, 200.0) == pytest.approx(0.002, rel=1e-9)
