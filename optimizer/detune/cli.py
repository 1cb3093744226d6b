"""The command line: check, run, assess, compare, vary, schema.

Exit codes: 0 a design meets the brief; 1 none does; 2 the brief or a file is wrong; 3 stopped early.
"""

import argparse
import os
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from detune.brief.brief import Brief
    from detune.response.assessment import Assessment
    from detune.solvers.outcome import Settings
    from detune.study.over_scatter import OverScatter

MEETS, NONE_MEETS, FAULTY, STOPPED = 0, 1, 2, 3


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one verb and return its exit code."""
    # Nothing installed beside us may hook into how a study is read, and looking for hooks costs start-up time.
    os.environ.setdefault("PYDANTIC_DISABLE_PLUGINS", "__all__")
    options = _parser().parse_args(arguments)
    from detune.ground.errors import BriefError, DetuneError, SolveError

    try:
        return int(options.verb(options))
    except BriefError as error:
        print(error, file=sys.stderr)
        return FAULTY
    except SolveError as error:
        print(f"No answer: {error}", file=sys.stderr)
        return STOPPED
    except DetuneError as error:
        print(error, file=sys.stderr)
        return FAULTY
    except BrokenPipeError:
        # Whoever read the output has seen enough; nothing may be written after that.
        sys.stdout = None
        return MEETS
    except OSError as error:
        print(f"{error.filename or 'file'}: {error.strerror or error}", file=sys.stderr)
        return FAULTY
    except KeyboardInterrupt:
        print("Interrupted; nothing was written.", file=sys.stderr)
        return STOPPED


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="detune",
        description="Choose vibration mounts from a parts list so that every forced response stays within its limit.",
        epilog="Exit codes: 0 a design meets the brief, 1 none does, 2 the brief or a file is wrong, 3 stopped early.",
    )
    verbs = parser.add_subparsers(title="verbs", required=True, metavar="VERB")

    told = {
        "check": (_check, "read a study and its catalogs, and tell every fault"),
        "run": (_run, "find the cheapest design that meets the brief, the front, and the reasons"),
        "assess": (_assess, "judge one design you name"),
        "compare": (_compare, "set designs you name side by side"),
        "vary": (_vary, "run the study again for several values of one number"),
        "size": (
            _size,
            "size stiffness, damping, ballast and absorbers between bounds, before there are parts",
        ),
        "verify": (_verify, "check a proof record again, by code of its own"),
        "schema": (_schema, "print the JSON Schema of a study file, for editors"),
    }
    parsers = {}
    for name, (verb, text) in told.items():
        parsers[name] = verbs.add_parser(name, help=text)
        parsers[name].set_defaults(verb=verb)
    _add_options(**{name: parsers[name] for name in ("run", "assess", "compare", "vary", "size")})
    parsers["verify"].add_argument(
        "record", metavar="RECORD", help="proof-record.json of a result folder, or the folder"
    )
    for name in ("check", "run", "assess", "compare", "vary", "size"):
        parsers[name].add_argument("study", metavar="STUDY", help="the study file (TOML)")
    return parser


def _add_options(
    run: argparse.ArgumentParser,
    assess: argparse.ArgumentParser,
    compare: argparse.ArgumentParser,
    vary: argparse.ArgumentParser,
    size: argparse.ArgumentParser,
) -> None:
    wording = 'a design, as "group=part, group=2 x part + damper, group=(empty), ballast=40 kg"'
    run.add_argument(
        "--design", action="append", default=[], help=f"{wording}, set beside the answer; may be repeated"
    )
    assess.add_argument("--design", required=True, help=wording)
    compare.add_argument(
        "--design", action="append", required=True, help=f"{wording}; repeat for each design"
    )
    for verb in (run, size):
        verb.add_argument(
            "--out", metavar="FOLDER", help="where the results go (default: results/ and the study's name)"
        )
        verb.add_argument("--overwrite", action="store_true", help="replace an existing result folder")
    vary.add_argument(
        "--set", required=True, metavar="KEY", help="the key to replace, such as allowable[2].limit"
    )
    vary.add_argument(
        "--to", required=True, nargs="+", metavar="VALUE", help="its values, each as in the study file"
    )
    methods = ("auto", "enumeration", "bounded search", "second opinion")
    run.add_argument(
        "--method",
        choices=methods,
        default="auto",
        help="how to search (default: by the size); a second opinion finds the least cost of a small study by Pyomo",
    )
    run.add_argument(
        "--workers", type=int, default=1, metavar="N", help="worker threads of the bounded search"
    )
    size.add_argument(
        "--second-opinion",
        action="store_true",
        help="on one axis: solve the same problem by SCIP as well, and set its answer beside the exact one",
    )
    size.add_argument(
        "--time-limit", metavar="TIME", help='of the second opinion, for example "20 s" (default: 60 s)'
    )
    ends = 'stop the search after this time, for example "60 s"'
    more = f"{ends}, and what is optional after it when as much has passed again"
    run.add_argument("--time-limit", metavar="TIME", help=more)
    vary.add_argument("--time-limit", metavar="TIME", help=ends)
    for verb in (assess, compare):
        verb.add_argument(
            "--time-limit",
            metavar="TIME",
            default="60 s",
            help="for the proof over a stated scatter, each design (default: 60 s)",
        )


def _check(options: argparse.Namespace) -> int:
    import gc

    # Collecting while hundreds of classes are made finds nothing and costs a tenth of this short command.
    gc.disable()
    try:
        from detune.study.load import load_study

        study = load_study(options.study)
    finally:
        # All that was read stays until the end: the last collection need not go through it.
        gc.freeze()
        gc.enable()
    brief = study.brief
    parts = ", ".join(f"{len(catalog.parts)} in {name}" for name, catalog in study.catalogs.items())
    ballast = brief.ballast
    steps = (1, "ballast step") if ballast is None else (len(ballast.steps), "ballast step")
    if ballast is not None and ballast.catalogs:
        steps = (len(ballast.catalogs), "ballast list")
    print(f"{options.study}: no fault found")
    print(f"  {brief.title}")
    counted = (
        (len(brief.stations), "station"),
        (len(brief.station_groups), "group"),
        *([(len(brief.absorbers), "absorber")] if brief.absorbers else []),
        (len(brief.conditions), "condition"),
        (len(brief.forcing), "forcing"),
        (len(brief.allowables), "allowable"),
        steps,
    )
    print("  " + ", ".join(f"{count} {name}{'' if count == 1 else 's'}" for count, name in counted))
    if parts or brief.sizing is None:
        print(f"  parts: {parts}")
    if brief.sizing is not None:
        sizing = brief.sizing
        sense = "minimise" if sizing.minimise else "maximise"
        print(f"  to be sized ({sense} {sizing.goal}): {', '.join(u.title for u in sizing.unknown)}")
    return MEETS


def _run(options: argparse.Namespace) -> int:
    from detune.report.folder import check_folder, write_folder
    from detune.report.summary import summary
    from detune.study.after_search import AfterSearch
    from detune.study.load import load_study
    from detune.study.named import named_design
    from detune.study.run import run_study

    study = load_study(options.study)
    folder = Path(options.out) if options.out else Path("results") / Path(options.study).stem
    check_folder(folder, options.overwrite)
    designs = tuple(named_design(study.brief, study.catalogs, text) for text in options.design)
    settings = _settings(options, stages=True)
    work = AfterSearch(settings)
    result = run_study(study, settings, designs, options.method, work)
    write_folder(result, folder, options.overwrite, work)
    print(summary(result, work=work))
    print(f"\nResult folder: {folder} (open report.html in a browser)")
    return result.exit_code


def _assess(options: argparse.Namespace) -> int:
    from detune.report.named_scatter import scatter_text
    from detune.report.summary import assess_text

    brief, (assessment,), (scatter,) = _judged(options, [options.design])
    print(assess_text(brief, assessment))
    if scatter is not None:
        print(scatter_text(brief, scatter))
    return _code([assessment], [scatter])


def _compare(options: argparse.Namespace) -> int:
    from detune.report.named_scatter import scatter_rows
    from detune.report.summary import compare_text

    _, assessments, judged = _judged(options, options.design)
    print(compare_text(assessments, more=scatter_rows(judged)))
    return _code(assessments, judged)


def _code(assessments: "Sequence[Assessment]", judged: "Sequence[OverScatter | None]") -> int:
    """0 one of the designs meets the brief (over its scatter, where that is an interval), 3 one is open, 1
    none does.
    """
    met = [each for a, each in zip(assessments, judged, strict=True) if a.meets]
    if any(each is None or each.verdict is None or each.proven for each in met):
        return MEETS
    return STOPPED if any(each is not None and each.proven is None for each in met) else NONE_MEETS


def _judged(
    options: argparse.Namespace, texts: Sequence[str]
) -> "tuple[Brief, list[Assessment], list[OverScatter | None]]":
    from detune.problem.build import build
    from detune.response.assessor import Assessor
    from detune.study.load import load_study
    from detune.study.named import named_design
    from detune.study.over_scatter import over_scatter

    study = load_study(options.study)
    problem = build(study.brief, study.catalogs)
    limit = _settings(options).time_limit
    designs = [named_design(study.brief, study.catalogs, text) for text in texts]
    assess = Assessor(study.brief)
    return (
        study.brief,
        [assess(design) for design in designs],
        [over_scatter(problem, design, limit) for design in designs],
    )


def _vary(options: argparse.Namespace) -> int:
    from detune.study.vary import vary_study

    code = MEETS
    print(f"{options.set:>24}  {'cost':>10}  {'separation':>10}  {'least margin':>12}  design")
    for variation in vary_study(options.study, options.set, options.to, _settings(options)):
        answer = variation.result.answer
        code = max(code, variation.result.exit_code)
        if answer is None:
            print(f"{variation.value:>24}  {'none meets the brief':>36}")
            continue
        print(
            f"{variation.value:>24}  {answer.cost:>10.2f}  {answer.separation:>10.1%}  "
            f"{answer.least_margin:>12.1%}  {answer.design}"
        )
    return code


def _size(options: argparse.Namespace) -> int:
    from detune.ground.errors import BriefError, Fault
    from detune.report.folder import check_folder
    from detune.report.sizing_page import sizing_summary, write_sizing
    from detune.study.load import load_study
    from detune.study.size import size_study

    if options.time_limit is not None and not options.second_opinion:
        expected = "--second-opinion beside it: sizing itself takes no time limit"
        raise BriefError([Fault("--time-limit", None, "--time-limit", options.time_limit, expected)])
    study = load_study(options.study)
    folder = Path(options.out) if options.out else Path("results") / f"{Path(options.study).stem}-sizing"
    check_folder(folder, options.overwrite)
    limit = _settings(options).time_limit or 60.0
    result = size_study(study, opinion_limit=limit if options.second_opinion else None)
    write_sizing(result, folder, options.overwrite)
    print(sizing_summary(result))
    print(f"\nResult folder: {folder} (open report.html in a browser)")
    return result.exit_code


def _verify(options: argparse.Namespace) -> int:
    from detune.proof.checker import check_record

    path = Path(options.record)
    report = check_record(path / "proof-record.json" if path.is_dir() else path)
    print(f"{'Confirmed' if report.confirmed else 'REJECTED'}: {report.entries} entries of {options.record}")
    for fault in report.faults:
        print(f"  not confirmed: {fault}")
    print(f"Computed again: {report.boxes} boxes, {report.designs} designs and candidates.")
    for remark in report.not_reproven:
        print(f"Not computed again: {remark}.")
    return MEETS if report.confirmed else NONE_MEETS


def _schema(options: argparse.Namespace) -> int:
    import json

    from detune.brief.schema import study_schema

    print(json.dumps(study_schema(), indent=2))
    return MEETS


def _settings(options: argparse.Namespace, stages: bool = False) -> "Settings":
    from detune.ground.errors import BriefError, Fault
    from detune.ground.units import UnitError, parse
    from detune.report.terminal import Terminal
    from detune.solvers.outcome import Settings

    limit = None
    if options.time_limit is not None:
        try:
            limit = parse(options.time_limit, "time")
        except UnitError as error:
            raise BriefError(
                [Fault("--time-limit", None, "--time-limit", error.found, error.expected)]
            ) from None
    terminal = Terminal()
    return Settings(
        time_limit=limit,
        progress=terminal.progress,
        announce=terminal.announce,
        stage=terminal.stage if stages else None,
        workers=max(1, getattr(options, "workers", 1)),
    )
