"""One design of a selection under scatter: its robust system, outputs, static rows, separation, and the certificate.

Scatter by lot gives all stations that carry the same part number one factor, by part gives each station its own.
Part numbers are told apart by group and by part index; `number` may name equal part numbers across groups.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np

from detune.proof.bisect import Decision, decide, lots, singles
from detune.proof.robust_data import OutputLimit, RobustSystem
from detune.proof.selection_data import Floats, Integers, Selection
from detune.proof.separation_box import two_corner_separation
from detune.proof.static_scatter import StaticDecision, StaticScatter, decide_static

Scatter = Literal["lot", "part"]


@dataclass(frozen=True)
class Certificate:
    """What was proven of one design over its scatter.

    status: proven when static rows, separation and every output are; violated when one is; else undecided.
    separation: exact worst separation per excitation interval. outputs: names and decisions in the order taken.
    """

    status: Literal["proven", "violated", "undecided"]
    static: StaticDecision
    separation: tuple[float, ...]
    outputs: tuple[tuple[str, Decision], ...]


def station_factor(
    selection: Selection, design: Integers, scatter: Scatter, number: Integers | None
) -> Integers:
    """Variable (S*3,) of each axis row: one per part number, or one per station."""
    if scatter == "part":
        return singles(len(selection.station_group))
    names = number if number is not None else selection.station_group
    return lots(np.asarray(names, dtype=np.int64))


def _axis_values(selection: Selection, design: Integers, name: str) -> Floats:
    rows = []
    for group_number in selection.station_group:
        group = selection.groups[group_number]
        rows.append(group.count * getattr(group, name)[design[group_number]])
    return np.concatenate(rows).astype(np.float64)


def robust_system(
    selection: Selection,
    design: Integers,
    *,
    stiffness_tolerance: float,
    damping_tolerance: float = 0.0,
    scatter: Scatter = "part",
    number: Integers | None = None,
) -> RobustSystem:
    """The robust system of a design (G+1,): stiffness factors 1 -+ tolerance, and damping factors if asked for.

    number (S,): part number of each station for scatter by lot; by default one number per group.
    """
    n = selection.freedoms
    variable = station_factor(selection, design, scatter, number)
    count = int(variable.max()) + 1
    low, high = np.full(count, 1.0 - stiffness_tolerance), np.full(count, 1.0 + stiffness_tolerance)
    damping = np.full(len(variable), -1, dtype=np.int64)
    if damping_tolerance > 0.0:
        damping = variable + count
        low = np.append(low, np.full(count, 1.0 - damping_tolerance))
        high = np.append(high, np.full(count, 1.0 + damping_tolerance))
    fixed = selection.fixed
    return RobustSystem(
        mass=selection.ballast.mass[design[-1]],
        fixed_dynamic=fixed.dynamic,
        fixed_hysteretic=fixed.hysteretic,
        fixed_viscous=fixed.viscous,
        axes=selection.stations.reshape(-1, n),
        stiffness=_axis_values(selection, design, "kappa_dynamic"),
        loss=_axis_values(selection, design, "loss"),
        viscous=_axis_values(selection, design, "viscous"),
        stiffness_variable=variable,
        damping_variable=damping,
        mass_terms=np.zeros((0, n, n)),
        mass_variable=np.zeros(0, dtype=np.int64),
        low=low,
        high=high,
    )


def case_outputs(selection: Selection, case: int) -> Iterator[tuple[str, OutputLimit]]:
    """Names and outputs of one load case at its own frequency: rows, deflections, forces of one part, totals."""
    cases = selection.harmonic
    f = float(cases.frequency[case])
    n, stations = selection.freedoms, len(selection.station_group)
    counts = np.repeat([selection.groups[g].count for g in selection.station_group], 3).astype(np.float64)
    base = cases.base[case].reshape(-1)
    nothing = np.zeros(3 * stations, dtype=np.complex128)

    def output(row: Floats, force: Floats | None, limit: float, offset: complex = 0.0) -> OutputLimit:
        forces = nothing if force is None else force.astype(np.complex128)
        return OutputLimit(
            row.astype(np.complex128), forces, cases.load[case], base, limit, (f, f), offset=offset
        )

    for r, row in enumerate(cases.rows):
        yield f"case {case} row {r}", output(row, None, float(cases.row_limit[case, r]))
    for axis in range(3 * stations):
        s, a = divmod(axis, 3)
        row = selection.stations[s, a]
        yield (
            f"case {case} station {s} axis {a} deflection",
            output(row, None, float(cases.deflection_limit[case, s, a]), complex(base[axis])),
        )
        single = np.zeros(3 * stations)
        single[axis] = 1.0 / counts[axis]
        yield (
            f"case {case} station {s} axis {a} force",
            output(np.zeros(n), single, float(cases.force_limit[case, s, a])),
        )
    for t, total in enumerate(cases.total.reshape(-1, 3 * stations)):
        yield f"case {case} total {t}", output(np.zeros(n), total, float(cases.total_limit[case, t]))


def static_scatter(
    selection: Selection,
    design: Integers,
    *,
    stiffness_tolerance: float,
    scatter: Scatter = "part",
    number: Integers | None = None,
) -> StaticScatter:
    """The static rows of a design under stiffness scatter: compressions, loads of one part, and the static rows.

    The load window is told as loads, the deflection limit as compressions.
    """
    variable = station_factor(selection, design, scatter, number)
    count = int(variable.max()) + 1
    rows, scale, scale_variable, lower, upper = [], [], [], [], []
    for s, g in enumerate(selection.station_group):
        group, part = selection.groups[g], int(design[g])
        row = selection.support_sign[s] * selection.stations[s, 2]
        stiffness = float(group.kappa_static[part, 2])
        index = int(np.sum(selection.station_group[:s] == g))
        limits = [getattr(group, name) for name in ("load_min", "load_max", "deflection_max")]
        least, most, travel = (float(v[part] if v.ndim == 1 else v[index, part]) for v in limits)
        rows += [row, row]
        scale += [1.0, stiffness]
        scale_variable += [-1, int(variable[3 * s])]
        lower += [-np.inf, least]
        upper += [travel, most]
    extra = selection.static_rows
    return StaticScatter(
        fixed=selection.fixed.static,
        axes=selection.stations.reshape(-1, selection.freedoms),
        stiffness=_axis_values(selection, design, "kappa_static"),
        variable=variable,
        load=selection.ballast.load[design[-1]],
        rows=np.concatenate([np.array(rows), extra.rows]),
        scale=np.concatenate([scale, np.ones(len(extra.rows))]),
        scale_variable=np.concatenate([scale_variable, np.full(len(extra.rows), -1)]).astype(np.int64),
        lower=np.concatenate([lower, extra.lower]),
        upper=np.concatenate([upper, extra.upper]),
        low=np.full(count, 1.0 - stiffness_tolerance),
        high=np.full(count, 1.0 + stiffness_tolerance),
    )


def robust_separation(selection: Selection, design: Integers, *, stiffness_tolerance: float) -> Floats:
    """Exact worst separation (I,) of a design over its stiffness scatter (by lot and by part alike)."""
    axes = selection.stations.reshape(-1, selection.freedoms)
    springs = np.einsum("a,ai,aj->ij", _axis_values(selection, design, "kappa_dynamic"), axes, axes)
    corners = [selection.fixed.dynamic + (1.0 + sign * stiffness_tolerance) * springs for sign in (-1.0, 1.0)]
    mass = selection.ballast.mass[design[-1]]
    return two_corner_separation(corners[0], corners[1], mass, selection.bands)


def certify(
    selection: Selection,
    design: Integers,
    *,
    stiffness_tolerance: float,
    damping_tolerance: float = 0.0,
    scatter: Scatter = "part",
    number: Integers | None = None,
    max_boxes: int = 4000,
    interrupted: Callable[[], bool] | None = None,
) -> Certificate:
    """Prove or refute a design over its scatter at the selection's own frequencies; stops at the first violation."""
    static = decide_static(
        static_scatter(
            selection, design, stiffness_tolerance=stiffness_tolerance, scatter=scatter, number=number
        ),
        max_boxes=max_boxes,
    )
    worst = robust_separation(selection, design, stiffness_tolerance=stiffness_tolerance)
    separation = tuple(worst.tolist())
    if static.status == "violated" or bool((worst < selection.bands.separation).any()):
        return Certificate("violated", static, separation, ())
    system = robust_system(
        selection,
        design,
        stiffness_tolerance=stiffness_tolerance,
        damping_tolerance=damping_tolerance,
        scatter=scatter,
        number=number,
    )
    found: list[tuple[str, Decision]] = []
    undecided = static.status == "undecided"
    for case in range(len(selection.harmonic.frequency)):
        for name, output in case_outputs(selection, case):
            if not np.isfinite(output.limit):
                continue
            decision = decide(system, output, max_boxes=max_boxes, interrupted=interrupted)
            found.append((name, decision))
            if decision.status == "violated":
                return Certificate("violated", static, separation, tuple(found))
            undecided = undecided or decision.status == "undecided"
    return Certificate("undecided" if undecided else "proven", static, separation, tuple(found))
