"""Shock on progressive mounts and stops: against energy, the linear recursion and an adaptive integrator."""

import numpy as np
import pytest
from scipy.integrate import solve_ivp
from scipy.optimize import brentq

from detune.physics.load_curve import ElementLaw, at_rest, law_force, load_curve
from detune.physics.nonlinear_simulation import simulate_on_laws
from detune.physics.pulses import half_sine, sampled_pulse
from detune.physics.simulation import simulate


def test_linear_laws_follow_the_exact_recursion() -> None:
    mass, damping = np.diag([10.0, 0.5]), np.diag([50.0, 1.0])
    rows, step = np.array([[1.0, 0.2], [1.0, -0.2]]), 0.011 / 22
    before, _ = sampled_pulse(half_sine(-1000.0, 0.011), step, 200)
    shapes = [[1.0], [0.1]]
    found = simulate_on_laws(mass, damping, rows, [ElementLaw(stiffness=2e4)] * 2, before, step, shapes)
    exact = simulate(mass, damping, rows.T @ (2e4 * rows), before, step, shapes)
    assert np.max(np.abs(found.motion.displacement - exact.displacement)) < 1e-6 * exact.displacement.max()
    assert found.beyond == (False, False)


def test_a_blow_against_a_stop_keeps_its_energy() -> None:
    # 1 kg at 2 m/s on 1 kN/m with a stop of 100 kN/m after 20 mm: 1/2 m v^2 = 1/2 k d^2 + 1/2 ks (d - g)^2.
    law = ElementLaw(stiffness=1e3, stop_gap=0.02, stop_stiffness=1e5)
    found = simulate_on_laws([[1.0]], [[0.0]], [[1.0]], [law], np.zeros(500), 1e-4, velocity=[2.0])
    deepest = brentq(lambda d: 500.0 * d**2 + 5e4 * (d - 0.02) ** 2 - 2.0, 0.02, 0.05)
    assert found.deflection.max() == pytest.approx(deepest, rel=1e-4)
    assert found.error < 1e-3


def test_progressive_mount_under_a_pulse_against_an_adaptive_integrator() -> None:
    curve = load_curve([0.0, 0.002, 0.004, 0.006, 0.008], [0.0, 60.0, 150.0, 320.0, 700.0])
    law = ElementLaw(curve=curve, pulls=False)
    rest = at_rest([[1.0]], [law], [98.0665])
    pulse, step = half_sine(60.0, 0.02), 0.02 / 40
    before, _ = sampled_pulse(pulse, step, 160)
    found = simulate_on_laws(
        [[10.0]],
        [[40.0]],
        [[1.0]],
        [law],
        -10.0 * before,
        step,
        steady=[98.0665],
        displacement=rest.displacement,
    )
    time = np.arange(160) * step

    def rate(t: float, y: list[float]) -> list[float]:
        load = 98.0665 - 10.0 * float(np.interp(t, time, before))
        return [y[1], (load - 40.0 * y[1] - float(law_force(law, y[0])[0])) / 10.0]

    run = solve_ivp(
        rate, (0.0, time[-1]), [rest.displacement[0], 0.0], t_eval=time, rtol=1e-9, atol=1e-12, max_step=step
    )
    assert np.max(np.abs(found.motion.displacement[:, 0] - run.y[0])) < 1e-5 * np.abs(run.y[0]).max()


def test_leaving_the_table_is_told() -> None:
    curve = load_curve([0.0, 0.004], [0.0, 40.0])
    found = simulate_on_laws(
        [[1.0]], [[0.0]], [[1.0]], [ElementLaw(curve=curve, pulls=False)], np.zeros(60), 1e-3, velocity=[0.5]
    )
    assert found.beyond == (True,)
