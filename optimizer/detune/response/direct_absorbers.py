"""Absorbers of one design for the assessor: written out once more, from the design alone.

Each fitted absorber has a freedom of its own after all others: the motion of its mass along its direction.
Across that direction the mass moves with its point.
"""

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.brief.machine import Station
from detune.brief.state import apparent_gravity
from detune.brief.statement import unit_direction
from detune.parts.kinds.mount import Mount
from detune.response.design import Design

if TYPE_CHECKING:
    from detune.response.direct import DirectMachine

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class DirectAbsorber:
    """One fitted absorber: its place as a station, its part, and its number among those fitted."""

    station: Station
    mount: Mount
    number: int

    @property
    def body(self) -> str:
        assert self.station.on is not None  # Brief.every_station names the body of the point
        return self.station.on

    @property
    def position(self) -> Floats:
        return np.array(self.station.position)

    @property
    def along(self) -> Floats:
        return np.array(unit_direction(self.station.axial))

    def own(self, machine: "DirectMachine") -> Floats:
        """Row (N,) that picks the freedom of its mass."""
        row = np.zeros(machine.size)
        row[machine.size - len(machine.absorbers) + self.number] = 1.0
        return row

    def moving(self, machine: "DirectMachine") -> Floats:
        """Rows (3, N): global displacement of its mass."""
        point, d = machine.place(self.body, self.position), self.along
        return np.asarray(point + np.outer(d, self.own(machine) - d @ point))

    def across(self, machine: "DirectMachine") -> Floats:
        """Rows (3, N): global displacement of its mass relative to its point, along its direction alone."""
        return self.moving(machine) - machine.place(self.body, self.position)


def absorbers_of(brief: Brief, design: Design) -> tuple[DirectAbsorber, ...]:
    """Return the absorbers of a design, without those left out."""
    if not brief.absorbers:
        return ()
    places = brief.every_station[len(brief.stations) :]
    fitted = [(place, design.mounts[design.groups.index(place.group)]) for place in places]
    fitted = [(place, mount) for place, mount in fitted if mount.pieces > 0]
    return tuple(DirectAbsorber(place, mount, number) for number, (place, mount) in enumerate(fitted))


def absorber_mass(machine: "DirectMachine") -> Floats:
    """Return what all absorbers add to the mass matrix (N, N)."""
    total = np.zeros((machine.size, machine.size))
    for each in machine.absorbers:
        frame, mass = machine.place(each.body, each.position), each.moving(machine)
        total += each.mount.riding_mass * frame.T @ frame + each.mount.moving_mass * mass.T @ mass
    return total


def absorber_weight(machine: "DirectMachine") -> Floats:
    """Return the static load (N,) of all absorbers."""
    total, down = np.zeros(machine.size), np.array(apparent_gravity(machine.state))
    for each in machine.absorbers:
        total += machine.place(each.body, each.position).T @ (each.mount.riding_mass * down)
        total += each.moving(machine).T @ (each.mount.moving_mass * down)
    return total


def carried_weight(machine: "DirectMachine") -> Floats:
    """Return the static load (N,) of the whole machine as its bodies carry it, absorbers taken as fixed to them."""
    total = machine.weight_alone - absorber_weight(machine)
    for each in machine.absorbers:
        whole = each.mount.riding_mass + each.mount.moving_mass
        total = total + machine.place(each.body, each.position).T @ (
            whole * np.array(apparent_gravity(machine.state))
        )
    return total


def sliding_gravity(machine: "DirectMachine") -> Floats:
    """Return gravity's stiffness (N, N) between the turn t of a body and an absorber's motion s along d on
    it.

    The second derivative of -m g . (t x d) s.
    """
    total, down = np.zeros((machine.size, machine.size)), np.array(apparent_gravity(machine.state))
    for each in machine.absorbers:
        d = each.along
        # (t x d) . g = t . (d x g)
        turned = np.cross(d, each.mount.moving_mass * down) @ machine.turn(each.body)
        slid = d @ each.across(machine)
        total -= np.outer(slid, turned) + np.outer(turned, slid)
    return total
