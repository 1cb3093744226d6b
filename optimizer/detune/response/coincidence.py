"""Which sources can come to one frequency, where their amplitudes of unknown phase add and not their mean squares."""

from collections.abc import Sequence

from detune.response.loads import Family

# Share of a frequency by which two that are stated apart may differ through their units.
ALIKE = 1e-9


def meeting(families: Sequence[Family]) -> tuple[int, ...]:
    """Return a number for each family; those with one number are linked by frequencies they can have in common.

    Ranges that only touch, as bands of a spectrum do, have none in common; a fixed frequency at the end of a range
    has.
    """
    number = list(range(len(families)))
    spans = sorted(
        (order * family.low, order * family.high, index)
        for index, family in enumerate(families)
        for order in family.orders
    )
    open_spans: list[tuple[float, float, int]] = []
    for span in spans:
        # Whatever ends below this one's beginning ends below all that follow.
        open_spans = [each for each in open_spans if each[1] >= span[0] * (1.0 - ALIKE)]
        for each in open_spans:
            one, other = number[each[2]], number[span[2]]
            if one != other and _meet(each, span):
                number = [one if own == other else own for own in number]
        open_spans.append(span)
    return tuple(number)


def any_meet(families: Sequence[Family]) -> bool:
    """Return whether two of the families can have a frequency in common."""
    return len(set(meeting(families))) < len(families)


def _meet(one: tuple[float, float, int], other: tuple[float, float, int]) -> bool:
    low, high = max(one[0], other[0]), min(one[1], other[1])
    fixed = one[0] == one[1] or other[0] == other[1]
    return high >= low * (1.0 - ALIKE) if fixed else high > low * (1.0 + ALIKE)
