"""What the unit reader must not accept, and the words with which it says so."""

import pickle

import pytest

from detune.ground.units import KINDS, UnitError, parse, parse_column

REFUSALS = [
    # A comma is a decimal sign to one reader and a thousands sign to another.
    ("12,5 N/mm", "stiffness", 'write "12.5 N/mm" with a decimal point'),
    ("1,480 rpm", "frequency", 'write "1480 rpm"'),
    ("0,1", "ratio", 'write "0.1"'),
    ("1,250", "cost", 'write "1250"'),
    # A number without its unit.
    ("50", "frequency", "a number without a unit"),
    ("640", "mass", 'a mass with its unit, for example "640 kg"'),
    ("6.3", "balance_grade", 'a balance grade, for example "G 6.3"'),
    ("293", "temperature", "a number without a unit"),
    ("", "stiffness", 'a stiffness with its unit, for example "4.2 N/mm"'),
    ("   ", "mass", 'for example "640 kg"'),
    ("", "ratio", "a ratio as a bare number or in per cent"),
    # No number, or no finite one.
    ("kg", "mass", "the number must come first"),
    ("about 5 kg", "mass", "the number must come first"),
    ("<5 kg", "mass", "the number must come first"),
    ("nan kg", "mass", "finite"),
    ("NaN", "ratio", "finite"),
    ("inf N", "force", "finite"),
    ("-Infinity N", "force", "finite"),
    ("1e999 N", "force", "finite"),
    ("1e308 GPa", "pressure", "finite"),
    ("1e-999 N", "force", "too small"),
    ("1e-320 mg mm", "unbalance", "too small"),
    ("1" * 5000 + " N", "force", "too many digits"),
    # More than one number.
    ("1 200 N", "force", "two numbers"),
    ("10 mm 20 mm", "length", "one number"),
    ("2*3 N", "force", "arithmetic"),
    ("2 / 3 N", "force", "arithmetic"),
    ("2^3 N", "force", "arithmetic"),
    ("10-20 mm", "length", "a range"),
    ("10 \u2013 20 mm", "length", "a range"),
    ("10 +- 2 mm", "length", "a range"),
    ("10 \u00b1 2 mm", "length", "a range"),
    ("10..20 mm", "length", "two numbers"),
    ("1.2.3 mm", "length", "two numbers"),
    ("1_000 mm", "length", "no unit"),
    ("1'000 mm", "length", "no place in a unit"),
    ("0x10 mm", "length", "no unit"),
    ("\uff15 mm", "length", "the number must come first"),
    # Mass for force and force for mass.
    ("50 kg", "force", 'kg is a mass; write "kgf" or use N'),
    ("3 kg/mm", "stiffness", 'kg is a mass; write "kgf/mm" or use N'),
    ("28 lb/in", "stiffness", 'lb is a mass; write "lbf/in" or use N'),
    ("12 kg m", "moment", 'kg is a mass; write "kgf m" or use N'),
    ("640 kgf", "mass", 'kgf is a force; write "kg"'),
    # The letter g where it means neither, and where it means the other thing.
    ("0.3 g", "force", '"g" is a mass or an acceleration'),
    ("0.3 g", "length", '"g" is a mass or an acceleration'),
    ("0.04 g^2/Hz", "force_psd", '"g^2/Hz" is an acceleration spectral density'),
    ("6.3 g mm", "length", '"g mm" is an unbalance'),
    ("6.3 g mm", "acceleration", "which is no acceleration"),
    ("2 g s", "velocity", "gram or gravity"),
    # A wrong kind is named.
    ("3 N", "stiffness", '"N" is a force'),
    ("3 m/s^2", "mass", '"m/s^2" is an acceleration'),
    ("3 N/mm", "damping", '"N/mm" is a stiffness'),
    ("24 Hz", "time", '"Hz" is a frequency'),
    ("5 dB", "ratio", '"dB" is a level in decibels'),
    ("5 mm", "ratio", '"mm" is a length'),
    ("5 N s", "force", "kilogram meter second^-1"),
    ("10 %", "length", '"%" is a ratio'),
    # One over time does not say of what: cycles or radians.
    ("980 1/min", "frequency", 'does not say of what; write "Hz", "rpm" or "rad/s"'),
    ("980/min", "frequency", "does not say of what"),
    ("980 min^-1", "frequency", "does not say of what"),
    ("980 min-1", "frequency", "does not say of what"),
    ("155 1/s", "frequency", "does not say of what"),
    ("900 N m", "rotational_stiffness", 'like "N m/rad"'),
    ("3 m^2/s^3", "acceleration_psd", "per hertz"),
    ("24.5 rev", "frequency", '"rev" is an angle'),
    # Ways of stating an amplitude do not belong to the unit.
    ("4.5 mm/s rms", "velocity", '"rms" is no part of a unit'),
    ("0.3 g peak", "acceleration", '"peak" is no part of a unit'),
    ("2.5 grms", "acceleration", '"rms" is no part of a unit'),
    ("20 um p-p", "length", '"p-p" is no part of a unit'),
    # Units that do not exist, and texts that are no unit.
    ("4.2 N/mmm", "stiffness", 'there is no unit "mmm"'),
    ("24 hz", "frequency", 'there is no unit "hz"'),
    ("5 nkg", "mass", 'there is no unit "nkg"'),
    ("5 min", "length", '"min" is a time'),
    ("5 N/", "stiffness", "breaks off"),
    ("5 N//m", "stiffness", '"/" stands where a unit should'),
    ("5 N/m s", "damping", "two ways"),
    ("5 (m/s", "velocity", "closing parenthesis"),
    ("5 m)", "length", '")" stands where a unit should'),
    ("5 m^2.5", "area", "whole number"),
    ("5 m^x", "area", "whole number"),
    ("5 m^99", "area", "from -9 to 9"),
    ("5 m^0", "ratio", "from -9 to 9"),
    ("5 " + "(" * 200 + "m" + ")" * 200, "length", "longer than any unit"),
    ("5 m; 3", "length", "no place in a unit"),
    ("5 % N", "force", "per cent stands alone"),
    ("5 % %", "ratio", "per cent stands alone"),
    ("2 %", "angle", "does not fit"),
    ("2 N/N", "angle", "does not fit"),
    ("12 EUR", "cost", "a cost has no unit"),
    ("4 kg", "count", "a count has no unit"),
    # Temperatures.
    ("3 N/degC", "stiffness", "degC and degF stand alone"),
    ("3 degC^2", "temperature", "degC and degF stand alone"),
    ("-300 degC", "temperature", "nothing is colder"),
    ("-1 K", "temperature", "nothing is colder"),
    ("20 C", "temperature", 'there is no unit "C"'),
    ("G 6,3", "balance_grade", 'write "G 6.3"'),
    ("G -6.3", "balance_grade", "the number must come first"),
]


@pytest.mark.parametrize(("text", "kind", "words"), REFUSALS)
def test_refused_with_fitting_words(text: str, kind: str, words: str) -> None:
    with pytest.raises(UnitError) as caught:
        parse(text, kind)
    assert words in caught.value.expected
    assert caught.value.found == text


NEAREST = [
    ("24 hz", "frequency", "24 Hz"),
    ("1480 Rpm", "frequency", "1480 rpm"),
    ("4.2 N/mmm", "stiffness", "4.2 N/mm"),
    ("4.2 newtons/mm", "stiffness", "4.2 newton/mm"),
    ("640 kgs", "mass", "640 kg"),
    ("4 mpa", "pressure", "4 MPa"),
    ("20 C", "temperature", "20 \u00b0C"),
    ("12 foo", "frequency", None),
]


@pytest.mark.parametrize(("text", "kind", "nearest"), NEAREST)
def test_the_nearest_unit_fits_the_kind(text: str, kind: str, nearest: str | None) -> None:
    with pytest.raises(UnitError) as caught:
        parse(text, kind)
    assert caught.value.nearest == nearest
    if nearest is not None:
        assert parse(nearest, kind) != 0.0


@pytest.mark.parametrize(
    ("unit", "kind", "words"),
    [
        ("", "stiffness", 'a unit of stiffness, for example "N/mm"'),
        ("-", "mass", 'a unit of mass, for example "kg"'),
        ("kg/mm", "stiffness", 'write "kgf/mm"'),
        ("1/min", "frequency", "does not say of what"),
        ("N,mm", "moment", "no place in a unit"),
        ("dB", "ratio", "is a level"),
        ("EUR", "cost", "a cost is a bare number"),
        ("2 N", "force", "one number and then its unit"),
        ("", "balance_grade", 'for example "mm/s"'),
    ],
)
def test_refused_columns(unit: str, kind: str, words: str) -> None:
    with pytest.raises(UnitError) as caught:
        parse_column(unit, kind)
    assert words in caught.value.expected


def test_nearest_unit_of_a_column() -> None:
    with pytest.raises(UnitError) as caught:
        parse_column("n/mm", "stiffness")
    assert caught.value.nearest == "N/mm"


def test_the_message_is_one_readable_line() -> None:
    with pytest.raises(UnitError) as caught:
        parse("24 hz", "frequency")
    assert str(caught.value) == (
        'found "24 hz", expected a frequency with its unit, for example "24.5 Hz"; '
        'there is no unit "hz" here; did you mean "24 Hz"?'
    )


def test_unit_error_is_a_value_error_and_can_be_pickled() -> None:
    error = UnitError("50", "a frequency", "50 Hz")
    again = pickle.loads(pickle.dumps(error))
    assert isinstance(error, ValueError)
    assert (again.found, again.expected, again.nearest) == ("50", "a frequency", "50 Hz")


def test_every_kind_refuses_empty_text_and_an_unknown_unit() -> None:
    for kind in KINDS:
        for text in ("", "3 zzzz"):
            with pytest.raises(UnitError):
                parse(text, kind)


def test_every_kind_but_the_bare_ones_refuses_a_bare_number() -> None:
    for kind in KINDS.values():
        if kind.bare_number:
            assert parse("3", kind.name) == 3.0
        else:
            with pytest.raises(UnitError):
                parse("3", kind.name)
