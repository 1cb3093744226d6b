"""What is said of unknowns that nothing fixes, of lateral stiffness stated twice, and of other branches that miss."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from detune.ground.errors import BriefError
from detune.report.sizing_page import sizing_summary
from detune.study.load import load_study
from detune.study.size import size_study
from detune.study.size_cautions import not_fixed

SKID = (Path(__file__).parent / "skid_to_size.toml").read_text(encoding="utf-8")
LATERAL = 'axis = "lateral"'
BOTH = """axis = "x"
lower = "50 N/mm"
upper = "2000 N/mm"

[[sizing.unknown]]
kind = "stiffness"
group = "motor end"
axis = "{second}\""""


def study_of(folder: Path, *changes: tuple[str, str]):
    text = SKID
    for old, new in changes:
        assert old in text
        text = text.replace(old, new, 1)
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    return load_study(path)


RATIO = (
    'group = "motor end"\ndynamic_to_static',
    'group = "motor end"\nlateral_ratio = 0.6\ndynamic_to_static',
)


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ([(LATERAL, BOTH.format(second="lateral"))], 'once: as "lateral", or as "x" and "y"'),
        (
            [(LATERAL, BOTH.format(second="y")), RATIO],
            'no "lateral_ratio" here: lateral stiffness is an unknown',
        ),
        ([RATIO], 'no "lateral_ratio" here: lateral stiffness is an unknown'),
    ],
)
def test_lateral_stiffness_is_stated_once(tmp_path, changes, words):
    with pytest.raises(BriefError, match=words) as caught:
        study_of(tmp_path, *changes)
    assert all(fault.line is not None for fault in caught.value.faults)


def test_an_unknown_that_nothing_fixes_is_named(tmp_path):
    """Lateral stiffness has no price, and the limits on the skid leave it room: any of a range will do."""
    result = size_study(study_of(tmp_path), drawings=False)
    best = result.answer
    assert best is not None
    brief = result.study.brief
    titles = [unknown.title for unknown in brief.sizing.unknown]
    values = best.values.copy()
    values[titles.index("lateral stiffness of motor end")] = 2.5e5
    assert not_fixed(brief, values, best.objective) == [
        "lateral stiffness of motor end is not fixed by the answer: its neighbours have the same objective and meet "
        "every limit"
    ]
    # What the objective or a limit holds is not named: here the axial stiffness, by sag and price.
    assert not any("axial" in line for line in not_fixed(brief, best.values, best.objective))
    assert np.isfinite(best.objective)


def test_another_branch_that_misses_says_so(tmp_path):
    result = size_study(study_of(tmp_path), drawings=False)
    first = result.branches[0]
    rows = tuple(replace(row, margin=-0.1) if row.kind == "sag" else row for row in first.assessment.margins)
    judged = replace(first.assessment, margins=rows, meets=False)
    missed = replace(first, name="local search 9", assessment=judged)
    text = sizing_summary(replace(result, branches=(first, missed)))
    line = next(line for line in text.splitlines() if line.startswith("Other branch: local search 9"))
    assert line.endswith("misses sag at flange (at rest)")
