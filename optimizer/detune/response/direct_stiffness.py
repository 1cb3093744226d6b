"""The assessor's stiffness matrices of one design: every part turned into global axes and added where it acts.

Where no part and no floor has a law of its own over frequency, the dynamic stiffness is a constant matrix and one
that grows with omega; these two are then assembled once, and what many frequencies need is their sum.
"""

from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import body_of
from detune.brief.machine import Connection
from detune.response.floor_table import floor_spring

if TYPE_CHECKING:
    from detune.response.direct import DirectMachine

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
# The growing part is read off at this frequency (rad/s), high enough that no digit of a small dashpot is lost.
READ_AT = 1e4


def assembled_stiffness(machine: "DirectMachine", omega: Floats | None, with_gravity: bool) -> Complexes:
    """Return the static stiffness (N, N) where omega is None, else the complex dynamic one (F, N, N), part by part."""
    shape = (len(machine.free), len(machine.free))
    total = np.zeros(shape if omega is None else (len(omega), *shape), dtype=complex)
    for station in machine.stations:
        rows, axes = machine.across(station), machine.axes(station)
        local = machine.share(station) * machine.part(station, omega)
        turned = np.einsum("ia,...a,ja->...ij", axes, local, axes)
        total += rows.T @ turned @ rows
    if omega is not None and with_gravity:
        total += machine.dynamic_gravity
    for connection in machine.brief.connections:
        position = np.array(connection.position)
        on = body_of(machine.brief, connection.on)
        rows = machine.place(on, position) - machine.place(connection.to, position)
        total += rows.T @ (connection_stiffness(connection, omega)[..., :, None] * rows)
    if machine.floor is not None:
        own = machine.floor.stiffness if omega is None else floor_spring(machine.floor, omega)
        total[..., machine.floor_vertical, machine.floor_vertical] += own
    if machine.elastic is not None:
        modal = range(machine.modal.start, machine.modal.stop)
        circular = 2.0 * np.pi * machine.elastic.modes.frequency
        total[..., modal, modal] += circular**2
        if omega is not None:
            ratio, loss = machine.elastic.modes.damping_ratio, machine.elastic.modes.loss_factor
            total[..., modal, modal] += 2j * ratio * circular * omega[:, None]
            total[..., modal, modal] += 0.0 if loss is None else 1j * loss * circular**2
    return total


def straight_stiffness(machine: "DirectMachine") -> tuple[Complexes, Floats] | None:
    """Return the matrices (N, N) of which the dynamic stiffness is K + j omega C, None where it is not so simple."""
    by_frequency = machine.amplitude is not None and machine.amplitude.ndim > 1
    tabulated = machine.floor is not None and machine.floor.table is not None
    if by_frequency or tabulated or machine.with_frequency_laws:
        return None
    constant, read = assembled_stiffness(machine, np.array([0.0, READ_AT]), with_gravity=True)
    return constant, (read - constant).imag / READ_AT


def moving_stiffness(machine: "DirectMachine", omega: Floats) -> Complexes:
    """Return the dynamic stiffness (F, n, n) among the freedoms that can move."""
    mesh = np.ix_(machine.free, machine.free)
    if machine.straight is None:
        return machine.stiffness(omega)[:, mesh[0], mesh[1]]
    constant, growing = (matrix[mesh] for matrix in machine.straight)
    return np.asarray(constant + 1j * omega[:, None, None] * growing)


def restoring(machine: "DirectMachine", omega: Floats, q: Complexes, chosen: slice) -> Complexes:
    """Return the rows `chosen` of the dynamic stiffness times q (F, N), one row a frequency."""
    if machine.straight is None:
        return np.asarray(np.einsum("fij,fj->fi", machine.stiffness(omega)[:, chosen], q))
    constant, growing = (matrix[chosen] for matrix in machine.straight)
    return np.asarray(q @ constant.T + 1j * omega[:, None] * (q @ growing.T))


def connection_stiffness(connection: Connection, omega: Floats | None) -> Complexes:
    """A given connection's stiffness along global axes: static (3,), or complex dynamic (F, 3)."""
    dynamic = np.array(connection.stiffness)
    if omega is None:
        static = connection.stiffness_static
        return (dynamic if static is None else np.array(static)).astype(complex)
    lossy = dynamic * (1.0 + 1j * (connection.loss_factor or 0.0))
    return np.asarray(lossy + 1j * omega[:, None] * np.array(connection.viscous or (0.0, 0.0, 0.0)))
