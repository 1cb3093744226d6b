"""Proof record and its checker: honest records are confirmed, altered ones are not, the checker is independent."""

import ast
import copy
import json
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from detune.proof import checker, checker_arithmetic, checker_boxes
from detune.proof.bisect import decide, worst_case
from detune.proof.checker import check_entries, check_record
from detune.proof.instances import InstanceSettings, make_instance
from detune.proof.record import (
    add_decision,
    add_note,
    add_search,
    entry_digest,
    new_record,
    plain,
    write_record,
)
from detune.proof.robust_data import OutputLimit, RobustSystem, output_at
from detune.proof.search import SearchSettings
from detune.proof.search_front import search_front, search_least_cost

NUMPY = SearchSettings(kernels="numpy")


def two_mass_system(width=0.02):
    """Two bodies of 100 and 40 kg in line on springs of 4e5 and 2e5 N/m, loss factor 0.1; each spring by itself."""
    axes = np.array([[1.0, 0.0], [-1.0, 1.0]])
    k = np.array([4e5, 2e5])
    zero = np.zeros((2, 2))
    return RobustSystem(
        mass=np.diag([100.0, 40.0]),
        fixed_dynamic=zero,
        fixed_hysteretic=zero,
        fixed_viscous=zero,
        axes=axes,
        stiffness=k,
        loss=0.1 * k,
        viscous=np.array([0.0, 50.0]),
        stiffness_variable=np.array([0, 1]),
        damping_variable=np.array([-1, 2]),
        mass_terms=np.array([[[0.0, 0.0], [0.0, 1.0]]]),
        mass_variable=np.array([3]),
        low=np.array([1 - width, 1 - width, 0.7, -1.0]),
        high=np.array([1 + width, 1 + width, 1.3, 1.0]),
    )


def second_body(limit, force=False):
    return OutputLimit(
        row=np.array([0.0, 0.0 if force else 1.0], dtype=complex),
        force=np.array([0.0, 1.0 if force else 0.0], dtype=complex),
        load=np.array([0.0, 1.0], dtype=complex),
        base=np.array([1e-6 if force else 0.0, 0.0], dtype=complex),
        limit=limit,
        frequency=(15.0, 16.0),
        load_power=2.0,
    )


def few_cases(selection):
    """The selection with three of its fifteen load cases: exact fractions are slow."""
    cases = selection.harmonic
    names = ("frequency", "load", "base", "row_limit", "deflection_limit", "force_limit", "total_limit")
    return replace(selection, harmonic=replace(cases, **{name: getattr(cases, name)[2::5] for name in names}))


@pytest.fixture(scope="module")
def entries():
    """A record with a proven, a violated and an undecided limit, a least cost and a front, as plain data."""
    system = two_mass_system()
    bracket = worst_case(system, second_body(np.inf), gap=0.02)
    record = new_record("two bodies", {"study.toml": "0" * 64})
    proven = second_body(1.05 * bracket.lower)
    decision = decide(system, proven)
    assert decision.status == "proven" and decision.boxes > 3
    record = add_decision(record, "second body", system, proven, decision)
    violated = second_body(0.9 * bracket.lower)
    record = add_decision(record, "too low", system, violated, decide(system, violated))
    open_ended = decide(system, proven, max_boxes=1)
    assert open_ended.status == "undecided"
    record = add_decision(record, "stopped", system, proven, open_ended)
    force = second_body(np.inf, force=True)
    force = replace(force, limit=1.1 * worst_case(system, force, gap=0.05).lower)
    record = add_decision(record, "spring force", system, force, decide(system, force))
    shape = InstanceSettings(parts=4, groups=3, seed=1, tight=False, response_share=0.5, separation=0.02)
    selection = few_cases(make_instance(shape))
    record = add_search(record, selection, search_least_cost(selection, settings=NUMPY))
    record = add_search(record, selection, search_front(selection, settings=NUMPY))
    record = add_note(record, "remark", {"text": "nothing else was looked at"})
    return [plain(entry) for entry in record.entries]


def chained(entries):
    """The entries with a chain made anew: what a careful forger would do."""
    previous = ""
    for entry in entries:
        entry["previous"] = previous
        entry["digest"] = previous = entry_digest(entry["kind"], entry["data"], previous)
    return entries


def test_honest_record_is_confirmed(entries, tmp_path):
    report = check_entries(entries)
    assert report.confirmed, report.faults
    assert report.boxes > 10 and report.designs > 2
    record = new_record("empty")
    path = tmp_path / "record.json"
    write_record(record, path)
    assert check_record(path).confirmed


def test_any_altered_entry_breaks_the_chain(entries):
    for position in range(len(entries)):
        altered = copy.deepcopy(entries)
        altered[position]["data"]["title"] = "another"
        assert not check_entries(altered).confirmed
    assert not check_entries(entries[1:]).confirmed
    assert not check_entries(entries[:2] + entries[3:]).confirmed
    assert not check_entries([entries[1], entries[0], *entries[2:]]).confirmed
    assert not check_entries([]).confirmed
    assert not check_entries({"entries": entries}).confirmed


def forged(entries, position, change):
    altered = copy.deepcopy([entries[0], entries[position]])
    change(altered[1]["data"])
    return check_entries(chained(altered))


def test_rechained_forgeries_of_a_proof_are_found(entries):
    def lower_limit(data):
        data["output"]["limit"] *= 0.9
        data["decision"]["limit"] *= 0.9

    def wider(data):
        data["system"]["low"][0] = 0.6

    def cut_tree(data):
        data["decision"]["splits"] = data["decision"]["splits"][:-1]

    def foreign_variable(data):
        data["decision"]["splits"] = [99, -1, -1]

    def longer_tree(data):
        data["decision"]["splits"].append(-1)

    def call_proven(data):
        data["decision"].update(status="proven", splits=[-1])

    def wider_frequency(data):
        data["output"]["frequency"] = [8.0, 16.0]

    def other_limit(data):
        data["decision"]["limit"] *= 2.0

    def missing(data):
        del data["system"]["loss"]

    def negative_loss(data):
        data["system"]["loss"][0] *= -1.0

    for change in (
        lower_limit, wider, cut_tree, foreign_variable, longer_tree, wider_frequency, other_limit, missing,
        negative_loss,
    ):  # fmt: skip
        assert not forged(entries, 1, change).confirmed, change.__name__
    # The violated limit called proven.
    assert not forged(entries, 2, call_proven).confirmed

    def harmless_witness(data):
        data["decision"]["frequency"] = 200.0

    assert not forged(entries, 2, harmless_witness).confirmed


def test_rechained_forgeries_of_a_search_are_found(entries):
    def lose_designs(data):
        data["counts"]["static_box"] -= 1

    def cheaper(data):
        data["designs"][0]["cost"] -= 1.0

    def other_parts(data):
        data["designs"][0]["parts"][0] = (data["designs"][0]["parts"][0] + 1) % 4

    def tighter(data):
        data["chosen"][0]["static_rows"]["upper"] = [0.0, 0.0]

    def none_exists(data):
        data["designs"], data["chosen"] = [], []

    def negative(data):
        data["counts"]["static_box"] -= 10**6
        data["counts"]["cost"] += 10**6

    for change in (lose_designs, cheaper, other_parts, tighter, none_exists, negative):
        assert not forged(entries, 5, change).confirmed, change.__name__


def test_file_that_is_no_record_is_a_fault(tmp_path):
    path = tmp_path / "record.json"
    path.write_text("{", encoding="ascii")
    assert not check_record(path).confirmed


def test_checker_shares_no_code_with_what_it_checks():
    files = sorted(Path(checker.__file__).parent.glob("checker*.py"))
    allowed = {file.stem for file in files}
    assert {"checker", "checker_arithmetic", "checker_boxes", "checker_designs"} <= allowed
    for file in files:
        tree = ast.parse(file.read_text(encoding="utf-8"))
        for node in ast.walk(tree):
            names = []
            if isinstance(node, ast.ImportFrom):
                names = [node.module or ""]
            elif isinstance(node, ast.Import):
                names = [alias.name for alias in node.names]
            for name in names:
                if name.startswith("detune"):
                    assert name.removeprefix("detune.proof.") in allowed, name


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 2**32 - 1), st.booleans())
def test_checkers_bound_is_never_below_a_sample(seed, force):
    rng = np.random.default_rng(seed)
    system = two_mass_system(10 ** rng.uniform(-5, -0.8))
    f = rng.uniform(3, 40)
    output = replace(second_body(np.inf, force), frequency=(f, f * (1 + 10 ** rng.uniform(-5, -1.5))))
    narrow = 10 ** rng.uniform(-4, 0)
    system = replace(
        system,
        low=np.array([*system.low[:2], 1 - 0.3 * narrow, -narrow]),
        high=np.array([*system.high[:2], 1 + 0.3 * narrow, narrow]),
    )
    low = np.append(system.low, (2 * np.pi * output.frequency[0]) ** 2)
    high = np.append(system.high, (2 * np.pi * output.frequency[1]) ** 2)
    data = json.loads(json.dumps(plain(system)))
    bound = checker_boxes.upper_bounds(checker_boxes.read_system(data), plain(output), low[None], high[None])
    points = low + (high - low) * rng.uniform(size=(300, 5))
    points = np.concatenate([points, np.where(rng.integers(0, 2, (300, 5)), low, high)])
    assert output_at(system, output, points).max() <= bound[0]


def test_exact_inertia_of_matrices_without_usable_pivots():
    """[[0, 1], [1, 0]] has eigenvalues -1 and 1; the zero matrix two zeros; diag(2, -3, 0) one of each."""
    count = checker_arithmetic.positive_pivots
    one, zero = Fraction(1), Fraction(0)
    assert count([[zero, one], [one, zero]]) == (1, 0, 1)
    assert count([[zero, zero], [zero, zero]]) == (0, 2, 0)
    diagonal = [[Fraction(v) if i == k else zero for k in range(3)] for i, v in enumerate((2, -3, 0))]
    assert count(diagonal) == (1, 1, 1)
    rng = np.random.default_rng(0)
    for _ in range(20):
        matrix = rng.integers(-3, 4, (5, 5))
        matrix = matrix + matrix.T
        np.fill_diagonal(matrix, 0)
        values = np.linalg.eigvalsh(matrix)
        expected = ((values < -1e-9).sum(), (np.abs(values) <= 1e-9).sum(), (values > 1e-9).sum())
        assert count([[Fraction(int(v)) for v in row] for row in matrix]) == expected
