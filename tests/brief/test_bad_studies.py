"""Bad study files: each fault names its line, its key, what stands there, what to write, and the nearest name.

Every case spoils a sound study by one edit and states the fault that must come of it, written down by hand
from the words a practitioner would need; nothing is taken from the reader's own tables.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import pytest

from detune.brief.read import scan_brief
from detune.ground.errors import BriefError, Fault
from detune.study.load import load_study

GOOD = """\
title = "Pump on four mounts"

[[body]]
name = "pump"
mass = "120 kg"
centre = ["0 m", "0 m", "0.3 m"]
inertia = { xx = "4 kg m^2", yy = "6 kg m^2", zz = "7 kg m^2" }

[[point]]
name = "flange"
position = ["0.2 m", "0 m", "0.6 m"]

[[station]]
name = "A"
group = "drive end"
position = ["-0.3 m", "-0.2 m", "0 m"]

[[station]]
name = "B"
group = "drive end"
position = ["-0.3 m", "0.2 m", "0 m"]

[[station]]
name = "C"
group = "free end"
position = ["0.3 m", "-0.2 m", "0 m"]

[[station]]
name = "D"
group = "free end"
position = ["0.3 m", "0.2 m", "0 m"]
axial = [0, 0, 1]
radial = "x"
parallel = 1

[[connection]]
name = "discharge pipe"
position = ["0.2 m", "0 m", "0.6 m"]
stiffness = ["5 N/mm", "5 N/mm", "5 N/mm"]
loss_factor = 0.05

[[steady_load]]
name = "pipe thrust"
position = ["0.2 m", "0 m", "0.6 m"]
force = ["80 N", "0 N", "0 N"]

[floor]
kind = "frequency-and-mass"
frequency = "9 Hz"
effective_mass = "2500 kg"
damping_ratio = "2 %"

[[condition]]
name = "running"
shafts = { rotor = ["1450 rpm", "1480 rpm"] }

[[condition]]
name = "run-up"
steady = false
shafts = { rotor = ["100 rpm", "1450 rpm"] }

[[forcing]]
kind = "rotating-unbalance"
name = "impeller"
shaft = "rotor"
position = ["-0.1 m", "0 m", "0.35 m"]
axis = "x"
unbalance = "300 g mm"

[[forcing]]
kind = "shaft-orders"
name = "vane passing"
shaft = "rotor"
position = ["-0.1 m", "0 m", "0.35 m"]
orders = [{ order = 5, force = ["0 N", "0 N", "12 N"] }]

[[forcing]]
kind = "harmonic-force"
name = "mains hum"
conditions = ["running"]
position = ["0.1 m", "0 m", "0.3 m"]
force = ["0 N", "0 N", "40 N"]
frequency = "100 Hz"

[[allowable]]
kind = "velocity"
conditions = ["running"]
at = "flange"
direction = "z"
measure = "rms"
limit = "4.5 mm/s"

[[allowable]]
kind = "transmitted-force"
through = "floor"
direction = "resultant"
measure = "peak"
limit = "150 N"

[[allowable]]
kind = "mount-deflection"
part = "dynamic"
stations = ["A", "B"]
limit = "1.5 mm"

[[allowable]]
kind = "separation"
limit = "20 %"

[[catalog]]
name = "rubber"
file = "rubber.csv"

[[catalog]]
name = "spring"
file = "spring.csv"

[[choice]]
group = "drive end"
catalogs = ["rubber"]
where = { family = ["rubber"], stiffness_z_static = { max = "400 N/mm" } }

[[choice]]
group = "free end"
catalogs = ["rubber", "spring"]

[ballast]
position = ["0 m", "0 m", "0.1 m"]
size = ["0.6 m", "0.4 m", "0.1 m"]
steps = ["0 kg", "20 kg"]
cost_per_kg = 1.2

[objectives]
trade = ["cost", "separation"]
"""
RUBBER = """\
part,family,stiffness_z_static [N/mm],stiffness_z_dynamic [N/mm],stiffness_x_static [N/mm],stiffness_x_dynamic [N/mm],loss_factor,load_min [N],load_max [N],cost
rowan-a,rubber,160,200,40,50,0.1,0,1200,20
rowan-b,rubber,80,100,20,25,0.1,0,900,18
"""
SPRING = RUBBER.replace("rowan", "larch").replace("rubber,", "spring,")

# Tables of the good study that several cases exchange for another.
HUM = """\
kind = "harmonic-force"
name = "mains hum"
conditions = ["running"]
position = ["0.1 m", "0 m", "0.3 m"]
force = ["0 N", "0 N", "40 N"]
frequency = "100 Hz"
""".rstrip()
DEFLECTION = """\
kind = "mount-deflection"
part = "dynamic"
stations = ["A", "B"]
limit = "1.5 mm"
""".rstrip()
FLOOR = """\
[floor]
kind = "frequency-and-mass"
frequency = "9 Hz"
effective_mass = "2500 kg"
damping_ratio = "2 %"
"""
BALLAST = """\
[ballast]
position = ["0 m", "0 m", "0.1 m"]
size = ["0.6 m", "0.4 m", "0.1 m"]
steps = ["0 kg", "20 kg"]
cost_per_kg = 1.2

"""
WEIGHING = (
    'weighing = { positions = [["0 m", "0 m", "0 m"], ["1 m", "0 m", "0 m"], ["0 m", "1 m", "0 m"]],'
    ' readings = ["400 N", "400 N", "400 N"], centre_height = "0.3 m" }'
)


@dataclass(frozen=True)
class Case:
    """One edit of the good study, and the one fault that must come of it, `on` a line that starts so."""

    name: str
    old: str
    new: str
    on: str | None
    where: str
    found: str
    expected: str
    nearest: str | None = None


def case(
    name: str,
    old: str,
    new: str,
    on: str | None,
    where: str,
    found: str,
    expected: str,
    nearest: str | None = None,
) -> Case:
    return Case(name, old, new, on, where, found, expected, nearest)


# pydantic speaks of inputs, instances and literals, and Python of None; a practitioner does not.
FOREIGN = ("Input should", "validation", "pydantic", "instance", "literal", "dictionary", "NoneType", "tuple")
Load = Callable[..., tuple[Fault, ...]]


@pytest.fixture
def faults_of(tmp_path: Path) -> Load:
    """Write a study and its catalogs, load it, and return its faults; it must have some."""

    def load(study: str, rubber: str = RUBBER, spring: str = SPRING) -> tuple[Fault, ...]:
        (tmp_path / "study.toml").write_text(study, encoding="utf-8")
        (tmp_path / "rubber.csv").write_text(rubber, encoding="utf-8")
        (tmp_path / "spring.csv").write_text(spring, encoding="utf-8")
        with pytest.raises(BriefError) as caught:
            load_study(tmp_path / "study.toml")
        return caught.value.faults

    return load


def spoilt(old: str, new: str) -> str:
    assert old in GOOD, f"the good study has no {old!r}"
    return GOOD.replace(old, new, 1)


def test_the_good_study_is_good(tmp_path: Path) -> None:
    (tmp_path / "study.toml").write_text(GOOD)
    (tmp_path / "rubber.csv").write_text(RUBBER)
    (tmp_path / "spring.csv").write_text(SPRING)
    study = load_study(tmp_path / "study.toml")
    assert study.brief.title == "Pump on four mounts"
    assert sorted(study.catalogs) == ["rubber", "spring"]


# fmt: off
CASES = [
    case('toml comma', 'loss_factor = 0.05', 'loss_factor = 0,05',
         on='loss_factor = 0,05', where='connection[1].loss_factor (column 16)', found='loss_factor = 0,05',
         expected='a decimal point instead of the comma: loss_factor = 0.05'),
    case('toml unquoted', 'mass = "120 kg"', 'mass = 120 kg',
         on='mass = 120 kg', where='body[1].mass (column 12)', found='mass = 120 kg',
         expected='quotation marks around a number with its unit: mass = "120 kg"'),
    case('toml unclosed', 'position = ["0.2 m", "0 m", "0.6 m"]\n\n[[station]]', 'position = ["0.2 m", "0 m", "0.6 m"\n\n[[station]]',
         on='[[station]]', where='station (column 1)', found='[[station]]',
         expected='a comma between the entries of the list that begins on line 11,'),
    case('toml twice', 'name = "pump"', 'name = "pump"\nname = "pump 2"',
         on='name = "pump 2"', where='body[1].name (column 16)', found='name = "pump 2"',
         expected='each key and each table once; it stands on line 4 already'),
    case('comma unit', '"5 N/mm", "5 N/mm", "5 N/mm"', '"5 N/mm", "12,5 N/mm", "5 N/mm"',
         on='stiffness = ["5 N/mm", "12,5 N/mm", "5 N/mm"', where='connection[1].stiffness[2]', found='12,5 N/mm',
         expected='a stiffness with its unit, for example "4.2 N/mm"; a comma is not'),
    case('bare freq', 'frequency = "100 Hz"', 'frequency = 50',
         on='frequency = 50', where='forcing[3].frequency', found='50',
         expected='a frequency with its unit, in quotes, for example "24.5 Hz", or a'),
    case('bare freq text', 'frequency = "100 Hz"', 'frequency = "50"',
         on='frequency = "50"', where='forcing[3].frequency', found='50',
         expected='a frequency with its unit, for example "24.5 Hz"; a number'),
    case('force in kg', 'force = ["0 N", "0 N", "40 N"]', 'force = ["0 N", "0 N", "40 kg"]',
         on='force = ["0 N", "0 N", "40 kg"]', where='forcing[3].force[3]', found='40 kg',
         expected='a force with its unit, for example "1200 N"; kg is a mass; write'),
    case('unknown unit', 'mass = "120 kg"', 'mass = "120 kgs"',
         on='mass = "120 kgs"', where='body[1].mass', found='120 kgs',
         expected='a mass with its unit, for example "640 kg"; there is no unit', nearest='120 kg'),
    case('unknown unit2', 'limit = "150 N"', 'limit = "150 Newtons"',
         on='limit = "150 Newtons"', where='allowable[2].limit', found='150 Newtons',
         expected='a force with its unit, for example "1200 N"; there is no unit', nearest='150 newton'),
    case('limit wrong dim', 'limit = "4.5 mm/s"', 'limit = "4.5 mm"',
         on='limit = "4.5 mm"', where='allowable[1].limit', found='4.5 mm',
         expected='a velocity with its unit, for example "4.5 mm/s"; "mm" is a length'),
    case('limit wrong dim2', 'limit = "1.5 mm"', 'limit = "1.5 N"',
         on='limit = "1.5 N"', where='allowable[3].limit', found='1.5 N',
         expected='"part", or a length with its unit, for example "12 mm"; "N" is a'),
    case('rms in unit', 'limit = "4.5 mm/s"', 'limit = "4.5 mm/s rms"',
         on='limit = "4.5 mm/s rms"', where='allowable[1].limit', found='4.5 mm/s rms',
         expected='a velocity with its unit, for example "4.5 mm/s"; "rms" is no'),
    case('range in text', 'frequency = "100 Hz"', 'frequency = "40-60 Hz"',
         on='frequency = "40-60 Hz"', where='forcing[3].frequency', found='40-60 Hz',
         expected='a frequency with its unit, for example "24.5 Hz"; a range is not'),
    case('unit g in force', 'limit = "150 N"', 'limit = "0.3 g"',
         on='limit = "0.3 g"', where='allowable[2].limit', found='0.3 g',
         expected='a force with its unit, for example "1200 N"; "g" is a mass or an'),
    case('ratio with unit', 'loss_factor = 0.05', 'loss_factor = "5 mm"',
         on='loss_factor = "5 mm"', where='connection[1].loss_factor', found='5 mm',
         expected='a ratio as a bare number or in per cent, for example "0.1" or "10'),
    case('mass unit as freq', '["1450 rpm", "1480 rpm"]', '["1450 kg", "1480 rpm"]',
         on='shafts = { rotor = ["1450 kg", "1480 rpm"] }', where='condition[1].shafts.rotor[1]', found='1450 kg',
         expected='a frequency with its unit, for example "24.5 Hz"; "kg" is a mass'),
    case('cost with unit', 'cost_per_kg = 1.2', 'cost_per_kg = "1.2 EUR"',
         on='cost_per_kg = "1.2 EUR"', where='ballast.cost_per_kg', found='1.2 EUR',
         expected='a cost as a bare number, for example "1250"; a cost has no unit'),
    case('unknown key', 'unbalance = "300 g mm"', 'unbalence = "300 g mm"',
         on='unbalence = "300 g mm"', where='forcing[1].unbalence', found='unbalence',
         expected='one of the keys kind, name, conditions, shaft, on, position,', nearest='unbalance'),
    case('unknown key optional', 'parallel = 1', 'paralel = 1',
         on='paralel = 1', where='station[4].paralel', found='paralel',
         expected='one of the keys name, group, on, to, position, axial, radial,', nearest='parallel'),
    case('unknown table', '[[connection]]', '[[conection]]',
         on='[[conection]]', where='conection', found='conection',
         expected='one of the tables of a study: title, notes, floor, ballast,', nearest='connection'),
    case('unknown nested key', 'inertia = { xx = "4 kg m^2",', 'inertia = { ixx = "4 kg m^2",',
         on='inertia = { ixx = "4 kg m^2", yy = "6 kg m^2', where='body[1].inertia.ixx', found='ixx',
         expected='one of the keys xx, yy, zz, xy, xz, yz', nearest='xx'),
    case('key of another kind', 'part = "dynamic"', 'part = "dynamic"\nat = "flange"',
         on='at = "flange"', where='allowable[3].at', found='at',
         expected='one of the keys kind, conditions, part, direction, stations, limit', nearest='part'),
    case('missing key', 'group = "drive end"\nposition = ["-0.3 m", "-0.2 m", "0 m"]', 'position = ["-0.3 m", "-0.2 m", "0 m"]',
         on='[[station]]', where='station[1].group', found='',
         expected='"group", which has no default'),
    case('missing measure', 'measure = "rms"\n', '',
         on='[[allowable]]', where='allowable[1].measure', found='',
         expected='"measure", which has no default'),
    case('missing floor', FLOOR, '',
         on=None, where='floor', found='',
         expected='[floor], which every study states'),
    case('missing title', 'title = "Pump on four mounts"\n', '',
         on=None, where='title', found='',
         expected='title, which every study states'),
    case('wrong kind allowable', 'kind = "velocity"', 'kind = "velocities"',
         on='kind = "velocities"', where='allowable[1].kind', found='velocities',
         expected='one of "displacement", "velocity", "acceleration",', nearest='velocity'),
    case('wrong kind forcing', 'kind = "rotating-unbalance"', 'kind = "unbalance"',
         on='kind = "unbalance"', where='forcing[1].kind', found='unbalance',
         expected='one of "harmonic-force", "rotating-unbalance", "slider-crank",', nearest='rotating-unbalance'),
    case('no kind', 'kind = "separation"\n', '',
         on='[[allowable]]', where='allowable[4].kind', found='',
         expected='one of "displacement", "velocity", "acceleration",'),
    case('kind a number', 'kind = "separation"', 'kind = 7',
         on='kind = 7', where='allowable[4].kind', found='7',
         expected='one of "displacement", "velocity", "acceleration",'),
    case('kind a list', 'kind = "separation"', 'kind = ["separation"]',
         on='kind = ["separation"]', where='allowable[4].kind', found='["separation"]',
         expected='one of "displacement", "velocity", "acceleration",'),
    case('wrong floor kind', 'kind = "frequency-and-mass"', 'kind = "frequency and mass"',
         on='kind = "frequency and mass"', where='floor.kind', found='frequency and mass',
         expected='one of "rigid", "span-and-sag", "frequency-and-mass",', nearest='frequency-and-mass'),
    case('floor key missing', 'effective_mass = "2500 kg"\n', '',
         on='[floor]', where='floor', found='floor of kind frequency-and-mass',
         expected='also "effective_mass"'),
    case('floor key extra', 'damping_ratio = "2 %"', 'damping_ratio = "2 %"\nspan = "6 m"',
         on='span = "6 m"', where='floor.span', found='6 m',
         expected='only the keys of a floor of kind frequency-and-mass: "frequency",'),
    case('wrong catalog kind', 'file = "spring.csv"', 'file = "spring.csv"\nkind = "mounts"',
         on='kind = "mounts"', where='catalog[2].kind', found='mounts',
         expected='a kind of part: mount', nearest='mount'),
    case('wrong objective', 'trade = ["cost", "separation"]', 'trade = ["price", "separation"]',
         on='trade = ["price", "separation"]', where='objectives.trade[1]', found='price',
         expected='one of "cost", "separation", "least-margin", "added-mass",'),
    case('one objective', 'trade = ["cost", "separation"]', 'trade = ["cost"]',
         on='trade = ["cost"]', where='objectives.trade', found='["cost"]',
         expected='two or three different objectives'),
    case('objective twice', 'trade = ["cost", "separation"]', 'trade = ["cost", "cost"]',
         on='trade = ["cost", "cost"]', where='objectives.trade', found='["cost", "cost"]',
         expected='two or three different objectives'),
    case('wrong measure', 'measure = "peak"', 'measure = "RMS"',
         on='measure = "RMS"', where='allowable[2].measure', found='RMS',
         expected='one of "peak", "rms", "peak-to-peak", "3-sigma"', nearest='rms'),
    case('wrong through', 'through = "floor"', 'through = "flor"',
         on='through = "flor"', where='allowable[2].through', found='flor',
         expected='one of "each-station", "floor", "ground"', nearest='floor'),
    case('wrong direction', 'direction = "z"\nmeasure = "rms"', 'direction = "vertical"\nmeasure = "rms"',
         on='direction = "vertical"', where='allowable[1].direction', found='vertical',
         expected='one of "x", "y", "z", or "resultant", or a list in square brackets'),
    case('wrong free', 'centre = ["0 m", "0 m", "0.3 m"]', 'centre = ["0 m", "0 m", "0.3 m"]\nfree = ["z", "pitch"]',
         on='free = ["z", "pitch"]', where='body[1].free[2]', found='pitch',
         expected='one of "x", "y", "z", "rx", "ry", "rz"'),
    case('crossed speed', '["1450 rpm", "1480 rpm"]', '["1480 rpm", "1450 rpm"]',
         on='shafts = { rotor = ["1480 rpm", "1450 rpm"]', where='condition[1].shafts.rotor', found='["1480 rpm", "1450 rpm"]',
         expected='the lower end first, the upper end second'),
    case('zero speed', '["100 rpm", "1450 rpm"]', '["0 rpm", "1450 rpm"]',
         on='shafts = { rotor = ["0 rpm", "1450 rpm"] }', where='condition[2].shafts.rotor', found='["0 rpm", "1450 rpm"]',
         expected='a lowest frequency above zero'),
    case('crossed frequency', 'frequency = "100 Hz"', 'frequency = ["60 Hz", "40 Hz"]',
         on='frequency = ["60 Hz", "40 Hz"]', where='forcing[3].frequency', found='["60 Hz", "40 Hz"]',
         expected='the lower end first, the upper end second'),
    case('three frequencies', 'frequency = "100 Hz"', 'frequency = ["40 Hz", "50 Hz", "60 Hz"]',
         on='frequency = ["40 Hz", "50 Hz", "60 Hz"]', where='forcing[3].frequency', found='["40 Hz", "50 Hz", "60 Hz"]',
         expected='a frequency such as "25 Hz" or a range such as ["10 Hz", "60 Hz"]'),
    case('three speeds', '["1450 rpm", "1480 rpm"]', '["1450 rpm", "1480 rpm", "1500 rpm"]',
         on='shafts = { rotor = ["1450 rpm", "1480 rpm",', where='condition[1].shafts.rotor', found='["1450 rpm", "1480 rpm", "1500 rpm"]',
         expected='a list of 2 values'),
    case('crossed window', 'stiffness_z_static = { max = "400 N/mm" }', 'stiffness_z_static = { min = "500 N/mm", max = "400 N/mm" }',
         on='where = { family = ["rubber"], stiffness_z_s', where='choice[1].where.stiffness_z_static', found='500 N/mm to 400 N/mm',
         expected='the lower end first, the upper end second'),
    case('negative limit', 'limit = "150 N"', 'limit = "-150 N"',
         on='limit = "-150 N"', where='allowable[2].limit', found='-150 N',
         expected='a limit above zero'),
    case('zero limit', 'limit = "20 %"', 'limit = 0',
         on='limit = 0', where='allowable[4].limit', found='0',
         expected='a limit above zero'),
    case('negative mass', 'mass = "120 kg"', 'mass = "-120 kg"',
         on='mass = "-120 kg"', where='body[1].mass', found='-120 kg',
         expected='a mass above zero'),
    case('zero mass', 'mass = "120 kg"', 'mass = "0 kg"',
         on='mass = "0 kg"', where='body[1].mass', found='0 kg',
         expected='a mass above zero'),
    case('negative floor mass', 'effective_mass = "2500 kg"', 'effective_mass = "-2500 kg"',
         on='effective_mass = "-2500 kg"', where='floor.effective_mass', found='-2500 kg',
         expected='a value above zero'),
    case('negative ballast', 'steps = ["0 kg", "20 kg"]', 'steps = ["-5 kg", "20 kg"]',
         on='steps = ["-5 kg", "20 kg"]', where='ballast.steps', found='["-5 kg", "20 kg"]',
         expected='steps of zero or more'),
    case('inertia not positive', 'xx = "4 kg m^2"', 'xx = "-4 kg m^2"',
         on='inertia = { xx = "-4 kg m^2", yy = "6 kg m^2', where='body[1].inertia', found='principal moments -4, 6, 7 kg m^2',
         expected='an inertia whose three principal moments are all above zero'),
    case('inertia product too great', 'zz = "7 kg m^2" }', 'zz = "7 kg m^2", xy = "5 kg m^2" }',
         on='inertia = { xx = "4 kg m^2", yy = "6 kg m^2"', where='body[1].inertia', found='principal moments -0.09902, 7, 10.1 kg m^2',
         expected='an inertia whose three principal moments are all above zero'),
    case('inertia triangle', 'zz = "7 kg m^2" }', 'zz = "17 kg m^2" }',
         on='inertia = { xx = "4 kg m^2", yy = "6 kg m^2"', where='body[1].inertia', found='principal moments 4, 6, 17 kg m^2',
         expected='an inertia that a real body can have: no principal moment above'),
    case('no inertia', 'inertia = { xx = "4 kg m^2", yy = "6 kg m^2", zz = "7 kg m^2" }\n', '',
         on='[[body]]', where='body[1]', found='no inertia',
         expected='an inertia for a body that may rotate: "inertia", "inertia_box"'),
    case('mass twice', 'mass = "120 kg"', 'mass = "120 kg"\n' + WEIGHING,
         on='[[body]]', where='body[1]', found='mass and weighing',
         expected='the mass stated in exactly one way: "mass" with "centre", or'),
    case('no centre', 'centre = ["0 m", "0 m", "0.3 m"]\n', '',
         on='[[body]]', where='body[1]', found='mass without centre',
         expected='the centre of mass as "centre"'),
    case('negative connection stiffness', '"5 N/mm", "5 N/mm", "5 N/mm"', '"5 N/mm", "-5 N/mm", "5 N/mm"',
         on='stiffness = ["5 N/mm", "-5 N/mm", "5 N/mm"]', where='connection[1].stiffness', found='["5 N/mm", "-5 N/mm", "5 N/mm"]',
         expected='values of zero or more'),
    case('no connection damping', 'loss_factor = 0.05\n', '',
         on='[[connection]]', where='connection[1]', found='no damping',
         expected='the damping as "loss_factor" or "viscous" (zero is an answer)'),
    case('loss factor as per cent', 'loss_factor = 0.05', 'loss_factor = 5',
         on='loss_factor = 5', where='connection[1].loss_factor', found='5',
         expected='a loss factor from 0 to 1.5'),
    case('floor damping 200%', 'damping_ratio = "2 %"', 'damping_ratio = 2',
         on='damping_ratio = 2', where='floor.damping_ratio', found='2',
         expected='a damping ratio below 1'),
    case('box side', 'size = ["0.6 m", "0.4 m", "0.1 m"]', 'size = ["0.6 m", "0 m", "0.1 m"]',
         on='size = ["0.6 m", "0 m", "0.1 m"]', where='ballast.size', found='["0.6 m", "0 m", "0.1 m"]',
         expected='a box side above zero'),
    case('unknown point', 'at = "flange"', 'at = "flenge"',
         on='at = "flenge"', where='allowable[1].at', found='flenge',
         expected='the name of a point ("flange")', nearest='flange'),
    case('unknown station', 'stations = ["A", "B"]', 'stations = ["A", "E"]',
         on='stations = ["A", "E"]', where='allowable[3].stations[2]', found='E',
         expected='the name of a station ("A", "B", "C", "D")'),
    case('unknown condition', 'conditions = ["running"]\nat', 'conditions = ["runing"]\nat',
         on='conditions = ["runing"]', where='allowable[1].conditions[1]', found='runing',
         expected='the name of a condition ("running", "run-up")', nearest='running'),
    case('unknown forcing condition', 'conditions = ["running"]\nposition', 'conditions = ["steady"]\nposition',
         on='conditions = ["steady"]', where='forcing[3].conditions[1]', found='steady',
         expected='the name of a condition ("running", "run-up")'),
    case('unknown shaft', 'name = "impeller"\nshaft = "rotor"', 'name = "impeller"\nshaft = "roter"',
         on='shaft = "roter"', where='forcing[1].shaft', found='roter',
         expected='a shaft whose speed is stated under "shafts" in every condition', nearest='rotor'),
    case('unknown catalog', 'catalogs = ["rubber", "spring"]', 'catalogs = ["rubber", "springs"]',
         on='catalogs = ["rubber", "springs"]', where='choice[2].catalogs[2]', found='springs',
         expected='the name of a catalog ("rubber", "spring")', nearest='spring'),
    case('unknown body', 'name = "flange"', 'name = "flange"\non = "pumpe"',
         on='on = "pumpe"', where='point[1].on', found='pumpe',
         expected='the name of a body ("pump")', nearest='pump'),
    case('unknown to', 'parallel = 1', 'parallel = 1\nto = "flor"',
         on='to = "flor"', where='station[4].to', found='flor',
         expected='the name of what it stands on ("floor", "pump")', nearest='floor'),
    case('station to itself', 'parallel = 1', 'parallel = 1\nto = "pump"',
         on='to = "pump"', where='station[4].to', found='pump',
         expected='another body, or the floor'),
    case('body named floor', 'name = "pump"', 'name = "floor"',
         on='name = "floor"', where='body[1].name', found='floor',
         expected='a name other than "floor" and "ground"'),
    case('same station in a list', 'stations = ["A", "B"]', 'stations = ["A", "A"]',
         on='stations = ["A", "A"]', where='allowable[3].stations', found='["A", "A"]',
         expected='each name once'),
    case('added mass without ballast', BALLAST + '[objectives]\ntrade = ["cost", "separation"]', '[objectives]\ntrade = ["cost", "added-mass"]',
         on='trade = ["cost", "added-mass"]', where='objectives.trade', found='added-mass',
         expected='a [ballast] table, without which no mass is added'),
    case('shaft nobody follows', 'shafts = { rotor = ["1450 rpm", "1480 rpm"] }', 'shafts = { rotor = ["1450 rpm", "1480 rpm"], gear = ["10 Hz", "12 Hz"] }',
         on='shafts = { rotor = ["1450 rpm", "1480 rpm"],', where='condition[1].shafts.gear', found='gear',
         expected='a shaft that some forcing follows in this condition'),
    case('filter column', 'where = { family', 'where = { familie',
         on='where = { familie = ["rubber"], stiffness_z_', where='choice[1].where.familie', found='familie',
         expected='a column of the catalog', nearest='family'),
    case('filter window for text', 'family = ["rubber"]', 'family = { min = "3 mm" }',
         on='where = { family = { min = "3 mm" }, stiffne', where='choice[1].where.family', found='a window for family',
         expected='a list of admitted texts, for example ["rubber"]'),
    case('filter list for number', 'stiffness_z_static = { max = "400 N/mm" }', 'stiffness_z_static = ["400 N/mm"]',
         on='where = { family = ["rubber"], stiffness_z_s', where='choice[1].where.stiffness_z_static', found='["400 N/mm"]',
         expected='a window such as { min = "...", max = "..." } for'),
    case('filter bare number', 'stiffness_z_static = { max = "400 N/mm" }', 'stiffness_z_static = { max = 400 }',
         on='where = { family = ["rubber"], stiffness_z_s', where='choice[1].where.stiffness_z_static.max', found='400',
         expected='a stiffness with its unit, for example "4.2 N/mm"; a number'),
    case('filter unit', 'stiffness_z_static = { max = "400 N/mm" }', 'stiffness_z_static = { max = "400 N" }',
         on='where = { family = ["rubber"], stiffness_z_s', where='choice[1].where.stiffness_z_static.max', found='400 N',
         expected='a stiffness with its unit, for example "4.2 N/mm"; "N" is a force'),
    case('filter leaves none', 'max = "400 N/mm"', 'max = "4 N/mm"',
         on='where = { family = ["rubber"], stiffness_z_s', where='choice[1].where', found='no part left for group drive end',
         expected='a filter that some part passes; the first one left out, rowan-a:'),
    case('filter empty window', 'stiffness_z_static = { max = "400 N/mm" }', 'stiffness_z_static = {}',
         on='where = { family = ["rubber"], stiffness_z_s', where='choice[1].where.stiffness_z_static', found='{}',
         expected='a list in square brackets, or a window with "min", "max" or both'),
    case('unknown part', 'catalogs = ["rubber", "spring"]', 'catalogs = ["rubber", "spring"]\nparts = ["rowan-a", "larch-aa"]',
         on='parts = ["rowan-a", "larch-aa"]', where='choice[2].parts[2]', found='larch-aa',
         expected='a part of the chosen catalogs', nearest='larch-a'),
    case('list for text', 'name = "flange"', 'name = ["flange"]',
         on='name = ["flange"]', where='point[1].name', found='["flange"]',
         expected='text in quotes'),
    case('table for number', 'mass = "120 kg"', 'mass = { value = 120, unit = "kg" }',
         on='mass = { value = 120, unit = "kg" }', where='body[1].mass', found='{ value = 120, unit = "kg" }',
         expected='a mass with its unit, in quotes, for example "640 kg"'),
    case('date for number', 'mass = "120 kg"', 'mass = 2024-05-01',
         on='mass = 2024-05-01', where='body[1].mass', found='2024-05-01',
         expected='a mass with its unit, in quotes, for example "640 kg"'),
    case('boolean for length', 'position = ["0.2 m", "0 m", "0.6 m"]\n\n[[station]]', 'position = [true, "0 m", "0.6 m"]\n\n[[station]]',
         on='position = [true, "0 m", "0.6 m"]', where='point[1].position[1]', found='true',
         expected='a length with its unit, in quotes, for example "12 mm"'),
    case('two coordinates', 'position = ["0.2 m", "0 m", "0.6 m"]\n\n[[station]]', 'position = ["0.2 m", "0 m"]\n\n[[station]]',
         on='position = ["0.2 m", "0 m"]', where='point[1].position', found='["0.2 m", "0 m"]',
         expected='a list of 3 values'),
    case('one coordinate', 'position = ["0.2 m", "0 m", "0.6 m"]\n\n[[station]]', 'position = ["0.2 m"]\n\n[[station]]',
         on='position = ["0.2 m"]', where='point[1].position', found='["0.2 m"]',
         expected='a list of 3 values'),
    case('four coordinates', 'position = ["0.2 m", "0 m", "0.6 m"]\n\n[[station]]', 'position = ["0.2 m", "0 m", "0.6 m", "1 m"]\n\n[[station]]',
         on='position = ["0.2 m", "0 m", "0.6 m", "1 m"]', where='point[1].position', found='["0.2 m", "0 m", "0.6 m", "1 m"]',
         expected='a list of 3 values'),
    case('text for position', 'position = ["0.2 m", "0 m", "0.6 m"]\n\n[[station]]', 'position = "0.2 m, 0 m, 0.6 m"\n\n[[station]]',
         on='position = "0.2 m, 0 m, 0.6 m"', where='point[1].position', found='0.2 m, 0 m, 0.6 m',
         expected='a list in square brackets'),
    case('text for axial', 'axial = [0, 0, 1]', 'axial = "up"',
         on='axial = "up"', where='station[4].axial', found='up',
         expected='one of "x", "y", "z", or a list in square brackets'),
    case('axial zero', 'axial = [0, 0, 1]', 'axial = [0, 0, 0]',
         on='axial = [0, 0, 0]', where='station[4].axial', found='[0, 0, 0]',
         expected='a direction that is not the zero vector'),
    case('axial nan', 'axial = [0, 0, 1]', 'axial = [0, nan, 1]',
         on='axial = [0, nan, 1]', where='station[4].axial[2]', found='nan',
         expected='a finite number'),
    case('radial parallel', 'radial = "x"', 'radial = "z"',
         on='radial = "z"', where='station[4].radial', found='z',
         expected='a radial direction that is not parallel to the axial one'),
    case('half a part', 'parallel = 1', 'parallel = 1.5',
         on='parallel = 1.5', where='station[4].parallel', found='1.5',
         expected='a whole number of parts, 1 or more'),
    case('no part', 'parallel = 1', 'parallel = 0',
         on='parallel = 0', where='station[4].parallel', found='0',
         expected='a whole number of parts, 1 or more'),
    case('yes for steady', 'steady = false', 'steady = "no"',
         on='steady = "no"', where='condition[2].steady', found='no',
         expected='true or false'),
    case('infinite cost', 'cost_per_kg = 1.2', 'cost_per_kg = inf',
         on='cost_per_kg = inf', where='ballast.cost_per_kg', found='inf',
         expected='a finite number'),
    case('huge integer', 'cost_per_kg = 1.2', 'cost_per_kg = 1' + '0' * 400,
         on='cost_per_kg = 1000', where='ballast.cost_per_kg', found='a whole number of more than 300 digits',
         expected='a finite number'),
    case('boolean cost', 'cost_per_kg = 1.2', 'cost_per_kg = true',
         on='cost_per_kg = true', where='ballast.cost_per_kg', found='true',
         expected='a cost as a bare number, for example 1250'),
    case('empty name', 'name = "flange"', 'name = "  "',
         on='name = "  "', where='point[1].name', found='  ',
         expected='text that is not empty'),
    case('empty title', 'title = "Pump on four mounts"', 'title = ""',
         on='title = ""', where='title', found='',
         expected='text in quotes'),
    case('title a number', 'title = "Pump on four mounts"', 'title = 12',
         on='title = 12', where='title', found='12',
         expected='text in quotes'),
    case('floor twice as list', '[floor]', '[[floor]]',
         on='[[floor]]', where='floor', found='[{ kind = "frequency-and-mass", frequency = "9 Hz", effec...',
         expected='a table of keys and values'),
    case('body a single table', '[[body]]', '[body]',
         on='[body]', where='body', found='{ name = "pump", mass = "120 kg", centre = ["0 m", "0 m",...',
         expected='a list of tables, each opened by [[body]]'),
    case('stations as names', 'stations = ["A", "B"]', 'stations = "A"',
         on='stations = "A"', where='allowable[3].stations', found='A',
         expected='a list in square brackets'),
    case('shafts a list', 'shafts = { rotor = ["1450 rpm", "1480 rpm"] }', 'shafts = ["rotor"]',
         on='shafts = ["rotor"]', where='condition[1].shafts', found='["rotor"]',
         expected='a table'),
    case('header not text', 'file = "spring.csv"', 'file = "spring.csv"\nheaders = { part = 3 }',
         on='headers = { part = 3 }', where='catalog[2].headers.part', found='3',
         expected='text in quotes'),
    case('objectives text', 'trade = ["cost", "separation"]', 'trade = "cost"',
         on='trade = "cost"', where='objectives.trade', found='cost',
         expected='a list in square brackets'),
    case('window number', 'where = { family = ["rubber"], ', 'where = { family = "rubber", ',
         on='where = { family = "rubber", stiffness_z_sta', where='choice[1].where.family', found='rubber',
         expected='a list in square brackets, or a table of keys and values'),
    case('empty conditions', 'conditions = ["running"]\nat', 'conditions = []\nat',
         on='conditions = []', where='allowable[1].conditions', found='[]',
         expected='at least one name, or this key left out'),
    case('empty forcing conditions', 'conditions = ["running"]\nposition', 'conditions = []\nposition',
         on='conditions = []', where='forcing[3].conditions', found='[]',
         expected='at least one name, or this key left out'),
    case('empty stations', 'stations = ["A", "B"]', 'stations = []',
         on='stations = []', where='allowable[3].stations', found='[]',
         expected='at least one name, or this key left out'),
    case('empty catalogs', 'catalogs = ["rubber", "spring"]', 'catalogs = []',
         on='catalogs = []', where='choice[2].catalogs', found='[]',
         expected='at least one catalog'),
    case('empty steps', 'steps = ["0 kg", "20 kg"]', 'steps = []',
         on='steps = []', where='ballast.steps', found='[]',
         expected='at least one step, for example ["0 kg", "40 kg"]'),
    case('empty orders', 'orders = [{ order = 5, force = ["0 N", "0 N", "12 N"] }]', 'orders = []',
         on='orders = []', where='forcing[2].orders', found='[]',
         expected='at least one order'),
    case('empty order', 'force = ["0 N", "0 N", "12 N"] }', 'force = ["0 N", "0 N", "0 N"] }',
         on='orders = [{ order = 5, force = ["0 N", "0 N"', where='forcing[2].orders[1]', found='no force and no moment',
         expected='a "force" or a "moment" that is not zero'),
    case('negative order', 'order = 5', 'order = -5',
         on='orders = [{ order = -5, force = ["0 N", "0 N', where='forcing[2].orders[1].order', found='-5',
         expected='an order above zero'),
    case('order without number', 'order = 5, ', '',
         on='orders = [{ force = ["0 N", "0 N", "12 N"] }', where='forcing[2].orders[1].order', found='',
         expected='"order", which has no default'),
    case('no force', 'force = ["0 N", "0 N", "40 N"]\n', '',
         on='[[forcing]]', where='forcing[3]', found='no force and no moment',
         expected='a "force" or a "moment" that is not zero'),
    case('no thrust', 'force = ["80 N", "0 N", "0 N"]\n', '',
         on='[[steady_load]]', where='steady_load[1]', found='no force and no moment',
         expected='a "force" or a "moment" that is not zero'),
    case('half a grade', 'unbalance = "300 g mm"', 'grade = "G 6.3"\nrotor_mass = "20 kg"',
         on='[[forcing]]', where='forcing[1]', found='no complete unbalance',
         expected='"unbalance", or all of "grade", "rotor_mass" and "grade_speed"'),
    case('grade and unbalance', 'unbalance = "300 g mm"', 'unbalance = "300 g mm"\ngrade = "G 6.3"',
         on='[[forcing]]', where='forcing[1]', found='unbalance and grade',
         expected='either "unbalance", or "grade" with "rotor_mass" and "grade_speed"'),
    case('negative unbalance', 'unbalance = "300 g mm"', 'unbalance = "-300 g mm"',
         on='unbalance = "-300 g mm"', where='forcing[1].unbalance', found='-300 g mm',
         expected='an unbalance above zero'),
    case('static allowable with conditions', DEFLECTION, 'kind = "sag"\nat = "flange"\nlimit = "3 mm"\nconditions = ["running"]',
         on='conditions = ["running"]', where='allowable[3].conditions', found='["running"]',
         expected='no "conditions": a static limit holds at rest, whatever runs'),
    case('separation with conditions', 'kind = "separation"', 'kind = "separation"\nconditions = ["running"]',
         on='conditions = ["running"]', where='allowable[4].conditions', found='["running"]',
         expected='no "conditions": separation counts every steady condition'),
    case('separation in steady', 'name = "running"\n', 'name = "running"\nsteady = false\n',
         on='[[allowable]]', where='allowable[4]', found='separation',
         expected='at least one steady condition, since separation counts only those'),
    case('transmissibility above', DEFLECTION, 'kind = "transmissibility"\nof = "force"\ndirection = "z"\nfrom_frequency = "500 Hz"\nlimit = 0.1',
         on='from_frequency = "500 Hz"', where='allowable[3].from_frequency', found='500 Hz',
         expected='a frequency that the excitation reaches: its highest is 123.3 Hz,'),
    case('transmissibility force at', DEFLECTION, 'kind = "transmissibility"\nof = "force"\nat = "flange"\ndirection = "z"\nlimit = 0.1',
         on='at = "flange"', where='allowable[3].at', found='flange',
         expected='no "at": a force ratio is of the total force into the floor'),
    case('transmissibility motion no at', DEFLECTION, 'kind = "transmissibility"\nof = "motion"\ndirection = "z"\nlimit = 0.1',
         on='[[allowable]]', where='allowable[3]', found='no point',
         expected='the point whose motion is compared, as "at"'),
    case('combined lateral', 'part = "dynamic"', 'part = "combined"\ndirection = "lateral"',
         on='direction = "lateral"', where='allowable[3].direction', found='lateral',
         expected='the axial direction for "combined", which adds the static'),
    case('ground under base motion', HUM, 'kind = "base-motion"\nname = "mill next door"\nfrequency = "30 Hz"\ndirection = "z"\nvelocity = "1 mm/s"\n\n[[allowable]]\nkind = "transmitted-force"\nthrough = "ground"\ndirection = "z"\nmeasure = "peak"\nlimit = "80 N"',
         on='through = "ground"', where='allowable[1].through', found='ground',
         expected='the force through the "floor", or conditions without the base'),
    case('base motion twofold', HUM, 'kind = "base-motion"\nname = "mill next door"\nfrequency = "30 Hz"\ndirection = "z"\nvelocity = "1 mm/s"\nacceleration = "0.1 g"',
         on='[[forcing]]', where='forcing[3]', found='velocity and acceleration',
         expected='exactly one of "displacement", "velocity" and "acceleration"'),
    case('part numbers half', 'kind = "separation"\nlimit = "20 %"', 'kind = "part-numbers"\nlimit = 1.5',
         on='limit = 1.5', where='allowable[4].limit', found='1.5',
         expected='a whole number, 1 or more'),
    case('catalog missing', 'file = "spring.csv"', 'file = "springs.csv"',
         on='file = "springs.csv"', where='catalog[2].file', found='springs.csv',
         expected='there is no such file', nearest='spring.csv'),
    case('catalog path empty', 'file = "spring.csv"', 'file = ""',
         on='file = ""', where='catalog[2].file', found='',
         expected='the path of a parts list, for example "parts.csv"'),
    case('catalog path with nul', 'file = "spring.csv"', 'file = "spring\\u0000.csv"',
         on='file = "spring\\u0000.csv"', where='catalog[2].file', found='spring\\x00.csv',
         expected='the path of a parts list, for example "parts.csv"'),
    case('yes-no filter', 'where = { family = ["rubber"], ', 'where = { pulls = ["maybe"], ',
         on='where = { pulls = ["maybe"], stiffness_z_sta', where='choice[1].where.pulls', found='["maybe"]',
         expected='"yes", "no" or both'),
    case('text filter empty', 'where = { family = ["rubber"], ', 'where = { family = [], ',
         on='where = { family = [], stiffness_z_static =', where='choice[1].where.family', found='[]',
         expected='at least one text, or family left out'),
    case('text filter none', 'where = { family = ["rubber"], ', 'where = { family = ["ruber"], ',
         on='where = { family = ["ruber"], stiffness_z_st', where='choice[1].where', found='no part left for group drive end',
         expected='a filter that some part passes; the first one left out, rowan-a:'),
]
# fmt: on


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name)
def test_one_edit_gives_one_fault_in_its_place(case: Case, faults_of: Load) -> None:
    study = spoilt(case.old, case.new)
    (fault,) = faults_of(study)
    line = None if fault.line is None else study.splitlines()[fault.line - 1].strip()
    assert fault.where == case.where
    assert (line is None) if case.on is None else (line is not None and line.startswith(case.on))
    assert fault.found == case.found
    assert case.expected in fault.expected
    assert fault.nearest == case.nearest
    assert fault.file.endswith("study.toml")
    assert not [word for word in FOREIGN if word in str(fault)]


Several = tuple[str, str, str, list[tuple[str, str, str]]]


def several(name: str, old: str, new: str, faults: list[tuple[str, str, str]]) -> Several:
    return name, old, new, faults


# fmt: off
MISTAKES_SEEN_TWICE = [
    several('unknown group', 'group = "free end"\ncatalogs', 'group = "free-end"\ncatalogs', [
        ('station[3].group', 'free end', 'the name of a group with a [[choice]] ("drive end", "free-end")'),
        ('station[4].group', 'free end', 'the name of a group with a [[choice]] ("drive end", "free-end")'),
        ('choice[2].group', 'free-end', 'the name of a group of stations ("drive end", "free end")'),
    ]),
    several('same station twice', 'name = "B"', 'name = "A"', [
        ('station[2].name', 'A', 'a name no other station has'),
        ('allowable[3].stations[2]', 'B', 'the name of a station ("A", "C", "D")'),
    ]),
    several('choice twice', 'group = "free end"\ncatalogs', 'group = "drive end"\ncatalogs', [
        ('station[3].group', 'free end', 'the name of a group with a [[choice]] ("drive end")'),
        ('station[4].group', 'free end', 'the name of a group with a [[choice]] ("drive end")'),
        ('choice[2].group', 'drive end', 'one choice for each group'),
    ]),
    several('axial text numbers', 'axial = [0, 0, 1]', 'axial = ["0", "0", "1"]', [
        ('station[4].axial[1]', '0', 'a bare number'),
        ('station[4].axial[2]', '0', 'a bare number'),
        ('station[4].axial[3]', '1', 'a bare number'),
    ]),
    several('axial booleans', 'axial = [0, 0, 1]', 'axial = [false, false, true]', [
        ('station[4].axial[1]', 'false', 'a bare number'),
        ('station[4].axial[2]', 'false', 'a bare number'),
        ('station[4].axial[3]', 'true', 'a bare number'),
    ]),
    several('vertical only limit x', 'centre = ["0 m", "0 m", "0.3 m"]', 'centre = ["0 m", "0 m", "0.3 m"]\nfree = ["x", "y"]', [
        ('forcing[2]', 'vane passing', 'a forcing that can move the body, which is free in x, y only'),
        ('forcing[3]', 'mains hum', 'a forcing that can move the body, which is free in x, y only'),
        ('allowable[1].direction', 'z', 'a direction in which the point can move: its body is free in x, y'),
    ]),
]
# fmt: on


@pytest.mark.parametrize("mistake", MISTAKES_SEEN_TWICE, ids=lambda mistake: mistake[0])
def test_one_edit_that_shows_in_several_places(mistake: Several, faults_of: Load) -> None:
    _, old, new, wanted = mistake
    faults = faults_of(spoilt(old, new))
    assert [(fault.where, fault.found) for fault in faults] == [(where, found) for where, found, _ in wanted]
    for fault, (_, _, expected) in zip(faults, wanted, strict=True):
        assert expected in fault.expected


def test_all_faults_of_a_file_come_at_once_in_the_order_of_lines(faults_of: Load) -> None:
    study = spoilt('mass = "120 kg"', 'mass = "-120 kg"')
    for old, new in (
        ('frequency = "9 Hz"', "frequency = 9"),
        ('unbalance = "300 g mm"', 'unbalence = "300 g mm"'),
        ('at = "flange"', 'at = "flang"'),
        ('limit = "150 N"', 'limit = "150 kg"'),
        ('catalogs = ["rubber", "spring"]', 'catalogs = ["rubber", "springs"]'),
        ("cost_per_kg = 1.2", "cost_per_kg = -1.2"),
    ):
        study = study.replace(old, new, 1)
    faults = faults_of(study)
    # A fault of one table does not hide the names that a sound table gets wrong.
    assert [fault.where for fault in faults] == [
        "body[1].mass",
        "floor.frequency",
        "forcing[1].unbalence",
        "allowable[1].at",
        "allowable[2].limit",
        "choice[2].catalogs[2]",
        "ballast.cost_per_kg",
    ]
    assert [fault.line for fault in faults] == sorted(fault.line or 0 for fault in faults)


def test_a_faulty_table_does_not_make_names_look_wrong(faults_of: Load) -> None:
    """The point "flange" is stated, if badly; the allowable that names it is right."""
    faults = faults_of(spoilt('position = ["0.2 m", "0 m", "0.6 m"]', 'position = ["0.2", "0 m", "0.6 m"]'))
    assert [fault.where for fault in faults] == ["point[1].position[1]"]


def test_indices_count_in_the_file_where_faulty_tables_stand_between(faults_of: Load) -> None:
    study = spoilt('name = "B"\ngroup', 'name = "B"\nparalel = 2\ngroup').replace(
        'name = "D"\ngroup = "free end"', 'name = "D"\ngroup = "free-end"'
    )
    assert [fault.where for fault in faults_of(study)] == ["station[2].paralel", "station[4].group"]


def test_faults_of_study_and_catalogs_are_told_together(faults_of: Load) -> None:
    faults = faults_of(
        spoilt('mass = "120 kg"', 'mass = "120"'),
        rubber=RUBBER.replace(",160,", ",-160,"),
        spring=SPRING.replace(",900,18", ",900,cheap"),
    )
    assert [(Path(fault.file).name, fault.line, fault.where) for fault in faults] == [
        ("rubber.csv", 2, "stiffness_z_static [N/mm]"),
        ("spring.csv", 3, "cost"),
        ("study.toml", 5, "body[1].mass"),
    ]


def test_a_bare_number_is_enough_where_a_column_has_no_unit(tmp_path: Path) -> None:
    """Cost is a bare number everywhere, so a window of cost is one too."""
    (tmp_path / "study.toml").write_text(spoilt('family = ["rubber"]', "cost = { max = 19 }"))
    (tmp_path / "rubber.csv").write_text(RUBBER)
    (tmp_path / "spring.csv").write_text(SPRING)
    assert load_study(tmp_path / "study.toml").brief.choices[0].where["cost"].max == "19"  # type: ignore[union-attr]


def test_parts_without_lateral_stiffness_cannot_stand_under_a_machine_that_moves_sideways(
    faults_of: Load,
) -> None:
    bare = "\n".join(
        ",".join(cell for column, cell in enumerate(row.split(",")) if column not in (4, 5))
        for row in RUBBER.splitlines()
    )
    faults = faults_of(GOOD, rubber=bare)
    assert [fault.where for fault in faults] == ["choice[1]", "choice[2]"]
    assert faults[0].found == "no lateral stiffness for rowan-a, rowan-b"
    assert "upright stations and vertical motion alone" in faults[0].expected


def test_an_empty_file_names_every_table_a_study_needs(faults_of: Load) -> None:
    faults = faults_of("")
    assert [fault.where for fault in faults] == [
        "title", "body", "station", "floor", "condition", "forcing", "allowable", "catalog", "choice",
    ]  # fmt: skip
    assert all(fault.found == "" and "which every study states" in fault.expected for fault in faults)


def test_tables_without_entries_are_told(faults_of: Load) -> None:
    """`body = []` states a table without anything in it."""
    study = "body = []\n" + GOOD.replace(GOOD[GOOD.index("[[body]]") : GOOD.index("[[point]]")], "")
    (fault,) = faults_of(study)
    assert (fault.where, fault.line, fault.expected) == ("body", 1, "at least one [[body]]")


NONSENSE = ["7", "true", '""', "[[]]", "{}", "1979-05-27"]
MORE_NONSENSE = ["-0.5", "inf", "nan", '"12"', '"x y z"', "[]", "[1, 2, 3]", '["a", ["b"]]', "{ a = 1 }", "[{ a = [] }]",
                 "07:32:00", "1979-05-27T07:32:00Z", "9223372036854775807"]  # fmt: skip
# The first line of each key of each table; equal lines stand for each other.
KEYS = list(dict.fromkeys(line for line in GOOD.splitlines() if " = " in line))


@pytest.mark.parametrize(
    "value", [*NONSENSE, *(pytest.param(value, marks=pytest.mark.nightly) for value in MORE_NONSENSE)]
)
def test_no_nonsense_in_any_key_ends_in_a_traceback(value: str, tmp_path: Path) -> None:
    """Every key of the good study gets the value; it is either understood or refused, in our own words."""
    path = tmp_path / "study.toml"
    for line in KEYS:
        path.write_text(GOOD.replace(line, f"{line.split(' = ')[0]} = {value}", 1))
        try:
            faults = scan_brief(path).faults
        except BriefError as error:
            faults = error.faults
        for fault in faults:
            assert fault.expected and "\n" not in str(fault)
            assert not [word for word in FOREIGN if word in str(fault)], str(fault)
