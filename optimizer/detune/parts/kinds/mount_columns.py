"""The columns of a mount list."""

from __future__ import annotations

from detune.parts.columns import Column, Limits
from detune.parts.prices import COST_COLUMNS

_POSITIVE = Limits(low=0.0, low_open=True)
_NOT_NEGATIVE = Limits(low=0.0)
_ABSOLUTE_ZERO = Limits(low=-273.15)
_ONE = "none; each row fills one damping column"
_PAIR = "none; static and dynamic are stated both or neither, or dynamic_to_static beside one"
_STATIC = "from deflection_rated, curve_file or dynamic_to_static, one of which is then due"
_DYNAMIC = "from natural_frequency_rated or dynamic_to_static, one of which is then due"

COLUMNS: tuple[Column, ...] = (
    Column("part", "text", "", "part number, once in a list", True, "none"),
    Column("family", "text", "", "rubber, spring, or another word", True, "none"),
    Column("stiffness_z_static", "stiffness", "N/mm", "axial stiffness under a steady load",
           False, _STATIC, _POSITIVE),
    Column("stiffness_z_dynamic", "stiffness", "N/mm", "axial stiffness in vibration",
           False, _DYNAMIC, _POSITIVE),
    Column("stiffness_x_static", "stiffness", "N/mm", "lateral stiffness under a steady load",
           False, _PAIR, _POSITIVE),
    Column("stiffness_x_dynamic", "stiffness", "N/mm", "lateral stiffness in vibration",
           False, _PAIR, _POSITIVE),
    Column("stiffness_y_static", "stiffness", "N/mm", "stiffness in the other lateral direction, steady load",
           False, "as stiffness_x_static", _POSITIVE),
    Column("stiffness_y_dynamic", "stiffness", "N/mm", "stiffness in the other lateral direction, vibration",
           False, "as stiffness_x_dynamic", _POSITIVE),
    Column("deflection_rated", "length", "mm", "static deflection at load_rated",
           False, "none", _POSITIVE),
    Column("natural_frequency_rated", "frequency", "Hz", "axial natural frequency at load_rated",
           False, "none", _POSITIVE),
    Column("dynamic_to_static", "ratio", "", "dynamic over static stiffness; fills the one that is not stated"
           " (rubber, neoprene, spring)", False, "none; one never stands in for the other", Limits(0.9, 10.0)),
    Column("loss_factor", "ratio", "", "loss factor of the dynamic stiffness, all axes",
           False, _ONE, Limits(0.0, 1.5)),
    Column("damping_ratio", "ratio", "", "viscous damping ratio at load_rated, each axis",
           False, _ONE, Limits(0.0, 1.0)),
    Column("viscous", "damping", "N s/m", "axial damping coefficient",
           False, _ONE, _NOT_NEGATIVE),
    Column("viscous_lateral", "damping", "N s/m", "lateral damping coefficient, beside viscous",
           False, "assumed: 0 N s/m", _NOT_NEGATIVE),
    Column("amplification", "ratio", "", "amplification at resonance, read as 1 / loss factor",
           False, _ONE, Limits(1.0, 1000.0, low_open=True)),
    Column("damping_kind", "text", "", "viscous, loss factor or unknown",
           False, "as the damping column is meant"),
    Column("relaxation_ratio", "ratio", "", "stiffness in series with the dashpot of viscous, over"
           " stiffness_dynamic", False, "a dashpot without a spring", Limits(0.0, 1000.0, low_open=True)),
    Column("law_file", "text", "", "file of stiffness and loss factor over frequency and temperature",
           False, "the same at every frequency"),
    Column("amplitude_file", "text", "", "file of stiffness and loss factor over amplitude",
           False, "the same at every amplitude"),
    Column("curve_file", "text", "", "file of static axial load over deflection, its last point the stop",
           False, "a straight line"),
    Column("stiffness_follows_load", "yes-no", "", "air spring: axial stiffness proportional to the static"
           " load, stated at load_rated", False, "no"),
    Column("amplitude_min", "length", "mm", "least peak dynamic deflection for which the row holds",
           False, "not stated", _NOT_NEGATIVE),
    Column("amplitude_max", "length", "mm", "greatest peak dynamic deflection for which the row holds",
           False, "not stated", _POSITIVE),
    Column("load_min", "force", "N", "least static axial load, compression positive", True, "none"),
    Column("load_max", "force", "N", "greatest static axial load", True, "none", _POSITIVE),
    Column("load_rated", "force", "N", "rated static axial load", False, "none", _POSITIVE),
    Column("deflection_max", "length", "mm", "greatest axial deflection from free, all causes together",
           False, "the end of the curve, else no limit of the part's own", _POSITIVE),
    Column("pulls", "yes-no", "", "whether the mount may be in tension", False, "assumed: no"),
    Column("free_height", "length", "mm", "height without load", False, "none", _POSITIVE),
    Column("mass", "mass", "kg", "mass of one mount", False, "none", _POSITIVE),
    *COST_COLUMNS,
    Column("tolerance", "ratio", "%", "stiffness of a delivered mount, plus or minus",
           False, "assumed: rubber 15 %, spring 10 %; none for another family",
           Limits(0.0, 1.0, high_open=True)),
    Column("temperature_min", "temperature", "degC", "least temperature in use",
           False, "none", _ABSOLUTE_ZERO),
    Column("temperature_max", "temperature", "degC", "greatest temperature in use",
           False, "none", _ABSOLUTE_ZERO),
    Column("stock", "count", "", "mounts that can be had", False, "no limit", _NOT_NEGATIVE),
)  # fmt: skip
