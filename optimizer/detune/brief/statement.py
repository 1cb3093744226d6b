"""The base of every statement in a brief, and the field types that carry units.

A field typed `Length` holds metres as a float. From a study file it must be written with its unit
("120 mm"); from Python a float is taken as SI and a string is parsed.
"""

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, StringConstraints
from pydantic_core import CoreSchema, PydanticCustomError, core_schema

from detune.ground import units


class Statement(BaseModel):
    """A frozen part of the brief; an unknown key is refused."""

    model_config = ConfigDict(frozen=True, extra="forbid", hide_input_in_errors=False)


def refuse(found: object, expected: str) -> PydanticCustomError:
    """Return the error that the readers turn into a fault with file and line."""
    return PydanticCustomError("statement", "{expected}", {"found": str(found), "expected": expected})


@dataclass(frozen=True)
class Quantity:
    """Field marker: a number of one kind of unit (a key of `detune.ground.units.KINDS`)."""

    kind: str

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> CoreSchema:
        return core_schema.with_info_plain_validator_function(self._validate)

    def __get_pydantic_json_schema__(self, schema: Any, handler: Any) -> dict[str, Any]:
        kind = units.KINDS[self.kind]
        types: Any = ["string", "number"] if kind.bare_number else "string"
        return {"type": types, "description": f"{kind.meaning} with its unit", "examples": list(kind.examples)}

    def _validate(self, value: Any, info: core_schema.ValidationInfo) -> float:
        kind = units.KINDS[self.kind]
        if isinstance(value, str):
            try:
                return units.parse(value, self.kind)
            except units.UnitError as error:
                raise refuse(error.found, error.expected) from None
        example = kind.examples[0]
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            raise refuse(describe(value), f'{_article(kind.name)} written as text, for example "{example}"')
        context: Mapping[str, Any] = info.context or {}
        if context.get("from_file") and not kind.bare_number:
            raise refuse(value, f'{_article(kind.name)} with its unit, for example "{example}"')
        if not math.isfinite(value):
            raise refuse(value, "a finite number")
        return float(value)


def _article(name: str) -> str:
    plain = name.replace("_", " ")
    return f"{'an' if plain[0] in 'aeiou' else 'a'} {plain}"


def describe(value: object) -> str:
    """Return a found value as a user would recognise it, cut to a readable length."""
    text = repr(value) if not isinstance(value, str) else value
    return text if len(text) <= 60 else text[:57] + "..."


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
Angle = Annotated[float, Quantity("angle")]
Inertia = Annotated[float, Quantity("inertia")]
Unbalance = Annotated[float, Quantity("unbalance")]
BalanceGrade = Annotated[float, Quantity("balance_grade")]
AreaDensity = Annotated[float, Quantity("area_density")]
Ratio = Annotated[float, Quantity("ratio")]
Cost = Annotated[float, Quantity("cost")]

Position = tuple[Length, Length, Length]
ForceVector = tuple[Force, Force, Force]
MomentVector = tuple[Moment, Moment, Moment]
Direction = tuple[float, float, float]
AxisName = Literal["x", "y", "z"]
FreedomName = Literal["x", "y", "z", "rx", "ry", "rz"]

AXES: dict[str, Direction] = {"x": (1.0, 0.0, 0.0), "y": (0.0, 1.0, 0.0), "z": (0.0, 0.0, 1.0)}
FREEDOMS: tuple[FreedomName, ...] = ("x", "y", "z", "rx", "ry", "rz")


def positive(value: float, what: str) -> float:
    """Return the value if it is above zero, else refuse it (for field validators)."""
    if value <= 0.0:
        raise refuse(f"{value:g}", f"{what} above zero")
    return value


def unit_direction(direction: AxisName | Direction) -> Direction:
    """Return the unit vector of an axis name or of a vector; a zero vector is refused."""
    if isinstance(direction, str):
        return AXES[direction]
    length = math.sqrt(sum(part * part for part in direction))
    if length == 0.0:
        raise refuse(list(direction), "a direction that is not the zero vector")
    return (direction[0] / length, direction[1] / length, direction[2] / length)
