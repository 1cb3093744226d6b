"""Variations: one number of the study file replaced, and the study built and run again."""

import copy
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from detune.ground.errors import BriefError, Fault
from detune.ground.toml_lines import load
from detune.solvers.outcome import Settings
from detune.study.load import study_of_tables
from detune.study.run import Result, run_study

Key = str | int


@dataclass(frozen=True)
class Variation:
    """One variant: the key that was replaced, its value as written, and what the study came to."""

    key: str
    value: str
    result: Result


def vary_study(
    path: str | Path, key: str, values: Sequence[str], settings: Settings | None = None
) -> Iterator[Variation]:
    """Run the study once for every value, put at `key` (as faults name places: `allowable[2].limit`).

    A value is text as it would stand in the study file; a whole or decimal number without a unit is
    taken as a number. Every variant is checked before the first one runs. Raises BriefError.
    """
    data, positions = load(path)
    place = read_key(data, key)
    studies = []
    faults: list[Fault] = []
    for value in values:
        changed = copy.deepcopy(data)
        parent: Any = changed
        for step in place[:-1]:
            parent = parent[step]
        parent[place[-1]] = _as_written(value)
        try:
            studies.append((value, study_of_tables(changed, positions, path)))
        except BriefError as error:
            faults += error.faults
    if faults:
        raise BriefError(dict.fromkeys(faults))
    for value, study in studies:
        yield Variation(key, value, run_study(study, settings))


def read_key(data: Any, key: str) -> tuple[Key, ...]:
    """Return the path of a key such as `allowable[2].limit` (counted from 1), refusing one that does not exist."""
    place: list[Key] = []
    value = data
    for piece in key.replace("[", ".[").split("."):
        step: Key = piece
        if piece.startswith("[") and piece.endswith("]") and piece[1:-1].isdigit():
            step = int(piece[1:-1]) - 1
        there = (isinstance(value, dict) and step in value) or (
            isinstance(value, list) and isinstance(step, int) and 0 <= step < len(value)
        )
        if not there:
            known = (
                list(value)
                if isinstance(value, dict)
                else [f"[1] to [{len(value)}]"]
                if isinstance(value, list)
                else []
            )
            raise BriefError(
                [
                    Fault(
                        "--set",
                        None,
                        key,
                        piece,
                        "a key of the study: " + (", ".join(map(str, known)) or "none below"),
                    )
                ]
            )
        value = value[step]
        place.append(step)
    return tuple(place)


def _as_written(value: str) -> Any:
    for number in (int, float):
        try:
            return number(value)
        except ValueError:
            continue
    return value
