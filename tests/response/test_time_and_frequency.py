"""A simulation in time against the assessor's phasors, for random six-axis machines with dashpots.

With dashpots alone time and frequency hold the same machine (a loss factor does not exist in time; what stands
for it is tested with the shocks). Once the transient has died away, the motion under a sine is the real part of
the phasor times exp(j w t): both are compared freedom by freedom, by a fit of sine and cosine over whole cycles.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
import scipy.linalg

from detune.brief.forcing.base import Tone
from detune.brief.forcing.base_motion import BaseMotion
from detune.response.design import Design
from detune.response.direct import DirectMachine
from detune.response.direct_modes import direct_modes
from detune.response.direct_views import DirectTone
from response import machines

TWO_PI = 2.0 * math.pi
CYCLES = 6
PER_CYCLE = 400


def steady(matrix: np.ndarray, load: np.ndarray, omega: float, settled: float) -> np.ndarray:
    """Phasor (2n,) of y' = A y + Re(b exp(j w t)), from rest: stepped through, then fitted to sine and cosine.

    Each step is exact for a load that is straight between samples (scipy.linalg.expm of the augmented matrix);
    400 samples a cycle leave an error of (w h)^2 / 12 = 2e-5.
    """
    step = TWO_PI / omega / PER_CYCLE
    size = len(matrix)
    augmented = np.zeros((3 * size, 3 * size))
    augmented[:size, :size] = matrix * step
    augmented[:size, size : 2 * size] = np.eye(size) * step
    augmented[size : 2 * size, 2 * size :] = np.eye(size)
    turned = scipy.linalg.expm(augmented)
    keep, first, second = turned[:size, :size], turned[:size, size : 2 * size], turned[:size, 2 * size :]
    waited = PER_CYCLE * math.ceil(settled * omega / TWO_PI)
    count = waited + CYCLES * PER_CYCLE
    carried = np.exp(1j * omega * step * np.arange(count + 1))
    force = (carried[:, None] * load).real
    state = np.zeros(size)
    seen = np.zeros((CYCLES * PER_CYCLE, size))
    for i in range(count):
        if i >= waited:
            seen[i - waited] = state
        state = keep @ state + first @ force[i] + second @ (force[i + 1] - force[i])
    turn = np.exp(-1j * omega * step * np.arange(waited, count))
    return 2.0 * np.mean(turn[:, None] * seen, axis=0)


def check(machine: DirectMachine, tone: Tone, load: np.ndarray, follow: np.ndarray, frequency: float) -> None:
    """Hold every free freedom of the assessor's tone against the simulation, to 1e-3 of the largest of its kind.

    load (n,): phasor on the free freedoms; follow (n,): displacement phasor of the floor, which they ride on.
    """
    found = direct_modes(machine, [])
    n = len(found.mass)
    inverse = np.linalg.inv(found.mass)
    matrix = np.block([[np.zeros((n, n)), np.eye(n)], [-inverse @ found.stiffness, -inverse @ found.viscous]])
    omega = TWO_PI * frequency
    # Until what the start left has decayed to 1e-6.
    settled = 14.0 / float(np.min(-found.poles.real))
    own = np.concatenate([np.zeros(n), inverse @ load])
    simulated = steady(matrix, own, omega, settled)[:n] + follow
    phasor = DirectTone(machine, (tone,), np.array([[omega]])).q[0, machine.free]
    turns = np.array(["r" in freedom for _, freedom in machine.names])
    for kind in (turns, ~turns):
        error = np.abs(simulated - phasor)[kind].max()
        assert error <= 1e-3 * np.abs(phasor[kind]).max()


@pytest.mark.parametrize("flexible", [True, False], ids=["flexible floor", "rigid floor"])
@pytest.mark.parametrize("seed", [0, 1])
def test_a_harmonic_force_simulated_to_its_steady_state(seed: int, flexible: bool) -> None:
    brief, mounts = machines.random_machine(seed, viscous=True, flexible_floor=flexible)
    machine = DirectMachine(brief, Design(brief.groups, mounts, 0.0))
    (tone,) = brief.forcing[0].tones({})
    found = direct_modes(machine, [])
    frequencies = (float(found.frequency[0]), 17.0)
    stated = brief.forcing[0]
    arm = np.array(stated.position) - machine.centres["machine"]
    force = np.array(stated.force)
    # By hand: the force at the centre, and its moment about it beside the stated one.
    load = np.concatenate([force, np.array(stated.moment) + np.cross(arm, force)])
    load = np.concatenate([load, np.zeros(len(found.mass) - 6)]).astype(complex)
    for frequency in frequencies:
        check(machine, tone, load, np.zeros(len(load)), frequency)


@pytest.mark.parametrize("seed", [0, 1])
def test_a_moving_floor_simulated_to_its_steady_state(seed: int) -> None:
    """Relative to a rigid floor moving by u: M z'' + C z' + K z = -M i u'', and the machine is at z + i u."""
    brief, mounts = machines.random_machine(seed, viscous=True, flexible_floor=False)
    base = BaseMotion(name="road", frequency=(5.0, 60.0), direction=(1.0, 2.0, -2.0), displacement=3e-4)
    brief = brief.model_copy(update={"forcing": (base,)})
    machine = DirectMachine(brief, Design(brief.groups, mounts, 0.0))
    (tone,) = base.tones({})
    found = direct_modes(machine, [])
    # 3e-4 m along (1, 2, -2)/3.
    follow = np.array([1e-4, 2e-4, -2e-4, 0.0, 0.0, 0.0])
    for frequency in (float(found.frequency[0]), 21.0):
        load = found.mass @ follow * (TWO_PI * frequency) ** 2
        check(machine, tone, load.astype(complex), follow, frequency)
