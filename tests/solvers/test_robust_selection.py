"""Selection over scatter, its record, and the record's checker: altered records are rejected."""

import copy
import hashlib
import json

import numpy as np
import pytest

from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.sag import Sag
from detune.brief.allowable.tilt import Tilt
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.choice import CatalogSource, Choice
from detune.brief.scatter import PartScatter, Scatter
from detune.problem.build import build
from detune.proof.checker import check_entries
from detune.proof.record import plain
from detune.response.designs import all_designs
from detune.solvers import enumeration
from detune.solvers.certify import certify
from detune.solvers.outcome import Settings
from detune.solvers.robust import numbers_of, robust_selection
from detune.solvers.robust_record import proof_record
from response import machines


@pytest.fixture(scope="module")
def study():
    brief, _ = machines.random_machine(1)
    parts = [
        machines.mount(
            f"p{i}",
            1.2e5 * 1.35**i,
            lateral=0.8e5 * 1.3**i,
            static=0.8,
            loss=0.2,
            cost=20.0 + 3 * (i % 2) - 2 * i,
        )
        for i in range(3)
    ]
    allowables = (
        Displacement(at="P", direction="resultant", measure="peak", limit=1.0),
        TransmittedForce(through="floor", direction="z", measure="peak", limit=52.0),
        Sag(at="P", limit=0.1),
        Tilt(limit=0.1),
    )
    stated = brief.model_copy(
        update={
            "allowables": allowables,
            "scatter": Scatter(
                judge="interval",
                stiffness=PartScatter(lot=0.08, part=0.02),
                damping=PartScatter(lot=0.0),
            ),
            "catalogs": (CatalogSource(name="list", file="list.csv"),),
            "choices": tuple(Choice(group=group, catalogs=("list",)) for group in brief.groups),
        }
    )
    problem = build(stated, {"list": machines.catalog(*parts)})
    outcome = enumeration.solve(problem, Settings())
    cheapest = int(np.argmin(outcome.objectives["cost"]))
    robust = robust_selection(problem, outcome, [numbers_of(outcome.designs, cheapest)], Settings())
    return problem, outcome, robust


def test_first_proven_in_order_of_cost(study):
    """Every nominally feasible design certified by itself: the winner is the cheapest proven one."""
    problem, outcome, robust = study
    assert outcome.designs.count > 3
    verdicts = [
        certify(problem, outcome.designs.part[i], int(outcome.designs.step[i]))
        for i in range(outcome.designs.count)
    ]
    proven = [v.cost for v in verdicts if v.status == "proven"]
    assert robust.winner is not None and robust.winner.cost == min(proven)
    assert robust.price is not None and robust.price > 0.0
    cheaper = [v for v in verdicts if v.cost < robust.winner.cost]
    assert cheaper and all(v.status != "proven" for v in cheaper)
    assert len(robust.violated) + len(robust.undecided) >= len(cheaper)
    assert all(v.witness is not None and v.witness.margin < 0.0 for v in robust.violated)


def test_violated_nominal_winner_has_a_witness_inside_the_scatter(study):
    _, _, robust = study
    assert robust.nominal is not None and robust.nominal.status == "violated"
    witness = robust.nominal.witness
    assert witness.kind == "transmitted-force" and witness.frequency is not None
    assert "lot" in witness.where and all(0.8 < value < 1.2 for value in witness.point)


def test_an_interrupted_selection_says_so(study):
    problem, outcome, _ = study
    numbers = [numbers_of(outcome.designs, 0)]
    partial = robust_selection(problem, outcome, numbers, Settings(interrupted=lambda: True))
    assert partial.stopped == "interrupted" and partial.winner is None and not partial.optimal
    limited = robust_selection(problem, outcome, numbers, Settings(time_limit=0.0))
    assert limited.stopped == "time limit" and limited.lower_bound is not None


def test_undecided_candidates_are_listed_and_spoil_optimality(study):
    problem, outcome, _ = study
    starved = robust_selection(problem, outcome, [], Settings(), max_boxes=1)
    assert not starved.optimal and (starved.undecided or starved.winner is None)


def test_undecided_candidates_get_a_second_look(study):
    """With 300 boxes the cheapest provable design is undecided at first; five times as many prove it, and it wins."""
    problem, outcome, robust = study
    few = robust_selection(problem, outcome, [], Settings(), max_boxes=300)
    first = certify(problem, np.array(robust.winner.part), robust.winner.step, max_boxes=300)
    assert first.status == "undecided"
    assert few.winner is not None and few.winner.part == robust.winner.part and few.optimal
    report = check_entries([plain(entry) for entry in proof_record(problem, outcome, few, {}).entries])
    assert report.confirmed, report.faults


@pytest.fixture(scope="module")
def entries(study):
    return [plain(entry) for entry in proof_record(*study, {"study.toml": "0" * 64}).entries]


def chained(entries):
    """The chain made anew, as a forger would."""
    previous = ""
    for entry in entries:
        entry["previous"] = previous
        text = json.dumps([entry["kind"], entry["data"], previous], sort_keys=True, separators=(",", ":"))
        entry["digest"] = previous = hashlib.sha256(text.encode("ascii")).hexdigest()
    return entries


def test_the_record_is_confirmed(entries):
    report = check_entries(entries)
    assert report.confirmed, report.faults
    assert report.boxes > 10 and report.designs > 1
    assert any("excluded at listed values" in text for text in report.not_reproven)


def test_a_changed_entry_breaks_the_chain(entries):
    changed = copy.deepcopy(entries)
    changed[1]["data"]["designs"] += 1
    assert not check_entries(changed).confirmed


def of_winner(entries, kind):
    winner = entries[-1]["data"]["winner"]
    return next(e for e in entries if e["kind"] == kind and e["data"]["candidate"] == winner)


def forge(entries, change):
    changed = copy.deepcopy(entries)
    change(changed)
    return check_entries(chained(changed))


def test_forged_records_are_rejected(entries):
    def lower_limit(e):
        data = of_winner(e, "scatter-response")["data"]
        data["limits"]["limit"] = [0.9 * v if i else 0.5 * v for i, v in enumerate(data["limits"]["limit"])]
        data["limits"]["limit"] = [0.1 * v for v in data["limits"]["limit"]]

    def cut_tree(e):
        of_winner(e, "scatter-response")["data"]["decision"]["splits"].pop()

    def wider(e):
        data = of_winner(e, "scatter-static")["data"]
        data["limits"]["low"][0] = 0.2

    def other_status(e):
        data = next(x for x in e if x["kind"] == "candidate" and x["data"]["status"] == "violated")["data"]
        data["status"] = "proven"

    def drop_entry(e):
        e.remove(of_winner(e, "scatter-response"))

    def miscount(e):
        e[1]["data"]["met"] += 1

    def no_witness(e):
        for entry in e:
            if entry["kind"] == "scatter-response" and "violated" in entry["data"]["statuses"]:
                entry["data"]["limits"]["limit"] = [10.0 * v for v in entry["data"]["limits"]["limit"]]
                return

    def better_optimum(e):
        e[-1]["data"]["winner"] = 0

    for change in (
        lower_limit,
        cut_tree,
        wider,
        other_status,
        drop_entry,
        miscount,
        no_witness,
        better_optimum,
    ):
        assert not forge(entries, change).confirmed, change.__name__
    assert forge(entries, lambda e: None).confirmed


def test_every_design_without_scatter_in_the_record_too(study):
    problem, outcome, _ = study
    record = proof_record(problem, outcome, None, {})
    report = check_entries([plain(entry) for entry in record.entries])
    assert report.confirmed and report.boxes == 0
    assert all_designs(problem.model, 0, 1).count == 1
