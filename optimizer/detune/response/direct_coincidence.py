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
    owner = np.array([number for number, tones in enumerate(speeds) for _ in tones], dtype=int)
    low = np.array([tone.order * tone.low for tones in speeds for tone in tones])
    high = np.array([tone.order * tone.high for tones in speeds for tone in tones])
    label = np.arange(len(speeds))
    for number in range(len(low)):
        start, end = np.maximum(low, low[number]), np.minimum(high, high[number])
        fixed = (low == high) | (low[number] == high[number])
        # Bands of a spectrum that only touch have no frequency in common.
        common = np.where(fixed, end - start >= -ALIKE * start, end - start > ALIKE * start)
        met = np.unique(label[owner[common]])
        if len(met) > 1:
            label[np.isin(label, met)] = met[0]
    return [np.flatnonzero(label == each).tolist() for each in np.unique(label)]


def added(sets: Sequence[Sequence[int]], values: Sequence[Floats]) -> list[Floats]:
    """Return the values (R,) of each speed, those of one set as their sum."""
    return [np.sum([values[number] for number in members], axis=0) for members in sets]


def speeds_meet(brief: Brief, condition: Condition) -> bool:
    """Return whether two speeds of a condition can give tones of one frequency."""
    by_speed: dict[str, list[Tone]] = {}
    for forcing in brief.forcing:
        if applies(forcing.conditions, condition.name):
            for tone in forcing.tones(condition.shafts):
                by_speed.setdefault(tone.speed, []).append(tone)
    return len(sharing(tuple(by_speed.values()))) < len(by_speed)
