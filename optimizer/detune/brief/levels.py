"""Limits stated as levels in decibels (ISO 1683): "105 dB" in a field of velocity is 105 dB re 1 nm/s, rms."""

import re
from dataclasses import dataclass
from typing import Annotated, Any

from pydantic_core import core_schema

from detune.brief.statement import Quantity, refuse
from detune.ground import units

# ISO 1683:2015, by kind of number: reference in SI, and as it is written.
REFERENCES: dict[str, tuple[float, str]] = {
    "length": (1e-12, "1 pm"),
    "velocity": (1e-9, "1 nm/s"),
    "acceleration": (1e-6, "1 µm/s²"),
    "force": (1e-6, "1 µN"),
}
_LEVEL = re.compile(
    r"\s*(?P<number>[^\sa-df-zA-DF-Z]+)\s*dB(?P<weighting>\(?[A-Z]\)?)?(?P<rest>\s.*)?\s*\Z", re.DOTALL
)
_RE = re.compile(r"\s*(?:re|ref)\.?\s+(?P<reference>.+?)\s*\Z", re.DOTALL)


class Level(float):
    """An rms value in SI that was stated as a level above `reference` (SI), which was `stated` or left out."""

    reference: float
    stated: bool

    def __new__(cls, value: float, reference: float = 1.0, stated: bool = True) -> "Level":
        """Return the value with its reference."""
        made = super().__new__(cls, value)
        made.reference, made.stated = reference, stated
        return made


@dataclass(frozen=True)
class QuantityOrLevel(Quantity):
    """Field marker: a number of one kind of unit, or its level in decibels."""

    def __get_pydantic_json_schema__(self, schema: Any, handler: Any) -> dict[str, Any]:
        found = super().__get_pydantic_json_schema__(schema, handler)
        _, written = REFERENCES[self.kind]
        found["description"] += (
            f", or the level of its rms value, re {written} (ISO 1683) where nothing else is said"
        )
        found["examples"] = [*found["examples"], "105 dB", f"105 dB re {written}"]
        return found

    def _validate(self, value: Any, info: core_schema.ValidationInfo) -> float:
        if isinstance(value, Level):
            return value
        match = _LEVEL.match(value) if isinstance(value, str) else None
        return super()._validate(value, info) if match is None else self._level(str(value), match)

    def _level(self, text: str, match: re.Match[str]) -> Level:
        reference, written = REFERENCES[self.kind]
        expected = f'a level such as "105 dB", which is re {written} of the rms value (ISO 1683)'
        if match["weighting"]:
            raise refuse(text, f"{expected}, without a frequency weighting")
        try:
            decibels = units.parse(f"{match['number']} dB", "level")
        except units.UnitError as error:
            raise refuse(error.found, expected) from None
        stated = bool((match["rest"] or "").strip())
        if stated:
            named = _RE.match(match["rest"])
            if named is None:
                raise refuse(text, f'{expected}, or with its reference, "105 dB re {written}"')
            try:
                reference = units.parse(named["reference"], self.kind)
            except units.UnitError as error:
                raise refuse(error.found, error.expected, nearest=error.nearest) from None
            if reference <= 0.0:
                raise refuse(text, "a reference above zero")
        if abs(decibels) > 400.0:
            raise refuse(text, "a level between -400 dB and 400 dB")
        return Level(reference * 10.0 ** (decibels / 20.0), reference, stated)


def level_note(what: str, limit: float, kind: str) -> tuple[str, ...]:
    """Return the note on the reference of a level that does not state it."""
    if not isinstance(limit, Level) or limit.stated:
        return ()
    return (f"{what}: levels re {REFERENCES[kind][1]} of the rms value (ISO 1683)",)


def refuse_unless_rms(limit: float, measure: str) -> None:
    """Refuse a level as the limit of anything but an rms value."""
    if isinstance(limit, Level) and measure != "rms":
        expected = (
            'measure = "rms" beside a limit in dB: a level is that of the rms value (ISO 1683); of a sine the peak is '
            "3.01 dB above it, of anything else by a factor of its own"
        )
        raise refuse(f'measure = "{measure}"', expected, at="measure")


LengthOrLevel = Annotated[float, QuantityOrLevel("length")]
VelocityOrLevel = Annotated[float, QuantityOrLevel("velocity")]
AccelerationOrLevel = Annotated[float, QuantityOrLevel("acceleration")]
ForceOrLevel = Annotated[float, QuantityOrLevel("force")]
