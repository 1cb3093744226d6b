"""Tables of a sizing study: the answer, its branches, the spread of starts, the nearest parts, the specification."""

from __future__ import annotations

from detune.ground.units import show
from detune.report.tables import Table
from detune.report.words import margin_text, number, percent
from detune.sizing.made_parts import sizing_of
from detune.solvers.size_front import FrontPoint
from detune.solvers.size_front_bounds import gap
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


def met_text(result: SizingResult) -> str:
    """That a branch meets the brief; where scatter is stated, which branches are not all judged over, what of it."""
    return "meets the brief" if result.over is None else "meets the brief at listed values"


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
        meets = met_text(result) if judged.meets else f"misses {judged.tightest.label}"
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
    every = "every requirement"
    if goal == "worst-response" and found.spread[2] > 1.0:
        every += " but those on responses, of which the worst is what is made least"
    return (
        f"{found.met} of {total} local searches met {every}; their {GOALS[goal]}: best {best}, "
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
