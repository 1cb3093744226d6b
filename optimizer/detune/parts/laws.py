"""How a mount's stiffness and damping depend on frequency, temperature, load and amplitude, as its list says.

Figures of frequency, temperature and amplitude are ratios to the row's own dynamic stiffness, so that scatter
and parallel mounts scale them with it; a load-deflection curve is in newtons and metres. Local axis z is the
mount's own axis. Frequencies f in Hz, w = 2 pi f, time convention exp(+j w t).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING, TypeAlias

if TYPE_CHECKING:
    from detune.physics import load_curve, relaxation

Axes: TypeAlias = tuple[float | None, float | None, float]
"""Figures along x, y, z; x and y are None where the list states nothing lateral."""

Row: TypeAlias = tuple[float, ...]

ROOM_TEMPERATURE = 20.0
"""degC, at which a machine is judged where no state says otherwise."""


@dataclass(frozen=True, slots=True)
class Relaxation:
    """Three-parameter element on every axis: K = k + j w c N k / (N k + j w c).

    stiffness_ratio: N, of the spring in series with the dashpot to the spring k beside them. k is the row's
    dynamic stiffness, which is the stiffness towards low frequency, and c its viscous coefficient. Towards
    high frequency K tends to k (1 + N). Ruzicka and Derby, Influence of Damping in Vibration Isolation
    (1971), from memory.
    """

    stiffness_ratio: float


@dataclass(frozen=True, slots=True)
class LawTable:
    """Measured stiffness over frequency and temperature: K = k r(f, T) (1 + j eta(f, T)), on every axis.

    k: the row's dynamic stiffness on that axis. frequency: F values rising, Hz. temperature: T values rising,
    degC; empty when the table states none, and then it has one row. stiffness_ratio: r, T rows of F;
    loss_factor: eta, likewise. absolute: the file states newtons per metre of the axial direction, and r is
    that over the row's axial dynamic stiffness. file: where it stands.
    """

    frequency: Row
    temperature: Row
    stiffness_ratio: tuple[Row, ...]
    loss_factor: tuple[Row, ...]
    absolute: bool
    file: str


@dataclass(frozen=True, slots=True)
class LoadCurve:
    """Static axial load over deflection: F = F(d), rising; tangent stiffness dF/dd at the working load.

    deflection: m, rising, zero among them; load: N, rising, compression positive. The last point is the stop:
    beyond it the curve says nothing. The dynamic stiffness at a load is the tangent there times the row's
    dynamic over its static stiffness, both of which are those at its rated load. file: where it stands.
    """

    deflection: Row
    load: Row
    file: str


@dataclass(frozen=True, slots=True)
class AmplitudeTable:
    """Stiffness over amplitude: K = k r(a) (1 + j eta(a)), on every axis, with k the row's dynamic stiffness.

    amplitude: peak of the dynamic axial deflection, m, rising. stiffness_ratio: r. loss_factor: eta. The
    response belongs to an amplitude that it must itself produce, so it is found by iteration. file: where it
    stands.
    """

    amplitude: Row
    stiffness_ratio: Row
    loss_factor: Row
    file: str


@dataclass(frozen=True, slots=True)
class UnknownDamping:
    """Both readings of a damping figure whose kind the list does not know.

    loss_factor: eta, K = k (1 + j eta) and no dashpot. viscous: c in N s/m, K = k + j w c and no loss factor.
    The two agree at the mount's resonance under its rated load and differ away from it, so a limit holds only
    when it holds under either.
    """

    loss_factor: Axes
    viscous: Axes


def follows_load(stiffness: float, load_rated: float, load: float) -> float:
    """Axial stiffness of an air spring at a static load: k = k_rated F / F_rated (N/m; loads in N).

    It keeps its natural frequency when the load changes: gas at constant height and a pressure that follows
    the load (definition of the law; the wall's own stiffness is left out). Raises ValueError below no load.
    """
    if load < 0.0 or load_rated <= 0.0:
        raise ValueError("an air spring carries a load in compression")
    return stiffness * load / load_rated


def curve_physics(curve: LoadCurve) -> load_curve.LoadCurve:
    """Return the smooth curve through the points, by which loads and tangents are found."""
    from detune.physics import load_curve

    return load_curve.load_curve(curve.deflection, curve.load)


def table_physics(table: LawTable, temperature: float) -> relaxation.StiffnessTable:
    """Return the table as the physics reads it, its storage stiffness being the ratio r.

    temperature: degC, taken for a table that states none; other tables keep their own.
    """
    from detune.physics import relaxation

    known = table.temperature or (temperature,)
    return relaxation.stiffness_table(table.frequency, table.stiffness_ratio, table.loss_factor, known)


@lru_cache(maxsize=4096)
def tangent_stiffness(curve: LoadCurve, load: float) -> float:
    """Tangent stiffness of the curve under a load, N/m. Raises OutsideTable (a ValueError) beyond its ends."""
    from detune.physics import load_curve

    return float(load_curve.tangent_at_load(curve_physics(curve), load))


@lru_cache(maxsize=4096)
def deflection_under(curve: LoadCurve, load: float) -> float:
    """Deflection under a load, m. Raises OutsideTable (a ValueError) beyond the ends of the curve."""
    from detune.physics import load_curve

    return float(load_curve.deflection_at(curve_physics(curve), load))
