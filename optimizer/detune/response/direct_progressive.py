"""The assessor's motion on whole load-deflection curves, by scipy's own integration of the equations of motion.

A part with a curve pushes along its axis with P = F0 + r (F(d) - F0), never less than nothing where it cannot pull:
F0 its force at rest, F its listed curve, r its dynamic over its static tangent there. Motion counts from rest.
"""

from bisect import bisect_right
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.physics.load_curve import ElementLaw, law_force
from detune.response.direct import DirectMachine
from detune.response.direct_laws import axial_law, follows_curve
from detune.response.direct_modes import DirectModes

Floats = NDArray[np.float64]
RELATIVE = 1e-8


@dataclass(frozen=True, eq=False)
class CurvedPart:
    """One station on a curve: its number, row (n,) along its axis, law, and one part's figures at rest."""

    number: int
    row: Floats
    law: ElementLaw
    share: float
    factor: float
    pulls: bool
    deflection: float
    force: float
    ratio: float
    tangent: float

    def push(self, moved: Floats) -> Floats:
        """Listed force of one part less that at rest, over the motion `moved` of its head along its axis."""
        listed, _ = law_force(self.law, self.deflection - moved)
        push = self.force + self.ratio * (listed - self.force)
        return (push if self.pulls else np.maximum(push, 0.0)) - self.force

    def push_at(self) -> Callable[[float], float]:
        """Return `push` for one motion at a time, in plain numbers: an integration asks for it very often."""
        curve = self.law.curve
        assert curve is not None
        places, loads, slopes = (x.tolist() for x in (curve.deflection, curve.load, curve.slope))
        least, last = -self.force, len(places) - 2

        def push(moved: float) -> float:
            asked = self.deflection - moved
            inside = min(max(asked, places[0]), places[-1])
            i = min(bisect_right(places, inside) - 1, last)
            width = places[i + 1] - places[i]
            t, rise = (inside - places[i]) / width, loads[i + 1] - loads[i]
            early, late = slopes[i] * width, slopes[i + 1] * width
            third, second = early + late - 2.0 * rise, 3.0 * rise - 2.0 * early - late
            listed = loads[i] + t * (early + t * (second + t * third))
            listed += (early + t * (2.0 * second + 3.0 * t * third)) / width * (asked - inside)
            more: float = self.ratio * (listed - self.force)
            return more if self.pulls else max(more, least)

        return push

    def leaves(self, moved: Floats) -> bool:
        """Return whether the part leaves its curve; a part that cannot pull may hang free below it."""
        curve = self.law.curve
        assert curve is not None
        gone = self.deflection - moved
        slack = 1e-9 * float(np.ptp(curve.deflection))
        below = self.pulls and bool(np.any(gone < curve.deflection[0] - slack))
        return below or bool(np.any(gone > curve.deflection[-1] + slack))


def curved_parts(machine: DirectMachine) -> tuple[CurvedPart, ...]:
    """Return the stations whose parts follow a curve and carry; none where the machine finds no rest on them."""
    rest = machine.rest
    if rest is None:
        return ()
    parts = []
    for number, station in enumerate(machine.stations):
        mount = machine.mount(station)
        if not follows_curve(mount) or machine.share(station) <= 0.0:
            continue
        row = (machine.axes(station).T @ machine.across(station))[2, machine.free]
        tangent = float(rest.tangent[number])
        parts.append(
            CurvedPart(
                number=number,
                row=row,
                law=axial_law(mount),
                share=machine.share(station),
                factor=machine.factor(station),
                pulls=mount.pulls,
                deflection=machine.packing(station) - float(row @ rest.q),
                force=float(rest.force[number]),
                ratio=float(machine.part(station, np.array([1e-9]))[0, 2].real) / tangent,
                tangent=tangent,
            )
        )
    return tuple(parts)


def unloaded(found: DirectModes, parts: tuple[CurvedPart, ...], weight: Floats) -> Floats:
    """Return where the machine stands (n,) with its weight (n,) taken off; any part holds as if it could pull."""
    from scipy.optimize import root

    other = _other(found, parts)
    first = -np.linalg.solve(found.stiffness, weight)
    size = float(np.abs(first).max()) or 1.0

    def missing(x: Floats) -> Floats:
        moved = x * size
        pushed = np.zeros(len(x))
        for p in parts:
            listed, _ = law_force(p.law, p.deflection - p.row @ moved)
            pushed += p.row * p.share * p.ratio * (float(listed) - p.force)
        balance: Floats = weight + other @ moved - pushed
        return balance

    solved = root(missing, first / size, method="hybr", options={"xtol": 1e-12})
    return np.asarray(solved.x) * size


def simulated_on_curves(
    found: DirectModes,
    parts: tuple[CurvedPart, ...],
    damping: Floats,
    load: Floats,
    values: Floats,
    step: float,
    state: Floats,
    stations: int,
) -> tuple[Floats, Floats, bool]:
    """Return rates (3, T, n), one part's axial force beyond its tangent (S, T), and whether a part left its curve.

    values (T,) along load (n,), straight between samples; state (2n,) at the start.
    """
    from scipy.integrate import solve_ivp

    n = len(load)
    inverse, other = np.linalg.inv(found.mass), _other(found, parts)
    time = step * np.arange(len(values))

    def accelerated(f: Floats, moved: Floats, fast: Floats) -> Floats:
        """Acceleration (T, n) from load values (T,) and states (T, n)."""
        force = f[:, None] * load - moved @ other.T - fast @ damping.T
        for part in parts:
            force = force + np.outer(part.share * part.push(moved @ part.row), part.row)
        rate: Floats = force @ inverse.T
        return rate

    rows = np.array([part.row for part in parts])
    pushes = [(part.push_at(), part.share) for part in parts]
    by_load, by_state = inverse @ load, np.hstack([-inverse @ other, -inverse @ damping])
    by_push = inverse @ rows.T
    last = len(values) - 2

    def rates(t: float, y: Floats) -> Floats:
        i = min(max(int(t / step), 0), last)
        f = values[i] + (t / step - i) * (values[i + 1] - values[i])
        pushed = [share * push(x) for (push, share), x in zip(pushes, (rows @ y[:n]).tolist(), strict=True)]
        return np.concatenate([y[n:], f * by_load + by_state @ y + by_push @ pushed])

    scale = (
        np.abs(state[:n]).max() + np.abs(np.linalg.solve(found.stiffness, load)).max() * np.abs(values).max()
    )
    omega = 2.0 * np.pi * float(found.frequency[-1])
    absolute = RELATIVE * np.repeat([scale, scale * omega], n) if scale > 0.0 else 1e-15
    solved = solve_ivp(rates, (0.0, time[-1]), state, method="DOP853", t_eval=time, rtol=RELATIVE, atol=absolute,
                       max_step=8.0 * step if np.any(values) else np.inf)  # fmt: skip
    moved, fast = solved.y[:n].T, solved.y[n:].T
    more = np.zeros((stations, len(values)))
    for part in parts:
        along = moved @ part.row
        more[part.number] = -part.factor * (part.push(along) + part.ratio * part.tangent * along)
    left = any(part.leaves(moved @ part.row) for part in parts)
    return np.stack([moved, fast, accelerated(values, moved, fast)]), more, left


def _other(found: DirectModes, parts: tuple[CurvedPart, ...]) -> Floats:
    """Return the stiffness (n, n) of everything that is no curve."""
    stiffness = found.stiffness.copy()
    for part in parts:
        stiffness -= part.share * part.ratio * part.tangent * np.outer(part.row, part.row)
    return stiffness
