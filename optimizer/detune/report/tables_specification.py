"""The purchase specification: a table one can send to suppliers, and what stands behind it."""

from __future__ import annotations

from detune.ground.units import show
from detune.report.tables import Table
from detune.report.tables_sizing import GOALS, goal_text
from detune.report.words import number, percent
from detune.sizing.made_parts import sizing_of
from detune.solvers.size_specification import Beyond, PurchaseSpecification
from detune.solvers.specification_figures import FROM_ZERO, Figure
from detune.study.size import SizingResult

SAME = 1e-9
# A design with less margin than this has no room to speak of.
ROOM = 0.01


def specification_table(found: PurchaseSpecification) -> Table:
    """What to ask of a supplier: ranges of stiffness and damping, the load to carry, and what lies beyond each face."""
    rows = []
    for place, figure in enumerate(found.figures):
        low, high = float(found.box.lower[place]), float(found.box.upper[place])
        told = [
            f"{end}: {_outside(found, figure, 2 * place + up)}" for up, end in enumerate(("below", "above"))
        ]
        shown = (show(value, figure.unit) for value in (low, figure.value, high))
        rows.append((figure.title, *shown, "; ".join(told)))
    for group in found.groups:
        low, high = group.load
        label = f"static load that one part of {group.group} carries"
        told_load = "the part's own load range must hold all of it"
        rows.append((label, show(low, "force"), "", show(high, "force"), told_load))
    return Table(
        "Purchase specification",
        ("quantity", "at least", "design", "at most", "just outside"),
        tuple(rows),
        frozenset({1, 2, 3}),
        _note(found),
    )


def _outside(found: PurchaseSpecification, figure: Figure, index: int) -> str:
    """What is known of parts beyond one face."""
    face, beyond = found.box.faces[index], found.beyond[index]
    if face.stopped_by == "limit of the search":
        return _limit(found, figure, face.value, beyond)
    if beyond.tight:
        return f"some parts miss {beyond.missed}"
    if beyond.missed is not None:
        return (
            f"not tight: the proof ends here, and the first parts found to miss {beyond.missed} lie "
            f"{percent(beyond.ratio - 1.0)} beyond"
        )
    return f"not tight: the proof ends here, and no failing part was found up to {percent(beyond.ratio - 1.0)} beyond"


def _limit(found: PurchaseSpecification, figure: Figure, value: float, beyond: Beyond) -> str:
    own = figure.low if value < figure.value else figure.high
    if figure.what == "axial" and value < figure.value and abs(value / own - 1.0) > SAME:
        return "softer in vibration than at rest, which no part is"
    zero = value < figure.value and figure.low <= FROM_ZERO * figure.value
    told = "the study's own bound" if figure.sought and not zero else "as far as was tried"
    return told if beyond.missed is None else f"{told}; there some parts miss {beyond.missed}"


def _note(found: PurchaseSpecification) -> str:
    which = "every limit but those named below" if found.left_out else "every limit"
    note = (
        "Every part of which all figures lie within these ranges, those of one group alike, is proven to meet "
        f"{which} over whole ranges of speed, by bounds over boxes ({found.box.questions} asked for), for machine and "
        f"forcing as stated. {found.inside} random parts inside were judged exactly, {found.assessed} of those nearest "
        "to a limit by the assessor: none missed a requirement. No single face can be pushed out further by this "
        f"proof. Of {found.box.shapes} boxes grown in different shapes this has the greatest volume, each range "
        "counted by its ratio; that it is the greatest of all is not proven. Stiffness and damping of a part are taken "
        "as the same at every load, frequency and amplitude."
    )
    if any(figure.what in ("lateral", "x", "y", "lateral ratio") for figure in found.figures):
        note += (
            " Lateral static stiffness and lateral viscous damping: in the proportion to the axial one that the study "
            "states."
        )
    loose = any(
        not beyond.tight and face.stopped_by != "limit of the search"
        for face, beyond in zip(found.box.faces, found.beyond, strict=True)
    )
    if found.cut_short and loose:
        note += " Some boxes were left open when the work allowed was used up: faces may stand further in than need be."
    if found.left_out:
        note += f" Not proven, only kept at every part that was looked at: {'; '.join(found.left_out)}."
    return note


def specification_text(result: SizingResult, found: PurchaseSpecification) -> str:
    """Round which design the ranges stand, and what it costs beside the answer."""
    unknowns, best = sizing_of(result.study.brief).unknown, result.answer
    goal = sizing_of(result.study.brief).goal
    held = [
        f"{u.title} {show(v, u.unit)}"
        for u, v in zip(unknowns, found.values.tolist(), strict=True)
        if u.kind not in ("stiffness", "loss-factor", "viscous")
    ]
    tight = best is not None and best.assessment.least_margin < ROOM
    text = "The answer stands on its limits, where a part may not differ at all. " if tight else ""
    text += "These ranges stand round a design with room inside its limits"
    text += f", with {', '.join(held)}" if held else ""
    if best is not None and goal == "cost":
        text += f"; it costs {number(found.cost, 5)} instead of {goal_text(goal, best.objective)}"
    elif best is not None:
        text += f"; {GOALS['cost']} {number(found.cost, 5)}"
    return text + "."
