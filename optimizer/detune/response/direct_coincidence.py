"""The assessor's own look at which speeds can give tones of one frequency: their amplitudes add, not mean squares."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief, applies
from detune.brief.condition import Condition
from detune.brief.forcing.base import Tone

Floats = NDArray[np.float64]
ALIKE = 1e-9


def sharing(speeds: Sequence[Sequence[Tone]]) -> list[list[int]]:
    """Return the speeds, each given by its tones, in sets linked by frequencies they can have in common."""
    if len(speeds) < 2:
        return [[number] for number in range(len(speeds))]
    from scipy.sparse.csgraph import connected_components

    owner = np.array([number for number, tones in enumerate(speeds) for _ in tones])
    low = np.array([tone.order * tone.low for tones in speeds for tone in tones])
    high = np.array([tone.order * tone.high for tones in speeds for tone in tones])
    start, end = np.maximum.outer(low, low), np.minimum.outer(high, high)
    fixed = np.logical_or.outer(low == high, low == high)
    # Bands of a spectrum that only touch have no frequency in common.
    common = np.where(fixed, end - start >= -ALIKE * start, end - start > ALIKE * start)
    graph = np.zeros((len(speeds), len(speeds)), dtype=bool)
    np.logical_or.at(graph, (owner[:, None], owner[None, :]), common)
    count, label = connected_components(graph, directed=False)
    return [np.flatnonzero(label == each).tolist() for each in range(count)]


def added(speeds: Sequence[Sequence[Tone]], values: Sequence[Floats]) -> list[Floats]:
    """Return the values (R,) of each speed, those of one set as their sum."""
    return [np.sum([values[number] for number in members], axis=0) for members in sharing(speeds)]


def speeds_meet(brief: Brief, condition: Condition) -> bool:
    """Return whether two speeds of a condition can give tones of one frequency."""
    by_speed: dict[str, list[Tone]] = {}
    for forcing in brief.forcing:
        if applies(forcing.conditions, condition.name):
            for tone in forcing.tones(condition.shafts):
                by_speed.setdefault(tone.speed, []).append(tone)
    return len(sharing(tuple(by_speed.values()))) < len(by_speed)
