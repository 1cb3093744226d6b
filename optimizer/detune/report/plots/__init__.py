"""Plots, one a file. A new plot is one file and one line in `PLOTS`.

Each module has `TITLE`, `data(result)` (frozen numbers, or None where there is nothing to show),
`caption(data)`, `size(data)` in inches and `draw(data, figure)`, which returns the hover texts of its
markers by the identifier of their group.
"""

from types import ModuleType

from detune.report.plots import (
    front,
    margins,
    modes_speed,
    response,
    shock,
    spectral_density,
    stiffness_damping,
    why,
)

PLOTS: dict[str, ModuleType] = {
    "front": front,
    "margins": margins,
    "response": response,
    "spectral-density": spectral_density,
    "shock": shock,
    "modes-speed": modes_speed,
    "stiffness-damping": stiffness_damping,
    "why": why,
}

__all__ = ["PLOTS"]
