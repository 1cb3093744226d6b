"""Speeds a machine may not dwell in: a steady condition whose shaft leaves out barred bands, taken apart.

What is left of the range is a union of intervals. Each interval (with several shafts, each combination of
theirs) becomes a steady condition of its own, so that every limit and separation is judged over exactly that
union: the largest value over a union is the largest over its parts.
"""

from itertools import pairwise, product
from typing import TYPE_CHECKING, cast

from detune.brief.brief import Brief, applies
from detune.brief.condition import Condition, Interval
from detune.brief.finding import Finding, Path

if TYPE_CHECKING:
    from detune.brief.allowable.dwell_bands import DwellBands

MOST_PIECES = 64


def left_of(low: float, high: float, barred: tuple[Interval, ...]) -> tuple[Interval, ...]:
    """Return what is left of [low, high] Hz without the barred bands, in order; what is left has a width.

    Bands may overlap each other and reach beyond the range. The edges of a band are left: at them the machine
    may dwell.
    """
    left: list[Interval] = []
    start = low
    for first, last in sorted(barred):
        if first > start:
            left.append((start, min(first, high)))
        start = max(start, last)
    if start < high:
        left.append((start, high))
    return tuple((a, b) for a, b in left if b > a)


def without_barred(brief: Brief) -> Brief:
    """Return the brief with every condition that bars speeds replaced by the pieces that are left of it.

    Statements that name such a condition name its pieces instead. A brief without barred speeds comes back as
    it is.
    """
    pieces = {c.name: pieces_of(c) for c in brief.conditions if c.barred}
    if not pieces:
        return brief

    def named(names: tuple[str, ...] | None) -> tuple[str, ...] | None:
        if names is None:
            return None
        return tuple(
            new for name in names for new in ([p.name for p in pieces[name]] if name in pieces else [name])
        )

    return brief.model_copy(
        update={
            "conditions": tuple(new for c in brief.conditions for new in pieces.get(c.name, (c,))),
            "forcing": tuple(f.model_copy(update={"conditions": named(f.conditions)}) for f in brief.forcing),
            "allowables": tuple(
                a.model_copy(update={"conditions": named(a.conditions)}) for a in brief.allowables
            ),
        }
    )


def pieces_of(condition: Condition) -> tuple[Condition, ...]:
    """Return the conditions that are left of one that bars speeds, each with an interval of every shaft."""
    shafts = list(condition.barred)
    choices = [left_of(*condition.shafts[shaft], condition.barred[shaft]) for shaft in shafts]
    return tuple(
        condition.piece(dict(zip(shafts, chosen, strict=True)), _spoken(condition.name, shafts, chosen))
        for chosen in product(*choices)
    )


def _spoken(name: str, shafts: list[str], chosen: tuple[Interval, ...]) -> str:
    told = [
        f"{shaft} {60.0 * low:.6g} to {60.0 * high:.6g} rev/min"
        for shaft, (low, high) in zip(shafts, chosen, strict=True)
    ]
    return f"{name}, {', '.join(told)}"


def barred_checked(brief: Brief) -> list[Finding]:
    """Return barred bands that leave nothing to dwell at, that bar nothing, or that cut a condition too small."""
    findings = []
    for index, condition in enumerate(brief.conditions):
        count = 1
        for shaft, bands in condition.barred.items():
            if shaft not in condition.shafts:
                continue
            path: Path = ("condition", index, "barred", shaft)
            low, high = condition.shafts[shaft]
            left = left_of(low, high, bands)
            count *= max(1, len(left))
            told = f"{60.0 * low:.6g} to {60.0 * high:.6g} rev/min"
            if not left:
                expected = f"bands that leave some of the range {told} to dwell at"
                findings.append(Finding(path, f"{len(bands)} bands over all of it", expected))
            for place, (first, last) in enumerate(bands):
                if last <= low or first >= high:
                    found = f"{60.0 * first:.6g} to {60.0 * last:.6g} rev/min"
                    findings.append(
                        Finding((*path, place), found, f"a band within the range of {shaft}, {told}")
                    )
        if count > MOST_PIECES:
            expected = f"bands that leave at most {MOST_PIECES} combinations of intervals of all shafts"
            findings.append(Finding(("condition", index, "barred"), f"{count} combinations", expected))
    return findings


def chosen_in(brief: Brief, condition: Condition) -> "DwellBands | None":
    """Return the limit by which the speeds not to dwell at are found for each design in a condition, or None."""
    for allowable in brief.allowables:
        if allowable.kind == "dwell-bands" and applies(allowable.conditions, condition.name):
            return cast("DwellBands", allowable)
    return None


def dwell_notes(brief: Brief) -> list[str]:
    """Return in words where a machine may not dwell, and what is not said of passing through."""
    notes = []
    for whole in dict.fromkeys(condition.whole.name for condition in brief.conditions):
        stated = next(c.whole for c in brief.conditions if c.whole.name == whole)
        limit = chosen_in(brief, stated)
        shafts = list(stated.barred) or ([] if limit is None else [limit.shaft])
        for shaft in shafts:
            passed = [c.name for c in brief.conditions if shaft in (*c.run_up, *c.coast_down)]
            how = "as stated" if limit is None else "as found for each design"
            through = (
                f'passing through them is judged in condition "{passed[0]}"'
                if passed
                else "they are still passed through, which no condition with a run-up or coast-down judges"
            )
            notes.append(
                f"{whole}: limits and separation hold over the speeds of {shaft} outside the barred bands ({how}); "
                f"{through}"
            )
    return notes


def joined(bands: list[Interval], most: int | None = None) -> tuple[Interval, ...]:
    """Return the union of bands in order; with more than `most`, those across the narrowest gaps become one."""
    union: list[Interval] = []
    for low, high in sorted(bands):
        if union and low <= union[-1][1]:
            union[-1] = (union[-1][0], max(union[-1][1], high))
        else:
            union.append((low, high))
    while most is not None and len(union) > most:
        gaps = [later[0] - earlier[1] for earlier, later in pairwise(union)]
        at = gaps.index(min(gaps))
        union[at : at + 2] = [(union[at][0], union[at + 1][1])]
    return tuple(union)
