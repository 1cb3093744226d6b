"""The press of the small study by hand: one mass on one lossy spring under a rotating unbalance.

Closed forms for x'' m + k (1 + j eta) x = U w^2 (Den Hartog, Mechanical Vibrations, ch. 2; derived anew):
x(w) = U w^2 / |k (1 + j eta) - m w^2|, largest U/m sqrt(1 + eta^2)/eta at (w / w_n)^2 = 1 + eta^2.
"""

import math

UNBALANCE = 0.02
MASS = 400.0
# Four mounts: dynamic stiffness N/m and loss factor as the list states them.
STIFFNESS = {"teasel-a": 4 * 120e3, "teasel-b": 4 * 150e3, "teasel-c": 4 * 900e3}
LOSS = {"teasel-a": 0.2, "teasel-b": 0.1, "teasel-c": 0.1}


def displacement(frequency: float, stiffness: float, loss: float, mass: float = MASS) -> float:
    """Amplitude in m at a frequency in Hz."""
    omega = 2.0 * math.pi * frequency
    return UNBALANCE * omega**2 / abs(stiffness * (1.0 + 1j * loss) - mass * omega**2)


def velocity(frequency: float, stiffness: float, loss: float, mass: float = MASS) -> float:
    """Amplitude in m/s."""
    return 2.0 * math.pi * frequency * displacement(frequency, stiffness, loss, mass)


def force(frequency: float, stiffness: float, loss: float, mass: float = MASS) -> float:
    """Amplitude of the force into the floor in N."""
    return abs(stiffness * (1.0 + 1j * loss)) * displacement(frequency, stiffness, loss, mass)


def natural_frequency(stiffness: float, mass: float = MASS) -> float:
    """Natural frequency in Hz."""
    return math.sqrt(stiffness / mass) / (2.0 * math.pi)


def peak_displacement(loss: float, mass: float = MASS) -> float:
    """Largest amplitude over all frequencies in m."""
    return UNBALANCE / mass * math.sqrt(1.0 + loss**2) / loss
