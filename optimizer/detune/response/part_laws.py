"""Parts whose stiffness depends on load, frequency, temperature or amplitude, for a batch of designs."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.parts.kinds.mount import Mount, MountArrays
from detune.parts.laws import AmplitudeTable, curve_physics, table_physics
from detune.physics.load_curve import LoadCurve, load_curve
from detune.physics.relaxation import StiffnessTable, table_stiffness

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
Integers = NDArray[np.intp]
TWO_PI = 2.0 * np.pi
AIR_SPRING_RANGE = np.geomspace(0.02, 5.0, 400)


@dataclass(frozen=True, eq=False)
class GroupLaws:
    """What the P parts of a group have beyond constants; the arrays hold the constant part of each.

    `curves`: load over deflection, an air spring's too. `relaxation` (P,): N, 0 where none, with its dashpot
    `dashpot` (P, 3), which the arrays do not hold then.
    """

    curves: tuple[LoadCurve | None, ...]
    relaxation: Floats
    dashpot: Floats
    tables: tuple[StiffnessTable | None, ...]
    amplitudes: tuple[AmplitudeTable | None, ...]
    temperature: float

    @property
    def with_load(self) -> bool:
        return any(curve is not None for curve in self.curves)

    @property
    def with_frequency(self) -> bool:
        return bool(np.any(self.relaxation > 0.0)) or any(table is not None for table in self.tables)

    @property
    def with_amplitude(self) -> bool:
        return any(table is not None for table in self.amplitudes)


def group_laws(
    mounts: tuple[Mount, ...], arrays: MountArrays, temperature: float
) -> tuple[GroupLaws | None, MountArrays]:
    """Return the laws of a group's parts, None if all are plain, and the arrays of the constant parts."""
    if bool(np.all(arrays.plain)):
        return None, arrays
    relaxed = np.array([0.0 if m.relaxation is None else m.relaxation.stiffness_ratio for m in mounts])
    laws = GroupLaws(
        curves=tuple(axial_curve(mount) for mount in mounts),
        relaxation=relaxed,
        dashpot=np.where(relaxed[:, None] > 0.0, np.nan_to_num(arrays.viscous), 0.0),
        tables=tuple(
            None if m.law_table is None else table_physics(m.law_table, temperature) for m in mounts
        ),
        amplitudes=tuple(mount.amplitude_table for mount in mounts),
        temperature=temperature,
    )
    constant = np.where(relaxed[:, None] > 0.0, 0.0, np.nan_to_num(arrays.viscous))
    return laws, replace(arrays, viscous=constant)


def axial_curve(mount: Mount) -> LoadCurve | None:
    """Return a part's axial load over deflection where it is no straight line.

    An air spring, k = k_rated F / F_rated, has F = F_rated exp(d / L) with L = F_rated / k_rated; its
    deflection counts from the height at rated load.
    """
    if mount.load_curve is not None:
        return curve_physics(mount.load_curve)
    if not mount.follows_load:
        return None
    assert mount.load_rated is not None  # held by the catalog's rules
    length = mount.load_rated / mount.stiffness_static[2]
    return load_curve(length * np.log(AIR_SPRING_RANGE), mount.load_rated * AIR_SPRING_RANGE)


def frequency_part(
    laws: GroupLaws, arrays: MountArrays, part: Integers, stiffness: Floats, omega: Floats
) -> Complexes:
    """Return what a frequency law adds (D, F, 3) to the constant k (1 + j eta) of `stiffness` (D, 3).

    Relaxation: j w c N k / (N k + j w c). Table: k (r (1 + j eta_table) - (1 + j eta)). Sources: parts.laws.
    """
    added = np.zeros((*omega.shape, 3), dtype=complex)
    ratio = laws.relaxation[part]
    relaxed = np.flatnonzero(ratio > 0.0)
    if len(relaxed):
        series = (ratio[relaxed, None] * stiffness[relaxed])[:, None, :]
        dashpot = 1j * omega[relaxed][:, :, None] * laws.dashpot[part[relaxed]][:, None, :]
        added[relaxed] = dashpot * series / np.where(series > 0.0, series + dashpot, 1.0)
    for index in np.unique(part):
        table = laws.tables[index]
        if table is None:
            continue
        chosen = part == index
        ratio_there = table_stiffness(table, within_table(table, omega[chosen]), laws.temperature)
        constant = 1.0 + 1j * arrays.loss_factor[index]
        added[chosen] = stiffness[chosen][:, None, :] * (ratio_there[:, :, None] - constant)
    return added


def within_table(table: StiffnessTable, omega: Floats) -> Floats:
    """Return omega held within the table's frequencies.

    Excitation outside a table is refused when the problem is built; only a search for natural frequencies
    goes beyond, and takes the end value there.
    """
    return np.clip(
        omega, TWO_PI * table.frequency[0] * (1.0 + 1e-12), TWO_PI * table.frequency[-1] * (1.0 - 1e-12)
    )


def amplitude_part(laws: GroupLaws, part: Integers, amplitude: Floats) -> tuple[Floats, Floats]:
    """Return stiffness ratio and loss factor (D,) at axial amplitudes (D,) in m; nan loss where no table.

    Straight between the table's points and constant beyond its ends, which the report tells.
    """
    ratio, loss = np.ones(len(part)), np.full(len(part), np.nan)
    for index in np.unique(part):
        table = laws.amplitudes[index]
        if table is None:
            continue
        chosen = part == index
        ratio[chosen] = np.interp(amplitude[chosen], table.amplitude, table.stiffness_ratio)
        loss[chosen] = np.interp(amplitude[chosen], table.amplitude, table.loss_factor)
    return ratio, loss
