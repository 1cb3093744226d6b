"""Allowable kinds, one a file. A new kind is one file and one line in `KINDS`."""

from detune.brief.allowable.base import Allowable
from detune.ground.kind_table import KindTable

KINDS: KindTable[type[Allowable]] = KindTable(
    __name__,
    {
        "displacement": "displacement.Displacement",
        "velocity": "velocity.Velocity",
        "acceleration": "acceleration.Acceleration",
        "weighted-acceleration": "weighted_acceleration.WeightedAcceleration",
        "machine-velocity": "machine_velocity.MachineVelocity",
        "relative-motion": "relative_motion.RelativeMotion",
        "gap": "gap.Gap",
        "floor-velocity": "floor_velocity.FloorVelocity",
        "floor-ratio": "floor_ratio.FloorRatio",
        "band-limit": "band_limit.BandLimit",
        "transmitted-force": "transmitted_force.TransmittedForce",
        "transmissibility": "transmissibility.Transmissibility",
        "mount-deflection": "mount_deflection.MountDeflection",
        "load-range": "load_range.LoadRange",
        "uplift": "uplift.Uplift",
        "stroke": "stroke.Stroke",
        "sag": "sag.Sag",
        "tilt": "tilt.Tilt",
        "height": "height.Height",
        "temperature-range": "temperature_range.TemperatureRange",
        "level-difference": "level_difference.LevelDifference",
        "separation": "separation.Separation",
        "dwell-bands": "dwell_bands.DwellBands",
        "settling-time": "settling_time.SettlingTime",
        "stability": "stability.Stability",
        "cost": "cost.CostLimit",
        "added-mass": "added_mass.AddedMass",
        "part-numbers": "part_numbers.PartNumbers",
    },
)
