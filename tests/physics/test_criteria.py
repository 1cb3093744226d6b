"""Vibration criteria as data. Ids are those of CHECKS, section 7; rubber blocks are M4 and M5 of section 8."""

import numpy as np
import pytest

from detune.physics.criteria import MACHINE_ZONES, VELOCITY_LINES, iso_2631_base_curve, velocity_line
from detune.physics.pads import (
    DYNAMIC_TO_STATIC,
    LOSS_FACTOR,
    compression_modulus,
    disc_shape_factor,
    pad_stiffness,
    rectangle_shape_factor,
    shear_modulus,
)
from detune.physics.tables import OutsideTable


@pytest.mark.parametrize(
    ("name", "limits"),
    [
        # C2: ISO 10816-3 / 20816-3 and 10816-1 annex B, mm/s rms; part read, part from memory, as each row says.
        ("group 2, rigid", (1.4, 2.8, 4.5)),
        ("group 2, flexible", (2.3, 4.5, 7.1)),
        ("group 1, rigid", (2.3, 4.5, 7.1)),
        ("group 1, flexible", (3.5, 7.1, 11.0)),
        ("class I", (0.71, 1.8, 4.5)),
        ("class II", (1.12, 2.8, 7.1)),
        ("class III", (1.8, 4.5, 11.2)),
        ("class IV", (2.8, 7.1, 18.0)),
    ],
)
def test_c2_zone_boundaries(name: str, limits: tuple[float, float, float]) -> None:
    row = MACHINE_ZONES[name]
    assert (row.a_to_b, row.b_to_c, row.c_to_d) == pytest.approx(tuple(1e-3 * x for x in limits), rel=1e-12)
    assert "read" in row.source or "memory" in row.source


def test_c4_velocity_lines_from_8_to_80_hertz() -> None:
    # C4, ASHRAE TC 2.6 table down to VC-D (read), IEST-RP-CC012: um/s; F and G by halving.
    wanted = {
        "workshop": 812.8,
        "office": 406.4,
        "residential": 203.2,
        "operating theatre": 101.6,
        "VC-A": 50.8,
        "VC-B": 25.4,
        "VC-C": 12.7,
        "VC-D": 6.35,
        "VC-E": 3.175,
        "VC-F": 1.5875,
        "VC-G": 0.79375,
    }
    assert set(wanted) == set(VELOCITY_LINES)
    for name, limit in wanted.items():
        assert velocity_line(name, [8.0, 7.943, 31.5, 80.0]) * 1e6 == pytest.approx([limit] * 4, rel=1e-12)
    # The rounded metric figures, 800 ... 3.12.
    assert velocity_line("workshop", 8.0, "metric") * 1e6 == pytest.approx(800.0)
    assert velocity_line("VC-E", 8.0, "metric") * 1e6 == pytest.approx(3.12)


def test_c5_low_frequency_forms() -> None:
    # C5: VC-A is 260 ug flat from 4 to 8 Hz, 101.45 um/s at 4 Hz; 50.8 um/s at 8 Hz is 260.38 ug.
    assert velocity_line("VC-A", 4.0) * 1e6 == pytest.approx(101.45, abs=5e-3)
    assert velocity_line("VC-A", 8.0) * 2 * np.pi * 8.0 / 9.80665 * 1e6 == pytest.approx(260.38, abs=5e-3)
    assert velocity_line("VC-B", 4.0) == pytest.approx(0.5 * velocity_line("VC-A", 4.0))
    # ISO lines: velocity times 8/f from 4 Hz; VC-C and below stay flat.
    assert velocity_line("office", [4.0, 5.0, 6.3]) * 1e6 == pytest.approx([812.8, 650.24, 516.06], rel=1e-4)
    assert velocity_line("VC-C", [1.0, 4.0]) * 1e6 == pytest.approx([12.7, 12.7])
    # ISO 2631-2 base curve: 5 mm/s2 at 8 Hz is 99.47 um/s.
    assert iso_2631_base_curve(8.0) * 1e6 == pytest.approx(99.47, abs=5e-3)
    assert iso_2631_base_curve([4.0, 63.0], 4.0) * 1e6 == pytest.approx([4 * 198.94, 4 * 99.47], rel=1e-4)


def test_trap_no_criterion_below_its_lowest_frequency() -> None:
    with pytest.raises(OutsideTable, match=r"VC-A: frequency 2 Hz"):
        velocity_line("VC-A", [2.0, 4.0])
    with pytest.raises(OutsideTable, match="100 Hz"):
        velocity_line("VC-E", 100.0)
    with pytest.raises(OutsideTable, match="base curve"):
        iso_2631_base_curve(1.0)
    with pytest.raises(KeyError):
        velocity_line("VC-Z", 8.0)


def test_m4_rubber_disc() -> None:
    # M4, Lindley, table constants from memory: D = 50, h = 25 mm, S = .5.
    shape = disc_shape_factor(50.0, 25.0)
    assert shape == pytest.approx(0.5)
    modulus = compression_modulus([40.0, 50.0, 60.0], shape)
    assert modulus == pytest.approx([2.1375e6, 3.0030e6, 5.7183e6], rel=1e-4)
    stiffness, shear = pad_stiffness([40.0, 50.0, 60.0], np.pi * 0.025**2, 0.025, shape)
    assert stiffness == pytest.approx([167.9e3, 235.9e3, 449.1e3], rel=1e-3)
    assert shear == pytest.approx(shear_modulus([40.0, 50.0, 60.0]) * np.pi * 0.025)
    # A square of the disc's width has the same shape factor; a long strip tends to b/(2 h).
    assert rectangle_shape_factor(50.0, 50.0, 25.0) == pytest.approx(0.5)
    assert rectangle_shape_factor(1e6, 50.0, 25.0) == pytest.approx(1.0, rel=1e-4)
    with pytest.raises(OutsideTable, match="hardness 85 IRHD"):
        compression_modulus(85.0, 0.5)


def test_m5_ranges_are_plausibility_only() -> None:
    # M5, ranges of the trade, from memory: never a limit, hence marked.
    assert (DYNAMIC_TO_STATIC["steel"].low, DYNAMIC_TO_STATIC["steel"].high) == (1.0, 1.0)
    assert (LOSS_FACTOR["natural rubber"].low, LOSS_FACTOR["natural rubber"].high) == (0.05, 0.15)
    for row in (*DYNAMIC_TO_STATIC.values(), *LOSS_FACTOR.values()):
        assert row.low <= row.high
        assert "from memory" in row.source
