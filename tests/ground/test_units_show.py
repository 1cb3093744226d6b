"""Numbers as people read them, and that reading them again loses nothing but the digits not shown."""

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.ground.units import KINDS, UnitError, convert, parse, parse_column, show

SHOWN = [
    (0.012, "length", "12 mm"),
    (1.8, "length", "1.8 m"),
    (-0.0035, "length", "-3.5 mm"),
    (2.5e-5, "length", "25 \u00b5m"),
    (640.0, "mass", "640 kg"),
    (0.35, "mass", "350 g"),
    (12345.678, "mass", "12346 kg"),
    (4200.0, "stiffness", "4.2 N/mm"),
    (1.234567e6, "stiffness", "1235 N/mm"),
    (50.0, "stiffness", "50 N/m"),
    (24.0 + 2.0 / 3.0, "frequency", "24.67 Hz"),
    (0.0045, "velocity", "4.5 mm/s"),
    (2.941995, "acceleration", "2.942 m/s\u00b2"),
    (1569.0, "force", "1569 N"),
    (35000.0, "force", "35 kN"),
    (0.0015, "angle", "1.5 mrad"),
    (math.pi / 4.0, "angle", "45 deg"),
    (6.3e-6, "unbalance", "6.3 g mm"),
    (0.15, "unbalance", "0.15 kg m"),
    (0.0063, "balance_grade", "G 6.3"),
    (3.8468153689, "acceleration_psd", "3.847 (m/s\u00b2)\u00b2/Hz"),
    (0.1, "ratio", "0.1"),
    (1250.0, "cost", "1250"),
    (1234567.0, "cost", "1234567"),
    (-20.0, "temperature", "-20 degC"),
    (0.011, "time", "11 ms"),
    (4e6, "pressure", "4 MPa"),
    (85.0, "inertia", "85 kg m\u00b2"),
    (0.0, "length", "0 m"),
    (-0.0, "acceleration", "0 m/s\u00b2"),
    (0.0, "ratio", "0"),
    (math.inf, "ratio", "inf"),
    (-6.0, "slope", "-6 dB/octave"),
]


@pytest.mark.parametrize(("value", "kind", "text"), SHOWN)
def test_shown_in_the_unit_an_engineer_would_choose(value: float, kind: str, text: str) -> None:
    assert show(value, kind) == text


def test_digits() -> None:
    assert show(1.0 / 3.0, "ratio", digits=2) == "0.33"
    assert show(4321.9, "stiffness", digits=6) == "4.3219 N/mm"
    assert show(1e-9, "ratio") == "1e-9"
    assert show(2.34567e15, "cost") == "2.346e15"


@pytest.mark.parametrize("kind", sorted(KINDS))
@settings(deadline=None, max_examples=40)
@given(magnitude=st.floats(-4.0, 8.0), negative=st.booleans())
def test_what_is_shown_can_be_read_again(kind: str, magnitude: float, negative: bool) -> None:
    """Property: four significant digits keep a value within half of the fourth digit, 5e-4 at worst."""
    value = 10.0**magnitude
    if negative and kind not in ("temperature", "balance_grade"):
        value = -value
    assert parse(show(value, kind), kind) == pytest.approx(value, rel=5.1e-4)


@settings(deadline=None, max_examples=200)
@given(kind=st.sampled_from(sorted(KINDS)), magnitude=st.floats(-5.0, 5.0))
def test_ordinary_magnitudes_have_no_exponent(kind: str, magnitude: float) -> None:
    number = show(10.0**magnitude, kind).split()[0]
    if kind not in ("displacement_psd", "velocity_psd"):
        assert "e" not in number


LINEAR = [
    ("stiffness", "lbf/in"),
    ("frequency", "rpm"),
    ("frequency", "rad/s"),
    ("acceleration", "g"),
    ("mass", "g"),
    ("temperature", "degF"),
    ("angle", "deg"),
    ("ratio", "%"),
    ("acceleration_psd", "g^2/Hz"),
]


@pytest.mark.parametrize(("kind", "unit"), LINEAR)
@settings(deadline=None, max_examples=40)
@given(value=st.floats(0.001, 1e6))
def test_parse_column_and_convert_agree(kind: str, unit: str, value: float) -> None:
    """Property: the three ways through a unit are one and the same map."""
    in_si = parse(f"{value!r} {unit}", kind)
    scale, offset = parse_column(unit, kind)
    assert scale * value + offset == pytest.approx(in_si, rel=1e-12, abs=1e-12)
    assert convert(in_si, kind, unit) == pytest.approx(value, rel=1e-9)


@settings(deadline=None, max_examples=300)
@given(text=st.text(max_size=30), kind=st.sampled_from(sorted(KINDS)))
def test_any_text_gives_a_finite_number_or_a_unit_error(text: str, kind: str) -> None:
    try:
        value = parse(text, kind)
    except UnitError as error:
        assert error.found == text
    else:
        assert math.isfinite(value)


@settings(deadline=None, max_examples=300)
@given(
    unit=st.text(alphabet="NmskgHz/ ^2()*.-%1rad\u00b2\u00b7", max_size=14),
    kind=st.sampled_from(sorted(KINDS)),
)
def test_any_mixture_of_unit_letters_does_too(unit: str, kind: str) -> None:
    try:
        value = parse(f"3 {unit}", kind)
    except UnitError:
        return
    assert math.isfinite(value)
