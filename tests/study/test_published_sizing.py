"""Designs of the books found backwards by sizing a study file: CHECKS sections 2 and 3, the source beside each."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any

import pytest

from study import absorber_briefs as two
from study import sizing_briefs as one

UNDAMPED = "viscous = '0 N s/m'"
VISCOUS = "[[sizing.unknown]]\nkind = 'viscous'\ngroup = 'feet'\nlower = '1 N s/m'\nupper = '1e6 N s/m'"


def soft(result: Any) -> Any:
    """The branch with the natural frequency below the excitation."""
    return next(branch for branch in result.branches if branch.name.startswith("below"))


def transmissibility_design(folder: Path, mass: str, speed: str, limit: float, parts: int = 1) -> Any:
    text = one.one_axis(
        more=one.TRANSMISSIBILITY.format(limit=limit), goal="maximise = 'stiffness'", mass=1.0, parts=parts,
        frequency=f"'{speed}'", softest=1.0, stiffest=1e6, made=UNDAMPED,
    ).replace('"1.0 kg"', f'"{mass}"')  # fmt: skip
    return soft(one.sized(folder, text))


def test_w4_refrigerator_on_three_springs(tmp_path):
    """W4, Thomson: 30 kg at 580 rev/min, 10 % transmitted, three springs: published 3.35e3 N/m each (2e-3)."""
    branch = transmissibility_design(tmp_path, "30 kg", "580 rpm", 0.1, 3)
    assert branch.values[0] == pytest.approx(3.35e3, rel=2e-3)
    assert branch.values[0] == pytest.approx(3353.7, rel=2e-5)


def test_w5_four_springs(tmp_path):
    """W5, Rao 5e Example 9.4: 40 kg, 1000 rev/min, 10 %, four springs: 9969.3 N/m each (Rao 9969.6)."""
    assert transmissibility_design(tmp_path, "40 kg", "1000 rpm", 0.1, 4).values[0] == pytest.approx(
        9969.3, rel=1e-5
    )


def test_w5_five_per_cent_and_its_amplitude(tmp_path):
    """W5, Rao 5e Example 9.5: 50 kg, 1000 cos 120 t N, 5 %: k = 34285.7 N/m, amplitude 1.45833 mm (1e-4)."""
    hertz = 120.0 / (2.0 * math.pi)
    text = one.one_axis(
        more=one.TRANSMISSIBILITY.format(limit=0.05) + one.DISPLACEMENT.format(limit=0.0016),
        goal="maximise = 'stiffness'", mass=50.0, force=1000.0, frequency=f"'{hertz} Hz'", softest=100.0, stiffest=6e5,
        made=UNDAMPED,
    )  # fmt: skip
    branch = soft(one.sized(tmp_path, text))
    assert branch.values[0] == pytest.approx(34285.7, rel=1e-5)
    amplitude = next(row.value for row in branch.assessment.margins if row.kind == "displacement")
    assert amplitude == pytest.approx(1.45833e-3, rel=1e-4)


def test_w5_damping_for_a_resonant_transmissibility_of_four(tmp_path):
    """W5, Rao 5e Example 9.8: T = 4 at r = 1 needs z = .129099, whatever mass and stiffness (here 20 kg, 8 Hz)."""
    k = 20.0 * (2.0 * math.pi * 8.0) ** 2
    text = one.one_axis(
        more=one.TRANSMISSIBILITY.format(limit=4.0), goal="minimise = 'damping'", mass=20.0, frequency="'8 Hz'",
        softest=k, stiffest=k, unknowns=VISCOUS,
    )  # fmt: skip
    best = one.sized(tmp_path, text).answer
    assert best is not None
    assert best.values[1] / (2.0 * math.sqrt(20.0 * k)) == pytest.approx(0.129099, rel=1e-5)


def least_absorber(
    folder: Path, mass: float, stiffness: float, force: float, omega: float, stroke: str, most: float
) -> Any:
    """The lightest undamped absorber, tuned to a line, whose spring moves by no more than the stroke."""
    hertz = omega / (2.0 * math.pi)
    forcing = two.FORCE.format(frequency=f'"{hertz!r} Hz"', force=force)
    more = 'part = "dynamic"\ndirection = "axial"\nstations = ["arm"]'
    text = two.STUDY.format(
        mass=mass, absorber=0.1 * most, forcing=forcing, limits=two.limit("mount-deflection", stroke, more),
        goal='minimise = "absorber-mass"',
        unknowns=two.TUNED.format(low=repr(hertz), high=repr(hertz)) + two.MASS.format(low=1e-3 * most, high=most),
        stiffness=stiffness, damping=0.0, spring='viscous = "0 N s/m"',
    )  # fmt: skip
    best = two.sized(folder, text).answer
    assert best is not None
    assert best.objective == pytest.approx(best.values[1], rel=1e-12)
    return best


def splits(best: Any) -> tuple[float, float]:
    """The two natural frequencies of an assessed design in rad/s."""
    low, high = sorted(2.0 * math.pi * mode.frequency for mode in best.assessment.modes)
    return low, high


def spring(best: Any) -> float:
    """Stiffness of the absorber's spring, from its tuning and mass."""
    return float(best.values[1] * (2.0 * math.pi * best.values[0]) ** 2)


def test_w5_absorber_from_its_stroke(tmp_path):
    """W5, Rao's diesel engine: 250 N at 6000 rev/min, stroke 2 mm: k2 = 125000 N/m, m2 = .316629 kg (any machine)."""
    best = least_absorber(tmp_path, 40.0, 2e6, 250.0, 200.0 * math.pi, "2 mm", 5.0)
    assert best.values[1] == pytest.approx(0.316629, rel=1e-4)
    assert spring(best) == pytest.approx(125000.0, rel=1e-4)


def test_w18_stroke_and_split_frequencies(tmp_path):
    """W18, Kelly: 200 kg, 4e5 N/m, 500 N at 50 rad/s, 2 mm: k2 = 2.5e5 N/m, m2 = 100 kg, 32.6787 and 68.4259 rad/s."""
    best = least_absorber(tmp_path, 200.0, 4e5, 500.0, 50.0, "2 mm", 400.0)
    assert best.values[1] == pytest.approx(100.0, rel=1e-4)
    assert spring(best) == pytest.approx(2.5e5, rel=1e-4)
    assert splits(best) == pytest.approx((32.6787, 68.4259), rel=1e-4)


def test_w19_saw_base(tmp_path):
    """W19, Inman Ex. 5.3.1: 73.16 kg, 2600 N/m, 13 N at 180 per min, 2 mm: 6500 N/m, 18.294 kg (book 18.29)."""
    best = least_absorber(tmp_path, 73.16, 2600.0, 13.0, 6.0 * math.pi, "2 mm", 80.0)
    assert best.values[1] == pytest.approx(18.294, rel=1e-4)
    assert spring(best) == pytest.approx(6500.0, rel=1e-4)
    assert splits(best) == pytest.approx((5.28698, 21.25414), rel=1e-4)


def test_w17_absorber_mass_for_a_speed_band(tmp_path):
    """W17, Rao 5e ch. 9: tuned at 3000 rev/min, lower mode at 2000: mu = .694444, m2 = 10.3306 kg, upper 4500 rev/min.

    The band to be kept clear is stated by a separation of 10 % from 2000/0.9 to 4000 rev/min.
    """
    mass, omega = 14.8760, 100.0 * math.pi
    text = two.STUDY.format(
        mass=mass, absorber=1.0, forcing=two.FORCE.format(frequency=f'["{2000 / 0.9!r} rpm", "4000 rpm"]', force=1),
        limits='[[allowable]]\nkind = "separation"\nlimit = "10 %"\n' + two.limit("displacement", "1 m"),
        goal='minimise = "absorber-mass"',
        unknowns=two.TUNED.format(low=50.0, high=50.0) + two.MASS.format(low=0.5, high=30.0),
        stiffness=repr(mass * omega**2), damping=0.0, spring='viscous = "0 N s/m"',
    )  # fmt: skip
    best = two.sized(tmp_path, text).answer
    assert best is not None
    # The search keeps 1e-5 of the separation's margin in hand, which is five times that of the mass.
    assert best.values[1] == pytest.approx(10.3306, rel=1e-4)
    assert best.values[1] / mass == pytest.approx(0.694444, rel=1e-4)
    assert spring(best) == pytest.approx(1.01959e6, rel=1e-4)
    low, high = (30.0 * w / math.pi for w in splits(best))
    assert (low, high) == pytest.approx((2000.0, 4500.0), rel=2e-5)


def test_w8_fan_from_its_transmitted_force(tmp_path):
    """W8, Rao: 380 kg, .15 kg m at 1750 rev/min, z = 0: 32.914 N into the ground belong to 45 mm sag (g = 9.81).

    Backwards: the stiffest mount that passes on 32.914 N; and the amplitude is .39732 mm (1e-3).
    """
    unbalance = """
[[forcing]]
kind = "rotating-unbalance"
name = "fan"
shaft = "fan"
position = ["0 m", "0 m", "0 m"]
axis = "x"
unbalance = "0.15 kg m"
"""
    text = one.one_axis(
        more=unbalance + '[[allowable]]\nkind = "transmitted-force"\nthrough = "ground"\ndirection = "z"\n'
        'measure = "peak"\nlimit = "32.914 N"\n' + one.DISPLACEMENT.format(limit=0.5e-3),
        goal="maximise = 'stiffness'", mass=380.0, frequency="'29 Hz'", softest=100.0, stiffest=1e6, made=UNDAMPED,
    )  # fmt: skip
    head, rest = text.split('[[forcing]]\nkind = "harmonic-force"', 1)
    text = head + "[[forcing]]" + rest.split("[[forcing]]", 1)[1]
    text = text.replace('name = "running"', 'name = "running"\nshafts = { fan = ["1750 rpm", "1750 rpm"] }')
    branch = soft(one.sized(tmp_path, text))
    assert 380.0 * 9.81 / branch.values[0] == pytest.approx(0.045, rel=1e-3)
    amplitude = next(row.value for row in branch.assessment.margins if row.kind == "displacement")
    assert amplitude == pytest.approx(0.39732e-3, rel=1e-3)


def test_w9_spring_for_a_twelfth(tmp_path):
    """W9, McLean & Nelson Ex. 19-25: 20 lb at 600 rev/min, 1/12: k = 15.735 lb/in with g = 386 in/s2 (ours
    is 386.09).
    """
    branch = transmissibility_design(tmp_path, "20 lb", "600 rpm", 1.0 / 12.0)
    assert branch.values[0] / (4.4482216 / 0.0254) == pytest.approx(15.735 * 386.0 / 386.0886, rel=5e-5)


@pytest.mark.parametrize(("resonant", "far", "ratio"), [(12.0, 1.3, 0.0541667), (6.0, 0.8, 0.0666667)])
def test_w9_damping_from_two_amplitudes(tmp_path, resonant, far, ratio):
    """W9, McLean & Nelson Ex. 19-28 (1.3 and 12 mm, z = .054) and Thomson Ex. 3.2-1 (.08 and .60 cm, z = .0667).

    The amplitude far above resonance is m e/m; the least damping that keeps the resonant one is z = X_inf/(2 X_res).
    """
    mass, hertz = 50.0, 10.0
    k = mass * (2.0 * math.pi * hertz) ** 2
    text = one.one_axis(
        more=one.DISPLACEMENT.format(limit=repr(1e-3 * resonant)), goal="minimise = 'damping'", mass=mass,
        force=repr(mass * 1e-3 * far * (2.0 * math.pi * hertz) ** 2), frequency=f"'{hertz} Hz'", softest=repr(k),
        stiffest=repr(k), unknowns=VISCOUS,
    )  # fmt: skip
    best = one.sized(tmp_path, text).answer
    assert best is not None
    assert best.values[1] / (2.0 * math.sqrt(mass * k)) == pytest.approx(ratio, rel=1e-5)
