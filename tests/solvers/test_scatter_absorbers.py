"""Absorbers over scatter: what is proven holds at sampled tunings, masses and centres, by other equations."""

from __future__ import annotations

import itertools
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from detune.brief.absorber import Absorber
from detune.brief.brief import Brief
from detune.brief.choice import CatalogSource
from detune.brief.scatter import PartScatter, Scatter
from detune.problem.build import build
from detune.response.assess import assess
from detune.response.designs import Designs
from detune.solvers.certify import certify
from detune.solvers.perturbed import perturbed
from detune.solvers.scatter_machine import scatter_map
from detune.study.load import load_study
from detune.study.run import run_study
from response import machines
from response import test_absorbers as absorbers
from study import test_listed_parts as listed

SCATTER = '\n[scatter]\njudge = "interval"\nstiffness = { lot = "listed" }\ndamping = { lot = "20 %" }\n'


def scattered(folder: Path, limit: str) -> Path:
    study = listed.ABSORBER_STUDY.replace('limit = "0.55 mm"', f'limit = "{limit}"') + SCATTER
    path: Path = listed.written(folder, study, absorbers=listed.ABSORBERS)
    (folder / "mounts.csv").write_text(listed.MOUNTS.replace(",15,", ",3,"), encoding="utf-8")
    return path


def sampled(mass: float, frame: float, tuning: float, ratio: float) -> tuple[float, float]:
    """Greatest motion of the main mass and stroke over corners and middles of the scatter: two equations of motion.

    A tuning within 2 % is a stiffness within 1.02^2 - 1 = 4.04 %; the mount's 3 %; each damping 20 %.
    """
    wide = 1.02**2 - 1.0
    moved = slid = 0.0
    w = 2.0 * np.pi * np.linspace(15.0, 17.0, 401)
    own = 2.0 * np.pi * tuning
    for a, b, c, d in itertools.product((0.97, 1.0, 1.03), (1 - wide, 1.0, 1 + wide), (0.8, 1.2), (0.8, 1.2)):
        k = 960e3 * a * (1.0 + 0.1j * c)
        link = mass * own**2 * b + 2j * ratio * mass * own * w * d
        x = 250.0 / np.abs(k - (100.0 + frame) * w**2 - link * mass * w**2 / (link - mass * w**2))
        moved = max(moved, float(x.max()))
        slid = max(slid, float((x * np.abs(mass * w**2 / (link - mass * w**2))).max()))
    return moved, slid


def test_a_proven_absorber_keeps_its_limits_at_every_sampled_tuning(tmp_path: Path) -> None:
    """pear-c at 0.75 mm is proven and never below what is sampled; pear-b leaves its stroke of 1.5 mm."""
    study = load_study(scattered(tmp_path, "0.75 mm"))
    problem = build(study.brief, study.catalogs)
    proven = certify(problem, np.array([0, 2]), 0)
    assert proven.status == "proven"
    moved, slid = sampled(14.0, 2.0, 15.0, 0.12)
    rows = {row.kind: row for row in proven.rows}
    for row, value in ((rows["displacement"], moved), (rows["stroke"], slid)):
        assert row.guaranteed is not None and row.guaranteed >= value * (1.0 - 1e-9)
        assert row.worst == pytest.approx(value, rel=1e-3)
    broken = certify(problem, np.array([0, 1]), 0)
    assert broken.status == "violated"
    result = run_study(study)
    assert result.robust_answer is not None
    assert result.robust_answer.design.parts == ("elm-c", "pear-c")
    other = run_study(study, solver="bounded search")
    assert other.robust_answer == result.robust_answer


def test_nothing_is_proven_where_a_sampled_tuning_breaks_the_limit(tmp_path: Path) -> None:
    study = load_study(scattered(tmp_path, "0.62 mm"))
    assert sampled(14.0, 2.0, 15.0, 0.12)[0] > 0.62e-3
    result = run_study(study)
    assert result.answer is not None and result.robust_answer is None and result.exit_code == 1


def six_axes(seed: int) -> tuple[Brief, Any]:
    brief, mounts = absorbers.six_axes(seed)
    scatter = Scatter(
        judge="interval",
        stiffness=PartScatter(lot="listed", part=0.02),
        damping=PartScatter(lot=0.2),
        mass=0.03,
        centre=(0.005, 0.005, 0.01),
    )
    return brief.model_copy(update={"scatter": scatter, "states": ()}), mounts


@pytest.mark.parametrize("chosen", [(0, 2), (1, 0)])
def test_guarantees_on_six_axes_hold_at_random_points_by_the_assessor(chosen: tuple[int, int]) -> None:
    brief, mounts = six_axes(4)
    assert brief.absorbers == (
        Absorber(name="upright", at="P", direction="z", catalogs=("absorbers",), empty=True),
        Absorber(name="slanted", at="Q", direction=(1.0, 0.4, 0.3), catalogs=("absorbers",), empty=True),
    )
    assert CatalogSource(name="absorbers", file="absorbers.csv", kind="absorber") in brief.catalogs
    problem = build(brief, {"list": machines.catalog(*mounts), "absorbers": absorbers.PARTS})
    groups = len(brief.station_groups)
    part = np.array([g % len(problem.candidates[g]) for g in range(groups)] + list(chosen))
    verdict = certify(problem, part, 0, max_boxes=300)
    design = problem.design(Designs(part[None], np.zeros(1, dtype=np.intp)), 0)
    found = scatter_map(brief, design)
    random = np.random.default_rng(3)
    held = 0
    for _ in range(4):
        point = tuple((found.low + random.random(len(found.low)) * (found.high - found.low)).tolist())
        judged = assess(*perturbed(brief, design, found, point))
        margins = {(row.kind, row.condition, row.place, row.quantity): row.margin for row in judged.margins}
        for row in verdict.rows:
            key = (row.kind, row.condition, row.place, row.quantity)
            if row.guaranteed_margin is not None and np.isfinite(row.guaranteed_margin) and key in margins:
                assert margins[key] >= row.guaranteed_margin - 1e-3 * (1.0 + abs(row.guaranteed_margin)), key
                held += 1
    assert held > 8
