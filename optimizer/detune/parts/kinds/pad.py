"""Pads: rubber sheet cut to size, whose stiffness follows from its hardness or modulus and from its shape.

All stiffness of a pad is an estimate: good for a first size, not for a proof.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.ground.errors import Fault
from detune.ground.units import show
from detune.parts.assumed import Assumed
from detune.parts.columns import Column, Limits
from detune.parts.kinds.mount import Mount
from detune.parts.kinds.rows import column_array, optional, stated
from detune.parts.table import Table, rows_of

_POSITIVE = Limits(low=0.0, low_open=True)
_ABSOLUTE_ZERO = Limits(low=-273.15)
_BESIDE = "none; due beside modulus"

COLUMNS: tuple[Column, ...] = (
    Column("part", "text", "", "part number, once in a list", True, "none"),
    Column("family", "text", "", "rubber, neoprene, or another word", True, "none"),
    Column("hardness", "hardness", "ShA", "hardness, IRHD or Shore A", False,
           "none; each row fills hardness or modulus", Limits(30.0, 75.0)),
    Column("modulus", "pressure", "MPa", "static Young's modulus E0", False,
           "none; each row fills hardness or modulus", _POSITIVE),
    Column("modulus_shear", "pressure", "MPa", "static shear modulus", False, _BESIDE, _POSITIVE),
    Column("shape_constant", "ratio", "", "k in E_c = E0 (1 + 2 k S^2)", False, _BESIDE,
           Limits(0.0, 1.5, low_open=True)),
    Column("dynamic_to_static", "ratio", "", "dynamic over static stiffness", True, "none",
           Limits(0.9, 10.0)),
    Column("loss_factor", "ratio", "", "loss factor of the dynamic stiffness", True, "none",
           Limits(0.0, 1.5)),
    Column("thickness", "length", "mm", "thickness of the sheet", True, "none", _POSITIVE),
    Column("sheet_width", "length", "mm", "shorter side of a whole sheet", True, "none", _POSITIVE),
    Column("sheet_length", "length", "mm", "longer side of a whole sheet", True, "none", _POSITIVE),
    Column("cut_min", "length", "mm", "shortest side that may be cut", True, "none", _POSITIVE),
    Column("shape_min", "ratio", "", "least shape factor: loaded area over area free to bulge", False,
           "no limit", _POSITIVE),
    Column("shape_max", "ratio", "", "greatest shape factor", False, "no limit", _POSITIVE),
    Column("pressure_max", "pressure", "MPa", "greatest static pressure", True, "none", _POSITIVE),
    Column("strain_max", "ratio", "%", "greatest deflection over thickness, all causes together", False,
           "no limit of the part's own", Limits(0.0, 0.6, low_open=True)),
    Column("area_density", "area_density", "kg/m^2", "mass per area", False, "none", _POSITIVE),
    Column("cost_per_m2", "cost", "", "price of a square metre, every list in one currency", True, "none",
           _POSITIVE),
    Column("tolerance", "ratio", "%", "stiffness of a delivered pad, plus or minus", False,
           "assumed: 20 % by hardness, 15 % by modulus", Limits(0.0, 1.0, high_open=True)),
    Column("temperature_min", "temperature", "degC", "least temperature in use", False, "none",
           _ABSOLUTE_ZERO),
    Column("temperature_max", "temperature", "degC", "greatest temperature in use", False, "none",
           _ABSOLUTE_ZERO),
)  # fmt: skip

TOLERANCE_BY_HARDNESS, TOLERANCE_BY_MODULUS = 0.20, 0.15
"""Common practice: hardness is good to 5 Shore and with it the stiffness to 20 %; rubber else to 15 %."""


@dataclass(frozen=True, slots=True)
class Pad:
    """One row of a list of sheets, in SI. None where the list states nothing.

    hardness: IRHD. modulus, modulus_shear, pressure_max: Pa. Lengths: m. area_density: kg/m^2. cost_per_m2:
    price of a square metre. tolerance: of the stiffness, as a ratio.
    """

    catalog: str
    file: str
    line: int
    part: str
    family: str
    hardness: float | None
    modulus: float | None
    modulus_shear: float | None
    shape_constant: float | None
    dynamic_to_static: float
    loss_factor: float
    thickness: float
    sheet_width: float
    sheet_length: float
    cut_min: float
    shape_min: float | None
    shape_max: float | None
    pressure_max: float
    strain_max: float | None
    area_density: float | None
    cost_per_m2: float
    tolerance: float
    temperature_min: float | None
    temperature_max: float | None


@dataclass(frozen=True, slots=True, eq=False)
class PadArrays:
    """P sheets as read-only arrays (P,), SI. area_density is nan and strain_max inf where a list states none."""

    thickness: NDArray[np.float64]
    dynamic_to_static: NDArray[np.float64]
    loss_factor: NDArray[np.float64]
    pressure_max: NDArray[np.float64]
    strain_max: NDArray[np.float64]
    area_density: NDArray[np.float64]
    cost_per_m2: NDArray[np.float64]
    tolerance: NDArray[np.float64]

    def __len__(self) -> int:
        return len(self.thickness)


def check(table: Table) -> list[Fault]:
    """Return what is wrong between the cells of each row."""
    faults: list[Fault] = []
    hard, modulus = table.given("hardness"), table.given("modulus")
    choice = "exactly one of hardness and modulus"
    if not table.has("hardness") and not table.has("modulus"):
        faults.append(table.header_fault("hardness", f"{choice}; the list states neither"))
    else:
        at = "hardness" if table.has("hardness") else "modulus"
        faults += [table.fault(row, at, choice) for row in rows_of(hard == modulus)]
    for name in ("modulus_shear", "shape_constant"):
        wanted = modulus & ~table.given(name)
        if wanted.any() and not table.has(name):
            faults.append(table.header_fault(name, "a column of this name, because modulus is stated"))
        elif wanted.any():
            expected = "a value, because modulus is stated"
            faults += [table.fault(row, name, expected) for row in rows_of(wanted)]
        for row in rows_of(hard & table.given(name)):
            faults.append(table.fault(row, name, "an empty cell beside hardness"))
    for low, high, kind in (
        ("sheet_width", "sheet_length", "length"),
        ("cut_min", "sheet_width", "length"),
        ("shape_min", "shape_max", "ratio"),
        ("temperature_min", "temperature_max", "temperature"),
    ):
        for row in rows_of(table.numbers(low) > table.numbers(high)):
            text = show(float(table.numbers(high)[row]), kind)
            faults.append(table.fault(row, low, f"at most {high}, which is {text}"))
    return faults


def build(table: Table, catalog: str) -> tuple[tuple[Pad, ...], tuple[Assumed, ...]]:
    """Make the sheets of a table without faults, and list what was assumed for them. catalog: its name."""
    told, hard = table.given("tolerance"), table.given("hardness")
    assumed = np.where(hard, TOLERANCE_BY_HARDNESS, TOLERANCE_BY_MODULUS)
    rows = zip(
        table.lines,
        table.texts("part"),
        table.texts("family"),
        *(optional(table, name) for name in ("hardness", "modulus", "modulus_shear", "shape_constant")),
        *(
            table.numbers(name).tolist()
            for name in (
                "dynamic_to_static",
                "loss_factor",
                "thickness",
                "sheet_width",
                "sheet_length",
                "cut_min",
            )
        ),
        optional(table, "shape_min"),
        optional(table, "shape_max"),
        table.numbers("pressure_max").tolist(),
        optional(table, "strain_max"),
        optional(table, "area_density"),
        table.numbers("cost_per_m2").tolist(),
        np.where(told, table.numbers("tolerance"), assumed).tolist(),
        optional(table, "temperature_min"),
        optional(table, "temperature_max"),
        strict=True,
    )
    parts = table.texts("part")
    found = []
    for row in rows_of(~told):
        why = (
            "common practice where only the hardness is known" if hard[row] else "common practice for rubber"
        )
        found.append(Assumed(catalog, parts[row], "tolerance", f"{100 * assumed[row]:g} %", why))
    return tuple(Pad(catalog, table.file, *row) for row in rows), tuple(found)


def value(pad: Pad, column: str) -> float | str | bool | None:
    """Return a sheet's figure in a column, in SI, None where the list states nothing. Raises KeyError."""
    return stated(pad, column, COLUMNS)


def files(pad: Pad) -> tuple[str, ...]:
    """Return the further files that the row was read from: none."""
    return ()


def pad_arrays(pads: Iterable[Pad]) -> PadArrays:
    """Gather sheets into arrays, in the order given."""
    parts = tuple(pads)
    return PadArrays(
        thickness=column_array([part.thickness for part in parts]),
        dynamic_to_static=column_array([part.dynamic_to_static for part in parts]),
        loss_factor=column_array([part.loss_factor for part in parts]),
        pressure_max=column_array([part.pressure_max for part in parts]),
        strain_max=column_array([part.strain_max for part in parts], math.inf),
        area_density=column_array([part.area_density for part in parts]),
        cost_per_m2=column_array([part.cost_per_m2 for part in parts]),
        tolerance=column_array([part.tolerance for part in parts]),
    )


def cut(pad: Pad, width: float, length: float) -> Mount:
    """Return a rectangle cut from a sheet as a mount, width and length in m along its x and y.

    Static compression stiffness E_c A/h with E_c = E0 (1 + 2 k S^2) and S = a b / (2 h (a + b)), shear
    stiffness G A/h; both faces held from sliding (P. B. Lindley, Engineering Design with Natural Rubber; form
    and constants in `physics.pads`). Dynamic stiffness by the row's ratio. The load may reach pressure_max, or
    what deflects the pad by strain_max. `approximate` of the mount says that this is an estimate. Raises
    ValueError for a size that cannot be cut from the sheet or whose shape factor is outside the row's range.
    """
    from detune.physics import pads

    shape = float(pads.rectangle_shape_factor(length, width, pad.thickness))
    _require_size(pad, width, length, shape)
    area = width * length
    if pad.hardness is not None:
        axial, lateral = (float(k) for k in pads.pad_stiffness(pad.hardness, area, pad.thickness, shape))
        source = "its hardness"
    else:
        assert pad.modulus is not None and pad.modulus_shear is not None and pad.shape_constant is not None
        axial = pad.modulus * (1.0 + 2.0 * pad.shape_constant * shape**2) * area / pad.thickness
        lateral = pad.modulus_shear * area / pad.thickness
        source = "its modulus"
    ratio = pad.dynamic_to_static
    travel = None if pad.strain_max is None else pad.strain_max * pad.thickness
    load = pad.pressure_max * area
    return Mount(
        catalog=pad.catalog,
        file=pad.file,
        line=pad.line,
        part=piece_name(pad, width, length),
        family=pad.family,
        stiffness_static=(lateral, lateral, axial),
        stiffness_dynamic=(ratio * lateral, ratio * lateral, ratio * axial),
        loss_factor=(pad.loss_factor,) * 3,
        viscous=(0.0, 0.0, 0.0),
        damping_from="loss_factor",
        damping_stated=pad.loss_factor,
        load_min=0.0,
        load_max=load if travel is None else min(load, axial * travel),
        load_rated=None,
        deflection_max=travel,
        pulls=False,
        free_height=pad.thickness,
        mass=None if pad.area_density is None else pad.area_density * area,
        cost=pad.cost_per_m2 * area,
        tolerance=pad.tolerance,
        temperature_min=pad.temperature_min,
        temperature_max=pad.temperature_max,
        stock=None,
        damping_kind="loss factor",
        approximate=f"stiffness estimated from {source} and shape factor {shape:.2g}",
    )


def piece_name(pad: Pad, width: float, length: float) -> str:
    """Return what a rectangle of width and length (m) of a sheet is called."""
    return f"{pad.part} {1e3 * width:g} x {1e3 * length:g} mm"


def _require_size(pad: Pad, width: float, length: float, shape: float) -> None:
    short, long = sorted((width, length))
    if short < pad.cut_min or short > pad.sheet_width or long > pad.sheet_length:
        sheet = f"{1e3 * pad.sheet_width:g} x {1e3 * pad.sheet_length:g} mm"
        raise ValueError(
            f"{pad.part}: a piece of {1e3 * width:g} x {1e3 * length:g} mm cannot be cut from a sheet of "
            f"{sheet}; no side may be under {1e3 * pad.cut_min:g} mm"
        )
    low, high = pad.shape_min or 0.0, pad.shape_max or math.inf
    if not low <= shape <= high:
        raise ValueError(f"{pad.part}: shape factor {shape:.3g} is outside its range, {low:g} to {high:g}")
