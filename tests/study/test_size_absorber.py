"""Absorbers sized from a study file against closed forms and computed minimax values, detuned, and badly stated.

Values: CHECKS section 3 (T1, T5, T6, T7, T10). The exact minimax values of T5 and T6 and the variance of T7 were
computed outside this project. Damping ratios are of the absorber's own frequency.
"""

from __future__ import annotations

import importlib.util
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import scipy.linalg

from detune.ground.errors import BriefError
from detune.physics.absorber import equal_modal_damping, minimax_tuning
from detune.report.sizing_page import sizing_summary, write_sizing
from detune.response.assess import assess
from detune.sizing.made_parts import made_design

_spec = importlib.util.spec_from_file_location(
    "absorber_briefs", Path(__file__).with_name("absorber_briefs.py")
)
assert _spec is not None and _spec.loader is not None
briefs: Any = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(briefs)

HERTZ, MASS = 10.0, 100.0
OMEGA = 2.0 * math.pi * HERTZ
NARROW, WIDE = '["5 Hz", "16 Hz"]', '["5 Hz", "30 Hz"]'
UNIT = briefs.FORCE.format(frequency=NARROW, force=1)
DISPLACEMENT = briefs.limit("displacement", "0.03 mm")
NOISE = """
[[forcing]]
kind = "random-force"
name = "noise"
on = "machine"
position = ["0 m", "0 m", "0 m"]
direction = "z"
duration = "60 s"
break_points = [["0.01 Hz", "2 N^2/Hz"], ["1000 Hz", "2 N^2/Hz"]]
"""
FLOOR = """
[[forcing]]
kind = "base-motion"
name = "floor"
direction = "z"
frequency = ["3 Hz", "16 Hz"]
{amplitude}
"""


def answer(folder: Path, forcing: str, limits: str, kind: str, **more: Any) -> tuple[float, float, float]:
    """Tuning over the frequency of the machine alone, damping ratio, and the value of the limited response."""
    result = briefs.sized(folder, briefs.tuned_absorber(forcing, limits, **more))
    best = result.answer
    assert best is not None
    value = next(row.value for row in best.assessment.margins if row.kind == kind)
    return best.values[0] / HERTZ, best.values[1], value


def height(mu: float, f: float, z2: float, row: np.ndarray, load: np.ndarray, z1: float = 0.0) -> float:
    """Greatest |response| of primary (1, 1) and absorber on a dense grid, by plain complex arithmetic."""
    r = np.linspace(0.3, 3.0, 40001)
    k2, c2 = mu * f**2, 2.0 * z2 * mu * f
    spring = k2 + 1j * c2 * r
    a = 1.0 + 2j * z1 * r + spring - r**2
    d = spring - mu * r**2
    determinant = a * d - spring**2
    x1 = (load[0] * d + load[1] * spring) / determinant
    x2 = (load[1] * a + load[0] * spring) / determinant
    return float(np.abs(row[0](r) * x1 + row[1](r) * x2).max())


@pytest.mark.parametrize(
    ("mu", "f", "z2", "fixed"),
    [
        (0.05, 0.952381, 0.133631, 6.403124),
        (0.1, 0.909091, 0.184637, 4.582576),
        (0.25, 0.8, 0.273861, 3.0),
    ],
)
def test_t1_displacement_under_a_force(tmp_path, mu, f, z2, fixed):
    """T1: Den Hartog's form is within half a per cent of the true minimax, whose height is not above the form's own."""
    tuning, damping, value = answer(tmp_path, UNIT, DISPLACEMENT, "displacement", mu=mu)
    reached = value * MASS * OMEGA**2
    assert tuning == pytest.approx(f, rel=2e-3)
    assert damping == pytest.approx(z2, rel=2e-2)
    assert fixed < reached < 1.005 * fixed
    one = (lambda r: np.ones_like(r), lambda r: np.zeros_like(r))
    assert reached == pytest.approx(height(mu, tuning, damping, one, (1.0, 0.0)), rel=1e-6)
    assert reached < height(mu, f, z2, one, (1.0, 0.0))


def test_t5_acceleration_under_a_force(tmp_path):
    """T5: exact minimax .97565, .13640, 6.21468; Warburton's form .975900, .135250, 6.172134 (1 % on the height)."""
    forcing = briefs.FORCE.format(frequency=WIDE, force=1)
    limits = briefs.limit("acceleration", "0.1 m/s^2")
    tuning, damping, value = answer(tmp_path, forcing, limits, "acceleration")
    assert (tuning, damping) == (pytest.approx(0.97565, abs=1e-5), pytest.approx(0.13640, abs=1e-5))
    assert value * MASS == pytest.approx(6.21468, rel=1e-6)
    assert value * MASS == pytest.approx(6.172134, rel=1e-2)


def test_t5_displacement_under_an_unbalance_is_the_same_function(tmp_path):
    """X m/(me) under an unbalance is the acceleration under a force: T5 again, by orders of a shaft."""
    forcing = """
[[forcing]]
kind = "rotating-unbalance"
name = "rotor"
shaft = "rotor"
on = "machine"
position = ["0 m", "0 m", "0 m"]
axis = "x"
unbalance = "0.01 kg m"
"""
    limits = briefs.limit("displacement", "2 mm")
    text = briefs.tuned_absorber(forcing, limits)
    text = text.replace('name = "running"', 'name = "running"\nshafts = { rotor = ["300 rpm", "1800 rpm"] }')
    best = briefs.sized(tmp_path, text).answer
    assert best is not None
    assert best.values[0] / HERTZ == pytest.approx(0.97565, abs=1e-5)
    value = next(row.value for row in best.assessment.margins if row.kind == "displacement")
    assert value * MASS / 0.01 == pytest.approx(6.21468, rel=1e-5)


def test_t6_mount_deflection_under_base_acceleration(tmp_path):
    """T6: height 6.645944 exactly, Warburton .940401, .135333, 6.640783."""
    limits = briefs.limit(
        "mount-deflection", "3 mm", 'part = "dynamic"\ndirection = "axial"\nstations = ["foot"]'
    )
    forcing = FLOOR.format(amplitude='acceleration = "1 m/s^2"')
    tuning, damping, value = answer(tmp_path, forcing, limits, "mount-deflection")
    assert value * OMEGA**2 == pytest.approx(6.645944, rel=1e-6)
    assert tuning == pytest.approx(0.940401, rel=1e-3) and damping == pytest.approx(0.135333, rel=1e-2)


@pytest.mark.parametrize("kind", ["transmitted-force", "displacement"])
def test_transmitted_force_and_base_motion_of_a_damped_machine(tmp_path, kind):
    """One function for both, with z1 = 5 %: force into the ground over the force, and motion over that of the floor.

    No closed form holds; the optimum is checked by plain arithmetic on a dense grid, at it and all round it.
    """
    if kind == "displacement":
        forcing = FLOOR.format(amplitude='displacement = "1 mm"')
        limits = briefs.limit("displacement", "8 mm")
    else:
        forcing = UNIT
        more = 'through = "ground"\ndirection = "z"\nmeasure = "peak"'
        limits = briefs.limit("transmitted-force", "8 N", more)
    tuning, damping, value = answer(tmp_path, forcing, limits, kind, z1=0.05)
    ratio = value / 1e-3 if kind == "displacement" else value

    def over_grid(f: float, z2: float) -> float:
        ground = (lambda r: 1.0 + 0.1j * r, lambda r: np.zeros_like(r))
        return height(0.05, f, z2, ground, (1.0, 0.0), 0.05)

    assert ratio == pytest.approx(over_grid(tuning, damping), rel=1e-6)
    for f, z2 in ((1.003, 1.0), (0.997, 1.0), (1.0, 1.05), (1.0, 0.95), (1.002, 1.03), (0.998, 0.97)):
        assert over_grid(f * tuning, z2 * damping) > ratio
    exact = minimax_tuning(0.05, "transmitted force", 0.05)
    assert tuning == pytest.approx(exact.frequency_ratio, rel=1e-5)
    assert ratio == pytest.approx(exact.reached, rel=1e-7)


def test_t7_rms_under_white_noise(tmp_path):
    """T7: .964212, .109772, variance 4.445436 for unit intensity (one-sided density 2), here from 0.01 Hz to 1 kHz."""
    limits = briefs.limit("displacement", "0.1 mm", 'at = "top"\ndirection = "z"\nmeasure = "rms"')
    tuning, damping, value = answer(tmp_path, NOISE, limits, "displacement")
    assert tuning == pytest.approx(0.964212, rel=1e-5)
    assert damping == pytest.approx(0.109772, rel=1e-4)
    # The band leaves out 1e-3 of omega_1 at the lower end, about 5e-5 of the variance.
    assert value**2 * MASS**2 * OMEGA**3 == pytest.approx(4.445436, rel=1e-4)


def test_rms_mount_deflection_under_white_base_acceleration(tmp_path):
    """Warburton 1982, white base acceleration: f = sqrt(1 - mu/2)/(1 + mu), z2^2 = mu (1 - mu/4)/(4 (1 +
    mu)(1 - mu/2)).
    """
    forcing = """
[[forcing]]
kind = "random-base-motion"
name = "floor"
direction = "z"
duration = "60 s"
break_points = [["0.01 Hz", "0.1 (m/s^2)^2/Hz"], ["1000 Hz", "0.1 (m/s^2)^2/Hz"]]
"""
    limits = briefs.limit(
        "relative-motion", "5 mm", 'at = "top"\nto = "floor"\ndirection = "z"\nmeasure = "rms"'
    )
    tuning, damping, _ = answer(tmp_path, forcing, limits, "relative-motion")
    mu = 0.05
    assert tuning == pytest.approx(math.sqrt(1 - mu / 2) / (1 + mu), rel=1e-5)
    assert damping == pytest.approx(math.sqrt(mu * (1 - mu / 4) / (4 * (1 + mu) * (1 - mu / 2))), rel=1e-4)


def test_t10_equal_modal_damping(tmp_path):
    """T10: .952381, .218218; both modes decay with .109109 omega_1, modal damping ratio .111803 (Sadek et al. 1997).

    Coalesced modes are a double root, so that rounding splits them by the square root of its size.
    """
    form = equal_modal_damping(0.05)
    assert (form.frequency_ratio, form.damping_ratio) == pytest.approx((0.952381, 0.218218), abs=1e-6)
    study = briefs.sized(tmp_path, briefs.tuned_absorber(UNIT, DISPLACEMENT)).study
    made = made_design(study.brief, np.array([form.frequency_ratio * HERTZ, form.damping_ratio]))
    mounts = dict(zip(made.design.groups, made.design.mounts, strict=True))
    k = MASS * OMEGA**2
    k2, c2 = mounts["spring"].stiffness_dynamic[2], mounts["spring"].viscous[2]
    stiffness = np.array([[k + k2, -k2], [-k2, k2]])
    damping = np.array([[c2, -c2], [-c2, c2]])
    inverse = np.diag([1.0 / MASS, 1.0 / (0.05 * MASS)])
    state = np.block([[np.zeros((2, 2)), np.eye(2)], [-inverse @ stiffness, -inverse @ damping]])
    poles = scipy.linalg.eigvals(state) / OMEGA
    assert -poles.real == pytest.approx(np.full(4, 0.109109), abs=1e-5)
    assert -poles.real / np.abs(poles) == pytest.approx(np.full(4, 0.111803), abs=1e-5)
    assert assess(made.brief, made.design).modes


def test_closed_forms_stand_beside_the_answer_and_are_never_better(tmp_path):
    result = briefs.sized(tmp_path, briefs.tuned_absorber(UNIT, DISPLACEMENT))
    best = result.answer
    assert best is not None
    names = [form.name for form in result.closed_forms]
    assert names[:2] == ["Den Hartog, Brock", "Nishihara, Asami"] and len(names) == 8
    # The form of Nishihara and Asami is the exact optimum here, which the search comes to within its own tolerance.
    assert all(form.worst_response >= best.objective * (1 - 1e-6) for form in result.closed_forms)
    exact = result.closed_forms[1]
    assert best.objective == pytest.approx(exact.worst_response, rel=1e-5)
    # Its height for mu = .05 is 6.40792077 (formula worked out by hand, and by a dense grid).
    assert exact.height == pytest.approx(6.40792077, abs=1e-8)
    assert all(form.within for form in result.closed_forms)
    assert "8 closed forms" in sizing_summary(result) and "Nishihara, Asami" in sizing_summary(result)
    first = result.closed_forms[0]
    assert (first.tuning / HERTZ, first.damping) == pytest.approx((0.952381, 0.133631), abs=1e-6)
    assert first.mass_ratio == 0.05 and first.height == pytest.approx(6.403124, abs=1e-6)


@pytest.mark.parametrize(("mu", "z1", "f", "z2", "peak"), [
    (0.05, 0.03, 0.94269, 0.13843, 4.833152),
    (0.05, 0.1, 0.91385, 0.14756, 3.056599),
    (0.2, 0.1, 0.77802, 0.26448, 2.210073),
])  # fmt: skip
def test_a_damped_machine_against_a_grid_and_the_fit_of_ioi_and_ikeda(tmp_path, mu, z1, f, z2, peak):
    """Least greatest displacement of a damped machine, by a dense complex grid with a simplex search of its own.

    The fit of Ioi and Ikeda (Bull. JSME 21 (1978) 64, from memory) is within 1 % of it, Den Hartog's form is not.
    """
    wide = briefs.FORCE.format(frequency='["3 Hz", "30 Hz"]', force=1)
    result = briefs.sized(tmp_path, briefs.tuned_absorber(wide, DISPLACEMENT, mu=mu, z1=z1))
    best = result.answer
    assert best is not None
    assert best.values[0] / HERTZ == pytest.approx(f, abs=3e-5) and best.values[1] == pytest.approx(
        z2, abs=2e-4
    )
    reached = (
        next(row.value for row in best.assessment.margins if row.kind == "displacement") * MASS * OMEGA**2
    )
    assert reached == pytest.approx(peak, rel=3e-6)
    forms = {form.name: form.worst_response / best.objective for form in result.closed_forms}
    assert 1.0 < forms["Ioi, Ikeda"] < 1.01 < forms["Den Hartog, Brock"]


def test_detuning_by_the_stated_scatter(tmp_path):
    """Springs +-8.15 % (5 % by lot, 3 % by part) and mass +-2 % put the tuning off by sqrt(.95 .97/1.02) -
    1 = -4.95 %.
    """
    text = briefs.tuned_absorber(UNIT, DISPLACEMENT)
    text += '[scatter]\njudge = "interval"\nstiffness = { lot = "5 %", part = "3 %" }\n'
    text += 'damping = { lot = "20 %" }\nmass = "2 %"\n'
    result = briefs.sized(tmp_path, text)
    best = result.answer
    assert best is not None and len(result.scattered) == 1
    found = result.scattered[0]
    assert found.tuning[0] == pytest.approx(math.sqrt(0.95 * 0.97 / 1.02) - 1.0, rel=1e-9)
    assert found.tuning[1] == pytest.approx(math.sqrt(1.05 * 1.03 / 0.98) - 1.0, rel=1e-9)
    assert found.nominal == pytest.approx(best.objective, rel=1e-9)
    # One corner by hand: absorber soft and heavy, machine stiff and light, everything lightly damped.
    soft, heavy = 0.95 * 0.97, 1.02
    machine = math.sqrt(1.05 * 1.03 / 0.98)
    f = best.values[0] / HERTZ * math.sqrt(soft / heavy) / machine
    c = 0.8 * best.values[1] / math.sqrt(soft * heavy)
    one = (lambda r: np.ones_like(r), lambda r: np.zeros_like(r))
    corner = height(0.05 * heavy / 0.98, f, c, one, (1.0, 0.0)) / (MASS * OMEGA**2 * 1.05 * 1.03) / 3e-5
    assert found.greatest >= corner * (1 - 1e-6)
    assert found.greatest < 3.0 * found.nominal
    # The curve of detuning is lowest where nothing is off.
    shares, worst = found.curve
    assert worst.min() == pytest.approx(found.nominal, rel=1e-6) and shares[worst.argmin()] == pytest.approx(
        0.0
    )
    assert "grows from" in sizing_summary(result)
    folder = write_sizing(result, tmp_path / "out")
    page = (folder / "report.html").read_text(encoding="utf-8")
    for words in ("Absorber beside closed forms", "Absorber under the stated scatter", "Den Hartog, Brock"):
        assert words in page
    assert (folder / "plots" / "sizing-absorber.png").is_file()


def test_a_tuning_that_breaks_its_limit_over_the_scatter_is_sought_again(tmp_path):
    """Both springs +-5 %, damping +-20 %: the least worst corner by a grid and a simplex outside this project.

    Tuned for listed values (.95237, .13394) the worst corner moves 25.4174 um; the least is 23.2045 um, at .94502 and
    .14762, so that a limit of 23.5 um is met over the scatter by that alone.
    """
    text = briefs.tuned_absorber(UNIT, briefs.limit("displacement", "0.0235 mm"))
    text += '[scatter]\njudge = "interval"\nstiffness = { lot = "5 %" }\ndamping = { lot = "20 %" }\n'
    result = briefs.sized(tmp_path, text)
    over, best = result.over, result.answer
    assert best is not None and over.changed and over.judged.proven and result.exit_code == 0
    first = over.first.verdict.witness
    assert first.worst == pytest.approx(25.4174e-6, rel=1e-4)
    assert best.values == pytest.approx([9.4502, 0.14762], rel=2e-3)
    worst = next(row for row in over.judged.verdict.rows if row.kind == "displacement")
    assert worst.worst == pytest.approx(23.2045e-6, rel=1e-4)
    # What it costs at listed values.
    assert over.nominal < over.objective < 1.06 * over.nominal


BAD = {
    "crossed bounds": ('lower = "7.0 Hz"', 'lower = "14 Hz"', "crossed"),
    "body not on the springs": ('body = "absorber"\nlower ='
                                ' 0.01', 'body = "machine"\nlower = 0.01', "stands on the parts"),
    "no such body": ('body = "absorber"\nlower = 0.01', 'body = "absorbr"\nlower = 0.01', "the name of a body"),
    "two stiffnesses": ('[[sizing.made]]\ngroup = "spring"', '[[sizing.made]]\ngroup = "spring"\nstiffness ='
                                                             ' "5 N/mm"', "once"),
    "mass known": ('minimise = "worst-response"', 'minimise = "absorber-mass"', "as stated the mass is known"),
    "no damping of it": ("lower = 0.01", "lower = 0", "above zero"),
}  # fmt: skip


@pytest.mark.parametrize("name", BAD)
def test_bad_input_is_refused_with_its_line(tmp_path, name):
    old, new, words = BAD[name]
    text = briefs.tuned_absorber(UNIT, DISPLACEMENT)
    assert old in text
    with pytest.raises(BriefError, match=words) as caught:
        briefs.sized(tmp_path, text.replace(old, new))
    assert any(fault.line is not None for fault in caught.value.faults)
