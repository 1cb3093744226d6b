"""Forcing kinds, one a file. A new kind is one file and one line in `KINDS`."""

from detune.brief.forcing.base import Forcing, Noise, Tone, Transient
from detune.brief.forcing.base_motion import BaseMotion
from detune.brief.forcing.harmonic_force import HarmonicForce
from detune.brief.forcing.rotating_unbalance import RotatingUnbalance
from detune.brief.forcing.shaft_orders import ShaftOrders
from detune.brief.forcing.slider_crank import SliderCrank

KINDS: dict[str, type[Forcing]] = {
    "harmonic-force": HarmonicForce,
    "rotating-unbalance": RotatingUnbalance,
    "slider-crank": SliderCrank,
    "shaft-orders": ShaftOrders,
    "base-motion": BaseMotion,
}

__all__ = [
    "KINDS",
    "BaseMotion",
    "Forcing",
    "HarmonicForce",
    "Noise",
    "RotatingUnbalance",
    "ShaftOrders",
    "SliderCrank",
    "Tone",
    "Transient",
]
