"""Bad input to `[sizing]`: each fault names file, line and key, says what stands there and what to write instead.

No case may end in a traceback or in the words of a solver. The expected words are those a user has to read.
"""

from __future__ import annotations

from pathlib import Path

import pytest

from detune.ground.errors import BriefError
from detune.study.load import load_study
from detune.study.size import size_study

STUDY = """
title = "Fan on four feet"
[[body]]
name = "fan"
free = ["z"]
mass = "180 kg"
centre = ["0 m", "0 m", "0 m"]
[[point]]
name = "bearing"
position = ["0 m", "0 m", "0 m"]
[[station]]
name = "feet"
group = "feet"
parallel = 4
position = ["0 m", "0 m", "0 m"]
[floor]
kind = "rigid"
[[condition]]
name = "running"
[[forcing]]
kind = "harmonic-force"
name = "drive"
position = ["0 m", "0 m", "0 m"]
frequency = ["15 Hz", "25 Hz"]
force = ["0 N", "0 N", "40 N"]
[[allowable]]
kind = "transmitted-force"
through = "floor"
direction = "z"
measure = "peak"
limit = "15 N"
[[allowable]]
kind = "sag"
at = "bearing"
limit = "8 mm"
[ballast]
position = ["0 m", "0 m", "0 m"]
size = ["1 m", "1 m", "0.1 m"]
steps = ["0 kg"]
cost_per_kg = 1.0
[sizing]
minimise = "cost"
trade = ["cost", "worst-response"]
map = ["axial stiffness of feet", "loss factor of feet"]
starts = 3
specification = false
[[sizing.unknown]]
kind = "stiffness"
group = "feet"
axis = "axial"
lower = "20 N/mm"
upper = "2000 N/mm"
[[sizing.unknown]]
kind = "loss-factor"
group = "feet"
lower = 0.02
upper = 0.4
[[sizing.unknown]]
kind = "ballast"
lower = "0 kg"
upper = "50 kg"
[[sizing.made]]
group = "feet"
dynamic_to_static = 1.2
pulls = true
cost = 8
cost_per_stiffness = 0.01
cost_per_loss_factor = 30
"""

STIFFNESS = 'axis = "axial"\nlower = "20 N/mm"'
MADE = "[[sizing.made]]"


def more(table: str) -> tuple[str, str]:
    """One further table among the unknowns."""
    return MADE, f"{table}\n{MADE}"


CASES: dict[str, tuple[str, str, str, str]] = {
    # Bounds.
    "crossed": ('lower = "20 N/mm"', 'lower = "3 kN/mm"', "unknown[1].lower", "these are crossed"),
    "zero stiffness": ('"20 N/mm"', '"0 N/mm"', "unknown[1].lower", "above zero"),
    "negative stiffness": ('"20 N/mm"', '"-20 N/mm"', "unknown[1].lower", "above zero"),
    "negative loss factor": ("lower = 0.02", "lower = -0.02", "unknown[2].lower", "above zero"),
    "negative ballast": ('lower = "0 kg"', 'lower = "-5 kg"', "unknown[3].lower", "zero or more"),
    "no unit": ('"20 N/mm"', "20", "unknown[1].lower", 'a stiffness with its unit, such as "4.2 N/mm"'),
    "unit of another kind": ('"20 N/mm"', '"20 kg"', "unknown[1].lower", '"kg" is a mass'),
    "unit of a length": ('"2000 N/mm"', '"2000 mm"', "unknown[1].upper", '"mm" is a length'),
    "no such unit": ('"20 N/mm"', '"20 N/mmm"', "unknown[1].lower", 'did you mean "20 N/mm"'),
    "words for a number": ('"20 N/mm"', '"twenty N/mm"', "unknown[1].lower", "the number must come first"),
    "empty": ('"20 N/mm"', '""', "unknown[1].lower", "a stiffness with its unit"),
    "a list": ('"20 N/mm"', '["20 N/mm"]', "unknown[1].lower", "text in quotes, or a number"),
    "a truth value": ("lower = 0.02", "lower = true", "unknown[2].lower", "a number, with its unit"),
    "no end": ('"2000 N/mm"', "inf", "unknown[1].upper", "a finite bound"),
    "not a number": ("upper = 0.4", "upper = nan", "unknown[2].upper", "a finite bound"),
    "lower left out": ("lower = 0.02\n", "", "unknown[2].lower", "which has no default"),
    "upper left out": ('upper = "2000 N/mm"\n', "", "unknown[1].upper", "which has no default"),
    "per cent left out": ("upper = 0.4", "upper = 4", "unknown[2].upper", "per cent"),
    # Kinds, names and what belongs to them.
    "misspelt kind": ('"stiffness"\ngroup', '"stifness"\ngroup', "unknown[1].kind", 'did you mean "stiffness"'),
    "underscore": ('"loss-factor"', '"loss_factor"', "unknown[2].kind", 'did you mean "loss-factor"'),
    "misspelt group": ('"loss-factor"\ngroup = "feet"', '"loss-factor"\nname = "loss factor of feet"\ngroup = "fet"',
                       "unknown[2].group", 'did you mean "feet"'),
    "no group": ('group = "feet"\naxis', "axis", "unknown[1].kind", 'the group of parts, as "group"'),
    "group of ballast": ('kind = "ballast"', 'kind = "ballast"\ngroup = "feet"', "unknown[3].kind", 'no "group"'),
    "body of stiffness": (STIFFNESS, 'body = "fan"\n' + STIFFNESS, "unknown[1].kind", 'no "body"'),
    "no axis": ('axis = "axial"\n', "", "unknown[1]", '"axis" as one of axial, lateral, x, y'),
    "wrong axis": ('axis = "axial"', 'axis = "z"', "unknown[1].axis", '"axis" as one of axial, lateral, x, y'),
    "axis of damping": ('"loss-factor"', '"loss-factor"\naxis = "axial"', "unknown[2].axis", 'no "axis"'),
    "unknown key": ('upper = "50 kg"', 'upper = "50 kg"\nuper = 3', "unknown[3].uper", 'did you mean "upper"'),
    "stiffness twice": (*more('[[sizing.unknown]]\nkind = "stiffness"\ngroup = "feet"\n' + STIFFNESS
                              + '\nupper = "50 N/mm"'), "unknown[4]", "unknown 1 already"),
    "step of stiffness": (STIFFNESS, STIFFNESS + '\nstep = "1 N/mm"', "unknown[1].step", "only ballast comes in steps"),
    "step of zero": ('upper = "50 kg"', 'upper = "50 kg"\nstep = "0 kg"', "unknown[3].step", "a step above zero"),
    "step too wide": ('upper = "50 kg"', 'upper = "50 kg"\nstep = "80 kg"', "unknown[3].step", "fits between"),
    "step of a gram": ('upper = "50 kg"', 'upper = "50 kg"\nstep = "1 g"', "unknown[3].step", "at most 1000 amounts"),
    "a thousand parts": (*more('[[sizing.unknown]]\nkind = "parallel"\ngroup = "feet"\nlower = 1\nupper = 1000'),
                         "unknown[4].upper", "at most 100 parts"),
    "position at the origin": (*more('[[sizing.unknown]]\nkind = "position"\nstations = ["feet"]\naxis = "x"\n'
                                     'lower = "0.1 m"\nupper = "1 m"'), "unknown[4].stations[1]", "to which side"),
    "position of nothing": (*more('[[sizing.unknown]]\nkind = "position"\naxis = "x"\nlower = "0.1 m"\n'
                                  'upper = "1 m"'), "unknown[4].kind", "the stations that move"),
    "position misspelt": (*more('[[sizing.unknown]]\nkind = "position"\nstations = ["feets"]\naxis = "z"\n'
                                'lower = "0.1 m"\nupper = "1 m"'), "unknown[4].stations[1]", 'did you mean "feet"'),
    "parts by halves": (*more('[[sizing.unknown]]\nkind = "parallel"\ngroup = "feet"\nlower = 1.5\nupper = 4'),
                        "unknown[4].lower", "whole numbers of parts"),
    "no parts": (*more('[[sizing.unknown]]\nkind = "parallel"\ngroup = "feet"\nlower = 0\nupper = 4'),
                 "unknown[4].lower", "above zero"),
    "parts in kilograms": (*more('[[sizing.unknown]]\nkind = "parallel"\ngroup = "feet"\nlower = "1 kg"\nupper = 4'),
                           "unknown[4].lower", "a count has no unit"),
    "no such absorber": (*more('[[sizing.unknown]]\nkind = "absorber-mass"\nbody = "fann"\nlower = "1 kg"\n'
                               'upper = "2 kg"'), "unknown[4].body", 'did you mean "fan"'),
    # What is sought.
    "no goal": ('minimise = "cost"\n', "", "sizing", 'exactly one of "minimise" and "maximise"'),
    "two goals": ('minimise = "cost"', 'minimise = "cost"\nmaximise = "stiffness"', "sizing", "exactly one of"),
    "misspelt goal": ('minimise = "cost"', 'minimise = "costs"', "sizing.minimise", 'did you mean "cost"'),
    "another spelling": ('minimise = "cost"', 'minimize = "cost"', "sizing.minimize", 'did you mean "minimise"'),
    "dearest": ('minimise = "cost"', 'maximise = "cost"', "sizing.maximise", 'one of "separation", "stiffness"'),
    "nearest resonance": ('minimise = "cost"', 'minimise = "separation"', "sizing.minimise", "one of"),
    "worst of all": ('minimise = "cost"', 'maximise = "worst-response"', "sizing.maximise", "one of"),
    "mass of no absorber": ('minimise = "cost"', 'minimise = "absorber-mass"', "sizing.minimise", "as stated the mass"),
    "one to trade": ('["cost", "worst-response"]', '["cost"]', "sizing.trade", "two or three different objectives"),
    "trade of one with itself": ('"worst-response"]', '"cost"]', "sizing.trade", "two or three different objectives"),
    "misspelt trade": ('"worst-response"]', '"worst_response"]', "sizing.trade[2]", 'did you mean "worst-response"'),
    "map of one": (', "loss factor of feet"]', "]", "sizing.map", "the names of two unknowns"),
    "map misspelt": ('"loss factor of feet"]', '"los factor of feet"]', "sizing.map", 'mean "loss factor of feet"'),
    "no starts": ("starts = 3", "starts = 0", "sizing.starts", "1 or more"),
    "starts in words": ("starts = 3", 'starts = "three"', "sizing.starts", "a whole number"),
    "starts by halves": ("starts = 3", "starts = 2.5", "sizing.starts", "a whole number"),
    "no front": ("starts = 3", "front_points = -1", "sizing.front_points", "1 or more"),
    # Parts made to order.
    "made for nobody": ('[[sizing.made]]\ngroup = "feet"', '[[sizing.made]]\ngroup = "fet"', "made[1].group",
                        'did you mean "feet"'),
    "made twice": (MADE, '[[sizing.made]]\ngroup = "feet"\ndynamic_to_static = 1.0\n' + MADE, "made[2].group",
                   r"one [[sizing.made]] table for each group"),
    "no ratio": ("dynamic_to_static = 1.2\n", "", "made[1].dynamic_to_static", "which has no default"),
    "ratio of zero": ("static = 1.2", "static = 0", "made[1].dynamic_to_static", "above zero"),
    "stiffness both ways": ("static = 1.2", 'static = 1.2\nstiffness = "9 N/mm"', "made[1].stiffness", "once"),
    "damping both ways": ("static = 1.2", "static = 1.2\nloss_factor = 0.1", "made[1].loss_factor", "it is an unknown"),
    "negative price": ("cost = 8", "cost = -8", "made[1].cost", "zero or more"),
    "misspelt price": ("cost = 8", "costs = 8", "made[1].costs", "one of the keys"),
    # Against the rest of the study.
    "more ballast than allowed": ('lower = "0 kg"', 'lower = "20 kg"', "unknown[3].lower", "limit on added mass"),
    "no prices": ("cost_per_stiffness = 0.01\ncost_per_loss_factor = 30\n", "", "sizing.minimise", "costs the same"),
    "sideways on one axis": (*more('[[sizing.unknown]]\nkind = "stiffness"\ngroup = "feet"\naxis = "lateral"\n'
                                   'lower = "2 N/mm"\nupper = "9 N/mm"'), "unknown[4]", "nothing here changes with it"),
    "height of the feet": (*more('[[sizing.unknown]]\nkind = "position"\nstations = ["feet"]\naxis = "z"\n'
                                 'lower = "0.1 m"\nupper = "1 m"'), "unknown[4]", "nothing here changes with it"),
    "limit of zero": ('limit = "15 N"', 'limit = "0 N"', "allowable[1].limit", "above zero"),
    "limit in metres": ('limit = "15 N"', 'limit = "15 mm"', "allowable[1].limit", '"mm" is a length'),
}  # fmt: skip
SOLVERS = ("scip", "ipopt", "slsqp", "cvxpy", "clarabel", "traceback", "nan", "none", "pydantic", "numpy")


@pytest.mark.parametrize("name", CASES)
def test_a_broken_table_is_refused_in_the_users_words(tmp_path: Path, name: str) -> None:
    old, new, key, words = CASES[name]
    text = STUDY
    if name == "more ballast than allowed":
        text = text.replace("[ballast]", '[[allowable]]\nkind = "added-mass"\nlimit = "10 kg"\n[ballast]')
    if name == "no prices":
        text = text.replace("cost_per_kg = 1.0", "cost_per_kg = 0.0")
    assert text.count(old) >= 1
    path = tmp_path / "study.toml"
    path.write_text(text.replace(old, new, 1), encoding="utf-8")
    with pytest.raises(BriefError) as caught:
        size_study(load_study(path), drawings=False)
    told = [fault for fault in caught.value.faults if words in f"{fault.expected} {fault}"]
    assert told, str(caught.value)
    fault = told[0]
    assert str(fault.file).endswith("study.toml") and fault.line is not None
    assert key in str(fault)
    said = fault.expected.lower()
    assert not any(word in said.split() for word in SOLVERS)


def test_the_study_itself_is_sound(tmp_path: Path) -> None:
    path = tmp_path / "study.toml"
    path.write_text(STUDY, encoding="utf-8")
    result = size_study(load_study(path), drawings=False)
    assert result.answer is not None and result.conflict is None


CONTRADICTING = {
    "one alone": ('limit = "15 N"', 'limit = "0.001 N"', ["transmitted force"], "This limit alone"),
    "force against sag": (
        'limit = "8 mm"',
        'limit = "2.3 mm"',
        ["transmitted force", "sag"],
        "contradict each other",
    ),
}


@pytest.mark.parametrize("name", CONTRADICTING)
def test_limits_that_contradict_each_other_are_named(tmp_path: Path, name: str) -> None:
    """15 N of 40 N from 15 Hz on: T = .375 wants k <= m w^2 T/(1 + T) = .2727 m w^2 undamped, a static sag of
    1.2 g/(.2727 w^2) = 4.86 mm at the least, so 2.3 mm contradicts it; .001 N no stiffness within the bounds keeps.
    """
    from detune.report.sizing_page import sizing_summary

    old, new, limits, words = CONTRADICTING[name]
    path = tmp_path / "study.toml"
    more_limits = '[[allowable]]\nkind = "displacement"\nat = "bearing"\ndirection = "z"\nmeasure = "peak"\n'
    more_limits += 'limit = "1 m"\n'
    path.write_text(STUDY.replace(old, new).replace("[ballast]", more_limits + "[ballast]"), encoding="utf-8")
    result = size_study(load_study(path), drawings=False)
    assert result.answer is None and result.exit_code == 1 and result.worth.startswith("global")
    assert result.conflict is not None and result.conflict.least
    assert len(result.conflict.limits) == len(limits)
    assert all(any(limit in each for each in result.conflict.limits) for limit in limits)
    summary = sizing_summary(result)
    assert words in summary and "(proven)" in summary and "displacement" not in summary


def test_an_unfinished_search_is_not_told_as_a_proof(tmp_path: Path) -> None:
    """Without branches and without a proof nothing is claimed: exit code 3, and no "(proven)"."""
    from dataclasses import replace

    from detune.report.sizing_page import sizing_summary

    path = tmp_path / "study.toml"
    path.write_text(STUDY.replace('limit = "15 N"', 'limit = "0.001 N"'), encoding="utf-8")
    result = size_study(load_study(path), drawings=False)
    assert result.exact is not None and result.exact.proven and result.exit_code == 1
    cut = replace(result, exact=replace(result.exact, proven=False), conflict=None)
    assert cut.exit_code == 3
    assert "(proven)" not in sizing_summary(cut) and "before it was proven" in sizing_summary(cut)
