"""Random responses over scatter through the whole program: statement, certificate, assessor, record and its
checker."""

import numpy as np
import pytest

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.gap import Gap
from detune.brief.allowable.sag import Sag
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.choice import CatalogSource, Choice
from detune.brief.condition import Condition
from detune.brief.forcing.random_base_motion import RandomBaseMotion
from detune.brief.forcing.random_force import RandomForce
from detune.brief.scatter import PartScatter, Scatter
from detune.problem.build import build
from detune.proof.checker import check_entries
from detune.proof.record import plain
from detune.response.assess import assess
from detune.response.designs import Designs
from detune.solvers import enumeration
from detune.solvers.certify import certify
from detune.solvers.outcome import Settings
from detune.solvers.perturbed import perturbed
from detune.solvers.robust import numbers_of, robust_selection
from detune.solvers.robust_record import proof_record
from detune.solvers.scatter_machine import scatter_map
from detune.solvers.yields import design_yield
from response import machines

BY_LOT = {"stiffness": PartScatter(lot=0.08), "damping": PartScatter(lot=0.15)}
WITH_MASS = {
    "stiffness": PartScatter(lot=0.04),
    "damping": PartScatter(lot=0.1),
    "mass": 0.03,
    "forcing": (0.0, 0.1),
}
ROAD = RandomBaseMotion(
    name="road",
    direction=(0.2, 0.0, 1.0),
    duration=600.0,
    break_points=((2.0, 0.002), (5.0, 0.2), (30.0, 0.2), (30.0, 0.05), (120.0, 0.001)),
)
WIND = RandomForce(
    name="wind",
    position=(0.1, 0.0, 0.3),
    direction="x",
    duration=60.0,
    break_points=((1.0, 30.0), (40.0, 1.0)),
)


def allowables(scale):
    return (
        Acceleration(at="P", direction="z", measure="rms", limit=0.8 * scale),
        Displacement(at="P", direction="resultant", measure="3-sigma", limit=5e-4 * scale),
        TransmittedForce(through="each-station", direction="axial", measure="peak", limit=800.0 * scale),
        Gap(at="P", direction="z", clearance_of="free", clearance=0.03 * scale),
        Sag(at="P", limit=0.05),
    )


def problem_of(seed, scatter, *, scale=1e3, flexible=False, tones=False, loss=0.2, judge="interval", **more):
    brief, _ = machines.random_machine(seed, flexible_floor=flexible)
    parts = [
        machines.mount(
            f"p{i}", 2.5e5 * 1.4**i, lateral=1.6e5 * 1.3**i, static=0.8, loss=loss, cost=20.0 - 2 * i
        )
        for i in range(2)
    ]
    stated = brief.model_copy(
        update={
            "allowables": allowables(scale),
            "forcing": (*(brief.forcing if tones else ()), ROAD, WIND),
            "conditions": brief.conditions if tones else (Condition(name="road"),),
            "scatter": Scatter(judge=judge, **scatter, **more),
            "catalogs": (CatalogSource(name="list", file="list.csv"),),
            "choices": tuple(Choice(group=group, catalogs=("list",)) for group in brief.groups),
        }
    )
    return build(stated, {"list": machines.catalog(*parts)})


def design_of(problem, part):
    return problem.design(Designs(np.array([part]), np.array([0])), 0)


def within(problem, part, factor):
    """The same problem with response limits at `factor` times what the assessor finds of a design at listed
    values."""
    rows = assess(problem.brief, design_of(problem, part)).margins
    worst = {a.kind: max(r.value for r in rows if r.kind == a.kind) for a in problem.brief.allowables}
    limits = tuple(
        a if a.kind in ("sag", "gap") else a.model_copy(update={"limit": factor * worst[a.kind]})
        for a in problem.brief.allowables
    )
    stated = problem.brief.model_copy(update={"allowables": limits})
    return build(stated, {"list": machines.catalog(*problem.candidates[0])})


def key(row):
    return row.kind, row.condition, row.place, row.quantity


@pytest.mark.parametrize(
    ("seed", "scatter", "flexible", "tones"),
    [(1, BY_LOT, False, False), (2, WITH_MASS, True, False), (3, BY_LOT, False, True)],
)
def test_no_sample_of_the_assessor_is_worse_than_guaranteed(seed, scatter, flexible, tones):
    """Every response row is bounded, and what the assessor finds at points of the scatter stays below the bounds."""
    problem = within(problem_of(seed, scatter, flexible=flexible, tones=tones), [0, 1], 2.0)
    verdict = certify(problem, np.array([0, 1]), 0, max_boxes=1500, stop_at_violation=False)
    rows = {key(row): row for row in verdict.rows}
    found = scatter_map(problem.brief, design_of(problem, [0, 1]))
    random, compared = np.random.default_rng(seed), 0
    points = np.where(random.integers(0, 2, (5, len(found.low))) > 0, found.high, found.low)
    for point in points:
        brief, design = perturbed(problem.brief, design_of(problem, [0, 1]), found, tuple(point))
        for row in assess(brief, design).margins:
            own = rows[key(row)]
            assert own.status != "sampled"
            if own.guaranteed is not None and np.isfinite(own.guaranteed):
                compared += 1
                assert row.margin >= own.guaranteed_margin - 2e-4 * (1.0 + abs(own.guaranteed_margin))
    assert compared >= 25
    if not tones:
        assert verdict.status == "proven"


def test_the_worst_value_named_is_the_assessors_own_at_that_point():
    problem = problem_of(4, BY_LOT)
    verdict = certify(problem, np.array([1, 0]), 0, max_boxes=100, stop_at_violation=False)
    found = scatter_map(problem.brief, design_of(problem, [1, 0]))
    for row in verdict.rows:
        if row.kind in ("acceleration", "displacement", "transmitted-force"):
            brief, design = perturbed(problem.brief, design_of(problem, [1, 0]), found, row.point)
            value = next(r.value for r in assess(brief, design).margins if key(r) == key(row))
            assert row.worst == pytest.approx(value, rel=5e-4)


def test_a_limit_that_some_point_breaks_is_violated_there():
    problem = problem_of(5, BY_LOT)
    tight = within(problem, [0, 0], 1.0)
    verdict = certify(tight, np.array([0, 0]), 0)
    assert verdict.status == "violated" and verdict.witness.margin < 0.0


def test_selection_and_record():
    """The winner under noise is proven, and the checker proves it again from the record alone."""
    problem = problem_of(6, {"stiffness": PartScatter(lot=0.05), "damping": PartScatter(lot=0.0)})
    problem = within(problem, [1, 1], 1.2)
    outcome = enumeration.solve(problem, Settings())
    cheapest = int(np.argmin(outcome.objectives["cost"]))
    robust = robust_selection(problem, outcome, [numbers_of(outcome.designs, cheapest)], Settings())
    assert robust.optimal and robust.winner is not None
    record = proof_record(problem, outcome, robust, {})
    entries = [plain(entry) for entry in record.entries]
    noises = [entry for entry in entries if entry["kind"] == "scatter-noise"]
    assert noises and set(noises[-1]["data"]["statuses"]) == {"proven"}
    report = check_entries(entries)
    assert report.confirmed and not any(
        "taken from the run" in text and "rms" in text for text in report.not_reproven
    )


def test_yield_counts_the_noise():
    """With a limit at the listed value, stiffer mounts (half of all) shake the point more or less: no full yield."""
    problem = problem_of(7, BY_LOT, judge="distribution", distribution="uniform", samples=64)
    free = design_yield(problem, np.array([0, 0]), 0)
    assert free.met == free.samples and not free.slow
    tight = within(problem, [0, 0], 1.0)
    found = design_yield(tight, np.array([0, 0]), 0)
    assert 0 < found.met < 54 and not found.slow


def test_a_contradicted_guarantee_is_withdrawn():
    from dataclasses import replace

    from detune.solvers.certify_guard import second_look
    from detune.solvers.design_rows import DesignRows

    problem = within(problem_of(8, BY_LOT), [0, 0], 2.0)
    made = DesignRows(problem, np.array([0, 0]), 0)
    verdict = certify(problem, np.array([0, 0]), 0, stop_at_violation=False)
    assert second_look(made, list(verdict.rows)) == list(verdict.rows)
    false = [
        replace(row, guaranteed=0.5 * row.guaranteed, guaranteed_margin=2.0 * row.guaranteed_margin + 1.0)
        if row.kind == "acceleration"
        else row
        for row in verdict.rows
    ]
    (row,) = [row for row in second_look(made, false) if row.kind == "acceleration"]
    assert row.status == "undecided" and row.guaranteed is None and "assessor finds" in row.note


def test_nothing_acts_that_the_certifier_does_not_know():
    """Whoever adds a kind of load to `Rows` has to bound it over the scatter, or leave it over, in
    `solvers.design_rows`."""
    from dataclasses import fields

    from detune.response.evaluate import Rows

    known = {"pairs", "families", "largest", "noises", "transients", "passages"}
    assert {field.name for field in fields(Rows)} == known


def test_a_requirement_nobody_asked_for_is_left_over_and_not_forgotten():
    from detune.solvers.design_rows import DesignRows

    problem = problem_of(9, BY_LOT)
    rows = DesignRows(problem, np.array([0, 0]), 0)
    wanted = [r for r in problem.requirements if not r.is_total]
    assert rows.unasked() == wanted
    rows.statics()
    assert {r.allowable.kind for r in rows.unasked()} == {r.allowable.kind for r in wanted} - {
        "sag",
        "load-range",
        "stability",
    }
    rows.separations()
    rows.responses()
    assert rows.unasked() == []
