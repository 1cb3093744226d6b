"""Study files for sizing, written from a few numbers, and a helper that sizes them."""

from __future__ import annotations

from pathlib import Path

from detune.study.load import load_study
from detune.study.size import SizingResult, size_study

ONE_AXIS = """
title = "One mass on its mounts"
[[body]]
name = "machine"
free = ["z"]
mass = "{mass} kg"
centre = ["0 m", "0 m", "0 m"]
[[point]]
name = "top"
position = ["0 m", "0 m", "0 m"]
[[station]]
name = "A"
group = "feet"
parallel = {parts}
position = ["0 m", "0 m", "0 m"]
[floor]
kind = "rigid"
[[condition]]
name = "running"
[[forcing]]
kind = "harmonic-force"
name = "drive"
position = ["0 m", "0 m", "0 m"]
frequency = {frequency}
force = ["0 N", "0 N", "{force} N"]
{more}
[sizing]
{goal}
[[sizing.unknown]]
kind = "stiffness"
group = "feet"
axis = "axial"
lower = "{softest} N/m"
upper = "{stiffest} N/m"
{unknowns}
[[sizing.made]]
group = "feet"
dynamic_to_static = 1.0
pulls = true
{made}
"""

TRANSMISSIBILITY = """
[[allowable]]
kind = "transmissibility"
of = "force"
direction = "z"
limit = {limit}
"""

DISPLACEMENT = """
[[allowable]]
kind = "displacement"
at = "top"
direction = "z"
measure = "peak"
limit = "{limit} m"
"""


def one_axis(
    *,
    more: str,
    goal: str,
    mass: float,
    frequency: str,
    softest: float,
    stiffest: float,
    parts: int = 1,
    force: float = 1.0,
    unknowns: str = "",
    made: str = "",
) -> str:
    """The text of a one-axis study."""
    return ONE_AXIS.format(
        mass=mass, parts=parts, frequency=frequency, force=force, more=more, goal=goal, softest=softest,
        stiffest=stiffest, unknowns=unknowns, made=made,
    )  # fmt: skip


def forced(text: str, forcing: str, shafts: str = "") -> str:
    """The study with its harmonic force replaced by another forcing, and the speeds of shafts in its condition."""
    head, rest = text.split('[[forcing]]\nkind = "harmonic-force"', 1)
    table, tail = rest.split("[[", 1)
    assert "force = [" in table
    head = head.replace('name = "running"\n', f'name = "running"\n{shafts}', 1)
    return head + forcing + "[[" + tail


def sized(folder: Path, text: str, drawings: bool = False) -> SizingResult:
    """The result of sizing a study given as text; the specification is left out unless the text says otherwise."""
    if "specification" not in text:
        text = text.replace("[sizing]\n", "[sizing]\nspecification = false\n")
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    return size_study(load_study(path), drawings)
