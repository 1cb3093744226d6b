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
    found = []
    for row in tightest_of_each(forced_rows(brief, assessment, every=True)):
        acting = [f for f in brief.forcing if applies(f.conditions, row.condition.name)]
        alone = np.array([_alone(row, (forcing,)) for forcing in acting])
        weight = alone**2 if row.allowable.statistic() == "rms" else _linear(alone, acting)
        total = float(weight.sum())
        at_rest = float(row.allowable.offset(DirectStatic(row.machine), row.place)[0])
        for forcing, value, part in zip(acting, alone.tolist(), weight.tolist(), strict=True):
            share = part / total if 0.0 < total < np.inf else float("nan")
            found.append(ForcingShare(row, forcing.name, forcing.kind, value, share, at_rest))
    return tuple(found)


def _linear(alone: Floats, acting: list[Forcing]) -> Floats:
    """Return what each forcing adds to a sum of peaks: noises together add the root of their summed squares."""
    noise = np.array([bool(forcing.noises()) for forcing in acting])
    together = float(np.linalg.norm(alone[noise]))
    return np.where(noise, alone**2 / together if together > 0.0 else 0.0, alone)


def _alone(row: ForcedRow, forcing: tuple[Forcing, ...]) -> float:
    """Return what one forcing makes of a row, infinite where the machine does not stand."""
    if row.machine.topples:
        return float("inf")
    machine = replace(row.machine, brief=row.machine.brief.model_copy(update={"forcing": forcing}))
    return float(forced_suprema(machine, row.found, row.condition, ((row.allowable, row.place),)).value[0])
