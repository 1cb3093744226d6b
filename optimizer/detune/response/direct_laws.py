"""The assessor's own reading of parts whose stiffness depends on load, frequency or temperature."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from detune.parts.kinds.mount import Mount
from detune.parts.laws import curve_physics, table_physics
from detune.physics.load_curve import ElementLaw, law_force, load_curve
from detune.physics.relaxation import table_stiffness

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]


@dataclass(frozen=True, eq=False)
class DirectRest:
    """Where one design rests: q (n,), and of one part at each station the axial force (S,) and tangent (S,)."""

    q: Floats
    force: Floats
    tangent: Floats


def follows_curve(mount: Mount) -> bool:
    """Return whether a part's axial static load is no straight line over its deflection."""
    return mount.load_curve is not None or mount.follows_load


def axial_law(mount: Mount) -> ElementLaw:
    """Return a part's axial law, compression positive; an air spring's by its exponential, F = F_rated exp(d/L)."""
    if mount.load_curve is not None:
        return ElementLaw(curve=curve_physics(mount.load_curve))
    if mount.follows_load:
        assert mount.load_rated is not None  # held by the catalog's rules
        load = mount.load_rated * np.geomspace(0.02, 5.0, 400)
        deflection = mount.load_rated / mount.stiffness_static[2] * np.log(load / mount.load_rated)
        return ElementLaw(curve=load_curve(deflection, load))
    return ElementLaw(stiffness=mount.stiffness_static[2])


def part_stiffness(
    mount: Mount,
    omega: Floats | None,
    axial_ratio: float,
    temperature: float,
    amplitude: Floats | None = None,
) -> Complexes:
    """One part's stiffness along its own axes: static (3,), or complex dynamic (F, 3).

    `axial_ratio` is its tangent at the working load over its listed static stiffness; `amplitude` (m), one or (F,),
    the peak axial deflection at which it works. Beyond the ends of an amplitude table its end values hold.
    """
    if omega is None:
        return _known(mount.stiffness_static).astype(complex)
    listed = _known(mount.stiffness_dynamic) * np.array([1.0, 1.0, axial_ratio])
    viscous = 1j * omega[:, None] * _known(mount.viscous)
    if mount.law_table is not None:
        table = table_physics(mount.law_table, temperature)
        # Excitation outside the table is refused at the door; a search for modes takes the end value there.
        low, high = 2.0 * np.pi * table.frequency[0], 2.0 * np.pi * table.frequency[-1]
        inside = np.minimum(np.maximum(omega, low * (1.0 + 1e-12)), high * (1.0 - 1e-12))
        ratio = table_stiffness(table, inside, temperature)
        return np.asarray(listed * ratio[:, None] + viscous, dtype=complex)
    constant = listed * (1.0 + 1j * _known(mount.loss_factor))
    if mount.amplitude_table is not None and amplitude is not None:
        steps, ratios, losses = (
            np.array(column, dtype=float)
            for column in (
                mount.amplitude_table.amplitude,
                mount.amplitude_table.stiffness_ratio,
                mount.amplitude_table.loss_factor,
            )
        )
        at = np.clip(np.atleast_1d(amplitude), steps[0], steps[-1])
        constant = (
            listed * (np.interp(at, steps, ratios) * (1.0 + 1j * np.interp(at, steps, losses)))[:, None]
        )
    if mount.relaxation is not None:
        series = mount.relaxation.stiffness_ratio * listed
        return np.asarray(
            constant + viscous * series / np.where(series > 0.0, series + viscous, 1.0), dtype=complex
        )
    return np.asarray(constant + viscous, dtype=complex)


def _known(values: Sequence[float | None]) -> Floats:
    """Return values (3,) as numbers, nothing where one is not stated."""
    return np.array([0.0 if value is None or np.isnan(value) else value for value in values], dtype=float)


def rest_on_laws(
    rows: Sequence[Floats],
    mounts: Sequence[Mount],
    share: Sequence[float],
    packing: Sequence[float],
    other: Floats,
    load: Floats,
) -> DirectRest:
    """Return where sum over stations of rows^T F + other q = load, by scipy.optimize.root from the linear rest.

    rows (3, n) of each station in its local axes (body relative to foot), share: how many times one part counts,
    other (n, n): static stiffness of everything else. nan where no rest is found or a curve is left.
    """
    from scipy.optimize import root

    laws = [axial_law(mount) for mount in mounts]
    static = [np.nan_to_num(np.array(mount.stiffness_static, dtype=float)) for mount in mounts]

    def balance(q: Floats) -> tuple[Floats, Floats]:
        missing, slope = other @ q - load, other.copy()
        for row, law, k, times, lift in zip(rows, laws, static, share, packing, strict=True):
            local = row @ q
            force, tangent = law_force(law, lift - local[2])
            up = times * np.array([k[0] * local[0], k[1] * local[1], -float(force)])
            missing = missing + row.T @ up
            slope = slope + row.T @ (times * np.array([k[0], k[1], float(tangent)])[:, None] * row)
        return missing, slope

    first = np.linalg.solve(balance(np.zeros_like(load))[1], load)
    size = np.abs(first).max() or 1.0
    found = root(
        lambda x: balance(x * size)[0],
        first / size,
        jac=lambda x: balance(x * size)[1] * size,
        method="hybr",
        options={"xtol": 1e-12},
    )
    q = np.asarray(found.x) * size
    missing = float(np.abs(balance(q)[0]).max())
    deflection = [lift - float((row @ q)[2]) for row, lift in zip(rows, packing, strict=True)]
    left = any(
        law.curve is not None and times > 0.0 and not law.curve.deflection[0] <= d <= law.curve.deflection[-1]
        for law, d, times in zip(laws, deflection, share, strict=True)
    )
    if left or missing > 1e-6 * float(np.abs(load).max()):
        return DirectRest(np.full_like(q, np.nan), np.full(len(laws), np.nan), np.full(len(laws), np.nan))
    each = [law_force(law, d) for law, d in zip(laws, deflection, strict=True)]
    return DirectRest(q, np.array([float(f) for f, _ in each]), np.array([float(t) for _, t in each]))
