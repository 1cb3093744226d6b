"""Lines, records, torque and two-plane unbalance from a study statement to the assessed and the batch value.

Time domain against frequency domain as well: a long record against its density, a tone against its steady state.
"""

from __future__ import annotations

import math
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.mount_deflection import MountDeflection
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.allowable.velocity import Velocity
from detune.brief.condition import Condition
from detune.brief.forcing.line_spectrum import LineSpectrum
from detune.brief.forcing.measured_record import MeasuredRecord
from detune.brief.forcing.random_base_motion import RandomBaseMotion
from detune.brief.forcing.torque_reaction import TorqueReaction
from detune.brief.forcing.two_plane_unbalance import TwoPlaneUnbalance
from detune.brief.machine import Body
from detune.parts.kinds.mount import Mount
from response import machines

TWO_PI = 2.0 * math.pi
MASS = 20.0


both = partial(machines.both, rel=1e-4)


def tuned(frequency: float, ratio: float = 0.05) -> Mount:
    k = MASS * (TWO_PI * frequency) ** 2
    return machines.mount(k=k, c=2.0 * ratio * math.sqrt(k * MASS))


def transmissibility(r: float, z: float) -> float:
    """Rao 5e sec. 3.6: sqrt((1 + (2 z r)^2)/((1 - r^2)^2 + (2 z r)^2))."""
    return math.sqrt((1 + (2 * z * r) ** 2) / ((1 - r * r) ** 2 + (2 * z * r) ** 2))


def written(folder: Path, header: str, columns: Any, name: str = "record.csv") -> str:
    rows = "\n".join(",".join(f"{value:.12g}" for value in row) for row in np.transpose(columns))
    (folder / name).write_text(f"# invented\n{header}\n{rows}\n", encoding="utf-8")
    return name


def record(folder: Path, use: str, **changes: Any) -> MeasuredRecord:
    stated = {
        "name": "floor",
        "direction": "z",
        "file": "record.csv",
        "use": use,
        "detrend": "none",
        "kind": "measured-record",
    }
    return MeasuredRecord.model_validate({**stated, **changes}, context={"folder": folder})


ACCELERATION = Acceleration(at="P", direction="z", measure="peak", limit=1e6)
RMS = Acceleration(at="P", direction="z", measure="rms", limit=1e6)


def test_lines_come_through_at_their_own_frequencies(tmp_path: Path) -> None:
    # Each line by its own transmissibility; peaks add linearly, rms values as squares.
    part, z = tuned(20.0, 0.1), 0.1
    lines = [(12.0, 0.3), (20.0, 0.5), (45.0, 1.0)]
    stated = [{"frequency": f, "acceleration": a} for f, a in lines]
    brief = machines.one_axis(MASS, LineSpectrum(name="site", direction="z", measure="peak", lines=stated))
    each = [a * transmissibility(f / 20.0, z) for f, a in lines]
    assert both(brief, part, ACCELERATION) == pytest.approx(sum(each), rel=1e-9)
    assert both(brief, part, RMS) == pytest.approx(math.sqrt(sum(a * a for a in each) / 2.0), rel=1e-9)
    # The same from a file, in other units and as rms values.
    columns = np.array([(f, 1e3 * a / (TWO_PI * f) / math.sqrt(2.0)) for f, a in lines]).T
    name = written(tmp_path, "frequency [Hz],velocity [mm/s]", columns, "lines.csv")
    stated_file = {"kind": "line-spectrum", "name": "site", "direction": "z", "measure": "rms", "file": name}
    other = LineSpectrum.model_validate(stated_file, context={"folder": tmp_path})
    assert both(machines.one_axis(MASS, other), part, ACCELERATION) == pytest.approx(sum(each), rel=1e-9)


def test_lines_of_force_on_a_body() -> None:
    stated = [{"frequency": "40 Hz", "force": "12 N"}]
    force = LineSpectrum(name="pump", direction="z", measure="peak", lines=stated, position=(0, 0, 0))
    limit = TransmittedForce(through="floor", direction="z", measure="peak", limit=1e9)
    found = both(machines.one_axis(MASS, force), tuned(20.0, 0.1), limit)
    assert found == pytest.approx(12.0 * transmissibility(2.0, 0.1), rel=1e-9)


def test_one_frequency_unknown_phase_adds_linearly_in_rms_too() -> None:
    # The worst phase between two tones of one frequency is in phase, in rms as in peak; known phases are phasors.
    part = tuned(20.0, 0.1)
    first, second = machines.force(30.0, 3.0), machines.force(30.0, 4.0, name="second")
    alone = both(machines.one_axis(MASS, first), part, RMS) / 3.0
    assert both(machines.one_axis(MASS, (first, second)), part, RMS) == pytest.approx(7.0 * alone, rel=1e-9)
    square = (
        machines.force(30.0, 3.0, phase=0.0),
        machines.force(30.0, 4.0, name="second", phase=math.pi / 2),
    )
    assert both(machines.one_axis(MASS, square), part, RMS) == pytest.approx(5.0 * alone, rel=1e-9)


def test_a_recorded_tone_reaches_its_steady_state(tmp_path: Path) -> None:
    # 8 s of 15 Hz at 1 kHz on a mount of 20 Hz: after the start has died away the motion is the harmonic one.
    time = np.arange(8001) / 1000.0
    written(tmp_path, "time [s],acceleration [m/s^2]", [time, 2.0 * np.sin(TWO_PI * 15.0 * time)])
    part, z = tuned(20.0, 0.05), 0.05
    brief = machines.one_axis(MASS, record(tmp_path, "time"))
    expected = 2.0 * transmissibility(0.75, z) / math.sqrt(2.0)
    assert both(brief, part, RMS) == pytest.approx(expected, rel=0.01)
    lines = machines.one_axis(MASS, record(tmp_path, "lines", detrend="mean"))
    assert both(lines, part, RMS) == pytest.approx(expected, rel=1e-3)


def test_a_record_of_a_pulse_is_the_pulse(tmp_path: Path) -> None:
    # K2: half-sine at fn T = 1: 1.732051 (closed form); straight lines between 400 samples err by 5e-6.
    time = np.linspace(0.0, 0.05, 401)
    written(tmp_path, "time [s];acceleration [g]".replace(";", ","), [time, np.sin(np.pi * time / 0.05)])
    polygon = record(tmp_path, "time", between="straight")
    found = both(machines.one_axis(MASS, polygon), tuned(20.0, 0.0), ACCELERATION)
    assert found / 9.80665 == pytest.approx(1.732051, rel=3e-5)


def test_a_recorded_force(tmp_path: Path) -> None:
    time = np.linspace(0.0, 0.05, 401)
    written(tmp_path, "time [s],force [N]", [time, MASS * np.sin(np.pi * time / 0.05)])
    force = record(tmp_path, "time", position=(0.0, 0.0, 0.0), between="straight")
    found = both(machines.one_axis(MASS, force), tuned(20.0, 0.0), MountDeflection(part="dynamic", limit=1.0))
    assert found == pytest.approx(1.732051 / (TWO_PI * 20.0) ** 2, rel=1e-4)


def test_detrend_and_resample(tmp_path: Path) -> None:
    # A steady tilt of the sensor and its drift fall away; a tone far below half the new rate stays.
    time = np.arange(4000) / 1000.0
    tone = np.sqrt(2.0) * np.sin(TWO_PI * 5.0 * time)
    written(tmp_path, "time [s],acceleration [m/s^2]", [time, 9.8 + 0.3 * time + tone])
    stiff = machines.mount(k=MASS * (TWO_PI * 150.0) ** 2, loss=0.3)
    for changes in ({"detrend": "line"}, {"detrend": "line", "resample": "50 Hz"}):
        brief = machines.one_axis(MASS, record(tmp_path, "time", **changes))
        assert both(brief, stiff, RMS) == pytest.approx(1.0, rel=5e-3)


def test_few_samples_a_cycle_are_filled_in(tmp_path: Path) -> None:
    # At five samples a cycle straight lines keep (sin x/x)^2 = 0.875 of a tone, x = pi/5; a band-limited signal all.
    time = np.arange(300) / 100.0
    written(tmp_path, "time [s],acceleration [m/s^2]", [time, np.sqrt(2.0) * np.sin(TWO_PI * 20.0 * time)])
    stiff = machines.mount(k=MASS * (TWO_PI * 400.0) ** 2, loss=0.3)
    # The mean square of the polygon itself: (2 + cos 2x)/3.
    polygon = machines.one_axis(MASS, record(tmp_path, "time", between="straight"))
    assert both(polygon, stiff, RMS, rel=1e-3) == pytest.approx(
        math.sqrt((2.0 + math.cos(0.4 * math.pi)) / 3.0), rel=5e-3
    )
    filled = machines.one_axis(MASS, record(tmp_path, "time"))
    assert both(filled, stiff, RMS, rel=1e-3) == pytest.approx(1.0, rel=6e-3)


def gaussian_record(folder: Path, duration: float, rate: float, points: Any, seed: int) -> None:
    """A stationary record of a density by the sum of random-phase lines, as exactly periodic in the duration."""
    random = np.random.default_rng(seed)
    count = int(duration * rate)
    frequency = np.fft.rfftfreq(count, 1.0 / rate)
    low, high = points[0][0], points[-1][0]
    density = np.zeros_like(frequency)
    inside = (frequency >= low) & (frequency <= high)
    density[inside] = np.exp(
        np.interp(np.log(frequency[inside]), np.log([f for f, _ in points]), np.log([s for _, s in points]))
    )
    spectrum = np.sqrt(density / (2.0 * duration)) * np.exp(2j * np.pi * random.random(len(frequency)))
    values = np.fft.irfft(spectrum * count, count)
    written(folder, "time [s],acceleration [m/s^2]", [np.arange(count) / rate, values])


POINTS = ((4.0, 0.02), (12.0, 0.08), (60.0, 0.08), (100.0, 0.01))


def test_a_long_record_against_its_density(tmp_path: Path) -> None:
    # As below, on one axis: a mode of 20 Hz and 10 % has a noise bandwidth of 6 Hz, so 60 s scatter by 3 %.
    gaussian_record(tmp_path, 60.0, 250.0, POINTS, 3)
    spectral = RandomBaseMotion(name="floor", direction="z", duration=60.0, break_points=POINTS)
    found = [
        both(machines.one_axis(MASS, forcing), tuned(20.0, 0.1), RMS, rel=1e-3)
        for forcing in (spectral, record(tmp_path, "time"))
    ]
    assert found[1] == pytest.approx(found[0], rel=0.06)


@pytest.mark.nightly
@pytest.mark.parametrize("seed", range(2))
def test_six_axes_long_record_against_its_density(tmp_path: Path, seed: int) -> None:
    # A stationary record simulated for 60 s has the rms of the spectral calculation but for its start and the
    # scatter of a finite time: 1/sqrt(2 B T) with bandwidths of some hertz, about 4 %.
    brief, mounts = machines.random_machine(seed, viscous=True)
    gaussian_record(tmp_path, 60.0, 250.0, POINTS, seed)
    direction = (0.3, -0.5, 0.8)
    running = (Condition(name="running"),)
    limits = (
        Acceleration(at="P", direction="x", measure="rms", limit=1e6),
        Velocity(at="P", direction="resultant", measure="rms", limit=1e6),
        TransmittedForce(through="floor", direction="z", measure="rms", limit=1e9),
    )
    spectral = RandomBaseMotion(name="floor", direction=direction, duration=60.0, break_points=POINTS)
    simulated = record(tmp_path, "time", direction=direction)
    values = []
    for forcing in (spectral, simulated):
        each = brief.model_copy(update={"forcing": (forcing,), "conditions": running, "allowables": limits})
        machines.assert_batch_equals_assessor(each, mounts)
        rows = machines.assessed(each, *mounts).margins
        values.append([row.value for row in rows if row.kind in {a.kind for a in limits}])
    assert values[1] == pytest.approx(values[0], rel=0.08)
    # Through Welch's method the way back is the same within the window's resolution.
    welch = record(tmp_path, "spectrum", direction=direction, segment="4 s", duration="60 s")
    each = brief.model_copy(update={"forcing": (welch,), "conditions": running, "allowables": limits})
    rows = machines.assessed(each, *mounts).margins
    found = [row.value for row in rows if row.kind in {a.kind for a in limits}]
    assert found == pytest.approx(values[0], rel=0.08)


def test_torque_reaction_turns_the_machine_about_its_axis() -> None:
    # A couple M about x on an inertia I that no spring holds against roll but one at each side, k b^2/2 together:
    # the angle is M/(K - I w^2).
    couple = TorqueReaction(name="motor", shaft="rotor", axis="x", orders=[{"order": 2.0, "torque": "5 N m"}])
    stations = tuple(
        machines.Station(name=name, group="G", position=(0.0, y, 0.0))
        for name, y in (("L", -0.5), ("R", 0.5))
    )
    inertia = machines.InertiaTensor(xx=4.0, yy=5.0, zz=6.0)
    brief = machines.brief_of(
        bodies=(Body(name="machine", free=("z", "rx"), mass=MASS, centre=(0, 0, 0), inertia=inertia),),
        points=(machines.Point(name="P", position=(0.0, 1.0, 0.0)),),
        stations=stations,
        conditions=(Condition(name="running", shafts={"rotor": (10.0, 10.0)}),),
        forcing=(couple,),
    )
    k = 1e5
    limit = Displacement(at="P", direction="z", measure="peak", limit=1.0)
    expected = 5.0 / abs(2 * k * 0.25 - 4.0 * (TWO_PI * 20.0) ** 2)
    assert both(brief, machines.mount(k=k, lateral=1e3), limit) == pytest.approx(expected, rel=1e-9)


def test_two_planes_at_their_worst_phase() -> None:
    # U1 + U2 in phase shake the mass, opposed they rock it; each limit sees the worse of both, at its own place:
    # above both modes (a free body) the point above plane 1 moves by U1/m + U1 a^2/I + |U2/m - U2 a^2/I|.
    a, u1, u2, inertia = 0.4, 3e-3, 2e-3, 1.5
    planes = ((-a, 0.0, 0.0), (a, 0.0, 0.0))
    rotor = TwoPlaneUnbalance(name="rotor", shaft="rotor", axis="x", positions=planes, unbalance=(u1, u2))
    brief = machines.brief_of(
        bodies=(
            Body(
                name="machine", free=("z", "ry"), mass=MASS, centre=(0, 0, 0),
                inertia=machines.InertiaTensor(xx=inertia, yy=inertia, zz=inertia),
            ),
        ),
        points=(machines.Point(name="P", position=(-a, 0.0, 0.0)),),
        stations=tuple(
            machines.Station(name=name, group="G", position=(x, 0.0, 0.0)) for name, x in (("L", -0.5), ("R", 0.5))
        ),
        conditions=(Condition(name="running", shafts={"rotor": (50.0, 50.0)}),),
        forcing=(rotor,),
    )  # fmt: skip
    soft = machines.mount(k=1.0, lateral=1.0)
    for measure, factor in (("peak", 1.0), ("rms", math.sqrt(0.5))):
        limit = Displacement(at="P", direction="z", measure=measure, limit=1.0)
        expected = u1 * (1 / MASS + a * a / inertia) + u2 * abs(1 / MASS - a * a / inertia)
        assert both(brief, soft, limit) == pytest.approx(factor * expected, rel=1e-5)


def test_a_grade_is_split_between_the_planes() -> None:
    # C1: G 6.3 at 3000 rpm on 50 kg is 1002.68 g mm (ISO 21940-11:2016), 98.96 N.
    planes = ((-0.2, 0.0, 0.0), (0.2, 0.0, 0.0))
    stated = {"name": "rotor", "shaft": "rotor", "axis": "x", "positions": planes}
    rotor = TwoPlaneUnbalance(**stated, grade="G 6.3", rotor_mass="50 kg", grade_speed="3000 rpm")
    assert sum(rotor.unbalances()) == pytest.approx(1002.68e-6, rel=1e-5)
    assert rotor.assumed()
    shared = TwoPlaneUnbalance(
        **stated, grade="G 6.3", rotor_mass="50 kg", grade_speed="3000 rpm", shares=(0.7, 0.3)
    )
    assert shared.unbalances() == pytest.approx((0.7 * 1002.68e-6, 0.3 * 1002.68e-6), rel=1e-5)
    assert not shared.assumed()


def test_open_measured_record(tmp_path: Path) -> None:
    # D2: the K-NET record AKT013 E-W that ships with obspy: 100 Hz, 5900 samples, printed maximum 4.383 gal. A mass
    # on a very stiff mount follows the floor, so its peak is the record's own.
    obspy = pytest.importorskip("obspy")
    folder = Path(obspy.__file__).parent / "io" / "nied" / "tests" / "data" / "test.knet"
    trace = obspy.read(str(folder))[0]
    values = trace.data * trace.stats.calib
    time = np.arange(len(values)) / trace.stats.sampling_rate
    written(tmp_path, "time [s],acceleration [m/s^2]", [time, values])
    ground = record(tmp_path, "time", detrend="mean")
    stiff = machines.mount(k=MASS * (TWO_PI * 400.0) ** 2, loss=0.3)
    found = both(machines.one_axis(MASS, ground), stiff, ACCELERATION, rel=1e-3)
    assert found == pytest.approx(4.3833e-2, rel=0.01)
