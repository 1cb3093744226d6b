"""Parts whose stiffness depends on amplitude, and damping of unknown kind, against scalar roots and closed forms."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import brentq

import detune.response.amplitude as batch_amplitude
import detune.response.direct_amplitude as direct_amplitude
from detune.brief.allowable.acceleration import Acceleration
from detune.brief.allowable.displacement import Displacement
from detune.brief.allowable.separation import Separation
from detune.brief.allowable.transmissibility import Transmissibility
from detune.brief.allowable.transmitted_force import TransmittedForce
from detune.brief.forcing.base_motion import BaseMotion
from detune.brief.forcing.random_force import RandomForce
from detune.parts.kinds.mount import Mount
from detune.parts.laws import AmplitudeTable, UnknownDamping
from detune.physics.fixed_point import fixed_points
from detune.problem.build import build
from response import law_machines

machines = law_machines.machines

NIGHTLY = pytest.mark.nightly
TWO_PI = 2.0 * math.pi
MASS, FN = 40.0, 8.0
K = MASS * (TWO_PI * FN) ** 2
TABLE = AmplitudeTable(
    amplitude=(1e-5, 1e-4, 1e-3, 5e-3),
    stiffness_ratio=(1.2, 1.0, 0.7, 0.5),
    loss_factor=(0.05, 0.1, 0.2, 0.25),
    file="amplitude.csv",
)
FOUND = "at the amplitude it produces itself, by iteration"


def part(table: AmplitudeTable = TABLE) -> Mount:
    return replace(machines.mount(k=K), amplitude_table=table)


def own(amplitude: float, frequency: float, force: float, table: AmplitudeTable = TABLE) -> float:
    """Deflection of a mass on the mount as it is at an amplitude, under a force at its centre."""
    ratio = np.interp(amplitude, table.amplitude, table.stiffness_ratio)
    eta = np.interp(amplitude, table.amplitude, table.loss_factor)
    stiffness = K * ratio * (1.0 + 1j * eta)
    return float(force / abs(stiffness - MASS * (TWO_PI * frequency) ** 2))


def roots(frequency: float, force: float, table: AmplitudeTable = TABLE) -> list[float]:
    """Every amplitude that reproduces itself, by scipy.optimize.brentq between changes of sign."""
    grid = np.geomspace(1e-8, 1e-1, 4000)
    missing = [own(a, frequency, force, table) - a for a in grid]
    return [
        brentq(lambda a: own(a, frequency, force, table) - a, grid[i], grid[i + 1], xtol=1e-16)
        for i in range(len(grid) - 1)
        if missing[i] * missing[i + 1] < 0.0
    ]


@pytest.mark.parametrize("force", [0.3, 30.0, 250.0])
@pytest.mark.parametrize("frequency", [4.0, 7.0, 9.0, 25.0])
def test_one_tone_against_a_scalar_root(frequency: float, force: float) -> None:
    brief = machines.one_axis(MASS, machines.force(frequency, force))
    found = law_machines.agreed(brief, part(), rel=1e-6)
    expected = max(roots(frequency, force))
    (row,) = [row for row in found.margins if row.kind == "displacement"]
    assert row.value == pytest.approx(expected, rel=1e-6)
    assert row.note == FOUND and FOUND in row.label and row.quantity == "displacement z, peak"
    # Statics and modes are those of the listed stiffness.
    assert found.modes[0].frequency == pytest.approx(FN, rel=1e-9)
    assert all(row.note == "" for row in found.margins if row.condition == "at rest")


def test_two_answers_take_the_larger() -> None:
    # A strongly softening, lightly damped mount just below its natural frequency: a small and a large vibration
    # both reproduce themselves (the fold of a resonance curve that leans over).
    table = replace(
        TABLE,
        amplitude=(1e-5, 2e-4, 1e-3, 5e-3),
        stiffness_ratio=(1.0, 1.0, 0.5, 0.45),
        loss_factor=(0.02,) * 4,
    )
    force, frequency = 8.0, 6.0
    several = roots(frequency, force, table)
    assert len(several) == 3
    assert max(several) > 3.0 * min(several)
    brief = machines.one_axis(MASS, machines.force(frequency, force))
    found = law_machines.agreed(brief, part(table), rel=1e-6)
    assert machines.value(found, "displacement") == pytest.approx(max(several), rel=1e-6)
    (row,) = [row for row in found.margins if row.kind == "displacement"]
    assert row.note.startswith("at the worst of several amplitudes")


def test_each_speed_has_its_own_amplitude() -> None:
    # Over a range, the force into the floor at high speed is that of the small amplitude there, not of the large
    # one at resonance; dense search over brentq's roots.
    force = 60.0
    through = TransmittedForce(through="floor", direction="z", measure="peak", limit=1e6)
    acceleration = Acceleration(at="P", direction="z", measure="peak", limit=1e6)
    brief = machines.one_axis(MASS, machines.force((4.0, 60.0), force), (through, acceleration))
    found = law_machines.agreed(brief, part())
    grid = np.linspace(4.0, 60.0, 3001)
    moved = np.array([max(roots_fast(f, force)) for f in grid])
    assert machines.value(found, "displacement") == pytest.approx(moved.max(), rel=1e-3)
    fast = moved * (TWO_PI * grid) ** 2
    assert machines.value(found, "acceleration") == pytest.approx(fast.max(), rel=1e-3)
    ratio = np.interp(moved, TABLE.amplitude, TABLE.stiffness_ratio)
    eta = np.interp(moved, TABLE.amplitude, TABLE.loss_factor)
    passed = K * ratio * np.abs(1.0 + 1j * eta) * moved
    assert machines.value(found, "transmitted-force") == pytest.approx(passed.max(), rel=1e-3)


def roots_fast(frequency: float, force: float) -> list[float]:
    grid = np.geomspace(1e-7, 2e-2, 160)
    ratio = np.interp(grid, TABLE.amplitude, TABLE.stiffness_ratio)
    eta = np.interp(grid, TABLE.amplitude, TABLE.loss_factor)
    missing = force / np.abs(K * ratio * (1.0 + 1j * eta) - MASS * (TWO_PI * frequency) ** 2) - grid
    return [
        brentq(lambda a: own(a, frequency, force) - a, grid[i], grid[i + 1], xtol=1e-15)
        for i in np.flatnonzero(missing[:-1] * missing[1:] < 0.0)
    ]


def test_two_speeds_work_at_their_common_amplitude() -> None:
    # Two independent tones: the parts work at the sum of both deflections, a = x1(a) + x2(a).
    hum = machines.force(7.0, 20.0)
    buzz = machines.force(19.0, 300.0, name="buzz")
    brief = machines.one_axis(MASS, (hum, buzz))
    found = law_machines.agreed(brief, part())
    expected = brentq(lambda a: own(a, 7.0, 20.0) + own(a, 19.0, 300.0) - a, 1e-7, 1e-1)
    assert machines.value(found, "displacement") == pytest.approx(expected, rel=1e-4)


def test_noise_works_at_its_expected_extreme() -> None:
    # White noise on a mass: the rms is sqrt(S wn/(4 eta k^2)) of the mount as it is at the amplitude, which is the
    # mean extreme of the deflection (Davenport 1964; variance by Crandall and Mark 1963, a loss factor as twice the
    # damping ratio, which for a light one errs by little).
    table = replace(TABLE, loss_factor=(0.02, 0.02, 0.02, 0.02))
    density, low, high = 30.0, 0.05, 400.0
    jet = RandomForce(
        name="jet",
        position=(0, 0, 0),
        direction="z",
        duration=60.0,
        break_points=((low, density), (high, density)),
    )
    found = law_machines.agreed(machines.one_axis(MASS, jet), part(table))

    def extreme(a: float) -> float:
        k = K * np.interp(a, table.amplitude, table.stiffness_ratio)
        rms = math.sqrt(density * math.sqrt(k / MASS) / (4.0 * 0.02 * k**2))
        u = math.sqrt(2.0 * math.log(2.0 * math.sqrt(k / MASS) / TWO_PI * 60.0))
        return rms * (u + 0.5772157 / u)

    expected = brentq(lambda a: extreme(a) - a, 1e-7, 1e-1)
    assert machines.value(found, "displacement") == pytest.approx(expected, rel=5e-3)


def test_of_two_amplitudes_under_noise_the_larger_counts() -> None:
    # Noise from 5.6 to 5.9 Hz: stiff at small amplitude the mount stays above it, soft at large amplitude it resonates.
    # Three amplitudes reproduce themselves; the middle one is no end. Variance by the trapezoidal rule, mean extreme by
    # Davenport (1964).
    table = replace(TABLE, loss_factor=(0.03, 0.03, 0.04, 0.05))
    density, low, high, lasting = 100.0, 5.6, 5.9, 600.0
    jet = RandomForce(
        name="jet",
        position=(0, 0, 0),
        direction="z",
        duration=lasting,
        break_points=((low, density), (high, density)),
    )

    def missing(a: float) -> float:
        ratio, eta = (np.interp(a, table.amplitude, y) for y in (table.stiffness_ratio, table.loss_factor))
        f = np.linspace(low, high, 4001)
        power = density / np.abs(K * ratio * (1.0 + 1j * eta) - MASS * (TWO_PI * f) ** 2) ** 2
        variance, rate = np.trapezoid(power, f), np.trapezoid(power * f**2, f)
        u = math.sqrt(2.0 * math.log(2.0 * math.sqrt(rate / variance) * lasting))
        return math.sqrt(variance) * (u + 0.5772157 / u) - a

    small, large = brentq(missing, 1e-3, 2e-3), brentq(missing, 5e-3, 1e-2)
    assert missing(3e-3) < 0.0 < missing(3.4e-3) and large > 4.0 * small
    found = law_machines.agreed(machines.one_axis(MASS, jet), part(table), rel=1e-3)
    (row,) = [row for row in found.margins if row.kind == "displacement"]
    assert row.value == pytest.approx(large, rel=1e-3)
    assert row.note.startswith("at the worst of several amplitudes")


def test_a_ratio_to_a_unit_load_is_taken_at_no_amplitude_and_at_the_one_it_works_at() -> None:
    # T at 25 Hz: the stiffer, small amplitude passes more on, and 30 N leave it there; at resonance the other way.
    ratio = Transmissibility(of="force", direction="z", limit=1e3)
    brief = machines.one_axis(MASS, machines.force(25.0, 2000.0), (ratio,))
    found = law_machines.agreed(brief, part(), rel=1e-6)

    def passed(a: float) -> float:
        stiffness = K * np.interp(a, TABLE.amplitude, TABLE.stiffness_ratio)
        lossy = stiffness * (1.0 + 1j * np.interp(a, TABLE.amplitude, TABLE.loss_factor))
        return float(abs(lossy / (lossy - MASS * (TWO_PI * 25.0) ** 2)))

    expected = max(passed(0.0), passed(max(roots(25.0, 2000.0))))
    assert expected == passed(0.0)
    assert machines.value(found, "transmissibility") == pytest.approx(expected, rel=1e-6)


def test_no_amplitude_found_fails_and_says_so(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(batch_amplitude, "fixed_points", lambda step, start, *_: fixed_points(step, start, 1))
    monkeypatch.setattr(direct_amplitude, "SHARES", ((1.0, 1),))
    brief = machines.one_axis(MASS, machines.force(9.0, 100.0))
    found = law_machines.agreed(brief, part(), rel=1e-6)
    (row,) = [row for row in found.margins if row.kind == "displacement"]
    assert row.value == math.inf and row.margin == -1.0 and not found.meets
    assert "no amplitude was found that reproduces itself" in row.label


SLOW = [pytest.param(kind, marks=NIGHTLY) for kind in ("base motion", "noise", "pulse", "passage")]


@pytest.mark.parametrize("kind", ["one frequency", *SLOW])
def test_six_axes_batch_equals_assessor(kind: str) -> None:
    brief, (one, other) = machines.random_machine(3)
    limits = law_machines.LIMITS[1:] if kind == "pulse" else law_machines.LIMITS
    road = BaseMotion(name="road", frequency=14.0, direction=(0.3, -0.5, 1.0), velocity=4e-3)
    update = {
        "gravity_stiffness": True,
        "forcing": (road,) if kind == "one frequency" else law_machines.forcings(3)[kind],
        "conditions": law_machines.conditions(kind),
        "allowables": limits,
    }
    found = law_machines.agreed(brief.model_copy(update=update), law_machines.softening(one), other)
    assert all(row.note == FOUND for row in found.margins if row.condition == "running")


def test_amplitudes_outside_what_the_list_holds_for_are_told() -> None:
    small = machines.one_axis(MASS, machines.force(9.0, 1e-3))
    (note,) = machines.assessed(small, part()).notes
    assert note.startswith("S, running: m: a dynamic deflection of") and "is below 10 um" in note.replace(
        "\u00b5", "u"
    ), note
    stated = replace(machines.mount(k=K, loss=0.1), amplitude_min=1e-6, amplitude_max=1e-4)
    brief = machines.one_axis(MASS, machines.force(9.0, 100.0))
    (note,) = machines.assessed(brief, stated).notes
    assert "the greatest for which its figures hold" in note
    assert machines.assessed(brief, replace(stated, amplitude_max=1.0)).notes == ()


def test_the_problem_says_what_is_approximated() -> None:
    brief = machines.one_axis(MASS, machines.force(9.0, 100.0))
    problem = build(brief, {"list": machines.catalog(part(), unknown("u"))})
    assert any("stiffness over amplitude of m" in note and "by iteration" in note for note in problem.assumed)
    assert any(
        "damping of unknown kind (u)" in note and "the worse counts" in note for note in problem.assumed
    )


ETA = 0.1


def unknown(name: str = "m") -> Mount:
    """Loss factor or dashpot, nobody knows: both agree at the natural frequency under the rated load."""
    c = ETA * math.sqrt(K * MASS)
    readings = UnknownDamping(loss_factor=(None, None, ETA), viscous=(None, None, c))
    return replace(
        machines.mount(name, K, loss=ETA),
        load_rated=MASS * 9.80665,
        damping_kind="unknown",
        damping_unknown=readings,
    )


def test_s9_unknown_damping_well_above_resonance_is_judged_as_viscous() -> None:
    # S9: at ten times the natural frequency a loss factor of 0.1 passes 0.010151 on, a damping ratio of 0.05
    # 0.014284; further above the viscous one passes ever more (DESIGN 4: twofold well above resonance).
    ratio = Transmissibility(of="force", direction="z", limit=1.0)
    found = law_machines.agreed(
        machines.one_axis(MASS, machines.force(10.0 * FN), (ratio,)), unknown(), rel=1e-6
    )
    (row,) = [row for row in found.margins if row.kind == "transmissibility"]
    assert row.value == pytest.approx(0.014284, abs=5e-7)
    assert row.note == "damping read as viscous"
    assert row.label.startswith("transmissibility, force ratio, z (damping read as viscous)")
    r = 17.436
    found = law_machines.agreed(
        machines.one_axis(MASS, machines.force(r * FN), (ratio,)), unknown(), rel=1e-6
    )
    (row,) = [row for row in found.margins if row.kind == "transmissibility"]
    as_loss_factor = math.sqrt((1.0 + ETA**2) / ((1.0 - r**2) ** 2 + ETA**2))
    assert row.value / as_loss_factor == pytest.approx(2.0, rel=2e-3)


def test_unknown_damping_just_above_resonance_is_judged_as_a_loss_factor() -> None:
    # For r > 1 the dashpot damps the motion more, c w > eta k: the loss factor moves further. X k/F in closed form.
    r = 1.08
    found = law_machines.agreed(machines.one_axis(MASS, machines.force(r * FN)), unknown(), rel=1e-6)
    (row,) = [row for row in found.margins if row.kind == "displacement"]
    assert row.value * K == pytest.approx(1.0 / math.hypot(1.0 - r**2, ETA), rel=1e-9)
    assert row.note == "damping read as loss factor"


def test_a_limit_between_the_readings_is_not_met() -> None:
    ratio = Transmissibility(of="force", direction="z", limit=0.012)
    brief = machines.one_axis(MASS, machines.force(10.0 * FN), (ratio,))
    known = replace(unknown(), damping_unknown=None)
    assert machines.assessed(brief, known).meets
    assert not machines.assessed(brief, unknown()).meets
    rows = law_machines.batch_rows(law_machines.problem_of(brief, unknown()))
    (margin,) = [m for key, m in rows.items() if key[0] == "transmissibility"]
    assert margin == pytest.approx(0.012 / 0.014284 - 1.0, abs=1e-4)


def test_a_mode_is_exempt_only_where_both_readings_damp_it() -> None:
    # Under twice its rated load the same dashpot is a ratio sqrt(2) smaller than half the loss factor.
    exempt = Separation(limit=0.3, exempt_amplification=12.0)
    at_rated = machines.one_axis(MASS, machines.force(FN), (exempt,))
    assert machines.value(law_machines.agreed(at_rated, unknown()), "separation") == math.inf
    heavy = machines.one_axis(2.0 * MASS, machines.force(FN / math.sqrt(2.0)), (exempt,))
    found = law_machines.agreed(heavy, unknown())
    (row,) = [row for row in found.margins if row.kind == "separation"]
    assert row.value == pytest.approx(0.0, abs=1e-9) and row.note == "damping read as viscous"
    assert found.modes[0].amplification == pytest.approx(math.sqrt(2.0) / ETA, rel=1e-9)
    assert not found.modes[0].exempt


@pytest.mark.parametrize("kind", ["tones", *SLOW[1:3]])
def test_unknown_damping_in_six_axes(kind: str) -> None:
    brief, (one, other) = machines.random_machine(4)
    if kind != "tones":
        update = {"forcing": law_machines.forcings(4)[kind], "conditions": law_machines.conditions(kind)}
        brief = brief.model_copy(update=update)
    limits = law_machines.LIMITS[1:] if kind == "pulse" else law_machines.LIMITS
    brief = brief.model_copy(update={"gravity_stiffness": True, "allowables": limits})
    found = law_machines.agreed(brief, law_machines.unknown(one), other)
    worst = {}
    for reading in ("loss_factor", "viscous"):
        known = replace(
            one,
            loss_factor=one.loss_factor if reading == "loss_factor" else (0.0,) * 3,
            viscous=(0.0,) * 3
            if reading == "loss_factor"
            else law_machines.unknown(one).damping_unknown.viscous,
        )
        for row in machines.assessed(brief, known, other).margins:
            key = (row.quantity, row.place, row.condition)
            worst[key] = min(row.margin, worst.get(key, np.inf))
    for row in found.margins:
        assert row.margin == pytest.approx(worst[row.quantity, row.place, row.condition], rel=1e-9), row.label


def test_limits_on_displacement_hold_under_both_readings_in_every_condition() -> None:
    limit = Displacement(at="P", direction="z", measure="peak", limit=1.0)
    found = machines.assessed(machines.one_axis(MASS, machines.force(FN), (limit,)), unknown())
    # At the resonance under the rated load the readings agree: nothing is told of them.
    rows = [row for row in found.margins if row.kind == "displacement"]
    assert {round(row.value * K * ETA, 6) for row in rows} == {1.0}


def test_agreeing_readings_of_unknown_damping_keep_what_else_is_told() -> None:
    # Far below resonance neither damping counts: both readings give one value, and the note on the noise stays.
    jet = RandomForce(
        name="jet",
        position=(0, 0, 0),
        direction="z",
        duration=60.0,
        break_points=((0.01, 1.0), (0.011, 1.0)),
    )
    brief = machines.one_axis(MASS, jet)
    found = machines.assessed(brief, law_machines.unknown(machines.mount(k=K, loss=0.1)))
    (row,) = [row for row in found.margins if row.kind == "displacement"]
    assert "random part: expected extreme in 60 s" in row.note
    from detune.response.row_notes import worse_reading

    alike = [("damping read as viscous", [row]), ("damping read as loss factor", [row])]
    assert worse_reading(alike) == [row]
    other = replace(row, value=2.0 * row.value, margin=row.margin / 2.0)
    (worse,) = worse_reading([alike[0], ("damping read as loss factor", [other])])
    assert worse.note == f"{row.note}; damping read as loss factor"
