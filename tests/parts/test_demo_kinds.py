"""The demo lists of platform and truck mounts, dampers, absorbers and ballast are plausible and invented.

Bands: ranges of the trade, from memory (CHECKS.md M5); they bound the data, they are no exact values.
"""

from __future__ import annotations

import csv
import math
import re
from collections import Counter
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.ground.errors import BriefError
from detune.parts.catalog import Catalog, read_catalog
from detune.parts.kinds.absorber import absorber_arrays
from detune.parts.kinds.damper import damper_arrays
from detune.parts.kinds.mount import Mount, is_plain, value
from detune.parts.laws import curve_physics, deflection_under, tangent_stiffness

FOLDER = Path(__file__).parents[2] / "catalogs"
KINDS = {
    "platform-mounts": "mount",
    "truck-mounts": "mount",
    "dampers": "damper",
    "absorbers": "absorber",
    "ballast": "ballast",
}
LISTS = {name: read_catalog(FOLDER / f"{name}.csv", name, kind) for name, kind in KINDS.items()}
PLATFORM, TRUCK = LISTS["platform-mounts"], LISTS["truck-mounts"]


def frequencies(mounts: tuple[Mount, ...]) -> list[float]:
    return [float(value(mount, "natural_frequency_rated") or 0.0) for mount in mounts]


def rated(mounts: tuple[Mount, ...]) -> list[float]:
    return [mount.load_rated for mount in mounts if mount.load_rated is not None]


def test_counts_and_part_numbers() -> None:
    assert {name: len(catalog.parts) for name, catalog in LISTS.items()} == {
        "platform-mounts": 40,
        "truck-mounts": 40,
        "dampers": 12,
        "absorbers": 16,
        "ballast": 8,
    }
    others = [read_catalog(FOLDER / f"{name}.csv", name) for name in ("rubber", "springs")]
    numbers = [part.part for catalog in (*LISTS.values(), *others) for part in catalog.parts]
    assert len(set(numbers)) == len(numbers) == 296
    assert all(re.fullmatch(r"[a-z]+-[a-z]{1,2}", number) for number in numbers)
    trees = [{part.part.partition("-")[0] for part in group.parts} for group in others]
    new = {part.part.partition("-")[0] for catalog in LISTS.values() for part in catalog.parts}
    assert not new & (trees[0] | trees[1])


def test_platform_mounts_are_soft() -> None:
    mounts = PLATFORM.mounts
    assert (min(rated(mounts)), max(rated(mounts))) == (150.0, 1200.0)
    assert all(1.5 <= frequency <= 9.0 for frequency in frequencies(mounts))
    air = [mount for mount in mounts if mount.follows_load]
    relaxed = [mount for mount in mounts if mount.relaxation is not None]
    assert (len(air), len(relaxed)) == (5, 7)
    assert sum(is_plain(mount) for mount in mounts) == 28
    # M5: air spring without orifice .02-.1.
    assert all(0.02 <= mount.loss_factor[2] <= 0.1 and mount.load_min > 0.0 for mount in air)
    assert all(2.0 <= mount.relaxation.stiffness_ratio <= 6.0 for mount in relaxed if mount.relaxation)
    assert sum(bool(mount.cost_breaks) for mount in mounts) >= 15


def test_platform_suppliers_print_deflection_and_frequency() -> None:
    header, *rows = (FOLDER / "platform-mounts.csv").read_text(encoding="ascii").splitlines()
    columns = header.split(",")
    for column in ("natural_frequency_rated [Hz]", "deflection_rated [mm]", "stiffness_z_dynamic [N/mm]"):
        filled = [row.split(",")[columns.index(column)] for row in rows]
        assert 3 <= sum(map(bool, filled)) < 40


def test_truck_mounts_are_for_racks() -> None:
    mounts = TRUCK.mounts
    assert (min(rated(mounts)), max(rated(mounts))) == (60.0, 500.0)
    assert all(6.5 <= frequency <= 20.0 for frequency in frequencies(mounts))
    assert all(mount.deflection_max is not None and mount.free_height is not None for mount in mounts)
    assert all(mount.deflection_max < mount.free_height for mount in mounts)  # type: ignore[operator]
    families = Counter(mount.family for mount in mounts)
    assert (families["high-damping rubber"], families["wire rope"]) == (12, 5)
    # M5: high-damping rubber .3-1, wire rope .2-.4.
    assert all(0.3 <= m.loss_factor[2] <= 1.0 for m in mounts if m.family == "high-damping rubber")
    assert all(0.2 <= m.loss_factor[2] <= 0.4 for m in mounts if m.family == "wire rope")
    assert sum(mount.damping_unknown is not None for mount in mounts) >= 1


def test_progressive_truck_mounts() -> None:
    progressive = [mount for mount in TRUCK.mounts if mount.load_curve is not None]
    assert len(progressive) == 10
    assert sorted(TRUCK.further_files) == sorted(str(path) for path in (FOLDER / "curves").glob("*.csv"))
    for mount in progressive:
        curve = mount.load_curve
        assert curve is not None and mount.load_rated is not None
        assert mount.stiffness_static[2] == pytest.approx(tangent_stiffness(curve, mount.load_rated))
        # M5: natural rubber 1.1-1.6.
        assert 1.1 <= mount.stiffness_dynamic[2] / mount.stiffness_static[2] <= 1.6
        loads = np.linspace(0.2, 1.0, 9) * mount.load_max
        stiffness = [tangent_stiffness(curve, load) for load in loads]
        assert stiffness[-1] > 1.2 * stiffness[0]
        assert mount.load_rated / deflection_under(curve, mount.load_rated) < mount.stiffness_static[2]
        assert mount.deflection_max == pytest.approx(curve.deflection[-1], rel=1e-9)
        assert (curve.deflection[0] < 0.0) == mount.pulls
        assert np.all(curve_physics(curve).slope > 0.0)


def test_dampers_absorbers_ballast() -> None:
    viscous = damper_arrays(LISTS["dampers"].parts).viscous  # type: ignore[arg-type]
    assert viscous.min() >= 30.0 and viscous.max() <= 5000.0
    arrays = absorber_arrays(LISTS["absorbers"].parts)  # type: ignore[arg-type]
    tuned = np.sqrt(arrays.stiffness / arrays.mass) / (2 * math.pi)
    assert tuned.min() >= 8.0 and tuned.max() <= 45.0
    ratio = arrays.viscous / (2 * np.sqrt(arrays.stiffness * arrays.mass))
    assert ratio.min() >= 0.02 and ratio.max() <= 0.2
    for piece in LISTS["ballast"].parts:
        size = [float(getattr(piece, name)) for name in ("length", "width", "height")]
        # Steel 7,850, cast iron 7,200, concrete 2,400 kg/m^3; three digits of each figure.
        density = float(piece.mass or 0.0) / math.prod(size)
        assert min(abs(density / known - 1.0) for known in (7850.0, 7200.0, 2400.0)) < 0.03


@pytest.mark.parametrize("key", ["suffix", "tree"])
@pytest.mark.parametrize("figure", ["stiffness", "load", "cost"])
@pytest.mark.parametrize("catalog", [PLATFORM, TRUCK], ids=["platform", "truck"])
def test_names_encode_nothing(catalog: Catalog, key: str, figure: str) -> None:
    """Rank correlation of the name with a figure stays within three standard errors, 3 / sqrt(n - 1)."""
    names = [part.part.partition("-")[2 if key == "suffix" else 0] for part in catalog.mounts]
    values = {
        "stiffness": [part.stiffness_static[2] for part in catalog.mounts],
        "load": [part.load_max for part in catalog.mounts],
        "cost": [part.cost for part in catalog.mounts],
    }[figure]
    order = np.unique(names, return_inverse=True)[1]
    ranks = np.argsort(np.argsort(values))
    assert abs(np.corrcoef(order, ranks)[0, 1]) < 3 / np.sqrt(len(names) - 1)


@pytest.mark.parametrize("path", sorted(FOLDER.rglob("*.csv")), ids=lambda path: path.name)
def test_file_is_a_plain_list(path: Path) -> None:
    """One header line, no comments, no figure of more than three significant digits."""
    lines = path.read_text(encoding="ascii").splitlines()
    assert all(line and "#" not in line for line in lines)
    cells = [cell for line in lines[1:] for cell in line.split(",") if re.fullmatch(r"-?[0-9.]+", cell)]
    assert all(len(cell.lstrip("-0.").replace(".", "").rstrip("0")) <= 3 for cell in cells)


@settings(deadline=None, max_examples=40)
@given(st.data())
def test_whatever_stands_in_a_cell_is_read_or_named(data: st.DataObject) -> None:
    """No other error than a BriefError that names a place, whatever a cell of any list is changed to."""
    name = data.draw(st.sampled_from(sorted(KINDS)))
    header, *rows = csv.reader((FOLDER / f"{name}.csv").read_text(encoding="ascii").splitlines())
    rows = rows[:8]
    odd = ["", "0", "-1", "1e300", "1e-300", "nan", "yes", "unknown", "12 %", "curves", "../rubber.csv"]
    for _ in range(data.draw(st.integers(1, 5))):
        row, place = data.draw(st.integers(0, 7)), data.draw(st.integers(0, len(header) - 1))
        rows[row][place] = data.draw(st.sampled_from(odd) | st.floats(width=16).map(repr))
    with TemporaryDirectory() as folder:
        for further in TRUCK.further_files:
            target = Path(folder) / "curves" / Path(further).name
            target.parent.mkdir(exist_ok=True)
            target.write_bytes(Path(further).read_bytes())
        with (Path(folder) / "list.csv").open("w", newline="") as stream:
            csv.writer(stream).writerows([header, *rows])
        try:
            read_catalog(Path(folder) / "list.csv", "list", KINDS[name])
        except BriefError as error:
            assert all(fault.where and fault.expected for fault in error.faults)
