"""Allowable kinds, one a file. A new kind is one file and one line in `KINDS`."""

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.added_mass import AddedMass
from detune.brief.allowable.band_limit import BandLimit
from detune.brief.allowable.base import (
    Allowable,
    BandAllowable,
    DesignAllowable,
    HarmonicAllowable,
    ModeAllowable,
    StaticAllowable,
)
from detune.brief.allowable.cost import CostLimit
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.floor_velocity import FloorVelocity
from detune.brief.allowable.gap import Gap
from detune.brief.allowable.level_difference import LevelDifference
from detune.brief.allowable.load_range import LoadRange
from detune.brief.allowable.machine_velocity import MachineVelocity
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.allowable.part_numbers import PartNumbers
from detune.brief.allowable.relative_motion import RelativeMotion
from detune.brief.allowable.sag import Sag
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.settling_time import SettlingTime
from detune.brief.allowable.stability import Stability
from detune.brief.allowable.tilt import Tilt
from detune.brief.allowable.transmissibility import Transmissibility
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.allowable.uplift import Uplift
from detune.brief.allowable.velocity import Velocity
from detune.brief.allowable.weighted_acceleration import WeightedAcceleration

KINDS: dict[str, type[Allowable]] = {
    "displacement": Displacement,
    "velocity": Velocity,
    "acceleration": Acceleration,
    "weighted-acceleration": WeightedAcceleration,
    "machine-velocity": MachineVelocity,
    "relative-motion": RelativeMotion,
    "gap": Gap,
    "floor-velocity": FloorVelocity,
    "band-limit": BandLimit,
    "transmitted-force": TransmittedForce,
    "transmissibility": Transmissibility,
    "mount-deflection": MountDeflection,
    "load-range": LoadRange,
    "uplift": Uplift,
    "sag": Sag,
    "tilt": Tilt,
    "level-difference": LevelDifference,
    "separation": Separation,
    "settling-time": SettlingTime,
    "stability": Stability,
    "cost": CostLimit,
    "added-mass": AddedMass,
    "part-numbers": PartNumbers,
}

__all__ = [
    "KINDS",
    "Acceleration",
    "AddedMass",
    "Allowable",
    "BandAllowable",
    "BandLimit",
    "CostLimit",
    "DesignAllowable",
    "Displacement",
    "FloorVelocity",
    "Gap",
    "HarmonicAllowable",
    "LevelDifference",
    "LoadRange",
    "MachineVelocity",
    "ModeAllowable",
    "MountDeflection",
    "PartNumbers",
    "RelativeMotion",
    "Sag",
    "Separation",
    "SettlingTime",
    "Stability",
    "StaticAllowable",
    "Tilt",
    "Transmissibility",
    "TransmittedForce",
    "Uplift",
    "Velocity",
    "WeightedAcceleration",
]
