"""What a study leaves open before there is a parts list: stiffness, damping, ballast, absorber, positions.

The table `[sizing]` names the unknowns with their bounds, what is minimised or maximised, and of what kind the parts
made to order are. Everything else of the brief (machine, conditions, forcing, allowables) stays as it is.
"""

from typing import Literal

from pydantic import PrivateAttr, field_validator, model_validator

from detune.brief.shares import (
    LOSS_FACTORS_BELOW,
    SHARES_BELOW,
    LossFactor,
    Share,
    refuse_if_per_cent_is_missing,
)
from detune.brief.statement import (
    AxisName,
    Cost,
    Damping,
    Force,
    Length,
    Name,
    Ratio,
    Statement,
    Stiffness,
    Temperature,
    Text,
    describe,
    refuse,
)
from detune.ground import units
from detune.ground.errors import nearest_name
from detune.ground.kinds import KINDS

Kind = Literal[
    "stiffness",
    "loss-factor",
    "viscous",
    "ballast",
    "absorber-mass",
    "absorber-tuning",
    "absorber-damping",
    "position",
    "parallel",
]
UNITS: dict[str, str] = {
    "stiffness": "stiffness",
    "loss-factor": "ratio",
    "viscous": "damping",
    "ballast": "mass",
    "absorber-mass": "mass",
    "absorber-tuning": "frequency",
    "absorber-damping": "ratio",
    "position": "length",
    "parallel": "count",
}
OF_GROUP = ("stiffness", "loss-factor", "viscous", "absorber-tuning", "absorber-damping", "parallel")
OF_BODY = ("absorber-mass", "absorber-tuning", "absorber-damping")
# What a bound of these kinds is called, and the number from which on it needs its per cent sign.
SHARES = {
    "loss-factor": ("a loss factor", LOSS_FACTORS_BELOW),
    "absorber-damping": ("a damping ratio", SHARES_BELOW),
}
FROM_ZERO = ("ballast", "viscous")
# Each amount of ballast and each number of parts is a problem of its own.
MOST_STEPS, MOST_PARTS = 1000, 100
# What may stand for the only unknown of a kind on a map, on one axis.
NATURAL_FREQUENCY, DAMPING_RATIO = "natural frequency", "damping ratio"
STANDS_FOR: dict[str, Kind] = {NATURAL_FREQUENCY: "stiffness", DAMPING_RATIO: "viscous"}
Minimised = Literal["cost", "added-mass", "worst-response", "stiffness", "damping", "absorber-mass"]
Maximised = Literal["separation", "stiffness"]
Bound = Text | float


class SizingUnknown(Statement):
    """One unknown between `lower` and `upper`, each with its unit.

    `stiffness` is the dynamic one of one part along its `axis`: "axial" keeps the part's lateral ratio, "lateral" is
    both lateral directions, "x" and "y" one of them. `loss-factor` and `viscous` are those of one part of the
    group. `ballast` is the added mass, in steps of `step` where one is stated. `absorber-mass` is the mass of the
    body; `absorber-tuning` its frequency on its own group's parts with the machine held, `absorber-damping` the
    damping ratio there. `position`: the distance of the stations from the origin along `axis`, each on its own
    side; below zero it is on the other side, so that a range may go through the origin. `parallel`: a whole number
    of equal parts side by side at each station of the group, sought on one axis alone.
    """

    kind: Kind
    group: Name | None = None
    body: Name | None = None
    stations: tuple[Name, ...] = ()
    axis: Literal["axial", "lateral"] | AxisName | None = None
    lower: Bound
    upper: Bound
    step: Bound | None = None
    name: Name | None = None

    _low: float = PrivateAttr()
    _high: float = PrivateAttr()
    _step: float | None = PrivateAttr(default=None)

    @field_validator("lower", "upper", "step", mode="before")
    @classmethod
    def _no_truth_value(cls, value: object) -> object:
        if isinstance(value, bool):
            raise refuse(describe(value), "a number, with its unit where it has one")
        return value

    @model_validator(mode="after")
    def _values(self) -> "SizingUnknown":
        self._low, self._high = self._read(self.lower, "lower"), self._read(self.upper, "upper")
        if self._high < self._low:
            found = f"{describe(self.lower)} to {describe(self.upper)}"
            raise refuse(
                found, "the lower bound first, the upper bound second: these are crossed", at="lower"
            )
        least = 0.0 if self.kind in FROM_ZERO else None
        if self.kind != "position" and ((least is None and self._low <= 0.0) or self._low < 0.0):
            wanted = "a lower bound of zero or more" if least == 0.0 else "a lower bound above zero"
            raise refuse(describe(self.lower), wanted, at="lower")
        if self.step is not None:
            if self.kind != "ballast":
                raise refuse("step", 'no "step": only ballast comes in steps', at="step")
            self._step = self._read(self.step, "step")
            if self._step <= 0.0:
                raise refuse(describe(self.step), "a step above zero", at="step")
            if self._step > self._high - self._low > 0.0:
                expected = (
                    "a step that fits between the bounds, so that more than the lower bound can be chosen"
                )
                raise refuse(describe(self.step), expected, at="step")
            if self._high - self._low > MOST_STEPS * self._step:
                expected = (
                    f"a step that leaves at most {MOST_STEPS} amounts, or none: then ballast is continuous"
                )
                raise refuse(describe(self.step), expected, at="step")
        if self.kind == "parallel" and (self._low % 1.0 or self._high % 1.0):
            found = f"{describe(self.lower)} to {describe(self.upper)}"
            raise refuse(found, "whole numbers of parts, such as 1 and 4", at="lower")
        if self.kind == "parallel" and self._high > MOST_PARTS:
            raise refuse(describe(self.upper), f"at most {MOST_PARTS} parts side by side", at="upper")
        self._belonging()
        return self

    def _read(self, value: Bound, at: str) -> float:
        bound = self._in_si(value, at)
        if self.kind in SHARES:
            refuse_if_per_cent_is_missing(value, bound, *SHARES[self.kind], at=at)
        return bound

    def _in_si(self, value: Bound, at: str) -> float:
        kind = UNITS[self.kind]
        if isinstance(value, str):
            try:
                return float(units.parse(value, kind))
            except units.UnitError as error:
                raise refuse(error.found, error.expected, at=at, nearest=error.nearest) from None
        if abs(value) == float("inf") or value != value:
            raise refuse(describe(value), "a finite bound; without one the search has no end", at=at)
        known = KINDS[kind]
        if not known.bare_number:
            raise refuse(
                describe(value), f'a {known.meaning} with its unit, such as "{known.examples[0]}"', at=at
            )
        return float(value)

    def _belonging(self) -> None:
        if (self.kind in OF_GROUP) != (self.group is not None):
            wanted = 'the group of parts, as "group"' if self.kind in OF_GROUP else 'no "group"'
            raise refuse(self.kind, wanted, at="kind")
        if (self.kind in OF_BODY) != (self.body is not None):
            wanted = 'the absorber\'s body, as "body"' if self.kind in OF_BODY else 'no "body"'
            raise refuse(self.kind, wanted, at="kind")
        if (self.kind == "position") != bool(self.stations):
            wanted = 'the stations that move, as "stations"' if self.kind == "position" else 'no "stations"'
            raise refuse(self.kind, wanted, at="kind")
        allowed = {"stiffness": ("axial", "lateral", "x", "y"), "position": ("x", "y", "z")}.get(self.kind)
        if allowed is None and self.axis is not None:
            raise refuse(self.axis, f'no "axis" for {self.kind}', at="axis")
        if allowed is not None and self.axis not in allowed:
            found = "" if self.axis is None else describe(self.axis)
            raise refuse(found, f'"axis" as one of {", ".join(allowed)}', at="axis")

    @property
    def bounds(self) -> tuple[float, float]:
        """Lower and upper bound in SI."""
        return self._low, self._high

    @property
    def unit(self) -> str:
        """Kind of unit of the unknown."""
        return UNITS[self.kind]

    @property
    def steps(self) -> float | None:
        """Step of the ballast in kg, None where it is continuous."""
        return self._step

    @property
    def title(self) -> str:
        """The unknown in words."""
        if self.name is not None:
            return self.name
        if self.kind == "stiffness":
            return f"{self.axis} stiffness of {self.group}"
        if self.kind == "loss-factor":
            return f"loss factor of {self.group}"
        if self.kind == "viscous":
            return f"damping of {self.group}"
        if self.kind == "position":
            return f"{self.axis} distance of {', '.join(self.stations)}"
        if self.kind == "parallel":
            return f"parts in parallel of {self.group}"
        return "ballast" if self.kind == "ballast" else f"{self.kind.replace('-', ' ')} of {self.body}"


class MadePart(Statement):
    """What is known of a part made to order for one group, whatever its stiffness and damping come out as.

    `lateral_ratio`: lateral over axial dynamic stiffness. `damping_lateral_ratio`: of viscous damping.
    `stiffness`, `loss_factor`, `viscous`: where they are no unknowns. The cost of one part is `cost` and what its
    axial stiffness in N/mm, its loss factor and its axial damping in N s/m add to it. `load_min`, `load_max`,
    `deflection_max`, `free_height`, `temperature_min` and `temperature_max` are what a list would state of it, for the
    limits that ask for them; `tolerance` what the scatter of a lot takes as listed.
    """

    group: Name
    dynamic_to_static: Ratio
    lateral_ratio: Ratio | None = None
    damping_lateral_ratio: Ratio = 0.0
    stiffness: Stiffness | None = None
    loss_factor: LossFactor | None = None
    viscous: Damping | None = None
    pulls: bool = False
    load_min: Force = 0.0
    load_max: Force | None = None
    deflection_max: Length | None = None
    free_height: Length | None = None
    temperature_min: Temperature | None = None
    temperature_max: Temperature | None = None
    tolerance: Share | None = None
    cost: Cost = 0.0
    cost_per_stiffness: Cost = 0.0
    cost_per_loss_factor: Cost = 0.0
    cost_per_damping: Cost = 0.0

    @model_validator(mode="after")
    def _values(self) -> "MadePart":
        for key in (
            "dynamic_to_static",
            "lateral_ratio",
            "stiffness",
            "load_max",
            "deflection_max",
            "free_height",
        ):
            value = getattr(self, key)
            if value is not None and value <= 0.0:
                raise refuse(f"{value:g}", "a value above zero", at=key)
        for key in ("damping_lateral_ratio", "loss_factor", "viscous", "load_min", "tolerance", "cost",
                    "cost_per_loss_factor", "cost_per_damping"):  # fmt: skip
            value = getattr(self, key)
            if value is not None and value < 0.0:
                raise refuse(f"{value:g}", "a value of zero or more", at=key)
        for low, high in (("load_min", "load_max"), ("temperature_min", "temperature_max")):
            ends = getattr(self, low), getattr(self, high)
            if None not in ends and ends[0] > ends[1]:
                raise refuse(f"{ends[0]:g} to {ends[1]:g}", f'"{low}" not above "{high}"', at=low)
        return self


class Sizing(Statement):
    """Unknowns, what is sought, and how it is searched for.

    Exactly one of `minimise` and `maximise`. `trade`: two or three of cost, added-mass, worst-response, stiffness,
    damping and separation, of which the front is drawn. `map`: the names of two unknowns spanning the map of what
    is feasible; on one axis "natural frequency" may stand for the stiffness and "damping ratio" for the viscous
    damping. `starts` local searches from points drawn with `seed` where no exact method applies.
    `specification`: whether the purchase specification is worked out.
    """

    unknown: tuple[SizingUnknown, ...]
    made: tuple[MadePart, ...] = ()
    minimise: Minimised | None = None
    maximise: Maximised | None = None
    trade: tuple[
        Literal["cost", "added-mass", "worst-response", "stiffness", "damping", "separation"], ...
    ] = ()
    map: tuple[Name, ...] = ()
    starts: int = 12
    seed: int = 1
    front_points: int = 12
    specification: bool = True

    @field_validator("unknown")
    @classmethod
    def _some(cls, value: tuple[SizingUnknown, ...]) -> tuple[SizingUnknown, ...]:
        if not value:
            raise refuse("[]", "at least one [[sizing.unknown]]")
        return value

    @model_validator(mode="after")
    def _one_goal(self) -> "Sizing":
        if (self.minimise is None) == (self.maximise is None):
            found = "both" if self.minimise is not None else "neither"
            raise refuse(found, 'exactly one of "minimise" and "maximise"')
        self._mapped([unknown.title for unknown in self.unknown])
        if self.trade and (not 2 <= len(self.trade) <= 3 or len(set(self.trade)) != len(self.trade)):
            raise refuse(list(self.trade), "two or three different objectives", at="trade")
        for key in ("starts", "front_points"):
            if getattr(self, key) < 1:
                raise refuse(str(getattr(self, key)), "a whole number of 1 or more", at=key)
        return self

    def _mapped(self, titles: list[str]) -> None:
        """Refuse a map that is not spanned by two unknowns, or by what stands for them."""
        if not self.map:
            return
        if len(self.map) != 2:
            raise refuse(list(self.map), "the names of two unknowns", at="map")
        kinds = [unknown.kind for unknown in self.unknown]
        stand_ins = {name: kind for name, kind in STANDS_FOR.items() if kinds.count(kind) == 1}
        moved: list[str] = []
        for name in self.map:
            if name not in titles and name not in stand_ins:
                known = [*titles, *stand_ins]
                near = nearest_name(name, known)
                raise refuse(name, "an unknown: " + ", ".join(known), at="map", nearest=near)
            moved.append(name if name in titles else titles[kinds.index(stand_ins[name])])
        if moved[0] == moved[1]:
            raise refuse(list(self.map), "two different unknowns", at="map")
        counted = [unknown.title for unknown in self.unknown if unknown.kind == "parallel"]
        for name in self.map:
            if name in counted:
                raise refuse(
                    name, "two unknowns that are continuous: a number of parts spans no map", at="map"
                )

    @property
    def goal(self) -> str:
        """The objective by name; `maximise` and `minimise` may share one."""
        return str(self.minimise or self.maximise)

    @property
    def sense(self) -> float:
        """1 where less is better, -1 where more is."""
        return 1.0 if self.minimise is not None else -1.0
