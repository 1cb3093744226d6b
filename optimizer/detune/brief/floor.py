"""The floor under the stations: rigid, one vertical freedom known in one of four ways, or a matrix between stations."""

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Literal

import numpy as np
from pydantic import PrivateAttr, ValidationInfo, model_validator

from detune.brief.shares import LossFactor
from detune.brief.statement import (
    AreaDensity,
    AxisName,
    Damping,
    Frequency,
    Length,
    Mass,
    Name,
    Ratio,
    Statement,
    Stiffness,
    Text,
    listed_once,
    refuse,
)
from detune.ground.units import show
from detune.physics import floor as floor_physics

if TYPE_CHECKING:
    from detune.brief.floor_files import FloorMatrices, FloorTable

NEEDED: dict[str, tuple[str, ...]] = {
    "rigid": (),
    "span-and-sag": ("span", "width", "area_mass", "sag", "damping_ratio"),
    "frequency-and-mass": ("frequency", "effective_mass", "damping_ratio"),
    "mass-spring-damper": ("mass", "stiffness", "damping"),
    "dynamic-stiffness": ("file", "static_stiffness"),
    "stiffness-matrix": ("stations", "directions", "stiffness_matrix", "mass_matrix", "loss_factor"),
}
OPTIONAL = ("damping_ratio", "directions", "mass_matrix", "loss_factor")
COMMON_DAMPING_RATIO = 0.02


class Floor(Statement):
    """What the stations stand on.

    `span-and-sag`: a one-way span that sags under its own weight, with the strip width that takes
    part and its mass per area. `frequency-and-mass`: first frequency and effective mass.
    `mass-spring-damper`: the three values. `damping_ratio` left out is assumed 2 % (common practice
    1-3 %) and printed as assumed.

    `dynamic-stiffness`: the vertical dynamic stiffness over frequency from a CSV `file` (columns frequency,
    stiffness, and imaginary or loss_factor), mass included, straight between its rows and refused outside
    them, with the `static_stiffness` for loads at rest. `stiffness-matrix`: the stiffness between the places
    under `stations` in `directions` (z alone where left out), station by station, inline or as a CSV file
    with one column "station direction [unit]" for each; with the mass matrix of the same places where the
    floor has mass that counts, and one loss factor (assumed 4 % where left out). Directions that are not
    named are held.
    """

    kind: Literal[
        "rigid",
        "span-and-sag",
        "frequency-and-mass",
        "mass-spring-damper",
        "dynamic-stiffness",
        "stiffness-matrix",
    ]
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
    file: Text | None = None
    static_stiffness: Stiffness | None = None
    stations: tuple[Name, ...] | None = None
    directions: tuple[AxisName, ...] | None = None
    stiffness_matrix: Text | tuple[tuple[Stiffness, ...], ...] | None = None
    mass_matrix: Text | tuple[tuple[Mass, ...], ...] | None = None
    loss_factor: LossFactor | None = None
    _matrices: "FloorMatrices | None" = PrivateAttr(default=None)
    _table: "FloorTable | None" = PrivateAttr(default=None)

    @property
    def matrices(self) -> "FloorMatrices | None":
        """The matrices between the stations, None for a floor of another kind."""
        return self._matrices

    @property
    def table(self) -> "FloorTable | None":
        """The dynamic stiffness over frequency, None for a floor of another kind."""
        return self._table

    def data_files(self) -> tuple[str, ...]:
        """Return the files the floor was read from, as the study names them."""
        named = (self.file, self.stiffness_matrix, self.mass_matrix)
        return tuple(name for name in named if isinstance(name, str))

    @model_validator(mode="after")
    def _values(self) -> "Floor":
        needed = NEEDED[self.kind]
        stated = [
            name for name in type(self).model_fields if name != "kind" and getattr(self, name) is not None
        ]
        missing = [name for name in needed if name not in stated and name not in OPTIONAL]
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
            if not isinstance(value, float):
                continue
            if value < 0.0 or (value == 0.0 and name not in ("damping", "damping_ratio", "loss_factor")):
                raise refuse(f"{name} = {value:g}", "a value above zero", at=name)
        if self.damping_ratio is not None and self.damping_ratio >= 1.0:
            expected = 'a damping ratio below 1, such as 0.02 or "2 %"'
            raise refuse(f"{self.damping_ratio:g}", expected, at="damping_ratio")
        return self

    @model_validator(mode="after")
    def _read(self, info: ValidationInfo) -> "Floor":
        # A floor that is put into a brief is checked once more, then without its folder.
        if self._matrices is not None or self._table is not None:
            return self
        folder = Path((info.context or {}).get("folder", "."))
        if self.kind == "dynamic-stiffness" and self.file is not None:
            from detune.brief.floor_files import read_dynamic_stiffness

            self._table = read_dynamic_stiffness(folder, self.file)
        if self.kind == "stiffness-matrix" and self.stations and self.stiffness_matrix is not None:
            from detune.brief.floor_files import freedom_names, read_matrices

            listed_once(self.stations)
            names = freedom_names(self.stations, listed_once(self.directions) or ("z",))
            self._matrices = read_matrices(folder, names, self.stiffness_matrix, self.mass_matrix)
        return self


@dataclass(frozen=True)
class FloorFreedom:
    """Mass kg, stiffness N/m and viscous damping N s/m of the floor's vertical freedom.

    With a `table` that is what the dynamic stiffness is written around: it is stiffness - w^2 mass, and what
    the table has beyond that. The stiffness is then the static one.
    """

    mass: float
    stiffness: float
    damping: float
    assumed: tuple[str, ...]
    table: "FloorTable | None" = None


def floor_freedom(floor: Floor) -> FloorFreedom | None:
    """Return the floor's vertical freedom, or None for a rigid floor and one known between stations.

    Source: physics.floor (simply supported uniform span, first mode; common practice for damping).
    """
    if floor.kind in ("rigid", "stiffness-matrix"):
        return None
    if floor.table is not None:
        return _around(floor.table, float(floor.static_stiffness or 0.0))
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


def _around(table: "FloorTable", static: float) -> FloorFreedom:
    """Return a mass and a spring that a table of dynamic stiffness is written around; any would do, a near one best.

    The mass is the least-squares one of Re D = k - w^2 m, or where the real part rises, one of little weight.
    """
    squares = (2.0 * np.pi * table.frequency) ** 2
    fitted = float(np.sum((static - table.stiffness.real) * squares) / np.sum(squares**2))
    mass = max(fitted, 1e-3 * static / float(squares[-1]))
    told = (
        f"floor: modes are listed on a spring of {show(static, 'stiffness')} and a mass of "
        f"{show(mass, 'mass')} near its table; responses are on the table itself"
    )
    return FloorFreedom(mass, static, 0.0, (told,), table)
