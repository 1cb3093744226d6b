"""Exact test of designs by the rows of a selection: static windows, separation, response at its frequencies.

This is the final test used where no upper floor supplies a stricter one (response over whole speed ranges,
scatter). It works on the matrices in the given coordinates and shares no assembly with the search tables.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Literal

import numpy as np

from detune.proof.loewner import Flags
from detune.proof.response_rows import response_margin, station_counts
from detune.proof.selection_data import Floats, ForbiddenBands, Integers, Selection

Accept = Callable[[Integers], tuple[Flags, Floats]]
"""A final test: designs (D, G+1) to feasible (D,) and value (D,)."""

ValueKind = Literal["separation", "margin"]


def separation(frequency: Floats, bands: ForbiddenBands) -> Floats:
    """Least separation (N,) of modes (N, n) in Hz from all excitation intervals; +inf without intervals.

    Of one mode from [f_a, f_b] it is the greater of f/f_b - 1 and 1 - f/f_a: negative inside, zero at both edges.
    """
    f = frequency[:, :, None]
    each = np.maximum(f / bands.high - 1.0, 1.0 - f / bands.low)
    least: Floats = np.min(each, axis=(1, 2), initial=np.inf)
    return least


def separation_met(frequency: Floats, bands: ForbiddenBands) -> Flags:
    """Whether every mode (N, n) keeps the separation required of every interval."""
    f = frequency[:, :, None]
    each = np.maximum(f / bands.high - 1.0, 1.0 - f / bands.low)
    flags: Flags = np.asarray((each >= bands.separation).all(axis=(1, 2)))
    return flags


def _real_matrices(selection: Selection, designs: Integers, name: str, fixed: Floats) -> Floats:
    axes = np.stack(
        [getattr(selection.groups[g], name)[designs[:, g]] for g in selection.station_group], axis=1
    )
    axes = axes * station_counts(selection)[None, :, None]
    b = selection.stations
    total = np.broadcast_to(fixed, (len(designs), *fixed.shape)).copy()
    # Summed term by term: a matrix product would round differently for different batch sizes.
    for station in range(b.shape[0]):
        for axis in range(3):
            outer = np.outer(b[station, axis], b[station, axis])
            total += axes[:, station, axis, None, None] * outer
    return total


def natural_frequencies(selection: Selection, designs: Integers) -> Floats:
    """Undamped natural frequencies (D, n) in Hz at the dynamic stiffness; 0 where an eigenvalue is negative."""
    stiffness = _real_matrices(selection, designs, "kappa_dynamic", selection.fixed.dynamic)
    factors = np.linalg.inv(np.linalg.cholesky(selection.ballast.mass))[designs[:, -1]]
    values = np.linalg.eigvalsh(factors @ stiffness @ np.swapaxes(factors, 1, 2))
    frequency: Floats = np.sqrt(np.maximum(values, 0.0)) / (2.0 * np.pi)
    return frequency


def static_margin(selection: Selection, designs: Integers) -> Floats:
    """Least static margin (D,): met when >= 0; -inf where the machine is not supported.

    For a window with positive limits the margin is the lesser of response / lower - 1 and upper / response - 1;
    for limits that are not positive only met (counted as +inf) or broken (-1) is told.
    """
    stiffness = _real_matrices(selection, designs, "kappa_static", selection.fixed.static)
    values = np.linalg.eigvalsh(stiffness)
    supported = values[:, 0] > 1e-13 * np.abs(values[:, -1])
    margin = np.full(len(designs), -np.inf)
    if not supported.any():
        return margin
    chosen = designs[supported]
    load = selection.ballast.load[chosen[:, -1]]
    q = np.linalg.solve(stiffness[supported], load[:, :, None])[:, :, 0]
    least = np.full(len(chosen), np.inf)
    seen = [0] * len(selection.groups)
    for station, number in enumerate(selection.station_group):
        group, part = selection.groups[number], chosen[:, number]
        z = selection.support_sign[station] * (q @ selection.stations[station, 2])
        force = group.kappa_static[part, 2] * z
        for value, name, is_lower in (
            (force, "load_min", True),
            (force, "load_max", False),
            (z, "deflection_max", False),
        ):
            limits = getattr(group, name)
            limit = limits[part] if limits.ndim == 1 else limits[seen[number], part]
            least = np.minimum(least, _limit_margin(value, limit, is_lower))
        seen[number] += 1
    rows = selection.static_rows
    for row, lower, upper in zip(rows.rows, rows.lower, rows.upper, strict=True):
        value = q @ row
        least = np.minimum(least, _limit_margin(value, np.full(len(chosen), lower), True))
        least = np.minimum(least, _limit_margin(value, np.full(len(chosen), upper), False))
    margin[supported] = least
    return margin


def _limit_margin(value: Floats, limit: Floats, is_lower: bool) -> Floats:
    met = value >= limit if is_lower else value <= limit
    positive = (limit > 0.0) & np.isfinite(limit)
    safe_limit = np.where(positive, limit, 1.0)
    if is_lower:
        ratio = value / safe_limit - 1.0
    else:
        ratio = np.where(value > 0.0, safe_limit / np.where(value > 0.0, value, 1.0) - 1.0, np.inf)
    # The comparison itself decides; the ratio may round across zero.
    ratio = np.where(met, np.maximum(ratio, 0.0), np.minimum(ratio, -1e-15))
    plain = np.where(met, np.inf, -1.0)
    return np.where(positive, ratio, plain)


def exact_accept(selection: Selection, value: ValueKind = "separation") -> Accept:
    """Final test by the rows of the selection; the value is the separation or the least margin."""

    def accept(designs: Integers) -> tuple[Flags, Floats]:
        feasible = np.zeros(len(designs), dtype=bool)
        worth = np.full(len(designs), -np.inf)
        static = static_margin(selection, designs)
        good = np.flatnonzero(static >= 0.0)
        frequency = natural_frequencies(selection, designs[good])
        keeps = separation_met(frequency, selection.bands)
        good, frequency = good[keeps], frequency[keeps]
        response = response_margin(selection, designs[good], 0.0)
        met = response >= 0.0
        feasible[good[met]] = True
        if value == "separation":
            worth[good] = separation(frequency, selection.bands)
        else:
            worth[good] = np.minimum(static[good], response)
        return feasible, worth

    return accept
