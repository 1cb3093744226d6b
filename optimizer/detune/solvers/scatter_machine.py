"""One design of a problem under the scatter a brief states, as the arrays of the proof floor.

Every part number of the design has a factor for its lot and every station a factor of its own, for stiffness and for
damping; every body has a deviation of its mass and of its centre. A factor that does not scatter is no variable.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.brief.finding import Finding, faults_without_lines
from detune.brief.mass_properties import mass_properties
from detune.brief.scatter import COMMON_DAMPING, LISTED, Interval, PartScatter, Scatter, interval_of
from detune.ground.errors import BriefError
from detune.ground.units import STANDARD_GRAVITY
from detune.parts.kinds.mount import Mount
from detune.problem.build import StateModel
from detune.proof.scatter_data import ScatterSystem
from detune.response.absorbers import geometric_of, mass_of, spare_damping, spare_stiffness
from detune.response.design import Design
from detune.response.designs import Designs
from detune.response.gravity import gravity_stiffness
from detune.response.model import Model

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
NOTHING = -1


@dataclass(frozen=True)
class Variable:
    """One uncertain figure: what it is in words, what kind, whose, and its interval.

    kind: "stiffness lot", "stiffness part", "damping lot", "damping part" (factors), "mass" (relative deviation) or
    "centre" (deviation in m, along `axis`). owner: part number, station or body.
    """

    kind: str
    owner: str
    low: float
    high: float
    axis: int = 0

    @property
    def words(self) -> str:
        """The variable in words."""
        if self.kind == "centre":
            return f"centre of {self.owner} along {'xyz'[self.axis]}"
        if self.kind == "mass":
            return f"mass of {self.owner}"
        figure, by = self.kind.split()
        return f"{figure} of {'the lot' if by == 'lot' else 'the part at'} {self.owner}"

    def value_words(self, value: float) -> str:
        """A value of the variable in words, without its name."""
        if self.kind == "centre":
            return f"{1e3 * value:+.3g} mm"
        return f"{100.0 * (value if self.kind == 'mass' else value - 1.0):+.3g} %"


def corner_words(variables: tuple[Variable, ...], point: tuple[float, ...]) -> str:
    """A point of the scatter in words, what deviates alike together; "as listed" where nothing deviates."""
    groups: dict[tuple[str, str], list[str]] = {}
    for variable, value in zip(variables, point, strict=True):
        told = variable.value_words(value)
        if told not in ("+0 %", "+0 mm"):
            place = (
                f"{variable.owner} {'xyz'[variable.axis]}" if variable.kind == "centre" else variable.owner
            )
            groups.setdefault((variable.kind, told), []).append(place)
    words = []
    for (kind, told), owners in groups.items():
        who = {"lot": "lot", "part": "part at"}.get(kind.split()[-1], "of")
        words.append(f"{kind.split()[0]} {who} {', '.join(owners)} {told}")
    return "; ".join(words) or "as listed"


def lot_of(mount: Mount) -> tuple[str, str]:
    """Which delivery a part comes from: its list and part number, composed parts by their base."""
    return mount.catalog, mount.base or mount.part


@dataclass(frozen=True)
class ScatterMap:
    """The variables of a design, and which of them each station and body has (by position, -1 for none)."""

    variables: tuple[Variable, ...]
    stiffness: tuple[tuple[int, int], ...]
    damping: tuple[tuple[int, int], ...]
    mass: tuple[int, ...]
    centre: tuple[tuple[int, int, int], ...]
    forcing: tuple[float, float]

    @property
    def low(self) -> Floats:
        return np.array([variable.low for variable in self.variables])

    @property
    def high(self) -> Floats:
        return np.array([variable.high for variable in self.variables])

    @property
    def nominal(self) -> Floats:
        """The point (V,) at which everything is as listed."""
        return np.array([0.0 if v.kind in ("mass", "centre") else 1.0 for v in self.variables])

    @property
    def stiffness_only(self) -> bool:
        """Whether neither mass nor centre scatters."""
        return all(v.kind not in ("mass", "centre") for v in self.variables)


def scatter_map(brief: Brief, design: Design) -> ScatterMap:
    """Return the variables of a design under the brief's scatter. Raises BriefError for a tolerance not stated."""
    scatter = brief.scatter
    assert scatter is not None
    variables: list[Variable] = []
    known: dict[tuple[str, str, str], int] = {}

    def number(
        kind: str, key: tuple[str, str], owner: str, interval: tuple[float, float], axis: int = 0
    ) -> int:
        if interval == (0.0, 0.0):
            return NOTHING
        if (kind, *key) not in known:
            start = 0.0 if kind in ("mass", "centre") else 1.0
            known[kind, *key] = len(variables)
            variables.append(Variable(kind, owner, start + interval[0], start + interval[1], axis))
        return known[kind, *key]

    stiffness, damping = _stated(scatter)
    pairs: dict[str, list[tuple[int, int]]] = {"stiffness": [], "damping": []}
    for station in brief.every_station:
        mount = design.mounts[design.groups.index(station.group)]
        for figure, stated in (("stiffness", stiffness), ("damping", damping)):
            if mount.pieces == 0 or (figure == "damping" and not _damped(mount)):
                pairs[figure].append((NOTHING, NOTHING))
                continue
            lot = number(
                f"{figure} lot", lot_of(mount), mount.base or mount.part, _of(brief, stated.lot, mount)
            )
            part = number(f"{figure} part", ("", station.name), station.name, _of(brief, stated.part, mount))
            pairs[figure].append((lot, part))
    masses, centres = [], []
    for body in brief.bodies:
        masses.append(number("mass", ("", body.name), body.name, interval_of(scatter.mass)))
        widths = scatter.centre or (0.0, 0.0, 0.0)
        each = [number("centre", (body.name, "xyz"[i]), body.name, (-w, w), i) for i, w in enumerate(widths)]
        centres.append((each[0], each[1], each[2]))
    return ScatterMap(
        variables=tuple(variables),
        stiffness=tuple(pairs["stiffness"]),
        damping=tuple(pairs["damping"]),
        mass=tuple(masses),
        centre=tuple(centres),
        forcing=interval_of(scatter.forcing),
    )


def _stated(scatter: Scatter) -> tuple[PartScatter, PartScatter]:
    stiffness = scatter.stiffness or PartScatter(lot=LISTED)
    return stiffness, scatter.damping or PartScatter(lot=(-COMMON_DAMPING, COMMON_DAMPING))


def _damped(mount: Mount) -> bool:
    return any(value for value in (*mount.loss_factor, *mount.viscous))


def _of(brief: Brief, stated: str | Interval | None, mount: Mount) -> tuple[float, float]:
    if not isinstance(stated, str):
        return interval_of(stated)
    if mount.tolerance != mount.tolerance:
        expected = (
            "a tolerance in the list for every part that may be chosen, or the scatter stated as a ratio"
        )
        finding = Finding(("scatter", "stiffness"), f'"listed", and {mount.part} states none', expected)
        raise BriefError(faults_without_lines(brief.file, (finding,)))
    return -mount.tolerance, mount.tolerance


def why_not_linear(each: StateModel, part: NDArray[np.intp]) -> str | None:
    """Return why a design in a state has no matrices for the bounds, None if it has."""
    if each.model.floor_table is not None:
        return "the floor's stiffness follows frequency"
    for group, index in zip(each.model.groups, part, strict=True):
        if not bool(group.arrays.plain[index]):
            return f"the stiffness of {group.mounts[index].part} follows load, frequency or amplitude"
    return None


def scatter_system(
    brief: Brief, each: StateModel, part: NDArray[np.intp], step: int, found: ScatterMap
) -> ScatterSystem:
    """Return the machine of a design (part (G,), ballast step) in a state, under its scatter.

    Axes: three of every station, three of every given connection, and the floor's own spring if it has a freedom.
    """
    model = each.model
    axes, stiffness, loss, viscous, s_factors, t_factors = _axes(model, part, found)
    fixed = {name: getattr(model, f"fixed_{name}").copy() for name in ("dynamic", "hysteretic", "viscous")}
    _take_out(model, fixed)
    one = Designs(np.array([part], dtype=np.intp), np.array([step], dtype=np.intp))
    fixed["dynamic"] = _one(fixed["dynamic"] + spare_stiffness(model, one))
    fixed["viscous"] = _one(fixed["viscous"] + spare_damping(model, one))
    if model.with_gravity_stiffness:
        fixed["dynamic"] = fixed["dynamic"] + geometric_of(model, one)[0]
    mass_terms, mass_factors = _mass_terms(brief, model, found)
    own_terms, own_factors = gravity_terms(brief, model, found) if model.with_gravity_stiffness else ([], [])
    n = model.frame.count
    return ScatterSystem(
        mass=_even(mass_of(model, one)[0]),
        fixed_dynamic=_even(fixed["dynamic"]),
        fixed_hysteretic=_even(fixed["hysteretic"]),
        fixed_viscous=_even(fixed["viscous"]),
        axes=axes,
        stiffness=stiffness,
        loss=loss,
        viscous=viscous,
        stiffness_factors=s_factors,
        damping_factors=t_factors,
        mass_terms=np.array(mass_terms).reshape(-1, n, n),
        mass_factors=np.array(mass_factors, dtype=np.int64).reshape(-1, 3),
        stiffness_terms=np.array(own_terms).reshape(-1, n, n),
        stiffness_term_factors=np.array(own_factors, dtype=np.int64).reshape(-1, 3),
        low=found.low,
        high=found.high,
        names=tuple(variable.words for variable in found.variables),
    )


def _one(matrix: Floats) -> Floats:
    """The matrix (n, n) of the only design, which may stand in a batch of one."""
    return matrix.reshape(matrix.shape[-2:])


def _even(matrix: Floats) -> Floats:
    """The matrix made exactly symmetric."""
    even: Floats = 0.5 * (matrix + matrix.T)
    return even


def _axes(
    model: Model, part: NDArray[np.intp], found: ScatterMap
) -> tuple[Floats, Floats, Floats, Floats, Integers, Integers]:
    rows, k, h, c, s, t = [], [], [], [], [], []
    for number, station in enumerate(model.stations):
        arrays, index = model.groups[station.group].arrays, part[station.group]
        times = station.parallel * station.factor
        rows += list(station.rows)
        k += list(times * arrays.stiffness_dynamic[index])
        h += list(times * arrays.stiffness_dynamic[index] * arrays.loss_factor[index])
        c += list(times * arrays.viscous[index])
        s += [found.stiffness[number]] * 3
        t += [found.damping[number]] * 3
    for connection in model.connections:
        rows += list(connection.rows)
        k += list(connection.stiffness)
        h += list(connection.hysteretic)
        c += list(connection.viscous)
    if model.frame.flexible_floor:
        rows.append(np.eye(model.frame.count)[-1])
        k.append(model.floor_stiffness)
        h.append(0.0)
        c.append(model.floor_damping)
    s += [(NOTHING, NOTHING)] * (len(k) - len(s))
    t += [(NOTHING, NOTHING)] * (len(k) - len(t))
    stiffness, loss, viscous = (np.array(v, dtype=np.float64) for v in (k, h, c))
    pairs = np.array(s, dtype=np.int64), np.array(t, dtype=np.int64)
    return np.array(rows), stiffness, loss, viscous, *pairs


def _take_out(model: Model, fixed: dict[str, Floats]) -> None:
    """Take connections and the floor's spring out of the fixed matrices: they are axes here."""
    scale = {name: max(float(np.abs(matrix).max()), 1e-300) for name, matrix in fixed.items()}
    for connection in model.connections:
        rows = connection.rows
        fixed["dynamic"] -= rows.T @ (connection.stiffness[:, None] * rows)
        fixed["hysteretic"] -= rows.T @ (connection.hysteretic[:, None] * rows)
        fixed["viscous"] -= rows.T @ (connection.viscous[:, None] * rows)
    if model.frame.flexible_floor:
        fixed["dynamic"][-1, -1] -= model.floor_stiffness
        fixed["viscous"][-1, -1] -= model.floor_damping
    for name, matrix in fixed.items():
        matrix[np.abs(matrix) < 1e-13 * scale[name]] = 0.0


def _bodies(brief: Brief, model: Model) -> list[tuple[str, float, Floats, Floats, Floats]]:
    """Name, mass, inertia, move rows at the centre (3, n), and their derivatives (3, 3, n) by the centre."""
    out = []
    for body in brief.bodies:
        known = mass_properties(body)
        move = model.frame.motion_rows(body.name, known.centre)
        by = np.stack(
            [model.frame.motion_rows(body.name, known.centre + np.eye(3)[i]) - move for i in range(3)]
        )
        out.append((body.name, known.mass, known.inertia, move, by))
    return out


def _mass_terms(
    brief: Brief, model: Model, found: ScatterMap
) -> tuple[list[Floats], list[tuple[int, int, int]]]:
    """What mass and centre of the bodies change in M: (1 + m) times the mass matrix about the moved centre, less M."""
    terms: list[Floats] = []
    factors: list[tuple[int, int, int]] = []
    for number, (name, mass, inertia, move, by) in enumerate(_bodies(brief, model)):
        m, turn = found.mass[number], model.frame.rotation_rows(name)
        parts: list[tuple[Floats, tuple[int, ...]]] = []
        if m >= 0:
            parts.append((mass * move.T @ move + turn.T @ inertia @ turn, (m,)))
        for i, d in enumerate(found.centre[number]):
            if d < 0:
                continue
            linear = mass * (move.T @ by[i] + by[i].T @ move)
            parts += [(linear, (d,))] + ([(linear, (m, d))] if m >= 0 else [])
            for k, other in enumerate(found.centre[number][: i + 1]):
                if other < 0:
                    continue
                square = mass * by[i].T @ by[i] if i == k else mass * (by[i].T @ by[k] + by[k].T @ by[i])
                parts += [(square, (d, other))] + ([(square, (m, d, other))] if m >= 0 else [])
        for matrix, names in parts:
            if np.any(matrix != 0.0):
                terms.append(_even(matrix))
                padded = (*names, NOTHING, NOTHING)
                factors.append((padded[0], padded[1], padded[2]))
    return terms, factors


def weight_terms(brief: Brief, model: Model, found: ScatterMap) -> list[tuple[Floats, tuple[int, int, int]]]:
    """What mass and centre change in the static load: vectors (n,) times products of variables."""
    out: list[tuple[Floats, tuple[int, int, int]]] = []
    down = np.array([0.0, 0.0, -STANDARD_GRAVITY])
    for number, (_, mass, _, move, by) in enumerate(_bodies(brief, model)):
        m = found.mass[number]
        if m >= 0:
            out.append((move.T @ (mass * down), (m, NOTHING, NOTHING)))
        for i, d in enumerate(found.centre[number]):
            if d >= 0:
                moved = by[i].T @ (mass * down)
                out.append((moved, (d, NOTHING, NOTHING)))
                out += [(moved, (m, d, NOTHING))] if m >= 0 else []
    return [(vector, names) for vector, names in out if np.any(vector != 0.0)]


def gravity_terms(
    brief: Brief, model: Model, found: ScatterMap
) -> tuple[list[Floats], list[tuple[int, int, int]]]:
    """What mass and centre change in gravity's geometric stiffness, which is linear in all forces at given places."""
    terms: list[Floats] = []
    factors: list[tuple[int, int, int]] = []
    if found.stiffness_only:
        return terms, factors
    down = np.array([0.0, 0.0, -STANDARD_GRAVITY])
    for number, (name, mass, _, move, by) in enumerate(_bodies(brief, model)):
        m = found.mass[number]
        if m >= 0:
            terms.append(_geometric(brief, model, move.T @ (mass * down), name, np.zeros(3), mass * down))
            factors.append((m, NOTHING, NOTHING))
        for i, d in enumerate(found.centre[number]):
            if d >= 0:
                matrix = _geometric(brief, model, by[i].T @ (mass * down), name, np.eye(3)[i], mass * down)
                terms += [matrix] * (2 if m >= 0 else 1)
                factors.append((d, NOTHING, NOTHING))
                if m >= 0:
                    factors.append((m, d, NOTHING))
    return [_even(term) for term in terms], factors


def _geometric(brief: Brief, model: Model, weight: Floats, body: str, arm: Floats, force: Floats) -> Floats:
    """Geometric stiffness (n, n) of a force on a body at an arm and of what equal springs answer to `weight`."""
    own = [column for column, (name, _) in enumerate(model.frame.names) if name in model.frame.references]
    stations = [station for station in model.stations if not station.is_absorber]
    rows = [station.rows[:, own] for station in stations]
    equal = sum(
        (s.parallel * row.T @ row for s, row in zip(stations, rows, strict=True)),
        np.zeros((len(own), len(own))),
    )
    total = np.zeros((model.frame.count, model.frame.count))
    if np.linalg.matrix_rank(equal, hermitian=True) < len(own):
        return total
    rest = np.linalg.solve(equal, weight[own])
    for each in brief.bodies:
        centre = model.frame.references[each.name]
        arms, forces = [np.zeros(3)], [np.zeros((1, 3))]
        if each.name == body:
            arms.append(arm)
            forces.append(force[None])
        for station, row in zip(stations, rows, strict=True):
            pushed = -station.parallel * station.axes @ (row @ rest)
            for end, sign in ((station.on, 1.0), (station.to, -1.0)):
                if end == each.name:
                    arms.append(station.position - centre)
                    forces.append(sign * pushed[None])
        total += gravity_stiffness(model.frame.rotation_rows(each.name), arms, forces)[0]
    return total
