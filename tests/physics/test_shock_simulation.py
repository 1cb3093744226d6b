"""Exact simulation in time: against lsim, closed forms, the frequency domain and energy. CHECKS section 9, X6."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.linalg import expm
from scipy.signal import lsim

from detune.physics import simulation
from detune.physics.array_types import FloatArray
from detune.physics.pulses import half_sine, rectangle, sampled_pulse
from detune.physics.simulation import (
    DefectiveModes,
    extremes_between_samples,
    peaks,
    phi1,
    phi2,
    refined_record,
    simulate,
    simulate_states,
    state_modes,
)


def six_axis(seed: int) -> tuple[FloatArray, FloatArray, FloatArray]:
    """A random machine in mixed units (kg and kg m2), light damping, modes from about 3 to 40 Hz."""
    rng = np.random.default_rng(seed)
    scale = np.diag([1.0, 1.0, 1.0, 0.3, 0.3, 0.3])
    root = rng.normal(size=(6, 6))
    mass = scale @ (np.eye(6) + 0.1 * root @ root.T) @ scale * 80.0
    root = rng.normal(size=(6, 6))
    stiffness = scale @ (root @ root.T + 0.3 * np.eye(6)) @ scale * 3e5
    root = rng.normal(size=(6, 6))
    damping = 4e-4 * stiffness + scale @ root @ root.T @ scale * 20.0
    return mass, damping, stiffness


def state_form(m: FloatArray, c: FloatArray, k: FloatArray) -> tuple[FloatArray, FloatArray]:
    inverse, n = np.linalg.inv(m), m.shape[0]
    a = np.block([[np.zeros((n, n)), np.eye(n)], [-inverse @ k, -inverse @ c]])
    return a, np.vstack([np.zeros((n, n)), inverse])


def test_x6_random_machine_against_lsim() -> None:
    # X6: scipy.signal.lsim holds the load straight between samples, as `simulate` does: equal to rounding.
    m, c, k = six_axis(1)
    record = np.random.default_rng(2).normal(size=(1500, 6))
    a, b = state_form(m, c, k)
    _, response, _ = lsim((a, b, np.eye(12), np.zeros((12, 6))), record, np.arange(1500) * 2e-3)
    found = simulate(m, c, k, record, 2e-3)
    assert np.max(np.abs(found.displacement - response[:, :6])) < 1e-10 * np.abs(response[:, :6]).max()
    assert np.max(np.abs(found.velocity - response[:, 6:])) < 1e-10 * np.abs(response[:, 6:]).max()


def test_time_domain_against_frequency_domain() -> None:
    # After three hundred periods of a load of three harmonics the motion is the sum of three receptances.
    m, c, k = six_axis(3)
    shape, period = np.random.default_rng(4).normal(size=6), 1.0 / 7.0
    count = 500
    time = np.arange(300 * count) * period / count
    load = sum(np.cos(2 * np.pi * order / period * time + order) for order in (1, 2, 5))
    found = simulate(m, c, k, load, period / count, shapes=shape[:, None])
    wanted = np.zeros((count, 6))
    for order in (1, 2, 5):
        w = 2.0 * np.pi * order / period
        q = np.linalg.solve(k + 1j * w * c - w**2 * m, shape * np.exp(1j * order))
        wanted += (q * np.exp(1j * w * time[:count, None])).real
    # The chords of the load lose (w dt)^2/12 = 3e-4 of the fifth harmonic.
    assert np.max(np.abs(found.displacement[-count:] - wanted)) < 5e-4 * np.abs(wanted).max()


def test_both_recursions_agree(monkeypatch: pytest.MonkeyPatch) -> None:
    m, c, k = six_axis(5)
    record = np.random.default_rng(6).normal(size=(400, 2))
    shapes = np.random.default_rng(7).normal(size=(6, 2))
    modal = simulate(m, c, k, record, 1e-3, shapes)
    monkeypatch.setattr(simulation, "WORST_CONDITION", 0.0)
    matrix = simulate(m, c, k, record, 1e-3, shapes)
    assert (
        np.max(np.abs(modal.displacement - matrix.displacement)) < 1e-11 * np.abs(matrix.displacement).max()
    )
    assert (
        np.max(np.abs(modal.acceleration - matrix.acceleration)) < 1e-11 * np.abs(matrix.acceleration).max()
    )


def test_critical_damping_and_a_free_body_take_the_matrix_exponential() -> None:
    # x = t exp(-w t) v0 for critical damping; x = F t^2/(2 m) and, under a ramp, F t^3/(6 m) for a free body.
    time = np.arange(200) * 0.01
    critical = simulate([[1.0]], [[6.0]], [[9.0]], np.zeros(200), 0.01, velocity=[2.0])
    assert critical.displacement[:, 0] == pytest.approx(2.0 * time * np.exp(-3.0 * time), abs=1e-13)
    free = simulate([[2.0]], [[0.0]], [[0.0]], time, 0.01)
    assert free.displacement[:, 0] == pytest.approx(time**3 / 12.0, abs=1e-13)
    with pytest.raises(DefectiveModes, match="not independent"):
        state_modes([[1.0]], [[6.0]], [[9.0]])


def test_a_step_load_is_met_exactly() -> None:
    # A force F for ever from 0 on an undamped mount: x = F/k (1 - cos w t); acceleration F/m at once.
    before, after = np.r_[0.0, np.full(99, 5.0)], np.full(100, 5.0)
    found = simulate([[2.0]], [[0.0]], [[50.0]], before, 0.05, record_after=after)
    assert found.displacement[:, 0] == pytest.approx(
        0.1 * (1.0 - np.cos(5.0 * np.arange(100) * 0.05)), abs=1e-13
    )
    assert found.acceleration[0, 0] == 0.0
    assert found.acceleration_after[0, 0] == pytest.approx(2.5)


@pytest.mark.parametrize(("make", "place", "height"), [(half_sine, 0.80994, 1.76846), (rectangle, 0.7, 2.0)])
def test_k1_pulse_peaks_between_samples(make, place: float, height: float) -> None:  # type: ignore[no-untyped-def]
    # K1 through the general simulation: base acceleration on one mass, peaks between samples to 1e-4.
    step, w = 1.0 / 60.0, 2.0 * np.pi * place
    before, after = sampled_pulse(make(1.0, 1.0), step, 180)
    found = simulate([[1.0]], [[0.0]], [[w**2]], -before, step, record_after=-after)
    outcome = peaks(found, [[-(w**2)]])
    assert outcome.largest[0] == pytest.approx(height, rel=2.5e-4 if make is half_sine else 1e-6)
    finer, _ = sampled_pulse(make(1.0, 1.0), 1.0 / 400.0, 1200)
    if make is half_sine:
        found = simulate([[1.0]], [[0.0]], [[w**2]], -finer, 1.0 / 400.0)
        assert peaks(found, [[-(w**2)]]).largest[0] == pytest.approx(height, rel=1e-5)


def test_k6_damper_force_at_once_after_a_velocity_step() -> None:
    # K6: z = 0.2, peak absolute acceleration 0.820919 dv w; z = 0.7: 1.4 at the start (Snowdon 1968).
    for ratio, wanted in ((0.2, 0.820919), (0.7, 1.4)):
        found = simulate([[1.0]], [[2 * ratio]], [[1.0]], np.zeros(200), 0.1, velocity=[1.0])
        outcome = peaks(found, [[-1.0]], [[-2 * ratio]])
        assert outcome.lowest[0] == pytest.approx(-wanted, rel=1e-6)
        if ratio > 0.5:
            assert outcome.lowest_time[0] == 0.0


def test_energy_in_is_energy_lost_and_kept() -> None:
    # Work of a load on a freedom = dissipated + kinetic + strain energy, by the trapezoidal rule in time (h^2).
    m, c, k = six_axis(8)
    step = 1e-4
    time = np.arange(8000) * step
    load = np.sin(40.0 * time)[:, None] * np.array([[5.0, 0, 3.0, 0, 1.0, 0]])
    found = simulate(m, c, k, load, step)
    v, q = found.velocity, found.displacement
    work = np.trapezoid(np.sum(load * v, axis=1), dx=step)
    lost = np.trapezoid(np.einsum("ti,ij,tj->t", v, c, v), dx=step)
    kept = 0.5 * (v[-1] @ m @ v[-1] + q[-1] @ k @ q[-1])
    assert work == pytest.approx(lost + kept, rel=1e-5)


@settings(deadline=None, max_examples=40)
@given(frequency=st.floats(0.3, 1.0), phase=st.floats(0.0, 6.28), offset=st.floats(-0.5, 0.5))
def test_extremes_between_samples_of_a_sine(frequency: float, phase: float, offset: float) -> None:
    # Fourteen samples a cycle and more: at most 1e-4 of the amplitude is lost.
    step = 2.0 * np.pi / 14.0
    angle = frequency * step * np.arange(60) + phase
    value, rate = np.sin(angle) + offset, frequency * np.cos(angle)
    outcome = extremes_between_samples(value, rate, rate, step)
    assert outcome.highest[0] == pytest.approx(1.0 + offset, abs=1.2e-4)
    assert outcome.lowest[0] == pytest.approx(-1.0 + offset, abs=1.2e-4)
    place = frequency * outcome.highest_time[0] + phase
    assert np.cos(place - 0.5 * np.pi) == pytest.approx(1.0, abs=1e-4)


def test_phi_functions_against_the_matrix_exponential() -> None:
    # exp of [[z, 1, 0], [0, 0, 1], [0, 0, 0]] holds phi1 and phi2 in its first row.
    for z in (0.0, 1e-9, 0.3 - 0.2j, 0.5, -0.49j, -3.0 + 40.0j, -50.0, 0.51j):
        row = expm(np.array([[z, 1, 0], [0, 0, 1], [0, 0, 0]], dtype=complex))[0]
        assert phi1(z) == pytest.approx(row[1], rel=1e-12, abs=1e-15)
        assert phi2(z) == pytest.approx(row[2], rel=1e-12, abs=1e-15)


def test_units_do_not_decide_the_route() -> None:
    # A chain of states in mm, rad and N: balanced before its modes are judged.
    a = np.array([[0.0, 1e6, 0.0], [-9e-3, -0.01, 1e-4], [0.0, 5e5, -40.0]])
    found = simulate_states(a, [[0.0], [1.0], [0.0]], np.ones(50), 0.01)
    wanted = np.linalg.solve(a, (expm(a * 0.49) - np.eye(3)) @ np.array([0.0, 1.0, 0.0]))
    assert found[-1] == pytest.approx(wanted, rel=1e-9)


def test_shapes_that_do_not_fit_are_refused() -> None:
    with pytest.raises(ValueError, match="does not fit the load shapes"):
        simulate(np.eye(2), np.eye(2), np.eye(2), np.zeros((5, 1)), 0.1)


def test_a_refined_record_is_the_same_motion() -> None:
    m, c, k = six_axis(9)
    record = np.random.default_rng(10).normal(size=(80, 2))
    shapes = np.random.default_rng(11).normal(size=(6, 2))
    finer, step = refined_record(record, 5e-3, 2.0 * np.pi * 60.0)
    # 60 Hz at 14 samples a cycle: 1.19 ms, a fifth of 5 ms.
    assert (step, finer.shape) == (pytest.approx(1e-3), (396, 2))
    coarse, fine = simulate(m, c, k, record, 5e-3, shapes), simulate(m, c, k, finer, step, shapes)
    assert fine.displacement[::5] == pytest.approx(
        coarse.displacement, abs=1e-12 * np.abs(coarse.displacement).max()
    )
    assert np.all(peaks(fine, np.eye(6)).largest >= (1.0 - 1e-12) * np.abs(coarse.displacement).max(axis=0))
