"""The scatter statement: what it takes, what it refuses with which words, and what it says it assumed."""

import pytest
from pydantic import ValidationError

from detune.brief.scatter import Scatter, interval_of


def read(**keys):
    return Scatter.model_validate({"judge": "interval", **keys}, context={"from_file": True})


def test_lot_and_part_together():
    stated = read(stiffness={"lot": "15 %", "part": ["-5 %", "10 %"]})
    assert interval_of(stated.stiffness.lot) == (-0.15, 0.15)
    assert interval_of(stated.stiffness.part) == (-0.05, 0.10)


@pytest.mark.parametrize(
    ("keys", "words"),
    [
        ({"stiffness": {"lot": ["20 %", "-10 %"]}}, "lower deviation first"),
        ({"stiffness": {"lot": "120 %"}}, "within plus and minus"),
        ({"mass": "-5 %"}, "zero or more"),
        ({"mass": ["1 %", "5 %"]}, "contains the listed value"),
        ({"stifness": {"lot": "5 %"}}, "Extra inputs"),
        ({"stiffness": {}}, 'by "lot"'),
        ({"damping": {"lot": "listed"}}, "a tolerance of stiffness alone"),
        ({"samples": 100}, 'no "samples"'),
        ({"judge": "distribution"}, "lognormal"),
        ({"judge": "distribution", "distribution": "uniform", "samples": 3}, "whole number of samples"),
        ({"centre": ["-1 mm", "0 mm", "0 mm"]}, "zero or more"),
        ({"stiffness": {"lot": 0.1}}, ""),
    ],
)
def test_refusals(keys, words):
    if not words:
        assert read(**keys).stiffness.lot == (-0.1, 0.1)
        return
    with pytest.raises(ValidationError, match=words):
        read(**keys)


def test_what_is_filled_in_is_told():
    notes = " | ".join(read().assumed())
    assert (
        "listed tolerance, by lot" in notes
        and "30 % by lot" in notes
        and "mass, centre, forcing exactly" in notes
    )
    told = read(
        stiffness={"lot": "1 %"}, damping={"lot": "0 %"}, mass="1 %", forcing="1 %", centre=["0 mm"] * 3
    )
    assert told.assumed() == ()
