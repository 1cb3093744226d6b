"""Maps of what is feasible: any two unknowns, islands far below the grid, every part as a dot, no answer needed."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from detune.ground.errors import BriefError
from detune.report.figures import draw_one
from detune.report.plots import sizing_map
from detune.sizing.made_parts import bounds, made_design
from detune.solvers.map_axes import plane_of
from detune.solvers.one_axis_statement import one_axis
from detune.solvers.size_batch import batch
from detune.study.load import load_study
from detune.study.size import size_study
from detune.study.size_drawn import map_of

ONE_AXIS = (Path(__file__).parent / "spec_one_axis.toml").read_text(encoding="utf-8")
SKID = (Path(__file__).parent / "skid_to_size.toml").read_text(encoding="utf-8")
BALLAST = (
    '[ballast]\nposition = ["0 m", "0 m", "0 m"]\nsize = ["1 m", "1 m", "0.1 m"]\nsteps = ["0 kg", "50 kg"]\n'
    "cost_per_kg = 1.0\n"
)
UNKNOWN = '[[sizing.unknown]]\nkind = "ballast"\nlower = "0 kg"\nupper = "100 kg"\n'
LIST = (
    "part,family,stiffness_z_static [N/mm],stiffness_z_dynamic [N/mm],loss_factor,load_min [N],load_max [N],pulls,"
    "free_height [mm],cost\nalder-1,rubber,50,60,0.10,100,900,no,40,9\nalder-2,rubber,75,90,0.20,100,900,no,40,11\n"
)
CHOICE = (
    '[[catalog]]\nname = "mounts"\nfile = "mounts.csv"\n[[choice]]\ngroup = "feet"\ncatalogs = ["mounts"]\n'
)
MASS, PIECES, LIMIT = 200.0, 4, 0.45


def read(folder: Path, text: str, names: list[str], parts: str = LIST):
    (folder / "mounts.csv").write_text(parts, encoding="utf-8")
    path = folder / "study.toml"
    path.write_text(text.replace("[sizing]\n", f"[sizing]\nmap = {names}\n", 1), encoding="utf-8")
    return load_study(path)


def mapped(study, values):
    low, _ = bounds(study.brief)
    problem, _ = batch(study.brief, [made_design(study.brief, low)])
    return map_of(study, np.array(values), one_axis(study.brief, problem), True, None)


def island(tip: float, beyond: float) -> tuple[str, float]:
    """A study whose feasible masses, at 4 x 60 N/mm, lie in [tip, tip + beyond] kg, and the damping at the tip.

    At 14 Hz, with u = m w^2 - k: the force ratio is at most T where c^2 w^2 <= (T^2 u^2 - k^2) / (1 - T^2), and the
    displacement at most X where u^2 + c^2 w^2 >= (F/X)^2. X is chosen so that the two meet at the tip; the sag then
    cuts the masses off just above it.
    """
    stiffness, w2 = 2.4e5, (2.0 * np.pi * 14.0) ** 2
    u = tip * w2 - stiffness
    square = (LIMIT**2 * u**2 - stiffness**2) / (1.0 - LIMIT**2)
    reach = 10.0 / np.sqrt(u**2 + square)
    sag = (tip + beyond) * 9.80665 / stiffness
    limit = f'[[allowable]]\nkind = "sag"\nat = "top"\nlimit = "{1e3 * sag:.15g} mm"\n'
    text = ONE_AXIS.replace('limit = "11 um"', f'limit = "{1e6 * reach:.15g} um"')
    text = text.replace("[sizing]\n", limit + BALLAST + "[sizing]\n", 1)
    return text.replace("[[sizing.made]]", UNKNOWN + "[[sizing.made]]", 1), float(
        np.sqrt(square / w2) / PIECES
    )


@pytest.mark.parametrize("beyond", [1e-2, 1e-4])
def test_an_island_a_millionth_of_the_map_is_found_with_ballast_on_an_axis(tmp_path, beyond):
    text, damping = island(250.0, beyond)
    study = read(tmp_path, text, ["ballast", "damping of feet"])
    drawn = mapped(study, [6e4, 1000.0, 10.0])
    rows, columns = np.nonzero(drawn.region.least >= 0.0)
    assert len(rows) >= 20
    added, c = drawn.region.x[columns], drawn.region.y[rows]
    assert added.min() >= 50.0 - 1e-9 and added.max() <= 50.0 + beyond * (1.0 + 1e-9)
    assert c == pytest.approx(damping, rel=max(2e-2 * beyond, 1e-5))
    # It is ringed, since nobody could see it.
    assert drawn.region.specks == pytest.approx(np.array([[50.0, damping]]), rel=1e-2)


def test_an_island_on_the_map_of_stiffness_and_damping_is_drawn_from_its_own_curves(tmp_path):
    text, damping = island(250.0, 1e-4)
    drawn = mapped(
        read(tmp_path, text, ["axial stiffness of feet", "damping of feet"]), [3e4, 500.0, 50.00005]
    )
    (outline,) = drawn.pieces
    assert outline[:, 0] == pytest.approx(6e4, rel=1e-5) and outline[:, 1] == pytest.approx(damping, rel=1e-5)
    assert len(drawn.region.specks) == 1


def test_natural_frequency_and_damping_ratio_stand_for_stiffness_and_damping(tmp_path):
    """The line of the force ratio, by the formula in the two ratios: Rao, Mechanical Vibrations, ch. 9."""
    study = read(tmp_path, ONE_AXIS, ["natural frequency", "damping ratio"])
    drawn = mapped(study, [6e4, 400.0])
    lines = [line for line in drawn.traced.boundaries if line.name.startswith("transmissibility")]
    assert lines
    for line in lines:
        r = np.linspace(14.0, 25.0, 200)[:, None] / line.points[:, 0]
        z = line.points[:, 1]
        ratio = np.sqrt((1.0 + (2.0 * z * r) ** 2) / ((1.0 - r**2) ** 2 + (2.0 * z * r) ** 2))
        assert ratio.max(axis=0) == pytest.approx(LIMIT, rel=2e-3)
    # Four parts of 60 N/mm under 200 kg: 5.513 Hz, and 4 x 400 N s/m of 2 sqrt(k m) there.
    assert drawn.place[0] == pytest.approx(np.sqrt(4 * 6e4 / MASS) / (2 * np.pi), rel=1e-9)
    assert drawn.place[1] == pytest.approx(1600.0 / (2 * np.sqrt(4 * 6e4 * MASS)), rel=1e-9)
    assert any(line.name == "the study's own bounds" for line in drawn.traced.boundaries)


@pytest.mark.parametrize(
    "names",
    [("natural frequency", "damping ratio"), ("natural frequency", "ballast"), ("ballast", "damping ratio")],
)
def test_places_and_points_are_each_other_s_inverse(tmp_path, names):
    text = ONE_AXIS.replace("[sizing]\n", BALLAST + "[sizing]\n", 1)
    study = read(tmp_path, text.replace("[[sizing.made]]", UNKNOWN + "[[sizing.made]]", 1), list(names))
    low, _ = bounds(study.brief)
    problem, _ = batch(study.brief, [made_design(study.brief, low)])
    plane = plane_of(study.brief, one_axis(study.brief, problem), names, np.array([6e4, 400.0, 30.0]))
    rng = np.random.default_rng(2)
    x = plane.first.low + (plane.first.high - plane.first.low) * rng.random(50)
    y = plane.second.low + (plane.second.high - plane.second.low) * rng.random(50)
    assert plane.place(plane.points(x, y)) == pytest.approx(np.stack([x, y], axis=1), rel=1e-9)


def test_dots_of_parts_with_a_loss_factor_stand_at_their_own_frequency(tmp_path):
    """eta k / w with w = sqrt(4 k / 200 kg): 0.1 x 60e3 / 34.64 = 173.2 and 0.2 x 90e3 / 42.43 = 424.3 N s/m."""
    study = read(
        tmp_path,
        ONE_AXIS.replace("[sizing]\n", CHOICE + "[sizing]\n", 1),
        ["axial stiffness of feet", "damping of feet"],
    )
    drawn = mapped(study, [6e4, 400.0])
    at = {dot.name: (dot.x, dot.y) for dot in drawn.dots}
    assert at["alder-1"] == pytest.approx((60e3, 173.205), rel=1e-5)
    assert at["alder-2"] == pytest.approx((90e3, 424.264), rel=1e-5)
    assert drawn.without == 0


def test_without_a_feasible_design_the_map_is_drawn_all_the_same(tmp_path):
    text = ONE_AXIS.replace("limit = 0.45", "limit = 0.001").replace("[sizing]\n", CHOICE + "[sizing]\n", 1)
    study = read(tmp_path, text, ["axial stiffness of feet", "damping of feet"])
    result = size_study(study)
    assert result.answer is None and result.map is not None and not result.map.answer
    assert len(result.map.dots) == 2
    told = sizing_map.caption(sizing_map.data(result))
    assert "No design meets the brief" in told and "Missed everywhere: transmissibility" in told
    assert draw_one("sizing-map", sizing_map, sizing_map.data(result)).svg


def test_axes_of_two_groups_show_every_pair_of_their_parts(tmp_path):
    sideways = "".join(f"stiffness_{axis}_{how} [N/mm]," for how in ("dynamic", "static") for axis in "xy")
    listed = LIST.replace("loss_factor,", f"{sideways}loss_factor,").replace("900", "2000")
    listed = listed.replace(",60,", ",60,30,30,25,25,").replace(",90,", ",90,45,45,40,40,")
    head, choice = CHOICE.split("[[choice]]\n")
    choices = "".join("[[choice]]\n" + choice.replace("feet", group) for group in ("pump end", "motor end"))
    names = ["axial stiffness of pump end", "axial stiffness of motor end"]
    study = read(tmp_path, SKID.replace("[sizing]\n", head + choices + "[sizing]\n", 1), names, listed)
    drawn = map_of(study, np.array([90e3, 180e3, 108e3, 0.1, 20.0, 0.35]), None, True, None)
    assert {(dot.x, dot.y) for dot in drawn.dots} == {(60e3, 60e3), (60e3, 90e3), (90e3, 60e3), (90e3, 90e3)}
    # What is white is what the judged designs say, on lines eight times as fine as those that were traced.
    assert drawn.region.least.shape == (8 * 12 + 1, 8 * 16 + 1)


@pytest.mark.parametrize(
    ("text", "names", "words"),
    [
        (ONE_AXIS, ["axial stiffness of feet", "natural frequency"], "two different unknowns"),
        (ONE_AXIS, ["damping of feet", "damping of feet"], "two different unknowns"),
        (
            ONE_AXIS,
            ["ballast", "damping of feet"],
            "an unknown: axial stiffness of feet, damping of feet, natural",
        ),
    ],
)
def test_maps_without_two_unknowns_are_refused(tmp_path, text, names, words):
    with pytest.raises(BriefError, match=words):
        read(tmp_path, text, names)


def test_the_natural_frequency_spans_no_map_off_one_axis(tmp_path):
    text = ONE_AXIS.replace("dynamic_to_static = 1.0", "dynamic_to_static = 1.0\nloss_factor = 0.1")
    study = read(tmp_path, text, ["natural frequency", "damping of feet"])
    with pytest.raises(
        BriefError, match="natural frequency spans a map on one axis alone, and here viscous and loss"
    ):
        size_study(study)
