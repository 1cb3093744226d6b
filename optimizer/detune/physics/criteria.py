"""Vibration criteria as data: velocity lines for sensitive rooms, the ISO 2631-2 base curve, machine zone
limits.

Every row says where it comes from and how far that can be trusted. "read" means that the figures were read in
the source or a transcription of it; "from memory" means that they agree with several texts but were not read
there.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from detune.physics.array_types import ArrayLike, FloatArray
from detune.physics.rigid_body import STANDARD_GRAVITY
from detune.physics.tables import require_inside

Edition = Literal["inch", "metric"]
INCH = 0.0254


@dataclass(frozen=True)
class VelocityLine:
    """One criterion on the rms velocity in each one-third-octave band, in micro-inches a second on its
    plateau.

    metric: the rounded metric figure in um/s commonly printed for it. From plateau_from (Hz) up to 80 Hz the
    velocity is constant. Below it, down to lowest (Hz), the acceleration is constant: that of the plateau's
    end, or low_acceleration (in micro-g rms) where the criterion states one.
    """

    micro_inches: float
    metric: float
    plateau_from: float
    lowest: float
    low_acceleration: float | None
    source: str


_ISO = "ISO 2631-2:1989 multiple; ASHRAE table of equipment criteria, read"
_GORDON = "C. G. Gordon, Proc. SPIE 1619 (1991); ASHRAE table down to VC-D, read"
_IEST = "IEST-RP-CC012, from memory"

VELOCITY_LINES: dict[str, VelocityLine] = {
    "workshop": VelocityLine(32000.0, 800.0, 8.0, 4.0, None, _ISO),
    "office": VelocityLine(16000.0, 400.0, 8.0, 4.0, None, _ISO),
    "residential": VelocityLine(8000.0, 200.0, 8.0, 4.0, None, _ISO),
    "operating theatre": VelocityLine(4000.0, 100.0, 8.0, 4.0, None, _ISO),
    "VC-A": VelocityLine(2000.0, 50.0, 8.0, 4.0, 260.0, _GORDON),
    "VC-B": VelocityLine(1000.0, 25.0, 8.0, 4.0, 130.0, _GORDON),
    "VC-C": VelocityLine(500.0, 12.5, 1.0, 1.0, None, _GORDON),
    "VC-D": VelocityLine(250.0, 6.25, 1.0, 1.0, None, _GORDON),
    "VC-E": VelocityLine(125.0, 3.12, 1.0, 1.0, None, _IEST),
    "VC-F": VelocityLine(62.5, 1.56, 1.0, 1.0, None, _IEST),
    "VC-G": VelocityLine(31.25, 0.78, 1.0, 1.0, None, _IEST),
}
HIGHEST_LINE_FREQUENCY = 80.0


def velocity_line(name: str, frequency: ArrayLike, edition: Edition = "inch") -> FloatArray:
    """Limit in m/s rms of a named criterion at one-third-octave centres in Hz (any shape).

    edition "inch" takes the plateau in micro-inches a second (VC-A 50.8 um/s), "metric" the rounded figure
    (50 um/s, the stricter by 1.6 %); accelerations stated in micro-g belong to the inch figures and are
    lowered in proportion. Raises KeyError for an unknown name and OutsideTable beyond the frequencies the
    criterion covers.
    """
    line = VELOCITY_LINES[name]
    f = np.asarray(frequency, dtype=float)
    # Nominal and exact centres both count as the band: 80 Hz stands for 79.43 Hz.
    require_inside(f"{name}: frequency", "Hz", f, line.lowest * 0.99, HIGHEST_LINE_FREQUENCY * 1.01)
    plateau = line.micro_inches * 1e-6 * INCH if edition == "inch" else line.metric * 1e-6
    if line.low_acceleration is None:
        slow = plateau * line.plateau_from / f
    else:
        share = plateau / (line.micro_inches * 1e-6 * INCH)
        slow = share * line.low_acceleration * 1e-6 * STANDARD_GRAVITY / (2.0 * np.pi * f)
    # Exact centres a little below the corner (7.943 for 8 Hz) belong to the plateau.
    return np.where(f < 0.99 * line.plateau_from, slow, plateau)


BASE_ACCELERATION = 5e-3


def iso_2631_base_curve(frequency: ArrayLike, multiplier: float = 1.0) -> FloatArray:
    """Base curve for the vertical axis of ISO 2631-2:1989 as rms velocity in m/s at centres from 4 to 80 Hz.

    5 mm/s2 rms from 4 to 8 Hz, constant velocity above (99.5 um/s); multiplier 4 for offices, 8 for workshops
    and so on. From memory. Raises OutsideTable.
    """
    f = np.asarray(frequency, dtype=float)
    require_inside("base curve: frequency", "Hz", f, 4.0 * 0.99, HIGHEST_LINE_FREQUENCY * 1.01)
    return np.asarray(multiplier * BASE_ACCELERATION / (2.0 * np.pi * np.minimum(f, 8.0)))


@dataclass(frozen=True)
class ZoneLimits:
    """Boundaries A/B, B/C and C/D of rms velocity in m/s on non-rotating parts, and where the figures come
    from.
    """

    a_to_b: float
    b_to_c: float
    c_to_d: float
    source: str


def _zone(a: float, b: float, c: float, source: str) -> ZoneLimits:
    return ZoneLimits(a * 1e-3, b * 1e-3, c * 1e-3, source)


_GROUPS = "ISO 10816-3:2009 and ISO 20816-3"
_CLASSES = "ISO 10816-1:1995, annex B"

# Group 1 is above 300 kW, group 2 from 15 to 300 kW; measured broadband, 10 Hz (2 Hz if slow) to 1 kHz.
MACHINE_ZONES: dict[str, ZoneLimits] = {
    "group 1, rigid": _zone(2.3, 4.5, 7.1, f"{_GROUPS}, from memory"),
    "group 1, flexible": _zone(3.5, 7.1, 11.0, f"{_GROUPS}, from memory"),
    "group 2, rigid": _zone(1.4, 2.8, 4.5, f"{_GROUPS}, read in a transcription"),
    "group 2, flexible": _zone(2.3, 4.5, 7.1, f"{_GROUPS}, read in a transcription"),
    "class I": _zone(0.71, 1.8, 4.5, f"{_CLASSES}, from memory"),
    "class II": _zone(1.12, 2.8, 7.1, f"{_CLASSES}, read in a transcription"),
    "class III": _zone(1.8, 4.5, 11.2, f"{_CLASSES}, from memory"),
    "class IV": _zone(2.8, 7.1, 18.0, f"{_CLASSES}, read in a transcription"),
}
