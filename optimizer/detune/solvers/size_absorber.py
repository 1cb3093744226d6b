"""Closed-form tunings of an absorber as starts for its sizing, and what detuning costs."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.brief.mass_properties import mass_properties
from detune.brief.sizing import SizingUnknown
from detune.physics import absorber
from detune.sizing.made_parts import bounds, made_design, sizing_of
from detune.solvers.size_batch import judge

Floats = NDArray[np.float64]
SHIFTS = (-0.10, -0.05, -0.02, 0.0, 0.02, 0.05, 0.10)


@dataclass(frozen=True)
class Detuned:
    """Worst response over its limit when one unknown of an absorber is off by a share, everything else as sized."""

    unknown: str
    share: float
    worst_response: float


def absorber_starts(brief: Brief, middle: Floats) -> tuple[Floats, ...]:
    """Points (u,) with every absorber tuned by each closed form, within its bounds (physics.absorber).

    The body the absorber stands on is taken as one mass on the axial stiffness of its own parts.
    """
    unknowns = sizing_of(brief).unknown
    tuned = [k for k, u in enumerate(unknowns) if u.kind == "absorber-tuning"]
    if not tuned:
        return ()
    found = [middle.copy() for _ in range(5)]
    low, high = bounds(brief)
    for k in tuned:
        forms = _forms(brief, unknowns[k], middle)
        damped = [
            j for j, u in enumerate(unknowns) if u.kind == "absorber-damping" and u.body == unknowns[k].body
        ]
        for values, (frequency, ratio) in zip(found, forms, strict=True):
            values[k] = frequency
            for j in damped:
                values[j] = ratio
    return tuple(np.clip(values, low, high) for values in found)


def _forms(brief: Brief, unknown: SizingUnknown, middle: Floats) -> list[tuple[float, float]]:
    """(tuning Hz, damping ratio) of each closed form for one absorber."""
    made = made_design(brief, middle)
    carrier = next(s.to for s in brief.stations if s.group == unknown.group)
    if carrier == unknown.body:
        carrier = next(str(s.on) for s in brief.stations if s.group == unknown.group)
    bodies = {body.name: mass_properties(body).mass for body in made.brief.bodies}
    ratio = min(max(bodies[str(unknown.body)] / bodies[carrier], 1e-4), 1.0)
    stiffness = sum(
        s.parallel * made.design.mounts[made.design.groups.index(s.group)].stiffness_dynamic[2]
        for s in brief.stations
        if s.group != unknown.group and carrier in (s.on or brief.bodies[0].name, s.to)
    )
    own = float(np.sqrt(stiffness / bodies[carrier])) / (2.0 * np.pi)
    tunings = (
        absorber.den_hartog(ratio),
        absorber.warburton_force_acceleration(ratio),
        absorber.warburton_base_deflection(ratio),
        absorber.white_noise_force(ratio),
        absorber.equal_modal_damping(ratio),
    )
    return [(t.frequency_ratio * own, t.damping_ratio) for t in tunings]


def detuning(brief: Brief, values: Floats) -> tuple[Detuned, ...]:
    """Worst response with each absorber's mass, tuning and damping off by each of SHIFTS."""
    unknowns = sizing_of(brief).unknown
    rows, labels = [], []
    for k, unknown in enumerate(unknowns):
        if unknown.kind.startswith("absorber"):
            for share in SHIFTS:
                changed = values.copy()
                changed[k] *= 1.0 + share
                rows.append(changed)
                labels.append((unknown.title, share))
    if not rows:
        return ()
    worst = judge(brief, np.array(rows)).objectives["worst-response"]
    return tuple(
        Detuned(name, share, float(value)) for (name, share), value in zip(labels, worst, strict=True)
    )
