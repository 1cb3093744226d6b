"""Show an SI value in the unit an engineer would choose."""

from __future__ import annotations

import math

from detune.ground.unit_scale import kind_named, si_scale

# For each kind: unit, and the SI magnitude from which it is used.
_LADDERS: dict[str, tuple[tuple[str, float], ...]] = {
    "length": (("µm", 0.0), ("mm", 1e-4), ("m", 1.0)),
    "area": (("mm²", 0.0), ("m²", 0.1)),
    "volume": (("mm³", 0.0), ("cm³", 1e-6), ("m³", 0.1)),
    "mass": (("g", 0.0), ("kg", 1.0)),
    "time": (("µs", 0.0), ("ms", 1e-3), ("s", 1.0), ("h", 36000.0)),
    "temperature": (("degC", 0.0),),
    "temperature_difference": (("K", 0.0),),
    "force": (("N", 0.0), ("kN", 1e4), ("MN", 1e7)),
    "moment": (("N m", 0.0), ("kN m", 1e4)),
    "pressure": (("Pa", 0.0), ("kPa", 1e3), ("MPa", 1e5), ("GPa", 1e10)),
    "stiffness": (("N/m", 0.0), ("N/mm", 100.0), ("kN/mm", 1e7)),
    "stiffness_per_area": (("N/m³", 0.0), ("kN/m³", 1e3), ("N/mm³", 1e6)),
    "rotational_stiffness": (("N m/rad", 0.0), ("kN m/rad", 1e4), ("MN m/rad", 1e7)),
    "damping": (("N s/m", 0.0), ("kN s/m", 1e5)),
    "rotational_damping": (("N m s/rad", 0.0), ("kN m s/rad", 1e5)),
    "velocity": (("µm/s", 0.0), ("mm/s", 1e-4), ("m/s", 1.0)),
    "acceleration": (("mm/s²", 0.0), ("m/s²", 0.01)),
    "jerk": (("m/s³", 0.0),),
    "angle": (("mrad", 0.0), ("deg", 0.0175)),
    "frequency": (("mHz", 0.0), ("Hz", 0.01), ("kHz", 1e4)),
    "frequency_rate": (("Hz/s", 0.0),),
    "inertia": (("kg m²", 0.0),),
    "inertia_product": (("kg m²", 0.0),),
    "unbalance": (("g mm", 0.0), ("kg m", 0.1)),
    "acceleration_psd": (("(mm/s²)²/Hz", 0.0), ("(m/s²)²/Hz", 1e-4)),
    "velocity_psd": (("(µm/s)²/Hz", 0.0), ("(mm/s)²/Hz", 1e-8), ("(m/s)²/Hz", 0.1)),
    "displacement_psd": (("µm²/Hz", 0.0), ("mm²/Hz", 1e-9), ("m²/Hz", 0.1)),
    "force_psd": (("N²/Hz", 0.0), ("kN²/Hz", 1e8)),
    "hardness": (("ShA", 0.0),),
    "level": (("dB", 0.0),),
    "slope": (("dB/octave", 0.0),),
    "density": (("kg/m³", 0.0),),
    "area_density": (("kg/m²", 0.0),),
    "mass_per_length": (("kg/m", 0.0),),
    "power": (("mW", 0.0), ("W", 1.0), ("kW", 1e4), ("MW", 1e7)),
    "energy": (("mJ", 0.0), ("J", 1.0), ("kJ", 1e4), ("MJ", 1e7)),
}


def _number(value: float, digits: int) -> str:
    if value == 0.0:
        return "0"
    if not math.isfinite(value):
        return str(value)
    magnitude = math.floor(math.log10(abs(value)))
    if not -6 <= magnitude <= 9:
        mantissa, _, exponent = f"{value:.{max(digits - 1, 0)}e}".partition("e")
        if "." in mantissa:
            mantissa = mantissa.rstrip("0").rstrip(".")
        return f"{mantissa}e{int(exponent)}"
    # Digits before the decimal point are all kept: rounding 12346 to 12350 would hide a kilogram.
    text = f"{value:.{max(digits - 1 - magnitude, 0)}f}"
    return text.rstrip("0").rstrip(".") if "." in text else text


def show(value: float, kind: str, digits: int = 4) -> str:
    """Return an SI value as text with a unit, readable again by `parse`.

    value: SI (degC for a temperature). digits: significant digits; digits before the decimal point are never
    dropped. Exponents appear only outside 1e-6 to 1e10 of the unit. Raises KeyError for an unknown kind.
    """
    spec = kind_named(kind)
    if kind == "balance_grade":
        return f"G {_number(1000.0 * value, digits)}"
    if not spec.si_unit:
        return _number(value, digits)
    if value == 0.0:
        return f"0 {spec.si_unit.replace('^2', '²').replace('^3', '³')}"
    unit = _LADDERS[kind][0][0]
    for name, start in _LADDERS[kind]:
        if abs(value) >= start:
            unit = name
    scale, offset = si_scale(unit, kind)
    return f"{_number((value - float(offset)) / float(scale), digits)} {unit}"
