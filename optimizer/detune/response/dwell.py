"""Speeds not to dwell at, for one design of a batch at a time: where any limit of a condition is exceeded.

The limits are those on the response under the condition's tones, of which one shaft's speed is moved and all
others stand at their worst, and the separation of every natural frequency from every order of that shaft.
"""

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.separation import Separation
from detune.brief.condition import Interval
from detune.physics import envelope
from detune.physics.crossing import stretches_above
from detune.response.assemble import dynamic_matrices
from detune.response.coincidence import any_meet
from detune.response.designs import Designs
from detune.response.evaluate import Rows, family_amplitude, response_values
from detune.response.loads import Family
from detune.response.model import Model
from detune.response.modes import ModeBatch, mode_batch, sharp_poles
from detune.response.views_static import static_batch

Floats = NDArray[np.float64]
TWO_PI = 2.0 * np.pi
# At the edge of a band a separation is just met; this share further out rounding cannot miss it.
OUTWARD = 1e-9


def exceeding_bands(
    model: Model, design: Designs, rows: Rows, shaft: str, separation: Separation | None
) -> list[Interval] | None:
    """Return the speeds (Hz) of a shaft at which one design (D = 1) exceeds a limit; None: at every speed.

    rows: the limits of the condition with all its tones. The bands may overlap.
    """
    dynamic = dynamic_matrices(model, design)
    if bool(dynamic.topples[0]):
        return None
    modal = mode_batch(dynamic)
    (family,) = (each for each in rows.families if each.speed == shaft)
    others = replace(rows, families=tuple(each for each in rows.families if each.speed != shaft))
    beside = response_values(model, design, dynamic, modal, others).value[:, 0]
    room = _room(model, design, rows, beside)
    if np.any(room < 0.0):
        return None
    kept = np.isfinite(room)
    judged = replace(rows, pairs=tuple(pair for pair, counts in zip(rows.pairs, kept, strict=True) if counts))
    bands = _near_resonance(modal, family, separation)
    if not judged.pairs:
        return bands
    limit = room[kept]

    def excess(speed: Floats) -> Floats:
        value = family_amplitude(model, design, dynamic, judged, family, TWO_PI * speed[None])[:, 0]
        over = (value - limit[:, None]) / np.maximum(limit, np.finfo(float).tiny)[:, None]
        return np.asarray(np.where(np.isnan(over), np.inf, over).max(axis=0))

    centres, widths = envelope.centres_of_poles(sharp_poles(dynamic, modal), family.orders)
    return bands + stretches_above(excess, family.low, family.high, centres / TWO_PI, widths / TWO_PI)


def _room(model: Model, design: Designs, rows: Rows, beside: Floats) -> Floats:
    """Return how large the part of the moved shaft may be in each row (R,); infinite where there is no limit."""
    static = static_batch(model, design)
    room = np.zeros(len(rows.pairs))
    for index, (allowable, place) in enumerate(rows.pairs):
        limit = float(allowable.bound(static, place)[0])
        whole = limit - float(allowable.offset(static, place)[0])
        if np.isnan(limit) or np.isposinf(limit):
            room[index] = np.inf
        elif allowable.statistic() == "rms" and not any_meet(rows.families):
            left = whole**2 - beside[index] ** 2
            room[index] = np.sqrt(left) if whole >= 0.0 and left >= 0.0 else -1.0
        else:
            room[index] = whole - beside[index]
    return np.where(np.isnan(room), -1.0, room)


def _near_resonance(modal: ModeBatch, family: Family, separation: Separation | None) -> list[Interval]:
    """Return the speeds at which an order is closer to a natural frequency than the separation asked for.

    An order p meets it at speeds up to f / (p (1 + s)) and from f / (p (1 - s)) on.
    """
    if separation is None:
        return []
    asked, exempt = separation.limit, separation.exempt_amplification
    bands = []
    for frequency, loss in zip(modal.frequency[0], modal.loss_factor[0], strict=True):
        if exempt is not None and loss > 0.0 and 1.0 / loss < exempt:
            continue
        for order in family.orders:
            low = frequency / (order * (1.0 + asked)) * (1.0 - OUTWARD)
            high = frequency / (order * (1.0 - asked)) * (1.0 + OUTWARD) if asked < 1.0 else np.inf
            low, high = max(low, family.low), min(high, family.high)
            if low < high:
                bands.append((float(low), float(high)))
    return bands
