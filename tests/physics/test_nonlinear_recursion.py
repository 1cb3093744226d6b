"""Motion on curves by windows of exact steps: against scipy's adaptive integrator, and through kinks."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from detune.physics.load_curve import ElementLaw, law_force, load_curve
from detune.physics.nonlinear_recursion import run_on_laws

STEP, COUNT = 2.5e-4, 2000


def by_scipy(mass: np.ndarray, damping: np.ndarray, rows: np.ndarray, laws: list[ElementLaw], load: np.ndarray,
             start: np.ndarray) -> np.ndarray:  # fmt: skip
    n, time = len(mass), STEP * np.arange(len(load))
    inverse = np.linalg.inv(mass)

    def rates(t: float, y: np.ndarray) -> np.ndarray:
        f = np.array([np.interp(t, time, column) for column in load.T])
        d = rows @ y[:n]
        held = np.array([float(law_force(law, x)[0]) for law, x in zip(laws, d, strict=True)])
        return np.r_[y[n:], inverse @ (f - damping @ y[n:] - rows.T @ held)]

    found = solve_ivp(
        rates, (0.0, time[-1]), start.ravel(), t_eval=time, rtol=1e-10, atol=1e-13, max_step=STEP
    )
    return found.y[:n].T


@pytest.mark.parametrize("parts", [1, 2])
@pytest.mark.parametrize("kind", ["curve", "slack", "stop"])
def test_two_masses_against_an_adaptive_integrator(kind: str, parts: int) -> None:
    mass, damping = np.array([[12.0, 0.4], [0.4, 3.0]]), np.array([[90.0, -20.0], [-20.0, 60.0]])
    rows = np.array([[1.0, 0.0], [-1.0, 1.0]])
    curve = load_curve([-0.02, -0.01, 0.0, 0.01, 0.02, 0.03], [-500.0, -200.0, 0.0, 200.0, 500.0, 1000.0])
    first = {
        "curve": ElementLaw(curve=curve),
        "slack": ElementLaw(curve=curve, pulls=False),
        "stop": ElementLaw(stiffness=2e4, stop_gap=4e-3, stop_stiffness=1.5e5),
    }[kind]
    laws = [first, ElementLaw(stiffness=3e4)]
    time = STEP * np.arange(COUNT)
    pulse = np.where(time < 0.02, 900.0 * np.sin(np.pi * time / 0.02), 0.0)
    load = np.stack([100.0 + pulse, 0.3 * pulse], axis=1)
    start = np.array([[5e-3, 6e-3], [0.1, -0.2]])
    found = run_on_laws(mass, damping, rows, laws, np.zeros(2), load, STEP, parts, start)
    expected = by_scipy(mass, damping, rows, laws, load, start)
    close = 2e-6 if kind == "curve" else 2e-5
    assert np.max(np.abs(found[:, 0] - expected)) < close * np.abs(expected).max()


def test_a_mass_in_free_flight_that_lands() -> None:
    # Nothing holds 2 kg at 1 m/s 10 mm before a spring of 80 kN/m; there it turns, 1 J being kept all the while.
    law = ElementLaw(curve=load_curve([0.0, 0.05], [0.0, 4000.0]), pulls=False)
    start = np.array([[-0.01], [1.0]])
    found = run_on_laws(np.array([[2.0]]), np.zeros((1, 1)), np.ones((1, 1)), [law], np.zeros(1),
                        np.zeros((300, 1)), 1e-4, 1, start)  # fmt: skip
    kept = found[:, 1, 0] ** 2 + 4e4 * np.maximum(found[:, 0, 0], 0.0) ** 2
    assert np.abs(kept - 1.0).max() < 1e-5
    assert found[:, 0].max() == pytest.approx(np.sqrt(2.0 / 8e4), rel=1e-4)
    assert found[-1, 0, 0] < 0.0 and found[-1, 1, 0] == pytest.approx(-1.0, rel=1e-5)
    assert np.abs(found[:100, 0, 0] - (-0.01 + 1e-4 * np.arange(100))).max() < 1e-12
