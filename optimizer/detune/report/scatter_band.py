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
    # The forcing scatters as well; a static part in the value is scaled with it, which widens the band.
    edges = (1.0 + found.forcing[0], 1.0 + found.forcing[1])
    together = _under_one_load(curves)
    for point in points:
        moved, mounted = perturbed(brief, design, found, point)
        machines = {
            (state, reading): DirectMachine(moved, mounted, state_of(moved, state), reading)
            for state in dict.fromkeys(curve.state for curve in curves)
            for reading in readings_of(design.mounts)
        }
        for numbers in together:
            asked = [curves[number] for number in numbers]
            values = [
                _values(machines[asked[0].state, reading], asked) for reading in readings_of(design.mounts)
            ]
            for number, least, most in zip(
                numbers, np.min(values, axis=0), np.max(values, axis=0), strict=True
            ):
                scaled = edges if curves[number].pair[0].unit_load() is None else (1.0, 1.0)
                low[number] = np.minimum(low[number], least * scaled[0])
                high[number] = np.maximum(high[number], most * scaled[1])
    return tuple(Band(a, b, len(points)) for a, b in zip(low, high, strict=True))


def _under_one_load(curves: Sequence[ResponseCurve]) -> list[list[int]]:
    """Return the numbers of the curves in sets that look at one motion: state, tones and speeds are the same."""
    sets: list[list[int]] = []
    for number, curve in enumerate(curves):
        for members in sets:
            first = curves[members[0]]
            alike = (first.state, first.sets) == (curve.state, curve.sets)
            if alike and np.array_equal(first.speed, curve.speed):
                members.append(number)
                break
        else:
            sets.append([number])
    return sets


def _values(machine: DirectMachine, curves: Sequence[ResponseCurve]) -> Floats:
    """Return the values (C, F) of curves under one load on a machine."""
    first, static = curves[0], DirectStatic(machine)
    amplitude = amplitudes_at(machine, tuple(c.pair for c in curves), list(first.sets), first.speed)
    values = []
    for curve, own in zip(curves, amplitude, strict=True):
        allowable, place = curve.pair
        rest = np.full(len(own), curve.rest)
        value = combine(own, rest, allowable.statistic()) if curve.rest else own
        values.append(value + float(allowable.offset(static, place)[0]))
    return np.stack(values)
