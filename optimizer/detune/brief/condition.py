"""Conditions: operating states, each with its own shaft speeds."""

from pydantic import field_validator

from detune.brief.statement import Frequency, Name, Statement, refuse

SpeedRange = tuple[Frequency, Frequency]


class Condition(Statement):
    """One operating state.

    `shafts` gives the speed range of every shaft that turns in it, in revolutions: a moving speed
    excites every frequency of its range. `steady` is false where the machine only passes through
    (run-up, coast-down): such a condition is judged by response and takes no part in separation.
    """

    name: Name
    steady: bool = True
    shafts: dict[Name, SpeedRange] = {}

    @field_validator("steady", mode="before")
    @classmethod
    def _yes_no(cls, value: object) -> object:
        if not isinstance(value, bool):
            raise refuse(value, "true or false")
        return value

    @field_validator("shafts")
    @classmethod
    def _ranges(cls, value: dict[str, SpeedRange]) -> dict[str, SpeedRange]:
        for name, (low, high) in value.items():
            check_range(low, high, f"shaft {name}")
        return value


def check_range(low: float, high: float, what: str) -> None:
    """Refuse a range that is not above zero or has its ends crossed."""
    if low <= 0.0:
        raise refuse(f"{what}: {low:g} Hz", "a lowest frequency above zero")
    if high < low:
        raise refuse(f"{what}: {low:g} Hz to {high:g} Hz", "the lower end first, the upper end second")
