"""More worked examples of the books solved backwards by `[sizing]`: CHECKS W1 to W3, W11 to W13, W20 and W21.

Each study states the book's response as its limit, and the book's stiffness, damping or mass has to come out. The
examples that are solved backwards in `test_published_sizing.py` are not repeated here.
"""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import pytest

from study import sizing_briefs as one

UNDAMPED = "viscous = '0 N s/m'"
VISCOUS = "[[sizing.unknown]]\nkind = 'viscous'\ngroup = 'feet'\nlower = '1 N s/m'\nupper = '1e6 N s/m'"
POUND_FORCE, INCH = 4.4482216152605, 0.0254
MOTION = """
[[forcing]]
kind = "base-motion"
name = "road"
direction = "z"
frequency = "{hertz!r} Hz"
displacement = "{amplitude!r} m"
"""
PEAK = """
[[allowable]]
kind = "{kind}"
{at}
direction = "z"
measure = "peak"
limit = "{limit}"
"""


def peak(kind: str, limit: str) -> str:
    """A limit on the peak of one response of the one mass."""
    at = 'through = "ground"' if kind == "transmitted-force" else 'at = "top"'
    return PEAK.format(kind=kind, at=at, limit=limit)


def value(branch: Any, kind: str) -> float:
    """The response of one kind that the assessor finds."""
    return float(next(row.value for row in branch.assessment.margins if row.kind == kind))


def branch(result: Any, name: str) -> Any:
    """The branch whose name begins with a word, which has to meet the brief."""
    found = next(each for each in result.branches if each.name.startswith(name))
    assert found.assessment.meets and result.worth.startswith("global")
    return found


def on_a_road(folder: Path, hertz: float, limit: float, goal: str, **more: Any) -> Any:
    text = one.one_axis(
        more=one.DISPLACEMENT.format(limit=repr(limit)), goal=goal, mass=1200.0, frequency="'1 Hz'", **more
    )
    return one.sized(folder, one.forced(text, MOTION.format(hertz=hertz, amplitude=0.05)))


def test_w1_damping_of_a_car_from_its_motion_at_20_km_h(tmp_path):
    """W1, Rao 5e Example 3.6: 1200 kg, 400 kN/m, waves of 6 m and .05 m, X/Y = 1.100963 (X = .0550 m): z = .5."""
    hertz = 20.0 / 3.6 / 6.0
    result = on_a_road(
        tmp_path, hertz, 0.05 * 1.100963, "minimise = 'damping'", softest=4e5, stiffest=4e5, unknowns=VISCOUS
    )
    found = branch(result, "above")
    assert found.values[1] / (2.0 * math.sqrt(1200.0 * 4e5)) == pytest.approx(0.5, rel=2e-4)
    assert value(found, "displacement") == pytest.approx(0.055048, rel=1e-5)


def test_w1_stiffness_of_the_car_from_its_motion_at_100_km_h(tmp_path):
    """W1: at 100 km/h X/Y = .849320 with the damping of z = .5: k = 400 kN/m."""
    damping = f"viscous = '{2.0 * 0.5 * math.sqrt(1200.0 * 4e5)!r} N s/m'"
    result = on_a_road(
        tmp_path, 100.0 / 3.6 / 6.0, 0.05 * 0.849320, "maximise = 'stiffness'", softest=1e4, stiffest=2e6, made=damping
    )  # fmt: skip
    assert branch(result, "below").values[0] == pytest.approx(4e5, rel=1e-5)


def test_w2_stiffness_of_an_unbalanced_machine_from_its_transmitted_force(tmp_path):
    """W2, Thomson Example 3.6-1: 100 kg, 350 N at 3000 rev/min, z = .2: 47.90 N belong to 700 kN/m (book .0379 mm,
    47.89 N).
    """
    damping = 2.0 * 0.2 * math.sqrt(100.0 * 7e5)
    text = one.one_axis(
        more=peak("transmitted-force", "47.90 N") + peak("displacement", "0.0381 mm"), goal="maximise = 'stiffness'",
        mass=100.0, force=350.0, frequency="'3000 rpm'", softest=1e4, stiffest=1e8,
        made=f"viscous = '{damping!r} N s/m'",
    )  # fmt: skip
    found = branch(one.sized(tmp_path, text), "below")
    assert found.values[0] == pytest.approx(7e5, rel=5e-4)
    assert value(found, "displacement") == pytest.approx(3.792e-5, rel=5e-4)
    (mode,) = found.assessment.modes
    assert mode.frequency == pytest.approx(13.316, rel=5e-4)


@pytest.mark.parametrize(
    ("limit", "tolerance"),
    [
        (peak("displacement", "0.022877 m"), 1e-4),
        (peak("transmitted-force", "707.62 N"), 1e-4),
        (peak("velocity", "0.29740 m/s"), 1e-4),
        (one.TRANSMISSIBILITY.format(limit=1.57249), 1e-4),
    ],
)
def test_w3_stiffness_from_each_of_four_outputs(tmp_path, limit, tolerance):
    """W3: 70 kg, 450 N at 13 rad/s, z = .2 (of 30 kN/m): .022877 m, 707.62 N, .29740 m/s or T = 1.57249 give 30 kN/m.

    The natural frequency lies above the excitation, so it is the softest mount of that branch.
    """
    damping = f"viscous = '{2.0 * 0.2 * math.sqrt(70.0 * 3e4)!r} N s/m'"
    text = one.one_axis(
        more=limit, goal="minimise = 'stiffness'", mass=70.0, force=450.0, frequency="'13 rad/s'", softest=1.2e4,
        stiffest=1e6, made=damping,
    )  # fmt: skip
    assert branch(one.sized(tmp_path, text), "above").values[0] == pytest.approx(3e4, rel=tolerance)


@pytest.mark.parametrize(
    ("limit", "ratio"),
    [(peak("displacement", "0.022877 m"), 0.2), (peak("transmitted-force", "707.62 N"), 0.2)],
)
def test_w3_damping_from_the_same_outputs(tmp_path, limit, ratio):
    """W3 with the stiffness known: the least damping is z = .2."""
    text = one.one_axis(
        more=limit, goal="minimise = 'damping'", mass=70.0, force=450.0, frequency="'13 rad/s'", softest=3e4,
        stiffest=3e4, unknowns=VISCOUS,
    )  # fmt: skip
    found = branch(one.sized(tmp_path, text), "above")
    assert found.values[1] / (2.0 * math.sqrt(70.0 * 3e4)) == pytest.approx(ratio, rel=3e-4)


@pytest.mark.parametrize(
    ("hertz", "millimetres", "side", "goal", "tolerance"),
    [
        (1.0, 1.5510, "above", "minimise", 1e-4),
        (5.4, 36.878, "above", "minimise", 1e-5),
        # 9 N / .018462 mm is 487 kN/m, of which the stiffness is a small difference: 1e-4 of it is 49 N/m.
        (50.0, 0.018462, "below", "maximise", 49.0 / 6000.0),
    ],
)
def test_w11_stiffness_from_undamped_amplitudes(tmp_path, hertz, millimetres, side, goal, tolerance):
    """W11, McLean & Nelson Ex. 19-24 (5.4 Hz as corrected): 5 kg, 9 N: each amplitude gives 6000 N/m back."""
    text = one.one_axis(
        more=one.DISPLACEMENT.format(limit=repr(1e-3 * millimetres)), goal=f"{goal} = 'stiffness'", mass=5.0, force=9.0,
        frequency=f"'{hertz} Hz'", softest=10.0, stiffest=1e7, made=UNDAMPED,
    )  # fmt: skip
    found = branch(one.sized(tmp_path, text), side)
    assert found.values[0] == pytest.approx(6000.0, rel=tolerance)


def imperial(
    mass: float, force: float, omega: float, limit: str, goal: str, bounds: tuple[float, float], **more: Any
):
    """A study in pounds and inches; the book's g (32.2 ft/s2) is put into the mass."""
    pounds = mass * 386.0886 / 386.4
    text = one.one_axis(
        more=limit, goal=goal, mass=1.0, frequency=f"'{omega!r} rad/s'", softest=1.0, stiffest=1.0, **more
    )
    text = text.replace('"1.0 kg"', f'"{pounds!r} lb"').replace('"1.0 N"', f'"{force} lbf"')
    for key, bound in zip(("lower", "upper"), bounds, strict=True):
        text = text.replace(f'{key} = "1.0 N/m"', f'{key} = "{bound} lbf/in"')
    return text


W12_DAMPING = math.sqrt(50.0 * 386.4 / 20.0 / 30.02) * 20.0 / 386.4  # lbf s/in: c = a W/g with a^2 = b/30.02


def test_w12_stiffness_from_the_forced_amplitude(tmp_path):
    """W12, Bevan ch. 15 Ex. 6: 20 lb, 30 lb at 50 rad/s, damping a^2 = b/30.02: .37154 in (book .372) is 50 lb/in."""
    text = imperial(
        20.0, 30.0, 50.0, peak("displacement", "0.37154 in"), "maximise = 'stiffness'", (1.0, 1000.0),
        made=f"viscous = '{W12_DAMPING!r} lbf s/in'",
    )  # fmt: skip
    found = branch(one.sized(tmp_path, text), "below")
    assert found.values[0] / (POUND_FORCE / INCH) == pytest.approx(50.0, rel=2e-4)


def test_w12_damping_from_the_amplitude_at_resonance(tmp_path):
    """W12: 3.2874 in at resonance (book 3.29) on 50 lb/in is the damping a^2 = b/30.02."""
    omega = math.sqrt(50.0 * 386.4 / 20.0)
    text = imperial(
        20.0,
        30.0,
        omega,
        peak("displacement", "3.2874 in"),
        "minimise = 'damping'",
        (50.0, 50.0),
        unknowns=VISCOUS,
    )
    answer = one.sized(tmp_path, text).answer
    assert answer is not None
    assert answer.values[1] / (POUND_FORCE / INCH) == pytest.approx(W12_DAMPING, rel=2e-5)


@pytest.mark.parametrize(
    "limit", [peak("displacement", f"{0.019377 * 12.0!r} in"), peak("transmitted-force", "67.85 lbf")]
)
def test_w13_damping_of_a_press(tmp_path, limit):
    """W13, Meriam & Kraige Sample 8/6: 100 lb, 200 lb/in, 50 lb at 30 rad/s: .019377 ft or 67.85 lb is 85 lb s/ft."""
    text = imperial(100.0, 50.0, 30.0, limit, "minimise = 'damping'", (200.0, 200.0), unknowns=VISCOUS)
    answer = one.sized(tmp_path, text).answer
    assert answer is not None
    assert answer.values[1] / (POUND_FORCE / (12.0 * INCH)) == pytest.approx(85.0, rel=3e-4)
    assert math.sqrt(200.0 * 386.4 / 100.0) == pytest.approx(27.799, rel=2e-5)


TWO_BODIES = """
title = "Quarter of a car"
[[body]]
name = "body"
free = ["z"]
mass = "317.5 kg"
centre = ["0 m", "0 m", "0 m"]
[[body]]
name = "wheel"
free = ["z"]
mass = "45.4 kg"
centre = ["0 m", "0 m", "-0.5 m"]
[[point]]
name = "driver"
on = "body"
position = ["0 m", "0 m", "0 m"]
[[station]]
name = "spring"
group = "spring"
on = "body"
to = "wheel"
position = ["0 m", "0 m", "-0.3 m"]
[[station]]
name = "tyre"
group = "tyre"
on = "wheel"
position = ["0 m", "0 m", "-0.8 m"]
[floor]
kind = "rigid"
[[condition]]
name = "driving"
[[forcing]]
kind = "harmonic-force"
name = "road"
on = "body"
position = ["0 m", "0 m", "0 m"]
frequency = ["{low!r} rad/s", "{high!r} rad/s"]
force = ["0 N", "0 N", "1 N"]
[[allowable]]
kind = "separation"
limit = "10 %"
[[allowable]]
kind = "displacement"
at = "driver"
direction = "z"
measure = "peak"
limit = "1 m"
[sizing]
minimise = "cost"
starts = 2
specification = false
[[sizing.unknown]]
kind = "stiffness"
group = "spring"
axis = "axial"
lower = "5 N/mm"
upper = "60 N/mm"
[[sizing.unknown]]
kind = "stiffness"
group = "tyre"
axis = "axial"
lower = "60 N/mm"
upper = "400 N/mm"
[[sizing.made]]
group = "spring"
dynamic_to_static = 1.0
viscous = "0 N s/m"
pulls = true
[[sizing.made]]
group = "tyre"
dynamic_to_static = 1.0
viscous = "0 N s/m"
pulls = true
cost_per_stiffness = 1.0
"""


def test_w20_springs_of_a_quarter_car_from_its_two_frequencies(tmp_path):
    """W20, Barton & Fieldhouse sec. 3.13: modes at 7.8786 and 68.7086 rad/s belong to 22 and 192 kN/m.

    Kept clear by 10 % is the range from 7.8786/.9 to 68.7086/1.1 rad/s; the softest tyre that leaves room for a spring
    has both modes at the edges.
    """
    text = TWO_BODIES.format(low=7.8786 / 0.9, high=68.7086 / 1.1)
    best = one.sized(tmp_path, text).answer
    assert best is not None
    assert best.values == pytest.approx([22e3, 192e3], rel=1e-3)
    assert 45.4 * 22e3 / (317.5 * 192e3) < 0.1  # well apart: the modes are those of body and wheel
    low, high = sorted(2.0 * math.pi * mode.frequency for mode in best.assessment.modes)
    assert (low, high) == pytest.approx((7.8786, 68.7086), rel=1e-4)


CAR = """
title = "Bounce and pitch of a car"
[[body]]
name = "car"
free = ["z", "ry"]
mass = "1000 kg"
centre = ["0 m", "0 m", "0 m"]
inertia = {{ xx = "500 kg m^2", yy = "810 kg m^2", zz = "900 kg m^2" }}
[[point]]
name = "driver"
position = ["0 m", "0 m", "0 m"]
[[station]]
name = "front"
group = "front"
position = ["1 m", "0 m", "0 m"]
[[station]]
name = "rear"
group = "rear"
position = ["-1.5 m", "0 m", "0 m"]
[floor]
kind = "rigid"
[[condition]]
name = "driving"
[[forcing]]
kind = "harmonic-force"
name = "road"
position = ["0 m", "0 m", "0 m"]
frequency = ["{low!r} rad/s", "{high!r} rad/s"]
force = ["0 N", "0 N", "1 N"]
[[allowable]]
kind = "separation"
limit = "10 %"
[[allowable]]
kind = "displacement"
at = "driver"
direction = "z"
measure = "peak"
limit = "1 m"
[sizing]
minimise = "cost"
starts = 4
specification = false
[[sizing.unknown]]
kind = "stiffness"
group = "front"
axis = "axial"
lower = "5 N/mm"
upper = "30 N/mm"
[[sizing.unknown]]
kind = "stiffness"
group = "rear"
axis = "axial"
lower = "15 N/mm"
upper = "60 N/mm"
[[sizing.made]]
group = "front"
dynamic_to_static = 1.0
lateral_ratio = 1.0
viscous = "0 N s/m"
pulls = true
[[sizing.made]]
group = "rear"
dynamic_to_static = 1.0
lateral_ratio = 1.0
viscous = "0 N s/m"
pulls = true
cost_per_stiffness = 1.0
"""


def test_w21_springs_of_a_car_from_bounce_and_pitch(tmp_path):
    """W21, Rao 5e Example 5.7: 1000 kg, radius .9 m, 1.0 and 1.5 m: 5.85929 and 9.43409 rad/s are 18 and 22 kN/m.

    With both modes at their edges k1 k2 and the sum of squares are fixed, so that of two crossings one is the book's.
    """
    text = CAR.format(low=5.85929 / 0.9, high=9.43409 / 1.1)
    best = one.sized(tmp_path, text).answer
    assert best is not None
    assert best.values == pytest.approx([18e3, 22e3], rel=1e-3)
