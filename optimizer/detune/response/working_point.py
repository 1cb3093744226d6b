"""Static equilibrium of designs whose parts do not have straight load-deflection lines."""

from collections import deque
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.physics.load_curve import ElementLaw, LoadCurve, NotAtRest, at_rest
from detune.physics.tables import OutsideTable
from detune.physics.unsupported import UnsupportedMachine
from detune.response.absorbers import weight_of
from detune.response.designs import Designs
from detune.response.model import Model

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class WorkingPoint:
    """Where D designs rest: q (D, n), axial force of one part (S, D) in N (compression positive), and the tangent.

    `tangent` (S, D) N/m of one part along its axis at that load. nan where a part leaves its curve or the
    machine finds no rest: such a design fails every static limit.
    """

    q: Floats
    force: Floats
    tangent: Floats

    def take(self, index: NDArray[np.generic]) -> "WorkingPoint":
        return WorkingPoint(self.q[index], self.force[:, index], self.tangent[:, index])


# Every stage of a problem asks for the rest of the same designs: the last few batches are remembered.
_REMEMBERED = 8
_known: deque[tuple[Model, Designs, WorkingPoint]] = deque(maxlen=_REMEMBERED)


def working_point(model: Model, designs: Designs) -> WorkingPoint | None:
    """Return the working point of a batch, None where every part is a straight spring (Newton; physics.load_curve)."""
    if not any(group.laws is not None and group.laws.with_load for group in model.groups):
        return None
    for own, batch, point in tuple(_known):
        if own is model and _alike(batch, designs):
            return point
    found = _found(model, designs)
    _known.append((model, Designs(designs.part.copy(), designs.step.copy()), found))
    return found


def _alike(one: Designs, other: Designs) -> bool:
    return np.array_equal(one.part, other.part) and np.array_equal(one.step, other.step)


def _found(model: Model, designs: Designs) -> WorkingPoint:
    count, n = designs.count, model.frame.count
    found = WorkingPoint(
        np.full((count, n), np.nan),
        np.full((len(model.stations), count), np.nan),
        np.full((len(model.stations), count), np.nan),
    )
    values, vectors = np.linalg.eigh(model.fixed_static)
    held = values > 1e-12 * max(float(values.max(initial=0.0)), 1.0)
    fixed = [ElementLaw(stiffness=float(value)) for value in values[held]]
    for index in range(count):
        rows, laws, offsets = _elements(model, designs, index)
        spare, held_spare = _spare(model, designs, index)
        try:
            rest = at_rest(
                np.vstack([*rows, vectors[:, held].T, *spare]),
                [*laws, *fixed, *held_spare],
                weight_of(model, designs.take(np.array([index])))[0],
                np.concatenate([offsets, np.zeros(len(fixed) + len(spare))]),
            )
        except (OutsideTable, NotAtRest, UnsupportedMachine):
            continue
        found.q[index] = rest.displacement
        axial = 2 + 3 * np.arange(len(model.stations))
        parts = np.array([max(station.parallel, 1) for station in model.stations])
        found.force[:, index] = rest.force[axial] / parts
        found.tangent[:, index] = rest.tangent[axial] / parts
    return found


def _spare(model: Model, designs: Designs, index: int) -> tuple[list[Floats], list[ElementLaw]]:
    """Return rows (1, n) and laws of what holds the freedoms of absorbers that are left out."""
    rows, laws = [], []
    for absorber in model.absorbers:
        own = absorber.column
        stiffness = float(absorber.stiffness[designs.part[index, absorber.group], own, own])
        if stiffness > 0.0:
            rows.append(np.eye(model.frame.count)[[own]])
            laws.append(ElementLaw(stiffness=stiffness))
    return rows, laws


def _elements(model: Model, designs: Designs, index: int) -> tuple[list[Floats], list[ElementLaw], Floats]:
    """Return rows (3, n) and three laws for every station, axial compression positive, and offsets (3 S,)."""
    rows, laws, offsets = [], [], []
    for station in model.stations:
        group = model.groups[station.group]
        part = int(designs.part[index, station.group])
        scale = station.parallel * station.factor
        static = scale * group.arrays.stiffness_static[part]
        curve = None if group.laws is None else group.laws.curves[part]
        rows.append(np.vstack([station.rows[:2], -station.rows[2]]))
        laws += [ElementLaw(stiffness=float(static[0])), ElementLaw(stiffness=float(static[1]))]
        offsets += [0.0, 0.0, station.packing]
        if curve is None or station.parallel == 0:
            laws.append(ElementLaw(stiffness=float(static[2])))
        else:
            laws.append(
                ElementLaw(curve=LoadCurve(curve.deflection, scale * curve.load, scale * curve.slope))
            )
    return rows, laws, np.array(offsets)
