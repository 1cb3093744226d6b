"""One state of the machine as functions of the sizing unknowns: matrices, their derivatives, and products with both.

Masses and weights are linear in ballast and absorber masses, and deflection rows are linear in station positions, so
two machines, one at each end of the range, give their derivatives exactly. Gravity's geometric stiffness is linear in
masses and not in positions (`gradient_gravity`).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.problem.build import StateModel
from detune.response.model import Model
from detune.sizing.made_parts import bounds, made_design, sizing_of
from detune.sizing.part_slopes import LOSS, STIFFNESS, VISCOUS, PartLaw, part_figures, part_law
from detune.solvers.gradient_gravity import Carried, by_position, carried, under
from detune.solvers.size_batch import batch

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
OF_MACHINE = ("ballast", "absorber-mass", "position")


@dataclass(frozen=True)
class MachineSlopes:
    """One state's machine at the unknowns `origin` (u,), and what changes it; columns (m,) of the unknowns.

    `mass` (m, n, n), `weight` (m, n), `rows` (m, S, 3, n), `positions` (m, S, 3): derivatives by those unknowns.
    `geometric` (m, n, n) is that of gravity's stiffness and `constant` (n, n) its value at the origin, both
    without what
    the stations carry where those move (`SizedState.springs`).
    """

    origin: Floats
    columns: tuple[int, ...]
    mass: Floats
    weight: Floats
    rows: Floats
    positions: Floats
    geometric: Floats
    constant: Floats


@dataclass(frozen=True)
class SizedState:
    """A state model ready for gradients: n freedoms, S stations, G groups, u unknowns.

    `group` (S,) of each station, `carry` (S,) how many parts carry there times what the state makes of their
    stiffness, `each` (S,) that factor alone. `springs`: what carries gravity, None where positions stay.
    """

    brief: Brief
    number: int
    state: StateModel
    laws: tuple[PartLaw, ...]
    slopes: MachineSlopes
    group: NDArray[np.intp]
    carry: Floats
    each: Floats
    springs: Carried | None

    @property
    def model(self) -> Model:
        """The model at the origin."""
        return self.state.model


@dataclass(frozen=True)
class StateAt:
    """A state at given unknowns: matrices (n, n), station rows (S, 3, n), and the parts with their slopes.

    `parts` (G, 8) figures of one part of each group and `part_slopes` (G, 8, u); `geometric` (n, n) and its slopes
    (m, n, n); `ratio` (G,) dynamic over static stiffness.
    """

    sized: SizedState
    mass: Floats
    weight: Floats
    rows: Floats
    geometric: Floats
    geometric_slopes: Floats
    parts: Floats
    part_slopes: Floats
    ratio: Floats
    stiffness: Floats
    hysteretic: Floats
    viscous: Floats
    static: Floats

    @cached_property
    def flat(self) -> Floats:
        """Station rows one below the other (3 S, n)."""
        return self.rows.reshape(-1, self.rows.shape[2])

    def station_parts(self) -> Floats:
        """Figures (S, 8) of the part at every station."""
        return np.asarray(self.parts[self.sized.group])

    def complex_stiffness(self, omega: Floats) -> Complexes:
        """Complex dynamic stiffness (N, S, 3) of one part at every station, as its state makes it."""
        part = self.station_parts()
        spring = part[:, STIFFNESS] * (1.0 + 1j * part[:, LOSS, None])
        whole = spring[None] + 1j * omega[:, None, None] * part[None, :, VISCOUS]
        return np.asarray(self.sized.each[None, :, None] * whole)

    def dynamic(self, omega: Floats) -> Complexes:
        """D(w) (N, n, n)."""
        w = omega[:, None, None]
        return np.asarray(self.stiffness + 1j * (self.hysteretic + w * self.viscous) - w**2 * self.mass)


def sized_states(brief: Brief) -> tuple[SizedState, ...]:
    """Every state of the brief's machine, at the middle of all bounds."""
    low, high = bounds(brief)
    origin = 0.5 * (low + high)
    unknowns = sizing_of(brief).unknown
    columns = tuple(k for k, u in enumerate(unknowns) if u.kind in OF_MACHINE and u.bounds[0] < u.bounds[1])
    base = _models(brief, origin)
    ends = []
    for column in columns:
        pair = [origin.copy(), origin.copy()]
        pair[0][column], pair[1][column] = low[column], high[column]
        ends.append([_models(brief, values) for values in pair])
    laws = tuple(part_law(brief, group) for group in brief.groups)
    moves = any(unknowns[k].kind == "position" for k in columns)
    found = []
    for number, each in enumerate(base):
        pairs = [(one[number].model, two[number].model) for one, two in ends]
        spans = [high[k] - low[k] for k in columns]
        stations = each.model.stations
        springs = carried(each.model) if moves else None
        found.append(
            SizedState(
                brief, number, each, laws,
                _slopes(origin, columns, each.model, pairs, spans, springs),
                np.array([s.group for s in stations], dtype=np.intp),
                np.array([s.parallel * s.factor for s in stations]),
                np.array([s.factor for s in stations]),
                springs,
            )
        )  # fmt: skip
    return tuple(found)


def _models(brief: Brief, values: Floats) -> tuple[StateModel, ...]:
    made = made_design(brief, values)
    return batch(made.brief, [made])[0].states


def _slopes(
    origin: Floats,
    columns: tuple[int, ...],
    base: Model,
    pairs: list[tuple[Model, Model]],
    spans: list[float],
    springs: Carried | None,
) -> MachineSlopes:
    n, stations = base.frame.count, len(base.stations)
    mass, weight = np.zeros((len(columns), n, n)), np.zeros((len(columns), n))
    rows, geometric = np.zeros((len(columns), stations, 3, n)), np.zeros((len(columns), n, n))
    positions = np.zeros((len(columns), stations, 3))
    for place, ((one, two), span) in enumerate(zip(pairs, spans, strict=True)):
        mass[place] = (two.mass[0] - one.mass[0]) / span
        weight[place] = (two.weight[0] - one.weight[0]) / span
        for s, (first, second) in enumerate(zip(one.stations, two.stations, strict=True)):
            rows[place, s] = (second.rows - first.rows) / span
            positions[place, s] = (second.position - first.position) / span
        if not positions[place].any():
            geometric[place] = (two.geometric[0] - one.geometric[0]) / span
    constant = base.geometric[0]
    if springs is not None:
        loads = np.vstack([base.weight[0], weight])
        held = under(springs, springs.rows, springs.positions, loads)
        constant, geometric = constant - held[0], geometric - held[1:]
    return MachineSlopes(origin, columns, mass, weight, rows, positions, geometric, constant)


def state_at(sized: SizedState, values: Floats) -> StateAt:
    """The state at the values (u,) of the unknowns."""
    model, slopes = sized.model, sized.slopes
    change = values[list(slopes.columns)] - slopes.origin[list(slopes.columns)]
    rows = np.array([station.rows for station in model.stations]) + np.tensordot(change, slopes.rows, axes=1)
    weight = model.weight[0] + np.tensordot(change, slopes.weight, axes=1)
    geometric, by_machine = _geometric(sized, weight, change)
    figures = [part_figures(law, values) for law in sized.laws]
    parts, part_slopes = np.array([f for f, _ in figures]), np.array([s for _, s in figures])
    ratio = np.array([law.made.dynamic_to_static for law in sized.laws])
    at = parts[sized.group]
    carried = sized.carry[:, None] * at[:, STIFFNESS]
    summed = _sums(rows, np.stack([
        carried, carried * at[:, LOSS, None], sized.carry[:, None] * at[:, VISCOUS],
        carried / ratio[sized.group][:, None],
    ]))  # fmt: skip
    return StateAt(
        sized=sized,
        mass=model.mass[0] + np.tensordot(change, slopes.mass, axes=1),
        weight=weight,
        rows=rows,
        geometric=geometric,
        geometric_slopes=by_machine,
        parts=parts,
        part_slopes=part_slopes,
        ratio=ratio,
        stiffness=model.fixed_dynamic + (geometric if model.with_gravity_stiffness else 0.0) + summed[0],
        hysteretic=model.fixed_hysteretic + summed[1],
        viscous=model.fixed_viscous + summed[2],
        static=model.fixed_static + summed[3],
    )


def _sums(rows: Floats, values: Floats) -> Floats:
    """Sum over stations and axes of values (k, S, 3) times row^T row: (k, n, n)."""
    n = rows.shape[2]
    flat = rows.reshape(-1, n)
    return np.asarray((flat.T[None] * values.reshape(len(values), 1, -1)) @ flat)


def _geometric(sized: SizedState, weight: Floats, change: Floats) -> tuple[Floats, Floats]:
    """Gravity's geometric stiffness (n, n) and its slopes (m, n, n) by the machine's unknowns."""
    slopes, springs = sized.slopes, sized.springs
    straight = slopes.constant + np.tensordot(change, slopes.geometric, axes=1)
    if springs is None:
        return straight, slopes.geometric
    rows, positions = springs.rows.copy(), springs.positions.copy()
    count = len(sized.group)
    rows[:count] += np.tensordot(change, slopes.rows[..., springs.own], axes=1)
    positions[:count] += np.tensordot(change, slopes.positions, axes=1)
    held = under(springs, rows, positions, np.vstack([weight, slopes.weight]))
    by_machine = slopes.geometric + held[1:]
    for place in np.flatnonzero(slopes.positions.any(axis=(1, 2))):
        moved, turned = np.zeros_like(rows), np.zeros_like(positions)
        moved[:count], turned[:count] = slopes.rows[place][..., springs.own], slopes.positions[place]
        by_machine[place] += by_position(springs, rows, positions, weight, moved, turned)
    return straight + held[0], by_machine
