"""The result folder: everything a study came to, in files that stand on their own."""

import os
import shutil
from collections.abc import Callable
from functools import partial
from pathlib import Path

from detune.ground.errors import DetuneError
from detune.proof.record import record_text
from detune.report.csv_files import (
    contributions_csv,
    designs_csv,
    front_csv,
    margins_csv,
    modes_csv,
    responses_csv,
    stations_csv,
    why_csv,
)
from detune.report.figures import Drawn, draw_each
from detune.report.gathered import gather, left_out_of
from detune.report.page import page_text
from detune.report.plots import PLOTS
from detune.report.response_data import response_curves
from detune.report.strict_json import json_text
from detune.report.tables_listed import absorbers_csv
from detune.solvers.outcome import Integers, Settings
from detune.solvers.robust_record import proof_record
from detune.study.after_search import AfterSearch
from detune.study.run import Result

MARK = "proof.json"
# Plots whose numbers take long to work out.
LONG = ("spectral-density", "shock", "stiffness-damping")


class FolderExists(DetuneError):
    """The result folder is there already and nobody asked for it to be replaced."""


def write_folder(
    result: Result, folder: str | Path, overwrite: bool = False, work: AfterSearch | None = None
) -> Path:
    """Write the result folder and return its path.

    Everything is written into a folder beside it and renamed at the end, so that a half-written folder
    never looks finished. Raises FolderExists where something is there already, unless `overwrite`; even
    then only an empty folder or a result folder is replaced. work: the run's own, where it has a time limit: what is
    optional in the report is then left out when the time is up.
    """
    work = work or AfterSearch(Settings())
    with work.listening():
        return write_whole(folder, partial(_fill, result, work), overwrite)


def write_whole(folder: str | Path, fill: Callable[[Path], None], overwrite: bool) -> Path:
    """Let `fill` write into a folder beside the one named, put that in its place, and return its path.

    Raises FolderExists as `write_folder` does.
    """
    target = Path(folder)
    check_folder(target, overwrite)
    target.parent.mkdir(parents=True, exist_ok=True)
    building = sibling(target, "writing")
    building.mkdir()
    try:
        fill(building)
        put_in_place(building, target)
    finally:
        shutil.rmtree(building, ignore_errors=True)
    return target


def check_folder(folder: str | Path, overwrite: bool = False) -> None:
    """Raise FolderExists if `write_folder` would refuse: to be asked before the work, not after it."""
    target = Path(folder)
    if not target.exists() and not target.is_symlink():
        return
    if not target.is_dir() or target.is_symlink():
        raise FolderExists(f"{target} is there already and is no folder; name another result folder.")
    if not any(target.iterdir()):
        return
    if not overwrite:
        raise FolderExists(
            f"{target} is there already and is not empty; name another folder, or say --overwrite."
        )
    if not (target / MARK).is_file():
        raise FolderExists(
            f"{target} is not a result folder ({MARK} is missing), so it is not replaced even with --overwrite; "
            "name another folder."
        )


def sibling(target: Path, purpose: str) -> Path:
    """Return the name of a folder beside the target, in which it is written or kept meanwhile."""
    resolved = target.resolve()
    return resolved.with_name(f".{resolved.name}.{purpose}-{os.getpid()}")


def put_in_place(building: Path, target: Path) -> None:
    """Rename a finished folder to its target, replacing an earlier one only when that is out of the way."""
    if not target.exists():
        building.rename(target)
        return
    earlier = sibling(target, "earlier")
    target.rename(earlier)
    try:
        building.rename(target)
    except OSError:
        earlier.rename(target)
        raise
    shutil.rmtree(earlier)


def _fill(result: Result, work: AfterSearch, folder: Path) -> None:
    subject = result.subject
    gathered = gather(result, work)
    curves = response_curves(result.study.brief, subject) if subject is not None else ()
    texts = {
        "study.toml": result.study.source,
        "inputs.json": json_text({"sha256": dict(result.study.hashes)}),
        MARK: json_text(_proof(result)),
        "proof-record.json": record_text(
            proof_record(result.problem, result.outcome, result.robust, dict(result.study.hashes))
        ),
        "front.csv": front_csv(result),
        "designs.csv": designs_csv(result),
        "why.csv": why_csv(result),
    }
    if subject is not None:
        texts["responses.csv"] = responses_csv(curves)
        texts["margins.csv"] = margins_csv(subject)
        texts["stations.csv"] = stations_csv(subject)
        texts["modes.csv"] = modes_csv(subject)
        if gathered.shares is not None:
            texts["contributions.csv"] = contributions_csv(gathered.shares)
        if result.study.brief.absorbers:
            texts["absorbers.csv"] = absorbers_csv(result.study.brief, subject)
    (folder / "plots").mkdir()
    drawn = _drawn(result, work)
    texts["answer.json"] = json_text(_answer(result, work))
    for plot in drawn:
        texts[f"plots/{plot.name}.svg"] = plot.svg
        (folder / "plots" / f"{plot.name}.png").write_bytes(plot.png)
    texts["report.html"] = page_text(result, drawn, gathered, work)
    for name, text in texts.items():
        (folder / name).write_text(text, encoding="utf-8", newline="\n")


def _drawn(result: Result, work: AfterSearch) -> tuple[Drawn, ...]:
    """Return the plots; those that take long only while there is time, and after an interruption none."""
    drawn: list[Drawn] = []
    missing = []
    if not work.interrupted:
        work.tell("Drawing the plots.")
    for name, module in PLOTS.items():
        if work.may_begin() or not (work.interrupted or name in LONG):
            drawn += draw_each({name: module}, result)
        elif _may_show(result, name):
            missing.append(name)
    if missing:
        work.leave_out(f"plots: {', '.join(missing)}")
    work.tell("Writing the result folder.")
    return tuple(drawn)


def _may_show(result: Result, name: str) -> bool:
    """Return whether a plot can have something to show, as far as the forcing tells."""
    acting = result.study.brief.forcing
    if name == "spectral-density":
        return any(forcing.noises() for forcing in acting)
    return name != "shock" or any(forcing.transients() for forcing in acting)


def _answer(result: Result, work: AfterSearch) -> dict[str, object]:
    return {
        "title": result.study.brief.title,
        "stopped": result.outcome.stopped,
        "none_exists": result.outcome.none_exists,
        "exit_code": result.exit_code,
        "traded": result.front.trade,
        "answer": result.answer,
        "proven_over_scatter": result.robust_answer,
        "scatter": _scatter(result),
        "closest": result.closest,
        "compared": result.compared,
        "unassessed_on_the_front": result.front.unassessed,
        "left_out": left_out_of(result, work)[0],
        "units": "SI: m, kg, s, N, rad, Hz; cost in the currency of the lists; margins and separation are ratios",
    }


def _scatter(result: Result) -> dict[str, object] | None:
    robust = result.robust
    if robust is None:
        return None
    return {
        "judge": robust.judge,
        "stopped": robust.stopped,
        "price_of_robustness": robust.price,
        "cheapest_proven": robust.optimal,
        "winner": None if robust.winner is None else {"cost": robust.winner.cost, "rows": robust.winner.rows},
        "front": [None if verdict is None else verdict.status for verdict in robust.front],
        "undecided": len(robust.undecided) + len(robust.sampled),
        "violated": len(robust.violated),
        "yields": robust.yields,
    }


def _by_stack(result: Result, by_part: tuple[Integers, ...]) -> dict[str, dict[str, int]]:
    """Return the counts by ballast, where it is taken from a list and they are told apart by it."""
    model = result.problem.model
    if len(by_part) == len(model.groups):
        return {}
    counts = zip(model.ballast, by_part[-1], strict=True)
    return {"ballast": {f"{step.catalog}: {step.part}": int(n) for step, n in counts if n}}


def _proof(result: Result) -> dict[str, object]:
    record = result.outcome.record
    return {
        "method": record.method,
        "stopped": result.outcome.stopped,
        "designs": record.designs,
        "looked_at": record.looked_at,
        "met": record.met,
        "accounted": record.accounted,
        "withdrawn_by_the_assessor": result.front.withdrawn,
        "rules": [
            {
                "stage": rule.stage,
                "rule": rule.rule,
                "excluded": rule.excluded,
                # Parts without an excluded design are left out: their count is zero.
                "by_part": {
                    group.name: {
                        f"{m.catalog}: {m.part}": int(n)
                        for m, n in zip(group.mounts, counts, strict=True)
                        if n
                    }
                    for group, counts in zip(result.problem.model.groups, rule.by_part, strict=False)
                }
                | _by_stack(result, rule.by_part)
                # Whole sets of designs at once are not told apart by part.
                if rule.by_part
                else None,
            }
            for rule in record.rules
        ],
        "failed_in_the_final_test": [
            {"stage": rule.stage, "rule": rule.rule, "excluded": rule.excluded} for rule in record.tested
        ],
        "lower_bound": record.lower_bound,
        "seconds": record.seconds,
    }
