"""The range of a response curve over the stated scatter, at sampled points of it: for plots, no proof."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import combine
from detune.brief.brief import Brief, state_of
from detune.ground.errors import BriefError
from detune.report.response_data import ResponseCurve
from detune.response.damping_readings import readings_of
from detune.response.design import Design
from detune.response.direct import DirectMachine
from detune.response.direct_supremum import amplitudes_at
from detune.response.direct_views import DirectStatic
from detune.solvers.perturbed import perturbed
from detune.solvers.sampled_rows import sample_scatter
from detune.solvers.scatter_machine import scatter_map

Floats = NDArray[np.float64]
INSIDE = 16


@dataclass(frozen=True, eq=False)
class Band:
    """Least and greatest value (F,) at the speeds of a curve, over `points` points of the scatter, listed
    values included.

    What other sources add is taken as at listed values.
    """

    low: Floats
    high: Floats
    points: int


def scatter_bands(brief: Brief, design: Design, curves: Sequence[ResponseCurve]) -> tuple[Band | None, ...]:
    """Return the band of each curve, None where the study states no scatter (or a tolerance is missing)."""
    if brief.scatter is None:
        return (None,) * len(curves)
    try:
        found = scatter_map(brief, design)
    except BriefError:
        return (None,) * len(curves)
    low = [curve.value.copy() for curve in curves]
    high = [curve.value.copy() for curve in curves]
    points = sample_scatter(found, inside=INSIDE)
    for point in points:
        moved, mounted = perturbed(brief, design, found, point)
        machines: dict[tuple[str | None, str | None], DirectMachine] = {}
        for number, curve in enumerate(curves):
            values = []
            for reading in readings_of(design.mounts):
                key = (curve.state, reading)
                if key not in machines:
                    machines[key] = DirectMachine(moved, mounted, state_of(moved, curve.state), reading)
                values.append(_value(machines[key], curve))
            worst, least = np.max(values, axis=0), np.min(values, axis=0)
            edges = (1.0 + found.forcing[0], 1.0 + found.forcing[1])
            # The forcing scatters as well; a static part in the value is scaled with it, which widens the band.
            low[number] = np.minimum(
                low[number], least * (edges[0] if curve.pair[0].unit_load() is None else 1.0)
            )
            high[number] = np.maximum(
                high[number], worst * (edges[1] if curve.pair[0].unit_load() is None else 1.0)
            )
    return tuple(Band(a, b, len(points)) for a, b in zip(low, high, strict=True))


def _value(machine: DirectMachine, curve: ResponseCurve) -> Floats:
    allowable, place = curve.pair
    value = amplitudes_at(machine, (curve.pair,), list(curve.sets), curve.speed)[0]
    if curve.rest:
        value = combine(value, np.full(len(curve.speed), curve.rest), allowable.statistic())
    offset: Floats = value + float(allowable.offset(DirectStatic(machine), place)[0])
    return offset
