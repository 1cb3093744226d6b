"""A tuned absorber that may be fixed to the machine: where, along which direction, and from which lists."""

from pydantic import field_validator, model_validator

from detune.brief.choice import CatalogNames, PartNames, Where
from detune.brief.statement import (
    AxisName,
    Direction,
    Frequency,
    Name,
    Statement,
    positive,
    refuse,
    unit_direction,
)


class Absorber(Statement):
    """One absorber of the lists `catalogs`, or none where `empty` is true, at the named point `at`.

    Its mass moves along `direction` on its own spring and damper, which adds one freedom, and goes along
    with the body otherwise. Its whole mass counts in loads, sag and added mass, its price in the cost, its
    mode among all others in separation. Its motion against the body stays below the stroke its list states,
    in every condition. An absorber that can be set between two frequencies of its list is taken at its listed
    tuning and at each of `tunings` between them, with the same mass, damping ratio and stroke.
    """

    name: Name
    at: Name
    direction: AxisName | Direction
    catalogs: CatalogNames
    where: Where = {}
    parts: PartNames = None
    tunings: tuple[Frequency, ...] = ()
    empty: bool = False

    @field_validator("tunings")
    @classmethod
    def _tunings(cls, value: tuple[float, ...]) -> tuple[float, ...]:
        for frequency in value:
            positive(frequency, "a frequency")
        if len(set(value)) != len(value):
            raise refuse(", ".join(f"{frequency:g} Hz" for frequency in value), "each frequency once")
        return value

    @model_validator(mode="after")
    def _along(self) -> "Absorber":
        unit_direction(self.direction, at="direction")
        return self
