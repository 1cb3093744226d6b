"""Bad random, shock, line and record forcing, and limits that do not go with it: refused in place, with the reason.

Each case is a small study with one fault; the words a practitioner needs are written down by hand.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from pathlib import Path

import pytest

from brief.scale_study import LIMIT, TONE, scale
from detune.brief.read import scan_brief

NOISE = """kind = "random-base-motion"
name = "floor"
direction = "z"
duration = "60 s"
"""
FLAT = 'break_points = [["5 Hz", "0.01 g^2/Hz"], ["50 Hz", "0.01 g^2/Hz"]]\n'
FILE = 'file = "table.csv"\n'
PSD = "frequency [Hz],acceleration_psd [g^2/Hz]\n"
PULSE = """kind = "base-pulse"
name = "shock"
direction = "z"
shape = "half-sine"
amplitude = "15 g"
duration = "11 ms"
"""
RECORD = """kind = "measured-record"
name = "floor"
direction = "z"
file = "table.csv"
use = "time"
detrend = "mean"
"""
TIME = "time [s],acceleration [m/s^2]\n"
LINES = """kind = "line-spectrum"
name = "site"
direction = "z"
measure = "rms"
"""
BANDS = """kind = "band-base-motion"
name = "site"
direction = "z"
"""
MASK = """kind = "band-limit"
at = "pan"
direction = "z"
"""
ROTOR = """kind = "KIND"
name = "rotor"
shaft = "rotor"
axis = "x"
"""


@dataclass(frozen=True)
class Case:
    """A forcing and an allowable, the table they name, and the one fault: its key, and a part of what is expected."""

    name: str
    where: str
    expected: str
    forcing: str = TONE
    allowable: str = LIMIT
    table: str | bytes = ""
    found: str | None = field(default=None)


CASES = [
    Case("negative density", "forcing[1].break_points", "row 2 has a negative density",
         NOISE + FLAT.replace('"0.01 g^2/Hz"]]', '"-0.01 g^2/Hz"]]')),
    Case("density that falls back", "forcing[1].break_points", "a lower frequency than the row before it",
         NOISE + 'break_points = [["50 Hz", "0.01 g^2/Hz"], ["5 Hz", "0.01 g^2/Hz"]]\n'),
    Case("one break point", "forcing[1].break_points", "two or more break points",
         NOISE + 'break_points = [["50 Hz", "0.01 g^2/Hz"]]\n'),
    Case("density from zero", "forcing[1].break_points", "no straight line on log-log paper",
         NOISE + 'break_points = [["5 Hz", "0 g^2/Hz"], ["50 Hz", "0.01 g^2/Hz"]]\n'),
    Case("acceleration for a density", "forcing[1].break_points[1][2]", "an acceleration spectral density",
         NOISE + FLAT.replace("0.01 g^2/Hz", "0.01 g", 1), found="0.01 g"),
    Case("no spectrum", "forcing[1]", 'exactly one of "break_points"', NOISE),
    Case("two spectra", "forcing[1]", 'exactly one of "break_points"', NOISE + FLAT + FILE),
    Case("slopes that do not fit", "forcing[1].slopes", "one slope between each two of the 2 corners",
         NOISE + 'corners = ["5 Hz", "50 Hz"]\nslopes = ["3 dB/oct", "3 dB/oct"]\nlevel = ["5 Hz", "0.01 g^2/Hz"]\n'),
    Case("level beside the corners", "forcing[1].level", "not at one of the break points",
         NOISE + 'corners = ["5 Hz", "50 Hz"]\nslopes = ["3 dB/oct"]\nlevel = ["6 Hz", "0.01 g^2/Hz"]\n'),
    Case("no duration", "forcing[1].duration", "a duration above zero",
         NOISE.replace("60 s", "0 s") + FLAT),
    Case("no such file", "forcing[1].file", "no such file", NOISE + 'file = "none.csv"\n', found="none.csv"),
    Case("negative density in a file", "forcing[1].file",
         'a density of zero or more, but line 4 of table.csv has acceleration_psd "-0.01"',
         NOISE + FILE, table="# site A\n" + PSD + "5,0.01\n50,-0.01\n"),
    Case("no number in a file", "forcing[1].file", 'line 3 of table.csv has acceleration_psd "nan"',
         NOISE + FILE, table=PSD + "5,0.01\n50,nan\n"),
    Case("falling frequency in a file", "forcing[1].file", 'line 3 of table.csv has frequency "5"',
         NOISE + FILE, table=PSD + "50,0.01\n5,0.01\n"),
    Case("misspelt header", "forcing[1].file", 'line 1 of table.csv has "freqency [Hz]"; did you mean "frequency"?',
         NOISE + FILE, table=PSD.replace("frequency", "freqency") + "5,0.01\n50,0.01\n"),
    Case("wrong unit in a header", "forcing[1].file", 'line 1 of table.csv has "acceleration_psd [m/s^2]"',
         NOISE + FILE, table=PSD.replace("g^2/Hz", "m/s^2") + "5,0.01\n50,0.01\n"),
    Case("missing cell", "forcing[1].file", "line 3 of table.csv has 1", NOISE + FILE, table=PSD + "5,0.01\n50\n"),
    Case("no rows", "forcing[1].file", "table.csv has none", NOISE + FILE, table=PSD),
    Case("decimal comma", "forcing[1].file", 'line 2 of table.csv has acceleration_psd "0,01"',
         NOISE + FILE, table=PSD.replace(",", ";") + "5;0,01\n50;0,01\n"),
    Case("another encoding", "forcing[1].file", "in another encoding",
         NOISE + FILE, table=b"frequency [Hz],acceleration_psd [g\xb2/Hz]\n5,1\n6,1\n"),
    Case("floor motion nothing follows", "forcing[1].direction", "the bodies are free in z",
         NOISE.replace('"z"', '"x"') + FLAT, found="x"),
    Case("floor motion nothing follows in part", "forcing[1].direction", "the bodies are free in z",
         NOISE.replace('"z"', "[1.0, 0.0, 1.0]") + FLAT),
    Case("pulse of no known shape", "forcing[1].shape", '"half-sine", "versed-sine"',
         PULSE.replace("half-sine", "halfsine"), found="halfsine"),
    Case("sides of a half-sine", "forcing[1].rise", "only a trapezoid has sides to choose", PULSE + "rise = 0.2\n"),
    Case("sides that cross", "forcing[1].rise", "together at most 1",
         PULSE.replace("half-sine", "trapezoid") + "rise = 0.7\nfall = 0.5\n"),
    Case("rms of a shock", "allowable[1]", 'measure = "peak" under a shock', PULSE, LIMIT.replace("peak", "rms")),
    Case("place of a moving floor", "allowable[1]", 'kind = "relative-motion" with to = "floor"',
         PULSE, LIMIT.replace("acceleration", "displacement").replace("m/s^2", "mm")),
    Case("weighted shock", "allowable[1]", "tones and noise alone under a frequency-weighted limit", PULSE,
         'kind = "weighted-acceleration"\nat = "pan"\ndirection = "z"\nweighting = "Wk"\nlimit = "0.1 m/s^2"\n'),
    Case("separation from nothing", "allowable[2]", "a tone in some steady condition", PULSE,
         LIMIT + '[[allowable]]\nkind = "separation"\nlimit = "20 %"\n'),
    Case("ratio at no frequency", "allowable[2]", "a condition in which a tone acts", PULSE,
         LIMIT + '[[allowable]]\nkind = "transmissibility"\nof = "force"\ndirection = "z"\nlimit = "20 %"\n'),
    Case("band limit of a shock", "allowable[1]", "tones and noise alone under a band limit",
         PULSE, MASK + 'criterion = "VC-A"\n'),
    Case("band limit of nothing", "allowable[1]", "an excitation within the bands of the curve",
         TONE.replace("25 Hz", "200 Hz"), MASK + 'criterion = "VC-A"\n'),
    Case("no such criterion", "allowable[1].criterion", '"VC-G"', TONE, MASK + 'criterion = "VC-H"\n', found="VC-H"),
    Case("mask that crosses", "allowable[1].centres", "centre frequencies that rise, each band once",
         TONE, MASK + 'centres = ["25 Hz", "20 Hz"]\nvelocity_rms = ["1 mm/s", "1 mm/s"]\n'),
    Case("mask beside the bands", "allowable[1].centres", "36 Hz is no one-third-octave centre frequency",
         TONE, MASK + 'centres = ["25 Hz", "36 Hz"]\nvelocity_rms = ["1 mm/s", "1 mm/s"]\n'),
    Case("mask of zero", "allowable[1].velocity_rms", "limits above zero in every band",
         TONE, MASK + 'centres = ["25 Hz"]\nvelocity_rms = ["0 mm/s"]\n'),
    Case("mask where nothing moves", "allowable[1].direction", "its body is free in z only",
         TONE, MASK.replace('"z"', '"x"') + 'criterion = "VC-A"\n', found="x"),
    Case("velocity of a rigid floor", "allowable[1]", "a floor that is not rigid",
         TONE, 'kind = "floor-velocity"\nmeasure = "rms"\nlimit = "1 mm/s"\n'),
    Case("base curve without multiplier", "allowable[1]", '"multiplier" of the base curve',
         TONE, MASK + 'criterion = "ISO 2631-2 base curve"\n'),
    Case("record with a gap", "forcing[1].file", 'without a gap, but line 5 of table.csv has time "0.5"',
         RECORD, table=TIME + "0,1\n0.1,2\n0.2,1\n0.5,2\n0.6,1\n"),
    Case("record with a hole", "forcing[1].file", 'line 3 of table.csv has acceleration ""',
         RECORD, table=TIME + "0,1\n0.1,\n0.2,1\n"),
    Case("record that runs back", "forcing[1].file", 'line 4 of table.csv has time "0.05"',
         RECORD, table=TIME + "0,1\n0.1,1\n0.05,1\n"),
    Case("record shorter than its segments", "forcing[1].file", "segments of 5 s do not fit a record of 0.3 s",
         RECORD.replace('"time"', '"spectrum"') + 'segment = "5 s"\nduration = "60 s"\n',
         table=TIME + "0,1\n0.1,2\n0.2,1\n"),
    Case("density without segments", "forcing[1]", 'also "segment"', RECORD.replace('"time"', '"spectrum"'),
         table=TIME + "0,1\n0.1,2\n0.2,1\n"),
    Case("segments in time", "forcing[1].segment", 'no "segment" where use = "time"', RECORD + 'segment = "5 s"\n',
         table=TIME + "0,1\n0.1,2\n0.2,1\n"),
    Case("force that acts nowhere", "forcing[1]", 'the "position" where the force acts', RECORD,
         table="time [s],force [N]\n0,1\n0.1,2\n0.2,1\n"),
    Case("record at rest", "forcing[1].file", "the record holds no motion", RECORD.replace('"time"', '"lines"'),
         table=TIME + "0,1\n0.1,1\n0.2,1\n"),
    Case("line of two quantities", "forcing[1].lines[1]", 'exactly one of "displacement"',
         LINES + 'lines = [{ frequency = "12 Hz", velocity = "1 mm/s", force = "1 N" }]\n'),
    Case("lines of force and motion", "forcing[1].lines", "floor motion alone, or of force alone",
         LINES + 'position = ["0 m", "0 m", "0 m"]\nlines = [{ frequency = "12 Hz", velocity = "1 mm/s" },'
         ' { frequency = "13 Hz", force = "1 N" }]\n'),
    Case("line at zero", "forcing[1].lines[1].frequency", "a frequency above zero",
         LINES + 'lines = [{ frequency = "0 Hz", velocity = "1 mm/s" }]\n'),
    Case("lines of nothing", "forcing[1].file", "at least one line with an amplitude that is not zero",
         LINES + FILE, table="frequency [Hz],velocity [mm/s]\n12,0\n"),
    Case("place of a floor motion", "forcing[1].position", "the floor moves under every station",
         LINES + 'position = ["0 m", "0 m", "0 m"]\nlines = [{ frequency = "12 Hz", velocity = "1 mm/s" }]\n'),
    Case("bands that cross", "forcing[1].centres", "must rise, each band once",
         BANDS + 'centres = ["16 Hz", "12.5 Hz"]\nvelocity_rms = ["1 mm/s", "1 mm/s"]\n'),
    Case("bands as noise without end", "forcing[1]", 'a "duration", for the expected extreme',
         BANDS + 'read_as = "noise"\ncentres = ["12.5 Hz", "16 Hz"]\nvelocity_rms = ["1 mm/s", "1 mm/s"]\n'),
    Case("negative band", "forcing[1].velocity_rms", "rms velocities of zero or more",
         BANDS + 'centres = ["12.5 Hz", "16 Hz"]\nvelocity_rms = ["1 mm/s", "-1 mm/s"]\n'),
    Case("band without a value", "forcing[1].velocity_rms", "one velocity for each centre",
         BANDS + 'centres = ["12.5 Hz", "16 Hz"]\nvelocity_rms = ["1 mm/s"]\n'),
    Case("mean torque", "forcing[1].mean_torque", 'the "moment" of a [[steady_load]]',
         ROTOR.replace("KIND", "torque-reaction")
         + 'mean_torque = "50 N m"\norders = [{ order = 2, torque = "5 N m" }]\n'),
    Case("planes in one plane", "forcing[1].positions", "two positions apart along the axis",
         ROTOR.replace("KIND", "two-plane-unbalance")
         + 'positions = [["0 m", "0 m", "0 m"], ["0 m", "1 m", "0 m"]]\nunbalance = ["5 g mm", "6 g mm"]\n'),
    Case("random force of nothing", "forcing[1]", 'a "direction" of the force, or a "couple_arm"',
         'kind = "random-force"\nname = "jet"\nposition = ["0 m", "0 m", "0 m"]\nduration = "60 s"\n'
         'break_points = [["5 Hz", "1 N^2/Hz"], ["50 Hz", "1 N^2/Hz"]]\n'),
    Case("random force aside", "forcing[1]", "a forcing that can move the body, which is free in z only",
         'kind = "random-force"\nname = "jet"\nposition = ["0 m", "0 m", "0 m"]\ndirection = "x"\nduration = "60 s"\n'
         'break_points = [["5 Hz", "1 N^2/Hz"], ["50 Hz", "1 N^2/Hz"]]\n'),
    Case("pulse aside", "forcing[1]", "a forcing that can move the body, which is free in z only",
         'kind = "force-pulse"\nname = "hit"\nposition = ["0 m", "0 m", "0 m"]\nforce = ["1 N", "0 N", "0 N"]\n'
         'duration = "60 ms"\nshape = "rectangle"\n'),
    Case("drop upwards", "forcing[1].height", "a height above zero",
         'kind = "drop"\nname = "fall"\nheight = "-1 m"\n'),
    Case("gap from where", "allowable[1].clearance_of", '"clearance_of", which has no default',
         TONE, 'kind = "gap"\nat = "pan"\ndirection = "z"\nclearance = "5 mm"\n'),
    Case("settling upwards", "allowable[2].to", "a share of the amplitude above 0 and below 1",
         TONE, LIMIT + '[[allowable]]\nkind = "settling-time"\nto = 2\nlimit = "1 s"\n'),
    Case("motion against itself", "allowable[1].to", "another point, or the floor", TONE,
         'kind = "relative-motion"\nat = "pan"\nto = "pan"\ndirection = "z"\nmeasure = "peak"\nlimit = "1 mm"\n'),
]  # fmt: skip


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name)
def test_one_fault_in_its_place(case: Case, tmp_path: Path) -> None:
    study = scale(case.forcing, case.allowable)
    (tmp_path / "study.toml").write_text(study, encoding="utf-8")
    table = case.table if isinstance(case.table, bytes) else case.table.encode()
    (tmp_path / "table.csv").write_bytes(table)
    (fault,) = scan_brief(tmp_path / "study.toml").faults
    assert fault.where == case.where
    assert case.expected in fault.expected
    assert case.found is None or fault.found == case.found
    line = study.splitlines()[(fault.line or 0) - 1].strip()
    key = case.where.rpartition(".")[2].partition("[")[0]
    assert line.startswith((key, "[[forcing]]", "[[allowable]]", "lines"))
    assert "Input should" not in str(fault)
    assert "\n" not in str(fault)


GOOD = {
    "density": (NOISE + FILE, PSD + "5,0.01\n50,0.01\n"),
    "step": (NOISE + FILE, PSD + "5,0.01\n50,0.01\n50,0.001\n90,0.001\n"),
    "velocity density": (
        NOISE + FILE,
        "# survey\nfrequency [Hz]\tvelocity_psd [(mm/s)^2/Hz]\n5\t0.01\n\n50\t0.01\n",
    ),
    "record": (RECORD, TIME + "0,1\n0.1,2\n0.2,1\n0.3,2\n"),
    "bands": (BANDS + FILE, "frequency [Hz];velocity_rms [um/s]\n8;12\n10;14\n"),
    "lines": (LINES + FILE, "frequency [rpm],acceleration [mg],phase [deg]\n1480,12,0\n2960,14,90\n"),
    "pulse": (PULSE, ""),
}


@pytest.mark.parametrize("name", GOOD)
def test_sound_tables_are_read(name: str, tmp_path: Path) -> None:
    forcing, table = GOOD[name]
    (tmp_path / "table.csv").write_text("\ufeff" + table, encoding="utf-8")
    study = scale(forcing)
    (tmp_path / "study.toml").write_text(study, encoding="utf-8")
    reading = scan_brief(tmp_path / "study.toml")
    assert reading.faults == ()
    assert reading.brief is not None
    (stated,) = reading.brief.forcing
    assert stated.data_files() == (() if name == "pulse" else ("table.csv",))


def test_a_table_is_read_in_its_own_units(tmp_path: Path) -> None:
    # g in an acceleration density is gravity: 0.01 g^2/Hz = 0.9617 (m/s^2)^2/Hz (9.80665^2).
    (tmp_path / "table.csv").write_text(PSD + "5,0.01\n50,0.02\n", encoding="utf-8")
    study = scale(NOISE + FILE)
    (tmp_path / "study.toml").write_text(study, encoding="utf-8")
    brief = scan_brief(tmp_path / "study.toml").brief
    assert brief is not None
    (noise,) = brief.forcing[0].noises()
    assert noise.spectrum.frequency.tolist() == [5.0, 50.0]
    assert noise.spectrum.density == pytest.approx([0.01 * 9.80665**2, 0.02 * 9.80665**2], rel=1e-12)
