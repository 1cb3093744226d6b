"""Numbers with units against values a reader can look up.

Sources: "SP 811" is NIST Special Publication 811 (2008), appendix B; "exact" is a definition or counting;
"ISO 21940-11" for balance grades and g mm. SP 811 prints seven digits, hence the relative tolerance.
"""

import math

import pytest

from detune.ground.units import KINDS, STANDARD_GRAVITY, convert, parse, parse_column

SEVEN_DIGITS = 5e-7

EXACT = [
    ("640 kg", "mass", 640.0),
    ("350 g", "mass", 0.35),
    ("1.2 t", "mass", 1200.0),
    ("28 lb", "mass", 12.70058636),  # 1 lb = 0.45359237 kg
    ("12 mm", "length", 0.012),
    ("3.5 in", "length", 0.0889),
    ("2 ft", "length", 0.6096),
    ("10 thou", "length", 0.000254),
    ("10 mil", "length", 0.000254),
    ("5 um", "length", 5e-6),
    ("5 \u00b5m", "length", 5e-6),  # micro sign
    ("5 \u03bcm", "length", 5e-6),  # Greek mu
    ("1200 mm^2", "area", 0.0012),
    ("150 cm^3", "volume", 0.00015),
    ("2 L", "volume", 0.002),
    ("11 ms", "time", 0.011),
    ("2 h", "time", 7200.0),
    ("1.5 min", "time", 90.0),
    ("1 kgf", "force", 9.80665),
    ("3.5 kN", "force", 3500.0),
    ("85 N m", "moment", 85.0),
    ("85 Nm", "moment", 85.0),
    ("4 MPa", "pressure", 4e6),
    ("6 bar", "pressure", 6e5),
    ("4.2 N/mm", "stiffness", 4200.0),
    ("180 kN/m", "stiffness", 180000.0),
    ("0.05 N/mm^3", "stiffness_per_area", 5e7),
    ("250 N s/m", "damping", 250.0),
    ("0.3 N s/mm", "damping", 300.0),
    ("12 N m s/rad", "rotational_damping", 12.0),
    ("4.5 mm/s", "velocity", 0.0045),
    ("1 ips", "velocity", 0.0254),
    ("36 km/h", "velocity", 10.0),
    ("2.5 m/s^2", "acceleration", 2.5),
    ("2 m/s^3", "jerk", 2.0),
    ("0.5 g/s", "jerk", 4.903325),  # half of standard gravity
    ("1.5 mm/m", "angle", 0.0015),
    ("24.5 Hz", "frequency", 24.5),
    ("1.2 kHz", "frequency", 1200.0),
    ("1500 rpm", "frequency", 25.0),
    ("1500 rev/min", "frequency", 25.0),
    ("1500 r/min", "frequency", 25.0),
    ("25 rev/s", "frequency", 25.0),
    ("1500 cpm", "frequency", 25.0),
    ("120 rpm/s", "frequency_rate", 2.0),
    ("85 kg m^2", "inertia", 85.0),
    ("-3.5 kg m^2", "inertia_product", -3.5),
    ("0.15 kg m", "unbalance", 0.15),
    ("0.2 (mm/s)^2/Hz", "velocity_psd", 2e-7),
    ("0.01 mm^2/Hz", "displacement_psd", 1e-8),
    ("12 N^2/Hz", "force_psd", 12.0),
    ("2 (m/s^2)^2/Hz", "acceleration_psd", 2.0),
    ("0.1", "ratio", 0.1),
    ("10 %", "ratio", 0.1),
    ("10%", "ratio", 0.1),
    ("4", "count", 4.0),
    ("1250", "cost", 1250.0),
    ("55", "hardness", 55.0),
    ("55 ShA", "hardness", 55.0),
    ("-3 dB", "level", -3.0),
    ("3 dB/oct", "slope", 3.0),
    ("7.85 g/cm^3", "density", 7850.0),
    ("360 kg/m^2", "area_density", 360.0),
    ("12.5 kg/m", "mass_per_length", 12.5),
    ("15 kW", "power", 15000.0),
    ("1.2 kJ", "energy", 1200.0),
    ("-20 degC", "temperature", -20.0),
    ("68 degF", "temperature", 20.0),
    ("-40 \u00b0F", "temperature", -40.0),
    ("293.15 K", "temperature", 20.0),
]


@pytest.mark.parametrize(("text", "kind", "expected"), EXACT)
def test_exact_values_come_out_correctly_rounded(text: str, kind: str, expected: float) -> None:
    """Definitions, exact: the nearest float to the true value, not one beside it."""
    assert parse(text, kind) == expected


SP_811 = [
    ("1 lbf", "force", 4.448222),
    ("1 ozf", "force", 0.2780139),
    ("1 kip", "force", 4448.222),
    ("1 lbf/in", "stiffness", 175.1268),
    ("1 lbf ft", "moment", 1.355818),
    ("1 psi", "pressure", 6894.757),
    ("1 ksi", "pressure", 6.894757e6),
    ("1 slug", "mass", 14.59390),
    ("1 oz", "mass", 0.02834952),
    ("1 lb ft^2", "inertia", 0.04214011),
    ("1 lb/ft", "mass_per_length", 1.488164),
    ("1 lb/ft^2", "area_density", 4.882428),
    ("1 lb/ft^3", "density", 16.01846),
    ("1 hp", "power", 745.6999),
    ("1 deg", "angle", 0.01745329),
    ("1 ft^3", "volume", 0.02831685),
    ("1 in^2", "area", 6.4516e-4),
    ("1 mph", "velocity", 0.44704),
]


@pytest.mark.parametrize(("text", "kind", "expected"), SP_811)
def test_values_of_sp_811(text: str, kind: str, expected: float) -> None:
    assert parse(text, kind) == pytest.approx(expected, rel=SEVEN_DIGITS)


def test_speed_and_frequency_keep_their_two_pi() -> None:
    """1480 / 60 = 24.6667 by hand; SP 811: 1 r/min = 0.1047198 rad/s."""
    assert parse("1480 rpm", "frequency") == pytest.approx(24.6667, abs=5e-5)
    assert parse("0.1047198 rad/s", "frequency") == pytest.approx(1.0 / 60.0, rel=SEVEN_DIGITS)
    assert parse("1 rad/s", "frequency") == pytest.approx(1.0 / (2.0 * math.pi), rel=1e-15)
    assert convert(25.0, "frequency", "rpm") == pytest.approx(1500.0, rel=1e-15)
    assert convert(1.0, "frequency", "rad/s") == pytest.approx(2.0 * math.pi, rel=1e-15)


def test_density_per_rad_per_second_is_larger_per_hertz() -> None:
    """A band of 1 Hz is 2 pi rad/s wide, so the density per Hz is 2 pi times the density per rad/s."""
    assert parse("1 N^2/(rad/s)", "force_psd") == pytest.approx(2.0 * math.pi, rel=1e-15)


def test_rotational_stiffness_per_degree() -> None:
    """One rad is 180/pi = 57.29578 degrees."""
    assert parse("1 N m/deg", "rotational_stiffness") == pytest.approx(57.29578, rel=SEVEN_DIGITS)
    assert parse("1 N m/mrad", "rotational_stiffness") == 1000.0


def test_letter_g_is_gravity_in_accelerations() -> None:
    """Standard gravity 9.80665 m/s^2, exact; its square is 96.1703842225."""
    assert STANDARD_GRAVITY == 9.80665
    assert parse("0.3 g", "acceleration") == 2.941995
    assert parse("1 gn", "acceleration") == 9.80665
    assert parse("50 mg", "acceleration") == 0.4903325
    assert parse("0.04 g^2/Hz", "acceleration_psd") == 3.8468153689
    assert parse("0.04 g\u00b2/Hz", "acceleration_psd") == 3.8468153689
    assert parse("0.04 G^2/Hz", "acceleration_psd") == 3.8468153689


def test_letter_g_is_gram_in_masses_and_unbalances() -> None:
    """ISO 21940-11 states residual unbalance in g mm; 1 g mm = 1e-6 kg m, exact."""
    assert parse("0.3 g", "mass") == 0.0003
    assert parse("6.3 g mm", "unbalance") == 6.3e-6
    assert parse("50 mg", "mass") == 5e-5
    assert parse("1 oz in", "unbalance") == pytest.approx(0.028349523125 * 0.0254, rel=1e-15)


@pytest.mark.parametrize("text", ["G6.3", "G 6.3", "6.3 mm/s", "0.0063 m/s"])
def test_balance_grade_is_eccentricity_times_speed(text: str) -> None:
    """ISO 21940-11: the grade number is e * Omega in mm/s."""
    assert parse(text, "balance_grade") == 0.0063


@pytest.mark.parametrize(
    "unit",
    [
        "N s/m",
        "N*s/m",
        "N\u00b7s/m",
        "N\u22c5s/m",
        "N.s/m",
        "N s m^-1",
        "N s m\u207b\u00b9",
        "Ns/m",
        "N/(m/s)",
    ],
)
def test_ways_to_write_a_product(unit: str) -> None:
    assert parse(f"2.5 {unit}", "damping") == 2.5


@pytest.mark.parametrize(
    "unit", ["kg m^2", "kg*m^2", "kg m\u00b2", "kg*m\u00b2", "kg m**2", "kg m2", "kg.m^2"]
)
def test_ways_to_write_a_power(unit: str) -> None:
    assert parse(f"85{unit}", "inertia") == 85.0


@pytest.mark.parametrize("text", ["(m/s^2)^2/Hz", "m^2/s^4/Hz", "(m/s\u00b2)\u00b2/Hz", "m^2 s^-4 Hz^-1"])
def test_ways_to_write_a_spectral_density(text: str) -> None:
    assert parse(f"3 {text}", "acceleration_psd") == 3.0


@pytest.mark.parametrize("number", ["5", "+5", "5.", "5.0", "5e0", ".5e1", "50e-1", "\u00a05\u00a0"])
def test_ways_to_write_a_number(number: str) -> None:
    assert parse(f"{number} m", "length") == 5.0


def test_minus_sign_of_typography() -> None:
    assert parse("\u22125 mm", "length") == -0.005


def test_every_example_of_every_kind_can_be_parsed() -> None:
    for kind in KINDS.values():
        for example in kind.examples:
            assert math.isfinite(parse(example, kind.name))


def test_columns() -> None:
    assert parse_column("N/mm", "stiffness") == (1000.0, 0.0)
    assert parse_column(" kg ", "mass") == (1.0, 0.0)
    assert parse_column("", "ratio") == (1.0, 0.0)
    assert parse_column("-", "ratio") == (1.0, 0.0)
    assert parse_column("%", "ratio") == (0.01, 0.0)
    assert parse_column("", "cost") == (1.0, 0.0)
    assert parse_column("G", "balance_grade") == (0.001, 0.0)


def test_temperature_column_has_an_offset() -> None:
    """Water boils at 212 degF = 100 degC and freezes at 32 degF = 0 degC; 273.15 K = 0 degC."""
    scale, offset = parse_column("degF", "temperature")
    assert scale * 212.0 + offset == pytest.approx(100.0, abs=1e-12)
    assert scale * 32.0 + offset == pytest.approx(0.0, abs=1e-12)
    assert parse_column("K", "temperature") == (1.0, -273.15)
    assert convert(100.0, "temperature", "degF") == pytest.approx(212.0, abs=1e-12)


def test_convert() -> None:
    assert convert(4200.0, "stiffness", "N/mm") == 4.2
    assert convert(2.941995, "acceleration", "g") == pytest.approx(0.3, rel=1e-15)
    assert convert(175.1268, "stiffness", "lbf/in") == pytest.approx(1.0, rel=SEVEN_DIGITS)
    assert convert(0.1, "ratio", "%") == pytest.approx(10.0, rel=1e-15)


def test_unknown_kind_is_a_mistake_in_code() -> None:
    with pytest.raises(KeyError, match="stiffness"):
        parse("4.2 N/mm", "stifness")
