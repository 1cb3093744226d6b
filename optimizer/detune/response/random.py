"""Random part of the responses of a batch of designs."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import HarmonicAllowable, noise_amplitude
from detune.brief.brief import Brief, body_of
from detune.brief.forcing.base import Noise
from detune.physics.random_response import QuadratureNotConverged, variance
from detune.response.assemble import Dynamic
from detune.response.designs import Designs
from detune.response.expansion import Expansion, expansion_of
from detune.response.loads import Load
from detune.response.model import Model
from detune.response.modes import ModeBatch, sharp_poles
from detune.response.views import ToneBatch

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Pairs = tuple[tuple[HarmonicAllowable, str], ...]
TWO_PI = 2.0 * np.pi
WITHOUT_BOUND = 1e200
# Designs at once, so that the responses at all their frequencies stay in the processor's cache.
TOGETHER = 32


@dataclass(frozen=True, eq=False)
class NoiseLoad:
    """A noise as a load of unit density: `load` per unit of acceleration or force at every frequency."""

    noise: Noise
    load: Load


def noise_load(brief: Brief, model: Model, noise: Noise) -> NoiseLoad:
    """Return the unit load of a noise. A floor acceleration a is the displacement -a / omega^2."""
    if noise.base is not None:
        unit = np.zeros(model.frame.count, dtype=complex)
        return NoiseLoad(noise, Load(noise.source, 1.0, unit, -np.array(noise.base, dtype=complex), -2))
    body = body_of(brief, noise.on)
    vector = model.frame.motion_rows(body, np.array(noise.position)).T @ np.array(noise.force)
    vector = vector + model.frame.rotation_rows(body).T @ np.array(noise.moment)
    return NoiseLoad(noise, Load(noise.source, 1.0, vector.astype(complex), None, 0))


def noise_values(
    model: Model,
    designs: Designs,
    dynamic: Dynamic,
    modal: ModeBatch,
    pairs: Pairs,
    noises: tuple[NoiseLoad, ...],
) -> Floats:
    """Return what the noises together count as in each row (R, D): variances of independent noises add.

    Where they last differently long, all are taken to last as long as the longest.
    """
    moved, rates = sum(
        (noise_variances(model, designs, dynamic, modal, pairs, each) for each in noises),
        np.zeros((2, len(pairs), designs.count)),
    )
    duration = max(each.noise.duration for each in noises)
    return np.stack(
        [
            noise_amplitude(moved[index], rates[index], duration, allowable.statistic())
            for index, (allowable, _) in enumerate(pairs)
        ]
    )


def noise_variances(
    model: Model, designs: Designs, dynamic: Dynamic, modal: ModeBatch, pairs: Pairs, each: NoiseLoad
) -> Floats:
    """Return the variance of each row and of its rate (2, R, D); of a resultant, the sum over its axes.

    A design whose undamped mode the noise excites has none; a value that no limit admits stands for it.
    """
    found = np.empty((2, len(pairs), designs.count))
    expanded = np.zeros(designs.count, dtype=bool)
    if not dynamic.parts.with_frequency:
        expansion, expanded = expansion_of(dynamic)
    for chosen, by_poles in ((expanded, True), (~expanded, False)):
        index = np.flatnonzero(chosen)
        for some in np.array_split(index, max(1, -(-len(index) // TOGETHER))) if len(index) else []:
            own = expansion.take(some) if by_poles else None
            taken = designs.take(some), dynamic.take(some), modal.take(some)
            found[:, :, some] = _variances(model, *taken, pairs, each, own)
    return found


def _variances(
    model: Model,
    designs: Designs,
    dynamic: Dynamic,
    modal: ModeBatch,
    pairs: Pairs,
    each: NoiseLoad,
    expansion: Expansion | None,
) -> Floats:
    def transfer(omega: Floats) -> Complexes:
        view = ToneBatch(model, designs, dynamic, (each.load,), omega, expansion)
        rows = []
        for allowable, place in pairs:
            observed = allowable.weighted(allowable.observed(view, place), omega / TWO_PI)
            along = allowable.along()
            axes = observed @ np.asarray(along)[:, None] if along is not None else observed
            rows += [axes[..., axis] for axis in range(axes.shape[-1])]
        return np.stack(rows)

    poles = sharp_poles(dynamic, modal)
    centre, width = poles.imag, -poles.real
    try:
        parts = variance(transfer, each.noise.spectrum, centre, width, with_rates=True)
    except QuadratureNotConverged:
        if designs.count == 1:
            return np.full((2, len(pairs), 1), WITHOUT_BOUND)
        halves = np.array_split(np.arange(designs.count), 2)
        found = []
        for half in halves:
            taken = designs.take(half), dynamic.take(half), modal.take(half)
            own = None if expansion is None else expansion.take(half)
            found.append(_variances(model, *taken, pairs, each, own))
        return np.concatenate(found, axis=2)
    count = len(parts) // 2
    sizes = [1 if allowable.along() is not None else 3 for allowable, _ in pairs]
    starts = np.cumsum([0, *sizes[:-1]])
    return np.stack([np.add.reduceat(half, starts, axis=0) for half in (parts[:count], parts[count:])])
