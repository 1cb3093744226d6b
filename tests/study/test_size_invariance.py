"""What must not change the exact answer of a one-axis study, and what may only change it one way.

Units, the order of limits and a limit stated twice change nothing; a limit relaxed never makes the answer worse and
takes no feasible stiffness away. These are theorems of the problem, so no value comes from the program.
"""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from detune.sizing.made_parts import sizing_of
from detune.study.load import load_study
from detune.study.size import size_study

HEAD = """
title = "Compressor"
[[body]]
name = "compressor"
free = ["z"]
mass = "{mass!r} kg"
centre = ["0 m", "0 m", "0 m"]
[[point]]
name = "flange"
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
shafts = {{ crank = ["{low!r} Hz", "{high!r} Hz"] }}
[[condition]]
name = "start-up"
steady = false
shafts = {{ crank = ["1 Hz", "{high!r} Hz"] }}
[[forcing]]
kind = "rotating-unbalance"
name = "crank"
shaft = "crank"
position = ["0 m", "0 m", "0 m"]
axis = "x"
unbalance = "{me!r} kg m"
"""
LIMITS = [
    """[[allowable]]
kind = "transmitted-force"
conditions = ["running"]
through = "floor"
direction = "z"
measure = "peak"
limit = "{force!r} N"
""",
    """[[allowable]]
kind = "displacement"
conditions = ["start-up"]
at = "flange"
direction = "z"
measure = "peak"
limit = "{start!r} mm"
""",
    """[[allowable]]
kind = "velocity"
conditions = ["running"]
at = "flange"
direction = "z"
measure = "rms"
limit = "{speed!r} mm/s"
""",
    """[[allowable]]
kind = "sag"
at = "flange"
limit = "{sag!r} mm"
""",
    """[[allowable]]
kind = "separation"
limit = "8 %"
""",
]
TAIL = """
[ballast]
position = ["0 m", "0 m", "0 m"]
size = ["1 m", "1 m", "0.1 m"]
steps = ["0 kg"]
cost_per_kg = 0.7
[sizing]
{goal}
specification = false
[[sizing.unknown]]
kind = "stiffness"
group = "feet"
axis = "axial"
lower = "10 N/mm"
upper = "4000 N/mm"
[[sizing.unknown]]
kind = "{damping}"
group = "feet"
lower = {least}
upper = {most}
[[sizing.unknown]]
kind = "ballast"
lower = "0 kg"
upper = "60 kg"
step = "20 kg"
[[sizing.made]]
group = "feet"
dynamic_to_static = 1.15
pulls = true
cost = 4
cost_per_stiffness = 0.02
cost_per_damping = 0.004
cost_per_loss_factor = 20
"""
GOALS = ("minimise = 'cost'", "maximise = 'stiffness'", "minimise = 'damping'", "minimise = 'added-mass'")


def pieces(seed: int) -> tuple[str, list[str], str]:
    """Head, limits and tail of a study drawn from a seed; every number is one an engineer might state."""
    rng = np.random.default_rng(seed)
    mass, me = float(rng.uniform(80, 400)), float(rng.uniform(0.005, 0.04))
    low = float(rng.uniform(14, 24))
    high = low * float(rng.uniform(1.0, 1.3))
    values = {
        # Below the force itself there is only the soft side; above it a stiff side may do as well.
        "force": me
        * (2 * np.pi * low) ** 2
        * float(rng.uniform(0.2, 0.6) if seed % 2 else rng.uniform(1.5, 4.0)),
        "start": 1e3 * me / mass * float(rng.uniform(2.5, 6.0)),
        "speed": 1e3 * me / mass * 2 * np.pi * high * float(rng.uniform(0.9, 1.4)),
        "sag": float(rng.uniform(2.5, 9.0)),
    }
    viscous = bool(rng.random() < 0.5)
    tail = TAIL.format(
        goal=GOALS[seed % len(GOALS)], damping="viscous" if viscous else "loss-factor",
        least='"20 N s/m"' if viscous else 0.02, most='"4000 N s/m"' if viscous else 0.5,
    )  # fmt: skip
    head = HEAD.format(mass=mass, me=me, low=low, high=high)
    return head, [limit.format(**{k: float(v) for k, v in values.items()}) for limit in LIMITS], tail


def sized(folder: Path, head: str, limits: list[str], tail: str) -> Any:
    path = folder / "study.toml"
    path.write_text(head + "".join(limits) + tail, encoding="utf-8")
    return size_study(load_study(path), drawings=False)


def told(result: Any) -> tuple[list[str], np.ndarray, np.ndarray]:
    """Names, values and objectives of all branches."""
    names = [branch.name for branch in result.branches]
    values = np.array([branch.values for branch in result.branches])
    return names, values, np.array([branch.objective for branch in result.branches])


def same(one: Any, two: Any) -> None:
    assert sorted(told(one)[0]) == sorted(told(two)[0])
    assert told(two)[2] == pytest.approx(told(one)[2], rel=1e-8, abs=1e-9)
    # The least damping is often the lower bound, which then many a stiffness allows.
    if sizing_of(one.study.brief).goal != "damping":
        assert told(one)[0] == told(two)[0]
        assert told(two)[1] == pytest.approx(told(one)[1], rel=1e-6, abs=1e-6)


SEEDS = [*range(4), *(pytest.param(seed, marks=pytest.mark.nightly) for seed in range(4, 24))]


def test_the_drawn_studies_are_worth_their_name(tmp_path):
    """Most have a design, some have several branches, and limits are what stops them."""
    found = [sized(tmp_path, *pieces(seed)) for seed in range(4)]
    assert sum(each.answer is not None for each in found) >= 3
    assert any(len({branch.name.split(",")[0] for branch in each.branches}) > 1 for each in found)
    assert all(each.exact is not None and each.exact.statement.relaxed == () for each in found)


@pytest.mark.parametrize("seed", SEEDS)
def test_units_order_and_repetition_change_nothing(tmp_path, seed):
    head, limits, tail = pieces(seed)
    plain = sized(tmp_path, head, limits, tail)
    same(plain, sized(tmp_path, head, limits[::-1], tail))
    same(plain, sized(tmp_path, head, limits[2:] + limits[:2], tail))
    same(plain, sized(tmp_path, head, [*limits, *limits], tail))
    # Tonnes, revolutions per minute, metres and kilonewtons.
    changed = head + "".join(limits)
    changed = re.sub(r'"([\d.e-]+) kg"', lambda m: f'"{float(m[1]) / 1e3!r} t"', changed)
    changed = re.sub(r'"([\d.e-]+) Hz"', lambda m: f'"{float(m[1]) * 60.0!r} rpm"', changed)
    changed = re.sub(r'"([\d.e-]+) mm"', lambda m: f'"{float(m[1]) / 1e3!r} m"', changed)
    changed = re.sub(r'"([\d.e-]+) N"', lambda m: f'"{float(m[1]) / 1e3!r} kN"', changed)
    changed = re.sub(r'"([\d.e-]+) kg m"', lambda m: f'"{float(m[1]) * 1e6!r} g mm"', changed)
    other = (
        tail.replace('"10 N/mm"', '"0.01 kN/mm"')
        .replace('"4000 N/mm"', '"4e6 N/m"')
        .replace('"20 kg"', '"2e4 g"')
    )
    assert "kg" not in changed and "Hz" not in changed and other != tail
    same(plain, sized(tmp_path, changed, [], other))


@pytest.mark.parametrize("seed", SEEDS)
def test_a_limit_relaxed_never_makes_the_answer_worse(tmp_path, seed):
    head, limits, tail = pieces(seed)
    plain = sized(tmp_path, head, limits, tail)
    sense = -1.0 if "maximise" in tail else 1.0
    for number, limit in enumerate(limits):
        loose = re.sub(r'limit = "([\d.e-]+) ([^"]+)"', lambda m: _relaxed(m), limit)
        assert loose != limit
        other = sized(tmp_path, head, [*limits[:number], loose, *limits[number + 1 :]], tail)
        if not plain.branches:
            continue
        assert other.branches
        assert sense * other.branches[0].objective <= sense * plain.branches[0].objective * (
            1.0 + sense * 1e-9
        )
        for branch in plain.exact.branches:
            held = [
                each for each in other.exact.branches
                if each.stiffness[0] <= branch.stiffness[0] * (1 + 1e-7)
                and each.stiffness[1] >= branch.stiffness[1] * (1 - 1e-7)
            ]  # fmt: skip
            assert held, (number, branch.name)


def _relaxed(found: re.Match[str]) -> str:
    """A separation of less, anything else of a tenth more."""
    value, unit = float(found[1]), found[2]
    return f'limit = "{value * (0.5 if unit == "%" else 1.1)!r} {unit}"'
