"""Modes and poles of one design, from the direct matrices."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.separation import least_separation
from detune.brief.allowable.views import ModeView
from detune.brief.statement import FREEDOMS
from detune.physics import modes
from detune.response.direct import FLOOR, DirectMachine
from detune.response.direct_table import with_resonances

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]


@dataclass(frozen=True)
class DirectModes:
    """n free freedoms: matrices (n, n), frequency (n,) Hz, mass-normalised shapes (n, n) as columns.

    `poles` are the complex roots of the quadratic eigenproblem (rad/s); `intervals` (k, 2) Hz the
    excitation intervals of the steady conditions; `directions` (n, 6) unit motions of the whole machine.
    """

    mass: Floats
    stiffness: Floats
    hysteretic: Floats
    viscous: Floats
    frequency: Floats
    shapes: Floats
    loss_factor: Floats
    poles: Complexes
    intervals: Floats
    names: tuple[str, ...]
    directions: Floats

    @property
    def view(self) -> ModeView:
        """What a mode allowable looks at."""
        with np.errstate(divide="ignore"):
            amplification = 1.0 / self.loss_factor
        return ModeView(
            self.frequency[None], amplification[None], self.intervals, lambda: -self.poles.real[None]
        )

    def least_separation(self, exempt: float | None) -> float:
        """Return the least separation over all modes that are not exempt."""
        return float(least_separation(self.view, exempt)[0])


def direct_modes(machine: DirectMachine, intervals: list[tuple[float, float]]) -> DirectModes:
    """Return the modes of one design, and the excitation intervals they are held against.

    A floor of tabulated dynamic stiffness stands in the modes as the spring and mass near it, in the poles as it is.
    """
    whole, machine = machine, machine.without_table
    mesh = np.ix_(machine.free, machine.free)
    mass = machine.mass[mesh]
    # Every element is k (1 + j eta) + j w c, so two frequencies tell hysteretic from viscous.
    one, two = (machine.stiffness(np.array([w]))[0][mesh] for w in (1.0, 2.0))
    viscous = two.imag - one.imag
    hysteretic, stiffness = one.imag - viscous, one.real
    frequency, shapes = modes.undamped_modes(mass, stiffness)
    loss_factor = modes.modal_loss_factors(shapes, hysteretic, viscous, frequency)
    if machine.with_frequency_laws:
        viscous = np.zeros_like(viscous)
        frequency, shapes, loss_factor, stiffness, hysteretic = _at_own_frequency(machine, mass, frequency)
        omega = 2.0 * np.pi * frequency
        poles = omega * (1j - 0.5 * loss_factor)
    else:
        poles = modes.damped_poles(mass, viscous, hysteretic, stiffness)
    directions = np.array([[float(freedom == name) for name in FREEDOMS] for _, freedom in machine.names])
    for absorber in machine.absorbers:
        directions[absorber.number - len(machine.absorbers), :3] = absorber.along
    poles = with_resonances(whole, poles)
    return DirectModes(
        mass=mass,
        stiffness=stiffness,
        hysteretic=hysteretic,
        viscous=viscous,
        frequency=frequency,
        shapes=shapes,
        loss_factor=loss_factor,
        poles=poles,
        intervals=np.array(intervals, dtype=float).reshape(-1, 2),
        names=tuple(_spoken(machine, node, freedom) for node, freedom in machine.names),
        directions=directions,
    )


def _spoken(machine: DirectMachine, node: str, freedom: str) -> str:
    if node in (FLOOR, "structure") or freedom == "along":
        return node
    return f"{node} {freedom}" if len(machine.brief.bodies) > 1 else freedom


def _at_own_frequency(
    machine: DirectMachine, mass: Floats, frequency: Floats
) -> tuple[Floats, Floats, Floats, Floats, Floats]:
    """Return frequency, shapes and loss factor of each mode at its own frequency, and causal matrices of them.

    The matrices keep each mode's own stiffness and loss: shapes found at different stiffnesses are made
    orthogonal by the mass (the polar factor of L^T shapes, M = L L^T).
    """
    mesh = np.ix_(machine.free, machine.free)
    frequency = frequency.copy()
    shapes = np.zeros((len(frequency), len(frequency)))
    loss = np.zeros_like(frequency)
    for mode in range(len(frequency)):
        for _ in range(400):
            full = machine.stiffness(np.array([2.0 * np.pi * frequency[mode]]))[0][mesh]
            found, found_shapes = modes.undamped_modes(mass, full.real)
            change = abs(found[mode] - frequency[mode])
            frequency[mode] = found[mode]
            if change <= 1e-11 * found[mode]:
                break
        shape = found_shapes[:, mode]
        shapes[:, mode] = shape
        loss[mode] = float(shape @ full.imag @ shape) / float(shape @ full.real @ shape)
    root = np.linalg.cholesky(mass)
    left, _, right = np.linalg.svd(root.T @ shapes)
    shapes = np.linalg.solve(root.T, left @ right)
    carried = mass @ shapes
    omega = 2.0 * np.pi * frequency
    stiffness = (carried * omega**2) @ carried.T
    return frequency, shapes, loss, stiffness, (carried * (loss * omega**2)) @ carried.T
