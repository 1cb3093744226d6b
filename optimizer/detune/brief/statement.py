"""The base of every statement in a brief, and the field types that carry units.

A field typed `Length` holds metres as a float. From a study file it must be written with its unit
("120 mm"); from Python a float is taken as SI and a string is parsed.
"""

import math
import sys
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Annotated, Any, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict, StringConstraints
from pydantic_core import CoreSchema, PydanticCustomError, core_schema

from detune.ground import units


class Statement(BaseModel):
    """A frozen part of the brief; an unknown key is refused."""

    model_config = ConfigDict(frozen=True, extra="forbid", hide_input_in_errors=False, defer_build=True)


def refuse(
    found: object, expected: str, at: str | None = None, nearest: str | None = None
) -> PydanticCustomError:
    """Return the error that the readers turn into a fault with file and line.

    `at` names the key of the statement that is at fault where the check looks at several of them.
    """
    text = found if isinstance(found, str) else describe(found)
    context = {"found": text, "expected": expected, "at": at, "nearest": nearest}
    return PydanticCustomError("statement", "{expected}", context)


@dataclass(frozen=True)
class Quantity:
    """Field marker: a number of one kind of unit (a key of `detune.ground.units.KINDS`)."""

    kind: str

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> CoreSchema:
        return core_schema.with_info_plain_validator_function(self._validate)

    def __get_pydantic_json_schema__(self, schema: Any, handler: Any) -> dict[str, Any]:
        kind = units.KINDS[self.kind]
        types: Any = ["string", "number"] if kind.bare_number else "string"
        return {
            "type": types,
            "description": f"{kind.meaning} with its unit",
            "examples": list(kind.examples),
        }

    def _validate(self, value: Any, info: core_schema.ValidationInfo) -> float:
        kind = units.KINDS[self.kind]
        if isinstance(value, str):
            try:
                return units.parse(value, self.kind)
            except units.UnitError as error:
                raise refuse(error.found, error.expected, nearest=error.nearest) from None
        context: Mapping[str, Any] = info.context or {}
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            raise refuse(value, self._wanted(kind))
        if context.get("from_file") and not kind.bare_number:
            raise refuse(value, self._wanted(kind))
        return finite(value)

    def _wanted(self, kind: units.Kind) -> str:
        article = "an" if kind.meaning[0] in "aeiou" else "a"
        how = "as a bare number" if kind.bare_number else "with its unit, in quotes"
        return f"{article} {kind.meaning} {how}, for example {_example(kind)}"


def _example(kind: units.Kind) -> str:
    return kind.examples[0] if kind.bare_number else f'"{kind.examples[0]}"'


def finite(value: object) -> float:
    """Return a bare number as a float; anything else, infinities and whole numbers too large are refused."""
    if isinstance(value, bool) or not isinstance(value, (int, float)):
        raise refuse(value, "a bare number")
    if abs(value) > sys.float_info.max or value != value:
        raise refuse(value, "a finite number")
    return float(value)


def describe(value: object) -> str:
    """Return a found value as it stands in a study file, cut to a readable length."""
    text = value if isinstance(value, str) else _as_toml(value)
    # Control characters would act on the terminal that prints the fault.
    text = "".join(
        letter if letter.isprintable() or letter == "\n" else repr(letter)[1:-1] for letter in text
    )
    return text if len(text) <= 60 else text[:57] + "..."


def _as_toml(value: object) -> str:
    if isinstance(value, str):
        return f'"{value}"'
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, (list, tuple)):
        return "[" + ", ".join(_as_toml(item) for item in value) + "]"
    if isinstance(value, dict) and value:
        return "{ " + ", ".join(f"{key} = {_as_toml(item)}" for key, item in value.items()) + " }"
    if isinstance(value, int) and abs(value) > sys.float_info.max:
        return "a whole number of more than 300 digits"
    return str(value)


Name = Annotated[str, StringConstraints(strict=True, min_length=1, strip_whitespace=True)]
Text = Annotated[str, StringConstraints(strict=True)]

Length = Annotated[float, Quantity("length")]
Area = Annotated[float, Quantity("area")]
Mass = Annotated[float, Quantity("mass")]
Force = Annotated[float, Quantity("force")]
Moment = Annotated[float, Quantity("moment")]
Stiffness = Annotated[float, Quantity("stiffness")]
Damping = Annotated[float, Quantity("damping")]
Velocity = Annotated[float, Quantity("velocity")]
Acceleration = Annotated[float, Quantity("acceleration")]
Frequency = Annotated[float, Quantity("frequency")]
Temperature = Annotated[float, Quantity("temperature")]
Time = Annotated[float, Quantity("time")]
Angle = Annotated[float, Quantity("angle")]
Inertia = Annotated[float, Quantity("inertia")]
Unbalance = Annotated[float, Quantity("unbalance")]
AccelerationDensity = Annotated[float, Quantity("acceleration_psd")]
VelocityDensity = Annotated[float, Quantity("velocity_psd")]
DisplacementDensity = Annotated[float, Quantity("displacement_psd")]
ForceDensity = Annotated[float, Quantity("force_psd")]
Slope = Annotated[float, Quantity("slope")]
BalanceGrade = Annotated[float, Quantity("balance_grade")]
AreaDensity = Annotated[float, Quantity("area_density")]
Ratio = Annotated[float, Quantity("ratio")]
Cost = Annotated[float, Quantity("cost")]

Position = tuple[Length, Length, Length]
ForceVector = tuple[Force, Force, Force]
MomentVector = tuple[Moment, Moment, Moment]
Component = Annotated[float, BeforeValidator(finite)]
Direction = tuple[Component, Component, Component]
AxisName = Literal["x", "y", "z"]
FreedomName = Literal["x", "y", "z", "rx", "ry", "rz"]

AXES: dict[str, Direction] = {"x": (1.0, 0.0, 0.0), "y": (0.0, 1.0, 0.0), "z": (0.0, 0.0, 1.0)}
FREEDOMS: tuple[FreedomName, ...] = ("x", "y", "z", "rx", "ry", "rz")


def listed_once(value: tuple[str, ...] | None) -> tuple[str, ...] | None:
    """Return a list of names that is left out, or has at least one name and each one once; else refuse it."""
    if value is not None and not value:
        raise refuse("[]", "at least one name, or this key left out")
    if value is not None and len(set(value)) != len(value):
        raise refuse(list(value), "each name once")
    return value


def positive(value: float, what: str, at: str | None = None) -> float:
    """Return the value if it is above zero, else refuse it (for field validators)."""
    if value <= 0.0:
        raise refuse(f"{value:g}", f"{what} above zero", at=at)
    return value


def unit_direction(direction: AxisName | Direction, at: str | None = None) -> Direction:
    """Return the unit vector of an axis name or of a vector; a zero vector is refused."""
    if isinstance(direction, str):
        return AXES[direction]
    # hypot neither over- nor underflows where squares would.
    length = math.hypot(*direction)
    if length == 0.0 or not math.isfinite(length):
        raise refuse(list(direction), "a direction that is not the zero vector", at=at)
    return (direction[0] / length, direction[1] / length, direction[2] / length)
