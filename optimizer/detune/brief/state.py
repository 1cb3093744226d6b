"""Named states of the machine: one mount lost, cold, crept, levelled, braking."""

from pydantic import field_validator, model_validator

from detune.brief.shares import Share
from detune.brief.statement import (
    Acceleration,
    Direction,
    Length,
    Name,
    Ratio,
    Statement,
    Temperature,
    listed_once,
    refuse,
)
from detune.ground.units import STANDARD_GRAVITY


class State(Statement):
    """A state in which conditions may be judged.

    `lost`: stations whose part carries nothing. `stiffness_factor`: every part's stiffness, static
    and dynamic, times this (cold rubber 1.3 to 2; common practice); `groups` restricts it. `creep`: added
    to every static deflection, as a share of it. `packing`: thickness put under a station, m, so that the
    machine stands level or the floor's unevenness is counted (negative where the floor lies low).
    `temperature` (degC, 20 if left out): where parts state a table over temperature it is read there.
    `sustained_acceleration`: of the floor along x, y and z for as long as the state lasts (a vehicle that brakes or
    corners, a lift that starts): every mass pulls the other way with mass times it, beside its weight.
    """

    name: Name
    lost: tuple[Name, ...] = ()
    stiffness_factor: Ratio = 1.0
    groups: tuple[Name, ...] | None = None
    creep: Share = 0.0
    temperature: Temperature = 20.0
    packing: dict[Name, Length] = {}
    sustained_acceleration: tuple[Acceleration, Acceleration, Acceleration] = (0.0, 0.0, 0.0)

    @field_validator("groups", "lost")
    @classmethod
    def _some_names(cls, value: tuple[str, ...] | None) -> tuple[str, ...] | None:
        return listed_once(value)

    @model_validator(mode="after")
    def _values(self) -> "State":
        if self.stiffness_factor <= 0.0:
            raise refuse(f"{self.stiffness_factor:g}", "a stiffness factor above zero")
        if self.creep < 0.0:
            raise refuse(f"{self.creep:g}", "a creep of zero or more")
        if self.groups is not None and self.stiffness_factor == 1.0:
            raise refuse("groups", 'a "stiffness_factor" for these groups')
        changed = self.lost or self.packing or self.creep > 0.0 or self.stiffness_factor != 1.0
        changed = changed or self.temperature != 20.0 or any(self.sustained_acceleration)
        if not changed:
            raise refuse(
                self.name,
                "a state that changes something: lost, stiffness_factor, creep, temperature, packing or "
                "sustained_acceleration",
            )
        return self


AS_INSTALLED = "as installed"


def apparent_gravity(state: State | None) -> Direction:
    """Return the force (N) on one kilogram at rest on the floor in a state: its weight, and minus the floor's pull."""
    if state is None:
        return (0.0, 0.0, -STANDARD_GRAVITY)
    x, y, z = state.sustained_acceleration
    return (-x, -y, -STANDARD_GRAVITY - z)
