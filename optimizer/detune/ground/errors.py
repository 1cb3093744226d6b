"""Errors that are part of the interface: faults in what the user wrote, and failures of a solver."""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass


def _quoted(text: str) -> str:
    if not text:
        return "nothing"
    return f"'{text}'" if '"' in text else f'"{text}"'


@dataclass(frozen=True)
class Fault:
    """One thing that is wrong in a file the user wrote.

    file: path as the user gave it. line: 1-based, None when no line can be named.
    where: dotted key such as ``allowable[2].limit``, or a column name.
    found: what stands there (empty when nothing does). expected: what to write, with an example.
    nearest: the closest known name, when there is one.
    """

    file: str
    line: int | None
    where: str
    found: str
    expected: str
    nearest: str | None = None

    def __str__(self) -> str:
        place = self.file if self.line is None else f"{self.file}:{self.line}"
        text = f"{place}: {self.where}: found {_quoted(self.found)}, expected {self.expected}"
        if self.nearest is not None:
            text += f"; did you mean {_quoted(self.nearest)}?"
        # A value may span several lines in its file; a fault is always one line.
        return " ".join(text.splitlines())


class DetuneError(Exception):
    """Base of every error this package raises on purpose."""


class BriefError(DetuneError):
    """The brief, or a file it names, is wrong. Carries every fault found, sorted by file and line."""

    faults: tuple[Fault, ...]

    def __init__(self, faults: Iterable[Fault]) -> None:
        """Faults without a line stand before the others of their file."""
        self.faults = tuple(sorted(faults, key=lambda fault: (fault.file, fault.line or 0)))
        # The faults are the only argument, so that pickle can build the error again.
        super().__init__(self.faults)

    def __str__(self) -> str:
        count = len(self.faults)
        head = "1 fault found:" if count == 1 else f"{count} faults found:"
        return "\n".join([head, *(str(fault) for fault in self.faults)])


class SolveError(DetuneError):
    """A solver could not do its work; the message says why in one sentence."""


_CLOSE = 0.6
"""Likeness, from 0 to 1, below which a name is no help to somebody who mistyped another."""


def _bare(name: str) -> str:
    return name.casefold().replace("_", "").replace("-", "").replace(" ", "")


def near_names(name: str, known: Iterable[str]) -> list[str]:
    """Return the known names close to `name`, the closest first.

    Case is ignored, and ``_``, ``-`` and space count as the same. Among equally close names the one whose
    letters also agree in case comes first, then alphabetical order decides.
    """
    wanted = _bare(name)
    matcher = difflib.SequenceMatcher(None, "", wanted)
    close: list[tuple[float, float, str]] = []
    for candidate in set(known):
        matcher.set_seq1(_bare(candidate))
        if matcher.real_quick_ratio() >= _CLOSE and matcher.ratio() >= _CLOSE:
            exact = difflib.SequenceMatcher(None, candidate, name).ratio()
            close.append((-matcher.ratio(), -exact, candidate))
    return [candidate for _, _, candidate in sorted(close)]


def nearest_name(name: str, known: Iterable[str]) -> str | None:
    """Return the known name closest to `name` as `near_names` ranks them, or None when none is close."""
    near = near_names(name, known)
    return near[0] if near else None
