"""The assessor's floor ratio: the machine bolted down by Lagrange multipliers on its full matrices.

[D C^T; C 0] [q; l] = [f; 0] with C the independent rows of all stations' deflections: no basis is chosen and
no matrix is reduced, unlike in `floor_ratio.py`. What stands at the stations does not matter, for it is not
deflected.
"""

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.allowable.base import HarmonicAllowable
from detune.brief.allowable.floor_ratio import FloorRatio
from detune.brief.brief import body_of
from detune.brief.floor_matrix import FloorStructure
from detune.brief.forcing.base import Tone
from detune.response.assessment import MarginRow
from detune.response.direct import DirectMachine
from detune.response.direct_modes import DirectModes
from detune.response.solve import solve_or_resonate

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
TWO_PI = 2.0 * np.pi
DEPENDENT = 1e-9
NO_REFERENCE = 1e30
LOOKS = 4000


def feet_rows(machine: DirectMachine) -> Floats:
    """Return rows (R, N) of the floor's moving directions under all stations."""
    rows = np.concatenate([machine.foot(station) * machine.free for station in machine.brief.stations])
    moving: Floats = rows[np.any(rows != 0.0, axis=1)]
    return moving


def bolted_motion(machine: DirectMachine, omega: Floats, load: Complexes) -> Complexes:
    """Return displacements (F, N) of the machine with rigid stations under loads (F, N) at omega (F,) rad/s."""
    from scipy.linalg import qr

    free = machine.free
    rows = np.concatenate([machine.across(station)[:, free] for station in machine.brief.stations])
    _, triangle, order = qr(rows.T, mode="economic", pivoting=True)
    size = np.abs(np.diagonal(triangle))
    chosen = rows[order[: int(np.sum(size > DEPENDENT * size[0]))]]
    stiffness = machine.stiffness(omega)[:, free][:, :, free]
    dynamic = stiffness - omega[:, None, None] ** 2 * machine.mass[np.ix_(free, free)]
    n, held = len(dynamic[0]), len(chosen)
    scale = float(np.abs(stiffness).max())
    whole = np.zeros((len(omega), n + held, n + held), dtype=complex)
    whole[:, :n, :n], whole[:, :n, n:], whole[:, n:, :n] = dynamic, scale * chosen.T, scale * chosen
    right = np.zeros((len(omega), n + held), dtype=complex)
    right[:, :n] = load[:, free]
    elastic = whole.copy()
    elastic[:, :n, :n] = stiffness
    q = np.zeros((len(omega), machine.size), dtype=complex)
    q[:, free] = solve_or_resonate(whole, elastic, right)[:, :n]
    return q


def direct_floor_ratio(machine: DirectMachine, omega: Floats, load: Complexes, q: Complexes) -> Complexes:
    """Return the ratio along z of (1, F, 3): floor's motion in q (F, N) over that with the machine bolted down."""
    feet = feet_rows(machine)
    mounted = np.linalg.norm(q @ feet.T, axis=1)
    bolted = np.linalg.norm(bolted_motion(machine, omega, load) @ feet.T, axis=1)
    ratio = np.full(len(omega), NO_REFERENCE)
    np.divide(mounted, bolted, out=ratio, where=bolted > 0.0)
    out = np.zeros((1, len(omega), 3), dtype=complex)
    out[0, :, 2] = np.minimum(ratio, NO_REFERENCE)
    return out


def between_stations(machine: DirectMachine, omega: Floats, q: Complexes, surface: str) -> Complexes:
    """Return what a floor known between stations receives, or passes on to the ground, (F, 3) in its own directions.

    By its matrices as stated: (K (1 + j eta) - w^2 M) u summed over the stations, for the ground without the
    mass.
    """
    elastic = machine.elastic
    if not isinstance(elastic, FloorStructure):
        return np.zeros((len(omega), 3), dtype=complex)
    first = 6 * len(machine.nodes)
    feet = q[:, first : first + len(elastic.stiffness)] @ elastic.modes.shapes.T
    force = feet @ elastic.stiffness * (1.0 + 1j * elastic.loss_factor)
    if surface != "ground":
        force = force - omega[:, None] ** 2 * (feet @ elastic.mass)
    return np.asarray(force @ elastic.total_rows.T)


def unit_force(machine: DirectMachine, allowable: HarmonicAllowable, omega: Floats) -> Complexes:
    """Return the unit force of an allowable as a load (F, N)."""
    unit = allowable.unit_load()
    assert unit is not None
    body = machine.brief.bodies[0].name
    vector = machine.place(body_of(machine.brief, body), machine.centres[body]).T @ np.array(unit[1])
    return np.tile(vector.astype(complex), (len(omega), 1))


def beside_reference(
    machine: DirectMachine, found: DirectModes, allowable: HarmonicAllowable, tones: list[Tone]
) -> DirectModes:
    """Return the modes with places added, as poles, at which the bolted floor is nearly at rest.

    There a floor ratio may peak; they are looked for by sampling the bolted machine densely over the
    excitation.
    """
    if not isinstance(allowable, FloorRatio):
        return found
    ends = [tone.order * end for tone in tones for end in (tone.low, tone.high)]
    low, high = max(min(ends, default=0.0), allowable.lowest_frequency()), max(ends, default=0.0)
    if high <= low:
        return found
    feet = feet_rows(machine)

    def motion(omega: Floats) -> Floats:
        load = unit_force(machine, allowable, omega)
        return np.asarray(np.linalg.norm(bolted_motion(machine, omega, load) @ feet.T, axis=1))

    omega = TWO_PI * np.linspace(low, high, LOOKS)
    size = motion(omega)
    inner = np.flatnonzero((size[1:-1] <= size[:-2]) & (size[1:-1] <= size[2:])) + 1
    added = []
    for index in inner:
        left, right = omega[index - 1], omega[index + 1]
        for _ in range(5):
            closer = np.linspace(left, right, 17)
            best = int(np.argmin(motion(closer)))
            left, right = closer[max(best - 1, 0)], closer[min(best + 1, 16)]
        place = 0.5 * (left + right)
        added += [complex(-width, place) for width in (1e-5 * place, 1e-2 * place)]
    return replace(found, poles=np.concatenate([found.poles, np.array(added, dtype=complex)]))


def with_force_ratio(
    machine: DirectMachine, allowable: HarmonicAllowable, rows: list[MarginRow]
) -> list[MarginRow]:
    """Return the rows of a floor ratio with the force ratio at the same frequency told beside it."""
    if not isinstance(allowable, FloorRatio):
        return rows
    from detune.response.direct_views import DirectTone

    told = []
    for row in rows:
        if row.frequency is not None:
            tone = _unit_tone(machine, allowable, row.frequency)
            view = DirectTone(machine, (tone,), np.array([[TWO_PI * row.frequency]]))
            unit = allowable.unit_load()
            assert unit is not None
            force = abs(view.total_force("floor")[0, 0] @ np.array(unit[1]))
            words = f"force ratio (transmissibility) at this frequency: {force:.4g}"
            row = replace(row, note=f"{row.note}; {words}" if row.note else words)
        told.append(row)
    return told


def _unit_tone(machine: DirectMachine, allowable: FloorRatio, frequency: float) -> Tone:
    unit = allowable.unit_load()
    assert unit is not None
    body = machine.brief.bodies[0].name
    x, y, z = (float(part) for part in machine.centres[body])
    force = (complex(unit[1][0]), complex(unit[1][1]), complex(unit[1][2]))
    return Tone("unit load", "unit load", 1.0, frequency, frequency, body, (x, y, z), force=force)
