"""Sums of magnitudes, shares of forcings, curves of the worse reading of unknown damping: by closed forms."""

from __future__ import annotations

import csv
import io
import math
from typing import Any

import numpy as np
import pytest

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.velocity import Velocity
from detune.brief.machine import Body, InertiaTensor, Point, Station
from detune.report.csv_files import contributions_csv, margins_csv
from detune.report.forcing_shares import forcing_shares
from detune.report.response_data import response_curves
from detune.report.service_loads import service_loads
from detune.report.tables import margins_table
from detune.response.assess import assess
from detune.response.design import Design
from response import law_machines

machines = law_machines.machines
TWO_PI = 2.0 * math.pi
MASS, K, ETA, ARM, INERTIA = 80.0, 2.0e5, 0.1, 0.4, 5.0


def assessed(brief: Any, part: Any) -> Any:
    return assess(brief, Design(brief.groups, (part,), 0.0))


def test_a_pure_moment_has_magnitudes_but_no_total() -> None:
    # Two springs at +-ARM under a moment: each carries k ARM M/|2 k ARM^2 (1 + j eta) - J w^2|, opposite in sign.
    shake = machines.force(30.0, 0.0, moment=(20.0, 0.0, 0.0))
    brief = machines.brief_of(
        bodies=(Body(name="set", mass=MASS, centre=(0.0, 0.0, 0.0), free=("z", "rx"),
                     inertia=InertiaTensor(xx=INERTIA, yy=INERTIA, zz=INERTIA)),),
        points=(Point(name="P", position=(0.0, 0.0, 0.0)),),
        stations=tuple(Station(name=n, group="G", position=(0.0, y, 0.0)) for n, y in (("a", -ARM), ("b", ARM))),
        forcing=(shake,),
    )  # fmt: skip
    part = machines.mount(k=K, lateral=K, loss=ETA)
    found = {(x.what, x.direction): x.value for x in service_loads(brief, assessed(brief, part))}
    w = TWO_PI * 30.0
    turn = 20.0 / abs(2.0 * K * ARM**2 * (1.0 + 1j * ETA) - INERTIA * w**2)
    each = abs(K * (1.0 + 1j * ETA)) * ARM * turn
    assert found["sum of the magnitudes through all parts", "z"] == pytest.approx(2.0 * each, rel=1e-9)
    assert found["dynamic force into the floor", "z"] < 1e-9 * each


def rows(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(text)))


def test_shares_of_two_forces_in_peak_and_rms() -> None:
    limits = (
        Velocity(at="P", direction="z", measure="rms", limit=1.0),
        Acceleration(at="P", direction="z", measure="peak", limit=1e3),
    )
    forcing = (machines.force(12.0, 20.0, name="fan"), machines.force(25.0, 60.0, name="press"))
    brief = machines.one_axis(MASS, forcing).model_copy(update={"allowables": limits})
    found = assessed(brief, machines.mount(k=K, loss=ETA))

    def moved(f: float, size: float) -> float:
        return size / abs(K * (1.0 + 1j * ETA) - MASS * (TWO_PI * f) ** 2)

    one, two = moved(12.0, 20.0), moved(25.0, 60.0)
    listed = {
        (row["quantity"].split()[0], row["forcing"]): row
        for row in rows(contributions_csv(forcing_shares(brief, found)))
    }
    peak = [one * (TWO_PI * 12.0) ** 2, two * (TWO_PI * 25.0) ** 2]
    assert float(listed["acceleration", "fan"]["share [-]"]) == pytest.approx(peak[0] / sum(peak), rel=1e-6)
    assert float(listed["acceleration", "press"]["value of it alone"]) == pytest.approx(peak[1], rel=1e-6)
    square = [(one * 12.0) ** 2, (two * 25.0) ** 2]
    assert float(listed["velocity", "fan"]["share [-]"]) == pytest.approx(square[0] / sum(square), rel=1e-6)
    assert listed["velocity", "fan"]["unit"] == "m/s" and listed["velocity", "fan"]["condition"] == "running"


def test_the_worse_reading_is_drawn_and_told() -> None:
    # Well above resonance the viscous reading moves more force, but displacement at resonance is alike; a limit on the
    # displacement at 8 to 60 Hz meets the reading with the larger value at every speed.
    part = law_machines.unknown(machines.mount(k=K, loss=0.3), rated=400.0)
    limit = Displacement(at="P", direction="z", measure="peak", limit=1.0)
    brief = machines.one_axis(MASS, machines.force((4.0, 60.0), 50.0)).model_copy(
        update={"allowables": (limit,)}
    )
    found = assessed(brief, part)
    (curve,) = response_curves(brief, found)
    w = TWO_PI * curve.speed
    c = 0.3 * math.sqrt(K * 400.0 / 9.80665)
    loss = 50.0 / np.abs(K * (1.0 + 0.3j) - MASS * w**2)
    viscous = 50.0 / np.abs(K + 1j * w * c - MASS * w**2)
    assert np.allclose(curve.value, np.maximum(loss, viscous), rtol=1e-9)
    (row,) = [each for each in found.margins if each.kind == "displacement"]
    assert "damping read as" in row.note
    (line,) = [line for line in margins_table(brief, found).rows if "displacement" in line[2]]
    assert row.note in line[2]
    (written,) = [line for line in rows(margins_csv(found)) if line["quantity"].startswith("displacement")]
    assert written["note"] == row.note
