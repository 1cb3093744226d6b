"""Floor 5: solvers, one file a method. A new solver is one file and one line in `SOLVERS`."""

from types import ModuleType

from detune.problem.build import Problem
from detune.solvers import bounded, enumeration, second_opinion

SOLVERS: dict[str, ModuleType] = {
    enumeration.NAME: enumeration,
    bounded.NAME: bounded,
    second_opinion.NAME: second_opinion,
}

# Going through designs one by one takes about a minute for this many.
MOST_BY_ENUMERATION = 1_500_000


def choose(problem: Problem) -> tuple[str, str]:
    """Return the method for a problem and why: enumeration while it is short work, else the bounded search.

    A second opinion is given on request alone.
    """
    if problem.count <= MOST_BY_ENUMERATION:
        return enumeration.NAME, f"{problem.count:,} designs can be gone through one by one"
    reason = bounded.refusal(problem)
    if reason is None:
        return bounded.NAME, f"{problem.count:,} designs are too many to go through one by one"
    return enumeration.NAME, f"the bounded search does not apply ({reason})"


__all__ = ["SOLVERS", "choose"]
