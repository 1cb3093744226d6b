"""The map of a sizing study: round the answer, or where there is none round what came nearest or the middle."""

from __future__ import annotations

import numpy as np

from detune.parts.kinds.mount import Mount
from detune.problem.build import Problem, build
from detune.sizing.made_parts import bounds, logarithmic, made_design, sizing_of
from detune.solvers.map_axes import Floats
from detune.solvers.one_axis_statement import OneAxis
from detune.solvers.size_map import SizingMap, sizing_map
from detune.study.load import Study


def map_of(
    study: Study, around: Floats | None, axis: OneAxis | None, answer: bool, real: Problem | None
) -> SizingMap:
    """The map that a study asks for; `real` is its problem over the parts of its lists where that stands already."""
    brief, sizing = study.brief, sizing_of(study.brief)
    values = _middle(study) if around is None else around
    if real is None and brief.choices:
        real = build(made_design(brief, values).brief, study.catalogs)
    parts: dict[str, tuple[Mount, ...]] = {}
    if real is not None:
        parts = {
            group: tuple(dict.fromkeys(mounts))
            for group, mounts in zip(brief.groups, real.candidates, strict=True)
        }
    return sizing_map(brief, sizing.map, values, axis, parts, sizing.goal, answer)


def _middle(study: Study) -> Floats:
    """Every unknown in the middle of its range, by its logarithm where it is searched for by that."""
    low, high = bounds(study.brief)
    logs = np.array([logarithmic(unknown) for unknown in sizing_of(study.brief).unknown])
    return np.asarray(np.where(logs, np.sqrt(np.maximum(low, 0.0) * high), 0.5 * (low + high)))
