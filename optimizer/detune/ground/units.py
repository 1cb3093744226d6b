"""Numbers with units: read what a user wrote into SI, and write SI for a reader.

Units are read by the kind of the field, so that ``g`` is gravity in an acceleration and gram in an unbalance,
and a force is never taken for a mass. Only units listed in `units.txt` exist.
"""

from __future__ import annotations

import re
from fractions import Fraction
from typing import Final, NoReturn

from detune.ground.kinds import KINDS, Kind
from detune.ground.unit_scale import (
    UnitError,
    kind_named,
    nearest_unit,
    refused_g,
    si_scale,
    with_article,
)
from detune.ground.unit_show import show
from detune.ground.unit_table import UnitTextError

__all__ = [
    "KINDS",
    "STANDARD_GRAVITY",
    "Kind",
    "UnitError",
    "convert",
    "is_bare_number",
    "parse",
    "parse_column",
    "show",
]

STANDARD_GRAVITY: Final = 9.80665
"""Standard gravity in m/s^2 (definition, exact)."""

_NUMBER = re.compile(r"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_GRADE = re.compile(r"G\s*([0-9]+(?:\.[0-9]*)?(?:[eE][+-]?[0-9]+)?)")
_STATISTIC = re.compile(r"(?:^|[^A-Za-z]|[gG])(rms|RMS|peak|pk|p-p|0-p)(?![A-Za-z])")
_LONGEST_NUMBER = 60
_ABSOLUTE_ZERO = -273.15


def _wanted(spec: Kind) -> str:
    if spec.name == "ratio":
        return 'a ratio as a bare number or in per cent, for example "0.1" or "10 %"'
    if spec.name == "balance_grade":
        return 'a balance grade, for example "G 6.3" or "2.5 mm/s"'
    if spec.bare_number:
        return f'{with_article(spec.meaning)} as a bare number, for example "{spec.examples[0]}"'
    return f'{with_article(spec.meaning)} with its unit, for example "{spec.examples[0]}"'


def _refuse(text: str, spec: Kind, reason: str, nearest: str | None = None) -> NoReturn:
    raise UnitError(text, f"{_wanted(spec)}; {reason}" if reason else _wanted(spec), nearest)


def _comma_reason(text: str) -> str:
    point = text.replace(",", ".")
    if re.match(r"\s*[+-]?[0-9]{1,3}(,[0-9]{3})+(?![0-9])", text):
        return f'a comma can be read in two ways; write "{text.replace(",", "")}", or a decimal point'
    return f'a comma is not understood; write "{point}" with a decimal point'


def _start_reason(text: str) -> str:
    if re.match(r"[+-]?(nan|inf)", text, re.IGNORECASE):
        return "it must be a finite number"
    return "the number must come first"


def _rest_reason(rest: str) -> str | None:
    """Say why what follows the number cannot be a unit, or return None when it may be one."""
    if re.match(r"1\s*/", rest):
        return None
    if re.match(r"[0-9.]", rest):
        return "two numbers stand here; write one, without spaces between its digits"
    if re.match(r"[-–—±+]|to\b|\.\.", rest):
        return "a range is not understood here; write one number"
    if statistic := _STATISTIC.search(rest):
        return f'"{statistic.group(1)}" is no part of a unit; it is stated beside the value'
    if re.match(r"[*^·⋅×]|/\s*[0-9(.]", rest):
        return "arithmetic is not understood; write one number and then its unit"
    return None


def is_bare_number(text: str) -> bool:
    """Return whether a text is one number and nothing else, no unit and no per cent sign."""
    return _NUMBER.fullmatch(text.strip().replace("\u2212", "-")) is not None


def parse(text: str, kind: str) -> float:
    """Read a number with its unit and return the SI value, correctly rounded.

    kind: a name in `KINDS`; a temperature is returned in degC. "mm/m" as an angle is the small angle in rad.
    Raises UnitError (a ValueError) that says what to write, and KeyError for an unknown kind.
    """
    spec = kind_named(kind)
    cleaned = text.strip().replace("\u2212", "-")
    if not cleaned:
        _refuse(text, spec, "")
    if "," in cleaned:
        _refuse(text, spec, _comma_reason(cleaned))
    if kind == "balance_grade" and (grade := _GRADE.fullmatch(cleaned)):
        return _si(text, grade.group(1), Fraction(1, 1000), Fraction(0), spec)
    match = _NUMBER.match(cleaned)
    if match is None:
        _refuse(text, spec, _start_reason(cleaned))
    unit = cleaned[match.end() :].strip()
    if not unit:
        if not spec.bare_number:
            _refuse(text, spec, "a number without a unit is not understood")
        return _si(text, match.group(), Fraction(1), Fraction(0), spec)
    if reason := _rest_reason(unit):
        _refuse(text, spec, reason)
    try:
        scale, offset = si_scale(unit, kind)
    except UnitTextError as error:
        reason, nearest = _explained(error, unit, kind)
        _refuse(text, spec, reason, nearest and f"{match.group()} {nearest}")
    return _si(text, match.group(), scale, offset, spec)


def _si(text: str, number: str, scale: Fraction, offset: Fraction, spec: Kind) -> float:
    if len(number) > _LONGEST_NUMBER:
        _refuse(text, spec, "the number has too many digits")
    rough = float(number)
    if rough in (float("inf"), float("-inf")):
        _refuse(text, spec, "it must be a finite number")
    is_zero = re.match(r"[^eE]*[1-9]", number) is None
    # An exponent of a billion would build a number of a billion digits: look at the float first.
    if rough == 0.0 and not is_zero:
        _refuse(text, spec, "the number is too small to be kept apart from zero")
    exact = offset if is_zero else Fraction(number) * scale + offset
    try:
        value = float(exact)
    except OverflowError:
        _refuse(text, spec, "it must be a finite number")
    if value == 0.0 and exact != 0:
        _refuse(text, spec, "the number is too small to be kept apart from zero")
    if spec.name == "temperature" and value < _ABSOLUTE_ZERO:
        _refuse(text, spec, "nothing is colder than -273.15 degC")
    return value


def _explained(error: UnitTextError, unit: str, kind: str) -> tuple[str, str | None]:
    if error.unknown is None:
        return error.reason, None
    if error.unknown in ("g", "mg", "ug", "μg"):
        try:
            nature = refused_g(unit.replace("µ", "μ"), kind)
        except UnitTextError:
            nature = None
        return nature or error.reason, None
    return error.reason, nearest_unit(unit.replace("µ", "μ"), error.unknown, kind)


def parse_column(unit: str, kind: str) -> tuple[float, float]:
    """Return (scale, offset) with SI = scale * number + offset, for a column whose header states its unit.

    An empty unit, "-" or "1" is understood for the kinds that allow a bare number, "G" for a balance grade.
    Raises UnitError, and KeyError for an unknown kind.
    """
    spec = kind_named(kind)
    cleaned = unit.strip()
    if spec.bare_number and cleaned in ("", "-", "1"):
        return 1.0, 0.0
    if kind == "balance_grade" and cleaned == "G":
        return 1e-3, 0.0
    wanted = f'a unit of {spec.meaning}, for example "{_example_unit(spec)}"'
    if not cleaned:
        raise UnitError(unit, wanted)
    if kind in ("cost", "count"):
        raise UnitError(unit, f"no unit, for {with_article(spec.meaning)} is a bare number")
    try:
        scale, offset = si_scale(cleaned, kind)
    except UnitTextError as error:
        reason, nearest = _explained(error, cleaned, kind)
        raise UnitError(unit, f"{wanted}; {reason}", nearest) from None
    return float(scale), float(offset)


def _example_unit(spec: Kind) -> str:
    if spec.name == "balance_grade":
        return "mm/s"
    for example in spec.examples:
        unit = _NUMBER.sub("", example, count=1).strip()
        if unit:
            return unit
    return spec.si_unit


def convert(value: float, kind: str, unit: str) -> float:
    """Return an SI value in another unit of its kind. Raises UnitError, and KeyError for an unknown kind."""
    scale, offset = parse_column(unit, kind)
    return (value - offset) / scale
