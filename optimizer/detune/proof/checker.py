"""Checker of a proof record: recomputes the chain, the boxes and the designs with code of its own.

Nothing of the search, the bounds or the bisection is used: boxes are bounded by `checker_boxes.py` with all rounding
accounted for, designs are assessed in exact fractions by `checker_designs.py`. What the checker cannot
confirm it reports; it never repairs a record.
"""

from __future__ import annotations

import hashlib
import json
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from detune.proof.checker_arithmetic import UNIT, Matrix
from detune.proof.checker_boxes import read_system, upper_bounds
from detune.proof.checker_claims import check_response, check_selection, check_separation, check_static
from detune.proof.checker_designs import LARGEST_ENUMERATION, check_search, exact_output, number
from detune.proof.checker_noise import check_noise

FORMAT = "detune proof record 1"
BATCH = 256
DEEPEST = 4
MOST_OPEN = 2048


@dataclass(frozen=True)
class CheckReport:
    """Outcome of a check: whether everything was confirmed, what was not, and how much was recomputed.

    not_reproven: what the record states and the checker has only read, in words.
    """

    confirmed: bool
    faults: tuple[str, ...]
    entries: int
    boxes: int
    designs: int
    not_reproven: tuple[str, ...] = ()


def check_record(path: Path) -> CheckReport:
    """Check a record in a file; raises OSError if it cannot be read. Anything else wrong is a fault."""
    try:
        entries = json.loads(path.read_text(encoding="ascii"))
    except ValueError as problem:
        return CheckReport(False, (f"not a JSON record: {problem}",), 0, 0, 0)
    return check_entries(entries)


def check_entries(entries: Any) -> CheckReport:
    """Check the entries of a record, as plain data."""
    faults: list[str] = []
    boxes = designs = 0
    if not isinstance(entries, list) or not entries:
        return CheckReport(False, ("the record has no entries",), 0, 0, 0)
    faults += check_chain(entries)
    if faults:
        return CheckReport(False, tuple(faults), len(entries), 0, 0)
    remarks: dict[str, None] = {}
    for position, entry in enumerate(entries):
        label = f"entry {position} ({entry['kind']})"
        try:
            for remark in taken_as_stated(entry):
                remarks[remark] = None
            if entry["kind"] == "decision":
                found, count = check_decision(entry["data"])
                boxes += count
            elif entry["kind"] == "search":
                found, count = check_search(entry["data"])
                designs += count
            elif entry["kind"] == "scatter-response":
                found, count = check_response(entry["data"], rebuild, halve)
                boxes += count
            elif entry["kind"] == "scatter-noise":
                found, count = check_noise(entry["data"], rebuild, halve)
                boxes += count
            elif entry["kind"] == "scatter-static":
                found, count = check_static(entry["data"])
                boxes += count
            elif entry["kind"] == "scatter-separation":
                found = check_separation(entry["data"])
            elif entry["kind"] == "selection":
                found = check_selection(entries)
                designs += sum(1 for other in entries if other["kind"] == "candidate")
            else:
                found = []
        except (
            KeyError,
            ValueError,
            TypeError,
            IndexError,
            ArithmeticError,
            np.linalg.LinAlgError,
        ) as problem:
            found = [f"cannot be checked: {type(problem).__name__}: {problem}"]
        faults += [f"{label}: {text}" for text in found]
    return CheckReport(not faults, tuple(faults), len(entries), boxes, designs, tuple(remarks))


def taken_as_stated(entry: dict[str, Any]) -> list[str]:
    """What an entry states that the checker does not compute again, in words."""
    kind, data = entry["kind"], entry["data"]
    if kind == "record":
        return [
            "that the recorded arrays and limits are those of the study file and its lists, with static parts taken "
            "off the limits (inputs are known by their hashes alone)",
            "who wrote the record: the chain of hashes shows alterations, it is no signature",
        ]
    if kind == "rules":
        return [
            f"that each of the {sum(int(rule['excluded']) for rule in data['rules'])} designs excluded at "
            "listed values fails the rule it is counted under (only the sums are checked)"
        ]
    if kind == "search" and data["designs"]:
        known = data["selection"] is not None and data["final_test"] == "rows"
        return (
            []
            if known and data["design_count"] <= LARGEST_ENUMERATION
            else [
                f"that no cheaper design exists among the {data['design_count']} of the search, beyond what "
                "was enumerated"
            ]
        )
    if kind == "candidate":
        return [f"candidate {data['position']}: {text}" for text in data["not_in_record"]]
    return []


def check_chain(entries: list[Any]) -> list[str]:
    """Faults of the hash chain and of the first entry."""
    previous, faults = "", []
    for position, entry in enumerate(entries):
        if not isinstance(entry, dict) or set(entry) != {"kind", "data", "previous", "digest"}:
            return [f"entry {position} has not the form of an entry"]
        content = [entry["kind"], entry["data"], entry["previous"]]
        text = json.dumps(content, sort_keys=True, separators=(",", ":"), allow_nan=False)
        if hashlib.sha256(text.encode("ascii")).hexdigest() != entry["digest"]:
            faults.append(f"entry {position} was altered: its digest does not match")
        if entry["previous"] != previous:
            faults.append(f"entry {position} does not follow the entry before it")
        previous = entry["digest"]
    first = entries[0]
    if (
        first["kind"] != "record"
        or not isinstance(first["data"], dict)
        or first["data"].get("format") != FORMAT
    ):
        faults.append("the first entry does not name the format")
    return faults


def check_decision(data: dict[str, Any]) -> tuple[list[str], int]:
    """Faults of one decided limit, and the number of boxes bounded."""
    decision, output = data["decision"], data["output"]
    limit = number(output["limit"])
    if number(decision["limit"]) != limit:
        return ["the decision speaks of another limit"], 0
    if decision["status"] == "proven":
        return check_boxes(data, limit)
    if decision["status"] == "violated":
        value = exact_output(data["system"], output, decision["worst"], number(decision["frequency"]))
        return ([] if value > limit else ["the witness does not exceed the limit"]), 0
    if decision["status"] != "undecided":
        return [f"unknown status {decision['status']}"], 0
    return ([] if number(decision["lower"]) <= limit else ["undecided although a violation is named"]), 0


def check_boxes(data: dict[str, Any], limit: float) -> tuple[list[str], int]:
    """Rebuild the boxes of a proof from its tree and bound each of them within the limit."""
    system, output = read_system(data["system"]), data["output"]
    first, last = (number(f) for f in output["frequency"])
    if not 0.0 < first <= last:
        return ["the frequency interval is empty"], 0
    # The whole box a hair wider, so that rounding of omega^2 cuts nothing off.
    low = np.append(system["low"], (2.0 * np.pi * first) ** 2 * (1.0 - 16.0 * UNIT))
    high = np.append(system["high"], (2.0 * np.pi * last) ** 2 * (1.0 + 16.0 * UNIT))
    leaves = rebuild(low, high, data["decision"]["splits"])
    if leaves is None:
        return ["the tree of boxes is not complete"], 0
    lows, highs = leaves
    count = 0
    for start in range(0, len(lows), BATCH):
        part_low, part_high = lows[start : start + BATCH], highs[start : start + BATCH]
        for _ in range(DEEPEST + 1):
            bound = upper_bounds(system, output, part_low, part_high)
            count += len(part_low)
            failed = ~(bound <= limit)
            if not failed.any():
                break
            if failed.sum() > MOST_OPEN:
                return [f"{int(failed.sum())} boxes could not be confirmed within the limit"], count
            part_low, part_high = halve(part_low[failed], part_high[failed])
        else:
            return [f"{int(failed.sum())} boxes could not be confirmed within the limit"], count
    return [], count


def rebuild(low: Matrix, high: Matrix, splits: list[int]) -> tuple[Matrix, Matrix] | None:
    """Leaf boxes of a tree of halvings in preorder; None unless the tree is whole and uses its variables rightly."""
    lows, highs, stack = [], [], [(low, high)]
    for variable in splits:
        if not stack:
            return None
        box_low, box_high = stack.pop()
        if variable == -1:
            lows.append(box_low)
            highs.append(box_high)
            continue
        if not isinstance(variable, int) or not 0 <= variable < len(low):
            return None
        middle = 0.5 * (box_low[variable] + box_high[variable])
        first_high, second_low = box_high.copy(), box_low.copy()
        first_high[variable] = middle
        second_low[variable] = middle
        stack.append((second_low, box_high))
        stack.append((box_low, first_high))
    if stack or not lows:
        return None
    return np.stack(lows), np.stack(highs)


def halve(low: Matrix, high: Matrix) -> tuple[Matrix, Matrix]:
    """Cut every box along its relatively widest side."""
    side = np.argmax((high - low) / np.maximum(np.abs(high) + np.abs(low), 1e-300), axis=1)
    rows = np.arange(len(low))
    middle = 0.5 * (low[rows, side] + high[rows, side])
    first_high, second_low = high.copy(), low.copy()
    first_high[rows, side] = middle
    second_low[rows, side] = middle
    return np.concatenate([low, second_low]), np.concatenate([first_high, high])
