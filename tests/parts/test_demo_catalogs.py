"""The two demo lists are plausible. Bands: ranges of the trade, from memory (CHECKS.md M5); NBS Handbook 128
(1979) is the public source. They bound the data, they are no exact values."""

from __future__ import annotations

import re
from collections import Counter
from pathlib import Path

import numpy as np
import pytest

from detune.parts.catalog import Catalog, read_catalog
from detune.parts.kinds.mount import mount_arrays

FOLDER = Path(__file__).parents[2] / "catalogs"
RUBBER = read_catalog(FOLDER / "rubber.csv", "rubber")
SPRINGS = read_catalog(FOLDER / "springs.csv", "springs")
DIGIT_BOUND = 0.01
"""Three significant digits of two figures: their ratio is good to 1 %."""


def ratios(catalog: Catalog) -> tuple[np.ndarray, np.ndarray]:
    arrays = mount_arrays(catalog.parts)
    dynamic = arrays.stiffness_dynamic[:, 2] / arrays.stiffness_static[:, 2]
    lateral = arrays.stiffness_static[:, 0] / arrays.stiffness_static[:, 2]
    return dynamic, lateral


def sags(catalog: Catalog) -> np.ndarray:
    return np.array([p.load_rated / p.stiffness_static[2] for p in catalog.parts if p.load_rated is not None])


def within(values: np.ndarray, low: float, high: float) -> bool:
    return bool(np.all((values >= low * (1 - DIGIT_BOUND)) & (values <= high * (1 + DIGIT_BOUND))))


def test_one_hundred_and_eighty_parts_with_numbers_of_their_own() -> None:
    numbers = [part.part for part in (*RUBBER.parts, *SPRINGS.parts)]
    assert (len(RUBBER.parts), len(SPRINGS.parts)) == (110, 70)
    assert len(set(numbers)) == 180
    assert all(re.fullmatch(r"[a-z]+-[a-z]{1,2}", number) for number in numbers)


def test_rubber_is_rubber() -> None:
    dynamic, lateral = ratios(RUBBER)
    # M5: natural rubber 1.1-1.2 soft to 1.4-1.6 at 60 IRHD.
    assert within(dynamic, 1.1, 1.6)
    assert within(lateral, 0.15, 1.1)
    assert within(sags(RUBBER), 1.5e-3, 9e-3)
    # M5: natural rubber .05-.15, neoprene .1-.25. Damping ratio: half; amplification: 1 over.
    stated = {"loss_factor": 1.0, "damping_ratio": 2.0}
    loss = [
        part.damping_stated * stated[part.damping_from]
        for part in RUBBER.parts
        if part.damping_from in stated
    ]
    loss += [1 / part.damping_stated for part in RUBBER.parts if part.damping_from == "amplification"]
    assert min(loss) >= 0.05 and max(loss) <= 0.22
    assert {part.family for part in RUBBER.parts} == {"rubber"}


def test_springs_are_springs() -> None:
    dynamic, lateral = ratios(SPRINGS)
    assert np.all(dynamic == 1.0)  # M5: steel 1.0
    assert within(lateral, 0.4, 1.1)
    assert within(sags(SPRINGS), 8e-3, 30e-3)
    # M5: steel coil .005-.02; the others have a damper beside the coil.
    plain = [part for part in SPRINGS.parts if part.damping_from == "loss_factor"]
    damped = [part for part in SPRINGS.parts if part.damping_from == "viscous"]
    assert len(plain) + len(damped) == 70
    assert all(0.005 <= part.loss_factor[2] <= 0.02 for part in plain)
    for part in damped:
        assert part.load_rated is not None
        critical = 2 * np.sqrt(part.stiffness_dynamic[2] * part.load_rated / 9.80665)
        assert 0.02 < part.viscous[2] / critical < 0.2
        assert part.viscous[0] is not None and 0 < part.viscous[0] <= part.viscous[2]


@pytest.mark.parametrize(
    ("catalog", "low", "high", "cheap", "dear"), [(RUBBER, 60, 6000, 8, 140), (SPRINGS, 100, 8000, 20, 260)]
)
def test_loads_and_costs(catalog: Catalog, low: float, high: float, cheap: float, dear: float) -> None:
    rated = np.array([part.load_rated for part in catalog.parts if part.load_rated is not None])
    cost = np.array([part.cost for part in catalog.parts])
    assert (rated.min(), rated.max()) == (low, high)
    assert cheap <= cost.min() and cost.max() <= dear
    # Spread geometrically: no decade quarter of the range is empty.
    counts = np.histogram(np.log(rated), bins=8, range=(np.log(low), np.log(high)))[0]
    assert counts.min() >= 4
    # A greater load costs more, with scatter.
    loads = np.array([part.load_max for part in catalog.parts])
    assert 0.5 < np.corrcoef(np.log(loads), np.log(cost))[0, 1] < 0.99


def test_every_way_of_stating_damping_occurs() -> None:
    ways = Counter(part.damping_from for part in (*RUBBER.parts, *SPRINGS.parts))
    assert ways["loss_factor"] > 100
    assert ways["damping_ratio"] == 12
    assert ways["amplification"] >= 3
    assert ways["viscous"] >= 10
    assert any(part.pulls for part in RUBBER.parts)
    assert {item.what for item in RUBBER.assumed} == {"tolerance", "stiffness_y", "loss_factor"}


@pytest.mark.parametrize("key", ["suffix", "tree"])
@pytest.mark.parametrize("figure", ["stiffness", "load", "cost"])
@pytest.mark.parametrize("catalog", [RUBBER, SPRINGS], ids=["rubber", "springs"])
def test_names_encode_nothing(catalog: Catalog, key: str, figure: str) -> None:
    """Rank correlation of the name with a figure stays within three standard errors, 3 / sqrt(n - 1)."""
    names = [part.part.partition("-")[2 if key == "suffix" else 0] for part in catalog.parts]
    values = {
        "stiffness": [part.stiffness_static[2] for part in catalog.parts],
        "load": [part.load_max for part in catalog.parts],
        "cost": [part.cost for part in catalog.parts],
    }[figure]
    order = np.unique(names, return_inverse=True)[1]
    ranks = np.argsort(np.argsort(values))
    assert abs(np.corrcoef(order, ranks)[0, 1]) < 3 / np.sqrt(len(names) - 1)


@pytest.mark.parametrize("name", ["rubber.csv", "springs.csv"])
def test_file_is_a_plain_list(name: str) -> None:
    """One header line, no comments, and no figure of more than three significant digits."""
    lines = (FOLDER / name).read_text(encoding="ascii").splitlines()
    assert lines[0].startswith("part,family,stiffness_z_static [N/mm]")
    assert all(line and "#" not in line for line in lines)
    cells = [cell for line in lines[1:] for cell in line.split(",")[2:] if re.fullmatch(r"[0-9.-]+", cell)]
    assert all(len(cell.lstrip("-0.").replace(".", "").rstrip("0")) <= 3 for cell in cells)
