"""The form shared by limits at stations: which stations, and which part of a local vector."""

from typing import Literal

import numpy as np

from detune.brief.allowable.views import Places, Responses
from detune.brief.statement import Direction, Name

LocalDirection = Literal["axial", "lateral", "resultant"]


def chosen_stations(stations: tuple[Name, ...] | None, places: Places) -> tuple[str, ...]:
    """Return the named stations, or all of them; a station that has lost its part is left out."""
    return tuple(name for name in places.stations if stations is None or name in stations)


def local_part(phasor: Responses, direction: LocalDirection) -> Responses:
    """Return a local phasor vector (D, F, 3) with the axial part removed where only lateral counts."""
    if direction != "lateral":
        return phasor
    return np.asarray(phasor * np.array([1.0, 1.0, 0.0]))


def local_along(direction: LocalDirection) -> Direction | None:
    """Return the axial unit vector, or None for a resultant."""
    return (0.0, 0.0, 1.0) if direction == "axial" else None
