"""Whether a sizing study has sense: what is refused in the user's words, with the line in the study file."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from detune.brief.finding import Finding
from detune.brief.read import to_fault
from detune.brief.sizing import STANDS_FOR, Sizing
from detune.ground.errors import BriefError, Fault
from detune.ground.toml_positions import positions_of
from detune.sizing.made_parts import sizing_of
from detune.solvers import size_many_starts
from detune.solvers.size_batch import judge
from detune.solvers.size_many_starts import start_points
from detune.study.load import Study

# Points at which it is tried whether an unknown matters to anything.
TRIED = 6


def faults_of(study: Study, findings: Sequence[Finding]) -> list[Fault]:
    """The findings as faults, with their lines where the study was read from a file."""
    # A study made in Python is kept as JSON, which begins with a brace as no TOML does.
    written = "" if study.source.startswith("{") else study.source
    positions = positions_of(written)
    return [to_fault(study.brief.file, finding, positions) for finding in findings]


def one_axis_only(study: Study, why: str, opinion: bool) -> None:
    """Refuse a number of parts in parallel as an unknown, and a second opinion, where `why` the brief is not one axis.

    Raises BriefError.
    """
    faults: list[Fault] = []
    for index, unknown in enumerate(sizing_of(study.brief).unknown):
        if unknown.kind == "parallel":
            expected = (
                f'the number of parts as "parallel" of the stations: it is sought on one axis alone,'
                f" and here {why}"
            )
            faults += faults_of(study, (Finding(("sizing", "unknown", index), unknown.title, expected),))
    titles = [unknown.title for unknown in sizing_of(study.brief).unknown]
    for index, name in enumerate(sizing_of(study.brief).map):
        if name in STANDS_FOR and name not in titles:
            expected = (
                f"an unknown: {', '.join(titles)}; {name} spans a map on one axis alone, and here {why}"
            )
            faults += faults_of(study, (Finding(("sizing", "map", index), name, expected),))
    if opinion:
        expected = (
            f"no second opinion on this study: it is given for one mass on one axis alone, and here {why}"
        )
        faults.append(Fault(study.brief.file, None, "--second-opinion", "--second-opinion", expected))
    if faults:
        raise BriefError(faults)


def check_sense(study: Study) -> tuple[str, ...]:
    """Refuse an unknown nothing depends on, and an objective no unknown changes; return cautions.

    Every unknown is moved between its bounds, the others at a few points: what changes neither a requirement
    nor the objective has no answer. Raises BriefError with every such unknown.
    """
    sizing = sizing_of(study.brief)
    felt, counts, boundless = _effects(study)
    findings: list[Finding] = []
    cautions: list[str] = []
    for index, unknown in enumerate(sizing.unknown):
        low, high = unknown.bounds
        if low == high or felt[index]:
            continue
        path = ("sizing", "unknown", index)
        if not counts[index]:
            expected = (
                "an unknown on which a requirement or the objective depends: nothing here changes with it"
            )
            findings.append(Finding(path, unknown.title, expected))
        else:
            cautions.append(
                f"no requirement depends on {unknown.title}; the objective alone moves it, to an end of its range"
            )
    if not findings:
        findings = _objective_sense(sizing, bool(counts.any()), sizing.goal not in boundless)
    for number, name in enumerate(sizing.trade):
        if not findings and name in boundless:
            expected = "objectives that have a finite value: nothing excites the machine steadily"
            findings.append(Finding(("sizing", "trade", number), name, expected))
    if findings:
        raise BriefError(faults_of(study, findings))
    return tuple(cautions)


def _effects(study: Study) -> tuple[NDArray[np.bool_], NDArray[np.bool_], set[str]]:
    """Which unknowns (U,) any requirement feels, which (U,) the objective, and which objectives are not finite."""
    sizing = sizing_of(study.brief)
    unknowns = len(sizing.unknown)
    base = start_points(unknowns, TRIED, sizing.seed)
    moved = []
    for column in range(unknowns):
        for end in (0.0, 1.0):
            there = base.copy()
            there[:, column] = end
            moved.append(there)
    to = size_many_starts.Coordinates(study.brief)
    found = judge(study.brief, to.outward(np.concatenate(moved)))
    margins = found.margins.reshape(len(found.requirements), unknowns, 2, TRIED)
    felt = np.abs(margins[:, :, 0] - margins[:, :, 1]).max(axis=(0, 2)) > 1e-9
    objective = found.objectives[sizing.goal].reshape(unknowns, 2, TRIED)
    # An objective without bound, such as a separation from nothing, is the same at both ends.
    known = np.where(np.isfinite(objective), objective, 0.0)
    shift = np.abs(known[:, 0] - known[:, 1]).max(axis=1)
    counts = shift > 1e-9 * max(float(np.abs(known).max()), 1e-300)
    boundless = {name for name, values in found.objectives.items() if not np.isfinite(values).all()}
    return felt, counts, boundless


def _objective_sense(sizing: Sizing, counts: bool, finite: bool) -> list[Finding]:
    """What is wrong with an objective that no unknown `counts` for, or that is not `finite` for every design."""
    if counts:
        expected = "an objective that has a finite value for every design"
        return [] if finite else [Finding(("sizing",), sizing.goal, expected)]
    if sizing.goal == "cost":
        expected = (
            "a price on some unknown (cost_per_stiffness, cost_per_damping, cost_per_loss_factor, or the "
            "ballast's cost_per_kg): as stated every design costs the same"
        )
    elif not finite:
        expected = (
            "an objective that has a finite value: nothing excites the machine steadily, so the separation has "
            "no bound"
        )
    else:
        expected = "an objective that some unknown changes: as stated it is the same for every design"
    return [Finding(("sizing", "minimise" if sizing.minimise else "maximise"), sizing.goal, expected)]
