"""The table of what tones, noise and shocks have in each judged value."""

from detune.ground.units import convert, show
from detune.report.contributions import Contribution
from detune.report.tables import Table
from detune.report.words import limit_text, number, unit_of, value_text


def contributions_table(parts: tuple[Contribution, ...]) -> Table:
    """Return one row a quantity; columns for sources that act nowhere are left out."""
    columns = ["condition", "quantity", "place"]
    shown: list[tuple[str, list[str]]] = [
        ("at rest", [_cell(part, part.at_rest or None) for part in parts]),
        ("tones", [_cell(part, part.tones) for part in parts]),
        ("random: rms", [_cell(part, part.random_rms) for part in parts]),
        ("expected extreme", [_extreme(part) for part in parts]),
        ("shocks and records", [_cell(part, part.shocks) for part in parts]),
    ]
    kept = [(head, cells) for head, cells in shown if any(cells)]
    rows = tuple(
        (
            part.of.row.condition,
            part.of.row.quantity,
            part.of.place,
            *(cells[index] for _, cells in kept),
            value_text(part.of.row),
            limit_text(part.of.row),
        )
        for index, part in enumerate(parts)
    )
    heads = (*columns, *(head for head, _ in kept), "together", "limit")
    return Table("What each source has in it", heads, rows, frozenset(range(3, len(heads))), _note(parts))


def _note(parts: tuple[Contribution, ...]) -> str:
    texts = ["Each quantity at the place with its least margin, by the assessor's equations."]
    if any(part.duration is not None for part in parts):
        texts.append(
            "Noises of a condition are independent and add in power. In a peak value they count with the expected "
            "extreme, the mean largest value in the time they last, about which single trials scatter; in an rms value "
            "with their rms; in a 3-sigma value with three times that, which is no maximum."
        )
    if any(part.shocks is not None for part in parts):
        texts.append("A shock counts with the largest value during it and after it.")
    texts.append("Peaks of different sources and what is there at rest add linearly, rms values as squares.")
    return " ".join(texts)


def _unit(part: Contribution) -> str:
    row = part.of.row
    return unit_of(row.upper if row.upper else row.value, row.unit)


def _cell(part: Contribution, value: float | None) -> str:
    if value is None:
        return ""
    unit = _unit(part)
    return f"{number(convert(value, part.of.row.unit, unit))} {unit}" if unit else number(value)


def _extreme(part: Contribution) -> str:
    if part.extreme is None or part.duration is None:
        return ""
    return f"{_cell(part, part.extreme)} in {show(part.duration, 'time')}"
