"""Forcing kinds, one a file. A new kind is one file and one line in `KINDS`."""

from detune.brief.forcing.band_base_motion import BandBaseMotion
from detune.brief.forcing.base import Forcing, Noise, Tone, Transient
from detune.brief.forcing.base_motion import BaseMotion
from detune.brief.forcing.base_pulse import BasePulse
from detune.brief.forcing.drop import Drop
from detune.brief.forcing.force_pulse import ForcePulse
from detune.brief.forcing.harmonic_force import HarmonicForce
from detune.brief.forcing.line_spectrum import LineSpectrum
from detune.brief.forcing.measured_record import MeasuredRecord
from detune.brief.forcing.random_base_motion import RandomBaseMotion
from detune.brief.forcing.random_force import RandomForce
from detune.brief.forcing.rotating_unbalance import RotatingUnbalance
from detune.brief.forcing.shaft_orders import ShaftOrders
from detune.brief.forcing.slider_crank import SliderCrank
from detune.brief.forcing.torque_reaction import TorqueReaction
from detune.brief.forcing.two_plane_unbalance import TwoPlaneUnbalance
from detune.brief.forcing.velocity_step import VelocityStep

KINDS: dict[str, type[Forcing]] = {
    "harmonic-force": HarmonicForce,
    "rotating-unbalance": RotatingUnbalance,
    "slider-crank": SliderCrank,
    "shaft-orders": ShaftOrders,
    "base-motion": BaseMotion,
    "random-base-motion": RandomBaseMotion,
    "random-force": RandomForce,
    "base-pulse": BasePulse,
    "force-pulse": ForcePulse,
    "velocity-step": VelocityStep,
    "drop": Drop,
    "band-base-motion": BandBaseMotion,
    "line-spectrum": LineSpectrum,
    "measured-record": MeasuredRecord,
    "torque-reaction": TorqueReaction,
    "two-plane-unbalance": TwoPlaneUnbalance,
}

__all__ = [
    "KINDS",
    "BandBaseMotion",
    "BaseMotion",
    "BasePulse",
    "Drop",
    "ForcePulse",
    "Forcing",
    "HarmonicForce",
    "LineSpectrum",
    "MeasuredRecord",
    "Noise",
    "RandomBaseMotion",
    "RandomForce",
    "RotatingUnbalance",
    "ShaftOrders",
    "SliderCrank",
    "Tone",
    "TorqueReaction",
    "Transient",
    "TwoPlaneUnbalance",
    "VelocityStep",
]
