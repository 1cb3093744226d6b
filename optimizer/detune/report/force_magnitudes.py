"""The sum of the magnitudes of all forces into the floor, which no phases between them can exceed."""

from typing import Any

import numpy as np
from numpy.typing import NDArray
from pydantic import PrivateAttr

from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.allowable.views import Responses, ResponseView
from detune.response.direct import FLOOR, DirectMachine

Floats = NDArray[np.float64]


class ForceMagnitudes(TransmittedForce):
    """Along each axis the magnitudes of the forces through all parts on the floor, added; for reports alone.

    The given connections count together as one force. Under noise and in time it is the same sum at each frequency
    and at each instant.
    """

    _parts: tuple[tuple[str, float, Floats], ...] = PrivateAttr(default=())

    @classmethod
    def of(cls, machine: DirectMachine, axis: str) -> "ForceMagnitudes":
        """Return the sum for the parts that stand on the floor in a machine's state."""
        stated: dict[str, Any] = {"through": "floor", "direction": axis, "measure": "peak", "limit": 1.0}
        made = cls.model_validate({"kind": "transmitted-force", **stated})
        made._parts = tuple(
            (station.name, machine.share(station) / machine.factor(station), machine.axes(station))
            for station in machine.brief.stations
            if station.to == FLOOR and machine.share(station) > 0.0
        )
        return made

    def observed(self, view: ResponseView, place: str) -> Responses:
        rest = view.total_force("floor")
        added = np.zeros(rest.shape)
        for station, count, axes in self._parts:
            force = count * view.station_force(station) @ axes.T
            added, rest = added + np.abs(force), rest - force
        return np.asarray(added + np.abs(rest))
