"""What each forcing alone would make of the governing responses, by the assessor's own machine."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from detune.brief.brief import Brief, applies
from detune.brief.forcing.base import Forcing
from detune.report.forced_rows import ForcedRow, forced_rows, tightest_of_each
from detune.response.assessment import Assessment
from detune.response.direct_supremum import forced_suprema
from detune.response.direct_views import DirectStatic

Floats = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class ForcingShare:
    """One forcing in one governing response, in SI: its value `alone` at its own worst speed.

    `share`: of the sum of all forcings alone, of their squares where the measure is an rms; noises share what they
    come to together by their squares in either case. Forcings whose phases
    belong together may come to less than the sum of what each does alone. `at_rest`: the static part of the row.
    """

    of: ForcedRow
    forcing: str
    kind: str
    alone: float
    share: float
    at_rest: float


def forcing_shares(brief: Brief, assessment: Assessment) -> tuple[ForcingShare, ...]:
    """Return the shares of every forcing in each quantity of each condition, at the place with the least margin.

    Left out: limits on ratios, and conditions in which parts follow the amplitude of their own vibration, where
    forcings do not act one by one.
    """
    rows = tightest_of_each(forced_rows(brief, assessment, every=True))
    together: dict[tuple[int, str], list[ForcedRow]] = {}
    for row in rows:
        together.setdefault((id(row.machine), row.condition.name), []).append(row)
    # Rows of one machine and condition are asked for at once: the motion they look at is the same.
    shares: dict[int, list[ForcingShare]] = {}
    for members in together.values():
        shares.update(zip(map(id, members), _in_condition(brief, members), strict=True))
    return tuple(share for row in rows for share in shares[id(row)])


def _in_condition(brief: Brief, rows: list[ForcedRow]) -> list[list[ForcingShare]]:
    """Return the shares in each row of one machine and condition."""
    acting = [f for f in brief.forcing if applies(f.conditions, rows[0].condition.name)]
    values = np.array([_alone(rows, (forcing,)) for forcing in acting]).reshape(len(acting), len(rows))
    found = []
    for row, alone in zip(rows, values.T, strict=True):
        weight = alone**2 if row.allowable.statistic() == "rms" else _linear(alone, acting)
        total = float(weight.sum())
        at_rest = float(row.allowable.offset(DirectStatic(row.machine), row.place)[0])
        shares = (weight / total if 0.0 < total < np.inf else np.full(len(acting), np.nan)).tolist()
        each = zip(acting, alone.tolist(), shares, strict=True)
        found.append([ForcingShare(row, f.name, f.kind, value, part, at_rest) for f, value, part in each])
    return found


def _linear(alone: Floats, acting: list[Forcing]) -> Floats:
    """Return what each forcing adds to a sum of peaks: noises together add the root of their summed squares."""
    noise = np.array([bool(forcing.noises()) for forcing in acting])
    together = float(np.linalg.norm(alone[noise]))
    return np.where(noise, alone**2 / together if together > 0.0 else 0.0, alone)


def _alone(rows: list[ForcedRow], forcing: tuple[Forcing, ...]) -> Floats:
    """Return what one forcing makes of rows (R,) of one condition, infinite where the machine does not stand."""
    first = rows[0]
    if first.machine.topples:
        return np.full(len(rows), np.inf)
    machine = replace(first.machine, brief=first.machine.brief.model_copy(update={"forcing": forcing}))
    pairs = tuple((row.allowable, row.place) for row in rows)
    return forced_suprema(machine, first.found, first.condition, pairs).value
