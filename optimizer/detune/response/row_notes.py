"""What stands beside a margin where its value did not come about plainly."""

from collections.abc import Iterable
from dataclasses import replace

import numpy as np

from detune.parts.kinds.mount import amplitude_caution
from detune.response.assessment import MarginRow
from detune.response.direct_views import DirectStatic, station_named

BY_ITERATION = "at the amplitude it produces itself, by iteration"
DOES_NOT_STAND = "the machine does not stand"
LEFT_ITS_CURVE = "a part left its load-deflection curve"
BY_SEVERAL = (
    "at the worst of several amplitudes that reproduce themselves: from rest and from large motion the iteration "
    "comes to different ends"
)
NONE_FOUND = "no amplitude was found that reproduces itself"


def worse_reading(readings: list[tuple[str | None, list[MarginRow]]]) -> list[MarginRow]:
    """Return of each requirement the row of the worse reading of unknown damping, which says so where they differ."""
    kept = []
    for rows in zip(*(rows for _, rows in readings), strict=True):
        worst = min(range(len(rows)), key=lambda index: rows[index].margin)
        row, reading = rows[worst], readings[worst][0]
        if reading is not None and any(other.value != row.value for other in rows):
            row = replace(row, note=f"{row.note}; {reading}" if row.note else reading)
        kept.append(row)
    return kept


def noted(
    row: MarginRow, *, stands: bool, on_curves: bool, at_amplitude: bool, several: bool = False
) -> MarginRow:
    """Return a judged row of a response with what has to be told of it.

    `stands`: whether the machine does; `on_curves`: whether parts follow load-deflection curves; `at_amplitude`:
    whether the amplitude was found by iteration; `several`: whether it has several ends.
    """
    limited = row.upper is not None and bool(np.isfinite(row.upper))
    endless = limited and bool(np.isinf(row.value))
    if limited and not stands:
        # Every response is without bound where the machine falls.
        return replace(row, value=np.inf, margin=-1.0, note=DOES_NOT_STAND)
    if at_amplitude:
        found = BY_SEVERAL if several or row.note == BY_SEVERAL else BY_ITERATION
        return replace(row, note=NONE_FOUND if endless else found)
    return replace(row, note=LEFT_ITS_CURVE) if endless and on_curves else row


def amplitude_cautions(rows: Iterable[MarginRow], at_rest: dict[str, DirectStatic]) -> tuple[str, ...]:
    """Return a sentence for each part that vibrates outside the amplitudes for which its list's figures hold.

    rows: all rows; those of the axial deflection of mounts say the amplitude, once the deflection at rest is taken
    off where it is in them. at_rest: the machine at rest in each condition.
    """
    found: dict[str, None] = {}
    for row in rows:
        if (
            row.kind != "mount-deflection"
            or not row.quantity.endswith("axial")
            or row.condition not in at_rest
        ):
            continue
        static = at_rest[row.condition]
        within = (
            0.0 if ", dynamic," in row.quantity else abs(float(static.station_deflection(row.place)[0, 2]))
        )
        mount = static.machine.mount(station_named(static.machine, row.place))
        told = amplitude_caution(mount, row.value - within) if np.isfinite(row.value) else None
        if told is not None:
            found[f"{row.place}, {row.condition}: {told}"] = None
    return tuple(found)
