"""The kinds of number a brief or a catalog may state, each with its SI unit and examples."""

from __future__ import annotations

from dataclasses import dataclass

from detune.ground.unit_table import LetterG


@dataclass(frozen=True)
class Kind:
    """A kind of number. `meaning` is the noun a message uses; `examples` can be parsed as they stand.

    bare_number: whether a number without a unit is understood.
    """

    name: str
    si_unit: str
    meaning: str
    examples: tuple[str, ...]
    bare_number: bool = False


_ALL = (
    Kind("length", "m", "length", ("12 mm", "0.45 m", "3.5 in")),
    Kind("area", "m^2", "area", ("1200 mm^2", "0.02 m^2")),
    Kind("volume", "m^3", "volume", ("150 cm^3", "2 L")),
    Kind("mass", "kg", "mass", ("640 kg", "350 g", "28 lb")),
    Kind("time", "s", "time", ("11 ms", "30 s", "2 h")),
    Kind("temperature", "degC", "temperature", ("-20 degC", "68 degF", "293 K")),
    Kind("temperature_difference", "K", "temperature difference", ("15 K",)),
    Kind("force", "N", "force", ("1200 N", "3.5 kN", "50 kgf")),
    Kind("moment", "N m", "moment", ("85 N m", "1.2 kN m", "40 lbf ft")),
    Kind("pressure", "Pa", "pressure", ("4 MPa", "6 bar", "60 psi")),
    Kind("stiffness", "N/m", "stiffness", ("4.2 N/mm", "180 kN/m", "28 lbf/in")),
    Kind("stiffness_per_area", "N/m^3", "stiffness per area", ("0.05 N/mm^3", "5e7 N/m^3")),
    Kind("rotational_stiffness", "N m/rad", "rotational stiffness", ("900 N m/rad", "16 N m/deg")),
    Kind("damping", "N s/m", "damping coefficient", ("250 N s/m", "0.3 N s/mm", "1.4 lbf s/in")),
    Kind("rotational_damping", "N m s/rad", "rotational damping coefficient", ("12 N m s/rad",)),
    Kind("velocity", "m/s", "velocity", ("4.5 mm/s", "0.18 in/s")),
    Kind("acceleration", "m/s^2", "acceleration", ("0.3 g", "2.5 m/s^2")),
    Kind("jerk", "m/s^3", "jerk", ("2 m/s^3", "0.5 g/s")),
    Kind("angle", "rad", "angle", ("45 deg", "2 mrad", "1.5 mm/m")),
    Kind("frequency", "Hz", "frequency", ("24.5 Hz", "1480 rpm", "155 rad/s")),
    Kind("frequency_rate", "Hz/s", "rate of frequency", ("2 Hz/s", "120 rpm/s")),
    Kind("inertia", "kg m^2", "moment of inertia", ("85 kg m^2", "2900 lb ft^2")),
    Kind("inertia_product", "kg m^2", "product of inertia", ("-3.5 kg m^2",)),
    Kind("unbalance", "kg m", "unbalance", ("6.3 g mm", "0.15 kg m", "2 oz in")),
    Kind("balance_grade", "m/s", "balance grade", ("G 6.3", "2.5 mm/s")),
    Kind(
        "acceleration_psd", "(m/s^2)^2/Hz", "acceleration spectral density", ("0.04 g^2/Hz", "2 (m/s^2)^2/Hz")
    ),
    Kind("velocity_psd", "(m/s)^2/Hz", "velocity spectral density", ("0.2 (mm/s)^2/Hz",)),
    Kind("displacement_psd", "m^2/Hz", "displacement spectral density", ("0.01 mm^2/Hz",)),
    Kind("force_psd", "N^2/Hz", "force spectral density", ("12 N^2/Hz",)),
    Kind("ratio", "", "ratio", ("0.1", "10 %"), bare_number=True),
    Kind("count", "", "count", ("4",), bare_number=True),
    Kind("cost", "", "cost", ("1250", "38.5"), bare_number=True),
    Kind("hardness", "ShA", "Shore A hardness", ("55", "55 ShA"), bare_number=True),
    Kind("level", "dB", "level in decibels", ("6 dB", "-3 dB")),
    Kind("slope", "dB/octave", "slope of a spectrum", ("3 dB/oct", "-6 dB/octave")),
    Kind("density", "kg/m^3", "density", ("1150 kg/m^3", "7.85 g/cm^3")),
    Kind("area_density", "kg/m^2", "mass per area", ("360 kg/m^2",)),
    Kind("mass_per_length", "kg/m", "mass per length", ("12.5 kg/m", "8 lb/ft")),
    Kind("power", "W", "power", ("15 kW", "20 hp")),
    Kind("energy", "J", "energy", ("35 J", "1.2 kJ")),
)

KINDS: dict[str, Kind] = {kind.name: kind for kind in _ALL}

_GRAVITY = frozenset({"acceleration", "jerk", "acceleration_psd"})
_GRAM = frozenset(
    {"mass", "unbalance", "inertia", "inertia_product", "density", "area_density", "mass_per_length"}
)


def letter_g(kind: str) -> LetterG:
    """Say what the letter g means in a field of this kind: gravity, gram, or neither."""
    if kind in _GRAVITY:
        return "gravity"
    return "gram" if kind in _GRAM else "refused"
