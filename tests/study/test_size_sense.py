"""Sizing studies without sense, refused in the user's words and with the line: one axis, six axes."""

from __future__ import annotations

import importlib.util
from pathlib import Path
from typing import Any

import pytest

from detune.ground.errors import BriefError
from detune.study.load import load_study
from detune.study.size import size_study

_spec = importlib.util.spec_from_file_location("sizing_briefs", Path(__file__).with_name("sizing_briefs.py"))
assert _spec is not None and _spec.loader is not None
briefs: Any = importlib.util.module_from_spec(_spec)
_spec.loader.exec_module(briefs)

SKID = (Path(__file__).parent / "skid_to_size.toml").read_text(encoding="utf-8")
NO_FORCE = """
[[forcing]]
kind = "random-force"
name = "noise"
position = ["0 m", "0 m", "0 m"]
direction = "z"
duration = "60 s"
break_points = [["1 Hz", "2 N^2/Hz"], ["100 Hz", "2 N^2/Hz"]]
"""


def refused(folder: Path, text: str) -> BriefError:
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(BriefError) as caught:
        size_study(load_study(path), drawings=False)
    return caught.value


def one(**changes: Any) -> str:
    given = {
        "more": briefs.TRANSMISSIBILITY.format(limit=0.1), "goal": "minimise = 'stiffness'", "mass": 30.0,
        "frequency": "'10 Hz'", "softest": 10.0, "stiffest": 1e5, "made": "viscous = '0 N s/m'",
    }  # fmt: skip
    return str(briefs.one_axis(**{**given, **changes}))


BOUNDS = {
    "one axis, crossed": (one(), 'lower = "10.0 N/m"', 'lower = "2 kN/mm"', "these are crossed"),
    "one axis, zero": (one(), 'lower = "10.0 N/m"', 'lower = "0 N/m"', "a lower bound above zero"),
    "one axis, no end": (one(), 'upper = "100000.0 N/m"', "upper = inf", "a finite bound; without one the"
                                                                         " search has no end"),
    "six axes, crossed": (SKID, "upper = 0.3\n", "upper = 0.01\n", "these are crossed"),
    "six axes, no end": (SKID, "upper = 0.3\n", "upper = inf\n", "a finite bound; without one the search has no end"),
    "six axes, a unit of another kind": (SKID, 'upper = "2000 N/mm"', 'upper = "2000 kg"', "stiffness"),
    "six axes, no unit": (SKID, 'upper = "150 kg"', "upper = 150", "unit"),
}  # fmt: skip


@pytest.mark.parametrize("name", BOUNDS)
def test_bounds_without_sense(tmp_path, name):
    text, old, new, words = BOUNDS[name]
    assert old in text
    changed = text.replace(old, new, 1)
    error = refused(tmp_path, changed)
    assert words in str(error)
    lines = changed.splitlines()
    near = next(i for i, line in enumerate(lines, 1) if line == new.splitlines()[0])
    # At the bound itself, or at the one beside it that it crosses.
    assert any(fault.line is not None and abs(fault.line - near) <= 1 for fault in error.faults)


def test_a_faulty_sizing_table_does_not_ask_for_lists(tmp_path):
    """A study that is to be sized needs no catalogs and choices, even while its table has a fault."""
    (fault,) = refused(tmp_path, one().replace('lower = "10.0 N/m"', 'lower = "2 kN/mm"')).faults
    assert fault.where == "sizing.unknown[1].lower"


def test_one_axis_an_unknown_nothing_depends_on(tmp_path):
    """A transmissibility does not know the amplitude of the force, nor where the one station stands."""
    place = "[[sizing.unknown]]\nkind = 'position'\nstations = ['A']\naxis = 'x'\nlower = '0.1 m'\nupper = '0.4 m'"
    text = one(unknowns=place).replace('parallel = 1\nposition = ["0 m"', 'parallel = 1\nposition = ["0.2 m"')
    (fault,) = refused(tmp_path, text).faults
    assert fault.found == "x distance of A" and "nothing here changes with it" in fault.expected
    assert fault.where == "sizing.unknown[2]"
    assert text.splitlines()[int(fault.line or 0) - 1] == "[[sizing.unknown]]"


def test_six_axes_an_unknown_nothing_depends_on(tmp_path):
    """A cabinet on a rigid floor beside the machine: nothing shakes it and nothing limits it, so its
    damping is idle.
    """
    cabinet = '[[body]]\nname = "cabinet"\nmass = "60 kg"\ncentre = ["3 m","0 m","0.4 m"]\n'
    cabinet += 'inertia_box = ["0.5 m","0.5 m","0.8 m"]\n'
    for name, x, y in (("E", 2.8, -0.2), ("F", 2.8, 0.2), ("G", 3.2, -0.2), ("H", 3.2, 0.2)):
        cabinet += f'[[station]]\nname = "{name}"\ngroup = "cabinet feet"\non = "cabinet"\n'
        cabinet += f'position = ["{x} m","{y} m","0 m"]\n'
    text = SKID.replace("[floor]", cabinet + "[floor]")
    for station in ("A", "B", "C", "D"):
        text = text.replace(f'name = "{station}"\ngroup', f'name = "{station}"\non = "skid"\ngroup')
    text = text.replace('name = "flange"\n', 'name = "flange"\non = "skid"\n')
    text = text.replace('name = "rotor"\nshaft', 'name = "rotor"\non = "skid"\nshaft')
    text = text.replace("[ballast]\n", '[ballast]\non = "skid"\n')
    unknown = '[[sizing.unknown]]\nkind = "loss-factor"\ngroup = "cabinet feet"\nlower = 0.05\nupper = 0.2\n'
    made = '[[sizing.made]]\ngroup = "cabinet feet"\ndynamic_to_static = 1.2\nlateral_ratio = 0.6\n'
    text = text.replace("[[sizing.made]]", unknown + "[[sizing.made]]", 1) + made + 'stiffness = "60 N/mm"\n'
    (fault,) = refused(tmp_path, text).faults
    assert fault.found == "loss factor of cabinet feet" and "nothing here changes with it" in fault.expected
    assert text.splitlines()[int(fault.line or 0) - 1] == "[[sizing.unknown]]"


def test_six_axes_an_objective_nothing_changes(tmp_path):
    free = SKID.replace("cost_per_stiffness = 0.05\n", "").replace("cost_per_loss_factor = 100\n", "")
    free = free.replace("cost_per_stiffness = 0.05", "").replace("cost_per_kg = 1.5", "cost_per_kg = 0")
    (fault,) = refused(tmp_path, free).faults
    assert fault.where == "sizing.minimise" and "every design costs the same" in fault.expected
    assert free.splitlines()[int(fault.line or 0) - 1] == 'minimise = "cost"'


@pytest.mark.parametrize("axes", ["one", "six"])
def test_a_separation_without_bound(tmp_path, axes):
    """Nothing excites steadily, so the machine is as far from excitation as can be, whatever its stiffness."""
    text = (
        one(goal="maximise = 'separation'", more=briefs.DISPLACEMENT.format(limit=0.01))
        if axes == "one"
        else SKID
    )
    if axes == "six":
        text = text.replace('minimise = "cost"', 'maximise = "separation"')
        cut = text.index('[[allowable]]\nkind = "transmitted-force"')
        text = text[:cut] + text[text.index('[[allowable]]\nkind = "sag"') :]
        cut = text.index('[[allowable]]\nkind = "separation"')
        text = text[:cut] + text[text.index("[ballast]") :]
        text = text.replace('shafts = { rotor = ["1350 rpm","1500 rpm"] }', "")
        text = text.replace('direction = "resultant"\nmeasure = "rms"\nlimit = "1.2 mm/s"',
                            'direction = "z"\nmeasure = "peak"\nlimit = "1 m/s"')  # fmt: skip
    a, b = text.index("[[forcing]]"), text.index("[[allowable]]")
    error = refused(tmp_path, text[:a] + NO_FORCE + text[b:])
    assert "the separation has no bound" in str(error) or "a finite value for every design" in str(error)
    assert error.faults[0].where.startswith("sizing") and error.faults[0].line is not None
