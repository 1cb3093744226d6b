"""What to fix besides mounts: absorbers with their tuning and stroke, and the pieces of ballast."""

import math
from dataclasses import dataclass

from detune.brief.brief import Brief
from detune.brief.machine import Station
from detune.brief.statement import unit_direction
from detune.ground.units import STANDARD_GRAVITY, show
from detune.parts.kinds.mount import Mount
from detune.report.csv_files import Cell, csv_text
from detune.report.tables import Table
from detune.report.words import margin_text, percent
from detune.response.assessment import Assessment
from detune.response.design import ballast_of


@dataclass(frozen=True)
class FittedAbsorber:
    """One absorber of a design: its place, its part, and the least margin of its stroke with the motion there."""

    place: Station
    mount: Mount
    motion: float
    margin: float

    @property
    def tuning(self) -> float:
        """Natural frequency on a fixed base, Hz."""
        return math.sqrt(self.mount.stiffness_dynamic[2] / self.mount.moving_mass) / (2.0 * math.pi)

    @property
    def rests_at(self) -> float:
        """How far the mass settles along its direction under its own weight, m."""
        upright = abs(unit_direction(self.place.axial)[2])
        return self.mount.moving_mass * STANDARD_GRAVITY * upright / self.mount.stiffness_static[2]


def fitted_absorbers(brief: Brief, assessment: Assessment) -> tuple[FittedAbsorber, ...]:
    """Return the absorbers of a design, those left out not among them."""
    design = assessment.design
    found = []
    for place in brief.every_station[len(brief.stations) :]:
        mount = design.mounts[design.groups.index(place.group)]
        strokes = [row for row in assessment.margins if row.kind == "stroke" and row.place == place.name]
        if mount.pieces and strokes:
            worst = min(strokes, key=lambda row: row.margin)
            found.append(FittedAbsorber(place, mount, worst.value, worst.margin))
    return tuple(found)


def absorbers_table(brief: Brief, assessment: Assessment) -> Table:
    """Return the absorbers to fit: where, along which direction, mass, tuning, damping and stroke."""
    rows = tuple(
        (
            each.place.name,
            each.mount.part,
            str(each.place.on),
            *(f"{1e3 * value:.0f} mm" for value in each.place.position),
            ", ".join(f"{value:.3g}" for value in unit_direction(each.place.axial)),
            show(each.mount.moving_mass, "mass"),
            show(each.mount.riding_mass, "mass"),
            show(each.tuning, "frequency"),
            percent(each.mount.damping_stated),
            show(each.rests_at, "length", 3),
            show(each.motion, "length", 3),
            "not stated" if each.mount.stroke is None else show(each.mount.stroke, "length", 3),
            margin_text(each.margin),
        )
        for each in fitted_absorbers(brief, assessment)
    )
    note = (
        "Moving mass on its own spring and damper, and the frame that moves with the machine. Tuning and damping ratio "
        "are those on a fixed base, as listed. Settles: along its direction under its own weight. Motion: the "
        "largest of the mass against its frame in any condition, from where it rests; the stroke is its limit. A "
        "tuning scatters by its tolerance and drifts with temperature: measure it on the machine."
    )
    columns = (
        *(
            "absorber",
            "part",
            "on",
            "x",
            "y",
            "z",
            "direction",
            "moving mass",
            "frame",
            "tuning",
            "damping ratio",
        ),
        *("settles", "motion", "stroke", "margin"),
    )
    return Table("Absorbers", columns, rows, frozenset({3, 4, 5, *range(7, 15)}), note)


def ballast_table(brief: Brief, assessment: Assessment) -> Table:
    """Return the ballast to bolt on: how many pieces, their size and where the stack reaches."""
    step = ballast_of(brief, assessment.design)
    if brief.ballast is None or step.mass == 0.0:
        return Table("Ballast", (), ())
    half = 0.5 * step.size[2]
    rows = (
        (
            step.part,
            brief.bodies[0].name if brief.ballast.on is None else brief.ballast.on,
            show(step.mass, "mass"),
            *(f"{1e3 * value:.0f} mm" for value in step.centre),
            " x ".join(f"{1e3 * side:.0f}" for side in step.size) + " mm",
            f"{1e3 * (step.centre[2] - half):.0f} to {1e3 * (step.centre[2] + half):.0f} mm",
        ),
    )
    note = "Centre and size of all of it together, as a block of even density; heights from the origin of the study."
    columns = ("ballast", "on", "mass", "x", "y", "z", "size", "from height to height")
    return Table("Ballast", columns, rows, frozenset(range(2, 8)), note)


def absorbers_csv(brief: Brief, assessment: Assessment) -> str:
    """Return the absorbers of a design as CSV, SI with the unit in each header."""
    columns = ["absorber", "part", "catalog", "body", "x [m]", "y [m]", "z [m]"]
    columns += [
        "direction x [-]",
        "direction y [-]",
        "direction z [-]",
        "moving mass [kg]",
        "frame mass [kg]",
    ]
    columns += ["tuning [Hz]", "damping ratio [-]", "settles [m]", "motion [m]", "stroke [m]", "margin [-]"]
    rows: list[list[Cell]] = [
        [
            *(each.place.name, each.mount.part, each.mount.catalog, each.place.on, *each.place.position),
            *unit_direction(each.place.axial),
            *(each.mount.moving_mass, each.mount.riding_mass, each.tuning, each.mount.damping_stated),
            *(each.rests_at, each.motion, each.mount.stroke, each.margin),
        ]
        for each in fitted_absorbers(brief, assessment)
    ]
    return csv_text(columns, rows)
