"""Read a TOML file and remember on which line every key stands, so that a fault can name its line."""

from __future__ import annotations

import os
import re
import tomllib
from pathlib import Path
from typing import Any

from detune.ground.errors import BriefError, Fault, nearest_name
from detune.ground.toml_positions import KeyPath, Positions, positions_of

__all__ = ["KeyPath", "Positions", "dotted", "load"]


def dotted(path: KeyPath) -> str:
    """Write a path as people read it: ``("allowable", 2, "limit")`` becomes ``allowable[3].limit``.

    The path counts from 0, the text from 1, as a person counts tables. Keys that are no bare TOML keys are quoted.
    """
    text = ""
    for step in path:
        if isinstance(step, int):
            text += f"[{step + 1}]"
        else:
            name = step if re.fullmatch(r"[A-Za-z0-9_-]+", step) else f'"{step}"'
            text += f".{name}" if text else name
    return text


def load(path: str | os.PathLike[str]) -> tuple[dict[str, Any], Positions]:
    """Return the data of a TOML file and the line of each key.

    Raises BriefError with one Fault when the file is missing, unreadable, not UTF-8 or no TOML.
    """
    name = os.fspath(path)
    text = _text(Path(path), name)
    try:
        return tomllib.loads(text), positions_of(text)
    except RecursionError as error:
        fault = Fault(name, None, "file", "brackets nested too deeply", "fewer brackets inside each other")
        raise BriefError([fault]) from error
    except ValueError as error:
        # Mostly TOMLDecodeError; a plain ValueError for an integer of thousands of digits.
        raise BriefError([_syntax_fault(name, text, str(error))]) from error


def _text(path: Path, name: str) -> str:
    try:
        raw = path.read_bytes()
    except FileNotFoundError as error:
        siblings = [other.name for other in path.parent.glob("*.toml")] if path.parent.is_dir() else []
        near = nearest_name(path.name, siblings)
        nearest = None if near is None else str(path.with_name(near))
        raise BriefError([Fault(name, None, "file", "", "a TOML file at this path", nearest)]) from error
    except IsADirectoryError as error:
        raise BriefError([Fault(name, None, "file", "a folder", "a TOML file")]) from error
    except OSError as error:
        found = error.strerror or type(error).__name__
        raise BriefError([Fault(name, None, "file", found, "a file that can be read")]) from error
    try:
        # Some editors put a byte order mark first; it says nothing here.
        return raw.decode("utf-8-sig").replace("\r\n", "\n")
    except UnicodeDecodeError as error:
        line = raw[: error.start].count(b"\n") + 1
        found = f"byte 0x{raw[error.start]:02x}"
        fault = Fault(name, line, "file", found, "text in UTF-8; save the file in that encoding")
        raise BriefError([fault]) from error


_PLACE = re.compile(r"\s*\(at (?:line (\d+), column (\d+)|end of document)\)$")


def _syntax_fault(name: str, text: str, message: str) -> Fault:
    place = _PLACE.search(message)
    problem = message[: place.start()] if place else message
    lines = text.split("\n")
    line: int | None = None
    column = ""
    if place and place.group(1):
        line, at = int(place.group(1)), int(place.group(2))
        # A value that breaks off at the end of its line is reported at the start of the next one.
        if at == 1 and line > 1 and not lines[line - 1].strip():
            line, at = line - 1, len(lines[line - 2]) + 1
        column = f" (column {at})"
    elif place:
        line = positions_of(text).last_statement
    if line is None:
        return Fault(name, None, "file", "", f"valid TOML ({problem})")
    found = lines[line - 1].strip()
    path = _path_on(lines, line)
    return Fault(
        name, line, (dotted(path) or "file") + column, found, _expected(found, problem, path, lines, line)
    )


_KEY = re.compile(r"""\s*((?:[\w-]+|"[^"]*"|'[^']*')(?:\s*\.\s*(?:[\w-]+|"[^"]*"|'[^']*'))*)\s*=""")


def _path_on(lines: list[str], line: int) -> KeyPath:
    """Return the path of the key or table header that starts on this line; empty when none does."""
    text = lines[line - 1]
    if text.lstrip().startswith("["):
        table = positions_of(text).open_table
        return table[:-1] if table and table[-1] == 0 else table
    match = _KEY.match(text)
    if match is None:
        return ()
    before = positions_of("\n".join(lines[: line - 1]))
    return (*before.open_table, *(step.strip().strip("\"'") for step in match.group(1).split(".")))


_NUMBER = r"[+-]?[0-9]+(?:\.[0-9]*)?(?:[eE][+-]?[0-9]+)?"


def _expected(found: str, problem: str, path: KeyPath, lines: list[str], line: int) -> str:
    """Say in plain words what should stand on the line."""
    before = positions_of("\n".join(lines[: line - 1]))
    if "Cannot overwrite" in problem or "Duplicate" in problem or "twice" in problem:
        first = before.lines.get(path)
        again = "" if first is None else f"; it stands on line {first} already"
        return f"each key and each table once{again}"
    list_begins = re.search(r"=\s*\[", found) and found.count("[") > found.count("]")
    if "Unclosed array" in problem or (list_begins and "nvalid value" in problem):
        begins = line if list_begins else before.last_statement or line
        return (
            f"a comma between the entries of the list that begins on line {begins}, "
            "and a closing bracket ] at its end"
        )
    name, _, value = (part.strip() for part in found.partition("="))
    value = value.partition(" #")[0].strip()
    comma = re.match(r"([+-]?[0-9]+),([0-9]+)\s*(\S.*)?$", value)
    if comma:
        number = f"{comma.group(1)}.{comma.group(2)}"
        whole = f'"{number} {comma.group(3)}"' if comma.group(3) else number
        return f"a decimal point instead of the comma: {name} = {whole}"
    if any(mark in found for mark in "“”„‘’«»"):
        return "straight quotation marks"
    if re.match(rf"{_NUMBER}\s*[A-Za-zµμ°%(]", value) and '"' not in value:
        return f'quotation marks around a number with its unit: {name} = "{value}"'
    if "escape" in problem.lower() or "\\" in value:
        return "a slash / instead of each backslash, or single quotation marks around the text"
    if value in ("True", "False", "TRUE", "FALSE", "yes", "no", "Yes", "No", "on", "off"):
        return "true or false, in small letters"
    if value.count('"') % 2 == 1 or (value.count("'") % 2 == 1 and '"' not in value):
        return "a quotation mark at both ends of the text"
    if re.match(r"[^\W\d][\w .-]*$", value):
        return f'quotation marks around text: {name} = "{value}"'
    if "=" in found and not value:
        return "a value after the equals sign"
    return _expected_structure(found, problem)


def _expected_structure(found: str, problem: str) -> str:
    if found.startswith("[") and found.count("[") != found.count("]"):
        return "as many closing as opening brackets"
    if "=" not in found and re.match(r"[\w.-]+\s*:", found):
        return "an equals sign instead of the colon: key = value"
    if "inline table" in problem.lower() or found.count("{") > found.count("}"):
        return "the braces { } of one table closed on the same line, with commas between its keys"
    if re.match(r"[^=\"']*[^\x00-\x7f][^=]*=", found):
        return "quotation marks around a key with letters other than a to z"
    if "Expected '='" in problem or "Invalid statement" in problem:
        return "a line of the form key = value, or a table name in brackets"
    if "Unterminated string" in problem or "Illegal character" in problem:
        return "a quotation mark at both ends of the text"
    if re.search(r"=\s*[+-]?0[0-9]", found):
        return "a number without zeros in front"
    if "after a statement" in problem:
        return "one value after the equals sign, and the next key on a new line"
    return f"valid TOML ({problem[:1].lower()}{problem[1:]})"
