"""Purchase specification: the largest box of stiffness and damping in which any part is proven to meet the brief.

The box is proven over all parts in it (those of one group alike) and over whole frequency ranges by the matrix-ball
bound with bisection (`proof.bisect`); separation by its two corners, which is exact; sag and static loads at every
corner. What has no such form is told, and only sampled.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.band_limit import BandLimit
from detune.brief.allowable.base import Allowable, HarmonicAllowable, StaticAllowable
from detune.brief.allowable.separation import Separation
from detune.brief.brief import Brief, demanded
from detune.brief.sizing import SizingUnknown
from detune.problem.build import Problem
from detune.proof.bisect import decide
from detune.proof.robust_data import RobustSystem
from detune.response.assemble import dynamic_matrices
from detune.response.assess import assess
from detune.sizing.made_parts import bounds, made_design, sizing_of
from detune.sizing.specification import Specification, largest_proven_box
from detune.sizing.statement import SizingError
from detune.solvers.size_batch import batch, judge, static_loads
from detune.solvers.specification_outputs import Outputs, outputs_of

Floats = NDArray[np.float64]
KINDS = ("stiffness", "loss-factor", "viscous")
TOLERANCE = 8e-3
MAX_BOXES = 400
# Boxes of the bisection over all questions together; with these used up nothing further is proven.
ALL_BOXES = 30_000
INSIDE = 60
BEYOND = 16


@dataclass(frozen=True)
class SpecifiedGroup:
    """Load range (N) one part of a group must carry, and its dynamic-to-static ratio as stated."""

    group: str
    load: tuple[float, float]
    dynamic_to_static: float


@dataclass(frozen=True)
class PurchaseSpecification:
    """The box, round a design `values` (u,) with some room, and how it was proven and tested.

    `box` is over `unknowns`, in order. `beyond` tells for each face of the box what fails just outside, None where
    nothing was found to fail and the face is not known to be tight. `inside` random parts inside were judged exactly;
    `failed` of them missed a requirement (a fault of the proof if not zero). `cut_short`: the work allowed was used up,
    so faces may stand further in than need be.
    """

    unknowns: tuple[SizingUnknown, ...]
    values: Floats
    box: Specification
    groups: tuple[SpecifiedGroup, ...]
    beyond: tuple[str | None, ...]
    inside: int
    failed: int
    proven: tuple[str, ...]
    left_out: tuple[str, ...]
    cut_short: bool


class _Oracle:
    """Whether every point of a box of the specified unknowns meets the brief, by proof."""

    def __init__(self, brief: Brief, values: Floats, columns: list[int]) -> None:
        made = made_design(brief, values)
        self.brief, self.values, self.columns = made.brief, values, columns
        self.origin = brief
        self.problem, self.designs = batch(made.brief, [made])
        self.mounts = made.design.mounts
        loads = {row.station: row.axial_load for row in assess(made.brief, made.design).stations}
        self.outputs: Outputs = outputs_of(made.brief, self.problem.model, loads)
        self.separation = max(
            (a.limit for a in demanded(made.brief)[0] if isinstance(a, Separation)), default=None
        )
        self.hardest = 0
        self.boxes = 0

    def __call__(self, lower: Floats, upper: Floats) -> bool:
        if not self._corners(lower, upper):
            return False
        if self.separation is not None and not self._apart(lower, upper):
            return False
        system = self._system(lower, upper)
        outputs = self.outputs.proven
        # The limit that failed last is asked first.
        order = [self.hardest, *(k for k in range(len(outputs)) if k != self.hardest)] if outputs else []
        for k in order:
            if self.boxes >= ALL_BOXES:
                return False
            decision = decide(system, outputs[k][1], max_boxes=MAX_BOXES)
            self.boxes += decision.boxes
            if decision.status != "proven":
                self.hardest = k
                return False
        return True

    def _corners(self, lower: Floats, upper: Floats) -> bool:
        """Every requirement at all corners: quick to refuse, and what statics stand on."""
        corners = np.array(list(itertools.product(*zip(lower, upper, strict=True))))
        points = np.repeat(self.values[None], len(corners), axis=0)
        points[:, self.columns] = corners
        return bool(judge(self.origin, points).met.all())

    def _apart(self, lower: Floats, upper: Floats) -> bool:
        """Eigenvalues rise with every stiffness, so each mode ranges between its values at the two corners."""
        frequencies = []
        for end in (lower, upper):
            values = self.values.copy()
            values[self.columns] = end
            problem, designs = batch(self.brief, [made_design(self.origin, values)])
            dynamic = dynamic_matrices(problem.model, designs)
            from detune.response.modes import mode_batch

            frequencies.append(np.sort(mode_batch(dynamic).frequency[0]))
        asked = self.separation or 0.0
        for low, high in self.problem.intervals:
            below = frequencies[1] <= low * (1.0 - asked)
            above = frequencies[0] >= high * (1.0 + asked)
            if not bool((below | above).all()):
                return False
        return True

    def _system(self, lower: Floats, upper: Floats) -> RobustSystem:
        model = self.problem.model
        unknowns = [sizing_of(self.origin).unknown[k] for k in self.columns]
        rows, stiffness, loss, viscous, s, t = [], [], [], [], [], []
        for station in model.stations:
            mount = self.mounts[station.group]
            group = self.origin.groups[station.group]
            count = station.parallel * station.factor
            for axis in range(3):
                k, eta, c = (mount.stiffness_dynamic[axis] or 0.0), (mount.loss_factor[axis] or 0.0), (
                    mount.viscous[axis] or 0.0)  # fmt: skip
                rows.append(station.rows[axis])
                stiffness.append(count * k)
                loss.append(count * k * eta)
                viscous.append(count * c)
                s.append(_index(unknowns, group, "stiffness", axis))
                t.append(_index(unknowns, group, "damping", axis))
        base = self.values[self.columns]
        n = model.frame.count
        step = int(self.designs.step[0])
        own = model.geometric[step] if model.with_gravity_stiffness else np.zeros((n, n))
        return RobustSystem(
            mass=model.mass[step],
            fixed_dynamic=model.fixed_dynamic + own,
            fixed_hysteretic=model.fixed_hysteretic,
            fixed_viscous=model.fixed_viscous,
            axes=np.array(rows),
            stiffness=np.array(stiffness),
            loss=np.array(loss),
            viscous=np.array(viscous),
            stiffness_variable=np.array(s, dtype=np.int64),
            damping_variable=np.array(t, dtype=np.int64),
            mass_terms=np.zeros((0, n, n)),
            mass_variable=np.zeros(0, dtype=np.int64),
            low=lower / base,
            high=upper / base,
        )


def _index(unknowns: list[SizingUnknown], group: str, what: str, axis: int) -> int:
    """Variable of one axis of a group's parts: its own, else (the ratio kept) that of the axial stiffness; -1 fixed."""
    fallback = -1
    for number, unknown in enumerate(unknowns):
        if unknown.group != group:
            continue
        if what == "damping" and unknown.kind in ("loss-factor", "viscous"):
            return number
        if what == "stiffness" and unknown.kind == "stiffness":
            covered = {"axial": (2,), "lateral": (0, 1), "x": (0,), "y": (1,)}[str(unknown.axis)]
            if axis in covered:
                return number
            if unknown.axis == "axial":
                fallback = number
    return fallback


def why_no_specification(brief: Brief) -> str | None:
    """Why no specification can be worked out, None if it can."""
    kinds = {unknown.kind for unknown in sizing_of(brief).unknown}
    if not kinds & set(KINDS):
        return "no stiffness and no damping of a part is unknown"
    if kinds & {"absorber-tuning", "absorber-damping"}:
        return "the absorber's own tuning is no property of one part alone"
    for made in sizing_of(brief).made:
        own = {u.kind for u in sizing_of(brief).unknown if u.group == made.group}
        if ("viscous" in own and made.loss_factor) or ("loss-factor" in own and made.viscous):
            return f"parts of {made.group} lose by a loss factor and a dashpot together"
        if {"viscous", "loss-factor"} <= own:
            return f"parts of {made.group} lose by a loss factor and a dashpot together"
    return None


def specify(brief: Brief, values: Floats) -> PurchaseSpecification | str:
    """The specification round a design, or why there is none."""
    why = why_no_specification(brief)
    if why is not None:
        return why
    unknowns = sizing_of(brief).unknown
    columns = [k for k, u in enumerate(unknowns) if u.kind in KINDS and u.bounds[0] < u.bounds[1]]
    low, high = bounds(brief)
    oracle = _Oracle(brief, values, columns)
    named = tuple(unknowns[k].title for k in columns)
    try:
        box = largest_proven_box(
            named, values[columns], low[columns], high[columns], oracle, tuple(bool(low[k] > 0.0) for k in columns),
            tolerance=TOLERANCE, joint_steps=6,
        )  # fmt: skip
    except SizingError as error:
        return str(error)
    inside, failed = _inside(brief, values, columns, box)
    return PurchaseSpecification(
        tuple(unknowns[k] for k in columns),
        values,
        box,
        _loads(brief, values, columns, box),
        tuple(_beyond(brief, values, columns, box)),
        inside,
        failed,
        tuple(name for name, _ in oracle.outputs.proven),
        (*oracle.outputs.left_out, *_static_words(brief, oracle.problem)),
        oracle.boxes >= ALL_BOXES,
    )


def _static_words(brief: Brief, problem: Problem) -> tuple[str, ...]:
    """Statics of several groups stand on the corners alone."""
    if len(brief.groups) == 1:
        return ()
    asked = {a.quantity() for a in demanded(brief)[0] if isinstance(a, StaticAllowable)}
    return (f"at the corners of the box alone: {', '.join(sorted(asked))}",) if asked else ()


def _points(values: Floats, columns: list[int], rows: Floats) -> Floats:
    points = np.repeat(values[None], len(rows), axis=0)
    points[:, columns] = rows
    return points


def _inside(brief: Brief, values: Floats, columns: list[int], box: Specification) -> tuple[int, int]:
    rng = np.random.default_rng(sizing_of(brief).seed)
    drawn = box.lower + (box.upper - box.lower) * rng.random((INSIDE, len(columns)))
    met = judge(brief, _points(values, columns, drawn)).met
    return INSIDE, int((~met).sum())


def _beyond(brief: Brief, values: Floats, columns: list[int], box: Specification) -> list[str | None]:
    """What parts just outside each face miss: corners of the face and random points of it, moved out a little."""
    rng = np.random.default_rng(sizing_of(brief).seed)
    found: list[str | None] = []
    for face in box.faces:
        axis = box.names.index(face.quantity)
        rows = box.lower + (box.upper - box.lower) * rng.random((BEYOND, len(columns)))
        corners = np.array(list(itertools.product(*zip(box.lower, box.upper, strict=True))))
        rows = np.concatenate([rows, corners])
        # As far out again as the proof's own tolerance.
        out = 1.0 + 3.0 * TOLERANCE
        rows[:, axis] = face.value * out if face.upper_end else face.value / out
        judged = judge(brief, _points(values, columns, rows))
        worst = np.unravel_index(int(np.argmin(judged.margins)), judged.margins.shape)
        if judged.margins[worst] < 0.0:
            found.append(judged.requirements[int(worst[0])].label)
        else:
            found.append(None)
    return found


def _loads(
    brief: Brief, values: Floats, columns: list[int], box: Specification
) -> tuple[SpecifiedGroup, ...]:
    corners = [values[columns], *np.array(list(itertools.product(*zip(box.lower, box.upper, strict=True))))]
    carried: dict[str, list[float]] = {group: [] for group in brief.groups}
    for corner in corners:
        made = made_design(brief, _points(values, columns, np.array([corner]))[0])
        for row in static_loads(made):
            carried[row[0]].append(row[1])
    ratio = {made.group: made.dynamic_to_static for made in sizing_of(brief).made}
    return tuple(SpecifiedGroup(g, (min(loads), max(loads)), ratio[g]) for g, loads in carried.items())


def brief_with_room(brief: Brief, room: float) -> Brief:
    """The brief with every limit on a response, sag and tilt tightened by a share, to find a design with room."""
    changed: list[Allowable] = []
    for allowable in brief.allowables:
        limit = getattr(allowable, "limit", None)
        if isinstance(allowable, BandLimit):
            changed.append(_tighter_curve(allowable, room))
        elif isinstance(allowable, Separation):
            changed.append(allowable.model_copy(update={"limit": allowable.limit * (1.0 + room)}))
        elif isinstance(allowable, (HarmonicAllowable, StaticAllowable)) and isinstance(limit, float):
            changed.append(allowable.model_copy(update={"limit": limit / (1.0 + room)}))
        else:
            changed.append(allowable)
    return brief.model_copy(update={"allowables": tuple(changed)})


def _tighter_curve(allowable: BandLimit, room: float) -> BandLimit:
    copied = allowable.model_copy()
    copied._limit = allowable.bands()[1] / (1.0 + room)
    return copied


def tightened(box: Specification, share: float) -> Specification:
    """The box drawn in by a share of each side, for tests of its inside."""
    shrink = share * (box.upper - box.lower)
    return replace(box, lower=box.lower + shrink, upper=box.upper - shrink)
