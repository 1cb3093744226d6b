"""What tones, noise and shocks each have in a judged value, by the assessor's own machine."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from itertools import groupby

import numpy as np

from detune.brief.allowable.base import Statistic, noise_amplitude
from detune.report.forced_rows import ForcedRow
from detune.response.direct import DirectMachine
from detune.response.direct_motion import direct_transient_values
from detune.response.direct_random import direct_variances
from detune.response.direct_supremum import forced_suprema
from detune.response.direct_views import DirectStatic


@dataclass(frozen=True, eq=False)
class Contribution:
    """The parts of one judged value, in SI; None where such a source does not act.

    `at_rest` is added to all of them. `tones` includes run-ups. `random_rms` is the rms of the noise and
    `random` what it counts as in the measure of the limit, `extreme` its mean largest value in `duration` s.
    """

    of: ForcedRow
    at_rest: float
    tones: float | None
    random_rms: float | None
    random: float | None
    extreme: float | None
    duration: float | None
    shocks: float | None

    @property
    def statistic(self) -> Statistic:
        """How the limit is expressed: rms values add as squares, all others linearly."""
        return self.of.allowable.statistic()


def contributions(rows: Sequence[ForcedRow]) -> tuple[Contribution, ...]:
    """Return the parts of each judged value, in the order of the rows."""
    result: dict[int, Contribution] = {}
    numbered = sorted(enumerate(rows), key=lambda each: (id(each[1].machine), each[1].condition.name))
    for _, group in groupby(numbered, key=lambda each: (id(each[1].machine), each[1].condition.name)):
        members = list(group)
        parts = _of_one_condition([row for _, row in members])
        result.update({number: part for (number, _), part in zip(members, parts, strict=True)})
    return tuple(result[number] for number in range(len(rows)))


def _of_one_condition(rows: list[ForcedRow]) -> list[Contribution]:
    first = rows[0]
    machine, found, condition = first.machine, first.found, first.condition
    pairs = tuple((row.allowable, row.place) for row in rows)
    static = DirectStatic(machine)
    toned = _with_tones_alone(machine, first)
    tones = None if toned is None else forced_suprema(toned, found, condition, pairs).value
    shocks = direct_transient_values(machine, found, first.transients, pairs) if first.transients else None
    moved, rates = np.zeros(len(rows)), np.zeros(len(rows))
    for noise in first.noises:
        part = direct_variances(machine, found, noise, pairs)
        moved, rates = moved + part.moved, rates + part.rates
    duration = max((noise.duration for noise in first.noises), default=None)
    result = []
    for index, row in enumerate(rows):
        random = rms = extreme = None
        if duration is not None:
            own = moved[[index]], rates[[index]], duration
            random = float(noise_amplitude(*own, row.allowable.statistic())[0])
            extreme = float(noise_amplitude(*own, "peak")[0])
            rms = float(np.sqrt(moved[index]))
        result.append(
            Contribution(
                of=row,
                at_rest=float(row.allowable.offset(static, row.place)[0]),
                tones=None if tones is None else float(tones[index]),
                random_rms=rms,
                random=random,
                extreme=extreme,
                duration=duration,
                shocks=None if shocks is None else float(shocks[index]),
            )
        )
    return result


def _with_tones_alone(machine: DirectMachine, row: ForcedRow) -> DirectMachine | None:
    """Return the same machine under the tones of its condition alone, None where there is none."""
    toned = tuple(
        forcing
        for forcing in machine.brief.forcing
        if (forcing.conditions is None or row.condition.name in forcing.conditions)
        and forcing.tones(row.condition.shafts)
    )
    if not toned:
        return None
    return replace(machine, brief=machine.brief.model_copy(update={"forcing": toned}))
