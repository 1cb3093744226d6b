"""The way back to real parts: against every real design, in several groups, where few parts fit and where none does."""

from __future__ import annotations

import itertools
import re
from pathlib import Path

import numpy as np
import pytest

from detune.problem.build import build
from detune.report.sizing_page import sizing_summary, write_sizing
from detune.report.tables_nearest import nearest_table
from detune.response.assess import assess
from detune.response.design import Design
from detune.sizing.made_parts import made_design
from detune.solvers.nearest_list import Options, listed_designs, shortfall
from detune.solvers.size_nearest import nearest_parts
from detune.study.load import load_study
from detune.study.size import size_study

SKID = (Path(__file__).parent / "skid_to_size.toml").read_text(encoding="utf-8")
HEAD = (
    "part,family,stiffness_z_static [N/mm],stiffness_z_dynamic [N/mm],stiffness_x_static [N/mm],stiffness_x_dynamic "
    "[N/mm],stiffness_y_static [N/mm],stiffness_y_dynamic [N/mm],loss_factor,load_min [N],load_max [N],pulls,"
    "free_height [mm],cost,tolerance [%]\n"
)
LISTED = """
[[catalog]]
name = "list"
file = "list.csv"

[[choice]]
group = "pump end"
catalogs = ["list"]

[[choice]]
group = "motor end"
catalogs = ["list"]

[sizing]"""


def list_of(folder: Path, count: int, softest: float, stiffest: float, seed: int = 1) -> None:
    """An invented list whose prices rise with stiffness and damping, with some luck."""
    rng = np.random.default_rng(seed)
    rows = [HEAD]
    for number in range(count):
        k = float(np.exp(rng.uniform(np.log(softest), np.log(stiffest))))
        eta = float(rng.uniform(0.03, 0.2))
        cost = 30.0 + 0.05 * k + 100.0 * eta * float(rng.uniform(0.7, 1.3))
        axes = f"{k / 1.2:.3f},{k:.3f}," + 2 * f"{0.5 * k:.3f},{0.6 * k:.3f},"
        rows.append(f"hazel-{number:03d},rubber,{axes}{eta:.4f},0,3000,no,40,{cost:.2f},10\n")
    (folder / "list.csv").write_text("".join(rows), encoding="utf-8")


def study_in(folder: Path, goal: str = 'minimise = "cost"', more: str = ""):
    text = SKID.replace("[sizing]", more + LISTED.lstrip("\n"), 1).replace('minimise = "cost"', goal)
    # Stations stay where they are, so that the machine is that of the file.
    head, rest = text.split('[[sizing.unknown]]\nkind = "position"', 1)
    text = head + rest[rest.index("[[") :]
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    return load_study(path)


def every_design(study, values) -> list[tuple[float, Design]]:
    """Cost of every real design that the assessor says meets the brief, one after the other."""
    brief = made_design(study.brief, values).brief
    problem = build(brief, study.catalogs)
    found = []
    for mounts in itertools.product(*problem.candidates):
        for ballast in brief.ballast.steps:
            judged = assess(brief, Design(brief.groups, mounts, ballast))
            if judged.meets:
                found.append((judged.cost, judged.design))
    return sorted(found, key=lambda each: each[0])


def test_the_cheapest_of_every_real_design_is_found_and_what_it_costs_said(tmp_path):
    list_of(tmp_path, 12, 60.0, 400.0)
    study = study_in(tmp_path)
    result = size_study(study, drawings=False)
    every = every_design(study, result.answer.values)
    assert every
    best = result.nearest.designs[0]
    assert best.assessment.meets and best.assessment.cost == pytest.approx(every[0][0], rel=1e-9)
    assert best.objective == best.assessment.cost
    told = next(line for line in sizing_summary(result).splitlines() if line.startswith("Real parts instead"))
    numbers = [float(word) for word in re.findall(r"-?\d+\.?\d*", told.replace("+", ""))]
    share = 100.0 * (best.assessment.cost / result.answer.objective - 1.0)
    assert numbers == pytest.approx([best.assessment.cost, result.answer.objective, share], rel=5e-3)
    assert "Nearest real parts" in (write_sizing(result, tmp_path / "out") / "report.html").read_text("utf-8")


@pytest.mark.parametrize(
    ("goal", "words"),
    [
        ('minimise = "worst-response"', "Real parts instead of ideal ones: worst response over its limit"),
        ('maximise = "separation"', "Real parts instead of ideal ones: separation"),
        ('minimise = "stiffness"', "Real parts instead of ideal ones: axial stiffness"),
        ('minimise = "damping"', "Real parts instead of ideal ones: damping"),
    ],
)
def test_the_restriction_to_real_parts_is_told_for_every_goal(tmp_path, goal, words):
    list_of(tmp_path, 30, 60.0, 400.0)
    result = size_study(study_in(tmp_path, goal), drawings=False)
    near = result.nearest.designs[0]
    assert near.assessment.meets and words in sizing_summary(result)
    if "stiffness" in goal:
        # Two stations of each group, by hand.
        total = sum(2.0 * mount.stiffness_dynamic[2] for mount in near.assessment.design.mounts)
        assert near.objective == pytest.approx(total, rel=1e-12)
    if "damping" in goal:
        total = sum(mount.loss_factor[2] for mount in near.assessment.design.mounts)
        assert near.objective == pytest.approx(total, rel=1e-12)
    if "worst" in goal:
        rows = [r for r in near.assessment.margins if r.kind in ("velocity", "transmitted-force", "uplift")]
        assert near.objective == pytest.approx(max(1.0 / (1.0 + r.margin) for r in rows), rel=1e-3)
    assert all(row[-1] for row in nearest_table(result).rows)


def test_where_no_real_part_fits_the_nearest_are_shown_as_missing(tmp_path):
    """Parts of a tenth of the stiffness that the sag limit wants: sag of ten times the limit whatever is taken."""
    list_of(tmp_path, 12, 4.0, 8.0)
    result = size_study(study_in(tmp_path), drawings=False)
    assert result.answer is not None and result.nearest.met == 0
    assert not any(design.assessment.meets for design in result.nearest.designs)
    text = sizing_summary(result)
    assert "misses sag" in text
    assert "None of the 144 real designs evaluated, of 144, meets the brief" in text


def test_real_parts_that_hold_over_the_scatter_stand_first(tmp_path):
    list_of(tmp_path, 12, 60.0, 400.0)
    scatter = '[scatter]\njudge = "interval"\nstiffness = { lot = "10 %" }\ndamping = { lot = "20 %" }\n\n'
    result = size_study(study_in(tmp_path, more=scatter), drawings=False)
    assert result.over.judged.proven
    held = [judged.verdict.status for judged in result.near_over]
    assert held[0] == "proven" and held == sorted(held, key=lambda status: status != "proven")
    assert "over the scatter: proven" in sizing_summary(result)
    assert nearest_table(result).columns[3] == "over the scatter"


def test_four_groups_of_eighty_parts(tmp_path):
    """41 million designs: the short list is of combinations, not of the first parts of each group."""
    list_of(tmp_path, 80, 60.0, 600.0, seed=4)
    text = SKID
    for name in "ABCD":
        at = text.index("group", text.index(f'name = "{name}"'))
        text = text[:at] + f'group = "{name}"' + text[text.index("\n", at) :]
    choices = "".join(f'[[choice]]\ngroup = "{name}"\ncatalogs = ["list"]\n' for name in "ABCD")
    made = "".join(
        f'[[sizing.unknown]]\nkind = "stiffness"\ngroup = "{name}"\naxis = "axial"\nlower = "50 N/mm"\n'
        f'upper = "2000 N/mm"\n[[sizing.made]]\ngroup = "{name}"\ndynamic_to_static = 1.2\nlateral_ratio = 0.6\n'
        "loss_factor = 0.06\ncost = 30\ncost_per_stiffness = 0.05\n"
        for name in "ABCD"
    )
    head = text.split("[sizing]")[0] + '[[catalog]]\nname = "list"\nfile = "list.csv"\n' + choices
    path = tmp_path / "study.toml"
    path.write_text(head + '[sizing]\nminimise = "cost"\n' + made, encoding="utf-8")
    study = load_study(path)
    problem = build(study.brief, study.catalogs)
    assert problem.count == 80**4
    found = nearest_parts(study.brief, [np.array([1.0e5, 1.0e5, 1.2e5, 1.2e5])], problem, "cost", 1.0)
    best = found.designs[0]
    assert best.assessment.meets and found.looked_at < 2000
    # No one part put in place of another makes it cheaper and still meets the brief: 320 assessments by the stages.
    design = best.assessment.design
    cheaper = []
    for group, mounts in enumerate(problem.candidates):
        for mount in mounts:
            if mount.cost < design.mounts[group].cost - 1e-9:
                other = (*design.mounts[:group], mount, *design.mounts[group + 1 :])
                cheaper.append(assess(study.brief, Design(design.groups, other, design.ballast)).meets)
    assert cheaper and not any(cheaper)


def test_the_short_list_of_few_options_is_all_of_them():
    """Shortfalls by hand: margins 0.1 and 0.2, moved by the sums of what each group takes."""
    margins = np.array([0.1, 0.2])
    moved = np.array([[0.0, 0.0], [-0.3, 0.1], [0.2, -0.5]])
    group = Options(np.arange(3), moved, np.zeros(3), np.array([3.0, 2.0, 1.0]))
    none = Options(np.arange(1), np.zeros((1, 2)), np.zeros(1), np.zeros(1))
    listed = listed_designs(margins, [group, group, none], 9)
    assert {item.parts for item in listed} == set(itertools.product(range(3), repeat=2))
    for item in listed:
        total = margins + moved[item.parts[0]] + moved[item.parts[1]]
        by_hand = sum(min(m, 0.0) ** 2 for m in total) ** 0.5
        assert item.short == pytest.approx(by_hand, abs=1e-12)
    assert shortfall(np.array([[-3.0, 4.0], [-3.0, -4.0]])) == pytest.approx([3.0, 5.0])
