"""How far the viscous stand-in for loss factors, which calculations in time need, is from them in frequency.

A loss factor is not causal; in time each mode has the viscous damping of its own loss factor (physics.causal). What a
limit looks at is compared as a transfer function from what acts, with the one damping and with the other.
"""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import Allowable, HarmonicAllowable
from detune.brief.allowable.views import Places
from detune.brief.brief import applies
from detune.brief.condition import Condition
from detune.brief.forcing.base import Tone, Transient
from detune.ground.units import show
from detune.response.direct import DirectMachine
from detune.response.direct_modes import DirectModes
from detune.response.direct_motion import DirectMotion, lagging, pattern_of
from detune.response.direct_random import mesh
from detune.response.direct_stepping import Stepping
from detune.response.direct_supremum import Pairs
from detune.response.direct_views import DirectTone

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
TWO_PI = 2.0 * np.pi
# From half the lowest to one and a half times the highest natural frequency.
BELOW, ABOVE = 0.5, 1.5
# Differences count against the response itself, and between resonances, where it is small, against this share of its
# largest in the band: what is lost there, no shock would show.
SEEN = 0.1
LOSSLESS = 1e-6


@dataclass(frozen=True)
class Difference:
    """Largest relative difference over a band `low` to `high` (Hz), and the `frequency` (Hz), limit and place of it.

    `larger`: whether the stand-in gives the larger response there.
    """

    size: float
    frequency: float
    low: float
    high: float
    of: str
    place: str
    larger: bool


class Judged(Protocol):
    """A machine in one state and reading, with its modes, conditions and places."""

    @property
    def machine(self) -> DirectMachine: ...
    @property
    def modes(self) -> DirectModes: ...
    @property
    def conditions(self) -> tuple[Condition, ...]: ...
    @property
    def places(self) -> Places: ...


def told_of_stand_ins(found: Sequence[Judged], allowables: Sequence[Allowable]) -> tuple[str, ...]:
    """Return a sentence for each condition with pulses, records or passages on parts or pipes with a loss factor."""
    told: dict[str, None] = {}
    for each in found:
        lossy = each.machine.with_frequency_laws or np.any(np.abs(each.modes.hysteretic) > 0.0)
        if each.machine.topples or not lossy:
            continue
        for condition in each.conditions:
            pairs = tuple(
                (allowable, place)
                for allowable in allowables
                if isinstance(allowable, HarmonicAllowable)
                and allowable.unit_load() is None
                and applies(allowable.conditions, condition.name)
                for place in allowable.places(each.places)
            )
            worst = stand_in_difference(each.machine, each.modes, condition, pairs)
            if worst is not None and worst.size > LOSSLESS:
                told[_sentence(condition, worst)] = None
    return tuple(told)


def _sentence(condition: Condition, worst: Difference) -> str:
    return (
        f"{condition.name}: in time each mode is damped viscously by its own loss factor, for a loss factor is not "
        f"causal. Over {show(worst.low, 'frequency')} to {show(worst.high, 'frequency')} the transfer functions of the "
        f"limits differ from those with loss factors by at most {100.0 * worst.size:.2g} % (of the "
        "response, or of a tenth of its largest in the band where it is smaller), at "
        f"{show(worst.frequency, 'frequency')}: {worst.of}, {worst.place}, which comes out too "
        f"{'large' if worst.larger else 'small'} there."
    )


def stand_in_difference(
    machine: DirectMachine, found: DirectModes, condition: Condition, pairs: Pairs
) -> Difference | None:
    """Return the largest difference over all limits and all that acts in time, None where nothing does."""
    low, high = BELOW * float(found.frequency[0]), ABOVE * float(found.frequency[-1])
    frequency = mesh(found, low, high)
    worst: Difference | None = None
    for tone, load, base in _acting(machine, found, condition, TWO_PI * frequency):
        true = DirectTone(machine, (tone,), TWO_PI * frequency[None])
        other = _with_stand_in(machine, found, TWO_PI * frequency, load, base)
        for allowable, place in pairs:
            along = allowable.along()
            seen = [np.asarray(allowable.observed(view, place))[0] for view in (true, other)]
            if along is not None:
                seen = [(each @ np.asarray(along))[:, None] for each in seen]
            size = np.linalg.norm(seen[0], axis=1)
            if not size.max() > 0.0:
                continue
            apart = np.linalg.norm(seen[1] - seen[0], axis=1) / np.maximum(size, SEEN * size.max())
            top = int(np.argmax(apart))
            if worst is None or apart[top] > worst.size:
                named = float(apart[top]), float(frequency[top]), low, high
                larger = bool(np.linalg.norm(seen[1][top]) > size[top])
                worst = Difference(*named, allowable.quantity(), place, larger)
    return worst


def _acting(
    machine: DirectMachine, found: DirectModes, condition: Condition, omega: Floats
) -> Iterable[tuple[Tone, Complexes, Floats]]:
    """Each unit tone that carries a load pattern, that load (F, n), and the floor's direction (3,) or zeros."""
    for forcing in machine.brief.forcing:
        if not applies(forcing.conditions, condition.name):
            continue
        for transient in forcing.transients():
            load, _ = pattern_of(machine, found, transient)
            base = np.array(transient.base or (0.0, 0.0, 0.0))
            yield _unit(transient), np.repeat(load[None].astype(complex), len(omega), axis=0), base
        for tone in forcing.tones(condition.shafts):
            if tone.base is None and (tone.speed in condition.run_up or tone.speed in condition.coast_down):
                yield tone, machine.tone_load(tone, omega)[0][:, machine.free], np.zeros(3)


def _unit(transient: Transient) -> Tone:
    """The tone of one unit of the floor's acceleration or of the load."""
    name, place = transient.source, transient.position
    if transient.base is not None:
        x, y, z = transient.base
        moved = (-x + 0j, -y + 0j, -z + 0j)
        return Tone(name, name, 1.0, 0.0, 0.0, on=None, position=place, base=moved, power=-2)
    pushed = {"force": transient.force, "moment": transient.moment}
    return Tone(name, name, 1.0, 0.0, 0.0, on=transient.on, position=place, **pushed)  # type: ignore[arg-type]


def _with_stand_in(
    machine: DirectMachine, found: DirectModes, omega: Floats, load: Complexes, base: Floats
) -> DirectMotion:
    """Return the harmonic motion with modal viscous damping, as calculations in time have it."""
    w = omega[:, None, None]
    matrix = found.stiffness + 1j * w * Stepping(found).damping - w**2 * found.mass
    moved = np.linalg.solve(matrix, load[..., None])[..., 0]
    turn = 1j * omega[:, None]
    rates = np.stack([moved, turn * moved, turn**2 * moved])
    # The free motion of a floor with one unit of acceleration.
    floor = np.stack([-1.0 / omega**2, 1.0 / (1j * omega), np.ones(len(omega))])
    moves = float(np.any(base != 0.0))
    return DirectMotion(machine, found, rates, rates[1] @ lagging(found).T, moves * floor, base)
