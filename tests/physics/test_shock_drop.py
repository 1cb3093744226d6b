"""Velocity step and drop. Ids are those of CHECKS, section 5."""

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from detune.physics.shock import drop, velocity_step

G = 9.80665


def test_k5_drop_on_an_undamped_mount() -> None:
    # K5, Mindlin 1945, Crede 1951: h = 0.762 m, fn = 8 Hz: dv 3.86592 m/s, 76.910 mm, 19.8154 g without the weight;
    # 80.889 mm with it.
    omega = 2.0 * np.pi * 8.0
    found = drop(0.762, omega, 0.0)
    assert found.velocity_change == pytest.approx(3.86592, rel=1e-5)
    deflection, acceleration = velocity_step(omega, 0.0, found.velocity_change)
    assert deflection == pytest.approx(76.910e-3, rel=1e-5)
    assert acceleration / G == pytest.approx(19.8154, rel=1e-5)
    assert acceleration / G == pytest.approx(np.sqrt(2 * 0.762 * omega**2 / G), rel=1e-9)
    assert found.deflection == pytest.approx(80.889e-3, rel=1e-5)
    # Transit drop of MIL-STD-810F 516.5, 122 cm: 4.8917 m/s.
    assert drop(1.22, omega, 0.0).velocity_change == pytest.approx(4.8917, rel=2e-5)


def test_trap_accelerometer_and_kinematic_acceleration_differ_by_one_g() -> None:
    found = drop(0.5, 60.0, 0.1)
    assert found.accelerometer - found.kinematic_acceleration == pytest.approx(G, rel=1e-12)


def test_k6_damped_velocity_step() -> None:
    # K6, Snowdon 1968 (1e-6).
    deflection, acceleration = velocity_step(1.0, [0.1, 0.2, 0.4], 1.0)
    assert acceleration == pytest.approx([0.880144, 0.820919, 0.863510], abs=1e-6)
    assert deflection == pytest.approx([0.862600, 0.756135, 0.602932], abs=1e-6)
    # For z >= 0.5 the acceleration is 2 z, at the start.
    assert velocity_step(3.0, [0.5, 0.7, 1.0, 1.6], 2.0)[1] == pytest.approx([6.0, 8.4, 12.0, 19.2])


@pytest.mark.parametrize("ratio", [0.0, 0.3, 0.999999, 1.0, 2.5])
def test_velocity_step_against_integration(ratio: float) -> None:
    time = np.linspace(0.0, 8.0, 40_001)
    run = solve_ivp(
        lambda _, y: [y[1], -2 * ratio * y[1] - y[0]],
        (0.0, 8.0),
        [0.0, 1.0],
        t_eval=time,
        rtol=1e-10,
        atol=1e-12,
    )
    deflection, acceleration = velocity_step(1.0, ratio, 1.0)
    assert deflection == pytest.approx(np.abs(run.y[0]).max(), rel=1e-6)
    assert acceleration == pytest.approx(np.abs(run.y[0] + 2 * ratio * run.y[1]).max(), rel=1e-6)


def test_damped_drop_with_its_weight_against_integration() -> None:
    omega, ratio, height = 50.0, 0.15, 0.3
    time = np.linspace(0.0, 0.3, 60_001)
    run = solve_ivp(
        lambda _, y: [y[1], G - 2 * ratio * omega * y[1] - omega**2 * y[0]],
        (0.0, 0.3),
        [0.0, np.sqrt(2 * G * height)],
        t_eval=time,
        rtol=1e-10,
        atol=1e-13,
    )
    found = drop(height, omega, ratio)
    assert found.deflection == pytest.approx(run.y[0].max(), rel=1e-6)
    assert found.accelerometer == pytest.approx(
        (omega**2 * run.y[0] + 2 * ratio * omega * run.y[1]).max(), rel=1e-6
    )


def test_drops_in_a_batch_and_refusals() -> None:
    found = drop([0.1, 0.2], [[40.0], [60.0]], 0.05)
    assert found.deflection.shape == (2, 2)
    with pytest.raises(ValueError, match="height"):
        drop(-0.1, 40.0, 0.05)
    with pytest.raises(ValueError, match="not below zero"):
        velocity_step(1.0, -0.1, 1.0)
