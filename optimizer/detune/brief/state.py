"""Named states of the machine: one mount lost, cold, crept, levelled."""

from pydantic import field_validator, model_validator

from detune.brief.statement import Length, Name, Ratio, Statement, Temperature, listed_once, refuse


class State(Statement):
    """A state in which conditions may be judged.

    `lost`: stations whose part carries nothing. `stiffness_factor`: every part's stiffness, static
    and dynamic, times this (cold rubber 1.3 to 2; common practice); `groups` restricts it. `creep`: added
    to every static deflection, as a share of it. `packing`: thickness put under a station, m, so that the
    machine stands level or the floor's unevenness is counted (negative where the floor lies low).
    `temperature` (degC, 20 if left out): where parts state a table over temperature it is read there.
    """

    name: Name
    lost: tuple[Name, ...] = ()
    stiffness_factor: Ratio = 1.0
    groups: tuple[Name, ...] | None = None
    creep: Ratio = 0.0
    temperature: Temperature = 20.0
    packing: dict[Name, Length] = {}

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
        changed = changed or self.temperature != 20.0
        if not changed:
            raise refuse(
                self.name,
                "a state that changes something: lost, stiffness_factor, creep, temperature or packing",
            )
        return self


AS_INSTALLED = "as installed"
