"""Purchase specification: the largest box of the figures of parts in which any part is proven to meet the brief.

The figures are those of `specification_figures`, the proof that of `specification_proof`: over all parts in the box
(those of one group alike) and over whole ranges of speed. What it does not hold is told, and only sampled. Static
stiffness has a box of its own, since nothing that moves depends on it but through what is carried at rest.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.band_limit import BandLimit
from detune.brief.allowable.base import Allowable, HarmonicAllowable, StaticAllowable
from detune.brief.allowable.separation import Separation
from detune.brief.brief import Brief
from detune.problem.build import Problem
from detune.response.assess import assess
from detune.sizing.made_parts import Made, made_design, sizing_of
from detune.sizing.specification import Possible, Specification, largest_proven_box
from detune.sizing.statement import SizingError
from detune.solvers.one_axis_statement import one_axis, why_not_one_axis
from detune.solvers.size_batch import Judged, batch, judge_alike
from detune.solvers.specification_figures import Figure, figures_of, made_of
from detune.solvers.specification_proof import PartsProof

Floats = NDArray[np.float64]
KINDS = ("stiffness", "loss-factor", "viscous")
# Faces stand within this ratio of where the proof ends.
TOLERANCE = 4e-3
# Boxes of different shapes that are grown where no quick test guides them.
SHAPES = 3
INSIDE, ASSESSED = 60, 6
BEYOND, CORNERS = 16, 64
# How far beyond a face parts are looked for that fail: just outside, and where none is found there.
JUST, FARTHER = 1.0 + 3.0 * TOLERANCE, (1.03, 1.1, 1.3, 2.0)
COLUMNS = 17
# How often a box is drawn in where parts inside miss what no proof holds.
DRAWN_IN = 6


@dataclass(frozen=True)
class SpecifiedGroup:
    """Load range (N) that one part of a group must carry, proven over the box."""

    group: str
    load: tuple[float, float]


@dataclass(frozen=True)
class Beyond:
    """What parts beyond a face miss: by which ratio beyond, and which requirement; None where none was found."""

    ratio: float
    missed: str | None

    @property
    def tight(self) -> bool:
        """Whether some part just outside the face fails."""
        return self.missed is not None and self.ratio == JUST


@dataclass(frozen=True)
class PurchaseSpecification:
    """The box over `figures`, round a design `values` (u,) with some room, and how it was proven and tested.

    `beyond` tells for each face of the box what fails outside. `inside` random parts inside were judged exactly, and
    `assessed` of them by the assessor: none missed a requirement. `left_out`: what the proof does not hold.
    `cut_short`: some boxes were left open for want of work, so faces may stand further in than need be.
    """

    figures: tuple[Figure, ...]
    values: Floats
    cost: float
    box: Specification
    groups: tuple[SpecifiedGroup, ...]
    beyond: tuple[Beyond, ...]
    inside: int
    assessed: int
    left_out: tuple[str, ...]
    cut_short: bool


def why_no_specification(brief: Brief) -> str | None:
    """Why no specification can be worked out, None if it can."""
    kinds = {unknown.kind for unknown in sizing_of(brief).unknown}
    if not kinds & set(KINDS):
        return "no stiffness and no damping of a part is unknown"
    if kinds & {"absorber-tuning", "absorber-damping"}:
        return "the absorber's own tuning is no property of one part alone"
    for made in sizing_of(brief).made:
        own = {u.kind for u in sizing_of(brief).unknown if u.group == made.group}
        viscous = "viscous" in own or bool(made.viscous)
        if viscous and ("loss-factor" in own or bool(made.loss_factor)):
            return f"parts of {made.group} lose by a loss factor and a dashpot together"
    return None


def specify(brief: Brief, values: Floats) -> PurchaseSpecification | str:
    """The specification round a design, or why there is none."""
    why = why_no_specification(brief)
    if why is not None:
        return why
    made = made_design(brief, values)
    problem, _ = batch(made.brief, [made])
    figures = figures_of(brief, made, problem.model)
    proof = PartsProof(made, figures)
    if proof.holds_nothing:
        return f"no limit of this study has a proof over ranges of parts ({'; '.join(proof.left_out)})"
    try:
        box = _boxed(proof, figures, _guide(brief, made, problem, figures), made)
    except SizingError as error:
        return str(error)
    box, failed = _drawn_in(made, figures, box, sizing_of(brief).seed)
    if failed:
        return (
            f"{failed} of {INSIDE} random parts inside the ranges miss a requirement that the proof does not hold, "
            "however far they are drawn in"
        )
    loads = proof.loads(box.lower, box.upper)
    return PurchaseSpecification(
        figures=figures,
        values=values,
        cost=float(judge_alike(made.brief, [made]).objectives["cost"][0]),
        box=box,
        groups=tuple(SpecifiedGroup(group, loads[group]) for group in brief.groups if group in loads),
        beyond=tuple(_beyond(made, figures, box, sizing_of(brief).seed)),
        inside=INSIDE,
        assessed=ASSESSED,
        left_out=proof.left_out,
        cut_short=proof.cut_short,
    )


def _boxed(
    proof: PartsProof, figures: tuple[Figure, ...], possible: Possible | None, made: Made
) -> Specification:
    """The box of what is at rest, and then that of what moves; both as one. Raises SizingError."""
    rest = np.array([figure.what == "static" for figure in figures])
    low, high = proof.value.copy(), proof.value.copy()

    def full(which: NDArray[np.bool_], a: Floats, b: Floats) -> tuple[Floats, Floats]:
        below, above = low.copy(), high.copy()
        below[which], above[which] = a, b
        return below, above

    still = _largest(figures, rest, lambda a, b: proof.at_rest(*full(rest, a, b)), None)
    center = proof.value
    for share in (1.0, 0.5, 0.2, 0.0):
        low[rest] = center[rest] + share * (still.lower - center[rest])
        high[rest] = center[rest] + share * (still.upper - center[rest])
        if proof(low, high):
            break
    figures = _not_softer(figures, dict(zip(still.names, low[rest].tolist(), strict=True)))

    def kept(a: Floats, b: Floats) -> bool:
        whole = full(~rest, a, b)
        return proof(*whole) and (not proof.left_out or _kept_at_some(made, figures, *whole))

    moving = _largest(figures, ~rest, kept, possible)
    lower, upper = full(~rest, moving.lower, moving.upper)
    faces = {(face.quantity, face.upper_end): face for face in (*still.faces, *moving.faces)}
    if share < 1.0:
        for (name, up), face in faces.items():
            if any(f.title == name for f, at in zip(figures, rest, strict=True) if at):
                value = float((upper if up else lower)[[f.title for f in figures].index(name)])
                faces[name, up] = replace(face, value=value, stopped_by="no proof beyond")
    names = tuple(figure.title for figure in figures)
    ordered = tuple(faces[name, up] for name in names for up in (False, True))
    questions = still.questions + moving.questions
    return Specification(names, lower, upper, ordered, questions, moving.shapes)


def _kept_at_some(made: Made, figures: tuple[Figure, ...], low: Floats, high: Floats) -> bool:
    """Whether what no proof holds is met at the middle of every face and at the two corners of least and most."""
    middle = 0.5 * (low + high)
    rows = np.repeat(middle[None], 2 * len(low), axis=0)
    for axis in range(len(low)):
        rows[2 * axis, axis], rows[2 * axis + 1, axis] = low[axis], high[axis]
    return bool(_judged(made, figures, np.concatenate([rows, low[None], high[None]])).met.all())


def _drawn_in(
    made: Made, figures: tuple[Figure, ...], box: Specification, seed: int
) -> tuple[Specification, int]:
    """The box, drawn in round the design as long as random parts inside miss what no proof holds; how many still do."""
    center = np.array([figure.value for figure in figures])
    failed = _failed_inside(made, figures, box, seed)
    for _ in range(DRAWN_IN):
        if not failed:
            break
        lower, upper = (center + 0.7 * (edge - center) for edge in (box.lower, box.upper))
        faces = tuple(
            replace(face, value=float((upper if face.upper_end else lower)[box.names.index(face.quantity)]),
                    stopped_by="no proof beyond")
            for face in box.faces
        )  # fmt: skip
        box = replace(box, lower=lower, upper=upper, faces=faces)
        failed = _failed_inside(made, figures, box, seed)
    return box, failed


def _not_softer(figures: tuple[Figure, ...], static: dict[str, float]) -> tuple[Figure, ...]:
    """Axial stiffness in vibration tried from the least static one up: below it there are no parts.

    Rubber, air and steel are at least as stiff in vibration as under a steady load.
    """
    least = {f.group: static[f.title] for f in figures if f.what == "static"}
    return tuple(
        replace(f, low=min(max(f.low, least[f.group]), f.value)) if f.what == "axial" else f for f in figures
    )


def _largest(
    figures: tuple[Figure, ...], which: NDArray[np.bool_], proven: object, possible: Possible | None
) -> Specification:
    chosen = [figure for figure, own in zip(figures, which.tolist(), strict=True) if own]
    return largest_proven_box(
        tuple(figure.title for figure in chosen),
        np.array([figure.value for figure in chosen]),
        np.array([figure.low for figure in chosen]),
        np.array([figure.high for figure in chosen]),
        proven,  # type: ignore[arg-type]
        (True,) * len(chosen),
        tolerance=TOLERANCE,
        shapes=SHAPES if len(chosen) > 1 else 1,
        possible=possible,
    )


def _guide(brief: Brief, made: Made, problem: Problem, figures: tuple[Figure, ...]) -> Possible | None:
    """On one axis a quick test of many boxes of what moves: both ends of the damping over the stiffness.

    The damping that meets every limit at one stiffness is an interval (`sizing.envelope`), so its two ends decide.
    """
    moving = [figure for figure in figures if figure.what != "static"]
    if why_not_one_axis(brief) is not None or len(moving) != 2 or moving[0].what != "axial":
        return None
    from detune.solvers.size_map import one_axis_margins

    axis = one_axis(made.brief, problem)
    axis = replace(axis, problem=replace(axis.problem, sag=None))
    if not axis.problem.limits and axis.problem.separation is None:
        return None
    per = axis.pieces if moving[1].what == "viscous" else 1
    mass = axis.problem.mass + made.design.ballast
    share = np.linspace(0.0, 1.0, COLUMNS)

    def possible(low: Floats, high: Floats) -> NDArray[np.bool_]:
        stiffness = low[:, :1] * (high[:, :1] / low[:, :1]) ** share
        both = np.stack([low[:, 1], high[:, 1]], axis=1)
        k = np.repeat(stiffness[:, None, :], 2, axis=1).ravel() * axis.pieces
        c = np.repeat(both[:, :, None], COLUMNS, axis=2).ravel() * per
        _, margins = one_axis_margins(axis, k, c, np.full(len(k), mass))
        return np.asarray((margins >= 0.0).all(axis=0).reshape(len(low), -1).all(axis=1))

    return possible


def _judged(made: Made, figures: tuple[Figure, ...], rows: Floats) -> Judged:
    return judge_alike(made.brief, [made_of(made, figures, row) for row in rows])


def _failed_inside(made: Made, figures: tuple[Figure, ...], box: Specification, seed: int) -> int:
    """How many of random parts inside miss a requirement, as the batch has it or, of the nearest, the assessor."""
    rng = np.random.default_rng(seed)
    drawn = box.lower + (box.upper - box.lower) * rng.random((INSIDE, len(figures)))
    judged = _judged(made, figures, drawn)
    nearest = np.argsort(judged.least, kind="stable")[:ASSESSED]
    failed = set(np.flatnonzero(~judged.met).tolist())
    for number in nearest.tolist():
        part = made_of(made, figures, drawn[number])
        failed |= set() if assess(part.brief, part.design).meets else {number}
    return len(failed)


def _beyond(made: Made, figures: tuple[Figure, ...], box: Specification, seed: int) -> list[Beyond]:
    """What parts outside each face miss: corners of the face and random points of it, moved out."""
    rng = np.random.default_rng(seed)
    rest = [figure.what == "static" for figure in figures]
    found = []
    for face in box.faces:
        axis = box.names.index(face.quantity)
        rows = box.lower + (box.upper - box.lower) * rng.random((BEYOND, len(figures)))
        own = [k for k, at in enumerate(rest) if at == rest[axis]]
        corners = np.repeat(0.5 * (box.lower + box.upper)[None], 2 ** len(own), axis=0)
        corners[:, own] = list(itertools.product(*zip(box.lower[own], box.upper[own], strict=True)))
        if len(corners) > CORNERS:
            corners = corners[rng.permutation(len(corners))[:CORNERS]]
        rows = np.concatenate([rows, corners])
        for ratio in (JUST, *FARTHER):
            rows[:, axis] = face.value * ratio if face.upper_end else face.value / ratio
            judged = _judged(made, figures, rows)
            worst = np.unravel_index(int(np.argmin(judged.margins)), judged.margins.shape)
            if judged.margins[worst] < 0.0:
                found.append(Beyond(ratio, judged.requirements[int(worst[0])].label))
                break
            if face.stopped_by == "limit of the search":
                found.append(Beyond(ratio, None))
                break
        else:
            found.append(Beyond(ratio, None))
    return found


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
