"""What a brief states, read into numbers: mass properties, floors, units by kind, frozen objects."""

from __future__ import annotations

import json
import math
from pathlib import Path

import numpy as np
import pytest
from pydantic import ValidationError

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.allowable.velocity import Velocity
from detune.brief.condition import Condition
from detune.brief.floor import Floor, floor_freedom
from detune.brief.forcing.base_motion import BaseMotion
from detune.brief.forcing.harmonic_force import HarmonicForce
from detune.brief.forcing.rotating_unbalance import RotatingUnbalance
from detune.brief.forcing.slider_crank import Cylinder, SliderCrank
from detune.brief.machine import Body, Shape, Weighing
from detune.brief.mass_properties import mass_properties
from detune.brief.read import read_brief
from detune.brief.schema import study_schema

HERE = Path(__file__).parent


def test_units_are_read_by_the_kind_of_their_field() -> None:
    """1480 rpm is 24.667 Hz; g is gram in an unbalance and gravity in an acceleration (definitions)."""
    assert Condition(name="c", shafts={"s": ("1480 rpm", "1480 rpm")}).shafts["s"][0] == pytest.approx(
        24.6667, abs=5e-5
    )
    unbalance = RotatingUnbalance(name="u", shaft="s", position=(0, 0, 0), axis="x", unbalance="6.3 g mm")
    assert unbalance.unbalance_kg_m() == pytest.approx(6.3e-6, rel=1e-12)
    limit = Acceleration(at="P", direction="z", measure="peak", limit="0.3 g")
    assert limit.limit == pytest.approx(2.941995, rel=1e-12)
    assert Velocity(at="P", direction="z", measure="rms", limit="0.18 in/s").limit == pytest.approx(4.572e-3)
    force = TransmittedForce(through="floor", direction="z", measure="peak", limit="50 kgf")
    assert force.limit == pytest.approx(490.3325, rel=1e-12)


def test_a_number_from_python_is_si_and_objects_are_frozen() -> None:
    force = HarmonicForce(name="f", position=(0.0, 0.0, 0.0), force=(0.0, 0.0, 40.0), frequency=50.0)
    assert force.force == (0.0, 0.0, 40.0)
    with pytest.raises(ValidationError):
        force.frequency = 60.0
    with pytest.raises(ValidationError):
        HarmonicForce(name="f", position=(0.0, 0.0, 0.0), force=(0.0, 0.0, 40.0), frequency=math.nan)


def test_inertia_from_boxes_and_cylinders_put_together() -> None:
    """By hand: a box 12 kg of 1 x 2 x 3 m at x = -1 and a cylinder 6 kg, R 1 m, L 2 m along x, at x = 2.

    Centre x = 0. Box: m/12 (b^2 + c^2) = 13, 10, 5. Cylinder: mR^2/2 = 3, m(3R^2 + L^2)/12 = 3.5.
    Steiner about y and z: 12 1^2 + 6 2^2 = 36.
    """
    body = Body(
        name="b",
        shapes=(
            Shape(kind="box", mass=12.0, centre=(-1.0, 0.0, 0.0), size=(1.0, 2.0, 3.0)),
            Shape(kind="cylinder", mass=6.0, centre=(2.0, 0.0, 0.0), radius=1.0, length=2.0, axis="x"),
        ),
    )
    found = mass_properties(body)
    assert found.mass == pytest.approx(18.0)
    assert found.centre == pytest.approx([0.0, 0.0, 0.0], abs=1e-12)
    assert found.inertia == pytest.approx(
        np.diag([13.0 + 3.0, 10.0 + 3.5 + 36.0, 5.0 + 3.5 + 36.0]), abs=1e-12
    )
    assert found.assumed and "2 uniform boxes and cylinders" in found.assumed[0]


def test_mass_and_centre_from_corner_weighings() -> None:
    """Moments by hand: 1, 1, 2 kN at x = 0, 0, 1 m and y = 0, 1, .5 m: x = .5, y = .5; mass 4000/9.80665 kg."""
    weighing = Weighing(
        positions=((0.0, 0.0, 0.0), (0.0, 1.0, 0.0), (1.0, 0.5, 0.0)),
        readings=(1000.0, 1000.0, 2000.0),
        centre_height=0.4,
    )
    found = mass_properties(Body(name="b", weighing=weighing, inertia_box=(1.0, 0.6, 0.4)))
    assert found.mass == pytest.approx(407.8865, rel=1e-6)
    assert found.centre == pytest.approx([0.5, 0.5, 0.4])
    assert len(found.assumed) == 2


def test_floor_as_a_practitioner_knows_it() -> None:
    """8 Hz and 5000 kg: k = m w^2 = 12.6331 MN/m, c = 2 z m w at 2 % = 10053.1 N s/m, and the 2 % is told."""
    found = floor_freedom(Floor(kind="frequency-and-mass", frequency=8.0, effective_mass=5000.0))
    assert found is not None
    assert (found.mass, found.stiffness, found.damping) == pytest.approx(
        (5000.0, 1.26331e7, 10053.1), rel=1e-5
    )
    assert "2%" in found.assumed[0] or "2 %" in found.assumed[0]
    # A simply supported span that sags d under its own weight, first mode: sag 5 w L^4/(384 E I) and frequency
    # pi/2 sqrt(E I/(w/g L^4)) give pi/2 sqrt(5 g/(384 d)), with half of its mass (Timoshenko; recomputed).
    spanned = floor_freedom(
        Floor(kind="span-and-sag", span=6.0, width=3.0, area_mass=400.0, sag=0.010, damping_ratio=0.03)
    )
    assert spanned is not None
    frequency = math.pi / 2.0 * math.sqrt(5.0 * 9.80665 / (384.0 * 0.010))
    assert spanned.mass == pytest.approx(3600.0)
    assert math.sqrt(spanned.stiffness / spanned.mass) / (2 * math.pi) == pytest.approx(frequency, rel=1e-3)
    assert floor_freedom(Floor(kind="rigid")) is None


def test_slider_crank_of_one_cylinder() -> None:
    """Primary m r w^2, secondary m r w^2 (r/l) at twice the speed (Bevan, Theory of Machines, ch. 15).

    A tone grows with its own frequency squared, so the secondary stands as m r (r/l)/4 of (2 w)^2.
    """
    crank = SliderCrank(
        name="piston", shaft="s", position=(0.0, 0.0, 0.0), axis="x",
        reciprocating_mass=2.0, crank_radius=0.03, rod_length=0.12, cylinders=(Cylinder(offset=0.0, crank_angle=0.0),),
    )  # fmt: skip
    first, second = crank.tones({"s": (10.0, 20.0)})
    assert (first.order, second.order) == (1.0, 2.0)
    assert abs(first.force[2]) == pytest.approx(2.0 * 0.03)
    assert abs(second.force[2]) == pytest.approx(2.0 * 0.03 * 0.25 / 4.0)
    assert first.power == second.power == 2


def test_unbalance_turns_right_handed_about_its_axis() -> None:
    """About +z the force leads from x to y: F_y = -j F_x with exp(+j w t); its size is the same in both."""
    tone = RotatingUnbalance(name="u", shaft="s", position=(0, 0, 0), axis="z", unbalance=0.5).tones(
        {"s": (1.0, 2.0)}
    )[0]
    x, y, z = tone.force
    assert abs(x) == pytest.approx(0.5) and y == pytest.approx(-1j * x) and z == 0.0
    back = RotatingUnbalance(
        name="u", shaft="s", position=(0, 0, 0), axis=(0.0, 0.0, -1.0), unbalance=0.5
    ).tones({"s": (1.0, 2.0)})[0]
    assert back.force[1] == pytest.approx(1j * back.force[0])


def test_base_motion_by_velocity_and_acceleration_is_the_same_displacement() -> None:
    """u = v/(j w) = -a/w^2 at 5 Hz."""
    w = 2.0 * math.pi * 5.0
    for stated, value in (("displacement", 1e-3), ("velocity", w * 1e-3), ("acceleration", w**2 * 1e-3)):
        tone = BaseMotion(name="b", frequency=5.0, direction="z", **{stated: value}).tones({})[0]
        assert tone.base is not None
        assert abs(tone.base[2]) * w**tone.power == pytest.approx(1e-3)


def test_schema_names_every_table_and_kind(tmp_path: Path) -> None:
    """The schema for editors is plain JSON and knows the tables of the good study."""
    schema = json.loads(json.dumps(study_schema()))
    good = read_brief(HERE / "good_study.toml")
    assert {"body", "station", "floor", "condition", "forcing", "allowable", "catalog", "choice"} <= set(
        schema["properties"]
    )
    kinds = {
        definition["properties"]["kind"].get("const")
        for definition in schema["$defs"].values()
        if "kind" in definition.get("properties", {})
    }
    assert {f.kind for f in good.forcing} | {a.kind for a in good.allowables} <= kinds


def test_schema_asks_for_lists_or_a_sizing_table() -> None:
    """A study that sizes its parts may stand before there is a parts list; absorbers and ballast of lists are known."""
    schema = json.loads(json.dumps(study_schema()))
    assert {"catalog", "choice"}.isdisjoint(schema["required"])
    assert schema["anyOf"] == [{"required": ["catalog", "choice"]}, {"required": ["sizing"]}]
    assert schema["properties"]["absorber"]["items"] == {"$ref": "#/$defs/Absorber"}
    assert {"name", "at", "direction", "catalogs"} == set(schema["$defs"]["Absorber"]["required"])
    ballast = schema["$defs"]["Ballast"]
    assert ballast["required"] == ["position"]
    assert [each["required"] for each in ballast["oneOf"]] == [["size", "steps", "cost_per_kg"], ["catalogs"]]
    assert "sizes" in schema["$defs"]["Choice"]["properties"] and "Stroke" in schema["$defs"]
