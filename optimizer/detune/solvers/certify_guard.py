"""The assessor's second look at what the bounds guarantee: at listed values and with everything at its
lowest.

Bounds and assessor build the machine apart. A guarantee that the assessor contradicts at a point of the
scatter is worth nothing: its row becomes undecided and says so.
"""

from dataclasses import replace

import numpy as np

from detune.response.assess import assess
from detune.solvers.design_rows import DesignRows
from detune.solvers.perturbed import perturbed
from detune.solvers.verdict import RowVerdict

AGREES = 1e-3
"""How much worse than guaranteed the assessor's value may be: its suprema and variances are good to 1e-3 and
1e-4."""


def second_look(made: DesignRows, rows: list[RowVerdict]) -> list[RowVerdict]:
    """Return the rows, those undecided whose guarantee the assessor contradicts."""
    found = [row for row in rows if row.guaranteed_margin is not None]
    if not found:
        return rows
    contradicted: dict[tuple[str, str, str, str], float] = {}
    for point in dict.fromkeys((tuple(made.map.nominal.tolist()), tuple(made.map.low.tolist()))):
        known = {
            (row.kind, row.condition, row.place, row.quantity): row
            for row in assess(*perturbed(made.problem.brief, made.design, made.map, point)).margins
        }
        for row in found:
            key = (row.kind, row.condition, row.place, row.quantity)
            own = known.get(key)
            # A bound that is infinite, or a weight that never topples, says nothing that could be wrong.
            if own is None or row.guaranteed_margin is None or not np.isfinite(row.guaranteed_margin):
                continue
            if not own.margin >= row.guaranteed_margin - AGREES * (1.0 + abs(row.guaranteed_margin)):
                contradicted[key] = own.value
    return [_withdrawn(row, contradicted) for row in rows]


def _withdrawn(row: RowVerdict, contradicted: dict[tuple[str, str, str, str], float]) -> RowVerdict:
    key = (row.kind, row.condition, row.place, row.quantity)
    if key not in contradicted or row.guaranteed is None:
        return row
    told = f"the assessor finds {contradicted[key]:.6g} inside the scatter, worse than the bound {row.guaranteed:.6g}"
    return replace(
        row,
        status="undecided" if row.status == "proven" else row.status,
        guaranteed=None,
        guaranteed_margin=None,
        note="; ".join(text for text in (row.note, f"{told}: not relied on") if text),
    )
