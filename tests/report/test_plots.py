"""Plots as numbers, against the closed forms of press.py and costs added up by hand; then as files."""

import math
import re
from dataclasses import replace
from itertools import pairwise
from xml.etree import ElementTree

import numpy as np
import pytest

from detune.report.figures import draw_one
from detune.report.plots import PLOTS, front, margins, modes_speed, response, stiffness_damping, why
from detune.report.plots.style import spread
from detune.response.assess import assess
from report import press

SVG = "{http://www.w3.org/2000/svg}"


def separation(part: str, ballast: float) -> float:
    """1 - f / f_low below the excitation that starts at 20 Hz."""
    return 1.0 - press.natural_frequency(press.STIFFNESS[part], press.MASS + ballast) / 20.0


def test_front_numbers(result):
    data = front.data(result)
    # Four mounts each, ballast at 0.5 a kg; teasel-c misses the velocity limit or the force limit.
    expected = {
        (80.0, "teasel-a", 0.0),
        (130.0, "teasel-a", 100.0),
        (120.0, "teasel-b", 0.0),
        (170.0, "teasel-b", 100.0),
    }
    assert {(round(cost, 6), round(sep, 6)) for cost, sep in data.values} == {
        (cost, round(100.0 * separation(part, ballast), 6)) for cost, part, ballast in expected
    }
    np.testing.assert_allclose(
        data.front,
        [[80.0, 100.0 * separation("teasel-a", 0.0)], [130.0, 100.0 * separation("teasel-a", 100.0)]],
    )
    assert [mark.label for mark in data.marked] == ["answer", "named"]
    assert not data.marked[1].meets
    assert data.marked[1].values == pytest.approx((40.0, 100.0 * separation("teasel-c", 0.0)))
    assert any("teasel-b" in text and "100 kg" in text for text in data.texts)


def test_every_front_marker_carries_its_parts(result):
    data = front.data(result)
    root = ElementTree.fromstring(draw_one("front", front, data).svg)
    titles = [title.text for title in root.iter(f"{SVG}title")]
    assert set(data.texts) | set(data.front_texts) <= set(titles)
    assert len(titles) == len(data.texts) + len(data.front_texts) + len(data.marked)


def test_front_with_three_objectives_has_two_panels(variant):
    result = variant(more='\n[objectives]\ntrade = ["cost", "separation", "added-mass"]\n')
    data = front.data(result)
    assert data.panels == ((0, 1), (0, 2))
    assert set(data.front[:, 2]) == {0.0, 100.0}
    assert "added mass [kg]" in draw_one("front", front, data).svg


def test_front_with_no_and_with_one_point(nothing_meets, result):
    none = front.data(nothing_meets)
    assert none.values.shape == (0, 2) and none.front.shape == (0, 2)
    assert [mark.label for mark in none.marked] == ["closest"]
    assert "no design that meets the brief" in draw_one("front", front, none).svg
    data = front.data(result)
    one = replace(
        data,
        values=data.values[:1],
        texts=data.texts[:1],
        front=data.front[:1],
        front_texts=data.front_texts[:1],
    )
    assert draw_one("front", front, one).png.startswith(b"\x89PNG")


def test_margins_are_sorted_and_complete(result):
    data = margins.data(result)
    assert len(data.labels) == len(result.answer.margins)
    assert list(data.margins) == sorted(data.margins)
    k, eta = press.STIFFNESS["teasel-a"], press.LOSS["teasel-a"]
    assert data.margins[0] == pytest.approx(0.012 / press.velocity(30.0, k, eta) - 1.0)
    assert data.labels[0] == "velocity z, peak at table (running)"


def test_response_panels_show_the_supremum(result):
    data = response.data(result)
    k, eta = press.STIFFNESS["teasel-a"], press.LOSS["teasel-a"]
    panel = next(p for p in data.panels if p.title.startswith("displacement"))
    assert panel.unit == "mm" and panel.limit == pytest.approx(0.8)
    assert panel.peak == pytest.approx(1e3 * press.peak_displacement(eta), rel=1e-5)
    assert panel.at == pytest.approx(press.natural_frequency(k) * math.sqrt(1.0 + eta**2), rel=1e-3)
    assert [p.margin for p in data.panels] == sorted(p.margin for p in data.panels)
    # The running range is 20 to 30 Hz and the resonance below it is on the drawing.
    velocity = next(p for p in data.panels if p.title.startswith("velocity"))
    assert velocity.speed[0] < press.natural_frequency(k) and velocity.at == pytest.approx(30.0)


def test_modes_against_speed(result):
    data = modes_speed.data(result)
    f = press.natural_frequency(press.STIFFNESS["teasel-a"])
    (spindle,) = data.sources
    assert data.frequencies == pytest.approx((f,)) and data.names == ("heave",)
    assert spindle.orders == (1.0,) and spindle.is_shaft and spindle.top == 30.0
    # Order 1 meets the mode at its own frequency, while passing through and not in steady running.
    assert data.crossings(spindle) == (pytest.approx((f, f, False)),)
    assert data.separations[0] == pytest.approx(separation("teasel-a", 0.0))


def test_map_nodes_against_closed_forms_and_assessor(result):
    data = stiffness_damping.data(result)
    fields = {field.label: field.margin for field in data.fields}
    velocity = fields["velocity z, peak (running)"]
    brief, design = result.study.brief, result.answer.design
    for row, column in ((0, 3), (7, 12), (13, 30), (4, 33)):
        k, eta = data.stiffness[column], data.loss_factor[row]
        dense = max(press.velocity(f, k, eta) for f in np.linspace(20.0, 30.0, 4001))
        assert velocity[row, column] == pytest.approx(0.012 / dense - 1.0, abs=2e-3, rel=2e-3)
        scaled = stiffness_damping.scaled_mount(design.mounts[0], k / 4.0, eta)
        judged = assess(brief, replace(design, mounts=(scaled,)))
        least = min(row_.margin for row_ in judged.margins if row_.kind != "load-range")
        assert (data.least[row, column] >= 0.0) == (least >= 0.0)
    assert data.here == pytest.approx((480e3, 0.2))


def test_map_dots_are_the_parts_of_the_list(result):
    data = stiffness_damping.data(result)
    dots = {part.part: part for part in data.parts}
    assert {name: dot.stiffness for name, dot in dots.items()} == pytest.approx(press.STIFFNESS)
    assert {name: dot.loss_factor for name, dot in dots.items()} == pytest.approx(press.LOSS)
    assert dots["teasel-a"].in_answer == ("feet",) and dots["teasel-b"].in_answer == ()
    # 400 kg on four mounts: 981 N each, within 500 to 2000 N.
    assert all(dot.carries for dot in dots.values())
    assert "same axial dynamic stiffness" in stiffness_damping.caption(data)


def test_excluded_counts(result):
    data = why.data(result)
    # Of six designs teasel-c without ballast misses the velocity, with it the force into the floor.
    assert sum(data.counts) == 2 and data.met == 4 and data.designs == 6
    assert set(data.labels) == {
        "velocity z, peak at table (running)",
        "transmitted force total into the floor, z, peak at floor (running)",
    }


def test_plot_files_are_the_same_every_time(result, folder):
    for name in ("front", "modes-speed"):
        module = PLOTS[name]
        drawn = draw_one(name, module, module.data(result))
        assert drawn.svg == (folder / "plots" / f"{name}.svg").read_text(encoding="utf-8")
        assert drawn.png == (folder / "plots" / f"{name}.png").read_bytes()


@pytest.mark.parametrize("name", [name for name in PLOTS if name not in ("spectral-density", "shock")])
def test_plot_files_are_sound_xml_with_units_on_the_axes(folder, name):
    svg = (folder / "plots" / f"{name}.svg").read_text(encoding="utf-8")
    root = ElementTree.fromstring(svg)
    assert not re.search(r"<dc:date>|Created with|<metadata>", svg)
    assert all(found.startswith(name) for found in re.findall(r'\bid="([^"]*)"', svg))
    labels = [text.text or "" for text in root.iter(f"{SVG}text")]
    assert sum(bool(re.search(r"\[.+\]", label)) for label in labels) >= 1


def test_plots_of_noise_and_shocks_are_drawn_only_where_they_act(result, folder):
    for name in ("spectral-density", "shock"):
        assert PLOTS[name].data(result) is None
        assert not (folder / "plots" / f"{name}.svg").exists()


@pytest.mark.parametrize(
    ("wanted", "gap"), [([0.0, 0.01, 0.02, 0.9], 0.1), ([0.98, 0.99, 1.0], 0.2), ([0.5], 0.3), ([], 0.1)]
)
def test_labels_keep_their_distance_and_order(wanted, gap):
    placed = spread(wanted, gap, 0.0, 1.0)
    assert placed == sorted(placed)
    assert all(b - a >= gap - 1e-12 for a, b in pairwise(placed))
    assert all(0.0 <= place <= 1.0 for place in placed)
