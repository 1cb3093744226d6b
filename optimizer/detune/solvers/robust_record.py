"""The proof record of a study with scatter: every rule's count, every cheaper candidate's witness, the
winner's boxes.
"""

from collections.abc import Mapping

import numpy as np

from detune.problem.build import Problem
from detune.proof.record import ProofRecord, append, new_record
from detune.response.designs import Designs
from detune.solvers.certify_response import claimed
from detune.solvers.outcome import Outcome
from detune.solvers.robust import RobustResult
from detune.solvers.verdict import (
    DesignVerdict,
    NoiseProof,
    Proof,
    ResponseProof,
    SeparationProof,
    StaticProof,
)

KINDS = {
    "ResponseProof": "scatter-response",
    "NoiseProof": "scatter-noise",
    "StaticProof": "scatter-static",
}


def proof_record(
    problem: Problem, outcome: Outcome, robust: RobustResult | None, inputs: Mapping[str, str]
) -> ProofRecord:
    """Return the record of a study. Without scatter it holds the count of every rule and no boxes."""
    record = new_record(problem.brief.title, dict(inputs))
    known = outcome.record
    record = append(
        record,
        "rules",
        {
            "method": known.method,
            "stopped": outcome.stopped,
            "designs": known.designs,
            "looked_at": known.looked_at,
            "met": known.met,
            "rules": [{"stage": r.stage, "rule": r.rule, "excluded": r.excluded} for r in known.rules],
        },
    )
    if robust is None or robust.judge != "interval":
        return record
    candidates = [*robust.violated, *robust.undecided, *robust.sampled]
    candidates += [] if robust.winner is None else [robust.winner]
    # A winner comes after everything of its own cost that was examined before it.
    candidates.sort(key=lambda verdict: (verdict.cost, verdict is robust.winner))
    for position, verdict in enumerate(candidates):
        record = _candidate(record, problem, position, verdict)
    position_of = {id(verdict): position for position, verdict in enumerate(candidates)}
    return append(
        record,
        "selection",
        {
            "winner": None if robust.winner is None else position_of[id(robust.winner)],
            "undecided": [position_of[id(v)] for v in (*robust.undecided, *robust.sampled)],
            "optimal": robust.optimal,
            "price": robust.price,
            "stopped": robust.stopped,
            "nominal_cost": None if robust.nominal is None else robust.nominal.cost,
        },
    )


def _candidate(record: ProofRecord, problem: Problem, position: int, verdict: DesignVerdict) -> ProofRecord:
    chosen = Designs(np.array([verdict.part], dtype=np.intp), np.array([verdict.step], dtype=np.intp))
    kept = [(proof, _data(proof)) for proof in verdict.proofs]
    if verdict.status == "violated":
        kept = [(proof, data) for proof, data in kept if "violated" in data["statuses"]]  # type: ignore[operator]
    names = [data["name"] for _, data in kept]
    boxed = {label for _, data in kept for label in data["labels"]}  # type: ignore[attr-defined]
    left = [row.label for row in verdict.rows if row.label not in boxed and row.status != "violated"]
    if verdict.status == "violated":
        left = [] if kept else [f"{row.label}, violated" for row in verdict.rows if row.status == "violated"]
    record = append(
        record,
        "candidate",
        {
            "position": position,
            "cost": verdict.cost,
            "design": str(problem.design(chosen, 0)),
            "part": list(verdict.part),
            "step": verdict.step,
            "status": verdict.status,
            "entries": names,
            "sampled_only": not kept,
            "not_in_record": [f"{label}: taken from the run, not computed again" for label in left],
            "rows": [
                {"label": r.label, "status": r.status, "worst": r.worst, "guaranteed": r.guaranteed,
                 "frequency": r.frequency,
                 "where": r.where}
                for r in verdict.rows
            ],
        },
    )  # fmt: skip
    for proof, data in kept:
        kind = KINDS.get(type(proof).__name__, "scatter-separation")
        record = append(record, kind, {"candidate": position, **data})
    return record


def _data(proof: Proof) -> dict[str, object]:
    if isinstance(proof, (ResponseProof, NoiseProof)):
        return {
            "name": proof.name,
            "labels": list(proof.labels),
            "statuses": list(proof.decision.status),
            "system": proof.system,
            "limits": proof.limits,
            "decision": proof.decision,
        }
    if isinstance(proof, StaticProof):
        each = [claimed(proof.decision, row) for row in range(len(proof.labels))]
        decision = proof.decision
        return {
            "name": proof.name,
            "labels": list(proof.labels),
            "statuses": list(decision.status),
            "status": list(decision.status),
            "limits": proof.limits,
            "claimed_low": [low for low, _ in each],
            "claimed_high": [high for _, high in each],
            "where_low": decision.where_low,
            "where_high": decision.where_high,
        }
    assert isinstance(proof, SeparationProof)
    return {
        "name": proof.name,
        "labels": [proof.name],
        "statuses": [proof.status],
        "system": proof.system,
        "intervals": proof.intervals,
        "required": proof.required,
        "status": proof.status,
        "worst": proof.worst,
    }
