"""Report sections for noise, pulses and run-ups, against closed forms of one mass on one spring.

The press is a mass of 400 kg on four mounts teasel-a: 480 N/mm in all, loss factor 0.2, 5.51 Hz.
"""

import math
from xml.etree import ElementTree

import numpy as np
import pytest

from detune.report.contributions import contributions
from detune.report.figures import draw_all, draw_one
from detune.report.forced_rows import forced_rows, tightest_of_each
from detune.report.page import sections
from detune.report.plots import shock, spectral_density
from detune.report.service_loads import service_loads
from detune.report.tables_contributions import contributions_table
from report import press

K, ETA = press.STIFFNESS["teasel-a"], press.LOSS["teasel-a"]
OMEGA = math.sqrt(K / press.MASS)
# A flat density from 0.5 to 100 Hz, and a velocity step of 0.1 m/s as a pulse far shorter than the period.
MORE = """
[[condition]]
name = "crane"
steady = false

[[forcing]]
kind = "random-base-motion"
name = "hall"
conditions = ["crane"]
direction = "z"
duration = "600 s"
break_points = [["0.5 Hz", "0.002 (m/s^2)^2/Hz"], ["100 Hz", "0.002 (m/s^2)^2/Hz"]]

[[forcing]]
kind = "base-pulse"
name = "crane hook"
conditions = ["crane"]
direction = "z"
shape = "rectangle"
amplitude = "100 m/s^2"
duration = "0.2 ms"

[[forcing]]
kind = "harmonic-force"
name = "pump"
conditions = ["crane"]
position = ["0 m", "0 m", "0.2 m"]
force = ["0 N", "0 N", "100 N"]
frequency = "25 Hz"

[[allowable]]
kind = "relative-motion"
conditions = ["crane"]
at = "table"
to = "floor"
direction = "z"
measure = "peak"
limit = "4 mm"

[[allowable]]
kind = "acceleration"
conditions = ["crane"]
at = "table"
direction = "z"
measure = "peak"
limit = "12 m/s^2"
"""
FORCED = (
    ('name = "spindle unbalance"', 'name = "spindle unbalance"\nconditions = ["running", "start"]'),
    (
        'shafts = { spindle = ["120 rpm", "1200 rpm"] }',
        'shafts = { spindle = ["120 rpm", "1200 rpm"] }\nrun_up = { spindle = "60 s" }',
    ),
)


@pytest.fixture(scope="module")
def shaken(variant):
    result = variant(*FORCED, more=MORE)
    assert result.answer is not None and result.answer.design.parts == ("teasel-a",)
    return result


@pytest.fixture(scope="module")
def parts(shaken):
    rows = tightest_of_each(forced_rows(shaken.study.brief, shaken.answer))
    return {(part.of.row.kind, part.of.row.condition): part for part in contributions(rows)}


def random_rms() -> float:
    """Rms of z against the floor: the integral of S / |w0^2 (1 + j eta) - w^2|^2 over 0.5 to 100 Hz, by Simpson."""
    frequency = np.linspace(0.5, 100.0, 400_001)
    omega = 2.0 * math.pi * frequency
    density = 0.002 / np.abs(OMEGA**2 * (1.0 + 1j * ETA) - omega**2) ** 2
    weights = np.ones(len(frequency))
    weights[1:-1:2], weights[2:-1:2] = 4.0, 2.0
    return math.sqrt(float(weights @ density) * (frequency[1] - frequency[0]) / 3.0)


def test_each_source_of_a_travel_by_closed_forms(parts):
    part = parts["relative-motion", "crane"]
    assert part.random_rms == pytest.approx(random_rms(), rel=1e-4)
    assert part.duration == 600.0
    # Velocity step: v/w0 exp(-z/sqrt(1 - z^2) atan(sqrt(1 - z^2)/z)) with z = eta/2 (Rao 5e sec. 4.2, derived anew),
    # v = 100 m/s^2 x 0.2 ms.
    z = 0.5 * ETA
    root = math.sqrt(1.0 - z * z)
    step = 0.02 / OMEGA * math.exp(-z / root * math.atan2(root, z))
    assert part.shocks == pytest.approx(step, rel=1e-3)
    omega = 2.0 * math.pi * 25.0
    pump = 100.0 / abs(K * (1.0 + 1j * ETA) - press.MASS * omega**2)
    assert part.tones == pytest.approx(pump, rel=1e-9)
    assert part.at_rest == 0.0
    # Davenport (1964): rms (sqrt(2 ln N) + 0.5772/sqrt(2 ln N)), N the crests and troughs of 600 s at near 5.5 Hz.
    log = math.sqrt(2.0 * math.log(2.0 * 600.0 * OMEGA / (2.0 * math.pi)))
    assert part.extreme == pytest.approx(random_rms() * (log + 0.5772 / log), rel=0.01)
    together = part.random + part.shocks + part.tones
    assert together == pytest.approx(part.of.row.value, rel=1e-9)


def test_a_run_up_stands_with_the_tones(parts):
    part = parts["displacement", "start"]
    assert part.random is None and part.shocks is None
    assert part.tones == pytest.approx(part.of.row.value, rel=1e-12)
    assert part.tones < press.peak_displacement(ETA)


def test_the_table_has_a_column_for_what_acts_and_no_other(shaken):
    rows = tightest_of_each(forced_rows(shaken.study.brief, shaken.answer))
    every = contributions_table(contributions(rows))
    assert {"tones", "random: rms", "expected extreme", "shocks and records"} <= set(every.columns)
    start = tuple(row for row in rows if row.condition.name == "start")
    alone = contributions_table(contributions(start))
    assert "random: rms" not in alone.columns and "shocks and records" not in alone.columns
    assert all(len(row) == len(alone.columns) for row in alone.rows)
    assert "expected extreme" not in alone.note


def test_density_and_shock_are_drawn(shaken):
    density = spectral_density.data(shaken)
    panel = next(p for p in density.panels if p.unit == "mm")
    (curve,) = panel.curves
    assert panel.unit == "mm" and curve.rms == pytest.approx(1e3 * random_rms(), rel=1e-4)
    top = curve.frequency[curve.density.argmax()]
    assert top == pytest.approx(press.natural_frequency(K), rel=0.02)
    drawn = draw_one("spectral-density", spectral_density, density)
    ElementTree.fromstring(drawn.svg)
    assert "mm²/Hz" in drawn.svg and "5.514" not in drawn.caption
    blow = shock.data(shaken)
    panel = next(p for p in blow.panels if p.unit == "mm")
    assert panel.input.max() == pytest.approx(100.0) and panel.input_unit == "m/s²"
    # The largest motion comes a quarter period after the blow, a little earlier for the damping.
    quarter = 0.25 / press.natural_frequency(K)
    assert 0.9 * quarter < panel.at < quarter
    drawn = draw_one("shock", shock, blow)
    ElementTree.fromstring(drawn.svg)
    assert "[m/s²]" in drawn.svg and "[mm]" in drawn.svg


def test_the_section_is_named_after_what_acts(shaken, result):
    plots = {plot.name: plot for plot in draw_all(shaken)}
    (section,) = [s for s in sections(shaken, plots) if s.name == "sources"]
    assert section.heading == "Noise, shocks and records, run-ups"
    assert [plot.name for plot in section.plots] == ["spectral-density", "shock"]
    assert "sources" not in [s.name for s in sections(result, {})]


def test_points_on_a_moving_floor_are_seen_from_it(shaken):
    """The floor keeps the velocity of the blow: the absolute motion would grow for ever."""
    loads = [load for load in service_loads(shaken.study.brief, shaken.answer) if load.direction == "z"]
    (moved,) = [load for load in loads if load.condition == "crane" and load.place == "table"]
    assert moved.what == "movement against the floor" and moved.value < 4e-3
    assert {load.what for load in loads if load.condition == "running"} == {
        "displacement",
        "dynamic force into the floor",
        "sum of the magnitudes through all parts",
    }
