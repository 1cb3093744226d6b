"""Closed-form tunings of an absorber as starts and checks of its sizing, and what detuning costs.

The closed forms hold for one mass with one absorber, most of them without damping of its own; the study's
absorber stands on a machine with its own modes, limits and range of excitation. So they start the search, and
beside its answer they are judged by the study's own equations. What detuning costs is judged in the same way:
one unknown off at a time, and everything within the stated scatter at once.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.brief.mass_properties import mass_properties
from detune.brief.sizing import SizingUnknown
from detune.physics import absorber
from detune.sizing.made_parts import Made, bounds, made_design, sizing_of
from detune.solvers.perturbed import perturbed
from detune.solvers.scatter_machine import NOTHING, ScatterMap, Variable, scatter_map
from detune.solvers.size_batch import judge, judge_alike

Floats = NDArray[np.float64]
SHIFTS = (-0.10, -0.05, -0.02, 0.0, 0.02, 0.05, 0.10)
# Random points of the stated scatter besides its corners, and most corners that are all judged.
INSIDE, MOST_CORNERS = 32, 128
# Points of the curve of detuning, and how far it goes where the stated scatter is less.
CURVE, FARTHEST = 41, 0.10


@dataclass(frozen=True)
class Detuned:
    """Worst response over its limit when one unknown of an absorber is off by a share, everything else as sized."""

    unknown: str
    share: float
    worst_response: float


@dataclass(frozen=True)
class ClosedForm:
    """One closed form for one absorber at the sized mass: what it is the best for, tuning in Hz, damping ratio.

    `height` is the greatest magnitude (harmonic) or the variance (white noise) the form promises on a single
    mass, in the units of `physics.absorber`, NaN where its source states none. `worst_response` is over the
    limit, by the study's own equations, everything else as sized. `within` tells whether the form keeps within the
    bounds that the study states for its unknowns.
    """

    absorber: str
    name: str
    best_for: str
    mass_ratio: float
    tuning: float
    damping: float
    height: float
    worst_response: float
    within: bool = True


@dataclass(frozen=True)
class ScatteredAbsorber:
    """Worst response over its limit as sized (`nominal`) and at the worst of the stated scatter (`greatest`).

    `tuning` (least, greatest) is the detuning of the absorber, as a share, that the scatter of its own spring
    and mass makes. `points` were judged: every corner, or a part of them (`all_corners`), and some inside; no
    proof. `stated` tells what scatters. `curve` (2, N): the tuning off by, and the worst response there.
    """

    absorber: str
    nominal: float
    greatest: float
    tuning: tuple[float, float]
    points: int
    all_corners: bool
    stated: tuple[str, ...]
    curve: Floats


def absorber_starts(brief: Brief, middle: Floats) -> tuple[Floats, ...]:
    """Points (u,) with every absorber tuned by each closed form, within its bounds (physics.absorber).

    The body the absorber stands on is taken as one mass on the axial stiffness of its own parts.
    """
    unknowns = sizing_of(brief).unknown
    tuned = [k for k, u in enumerate(unknowns) if u.kind == "absorber-tuning"]
    if not tuned:
        return ()
    low, high = bounds(brief)
    every = [_forms(brief, unknowns[k], middle) for k in tuned]
    found = [middle.copy() for _ in range(max(len(forms) for forms in every))]
    for k, forms in zip(tuned, every, strict=True):
        damped = [
            j for j, u in enumerate(unknowns) if u.kind == "absorber-damping" and u.body == unknowns[k].body
        ]
        for place, values in enumerate(found):
            # A form that is not for this absorber leaves it to the last one.
            frequency, ratio = forms[min(place, len(forms) - 1)]
            values[k] = frequency
            for j in damped:
                values[j] = ratio
    return tuple(np.clip(values, low, high) for values in found)


def _forms(brief: Brief, unknown: SizingUnknown, values: Floats) -> list[tuple[float, float]]:
    """(tuning Hz, damping ratio) of each closed form for one absorber."""
    own, ratio, damping = _carrier(brief, unknown, values)
    return [(t.frequency_ratio * own, t.damping_ratio) for _, _, t in tunings(ratio, damping)]


def tunings(ratio: float, primary_damping: float = 0.0) -> list[tuple[str, str, absorber.AbsorberTuning]]:
    """Name, what it is best for, and tuning of every closed form that a mass ratio (below two) and damping allow."""
    found = [
        ("Den Hartog, Brock", "displacement, transmitted force or base motion; harmonic",
         absorber.den_hartog(ratio)),
        ("Nishihara, Asami", "the same, exact for a machine without damping; harmonic",
         absorber.nishihara_asami(ratio)),
        ("Warburton", "acceleration under a force, displacement under an unbalance; harmonic",
         absorber.warburton_force_acceleration(ratio)),
        ("Warburton", "mount deflection under base acceleration; harmonic",
         absorber.warburton_base_deflection(ratio)),
        ("Warburton, Luft", "rms displacement under a force, acceleration under base acceleration; white noise",
         absorber.white_noise_force(ratio)),
        ("Crandall, Mark", "rms velocity under a force; white noise", absorber.white_noise_velocity(ratio)),
        ("Warburton", "rms mount deflection under base acceleration; white noise",
         absorber.white_noise_base_deflection(ratio)),
        ("Sadek", "equal damping of both modes, so the fastest decay",
         absorber.equal_modal_damping(ratio, primary_damping)),
    ]  # fmt: skip
    low, high, most = absorber.FITTED
    if low <= ratio <= high and 0.0 < primary_damping <= most:
        fitted = absorber.ioi_ikeda(ratio, primary_damping)
        found.append(("Ioi, Ikeda", "displacement of a machine with damping of its own; harmonic", fitted))
    return found


def _carrier(brief: Brief, unknown: SizingUnknown, values: Floats) -> tuple[float, float, float]:
    """Frequency (Hz) of the body an absorber stands on as one mass on its own parts, mass ratio, damping
    ratio there.
    """
    made = made_design(brief, values)
    carrier = next(s.to for s in brief.stations if s.group == unknown.group)
    if carrier == unknown.body:
        carrier = next(str(s.on) for s in brief.stations if s.group == unknown.group)
    bodies = {body.name: mass_properties(body).mass for body in made.brief.bodies}
    ratio = min(max(bodies[str(unknown.body)] / bodies[carrier], 1e-4), 1.0)
    stiffness = imaginary = viscous = 0.0
    for station in brief.stations:
        if station.group == unknown.group or carrier not in (station.on or brief.bodies[0].name, station.to):
            continue
        mount = made.design.mounts[made.design.groups.index(station.group)]
        k = station.parallel * (mount.stiffness_dynamic[2] or 0.0)
        stiffness += k
        imaginary += (mount.loss_factor[2] or 0.0) * k
        viscous += station.parallel * (mount.viscous[2] or 0.0)
    omega = float(np.sqrt(stiffness / bodies[carrier]))
    damping = 0.5 * (imaginary + omega * viscous) / stiffness if stiffness > 0.0 else 0.0
    return omega / (2.0 * np.pi), ratio, damping


def closed_forms(brief: Brief, values: Floats) -> tuple[ClosedForm, ...]:
    """Every closed form for every absorber whose tuning is sought, judged with everything else as sized.

    A form outside the bounds of its unknowns is judged where it is.
    """
    unknowns = sizing_of(brief).unknown
    low, high = bounds(brief)
    rows: list[Floats] = []
    found: list[ClosedForm] = []
    for k, unknown in enumerate(unknowns):
        if unknown.kind != "absorber-tuning":
            continue
        own, ratio, damping = _carrier(brief, unknown, values)
        damped = [
            j for j, u in enumerate(unknowns) if u.kind == "absorber-damping" and u.body == unknown.body
        ]
        for name, best_for, tuning in tunings(ratio, damping):
            changed = values.copy()
            changed[k] = tuning.frequency_ratio * own
            changed[damped] = tuning.damping_ratio
            rows.append(changed)
            within = bool((np.clip(changed, low, high) == changed).all())
            hertz = tuning.frequency_ratio * own
            found.append(
                ClosedForm(
                    str(unknown.body),
                    name,
                    best_for,
                    ratio,
                    hertz,
                    tuning.damping_ratio,
                    tuning.reached,
                    0.0,
                    within,
                )
            )
    if not found:
        return ()
    worst = judge(brief, np.array(rows)).objectives["worst-response"]
    return tuple(replace(form, worst_response=float(w)) for form, w in zip(found, worst, strict=True))


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


def scattered(brief: Brief, values: Floats) -> tuple[ScatteredAbsorber, ...]:
    """What the stated scatter does to every absorber; empty where none is stated, or nothing of it is of made parts."""
    unknowns = sizing_of(brief).unknown
    tuned = [k for k, unknown in enumerate(unknowns) if unknown.kind == "absorber-tuning"]
    if brief.scatter is None or not tuned:
        return ()
    made = made_design(brief, values)
    found = scatter_map(made.brief, made.design)
    points, whole = scatter_points(found)
    louder = 1.0 + found.forcing[1]
    worst = []
    for point in points:
        changed, design = perturbed(made.brief, made.design, found, point)
        judged = judge_alike(changed, [Made(changed, design)]).objectives["worst-response"]
        worst.append(louder * float(judged[0]))
    nominal = float(judge(brief, values[None]).objectives["worst-response"][0])
    told = []
    for k in tuned:
        off = _tuning(made.brief, found, unknowns[k])
        reach = max(FARTHEST, -off[0], off[1])
        shares = np.unique(np.concatenate([np.linspace(-reach, reach, CURVE), off]))
        rows = np.repeat(values[None], shares.size, axis=0)
        rows[:, k] *= 1.0 + shares
        curve = judge(brief, rows).objectives["worst-response"]
        stated = tuple(_words(variable) for variable in found.variables)
        if louder > 1.0:
            stated = (*stated, f"forcing up to {100.0 * found.forcing[1]:+.3g} %")
        told.append(
            ScatteredAbsorber(
                str(unknowns[k].body), nominal, max([nominal, *worst]), off, len(points), whole, stated,
                np.stack([shares, curve]),
            )
        )  # fmt: skip
    return tuple(told)


def _words(variable: Variable) -> str:
    low, high = variable.value_words(variable.low), variable.value_words(variable.high)
    return f"{variable.words} {low} to {high}"


def _tuning(brief: Brief, found: ScatterMap, unknown: SizingUnknown) -> tuple[float, float]:
    """Least and greatest detuning, as a share, by the scatter of an absorber's own springs and mass."""
    ends = [1.0, 1.0]
    for number, station in enumerate(brief.stations):
        if station.group == unknown.group:
            own = [found.variables[v] for v in found.stiffness[number] if v != NOTHING]
            ends[0] = min(ends[0], float(np.prod([v.low for v in own])))
            ends[1] = max(ends[1], float(np.prod([v.high for v in own])))
    number = next(i for i, body in enumerate(brief.bodies) if body.name == unknown.body)
    mass = found.mass[number]
    light, heavy = (0.0, 0.0) if mass == NOTHING else (found.variables[mass].low, found.variables[mass].high)
    return float(np.sqrt(ends[0] / (1.0 + heavy))) - 1.0, float(np.sqrt(ends[1] / (1.0 + light))) - 1.0


def scatter_points(found: ScatterMap) -> tuple[list[tuple[float, ...]], bool]:
    """Corners of the scatter, some points inside, and whether the corners are all there."""
    count = len(found.variables)
    if count == 0:
        return [()], True
    rng = np.random.default_rng(1)
    low, high = found.low, found.high
    whole = 2**count <= MOST_CORNERS
    if whole:
        corners = [
            tuple(point) for point in itertools.product(*zip(low.tolist(), high.tolist(), strict=True))
        ]
    else:
        ends = rng.integers(0, 2, (MOST_CORNERS, count))
        corners = [tuple(row) for row in np.where(ends == 0, low, high).tolist()]
    inside = [tuple(row) for row in (low + (high - low) * rng.random((INSIDE, count))).tolist()]
    return [*corners, *inside], whole
