"""Ballast in steps where local searches size the machine: what is shown stands on a step, and on the best one."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from detune.brief.sizing import SizingUnknown
from detune.solvers import size_many_starts
from detune.solvers.size_front_searched import searched_front
from detune.solvers.size_whole import on_steps, step_of
from detune.study.load import load_study
from detune.study.size import size_study

SKID = (Path(__file__).parent / "skid_to_size.toml").read_text(encoding="utf-8")
SKID = SKID[: SKID.index('[[sizing.unknown]]\nkind = "position"')] + SKID[SKID.index("[[sizing.made]]") :]
# Dear springs and cheap ballast: some of it is wanted.
SKID = SKID.replace("cost_per_kg = 1.5", "cost_per_kg = 0.02").replace(
    'limit = "1.2 mm/s"', 'limit = "0.75 mm/s"'
)


def sized(folder: Path, text: str):
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    return size_study(load_study(path), drawings=False)


def test_ballast_stands_on_the_best_of_its_steps(tmp_path):
    """Every step held in a study of its own: none is cheaper, and the continuous answer is cheaper still or equal."""
    stepped = sized(tmp_path, SKID.replace('upper = "150 kg"', 'upper = "150 kg"\nstep = "40 kg"'))
    best = stepped.answer
    assert best is not None and stepped.searches is not None
    assert best.values[-1] in (0.0, 40.0, 80.0, 120.0)
    assert all(search.values[-1] in (0.0, 40.0, 80.0, 120.0) for search in stepped.searches.searches)
    assert "on their steps" in stepped.worth
    for kilograms in (0, 40, 80, 120):
        held = SKID.replace(
            'lower = "0 kg"\nupper = "150 kg"', f'lower = "{kilograms} kg"\nupper = "{kilograms} kg"'
        )
        alone = sized(tmp_path, held).answer
        assert alone is None or alone.objective >= best.objective * (1 - 1e-4)
    free = sized(tmp_path, SKID).answer
    assert free is not None and free.objective <= best.objective * (1 + 1e-4)


def test_many_steps_are_tried_round_the_best_searches(tmp_path):
    stepped = sized(tmp_path, SKID.replace('upper = "150 kg"', 'upper = "150 kg"\nstep = "7 kg"'))
    best, free = stepped.answer, sized(tmp_path, SKID).answer
    assert best is not None and free is not None
    assert best.values[-1] / 7.0 == pytest.approx(round(best.values[-1] / 7.0), abs=1e-9)
    assert abs(best.values[-1] - free.values[-1]) <= 7.0 + 1e-6


def test_every_point_of_a_front_stands_on_a_step(tmp_path):
    text = SKID.replace('upper = "150 kg"', 'upper = "150 kg"\nstep = "40 kg"')
    text = text.replace('minimise = "cost"', 'minimise = "cost"\ntrade = ["cost", "worst-response"]')
    text = text.replace("front_points = 4", "front_points = 2")
    path = tmp_path / "study.toml"
    path.write_text(text, encoding="utf-8")
    brief = load_study(path).brief
    best = size_many_starts.solve(brief, "cost", 1.0, starts=2, seed=1)
    front = searched_front(brief, on_steps(brief, best).searches[0].values)
    assert len(front.points) >= 2
    assert {float(point.values[-1]) for point in front.points} <= {0.0, 40.0, 80.0, 120.0}


def test_nothing_stepped_is_left_alone(tmp_path):
    brief = load_study(_written(tmp_path)).brief
    found = size_many_starts.solve(brief, "cost", 1.0, starts=1, seed=1)
    assert on_steps(brief, found) is found
    unknown = brief.sizing.unknown[-1]
    given = unknown.model_dump(exclude_unset=True)
    assert step_of(unknown) is None
    assert step_of(SizingUnknown.model_validate({**given, "step": "5 kg"})) == 5.0
    assert step_of(SizingUnknown.model_validate({**given, "step": "5 kg", "upper": "0 kg"})) is None
    assert np.all(found.searches[0].values[-1] >= 0.0)


def _written(folder: Path) -> Path:
    path = folder / "study.toml"
    path.write_text(SKID, encoding="utf-8")
    return path
