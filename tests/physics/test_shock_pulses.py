"""Pulses and their shock response spectra. Ids are those of CHECKS, section 5."""

import mpmath
import numpy as np
import pytest
from scipy.optimize import minimize_scalar
from scipy.signal import lsim

from detune.physics.pulses import (
    PULSES,
    half_sine,
    pulse_step,
    pulse_value,
    rectangle,
    sampled_pulse,
    symmetric_triangle,
    terminal_peak_sawtooth,
    trapezoid,
    velocity_change,
    versed_sine,
)
from detune.physics.shock import pulse_shock_spectrum, record_shock_spectrum

G = 9.80665


def highest(name: str, ratio: float, low: float, high: float) -> tuple[float, float]:
    """Place f T and height of the greatest maximum between low and high."""
    pulse = PULSES[name](1.0, 1.0)
    found = minimize_scalar(
        lambda f: -pulse_shock_spectrum(pulse, [f], ratio).overall[0],
        bounds=(low, high),
        method="bounded",
        options={"xatol": 1e-6},
    )
    return float(found.x), -float(found.fun)


@pytest.mark.parametrize(
    ("name", "place", "height"),
    [
        # K1: Jacobsen and Ayre 1958; Ayre in Harris ch. 8; IEC 60068-2-27 annex. Heights recomputed, 1e-4.
        ("half-sine", 0.80994, 1.76846),
        ("versed sine", 1.0003, 1.70514),
        ("symmetric triangle", 0.9045, 1.51718),
    ],
)
def test_k1_undamped_maxima(name: str, place: float, height: float) -> None:
    found = highest(name, 0.0, place - 0.15, place + 0.15)
    assert found[1] == pytest.approx(height, rel=1e-5)
    assert found[0] == pytest.approx(place, abs=5e-4)


def test_k1_terminal_peak_sawtooth_against_its_closed_form() -> None:
    # Published 1.26. The residual of the saw, a = 2 pi f T: sqrt((1 - sin a/a)^2 + ((1 - cos a)/a)^2), has its
    # maximum 1.25959 at f T = 0.6502 (mpmath). The value 1.2599 sometimes given is 2.5e-4 too high.
    def residual(x: float) -> mpmath.mpf:
        a = 2 * mpmath.pi * x
        return mpmath.sqrt((1 - mpmath.sin(a) / a) ** 2 + ((1 - mpmath.cos(a)) / a) ** 2)

    place = mpmath.findroot(lambda x: mpmath.diff(residual, x), 0.65)
    found = highest("terminal-peak sawtooth", 0.0, 0.5, 0.8)
    assert found[1] == pytest.approx(float(residual(place)), rel=1e-6)
    assert found[1] == pytest.approx(1.2599, rel=3e-4)
    assert found[0] == pytest.approx(0.650, abs=1e-3)


def test_k1_rectangle_doubles() -> None:
    # K1: 2 for all f T >= 0.5.
    found = pulse_shock_spectrum(rectangle(1.0, 1.0), [0.5, 0.7, 1.0, 3.3], 0.0).overall
    assert found == pytest.approx(2.0, rel=1e-6)


def test_k2_half_sine_points() -> None:
    # K2, closed forms: undamped at f T = 0.1, 0.25, 0.5, 1, 1.5, 2 (1e-5).
    found = pulse_shock_spectrum(half_sine(1.0, 1.0), [0.1, 0.25, 0.5, 1.0, 1.5, 2.0], 0.0).overall
    assert found == pytest.approx([0.396274, 0.942809, 1.570796, 1.732051, 1.5, 1.268075], rel=2e-6)


@pytest.mark.parametrize(("ratio", "place", "height"), [(0.05, 0.8232, 1.65163), (0.1, 0.8341, 1.55844)])
def test_k2_damped_half_sine(ratio: float, place: float, height: float) -> None:
    # K2, numeric (1e-4).
    found = highest("half-sine", ratio, 0.7, 1.0)
    assert found[1] == pytest.approx(height, rel=1e-5)
    assert found[0] == pytest.approx(place, abs=1e-3)


@pytest.mark.parametrize(
    ("peak", "milliseconds", "half", "saw", "trapeze"),
    [
        # K4: IEC 60068-2-27:2008 table 1, m/s (0.5 %, the standard's table rounds).
        (15, 11, 1.030, 0.809, 1.456),
        (30, 18, 3.371, 2.648, 4.766),
        (50, 11, 3.434, 2.697, 4.854),
        (100, 6, 3.746, 2.942, 5.296),
        (500, 1, 3.122, 2.452, 4.413),
    ],
)
def test_k4_velocity_change(
    peak: float, milliseconds: float, half: float, saw: float, trapeze: float
) -> None:
    given = (peak * G, milliseconds * 1e-3)
    assert velocity_change(half_sine(*given)) == pytest.approx(half, rel=5e-4)
    assert velocity_change(terminal_peak_sawtooth(*given)) == pytest.approx(saw, rel=5e-4)
    assert velocity_change(trapezoid(*given)) == pytest.approx(trapeze, rel=5e-4)


def test_velocity_change_against_quadrature() -> None:
    # A T/2 for versed sine and triangle, A T for the rectangle; and the trapezoidal rule for all.
    assert velocity_change(versed_sine(3.0, 0.2)) == pytest.approx(0.3)
    assert velocity_change(symmetric_triangle(3.0, 0.2)) == pytest.approx(0.3)
    assert velocity_change(rectangle(3.0, 0.2)) == pytest.approx(0.6)
    for make in PULSES.values():
        pulse = make(3.0, 0.2)
        time = (np.arange(20_000) + 0.5) * 1e-5
        assert velocity_change(pulse) == pytest.approx(pulse_value(pulse, time).sum() * 1e-5, rel=1e-6)


@pytest.mark.parametrize("name", sorted(PULSES))
def test_x6_closed_form_against_lsim(name: str) -> None:
    # X6: scipy.signal.lsim with linear interpolation, T/2000 steps, vertical sides one step wide (hence 1e-3).
    pulse = PULSES[name](1.0, 1.0)
    for frequency, ratio in ((0.3, 0.0), (1.7, 0.05), (4.0, 0.3)):
        w = 2.0 * np.pi * frequency
        time = np.arange(0.0, 1.0 + 3.0 / frequency, 1.0 / 2000.0)
        state = ([[0, 1], [-(w**2), -2 * ratio * w]], [[0], [-1]], [[-(w**2), -2 * ratio * w]], [[0]])
        _, response, _ = lsim(state, pulse_value(pulse, time), time)
        jump = 2e-3 if name in ("rectangle", "terminal-peak sawtooth") else 2e-5
        found = pulse_shock_spectrum(pulse, [frequency], ratio).overall[0]
        assert found == pytest.approx(np.abs(response).max(), rel=jump)


def test_quantities_of_one_shock_agree() -> None:
    # Undamped, absolute acceleration, pseudo-acceleration, w times pseudo-velocity and w^2 times deflection are one.
    pulse, f = trapezoid(2.0, 0.011), np.array([5.0, 60.0, 400.0])
    w = 2.0 * np.pi * f
    absolute = pulse_shock_spectrum(pulse, f, 0.0).overall
    assert pulse_shock_spectrum(pulse, f, 0.0, "deflection").overall * w**2 == pytest.approx(absolute)
    assert pulse_shock_spectrum(pulse, f, 0.0, "pseudo-velocity").overall * w == pytest.approx(absolute)
    assert pulse_shock_spectrum(pulse, f, 0.0, "pseudo-acceleration").overall == pytest.approx(absolute)
    # A mount far softer than the pulse is short sees the velocity change alone: d = dv/w (Mindlin 1945).
    soft = pulse_shock_spectrum(pulse, [0.05], 0.0, "deflection").overall[0]
    assert soft * 2 * np.pi * 0.05 == pytest.approx(velocity_change(pulse), rel=1e-5)


def test_record_spectrum_follows_the_pulse_it_is_sampled_from() -> None:
    pulse = half_sine(1.0, 0.02)
    step = 0.02 / 400.0
    before, _ = sampled_pulse(pulse, step, 1000)
    frequency = np.array([3.0, 40.0, 200.0, 2500.0])
    whole, exact = (
        record_shock_spectrum(before, step, frequency, 0.05),
        pulse_shock_spectrum(pulse, frequency, 0.05),
    )
    assert whole.overall == pytest.approx(exact.overall, rel=1e-4)
    with pytest.raises(ValueError, match="damping ratio"):
        record_shock_spectrum(before, step, frequency, 1.0)
    with pytest.raises(ValueError, match="above zero"):
        pulse_shock_spectrum(pulse, [0.0], 0.05)


def test_samples_meet_vertical_sides_from_both_hands() -> None:
    before, after = sampled_pulse(rectangle(2.0, 0.004), 0.001, 7)
    assert before.tolist() == [0, 2, 2, 2, 2, 0, 0]
    assert after.tolist() == [2, 2, 2, 2, 0, 0, 0]
    before, after = sampled_pulse(terminal_peak_sawtooth(2.0, 0.004), 0.001, 6)
    assert before.tolist() == pytest.approx([0, 0.5, 1, 1.5, 2, 0])
    assert after.tolist() == pytest.approx([0, 0.5, 1, 1.5, 0, 0])
    with pytest.raises(ValueError, match="does not meet the edges"):
        sampled_pulse(rectangle(2.0, 0.004), 0.0015, 7)


def test_a_step_that_meets_every_edge() -> None:
    pulse = trapezoid(1.0, 0.018, 0.1, 0.15)
    step = pulse_step(pulse, 2e-4)
    assert step <= 2e-4
    assert pulse.edge / step == pytest.approx(np.rint(pulse.edge / step), abs=1e-9)
    with pytest.raises(ValueError, match="at most 1"):
        trapezoid(1.0, 0.01, 0.7, 0.5)
    with pytest.raises(ValueError, match="duration"):
        half_sine(1.0, 0.0)
