"""From a unit text and a kind to the exact scale into SI, or a refusal that says what to write."""

from __future__ import annotations

import re
from fractions import Fraction
from functools import cache, lru_cache

from detune.ground.errors import near_names, nearest_name
from detune.ground.kinds import KINDS, Kind, letter_g
from detune.ground.unit_table import Dimension, LetterG, UnitTextError, measure_of, words_understood


class UnitError(ValueError):
    """A text is no number of its kind.

    found: the text as written. expected: what to write, a sentence part with an example.
    nearest: the text with its one unknown word replaced by the closest unit, when there is one.
    """

    def __init__(self, found: str, expected: str, nearest: str | None = None) -> None:
        super().__init__(found, expected, nearest)
        self.found = found
        self.expected = expected
        self.nearest = nearest

    def __str__(self) -> str:
        text = f'found "{self.found}", expected {self.expected}'
        return text if self.nearest is None else f'{text}; did you mean "{self.nearest}"?'


def kind_named(name: str) -> Kind:
    """Return the kind, or raise KeyError naming the closest one (a mistake in code, not in a brief)."""
    if name not in KINDS:
        raise KeyError(f"no kind {name!r}; nearest is {nearest_name(name, KINDS)!r}")
    return KINDS[name]


def with_article(phrase: str) -> str:
    """Put "a" or "an" before a noun."""
    return f"{'an' if phrase[0] in 'aeiou' else 'a'} {phrase}"


@cache
def si_scale(unit: str, kind: str) -> tuple[Fraction, Fraction]:
    """Return exact (scale, offset) with SI = scale * number + offset for a unit text of this kind.

    Raises UnitTextError whose reason says what is wrong with the unit.
    """
    spec = kind_named(kind)
    if kind in ("cost", "count"):
        raise UnitTextError(f"{with_article(spec.meaning)} has no unit")
    if re.search("%|percent", unit) and unit not in ("%", "percent"):
        raise UnitTextError("per cent stands alone")
    measure = measure_of(unit, letter_g(kind))
    home = measure_of(spec.si_unit, "refused") if spec.si_unit else None
    wanted: Dimension = home.dimension if home is not None else ()
    if measure.dimension == wanted:
        if home is None:
            return measure.scale, Fraction(0)
        return measure.scale / home.scale, (measure.offset - home.offset) / home.scale
    if kind == "angle" and not measure.dimension and _is_slope(unit):
        return measure.scale, Fraction(0)
    raise UnitTextError(_mismatch(unit, spec, measure.dimension, wanted))


def _is_slope(unit: str) -> bool:
    """Say whether a unit is one length over another, such as mm/m."""
    sides = unit.split("/")
    return len(sides) == 2 and all(
        dict(measure_of(side, "refused").dimension) == {"meter": 1} for side in sides
    )


def _phrases(dimension: Dimension) -> list[str]:
    phrases: list[str] = []
    for kind in KINDS.values():
        is_alike = kind.si_unit and measure_of(kind.si_unit, "refused").dimension == dimension
        if is_alike and kind.name not in ("inertia_product", "balance_grade"):
            phrases.append(with_article(kind.meaning))
    return phrases if dimension else ["a ratio"]


_SWAPS = {
    "kg": ("kgf", "a mass"),
    "lb": ("lbf", "a mass"),
    "lbs": ("lbf", "a mass"),
    "oz": ("ozf", "a mass"),
    "kgf": ("kg", "a force"),
    "lbf": ("lb", "a force"),
    "ozf": ("oz", "a force"),
}


def _mismatch(unit: str, spec: Kind, found: Dimension, wanted: Dimension) -> str:
    for word in re.findall(r"[A-Za-z]+", unit):
        if word in _SWAPS:
            other, nature = _SWAPS[word]
            swapped = re.sub(rf"(?<![A-Za-z]){word}(?![A-Za-z])", other, unit)
            if measure_of(swapped, letter_g(spec.name)).dimension == wanted:
                also = " or use N" if nature == "a mass" else ""
                return f'{word} is {nature}; write "{swapped}"{also}'
    without_turns = [tuple(pair for pair in side if pair[0] != "cycle") for side in (found, wanted)]
    if without_turns[0] == without_turns[1]:
        if spec.name == "frequency":
            return f'"{unit}" does not say of what; write "Hz", "rpm" or "rad/s"'
        if spec.si_unit.endswith("/Hz"):
            return f'a spectral density is per hertz; write it like "{spec.si_unit}"'
        return f'the cycle, turn or radian does not fit in "{unit}"; the unit is like "{spec.si_unit}"'
    phrases = _phrases(found)
    if phrases:
        return f'"{unit}" is {" or ".join(phrases)}'
    bases = " ".join(base if power == 1 else f"{base}^{power}" for base, power in found)
    return f'"{unit}" comes down to {bases}, which is no {spec.meaning}'


def refused_g(unit: str, kind: str) -> str | None:
    """Say what a text with the letter g is, for a kind that knows it neither as gram nor as gravity."""
    natures: list[str] = []
    meanings: tuple[LetterG, LetterG] = ("gram", "gravity")
    for meaning in meanings:
        for phrase in _phrases(measure_of(unit, meaning).dimension):
            if phrase not in natures:
                natures.append(phrase)
    if not natures or with_article(kind_named(kind).meaning) in natures:
        return None
    return f'"{unit}" is {" or ".join(natures)}'


@lru_cache(maxsize=256)
def nearest_unit(unit: str, unknown: str, kind: str) -> str | None:
    """Return the unit with its unknown word replaced by the closest known one that makes it fit the kind."""
    for candidate in near_names(unknown, words_understood(letter_g(kind))):
        replaced = re.sub(rf"(?<![A-Za-zμ°%_]){re.escape(unknown)}(?![A-Za-zμ°%_])", candidate, unit, count=1)
        try:
            si_scale(replaced, kind)
        except UnitTextError:
            continue
        return replaced
    return None
