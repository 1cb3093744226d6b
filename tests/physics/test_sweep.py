"""Run-up and coast-down. Ids are those of CHECKS, section 6; X8 of section 9."""

import numpy as np
import pytest
from scipy.integrate import quad, solve_ivp

from detune.physics.simulation import state_modes
from detune.physics.sweep import (
    SweepPeak,
    attenuation_estimate,
    octave_sweep,
    run_through,
    sweep_envelope,
    sweep_parameter,
)

TWO_PI = 2.0 * np.pi


def one_mass(
    frequency: float, ratio: float, start: float, end: float, duration: float, power: int = 0
) -> SweepPeak:
    """Force of static deflection 1 on one mass, swept linearly from start to end in Hz."""
    w = TWO_PI * frequency
    return run_through(
        [[1.0]], [[2 * ratio * w]], [[w**2]], [w**2], [0.0, duration], [TWO_PI * start, TWO_PI * end], power
    )


@pytest.mark.parametrize(("q", "expected"), [(100.0, 36.53), (400.0, 73.29), (1600.0, 146.83)])
def test_q1_undamped_sweep(q: float, expected: float) -> None:
    # Q1, Lewis 1932: peak 3.67 sqrt(q) static, q = fn^2/(df/dt) (1 %).
    rate = 10.0**2 / q
    peak = one_mass(10.0, 0.0, 0.0, 20.0, 20.0 / rate)
    assert peak.peak[0] == pytest.approx(expected, rel=0.01)
    assert np.isinf(peak.steady[0])
    assert peak.attenuation[0] == 0.0


def test_q1_large_limit_from_the_fresnel_integral() -> None:
    # Large-q limit 3.6777 sqrt(q) = pi sqrt(q) 1.170659: the largest Fresnel distance, here by quadrature.
    def distance(u: float) -> float:
        c = 0.5 + quad(lambda t: np.cos(0.5 * np.pi * t * t), 0.0, u)[0]
        s = 0.5 + quad(lambda t: np.sin(0.5 * np.pi * t * t), 0.0, u)[0]
        return float(np.hypot(c, s))

    largest = max(distance(u) for u in np.linspace(1.1, 1.35, 126)) / np.sqrt(2.0)
    assert largest == pytest.approx(1.170659, abs=1e-5)
    rate = 10.0**2 / 40_000.0
    found = one_mass(10.0, 0.0, 0.0, 20.0, 20.0 / rate).peak[0]
    assert found == pytest.approx(np.pi * np.sqrt(40_000.0) * 1.170659, rel=2e-3)


@pytest.mark.parametrize(
    ("eta", "expected"), [(0.3, 0.98752), (1.0, 0.93803), (3.0, 0.82886), (10.0, 0.64597), (30.0, 0.46518)]
)
def test_q2_attenuation(eta: float, expected: float) -> None:
    # Q2, Hok 1948, high-Q limit (2e-3); Cronin's fit within 1 %.
    quality = 2000.0
    rate = eta / quality**2
    span = max(30.0 / quality, 25.0 * np.sqrt(rate))
    found = one_mass(1.0, 0.5 / quality, 1.0 - span, 1.0 + span, 2.0 * span / rate)
    assert found.attenuation[0] == pytest.approx(expected, rel=2e-3)
    assert sweep_parameter(1.0, quality, rate) == pytest.approx(eta)
    assert attenuation_estimate(eta) == pytest.approx(expected, rel=0.01)


def test_q2_octave_sweep() -> None:
    # Q2: 20 Hz, Q = 50, 4 octaves a minute: df/dt = 20 ln2 4/60 = .924196 Hz/s, eta 5.77623, high-Q ratio .7349.
    rate = 20.0 * np.log(2.0) * 4.0 / 60.0
    assert rate == pytest.approx(0.924196, abs=1e-6)
    assert sweep_parameter(20.0, 50.0, rate) == pytest.approx(5.77623, abs=1e-5)
    moment, speed = octave_sweep(5.0, 80.0, 4.0)
    assert moment[-1] == pytest.approx(60.0)
    w = TWO_PI * 20.0
    found = run_through([[1.0]], [[w / 50.0]], [[w**2]], [w**2], moment, speed, 0)
    assert found.attenuation[0] == pytest.approx(0.7349, rel=0.01)


def test_trap_run_up_and_coast_down_differ() -> None:
    # Undamped and fast, the run-up stays below the Fresnel limit and the coast-down above it or near it.
    up, down = one_mass(10.0, 0.0, 0.0, 20.0, 20.0), one_mass(10.0, 0.0, 20.0, 0.0, 20.0)
    limit = 3.6777 * np.sqrt(100.0)
    assert up.peak[0] < down.peak[0] * 0.999
    assert abs(down.peak[0] / limit - 1.0) < 0.01
    # The peak comes late: beyond the resonance going up, below it coming down.
    assert up.omega[0] > TWO_PI * 10.0 > down.omega[0]


MASS = np.diag([3.0, 5.0, 2.0])
STIFFNESS = np.array([[3.0, -1.0, 0.0], [-1.0, 2.5, -1.5], [0.0, -1.5, 2.0]]) * 1e4
DAMPING = 4e-4 * STIFFNESS + np.diag([1.0, 0.0, 2.0])
LOAD = np.array([1.0, 0.5j, -0.3 + 0.2j])


@pytest.mark.parametrize(
    ("start", "end", "duration", "power"), [(5.0, 200.0, 6.0, 2), (200.0, 0.0, 3.0, 2), (20.0, 150.0, 2.0, 0)]
)
def test_x8_unbalance_through_three_modes_against_one_complex_ode(
    start: float, end: float, duration: float, power: int
) -> None:
    # X8: solve_ivp of the complex motion, whose modulus is the envelope; non-proportional damping.
    rate = (end - start) / duration

    def motion(t: float, y: np.ndarray) -> np.ndarray:
        w, phase = start + rate * t, start * t + 0.5 * rate * t * t
        force = LOAD * w**power * np.exp(1j * phase)
        return np.r_[y[3:], np.linalg.solve(MASS, force - DAMPING @ y[3:] - STIFFNESS @ y[:3])]

    time = np.linspace(0.0, duration, 3001)
    run = solve_ivp(
        motion, (0.0, duration), np.zeros(6, complex), t_eval=time, rtol=1e-8, atol=1e-11, method="DOP853"
    )
    modes = state_modes(MASS, DAMPING, STIFFNESS)
    moved, velocity = sweep_envelope(modes, LOAD, [0.0, duration], [start, end], power, time)
    assert np.max(np.abs(moved - run.y[:3].T)) < 1e-6 * np.abs(run.y[:3]).max()
    assert np.max(np.abs(velocity - run.y[3:].T)) < 1e-6 * np.abs(run.y[3:]).max()
    found = run_through(MASS, DAMPING, STIFFNESS, LOAD, [0.0, duration], [start, end], power)
    assert found.peak == pytest.approx(np.abs(run.y[:3]).max(axis=1), rel=2e-4)
    assert np.all(found.attenuation < 1.0)


def test_rows_give_forces_and_a_slow_run_reaches_steady_state() -> None:
    # Spring and damper force of freedom 1 to ground, run through so slowly that the attenuation is 1 (1e-3).
    found = run_through(
        MASS, DAMPING, STIFFNESS, LOAD, [0.0, 4000.0], [90.0, 105.0], 2, [[2e4, 0.0, 0.0]], [[9.0, 0.0, 0.0]]
    )
    grid = np.linspace(90.0, 105.0, 40_001)
    matrix = STIFFNESS + 1j * grid[:, None, None] * DAMPING - grid[:, None, None] ** 2 * MASS
    q = np.linalg.solve(matrix, (LOAD * grid[:, None] ** 2)[..., None])[:, 0, 0]
    wanted = np.abs((2e4 + 9j * grid) * q).max()
    assert found.steady[0] == pytest.approx(wanted, rel=1e-6)
    assert found.attenuation[0] == pytest.approx(1.0, abs=1e-3)


def test_constant_speed_pieces_and_joints() -> None:
    # A hold between two ramps is the limit of a very slow ramp; pieces join without a step.
    modes = state_modes(MASS, DAMPING, STIFFNESS)
    time = np.linspace(0.0, 3.0, 400)
    hold, _ = sweep_envelope(modes, LOAD, [0.0, 1.0, 2.0, 3.0], [0.0, 100.0, 100.0, 150.0], 2, time)
    slow, _ = sweep_envelope(modes, LOAD, [0.0, 1.0, 2.0, 3.0], [0.0, 100.0, 100.0 + 1e-7, 150.0], 2, time)
    assert np.max(np.abs(hold - slow)) < 1e-6 * np.abs(hold).max()
    # A ramp cut in two is the same ramp.
    whole, _ = sweep_envelope(modes, LOAD, [0.0, 3.0], [0.0, 150.0], 2, time)
    cut, _ = sweep_envelope(modes, LOAD, [0.0, 1.3, 3.0], [0.0, 65.0, 150.0], 2, time)
    assert np.max(np.abs(whole - cut)) < 1e-10 * np.abs(whole).max()


def test_runs_without_sense_are_refused() -> None:
    modes = state_modes(MASS, DAMPING, STIFFNESS)
    for moment, speed, power, time, words in (
        ([0.0, 0.0], [1.0, 2.0], 2, [0.0], "rising moments"),
        ([0.0, 1.0], [-1.0, 2.0], 2, [0.0], "not below zero"),
        ([0.0, 1.0], [1.0, 2.0], 2, [2.0], "outside the run"),
        ([0.0, 1.0], [1.0, 2.0], 7, [0.5], "whole power"),
    ):
        with pytest.raises(ValueError, match=words):
            sweep_envelope(modes, LOAD, moment, speed, power, time)
    with pytest.raises(ValueError, match="two different frequencies"):
        octave_sweep(5.0, 5.0, 1.0)
