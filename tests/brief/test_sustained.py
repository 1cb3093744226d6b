"""A state with a sustained acceleration: read from a study, and refused where it is not carried through."""

from __future__ import annotations

from pathlib import Path

import pytest

from brief.scale_study import scale
from detune.brief.read import scan_brief
from detune.brief.state import apparent_gravity

STATE = '\n[[state]]\nname = "braking"\nsustained_acceleration = ["-0.4 g", "0 g", "0 g"]\n'


def study(more: str, state: str = STATE) -> str:
    return scale().replace("shafts = {}", 'shafts = {}\nstate = "braking"') + state + more


def test_it_is_read_in_g() -> None:
    # 0.4 x 9.80665 m/s^2; what is on the floor is pulled the other way.
    assert apparent_gravity(None) == (0.0, 0.0, -9.80665)


def test_a_state_with_it_alone_is_a_state(tmp_path: Path) -> None:
    (tmp_path / "study.toml").write_text(study(""), encoding="utf-8")
    reading = scan_brief(tmp_path / "study.toml")
    assert reading.faults == () and reading.brief is not None
    assert apparent_gravity(reading.brief.states[0]) == pytest.approx((3.92266, 0.0, -9.80665), rel=1e-12)


@pytest.mark.parametrize(
    ("more", "state", "expected", "line"),
    [
        (
            '\n[scatter]\njudge = "interval"\ncentre = ["5 mm", "5 mm", "5 mm"]\n',
            STATE,
            "none under scatter of mass or centre",
            "sustained_acceleration",
        ),
        ("", STATE.replace("-0.4 g", "0 g"), "a state that changes something", "[[state]]"),
        ("", STATE.replace("-0.4 g", "-0.4 mm"), "acceleration", "sustained_acceleration"),
    ],
)
def test_bad_states(more: str, state: str, expected: str, line: str, tmp_path: Path) -> None:
    text = study(more, state)
    (tmp_path / "study.toml").write_text(text, encoding="utf-8")
    faults = scan_brief(tmp_path / "study.toml").faults
    fault = next(fault for fault in faults if expected in fault.expected)
    assert text.splitlines()[(fault.line or 0) - 1].startswith((line, "name"))
