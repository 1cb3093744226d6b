"""Study files of one mass with one absorber, written from a few numbers."""

from __future__ import annotations

import math
from pathlib import Path

from detune.study.load import load_study
from detune.study.size import SizingResult, size_study

STUDY = """
title = "One mass with an absorber"
[[body]]
name = "machine"
free = ["z"]
mass = "{mass} kg"
centre = ["0 m", "0 m", "0 m"]
[[body]]
name = "absorber"
free = ["z"]
mass = "{absorber} kg"
centre = ["0 m", "0 m", "0.5 m"]
[[point]]
name = "top"
on = "machine"
position = ["0 m", "0 m", "0 m"]
[[station]]
name = "foot"
group = "feet"
on = "machine"
position = ["0 m", "0 m", "0 m"]
[[station]]
name = "arm"
group = "spring"
on = "absorber"
to = "machine"
position = ["0 m", "0 m", "0.3 m"]
[floor]
kind = "rigid"
[[condition]]
name = "running"
{forcing}
{limits}
[sizing]
{goal}
starts = 2
specification = false
{unknowns}
[[sizing.made]]
group = "feet"
dynamic_to_static = 1.0
stiffness = "{stiffness} N/m"
viscous = "{damping} N s/m"
pulls = true
[[sizing.made]]
group = "spring"
dynamic_to_static = 1.0
pulls = true
{spring}
"""

FORCE = """
[[forcing]]
kind = "harmonic-force"
name = "drive"
on = "machine"
position = ["0 m", "0 m", "0 m"]
frequency = {frequency}
force = ["0 N", "0 N", "{force} N"]
"""

TUNED = """
[[sizing.unknown]]
kind = "absorber-tuning"
group = "spring"
body = "absorber"
lower = "{low} Hz"
upper = "{high} Hz"
"""

DAMPED = """
[[sizing.unknown]]
kind = "absorber-damping"
group = "spring"
body = "absorber"
lower = 0.01
upper = 0.6
"""

MASS = """
[[sizing.unknown]]
kind = "absorber-mass"
body = "absorber"
lower = "{low} kg"
upper = "{high} kg"
"""


def limit(kind: str, value: str, more: str = 'at = "top"\ndirection = "z"\nmeasure = "peak"') -> str:
    """One allowable."""
    return f'[[allowable]]\nkind = "{kind}"\n{more}\nlimit = "{value}"\n'


def tuned_absorber(
    forcing: str, limits: str, mu: float = 0.05, hertz: float = 10.0, mass: float = 100.0, z1: float = 0.0,
    goal: str = 'minimise = "worst-response"',
) -> str:  # fmt: skip
    """A study in which tuning and damping of an absorber of mass ratio `mu` are sought."""
    omega = 2.0 * math.pi * hertz
    return STUDY.format(
        mass=mass, absorber=mu * mass, forcing=forcing, limits=limits, goal=goal,
        unknowns=TUNED.format(low=0.7 * hertz, high=1.3 * hertz) + DAMPED,
        stiffness=repr(mass * omega**2), damping=repr(2.0 * z1 * mass * omega), spring="",
    )  # fmt: skip


def sized(folder: Path, text: str, drawings: bool = False) -> SizingResult:
    """The result of sizing a study given as text."""
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    return size_study(load_study(path), drawings)
