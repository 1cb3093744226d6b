"""The assessor's tables of one design beside its margins: what each station carries, and the modes."""

import numpy as np

from detune.brief.brief import Brief
from detune.brief.floor_matrix import FloorStructure
from detune.brief.statement import unit_direction
from detune.physics import modes, separation
from detune.response.assessment import ModeRow, StationRow
from detune.response.design import Design
from detune.response.direct import FLOOR, DirectMachine
from detune.response.direct_modes import DirectModes
from detune.response.direct_views import DirectStatic


def station_rows(brief: Brief, static: DirectStatic, design: Design) -> tuple[StationRow, ...]:
    """Return what every station carries at rest."""
    rows = []
    for station in brief.stations:
        mount = design.mounts[design.groups.index(station.group)]
        load = static.station_load(station.name)[0]
        compression = float(-static.station_deflection(station.name)[0, 2])
        rows.append(
            StationRow(
                station=station.name,
                group=station.group,
                part=mount.part,
                parallel=station.parallel,
                position=station.position,
                axial_load=float(-load[2]),
                lateral_load=float(np.hypot(load[0], load[1])),
                compression=compression,
                free_height=mount.free_height,
                installed_height=None if mount.free_height is None else mount.free_height - compression,
                load_min=mount.load_min,
                load_max=mount.load_max,
                levels=station.to == FLOOR and abs(unit_direction(station.axial)[2]) == 1.0,
            )
        )
    return tuple(rows)


def mode_rows(found: DirectModes, exempt: float | None, machine: DirectMachine) -> tuple[ModeRow, ...]:
    """Return the modes with name, amplification, participation, and separation from the nearest interval.

    Modes of a mass that was put into a floor without any are left out.
    """
    real = machine.elastic.real_up_to if isinstance(machine.elastic, FloorStructure) else np.inf
    rows = []
    # In a direction in which nothing can move there is no mass to take part: its share is zero.
    moves = np.any(found.directions != 0.0, axis=0)
    share = np.zeros((len(found.frequency), len(moves)))
    share[:, moves] = modes.participation(found.mass, found.shapes, found.directions[:, moves])
    for index, frequency in enumerate(found.frequency[found.frequency <= real]):
        each = [
            (float(separation.separation(frequency, low, high)), (float(low), float(high)))
            for low, high in found.intervals
        ]
        nearest = min(each) if each else None
        amplification = float(found.view.amplification[0, index])
        rows.append(
            ModeRow(
                frequency=float(frequency),
                name=modes.mode_name(found.shapes[:, index], found.names, found.mass),
                amplification=amplification,
                separation=None if nearest is None else nearest[0],
                interval=None if nearest is None else nearest[1],
                participation=tuple(float(value) for value in share[index]),
                exempt=exempt is not None and amplification < exempt,
            )
        )
    return tuple(rows)


def livelier(readings: list[tuple[ModeRow, ...]]) -> tuple[ModeRow, ...]:
    """Return the modes, which every reading of unknown damping has alike, each with its greatest amplification."""
    return tuple(max(rows, key=lambda row: row.amplification) for rows in zip(*readings, strict=True))
