"""One-third-octave limits from a study statement to the assessed and the batch value.

Ids are those of the project's table of checks; sources stand beside each.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

from detune.brief.allowable.band_limit import BandLimit
from detune.brief.brief import Brief
from detune.brief.condition import Condition
from detune.brief.forcing.band_base_motion import BandBaseMotion
from detune.brief.forcing.base import Forcing
from detune.brief.forcing.base_motion import BaseMotion
from detune.brief.forcing.harmonic_force import HarmonicForce
from detune.brief.forcing.line_spectrum import LineSpectrum
from detune.brief.forcing.random_base_motion import RandomBaseMotion
from detune.brief.forcing.shaft_orders import ShaftOrders
from detune.parts.kinds.mount import Mount
from detune.problem.build import build
from detune.response.assessment import MarginRow
from detune.response.designs import Designs
from response import machines

TWO_PI = 2.0 * math.pi
MASS = 10.0
# A mount so stiff that the mass follows the floor at every frequency a criterion covers.
STIFF = machines.mount(k=MASS * (TWO_PI * 1e5) ** 2, loss=0.1)


def row_of(brief: Brief, part: Mount, limit: BandLimit, rel: float = 1e-4) -> MarginRow:
    """The assessor's row, after making sure that the batch evaluation has the same value."""
    far = machines.far_limit()
    brief = brief.model_copy(update={"allowables": (far, limit)})
    (row,) = [row for row in machines.assessed(brief, part).margins if row.kind == "band-limit"]
    problem = build(brief, {"list": machines.catalog(part)})
    one = Designs(np.zeros((1, 1), dtype=np.intp), np.zeros(1, dtype=np.intp))
    margin = machines.batch_margins(problem, one)[(row.quantity, row.place, row.condition)][0]
    assert 1.0 / (1.0 + margin) == pytest.approx(row.value, rel=rel)
    assert row.margin == pytest.approx(1.0 / row.value - 1.0, rel=1e-9)
    return row


def curve(**changes: Any) -> BandLimit:
    return BandLimit(**{"at": "P", "direction": "z", **changes})


def tone(frequency: Any, rms: float, name: str = "tone", **changes: Any) -> BaseMotion:
    velocity = rms * math.sqrt(2.0)
    return BaseMotion(name=name, frequency=frequency, direction="z", velocity=velocity, **changes)


def followed(forcing: Forcing | tuple[Forcing, ...], limit: BandLimit) -> MarginRow:
    return row_of(machines.one_axis(MASS, forcing), STIFF, limit)


@pytest.mark.parametrize(
    ("criterion", "micrometres"),
    # C4: ASHRAE TC 2.6 table, IEST-RP-CC012: micro-inches a second, in um/s.
    [
        ("workshop", 812.8),
        ("office", 406.4),
        ("residential", 203.2),
        ("operating theatre", 101.6),
        ("VC-A", 50.8),
        ("VC-B", 25.4),
        ("VC-C", 12.7),
        ("VC-D", 6.35),
        ("VC-E", 3.175),
        ("VC-F", 1.5875),
        ("VC-G", 0.79375),
    ],
)
def test_c4_velocity_criteria(criterion: str, micrometres: float) -> None:
    # A rigid follower of a floor that moves at the criterion's plateau is at the limit, between 8 and 80 Hz.
    for frequency in (8.0, 31.5, 80.0):
        row = followed(tone(frequency, micrometres * 1e-6), curve(criterion=criterion))
        assert row.value == pytest.approx(1.0, rel=1e-6)
        assert row.frequency == pytest.approx(frequency)


def test_c5_below_eight_hertz() -> None:
    # C5: VC-A flat at 260 ug between 4 and 8 Hz: 101.45 um/s at 4 Hz; ISO lines at constant acceleration: velocity
    # times 8/f; ISO base 5 mm/s^2 at 8 Hz = 99.47 um/s (ISO 2631-2:1989; Gordon, SPIE 1619 (1991)).
    assert followed(tone(4.0, 101.45e-6), curve(criterion="VC-A")).value == pytest.approx(1.0, rel=1e-4)
    assert followed(tone(4.0, 2 * 812.8e-6), curve(criterion="workshop")).value == pytest.approx(
        1.0, rel=1e-6
    )
    base = curve(criterion="ISO 2631-2 base curve", multiplier=1.0)
    assert followed(tone(8.0, 99.47e-6), base).value == pytest.approx(1.0, rel=1e-4)
    four = curve(criterion="ISO 2631-2 base curve", multiplier=4.0)
    assert followed(tone(5.0, 4 * 5e-3 / (TWO_PI * 5.0)), four).value == pytest.approx(1.0, rel=1e-6)


def test_editions_differ_by_a_sixtieth() -> None:
    # C4: VC-A is 50.8 um/s in inches and commonly rounded to 50.
    row = followed(tone(20.0, 50e-6), curve(criterion="VC-A", edition="metric"))
    assert row.value == pytest.approx(1.0, rel=1e-6)
    assert followed(tone(20.0, 50e-6), curve(criterion="VC-A", edition="inch")).value == pytest.approx(
        50 / 50.8
    )


def test_lines_in_one_band_add_as_mean_squares() -> None:
    # IEC 61260-1: the 10 Hz band reaches from 8.913 to 11.220 Hz: 9 and 11 Hz lie in it, 12 Hz in the next.
    def lines(*frequencies: float) -> LineSpectrum:
        stated = [{"frequency": f, "velocity": 30e-6} for f in frequencies]
        return LineSpectrum(name="site", direction="z", measure="rms", lines=stated)

    mask = curve(centres=("10 Hz", "12.5 Hz"), velocity_rms=("100 um/s", "100 um/s"))
    assert followed(lines(9.0), mask).value == pytest.approx(0.3, rel=1e-6)
    assert followed(lines(9.0, 11.0), mask).value == pytest.approx(0.3 * math.sqrt(2.0), rel=1e-6)
    assert followed(lines(9.0, 12.0), mask).value == pytest.approx(0.3, rel=1e-6)
    # Lines of one frequency whose phases are unknown add linearly; a line outside every band is not judged.
    pair = (tone(10.0, 30e-6), tone(10.0, 30e-6, "other"))
    assert followed(pair, mask).value == pytest.approx(0.6, rel=1e-6)
    assert followed(lines(9.0, 40.0), mask).value == pytest.approx(0.3, rel=1e-6)


def test_known_phases_of_one_frequency_add_as_phasors() -> None:
    mask = curve(centres=("10 Hz",), velocity_rms=("100 um/s",))
    opposed = (tone(10.0, 30e-6, phase="0 deg"), tone(10.0, 20e-6, "other", phase="180 deg"))
    assert followed(opposed, mask).value == pytest.approx(0.1, rel=1e-6)


def test_noise_counts_with_its_band_rms() -> None:
    # A flat velocity density S over a band of relative width 0.230768 (C8) has the rms sqrt(S 0.230768 f).
    density = 1e-10
    noise = RandomBaseMotion(
        name="traffic",
        direction="z",
        duration=60.0,
        velocity_break_points=((1.0, density), (200.0, density)),
    )
    mask = curve(centres=("10 Hz", "20 Hz"), velocity_rms=("100 um/s", "100 um/s"))
    row = followed(noise, mask)
    wide = math.sqrt(density * 0.230768 * 1000.0 * 10 ** (-17 / 10))
    assert row.value == pytest.approx(wide / 100e-6, rel=1e-5)
    assert row.frequency == 20.0
    # A tone in the same band adds as a mean square.
    both = followed((noise, tone(20.0, 40e-6)), mask)
    assert both.value == pytest.approx(math.hypot(wide, 40e-6) / 100e-6, rel=1e-5)


def test_a_moving_speed_is_judged_in_every_band_it_passes() -> None:
    # A unit whirl of constant force on a soft mount: the velocity F/(m w) falls with frequency, so each band is
    # decided at its lower edge; orders 1 and 2 meet in a band only where one speed puts both there.
    soft = machines.mount(k=MASS * (TWO_PI * 0.05) ** 2, loss=0.05)
    orders = [{"order": 1.0, "force": (0.0, 0.0, 2.0)}]
    force = ShaftOrders(name="fan", shaft="rotor", position=(0, 0, 0), orders=orders)
    brief = machines.one_axis(MASS, force, shafts={"rotor": (5.0, 60.0)})
    mask = curve(centres=(10.0, 20.0, 40.0), velocity_rms=(1.0, 0.2, 0.02))
    found = row_of(brief, soft, mask)
    edge = 1000.0 * 10 ** (-14.5 / 10)  # lower edge of the 40 Hz band (39.81 Hz)
    assert found.value == pytest.approx(2.0 / (MASS * TWO_PI * edge) / math.sqrt(2.0) / 0.02, rel=1e-4)
    assert found.frequency == 40.0


def test_a_resonance_inside_a_band_is_found() -> None:
    # Base motion of constant velocity over a range: at resonance T = sqrt(1 + 1/eta^2) (Den Hartog; S9).
    eta, fn = 0.01, 22.0
    part = machines.mount(k=MASS * (TWO_PI * fn) ** 2, loss=eta)
    brief = machines.one_axis(MASS, tone((5.0, 100.0), 1e-6))
    mask = curve(centres=(10.0, 20.0, 25.0), velocity_rms=(1e-4, 1e-4, 1e-4))
    assert row_of(brief, part, mask).value == pytest.approx(math.sqrt(1.0 + 1.0 / eta**2) * 1e-2, rel=1e-4)


def test_band_values_of_a_site_read_as_tones_or_noise() -> None:
    # Read as tones each band value comes through a resonance in its band whole; as noise by its share.
    centres, values = (16.0, 20.0, 25.0), (1e-5, 2e-5, 1e-5)
    eta = 0.02
    part = machines.mount(k=MASS * (TWO_PI * 20.0) ** 2, loss=eta)
    mask = curve(centres=centres, velocity_rms=(1e-3, 1e-3, 1e-3))

    def site(**changes: Any) -> BandBaseMotion:
        stated = {"name": "site", "direction": "z", "centres": centres, "velocity_rms": values}
        return BandBaseMotion(**{**stated, **changes})

    tones = row_of(machines.one_axis(MASS, site(read_as="tones")), part, mask)
    assert tones.value == pytest.approx(2e-5 * math.sqrt(1.0 + 1.0 / eta**2) / 1e-3, rel=1e-4)
    assert row_of(machines.one_axis(MASS, site()), part, mask).value == tones.value
    noise = row_of(machines.one_axis(MASS, site(read_as="noise", duration=60.0)), part, mask)
    # White over a narrow band: the mean square of a light mode in velocity is pi/2 f/eta S (Miles, for velocity).
    density = (2e-5) ** 2 / (0.230768 * 1000.0 * 10 ** (-17 / 10))
    expected = math.sqrt(0.5 * math.pi * 20.0 / eta * density) / 1e-3
    assert noise.value == pytest.approx(expected, rel=0.03)
    assert noise.value < tones.value


@pytest.mark.parametrize("seed", range(3))
def test_six_axes_batch_equals_assessor(seed: int) -> None:
    brief, mounts = machines.random_machine(seed)
    random = np.random.default_rng(seed)
    noise = RandomBaseMotion(
        name="traffic", direction=tuple(random.normal(size=3)), duration=60.0,
        break_points=((1.0, 1e-6), (6.0, 2e-4), (60.0, 2e-4), (200.0, 1e-6)),
    )  # fmt: skip
    hum = HarmonicForce(name="hum 2", frequency=25.0, position=(0.1, 0.0, 0.2), force=(3.0, 0.0, 8.0))
    brief = brief.model_copy(
        update={
            "forcing": (*brief.forcing, noise, hum),
            "allowables": (
                machines.far_limit(),
                curve(criterion="VC-A", direction=tuple(random.normal(size=3))),
                curve(criterion="office", at="floor"),
            ),
        }
    )
    problem = build(brief, {"list": machines.catalog(*mounts)})
    pairs = zip(problem.candidates, mounts, strict=True)
    parts = np.array([[[m.part for m in group].index(mount.part) for group, mount in pairs]])
    margins = machines.batch_margins(problem, Designs(parts, np.zeros(1, dtype=np.intp)))
    rows = [row for row in machines.assessed(brief, *mounts).margins if row.kind == "band-limit"]
    assert len(rows) == 2
    for row in rows:
        other = float(margins[(row.quantity, row.place, row.condition)][0])
        assert 1.0 + other == pytest.approx(1.0 + row.margin, rel=1e-3), row.label


def test_a_passage_counts_as_the_steady_state_in_its_bands() -> None:
    force = machines.unbalance(1e-4)
    part = machines.mount(k=MASS * (TWO_PI * 20.0) ** 2, loss=0.05)
    steady = machines.one_axis(MASS, force, shafts={"rotor": (5.0, 40.0)})
    limit = curve(criterion="office")
    times = {"steady": False, "shafts": {"rotor": (5.0, 40.0)}, "run_up": {"rotor": 2.0}}
    passing = machines.one_axis(MASS, force, conditions=(Condition(name="running", **times),))
    assert row_of(passing, part, limit).value == row_of(steady, part, limit).value
