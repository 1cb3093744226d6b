"""The floor under the stations: rigid, or one vertical freedom known in one of three ways."""

from dataclasses import dataclass
from typing import Literal

from pydantic import model_validator

from detune.brief.statement import (
    AreaDensity,
    Damping,
    Frequency,
    Length,
    Mass,
    Ratio,
    Statement,
    Stiffness,
    refuse,
)
from detune.ground.units import show
from detune.physics import floor as floor_physics

NEEDED: dict[str, tuple[str, ...]] = {
    "rigid": (),
    "span-and-sag": ("span", "width", "area_mass", "sag", "damping_ratio"),
    "frequency-and-mass": ("frequency", "effective_mass", "damping_ratio"),
    "mass-spring-damper": ("mass", "stiffness", "damping"),
}
COMMON_DAMPING_RATIO = 0.02


class Floor(Statement):
    """What the stations stand on.

    `span-and-sag`: a one-way span that sags under its own weight, with the strip width that takes
    part and its mass per area. `frequency-and-mass`: first frequency and effective mass.
    `mass-spring-damper`: the three values. `damping_ratio` left out is assumed 2 % (common practice
    1-3 %) and printed as assumed.
    """

    kind: Literal["rigid", "span-and-sag", "frequency-and-mass", "mass-spring-damper"]
    span: Length | None = None
    width: Length | None = None
    area_mass: AreaDensity | None = None
    sag: Length | None = None
    frequency: Frequency | None = None
    effective_mass: Mass | None = None
    damping_ratio: Ratio | None = None
    mass: Mass | None = None
    stiffness: Stiffness | None = None
    damping: Damping | None = None

    @model_validator(mode="after")
    def _values(self) -> "Floor":
        needed = NEEDED[self.kind]
        stated = [
            name for name in type(self).model_fields if name != "kind" and getattr(self, name) is not None
        ]
        missing = [name for name in needed if name not in stated and name != "damping_ratio"]
        if missing:
            raise refuse(f"floor of kind {self.kind}", "also " + ", ".join(f'"{name}"' for name in missing))
        extra = [name for name in stated if name not in needed]
        if extra:
            allowed = ", ".join(f'"{name}"' for name in needed) or "no further value"
            raise refuse(
                ", ".join(extra), f"only the keys of a floor of kind {self.kind}: {allowed}", at=extra[0]
            )
        for name in stated:
            value = getattr(self, name)
            if value < 0.0 or (value == 0.0 and name not in ("damping", "damping_ratio")):
                raise refuse(f"{name} = {value:g}", "a value above zero", at=name)
        if self.damping_ratio is not None and self.damping_ratio >= 1.0:
            raise refuse(f"{self.damping_ratio:g}", "a damping ratio below 1", at="damping_ratio")
        return self


@dataclass(frozen=True)
class FloorFreedom:
    """Mass kg, stiffness N/m and viscous damping N s/m of the floor's vertical freedom."""

    mass: float
    stiffness: float
    damping: float
    assumed: tuple[str, ...]


def floor_freedom(floor: Floor) -> FloorFreedom | None:
    """Return the floor's vertical freedom, or None for a rigid floor.

    Source: physics.floor (simply supported uniform span, first mode; common practice for damping).
    """
    if floor.kind == "rigid":
        return None
    if floor.kind == "mass-spring-damper":
        assert floor.mass is not None and floor.stiffness is not None and floor.damping is not None
        return FloorFreedom(floor.mass, floor.stiffness, floor.damping, ())
    assumed: list[str] = []
    ratio = floor.damping_ratio
    if ratio is None:
        ratio = COMMON_DAMPING_RATIO
        assumed.append(f"floor damping ratio {ratio:.0%} (common practice 1-3 %)")
    if floor.kind == "span-and-sag":
        assert floor.span is not None and floor.width is not None
        assert floor.area_mass is not None and floor.sag is not None
        frequency = float(floor_physics.floor_frequency_from_sag(floor.sag))
        mass = float(floor_physics.floor_modal_mass(floor.span * floor.width * floor.area_mass))
        assumed.append(
            f"floor: simply supported one-way span, first frequency {show(frequency, 'frequency')} from its sag, "
            f"effective mass {show(mass, 'mass')} (half of the strip), machine at midspan"
        )
    else:
        assert floor.frequency is not None and floor.effective_mass is not None
        frequency, mass = floor.frequency, floor.effective_mass
    m, k, c = floor_physics.floor_from_frequency(frequency, mass, ratio)
    return FloorFreedom(float(m), float(k), float(c), tuple(assumed))
