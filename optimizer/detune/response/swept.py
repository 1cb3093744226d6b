"""Responses of a batch of designs to a run-up or coast-down at a constant rate of speed.

The complex envelope of each coherent set is exact (physics.sweep); loss-factor damping stands as the
viscous damping of each mode's own loss factor. Sets of different order add by their envelopes.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import HarmonicAllowable, SumOfOrders, tone_amplitude
from detune.physics.simulation import DefectiveModes, Motion, StateModes, state_modes
from detune.physics.sweep import unit_sweep
from detune.response.assemble import Dynamic
from detune.response.causal_design import causal_matrices
from detune.response.designs import Designs
from detune.response.loads import Family, Load
from detune.response.model import Model
from detune.response.modes import ModeBatch
from detune.response.transient import MotionView, motion_view

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Pairs = tuple[tuple[HarmonicAllowable, str], ...]
TWO_PI = 2.0 * np.pi
EVENLY = 800
CLOSER_LOOKS = 2
ROUND_LARGEST = np.linspace(-1.0, 1.0, 121)
ROUND_PASSAGE = np.concatenate(
    [np.linspace(-8.0, -3.0, 20, endpoint=False), np.linspace(-3.0, 6.0, 80), np.linspace(6.0, 20.0, 40)]
)


@dataclass(frozen=True)
class Passage:
    """A family passed through once: time (s) from its speed `start` to `end` (Hz)."""

    family: Family
    time: float
    start: float
    end: float


@dataclass(frozen=True, eq=False)
class System:
    """One design in time: stiffness and damping (n, n) of its causal stand-in, and its modes, complex and undamped."""

    stiffness: Floats
    damping: Floats
    modes: StateModes
    undamped: ModeBatch


def swept_values(
    model: Model,
    designs: Designs,
    dynamic: Dynamic,
    modal: ModeBatch,
    pairs: Pairs,
    passages: tuple[Passage, ...],
) -> Floats:
    """Return the largest envelope of each row (R, D) over the passages, which are alternatives."""
    value = np.zeros((len(pairs), designs.count))
    for index in range(designs.count):
        one = np.array([index])
        stiffness, damping = causal_matrices(dynamic, modal, index)
        undamped = modal.take(one)
        system = System(stiffness, damping, _modes(dynamic.mass[index], damping, stiffness), undamped)
        for passage in passages:
            found = _passage(model, dynamic.take(one), system, pairs, passage)
            value[:, index] = np.maximum(value[:, index], found)
    return value


def _modes(mass: Floats, damping: Floats, stiffness: Floats) -> StateModes:
    """Return the complex modes; at critical damping those of a machine damped by a hundred-thousandth more."""
    try:
        return state_modes(mass, damping, stiffness)
    except DefectiveModes:
        return state_modes(mass, (1.0 + 1e-5) * damping, stiffness)


def _passage(
    model: Model,
    dynamic: Dynamic,
    system: System,
    pairs: Pairs,
    passage: Passage,
) -> Floats:
    """Return the largest envelope of each row (R,): over all moments, then closer and closer round the largest.

    The free motion left by the start and by each passage ripples the envelope at twice its frequency; the closer
    looks find the highest ripple.
    """

    def amplitudes(times: Floats) -> Floats:
        sums = [SumOfOrders(allowable.statistic()) for allowable, _ in pairs]
        known: dict[tuple[float, int], Complexes] = {}
        for loads in passage.family.sets:
            view, speed = _swept_view(model, dynamic, system, passage, loads, times, known)
            for row, (allowable, place) in enumerate(pairs):
                observed = allowable.weighted(allowable.observed(view, place), speed[None] / TWO_PI)
                tone = tone_amplitude(observed, allowable.along(), allowable.statistic())[0]
                sums[row].add(loads[0].order, tone)
        return np.stack([each.total() for each in sums])

    times = moments(system.modes, passage)
    values = amplitudes(times)
    best, at = values.max(axis=1), times[values.argmax(axis=1)]
    gap = np.maximum(np.diff(times, prepend=times[0]), np.diff(times, append=times[-1]))
    half = np.maximum(2.0 * gap[values.argmax(axis=1)], 1.0 / _slowest(system.modes))
    for _ in range(CLOSER_LOOKS):
        close = np.clip(at[:, None] + half[:, None] * ROUND_LARGEST, 0.0, passage.time)
        times = np.unique(close)
        values = amplitudes(times)
        better = values.max(axis=1) > best
        at = np.where(better, times[values.argmax(axis=1)], at)
        best = np.maximum(best, values.max(axis=1))
        half = half * (4.0 / len(ROUND_LARGEST))
    return np.asarray(best)


def _slowest(modes: StateModes) -> float:
    """Frequency (Hz) of the slowest mode that oscillates, or of the slowest decay where none does."""
    oscillating = np.abs(modes.poles.imag) > 1e-6 * np.abs(modes.poles)
    chosen = modes.poles[oscillating] if oscillating.any() else modes.poles
    return float(np.abs(chosen).min()) / TWO_PI


def _swept_view(
    model: Model,
    dynamic: Dynamic,
    system: System,
    passage: Passage,
    loads: tuple[Load, ...],
    times: Floats,
    known: dict[tuple[float, int], Complexes],
) -> tuple[MotionView, Floats]:
    """Return the complex envelope of one design at times (T,), and the tone's speed (T,) in rad/s.

    known: what one unit on each mode comes to at these times, by order and power; sets of one order share it.
    """
    order = loads[0].order
    start, end = TWO_PI * order * passage.start, TWO_PI * order * passage.end
    modes = system.modes
    moved = np.zeros((2, len(times), model.frame.count), dtype=complex)
    acting = np.zeros((len(times), model.frame.count), dtype=complex)
    speed = start + (end - start) * times / passage.time
    turned = np.exp(1j * (start * times + 0.5 * (end - start) / passage.time * times**2))
    for load in loads:
        key = (order, load.power)
        if key not in known:
            known[key] = unit_sweep(modes, (start, end), passage.time, load.power, times)
        each = known[key] * (modes.loads @ np.asarray(load.vector, dtype=complex))
        moved += np.stack([each @ modes.shapes.T, (each * modes.poles) @ modes.shapes.T])
        acting += (turned * speed**load.power)[:, None] * load.vector
    held = moved[0] @ system.stiffness.T + moved[1] @ system.damping.T
    acceleration = np.linalg.solve(dynamic.mass[0], (acting - held).T).T
    motion = Motion(0.0, moved[0], moved[1], acceleration, acceleration)
    return motion_view(model, dynamic, system.undamped, motion), speed


def moments(modes: StateModes, passage: Passage) -> Floats:
    """Times (T,) close enough together that no maximum of an envelope falls between: round each passage, and evenly."""
    rate = TWO_PI * (passage.end - passage.start) / passage.time
    looks = [np.linspace(0.0, passage.time, EVENLY)]
    for order in passage.family.orders:
        grain = 1.0 / np.sqrt(abs(rate * order))
        for pole in modes.poles[modes.poles.imag > 0.0]:
            centre = (pole.imag / order - TWO_PI * passage.start) / rate
            width = grain - pole.real / abs(rate * order)
            looks += [centre + ROUND_PASSAGE * grain, centre + ROUND_PASSAGE * width]
    times = np.unique(np.concatenate(looks))
    return times[(times >= 0.0) & (times <= passage.time)]
