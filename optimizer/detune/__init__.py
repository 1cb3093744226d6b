"""detune: chooses vibration mounts, ballast and damping from the forced response, at least cost.

The public names load what they need when they are first used, so that importing the package is cheap.
"""

from importlib import import_module
from typing import Any

_HOME = {
    "Brief": "detune.brief.brief",
    "read_brief": "detune.brief.read",
    "Study": "detune.study.load",
    "load_study": "detune.study.load",
    "study_of": "detune.study.load",
    "Result": "detune.study.run",
    "run_study": "detune.study.run",
    "vary_study": "detune.study.vary",
    "size_study": "detune.study.size",
    "SizingResult": "detune.study.size",
    "named_design": "detune.study.named",
    "Design": "detune.response.design",
    "Assessment": "detune.response.assessment",
    "assess": "detune.response.assess",
    "Problem": "detune.problem.build",
    "build": "detune.problem.build",
    "Outcome": "detune.solvers.outcome",
    "Settings": "detune.solvers.outcome",
    "Front": "detune.study.front",
    "read_catalog": "detune.parts.catalog",
    "Catalog": "detune.parts.catalog",
    "write_folder": "detune.report.folder",
    "summary": "detune.report.summary",
    "DetuneError": "detune.ground.errors",
    "BriefError": "detune.ground.errors",
    "SolveError": "detune.ground.errors",
}

__all__ = list(_HOME)
__version__ = "0.1.0"


def __getattr__(name: str) -> Any:
    if name not in _HOME:
        raise AttributeError(f"module 'detune' has no attribute {name!r}")
    return getattr(import_module(_HOME[name]), name)


def __dir__() -> list[str]:
    return sorted([*_HOME, "__version__"])
