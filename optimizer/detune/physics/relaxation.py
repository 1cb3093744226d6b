"""Mounts whose stiffness depends on frequency and temperature, given as a table; and the check of causality.

The three-parameter element itself is `damping.relaxation_stiffness`; here is what belongs to measured tables.
Storage stiffness and loss factor are interpolated over frequency on log-log axes by the monotone cubic of
`tables`, and over temperature straight in their logarithms. Nothing is extrapolated.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from detune.physics.array_types import ArrayLike, ComplexArray, FloatArray
from detune.physics.causal import chain_stiffness, fit_relaxation_chain
from detune.physics.tables import hermite, monotone_slopes, require_inside, require_rising


@dataclass(frozen=True, eq=False)
class StiffnessTable:
    """Storage stiffness and loss factor (T, F) over temperature (T,) in deg C and frequency (F,) in Hz.

    Made by `stiffness_table`; the logarithms and slopes are what the interpolation uses.
    """

    frequency: FloatArray
    temperature: FloatArray
    log_storage: FloatArray
    storage_slope: FloatArray
    log_loss: FloatArray
    loss_slope: FloatArray


def stiffness_table(
    frequency: ArrayLike, storage: ArrayLike, loss_factor: ArrayLike, temperature: ArrayLike
) -> StiffnessTable:
    """A table from frequency (F,) in Hz, storage stiffness (T, F) or (F,) in N/m, loss factor likewise,
    temperature.

    temperature (T,) in deg C, a single value for a table measured at one temperature. Raises ValueError for
    columns that do not rise, shapes that do not fit, and stiffness or loss factors not above zero, which have
    no logarithm.
    """
    place = np.asarray(frequency, dtype=float)
    warmth = np.atleast_1d(np.asarray(temperature, dtype=float))
    require_rising("frequency of the stiffness table", place)
    if place[0] <= 0.0:
        raise ValueError("frequency of the stiffness table: row 1 is not above zero")
    if warmth.size > 1:
        require_rising("temperature of the stiffness table", warmth)
    columns = []
    for name, given in (("storage stiffness", storage), ("loss factor", loss_factor)):
        values = np.atleast_2d(np.asarray(given, dtype=float))
        if values.shape != (warmth.size, place.size):
            raise ValueError(f"{name}: one value is needed for each temperature and each frequency")
        wrong = ~(np.isfinite(values) & (values > 0.0))
        if np.any(wrong):
            row, column = np.argwhere(wrong)[0]
            raise ValueError(f"{name} at {warmth[row]:g} deg C and {place[column]:g} Hz is not above zero")
        logs = np.log(values)
        columns += [logs, np.stack([monotone_slopes(np.log(place), row) for row in logs])]
    return StiffnessTable(place, warmth, *columns)


def table_stiffness(table: StiffnessTable, omega: ArrayLike, temperature: ArrayLike) -> ComplexArray:
    """Complex dynamic stiffness k (1 + j eta) in N/m at omega in rad/s and temperature in deg C (broadcast
    together).

    Raises OutsideTable beyond the frequencies or temperatures of the table.
    """
    asked = np.asarray(omega, dtype=float) / (2.0 * np.pi)
    warmth = np.asarray(temperature, dtype=float)
    known = table.temperature
    require_inside("frequency", "Hz", asked, float(table.frequency[0]), float(table.frequency[-1]))
    require_inside("temperature", "deg C", warmth, float(known[0]), float(known[-1]))
    place, warmth = np.broadcast_arrays(np.log(asked), warmth)
    corner = np.log(table.frequency)
    storage = np.stack(
        [hermite(corner, v, s, place)[0] for v, s in zip(table.log_storage, table.storage_slope, strict=True)]
    )
    loss = np.stack(
        [hermite(corner, v, s, place)[0] for v, s in zip(table.log_loss, table.loss_slope, strict=True)]
    )
    if known.size == 1:
        log_storage, log_loss = storage[0], loss[0]
    else:
        below = np.clip(np.searchsorted(known, warmth, side="right") - 1, 0, known.size - 2)
        share = np.clip((warmth - known[below]) / (known[below + 1] - known[below]), 0.0, 1.0)
        log_storage, log_loss = (_between(values, below, share) for values in (storage, loss))
    return np.asarray(np.exp(log_storage) * (1.0 + 1j * np.exp(log_loss)))


def _between(values: FloatArray, below: ArrayLike, share: FloatArray) -> FloatArray:
    index = np.asarray(below)[None]
    low = np.take_along_axis(values, index, axis=0)[0]
    high = np.take_along_axis(values, index + 1, axis=0)[0]
    return np.asarray(low + share * (high - low))


def kramers_kronig_violation(omega: ArrayLike, stiffness: ArrayLike) -> float:
    """How far a dynamic stiffness (F,) complex at omega (F,) in rad/s is from any causal, passive, springy
    mount.

    The nearest relaxation chain (springs, dashpots, nothing else) obeys Kramers and Kronig exactly; the value
    is the rms distance to it over the rms loss part, both relative to |K|. A few per cent is the rounding of
    a good table; a constant loss factor over two decades gives about a half. Over less than an octave nearly
    everything passes.
    """
    w, given = np.asarray(omega, dtype=float), np.asarray(stiffness, dtype=complex)
    distance = np.abs(chain_stiffness(fit_relaxation_chain(w, given), w) - given) / np.abs(given)
    lossy = given.imag / np.abs(given)
    if not np.any(lossy):
        return float("inf") if np.any(distance > 1e-9) else 0.0
    return float(np.sqrt(np.mean(distance**2) / np.mean(lossy**2)))


def storage_deficit(loss: Callable[[FloatArray], FloatArray], omega: float, low: float, high: float) -> float:
    """By Kramers and Kronig, the limit of the storage stiffness at high frequency less its value at omega.

    K_inf - K'(w0) = (2/pi) PV integral of w K''/(w^2 - w0^2) dw, taken from low to high in rad/s, which must
    enclose the relaxations; loss(w) is the imaginary part of the dynamic stiffness. For a loss that does not
    fall off (a constant loss factor) the value grows without bound with `high`: no causal mount has it.
    Raises ValueError unless low < omega < high.
    """
    if not 0.0 < low < omega < high:
        raise ValueError("the frequency lies inside the band of the integral")
    node, weight = np.polynomial.legendre.leggauss(16)
    lost = float(loss(np.array([omega]))[0])
    total = 0.0
    for start, end in ((low, omega), (omega, high)):
        edge = np.linspace(np.log(start), np.log(end), int(np.ceil(np.log(end / start) / 0.5)) + 1)
        half = 0.5 * np.diff(edge)[:, None]
        w = np.exp(0.5 * (edge[1:] + edge[:-1])[:, None] + half * node)
        # The subtracted term removes the pole; its own principal value is added in closed form below.
        smooth = (w * loss(w) - omega * lost) / (w**2 - omega**2)
        total += float(np.sum(half * weight * w * smooth))
    closed = np.log((high - omega) / (high + omega)) - np.log((omega - low) / (omega + low))
    return 2.0 / np.pi * (total + 0.5 * lost * float(closed))
