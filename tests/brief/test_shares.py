"""Shares that people state in per cent: what is read as it stands, and what is refused for want of the sign.

Where a number is refused in a study file, with its place and line, stands in `bad_studies.toml`.
"""

from typing import Any

import pytest
from pydantic import TypeAdapter, ValidationError

from detune.brief.allowable.separation import Separation
from detune.brief.allowable.stability import Stability
from detune.brief.allowable.transmissibility import Transmissibility
from detune.brief.floor import Floor
from detune.brief.scatter import Scatter
from detune.brief.shares import LossFactor, Share
from detune.brief.sizing import MadePart, SizingUnknown
from detune.brief.state import State
from detune.ground.units import is_bare_number

FILE = {"from_file": True}


@pytest.mark.parametrize(
    ("written", "ratio"),
    [
        ("20 %", 0.2),
        ("20%", 0.2),
        ("0.2", 0.2),
        (0.2, 0.2),
        ("150 %", 1.5),
        ("2000 %", 20.0),
        (0, 0.0),
        ("100 %", 1.0),
    ],
)
def test_a_share_is_read(written: object, ratio: float) -> None:
    assert TypeAdapter(Share).validate_python(written, context=FILE) == ratio


@pytest.mark.parametrize("written", ["20", 20, 20.5, "1", 1, "1.0", " 20 ", "2e1", "-20", "\u221220"])
def test_a_number_that_was_meant_in_per_cent_is_refused(written: object) -> None:
    with pytest.raises(ValidationError, match="without a per cent sign"):
        TypeAdapter(Share).validate_python(written, context=FILE)


def test_a_loss_factor_is_a_number_up_to_what_materials_reach() -> None:
    """1.5 is the highest loss factor a parts list may state; 2 or more can only be per cent."""
    read = TypeAdapter(LossFactor).validate_python
    assert [read(each, context=FILE) for each in ("1.5", 0.05, "5 %", "250 %")] == [1.5, 0.05, 0.05, 2.5]
    for written in ("5", 5, "2"):
        with pytest.raises(ValidationError, match="a loss factor such as"):
            read(written, context=FILE)


def test_from_python_a_float_is_the_ratio_itself() -> None:
    assert Separation(limit=1.5).limit == 1.5
    with pytest.raises(ValidationError, match="20 without a per cent sign is 2000 %"):
        Separation(limit="20")  # type: ignore[arg-type]


REFUSED: list[tuple[type, dict[str, Any]]] = [
    (State, {"name": "crept", "creep": "20"}),
    (Scatter, {"judge": "interval", "mass": "5"}),
    (Scatter, {"judge": "interval", "stiffness": {"lot": ["-10", "20 %"]}}),
    (
        Floor,
        {"kind": "stiffness-matrix", "stations": ["A"], "stiffness_matrix": [["1 kN/m"]], "loss_factor": "4"},
    ),
    (MadePart, {"group": "feet", "dynamic_to_static": 1.2, "loss_factor": 10}),
    (SizingUnknown, {"kind": "loss-factor", "group": "feet", "lower": "2 %", "upper": "30"}),
    (
        SizingUnknown,
        {"kind": "absorber-damping", "group": "spring", "body": "mass", "lower": 5, "upper": "30 %"},
    ),
]


@pytest.mark.parametrize(("statement", "keys"), REFUSED)
def test_every_statement_of_a_share_refuses_it(statement: Any, keys: dict[str, Any]) -> None:
    with pytest.raises(ValidationError, match="without a per cent sign"):
        statement.model_validate(keys, context=FILE)


def test_what_the_trade_states_as_a_number_stays_a_number() -> None:
    assert Transmissibility(of="force", direction="z", limit="3").limit == 3.0  # type: ignore[arg-type]
    assert Stability(limit="2").limit == 2.0  # type: ignore[arg-type]
    assert State(name="cold", stiffness_factor="1.6").stiffness_factor == 1.6  # type: ignore[arg-type]
    assert MadePart(group="feet", dynamic_to_static="1.3").dynamic_to_static == 1.3  # type: ignore[arg-type]


def test_a_bare_number_is_told_from_one_with_a_unit() -> None:
    assert all(is_bare_number(text) for text in ("20", " 0.2 ", "\u22121.5", ".5", "1e3"))
    assert not any(is_bare_number(text) for text in ("20 %", "20%", "", "20 mm", "x", "1,5"))
