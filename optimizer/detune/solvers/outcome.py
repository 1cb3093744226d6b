"""What a solver hands back: why it stopped, what the designs are worth, what is proven."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from detune.response.designs import Designs

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]
Stopped = Literal["finished", "time limit", "interrupted"]


@dataclass(frozen=True)
class Progress:
    """How far a solver is: designs settled, of how many; the least cost found so far, and the bracket's lower end.

    No design that is not settled yet costs less than `lower_bound`. Either is None where it is not known.
    """

    settled: int
    designs: int
    incumbent: float | None = None
    lower_bound: float | None = None

    @property
    def share(self) -> float:
        """Share of all designs that is settled, 0 to 1."""
        return self.settled / self.designs


@dataclass(frozen=True)
class Settings:
    """How long a solver may work (seconds, None is unlimited), with how many workers, and whom it tells.

    `progress` is told how far the work is, `announce` what takes long before it starts, `stage` in one line what is
    done after the search; `interrupted` is asked for a stop. `front`: whether the whole front is wanted, or the
    cheapest design alone.
    """

    time_limit: float | None = None
    progress: Callable[[Progress], None] | None = None
    announce: Callable[[str], None] | None = None
    stage: Callable[[str], None] | None = None
    interrupted: Callable[[], bool] | None = None
    workers: int = 1
    front: bool = True


@dataclass(frozen=True)
class RuleCount:
    """How many designs one requirement excluded, as the first that they failed in the order of stages.

    `by_part` holds for each group the number of excluded designs with each of its parts; it is empty where
    whole sets of designs were excluded at once.
    """

    stage: str
    rule: str
    excluded: int
    by_part: tuple[Integers, ...]


@dataclass(frozen=True)
class ProofRecord:
    """Why nothing better exists: how many designs there were and how many each rule excluded.

    The counts and the designs that meet every rule add up to `designs` if the solver finished. `tested` tells
    which requirements failed in the final test of a bounded search, whose rule "exact" counts them together;
    `lower_bound` is the cost below which no design that was not looked at can lie.
    """

    method: str
    designs: int
    looked_at: int
    rules: tuple[RuleCount, ...]
    met: int
    seconds: float
    tested: tuple[RuleCount, ...] = ()
    lower_bound: float | None = None

    @property
    def accounted(self) -> bool:
        """Whether every design is either excluded by a stated rule or among those that meet all."""
        return self.met + sum(rule.excluded for rule in self.rules) == self.designs


@dataclass(frozen=True)
class Outcome:
    """A solver's claim. Only an assessment may say "meets the brief".

    `designs` are all that met every requirement in the solver's evaluation, with `objectives` (each
    (D,)) and `least_margin` (D,). `closest` holds for every group and part the excluded design that got
    furthest, as (group, part, design), where no design with that part is left.
    """

    method: str
    stopped: Stopped
    designs: Designs
    objectives: dict[str, Floats]
    least_margin: Floats
    record: ProofRecord
    closest: Designs
    closest_of: tuple[tuple[int, int], ...]

    @property
    def none_exists(self) -> bool:
        """Whether it is proven that no design meets the requirements; "none found" alone is not that."""
        return self.stopped == "finished" and self.designs.count == 0
