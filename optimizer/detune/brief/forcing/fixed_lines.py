"""Lines at fixed frequencies as tones, for the kinds of forcing that are made of them."""

import cmath
from dataclasses import dataclass

from detune.brief.forcing.base import Complex3, Tone, fixed_speed
from detune.brief.statement import Direction

MOST_LINES = 5000
# Displacement of the floor is v / (j w) or a / (j w)^2: the power of omega, and the factor that goes with it.
MOTION: dict[str, tuple[int, complex]] = {
    "displacement": (0, 1.0),
    "velocity": (-1, -1j),
    "acceleration": (-2, -1.0),
}


@dataclass(frozen=True)
class FixedLine:
    """A line in SI: frequency Hz, which quantity, peak amplitude, phase in rad or None."""

    frequency: float
    quantity: str
    peak: float
    phase: float | None


def line_tones(
    source: str,
    lines: tuple[FixedLine, ...],
    direction: Direction,
    on: str | None,
    position: tuple[float, float, float],
) -> tuple[Tone, ...]:
    """Return the tones of lines along a unit direction: floor motion, or a force at a place on a body."""
    tones = []
    for line in lines:
        power, factor = MOTION.get(line.quantity, (0, 1.0))
        turned = line.peak * factor * cmath.exp(1j * (line.phase or 0.0))
        vector: Complex3 = (direction[0] * turned, direction[1] * turned, direction[2] * turned)
        moves = line.quantity in MOTION
        tones.append(
            Tone(
                source=f"{source}, {line.frequency:g} Hz",
                speed=fixed_speed(line.frequency),
                order=1.0,
                low=line.frequency,
                high=line.frequency,
                on=None if moves else on,
                position=position,
                force=(0j, 0j, 0j) if moves else vector,
                base=vector if moves else None,
                power=power,
                phase_known=line.phase is not None,
            )
        )
    return tuple(tones)
