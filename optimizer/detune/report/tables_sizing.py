"""Tables of a sizing study: the answer, its branches, the spread of starts, the nearest parts, the specification."""

from __future__ import annotations

from detune.ground.units import show
from detune.report.tables import Table
from detune.report.words import margin_text, number, percent
from detune.sizing.made_parts import sizing_of
from detune.solvers.size_front import FrontPoint
from detune.solvers.size_front_bounds import gap
from detune.solvers.size_specification import PurchaseSpecification
from detune.study.size import SizedBest, SizingResult

GOALS = {
    "cost": "cost",
    "added-mass": "added mass",
    "worst-response": "worst response over its limit",
    "stiffness": "axial stiffness, all parts",
    "damping": "damping, all parts",
    "separation": "separation",
    "absorber-mass": "mass of the absorber",
}


def goal_text(name: str, value: float) -> str:
    """An objective with its unit."""
    if name == "separation":
        return percent(value)
    if name in ("added-mass", "absorber-mass"):
        return show(value, "mass")
    if name == "stiffness":
        return show(value, "stiffness")
    return number(value, 5)


def unknowns_table(result: SizingResult, best: SizedBest) -> Table:
    """Every unknown: its bounds and its value in the answer."""
    rows = []
    for unknown, value in zip(sizing_of(result.study.brief).unknown, best.values.tolist(), strict=True):
        low, high = unknown.bounds
        rows.append(
            (unknown.title, show(value, unknown.unit, 5), show(low, unknown.unit), show(high, unknown.unit))
        )
    note = "Stiffness (dynamic) and damping are those of one part. Lower and upper: as the study states them."
    return Table("Sized", ("unknown", "value", "lower", "upper"), tuple(rows), frozenset({1, 2, 3}), note)


def branches_table(result: SizingResult) -> Table:
    """Every branch (or distinct local answer) with its best design, the best first."""
    sizing = sizing_of(result.study.brief)
    names = [unknown.title for unknown in sizing.unknown]
    rows = []
    for branch in result.branches:
        values = [
            show(value, unknown.unit)
            for unknown, value in zip(sizing.unknown, branch.values.tolist(), strict=True)
        ]
        judged = branch.assessment
        meets = "meets the brief" if judged.meets else f"misses {judged.tightest.label}"
        tight = "; ".join(branch.tight) or "none"
        rows.append(
            (
                branch.name,
                goal_text(sizing.goal, branch.objective),
                *values,
                margin_text(judged.least_margin),
                meets,
                tight,
            )
        )
    columns = ("branch", GOALS[sizing.goal], *names, "least margin", "assessed", "tight")
    note = (
        "A branch is one connected region of designs that meet every limit; its name says where the natural frequency "
        "lies among the excitations. Designs stand two parts in a million inside their limits."
        if result.searches is None
        else "Distinct answers of the local searches."
    )
    title = "Branches" if result.searches is None else "Local answers"
    numeric = frozenset(range(1, 3 + len(names)))
    return Table(title, columns, tuple(rows), numeric, note)


def searches_text(result: SizingResult) -> str:
    """How the starts ended, in a sentence; empty where no local search was made."""
    found = result.searches
    if found is None:
        return ""
    goal = sizing_of(result.study.brief).goal
    total = len(found.searches)
    if not found.met:
        return f"None of {total} local searches met every requirement; that is no proof that none exists."
    best, median, worst = (goal_text(goal, value) for value in found.spread)
    return (
        f"{found.met} of {total} local searches met every requirement; their {GOALS[goal]}: best {best}, "
        f"median {median}, "
        f"worst {worst}; {found.near:.0%} of them within 1 % of the best. {found.evaluations} designs were evaluated."
    )


def slopes_text(result: SizingResult) -> str:
    """Where the slopes of the searches come from, in a sentence; empty where no local search was made."""
    found = result.searches
    if found is None:
        return ""
    if found.slopes_from != "adjoint":
        return "Slopes of all requirements by finite differences."
    if not found.differenced:
        return f"Slopes of all requirements by adjoint, at {found.slopes} points."
    return (
        f"Slopes by adjoint, at {found.slopes} points; by finite differences for these "
        f"alone: {'; '.join(found.differenced)}."
    )


def nearest_table(result: SizingResult) -> Table:
    """The nearest real designs, each assessed, with what they cost against the ideal."""
    nearest, best = result.nearest, result.answer
    assert nearest is not None and best is not None
    goal = sizing_of(result.study.brief).goal
    rows = []
    for design in nearest.designs:
        judged = design.assessment
        value = _value(result, design.assessment, goal)
        rows.append(
            (
                str(judged.design),
                "meets the brief" if judged.meets else f"misses {judged.tightest.label}",
                margin_text(judged.least_margin),
                number(judged.cost, 6),
                "" if value is None else _more(value, best.objective, goal),
            )
        )
    note = (
        f"Of {nearest.of} real designs the {nearest.looked_at} with the least predicted shortfall were evaluated "
        "exactly, "
        f"{nearest.met} met every requirement; those shown were assessed. That is no proof of the cheapest: "
        "`detune run` gives it. The last column compares with the ideal at the price stated for parts made to order."
    )
    columns = ("real design", "assessed", "least margin", "cost", f"{GOALS[goal]} against the ideal")
    return Table("Nearest real parts", columns, tuple(rows), frozenset({2, 3, 4}), note)


def _value(result: SizingResult, judged: object, goal: str) -> float | None:
    from detune.response.assessment import Assessment

    assert isinstance(judged, Assessment)
    if goal == "cost":
        return judged.cost
    if goal == "added-mass":
        return judged.added_mass
    return judged.separation if goal == "separation" else None


def _more(value: float, ideal: float, goal: str) -> str:
    if goal == "separation":
        return f"{percent(value)} instead of {percent(ideal)}"
    if ideal == 0.0:
        return goal_text(goal, value)
    share = value / ideal - 1.0
    return f"{goal_text(goal, value)}, {'+' if share >= 0.0 else ''}{percent(share)}"


def front_table(result: SizingResult) -> Table:
    """The points of the front with their unknowns."""
    front = result.front
    assert front is not None
    unknowns = sizing_of(result.study.brief).unknown
    rows = tuple(
        (
            *(goal_text(name, point.objectives[name]) for name in front.trade),
            *(() if front.exact else (_gap_text(front.minimised, point),)),
            *(show(v, u.unit) for u, v in zip(unknowns, point.values.tolist(), strict=True)),
        )
        for point in front.points
    )
    gap = () if front.exact else (f"gap in {GOALS[front.minimised]}",)
    columns = (*(GOALS[name] for name in front.trade), *gap, *(unknown.title for unknown in unknowns))
    numeric = frozenset(range(len(columns))) - (frozenset() if front.exact else {len(front.trade)})
    return Table("Points of the front", columns, rows, numeric, front.worth + ".")


def _gap_text(minimised: str, point: FrontPoint) -> str:
    found = gap(minimised, point)
    if found is None:
        return "no bound known"
    return f"at most {percent(found[0])} ({found[1]})"


def specification_table(found: PurchaseSpecification) -> Table:
    """What to ask of a supplier: ranges of stiffness and damping, the load to carry, and what lies beyond each face."""
    rows = []
    for place, unknown in enumerate(found.unknowns):
        low, high = float(found.box.lower[place]), float(found.box.upper[place])
        beyond = []
        for end, face, missed in zip(
            ("below", "above") * len(found.unknowns), found.box.faces, found.beyond, strict=True
        ):
            if face.quantity != unknown.title:
                continue
            if face.stopped_by == "limit of the search":
                beyond.append(f"{end}: the study's own bound")
            elif missed is None:
                beyond.append(f"{end}: not tight, no failing part found; the proof ends here")
            else:
                beyond.append(f"{end}: some parts miss {missed}")
        kind = "dynamic" if unknown.kind == "stiffness" else ""
        rows.append(
            (
                f"{unknown.title} {kind}".strip(),
                show(low, unknown.unit),
                show(high, unknown.unit),
                "; ".join(beyond),
            )
        )
    for group in found.groups:
        low, high = group.load
        load = (f"static load carried by one part of {group.group}", show(low, "force"), show(high, "force"))
        rows.append((*load, "the part's own load range must hold all of it"))
        ratio = f"{group.dynamic_to_static:g}"
        rows.append((f"dynamic over static stiffness, {group.group}", ratio, ratio, "as the study states it"))
    note = (
        "Every part inside these ranges, those of one group alike, is proven to meet the limits over whole frequency "
        f"ranges (matrix-ball bound with bisection; {found.box.questions} boxes asked for). {found.inside} random "
        "parts "
        f"inside were judged exactly: {found.failed} missed a requirement. No single face can be pushed out further by "
        "this proof; it is not the box of greatest volume."
    )
    if found.cut_short:
        note += " The work allowed for the proof was used up: faces may stand further in than need be."
    if found.left_out:
        note += f" Not proven, only sampled: {'; '.join(found.left_out)}."
    return Table(
        "Purchase specification",
        ("quantity", "at least", "at most", "just outside"),
        tuple(rows),
        frozenset({1, 2}),
        note,
    )
