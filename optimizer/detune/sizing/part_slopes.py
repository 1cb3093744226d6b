"""What one made part is like at given unknowns, and how each of its figures changes with every unknown.

The same figures as `made_parts.made_mount`, as plain numbers with their exact derivatives. With n equal parts under an
absorber of mass m: n k = m (2 pi f)^2 and n c = 2 z sqrt(m n k), so dk/df = 2 k / f, dk/dm = k / m, and so on.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief
from detune.brief.sizing import MadePart, SizingUnknown
from detune.sizing.made_parts import made_table, sizing_of

Floats = NDArray[np.float64]
# Places of the figures of a part: dynamic stiffness and viscous damping by local axis, loss factor, price.
STIFFNESS = slice(0, 3)
VISCOUS = slice(3, 6)
LOSS = 6
PRICE = 7
FIGURES = 8


@dataclass(frozen=True)
class PartLaw:
    """The part of one group: what the study states of it, which unknowns it follows, and how many there are.

    `pieces` carry the machine (an absorber's tuning is theirs together); `unknowns` are all of the study, in order.
    `absorber_mass` (kg) is that of the body tuned by an unknown, where its mass is none.
    """

    made: MadePart
    pieces: int
    unknowns: tuple[SizingUnknown, ...]
    absorber_mass: float | None

    def column(self, kind: str, axis: str | None = None) -> int | None:
        """Where an unknown of this group stands, None where there is none of this kind."""
        for place, unknown in enumerate(self.unknowns):
            if unknown.group == self.made.group and unknown.kind == kind and unknown.axis == axis:
                return place
        return None


def part_law(brief: Brief, group: str) -> PartLaw:
    """The law of one group's parts."""
    unknowns = sizing_of(brief).unknown
    pieces = sum(station.parallel for station in brief.stations if station.group == group)
    body = next((u.body for u in unknowns if u.group == group and u.body is not None), None)
    mass = None
    if body is not None:
        from detune.brief.mass_properties import mass_properties

        mass = mass_properties(next(each for each in brief.bodies if each.name == body)).mass
    return PartLaw(made_table(brief, group), pieces, unknowns, mass)


def part_figures(law: PartLaw, values: Floats) -> tuple[Floats, Floats]:
    """(figures (8,), their slopes (8, u)) of one part at the values (u,) of the unknowns, SI."""
    made, count = law.made, len(values)
    figures, slopes = np.zeros(FIGURES), np.zeros((FIGURES, count))
    axial, by_axial = _axial(law, values)
    damping, by_damping = _damping(law, values, axial, by_axial)
    _put(figures, slopes, 2, axial, by_axial)
    _put(figures, slopes, 5, damping, by_damping)
    lateral = law.column("stiffness", "lateral")
    for place, name in enumerate(("x", "y")):
        own = law.column("stiffness", name)
        own = lateral if own is None else own
        if own is not None:
            _put(figures, slopes, place, float(values[own]), _unit(own, count))
        elif made.lateral_ratio is not None:
            _put(figures, slopes, place, made.lateral_ratio * axial, made.lateral_ratio * by_axial)
        if figures[0] > 0.0:
            share = made.damping_lateral_ratio
            _put(figures, slopes, 3 + place, share * damping, share * by_damping)
    loss = law.column("loss-factor")
    if loss is None:
        figures[LOSS] = made.loss_factor or 0.0
    else:
        _put(figures, slopes, LOSS, float(values[loss]), _unit(loss, count))
    price = np.zeros(FIGURES)
    price[[2, 5, LOSS]] = made.cost_per_stiffness / 1e3, made.cost_per_damping, made.cost_per_loss_factor
    _put(figures, slopes, PRICE, made.cost + float(price @ figures), price @ slopes)
    return figures, slopes


def _put(figures: Floats, slopes: Floats, place: int, value: float, slope: Floats) -> None:
    figures[place], slopes[place] = value, slope


def _unit(column: int, count: int) -> Floats:
    slope = np.zeros(count)
    slope[column] = 1.0
    return slope


def _mass(law: PartLaw, values: Floats, body: str | None) -> tuple[float, Floats]:
    """Mass of an absorber's body and its slope."""
    for place, unknown in enumerate(law.unknowns):
        if unknown.kind == "absorber-mass" and unknown.body == body:
            return float(values[place]), _unit(place, len(values))
    assert law.absorber_mass is not None
    return law.absorber_mass, np.zeros(len(values))


def _axial(law: PartLaw, values: Floats) -> tuple[float, Floats]:
    count = len(values)
    tuning = law.column("absorber-tuning")
    if tuning is not None:
        mass, by_mass = _mass(law, values, law.unknowns[tuning].body)
        omega2 = (2.0 * np.pi * float(values[tuning])) ** 2 / law.pieces
        slope = omega2 * by_mass + 2.0 * mass * omega2 / float(values[tuning]) * _unit(tuning, count)
        return mass * omega2, slope
    if law.made.stiffness is not None:
        return law.made.stiffness, np.zeros(count)
    own = law.column("stiffness", "axial")
    assert own is not None  # the cross-check admits no group without
    return float(values[own]), _unit(own, count)


def _damping(law: PartLaw, values: Floats, axial: float, by_axial: Floats) -> tuple[float, Floats]:
    count = len(values)
    ratio = law.column("absorber-damping")
    if ratio is not None:
        mass, by_mass = _mass(law, values, law.unknowns[ratio].body)
        critical = 2.0 * float(np.sqrt(mass * axial * law.pieces)) / law.pieces
        share = float(values[ratio])
        slope = critical * _unit(ratio, count) + share * critical / 2.0 * (by_mass / mass + by_axial / axial)
        return share * critical, slope
    own = law.column("viscous")
    if own is not None:
        return float(values[own]), _unit(own, count)
    return law.made.viscous or 0.0, np.zeros(count)
