"""The objective of a one-axis sizing problem."""

from detune.brief.brief import Brief
from detune.sizing.made_parts import made_table, sizing_of
from detune.sizing.statement import Objective, OneAxisProblem


def objective_of(brief: Brief, problem: OneAxisProblem, goal: str | None = None) -> Objective:
    """The objective of the brief (or another by name) as the one-axis problem states it."""
    sizing = sizing_of(brief)
    chosen = goal or sizing.goal
    made = made_table(brief, brief.groups[0])
    if chosen == "separation":
        return Objective("greatest separation")
    if chosen == "stiffness":
        return Objective("softest" if goal or sizing.sense > 0.0 else "stiffest")
    if chosen == "damping":
        return Objective("least damping")
    if chosen == "added-mass":
        return Objective("least added mass")
    if chosen == "worst-response":
        return Objective("least damping")
    pieces = sum(station.parallel for station in brief.stations)
    viscous = problem.damping_kind == "viscous"
    price = made.cost_per_damping if viscous else pieces * made.cost_per_loss_factor
    # Damping that is held at zero costs nothing, and rounding is not to be priced.
    price = price if problem.damping_bounds[1] > 0.0 else 0.0
    kilogram = 0.0 if brief.ballast is None or problem.ballast is None else brief.ballast.cost_per_kg
    return Objective(
        "weighted sum",
        stiffness_weight=made.cost_per_stiffness / 1e3,
        damping_weight=price,
        mass_weight=kilogram,
    )
