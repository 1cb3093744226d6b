"""Read the closed list of units, and a product of units a user wrote, into an exact factor and its dimension.

The file `units.txt` is in the definition format of pint. It is read here because importing pint costs half of
the time in which a whole study file must be checked; the tests hold every unit against pint's reading of it.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from functools import cache
from pathlib import Path
from typing import Literal

Dimension = tuple[tuple[str, int], ...]

LONGEST_UNIT = 60
"""Characters; a longer text is no unit (and nesting stays shallow)."""


class UnitTextError(ValueError):
    """A text is no product of known units. `unknown` is the word that is not in the list, if that is why."""

    def __init__(self, reason: str, unknown: str | None = None) -> None:
        super().__init__(reason, unknown)
        self.reason = reason
        self.unknown = unknown


@dataclass(frozen=True)
class Measure:
    """A unit in base units: base value = scale * number + offset. `dimension` is sorted, without zeros."""

    scale: Fraction
    dimension: Dimension = ()
    offset: Fraction = Fraction(0)


def _combined(left: Measure, right: Measure, sign: int) -> Measure:
    if (left.offset or right.offset) and (left.dimension and right.dimension):
        raise UnitTextError("degC and degF stand alone; a temperature difference inside a product is in K")
    powers = dict(left.dimension)
    for base, power in right.dimension:
        powers[base] = powers.get(base, 0) + sign * power
    dimension = tuple(sorted((base, power) for base, power in powers.items() if power))
    return Measure(left.scale * right.scale**sign, dimension, left.offset or right.offset)


def _raised(measure: Measure, power: int) -> Measure:
    if measure.offset and power != 1:
        raise UnitTextError("degC and degF stand alone; a temperature difference inside a product is in K")
    return Measure(
        measure.scale**power,
        tuple((base, exponent * power) for base, exponent in measure.dimension if power),
        measure.offset,
    )


_TOKEN = re.compile(
    r"(?P<space>\s*)(?:(?P<name>[A-Za-zμ°%_]+)|(?P<number>[0-9]+(?:\.[0-9]+)?(?:[eE][+-]?[0-9]+)?)"
    r"|(?P<raised>⁻?[⁰¹²³⁴⁵⁶⁷⁸⁹]+)|(?P<sign>\*\*|[-^*/().·⋅+]))"
)
_SUPERSCRIPT = str.maketrans("⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "-0123456789")


@dataclass(frozen=True)
class _Token:
    what: str
    text: str
    glued: bool


def _tokens(text: str) -> list[_Token]:
    found: list[_Token] = []
    place = 0
    text = text.rstrip()
    while place < len(text):
        match = _TOKEN.match(text, place)
        if match is None:
            raise UnitTextError(f'"{text[place:].strip()[0]}" has no place in a unit')
        what = str(match.lastgroup)
        found.append(_Token(what, match.group(what), not match.group("space") and bool(found)))
        place = match.end()
    return found


class _Reader:
    """Recursive descent over: product = power {(times | "/") power}; power = atom [exponent]."""

    def __init__(self, text: str, lookup: Callable[[str], Measure], numbers: bool) -> None:
        self.tokens = _tokens(text)
        self.place = 0
        self.lookup = lookup
        self.numbers = numbers

    def peek(self) -> _Token | None:
        return self.tokens[self.place] if self.place < len(self.tokens) else None

    def accept(self, *signs: str) -> str | None:
        token = self.peek()
        if token is not None and token.what == "sign" and token.text in signs:
            self.place += 1
            return token.text
        return None

    def whole(self) -> Measure:
        result = self.product()
        token = self.peek()
        if token is not None:
            raise UnitTextError(_misplaced(token))
        return result

    def product(self) -> Measure:
        result = self.leading_one() or self.power()
        divided = False
        while (token := self.peek()) is not None:
            if self.accept("/"):
                result = _combined(result, self.power(), -1)
                divided = True
            elif self.accept("*", "·", "⋅", ".") or token.what == "name" or token.text == "(":
                if divided and not self.numbers:
                    raise UnitTextError(
                        "a product after a slash can be read in two ways; "
                        'put it in parentheses as in "N/(m s)", or before the slash as in "N s/m"'
                    )
                result = _combined(result, self.power(), 1)
            else:
                break
        return result

    def leading_one(self) -> Measure | None:
        token = self.peek()
        if self.numbers or token is None:
            return None
        follower = self.tokens[self.place + 1] if self.place + 1 < len(self.tokens) else None
        if token.text == "1" and follower is not None and follower.text == "/":
            self.place += 1
            return Measure(Fraction(1))
        if token.text == "/":
            return Measure(Fraction(1))
        return None

    def power(self) -> Measure:
        base = self.atom()
        exponent = self.exponent()
        return base if exponent is None else _raised(base, exponent)

    def exponent(self) -> int | None:
        token = self.peek()
        if token is None:
            return None
        if token.what == "raised":
            self.place += 1
            return _small_integer(token.text.translate(_SUPERSCRIPT))
        explicit = self.accept("^", "**") is not None
        token = self.peek()
        if not explicit and (
            token is None or not token.glued or (token.what != "number" and token.text != "-")
        ):
            return None
        minus = "-" if self.accept("-") else ""
        token = self.peek()
        if token is None or token.what != "number":
            raise UnitTextError('a power is a whole number, as in "m^2"')
        self.place += 1
        return _small_integer(minus + token.text)

    def atom(self) -> Measure:
        token = self.peek()
        if token is None:
            raise UnitTextError("the unit breaks off")
        self.place += 1
        if token.what == "name":
            return self.lookup(token.text)
        if token.text == "(":
            inner = self.product()
            if not self.accept(")"):
                raise UnitTextError("a closing parenthesis is missing")
            return inner
        if token.what == "number" and self.numbers:
            return Measure(Fraction(token.text))
        raise UnitTextError(_misplaced(token))


def _misplaced(token: _Token) -> str:
    if token.what == "number":
        return "write one number and then its unit; no second number and no arithmetic"
    return f'"{token.text}" stands where a unit should'


def _small_integer(text: str) -> int:
    if not re.fullmatch(r"-?[1-9]", text):
        raise UnitTextError('a power is a whole number from -9 to 9, as in "m^2"')
    return int(text)


@cache
def known_units() -> Mapping[str, Measure]:
    """Return every unit name and symbol of `units.txt` with its measure. Read once."""
    known: dict[str, Measure] = {}

    def lookup(name: str) -> Measure:
        return known[name]

    def evaluated(text: str) -> Measure:
        return _Reader(text, lookup, numbers=True).whole()

    for line in Path(__file__).with_name("units.txt").read_text(encoding="utf-8").splitlines():
        statement = line.partition("#")[0].strip()
        if not statement:
            continue
        name, definition, *others = (word.strip() for word in statement.split("="))
        factor, _, offset = definition.partition("; offset:")
        if factor.startswith("["):
            measure = Measure(Fraction(1), ((name, 1),))
        else:
            measure = evaluated(factor)
        if offset:
            measure = Measure(measure.scale, measure.dimension, evaluated(offset).scale)
        for word in (name, *(other for other in others if other != "_")):
            if word in known:
                raise ValueError(f"units.txt defines {word!r} twice")
            known[word] = measure
    return known


LetterG = Literal["gravity", "gram", "refused"]

_LETTER_G: dict[str, dict[str, str]] = {
    "gravity": {"g": "standard_gravity", "G": "standard_gravity", "mg": "milligravity", "μg": "microgravity"},
    "gram": {"g": "gram", "mg": "milligram", "μg": "microgram"},
    "refused": {},
}
_LETTER_G["gravity"]["ug"] = _LETTER_G["gravity"]["μg"]
_LETTER_G["gram"]["ug"] = _LETTER_G["gram"]["μg"]


def words_understood(letter_g: LetterG) -> tuple[str, ...]:
    """Return every unit word, including the words with g in the given meaning."""
    return (*known_units(), *_LETTER_G[letter_g])


@cache
def measure_of(text: str, letter_g: LetterG) -> Measure:
    """Read a product of units, such as ``N s/m``.

    letter_g says what the letter g means here. Raises UnitTextError with the reason in a sentence.
    """
    if len(text) > LONGEST_UNIT:
        raise UnitTextError("this is longer than any unit")
    known = known_units()
    letters = _LETTER_G[letter_g]

    def lookup(word: str) -> Measure:
        name = letters.get(word, word)
        if name not in known:
            if word in _LETTER_G["gram"]:
                raise UnitTextError(f'"{word}" could be gram or gravity here; write "kg" or "m/s^2"', word)
            raise UnitTextError(f'there is no unit "{word}" here', word)
        return known[name]

    return _Reader(text.replace("µ", "μ"), lookup, numbers=False).whole()
