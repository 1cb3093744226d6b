"""One design of a batch in time on the whole load-deflection curves of its parts, where some part has one.

Motion counts from the resting place, where the curves and the weight balance. Along its axis a part with a curve
pushes with F0 + r (F(d) - F0): F0 its force at rest, F its static curve, r what turns the static tangent into the
dynamic one at rest; so small motion is that of the tangent. A part that cannot pull pushes with no less than
nothing. All damping is that of the linearised design. A part that leaves its curve has no figure: its stop has been
met, and the design is told to be `beyond`.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.physics.load_curve import ElementLaw, LoadCurve, NotAtRest, at_rest, deflection_at, law_force
from detune.physics.nonlinear_simulation import simulate_on_laws
from detune.physics.simulation import Motion
from detune.physics.tables import OutsideTable, hermite
from detune.physics.unsupported import UnsupportedMachine
from detune.response.assemble import Dynamic
from detune.response.model import Model, StationRows

Floats = NDArray[np.float64]
# Ratio of the stiffest to the resting slope up to which the samples of the linear motion are close enough.
STIFFENING_COVERED = 16.0


@dataclass(frozen=True, eq=False)
class CurvedStation:
    """A station whose part follows a curve: its number, its row (n,) along its axis, and its whole axial law.

    `law`: force of all its parts, compression positive, over deflection from where the force is zero (a part that
    cannot pull) or from rest. `rest` (m): that deflection at rest. `force` (N): all parts at rest. `tangent` (N/m):
    all parts, dynamic. `parts`: how many share the force.
    """

    number: int
    row: Floats
    law: ElementLaw
    rest: float
    force: float
    tangent: float
    parts: int


@dataclass(frozen=True, eq=False)
class ProgressiveSystem:
    """One design on its curves: mass, damping (n, n), everything else that is stiff (n, n), and the curved stations."""

    mass: Floats
    damping: Floats
    other: Floats
    curved: tuple[CurvedStation, ...]
    stations: int

    def _elements(self) -> tuple[Floats, list[ElementLaw], Floats, Floats]:
        """Rows (E, n), laws, offsets (E,) in m and the steady load (n,) that keeps rest at zero."""
        values, vectors = np.linalg.eigh(self.other)
        rows = np.vstack([*(-each.row for each in self.curved), vectors.T])
        laws = [each.law for each in self.curved] + [ElementLaw(stiffness=float(value)) for value in values]
        offset = np.array([each.rest for each in self.curved] + [0.0] * len(values))
        steady = np.sum([-each.row * each.force for each in self.curved], axis=0)
        return rows, laws, offset, steady

    def unloaded(self, weight: Floats) -> Floats | None:
        """Return where the design stands (n,) with its weight (n,) taken off, None where a curve says nothing of it."""
        rows, laws, offset, _ = self._elements()
        # Forces count from those at rest: the whole ones vanish, and nothing would measure what is left of them.
        held = [_straight_below(each.law, each.force) for each in self.curved] + laws[len(self.curved) :]
        try:
            rest = at_rest(rows, held, -weight, offset)
        except (OutsideTable, NotAtRest, UnsupportedMachine):
            return None
        return np.asarray(rest.displacement)

    def simulated(
        self, values: Floats, pattern: Floats, step: float, displacement: Floats, velocity: Floats
    ) -> tuple[Motion, Floats, bool]:
        """Return the motion under values (T,) along pattern (n,), and what the curves do to it.

        That is one part's axial force beyond its tangent (S, T), and whether some part has left its curve.
        """
        rows, laws, offset, steady = self._elements()
        found = simulate_on_laws(
            self.mass,
            self.damping,
            rows,
            laws,
            values[:, None],
            step,
            pattern[:, None],
            steady,
            offset,
            displacement,
            velocity,
        )
        more = np.zeros((self.stations, len(values)))
        for index, each in enumerate(self.curved):
            moved = found.motion.displacement @ each.row
            more[each.number] = -(found.force[:, index] - each.force + each.tangent * moved) / each.parts
        return found.motion, more, any(found.beyond)

    @property
    def stiffening(self) -> float:
        """How much faster than the linear motion the samples have to be."""
        steepest = [
            float(np.max(each.law.curve.slope)) / each.tangent
            for each in self.curved
            if each.law.curve is not None
        ]
        return float(np.sqrt(max(1.0, max(steepest) / STIFFENING_COVERED)))


def has_curves(model: Model, dynamic: Dynamic) -> bool:
    """Return whether a part of the only design follows a load-deflection curve at a station that carries."""
    return any(_curve(model, dynamic, station) is not None for station in model.stations)


def progressive_system(
    model: Model, dynamic: Dynamic, stiffness: Floats, damping: Floats
) -> ProgressiveSystem | None:
    """Return the only design (D = 1) on its curves, None where it does not rest on them.

    stiffness and damping (n, n): its causal matrices, linear at rest.
    """
    working = dynamic.parts.working
    assert working is not None  # a part with a curve gives a working point
    if not np.all(np.isfinite(working.q)):
        return None
    other = stiffness.copy()
    curved = []
    for number, station in enumerate(model.stations):
        curve = _curve(model, dynamic, station)
        if curve is None:
            continue
        each = _curved_station(model, dynamic, number, station, curve)
        other -= each.tangent * np.outer(each.row, each.row)
        curved.append(each)
    return ProgressiveSystem(dynamic.mass[0], damping, other, tuple(curved), len(model.stations))


def _curve(model: Model, dynamic: Dynamic, station: StationRows) -> LoadCurve | None:
    laws = model.groups[station.group].laws
    if laws is None or station.parallel == 0 or dynamic.parts.working is None:
        return None
    return laws.curves[int(dynamic.parts.designs.part[0, station.group])]


def _curved_station(
    model: Model, dynamic: Dynamic, number: int, station: StationRows, curve: LoadCurve
) -> CurvedStation:
    working = dynamic.parts.working
    assert working is not None
    parts, scale = station.parallel, station.parallel * station.factor
    tangent = scale * float(dynamic.parts.constants(number)[0][0, 2])
    force = parts * float(working.force[number, 0])
    ratio = tangent / (parts * float(working.tangent[number, 0]))
    whole = LoadCurve(
        curve.deflection, force + ratio * (scale * curve.load - force), ratio * scale * curve.slope
    )
    rest = station.packing - float(station.rows[2] @ working.q[0])
    mount = model.groups[station.group].mounts[int(dynamic.parts.designs.part[0, station.group])]
    if mount.pulls:
        law = ElementLaw(curve=LoadCurve(whole.deflection - rest, whole.load, whole.slope))
        return CurvedStation(number, station.rows[2], law, 0.0, force, tangent, parts)
    zero = _zero_force(whole)
    law = ElementLaw(curve=_from(whole, zero), pulls=False)
    return CurvedStation(number, station.rows[2], law, rest - zero, force, tangent, parts)


def _zero_force(curve: LoadCurve) -> float:
    """Return the deflection at which a rising curve has no force; below its first point it goes on straight."""
    if curve.load[0] <= 0.0:
        return float(deflection_at(curve, 0.0))
    return float(curve.deflection[0] - curve.load[0] / curve.slope[0])


def _from(curve: LoadCurve, start: float) -> LoadCurve:
    """Return the part of a curve beyond `start` (m), counted from there: the same cubics, cut."""
    value, slope = hermite(curve.deflection, curve.load, curve.slope, start)
    kept = curve.deflection > start + 1e-9 * float(np.ptp(curve.deflection))
    return LoadCurve(
        np.r_[0.0, curve.deflection[kept] - start],
        np.r_[float(value), curve.load[kept]],
        np.r_[float(slope), curve.slope[kept]],
    )


def _straight_below(law: ElementLaw, force: float) -> ElementLaw:
    """Return a law less a force (N) that also pulls, straight on below its first point: it has a slope there."""
    assert law.curve is not None
    reach = float(np.ptp(law.curve.deflection))
    load, slope = law_force(ElementLaw(curve=law.curve), law.curve.deflection[0] - reach)
    return ElementLaw(
        curve=LoadCurve(
            np.r_[law.curve.deflection[0] - reach, law.curve.deflection],
            np.r_[float(load), law.curve.load] - force,
            np.r_[float(slope), law.curve.slope],
        )
    )


def finer(frequency: Floats, system: ProgressiveSystem | None) -> Floats:
    """Return frequencies (n,) with the last as high as the samples in time have to follow."""
    if system is None:
        return frequency
    return np.asarray(np.r_[frequency[:-1], frequency[-1] * system.stiffening])
