"""Forcing kinds, one a file. A new kind is one file and one line in `KINDS`."""

from detune.brief.forcing.base import Forcing
from detune.ground.kind_table import KindTable

KINDS: KindTable[type[Forcing]] = KindTable(
    __name__,
    {
        "harmonic-force": "harmonic_force.HarmonicForce",
        "rotating-unbalance": "rotating_unbalance.RotatingUnbalance",
        "slider-crank": "slider_crank.SliderCrank",
        "shaft-orders": "shaft_orders.ShaftOrders",
        "base-motion": "base_motion.BaseMotion",
        "random-base-motion": "random_base_motion.RandomBaseMotion",
        "random-force": "random_force.RandomForce",
        "base-pulse": "base_pulse.BasePulse",
        "force-pulse": "force_pulse.ForcePulse",
        "velocity-step": "velocity_step.VelocityStep",
        "drop": "drop.Drop",
        "band-base-motion": "band_base_motion.BandBaseMotion",
        "line-spectrum": "line_spectrum.LineSpectrum",
        "measured-record": "measured_record.MeasuredRecord",
        "torque-pulse": "torque_pulse.TorquePulse",
        "torque-reaction": "torque_reaction.TorqueReaction",
        "two-plane-unbalance": "two_plane_unbalance.TwoPlaneUnbalance",
    },
)
