"""The machine: rigid bodies, named points, stations, given connections and steady loads."""

from typing import Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import field_validator, model_validator

from detune.brief.statement import (
    FREEDOMS,
    AxisName,
    Damping,
    Direction,
    ForceVector,
    FreedomName,
    Inertia,
    Length,
    Mass,
    MomentVector,
    Name,
    Position,
    Ratio,
    Statement,
    Stiffness,
    describe,
    positive,
    refuse,
    unit_direction,
)
from detune.brief.statement import Force as ForceQuantity
from detune.physics import rigid_body

# Below this sine of the angle between them, the digits people write leave the radial direction undetermined.
LEAST_ANGLE = 1e-6


class InertiaTensor(Statement):
    """Moments and products of inertia about the body's centre, kg m^2.

    The products are the entries of the tensor itself: xy = -(integral of x y dm).
    """

    xx: Inertia
    yy: Inertia
    zz: Inertia
    xy: Inertia = 0.0
    xz: Inertia = 0.0
    yz: Inertia = 0.0

    def matrix(self) -> NDArray[np.float64]:
        """Return the tensor (3, 3) in kg m^2."""
        rows = [[self.xx, self.xy, self.xz], [self.xy, self.yy, self.yz], [self.xz, self.yz, self.zz]]
        return np.array(rows)


class Shape(Statement):
    """A uniform box or cylinder that is part of a body."""

    kind: Literal["box", "cylinder"]
    name: Name = "shape"
    mass: Mass
    centre: Position
    size: tuple[Length, Length, Length] | None = None
    radius: Length | None = None
    length: Length | None = None
    axis: AxisName | None = None

    @field_validator("mass")
    @classmethod
    def _mass_above_zero(cls, value: float) -> float:
        return positive(value, "a mass")

    @model_validator(mode="after")
    def _dimensions(self) -> "Shape":
        if self.kind == "box":
            if (
                self.size is None
                or self.radius is not None
                or self.length is not None
                or self.axis is not None
            ):
                raise refuse("box", 'a box with "size" alone (three lengths, along x, y and z)')
            for side in self.size:
                positive(side, "a box side", at="size")
            return self
        if self.radius is None or self.length is None or self.axis is None or self.size is not None:
            raise refuse("cylinder", 'a cylinder with "radius", "length" and "axis" ("x", "y" or "z")')
        positive(self.radius, "a radius", at="radius")
        positive(self.length, "a length", at="length")
        return self


class Weighing(Statement):
    """Mass and centre from corner weighings: where the supports stood and what each one read."""

    positions: tuple[Position, ...]
    readings: tuple[ForceQuantity, ...]
    centre_height: Length

    @model_validator(mode="after")
    def _three_or_more(self) -> "Weighing":
        if len(self.positions) != len(self.readings):
            raise refuse(
                f"{len(self.positions)} positions and {len(self.readings)} readings",
                "one reading for each position",
            )
        if len(self.positions) < 3:
            raise refuse(
                f"{len(self.positions)} positions", "three or more weighing positions", at="positions"
            )
        if min(self.readings) < 0.0 or sum(self.readings) <= 0.0:
            raise refuse(
                ", ".join(f"{reading:g} N" for reading in self.readings),
                "readings that are not negative and not all zero",
                at="readings",
            )
        return self


class Body(Statement):
    """A rigid body that moves. Its mass is stated in exactly one of three ways.

    `mass`, `centre` and `inertia` (or `inertia_box`); a list of `shapes`; or a `weighing` with
    `inertia` or `inertia_box`. `inertia_box` is the size of a uniform box of the same mass, an
    assumption that is printed as such.
    """

    name: Name
    free: tuple[FreedomName, ...] = FREEDOMS
    mass: Mass | None = None
    centre: Position | None = None
    inertia: InertiaTensor | None = None
    inertia_box: tuple[Length, Length, Length] | None = None
    shapes: tuple[Shape, ...] = ()
    weighing: Weighing | None = None

    @field_validator("mass")
    @classmethod
    def _mass_above_zero(cls, value: float | None) -> float | None:
        return value if value is None else positive(value, "a mass")

    @field_validator("free")
    @classmethod
    def _free_once(cls, value: tuple[FreedomName, ...]) -> tuple[FreedomName, ...]:
        if not value:
            raise refuse("[]", 'at least one free direction, for example ["z"]')
        if len(set(value)) != len(value):
            raise refuse(list(value), "each free direction once")
        return tuple(name for name in FREEDOMS if name in value)

    @model_validator(mode="after")
    def _one_way(self) -> "Body":
        ways = [self.mass is not None, bool(self.shapes), self.weighing is not None]
        if sum(ways) != 1:
            stated = [w for w, used in zip(("mass", "shapes", "weighing"), ways, strict=True) if used]
            raise refuse(
                " and ".join(stated) or "no mass",
                'the mass stated in exactly one way: "mass" with "centre", or "shapes", or "weighing"',
            )
        if self.mass is not None and self.centre is None:
            raise refuse("mass without centre", 'the centre of mass as "centre"')
        if self.mass is None and self.centre is not None:
            raise refuse(
                "centre", 'no "centre" beside shapes or a weighing, which give it already', at="centre"
            )
        if self.shapes and (self.inertia is not None or self.inertia_box is not None):
            raise refuse("inertia beside shapes", "shapes alone, which give the inertia already")
        if self.inertia is not None and self.inertia_box is not None:
            raise refuse("inertia and inertia_box", "one of the two")
        rotates = any(name.startswith("r") for name in self.free)
        if rotates and not self.shapes and self.inertia is None and self.inertia_box is None:
            raise refuse(
                "no inertia",
                'an inertia for a body that may rotate: "inertia", "inertia_box" (size of a uniform box), or "shapes"',
            )
        if self.inertia_box is not None:
            for side in self.inertia_box:
                positive(side, "a box side", at="inertia_box")
        if rotates and self.inertia is not None:
            _check_inertia(self.inertia)
        return self


def _check_inertia(stated: InertiaTensor) -> None:
    """Refuse a tensor that no real body has: each principal moment above zero and at most the other two together."""
    tensor = stated.matrix()
    least, middle, greatest = rigid_body.principal_moments(tensor)
    moments = ", ".join(f"{value:.4g}" for value in (least, middle, greatest))
    if least <= 0.0:
        expected = "an inertia whose three principal moments are all above zero"
    elif not rigid_body.inertia_is_possible(tensor):
        expected = "an inertia that a real body can have: no principal moment above the sum of the other two"
    else:
        return
    raise refuse(f"principal moments {moments} kg m^2", expected, at="inertia")


class Point(Statement):
    """A named point fixed to a body, where responses are limited."""

    name: Name
    on: Name | None = None
    position: Position


class Station(Statement):
    """A place where a part stands between a body and the floor, or another body.

    `axial` is the direction of the part's axis, `radial` that of its local x. `parallel` parts of
    the same number stand side by side and share the load equally.
    """

    name: Name
    group: Name
    on: Name | None = None
    to: Name = "floor"
    position: Position
    axial: AxisName | Direction = "z"
    radial: AxisName | Direction | None = None
    parallel: int = 1

    @field_validator("parallel", mode="before")
    @classmethod
    def _count(cls, value: object) -> object:
        if isinstance(value, bool) or not isinstance(value, int) or value < 1:
            raise refuse(value, "a whole number of parts, 1 or more")
        return value

    @field_validator("axial", "radial")
    @classmethod
    def _not_zero(cls, value: AxisName | Direction | None) -> AxisName | Direction | None:
        if value is not None:
            unit_direction(value)
        return value

    @model_validator(mode="after")
    def _two_directions(self) -> "Station":
        if self.radial is not None:
            along = np.cross(unit_direction(self.axial), unit_direction(self.radial))
            if float(np.linalg.norm(along)) < LEAST_ANGLE:
                raise refuse(
                    describe(self.radial),
                    "a radial direction that is not parallel to the axial one",
                    at="radial",
                )
        return self


class Connection(Statement):
    """A given connection (pipe, cable, belt) of known stiffness that belongs to no choice.

    `stiffness` along global x, y and z is the dynamic one; `stiffness_static` is taken equal to it
    when left out, and that is printed as assumed.
    """

    name: Name
    on: Name | None = None
    to: Name = "floor"
    position: Position
    stiffness: tuple[Stiffness, Stiffness, Stiffness]
    stiffness_static: tuple[Stiffness, Stiffness, Stiffness] | None = None
    loss_factor: Ratio | None = None
    viscous: tuple[Damping, Damping, Damping] | None = None

    @model_validator(mode="after")
    def _values(self) -> "Connection":
        for key in ("stiffness", "stiffness_static", "viscous"):
            values = getattr(self, key)
            if values is not None and min(values) < 0.0:
                raise refuse(f"{min(values):g}", "values of zero or more", at=key)
        if self.loss_factor is None and self.viscous is None:
            raise refuse("no damping", 'the damping as "loss_factor" or "viscous" (zero is an answer)')
        if self.loss_factor is not None and not 0.0 <= self.loss_factor <= 1.5:
            raise refuse(
                f"{self.loss_factor:g}",
                'a loss factor from 0 to 1.5, such as 0.05 or "5 %"',
                at="loss_factor",
            )
        return self


class SteadyLoad(Statement):
    """A steady force or moment besides gravity: thrust, belt pull, pressure."""

    name: Name
    on: Name | None = None
    position: Position
    force: ForceVector = (0.0, 0.0, 0.0)
    moment: MomentVector = (0.0, 0.0, 0.0)

    @model_validator(mode="after")
    def _something_acts(self) -> "SteadyLoad":
        if not any(self.force) and not any(self.moment):
            raise refuse("no force and no moment", 'a "force" or a "moment" that is not zero')
        return self


__all__ = [
    "Body",
    "Connection",
    "InertiaTensor",
    "Point",
    "Shape",
    "Station",
    "SteadyLoad",
    "Weighing",
]
