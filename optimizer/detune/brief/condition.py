"""Conditions: operating states, each with its own shaft speeds."""

from collections.abc import Mapping

from pydantic import PrivateAttr, field_validator, model_validator

from detune.brief.statement import Frequency, Name, Statement, Time, refuse

SpeedRange = tuple[Frequency, Frequency]
Interval = tuple[float, float]


class Condition(Statement):
    """One operating state.

    `shafts` gives the speed range of every shaft that turns in it, in revolutions: a moving speed
    excites every frequency of its range. `steady` is false where the machine only passes through
    (run-up, coast-down): such a condition is judged by response and takes no part in separation.

    `state` names the state of the machine it is judged in; left out, as installed. `run_up` and `coast_down`
    give, for a shaft, the time in which it passes its whole range at a constant rate; both may be given, and
    the worse counts. Left out, the steady state at every speed is taken.

    `barred` lists, for a shaft of a steady condition, bands of its range in which the machine may not dwell: limits
    and separation are judged over what is left. The bands are still passed through, which is judged only where a
    condition with a run-up or coast-down says how.
    """

    name: Name
    steady: bool = True
    state: Name | None = None
    shafts: dict[Name, SpeedRange] = {}
    run_up: dict[Name, Time] = {}
    coast_down: dict[Name, Time] = {}
    barred: dict[Name, tuple[SpeedRange, ...]] = {}
    _whole: "Condition | None" = PrivateAttr(default=None)

    @property
    def whole(self) -> "Condition":
        """The condition as stated, of which this one may be what is left between two barred bands."""
        return self._whole or self

    def piece(self, shafts: Mapping[str, Interval], name: str) -> "Condition":
        """Return this condition with smaller ranges of some shafts, under a name of its own."""
        part = self.model_copy(update={"name": name, "shafts": {**self.shafts, **shafts}, "barred": {}})
        part._whole = self
        return part

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
            check_range(low, high, name)
        return value

    @model_validator(mode="after")
    def _barred_bands(self) -> "Condition":
        for name, bands in self.barred.items():
            if name not in self.shafts:
                known = ", ".join(self.shafts) or "none is stated"
                raise refuse(name, f"a shaft of this condition: {known}", at="barred")
            if not self.steady:
                found = "barred speeds in a condition that is passed through"
                raise refuse(found, "barred speeds in a steady condition alone", at="barred")
            if not bands:
                raise refuse("[]", "at least one band, or this shaft left out", at="barred")
            for low, high in bands:
                check_range(low, high, "barred")
                if high == low:
                    raise refuse(f"{low:g} Hz to {high:g} Hz", "a band with a width", at="barred")
        return self

    @model_validator(mode="after")
    def _passages(self) -> "Condition":
        for name, time in (*self.run_up.items(), *self.coast_down.items()):
            if name not in self.shafts:
                raise refuse(
                    name, "a shaft of this condition: " + (", ".join(self.shafts) or "none is stated")
                )
            if time <= 0.0:
                raise refuse(f"{time:g} s", "a time above zero")
            if self.steady:
                raise refuse(
                    "run_up in a steady condition", "steady = false beside a run-up or coast-down time"
                )
            low, high = self.shafts[name]
            if high <= low:
                raise refuse(f"{low:g} Hz to {high:g} Hz", "a range of speed to pass through")
        return self


def check_range(low: float, high: float, at: str) -> None:
    """Refuse a range that is not above zero or has its ends crossed."""
    if low <= 0.0:
        raise refuse(f"{low:g} Hz", "a lowest frequency above zero", at=at)
    if high < low:
        raise refuse(f"{low:g} Hz to {high:g} Hz", "the lower end first, the upper end second", at=at)
