"""Numbers and sentences for readers, and the terminal summary."""

import math

import pytest

from detune.report.summary import assess_text, compare_text, summary
from detune.report.words import margin_text, percent
from detune.study.cautions import CAUTIONS


@pytest.mark.parametrize(
    ("ratio", "text"),
    [
        (0.0, "0.0 %"),
        (0.1234, "12.3 %"),
        (0.0056, "0.56 %"),
        # A margin just below zero is missed and must not read as met.
        (-3e-6, "-0.0003 %"),
        (math.inf, "no bound"),
        (math.nan, "not a number"),
    ],
)
def test_per_cent(ratio, text):
    assert percent(ratio) == text


@pytest.mark.parametrize(
    ("margin", "text"),
    [(0.2, "+20.0 %"), (0.0, "0.0 %"), (-0.5, "-50.0 %"), (12.0, "> 1000 %"), (math.inf, "> 1000 %")],
)
def test_margins(margin, text):
    assert margin_text(margin) == text


def test_summary_begins_with_the_answer(result):
    lines = summary(result).splitlines()
    assert lines[0] == "Small press on three kinds of mount"
    assert lines[2] == "Meets the brief: feet: teasel-a"
    assert lines[3] == "  cost 80, separation 72.4 %, least margin +23.0 %"
    assert "velocity z, peak at table (running)" in lines[4] and "1800 rev/min" in summary(result)
    text = " ".join(summary(result).split())
    # Three in stock where four are needed.
    assert "4 of teasel-a are needed and the list small list states 3 in stock." in text
    assert all(caution in text for caution in CAUTIONS)
    assert text.index("Meets the brief") < text.index("Look at") < text.index("Cautions")


def test_summary_names_the_files(result, tmp_path):
    assert str(tmp_path / "report.html") in summary(result, tmp_path)


def test_summary_where_none_exists_says_so_first(nothing_meets):
    text = summary(nothing_meets)
    assert text.splitlines()[2] == "No design meets the brief: none of the 6 designs does."
    assert "velocity z, peak at table (running)" in text
    assert "Closest design found" in text and "Does not meet the brief" in text
    assert "Meets the brief:" not in text


def test_summary_of_a_stopped_run_claims_nothing(variant):
    stopped = variant(time_limit=0.0)
    text = " ".join(summary(stopped).split())
    assert "PARTIAL RESULT" in text and "after 0 of 6 designs" in text
    assert "That is no proof that none exists." in text
    assert "Proven" not in text and "none of the 6 designs does" not in text


def test_assessment_of_a_named_design_lists_every_requirement(result):
    named = result.compared[0]
    text = " ".join(assess_text(result.study.brief, named).split())
    assert "Does not meet the brief: feet: teasel-c" in text
    for row in named.margins:
        assert row.label in text


def test_comparison_is_side_by_side(result):
    lines = compare_text([result.answer, *result.compared], ["answer", "mine"]).splitlines()
    assert lines[0].split() == ["answer", "mine"]
    cost = next(line for line in lines if line.startswith("cost"))
    assert cost.split() == ["cost", "80", "40"]
    meets = next(line for line in lines if line.startswith("meets"))
    assert meets.split()[-2:] == ["yes", "no"]
    start = lines[0].index("mine")
    assert all(len(line) <= start or line[start - 1] == " " for line in lines)
