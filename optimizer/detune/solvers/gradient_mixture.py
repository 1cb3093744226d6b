"""Peaks of independent speeds, and noise, put together to what a limit counts, and the slopes of that."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.problem.requirement import Requirement
from detune.response.loads import Family
from detune.response.random import NoiseLoad
from detune.solvers.gradient_noise import Noisy, noise_slopes
from detune.solvers.gradient_peaks import PEAKS, Observed, Peak, peak_slopes
from detune.solvers.gradient_state import StateAt

Floats = NDArray[np.float64]
Chosen = tuple[tuple[int, int], ...]


@dataclass(frozen=True)
class ResponsePlan:
    """Limits of one condition and state that are followed by their peaks, with the static part each one counts.

    `offset` (R, static_size) maps to what is added to the amplitude (its magnitude where `offset_is_size`);
    `compression` (R, static_size) maps to what uplift is held against, zero for other limits.
    """

    requirements: tuple[Requirement, ...]
    limits: Observed
    families: tuple[Family, ...]
    largest: bool
    noises: tuple[NoiseLoad, ...]
    offset: Floats
    offset_is_size: NDArray[np.bool_]
    compression: Floats


@dataclass(frozen=True)
class Mixture:
    """Slots of R limits: `value` (R, slots), `omega` (rad/s) where the peak stands, and what each slot is made of.

    `chosen` names for each slot the peaks it holds, (family, place) each. `tones` (R, slots) is the part of the tones.
    """

    value: Floats
    omega: Floats
    tones: Floats
    chosen: tuple[Chosen, ...]


def mixture(plan: ResponsePlan, each: list[Peak], noise: Noisy | None) -> Mixture:
    """Put the peaks of all families and the noise together.

    Alternatives stand side by side. Independent speeds add: the first slot holds all largest peaks together, each
    further one has one of them exchanged for a lower peak of its family. Peaks add, rms values as squares.
    """
    chosen = _chosen(plan, len(each))
    count, energy = plan.limits.count, plan.limits.energy
    tones, omega = np.zeros((count, len(chosen))), np.full((count, len(chosen)), np.nan)
    present = np.ones((count, len(chosen)), dtype=bool)
    for slot, peaks in enumerate(chosen):
        if not peaks:
            continue
        sizes = np.stack([each[family].value[:, place] for family, place in peaks])
        tones[:, slot] = np.where(energy, np.sqrt(np.sum(sizes**2, axis=0)), np.sum(sizes, axis=0))
        told = max(peaks, key=lambda peak: peak[1])
        omega[:, slot] = each[told[0]].speed[:, told[1]]
        if slot:
            present[:, slot] = each[told[0]].value[:, told[1]] > 0.0
    value = tones
    if noise is not None:
        random = noise.value[:, None]
        value = np.where(energy[:, None], np.hypot(tones, random), tones + random)
    return Mixture(np.where(present, value, 0.0), omega, tones, chosen)


def _chosen(plan: ResponsePlan, families: int) -> tuple[Chosen, ...]:
    if not families:
        return ((),)
    if plan.largest:
        return tuple(((family, place),) for family in range(families) for place in range(PEAKS))
    first: Chosen = tuple((family, 0) for family in range(families))
    others = [
        tuple((k, place if k == family else 0) for k in range(families))
        for family in range(families)
        for place in range(1, PEAKS)
    ]
    return (first, *others)


def mixed_slopes(
    plan: ResponsePlan,
    mixed: Mixture,
    at: StateAt,
    each: list[Peak],
    noise: Noisy | None,
    wanted: NDArray[np.bool_],
    unknowns: int,
) -> Floats:
    """Slopes (R, slots, u) of the values of the `wanted` (R,) limits, zero for the others."""
    energy = plan.limits.energy
    own = [
        peak_slopes(plan.limits, at, family, peak, wanted)
        for family, peak in zip(plan.families, each, strict=True)
    ]
    safe = np.where(mixed.value > 0.0, mixed.value, 1.0)
    slopes = np.zeros((*mixed.value.shape, unknowns))
    for slot, peaks in enumerate(mixed.chosen):
        for family, place in peaks:
            share = np.where(energy, each[family].value[:, place] / safe[:, slot], 1.0)
            slopes[:, slot] += share[:, None] * own[family][:, place]
    if noise is not None:
        by_noise = noise_slopes(plan.limits, noise, wanted, unknowns)
        share = np.where(energy[:, None], noise.value[:, None] / safe, 1.0)
        slopes += share[..., None] * by_noise[:, None]
    return slopes
